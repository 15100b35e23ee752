"""Cells per unstable wavelength: the quality factors Q along theta and phi, and a word for them."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from fieldviz.derived.azimuth_sums import (
    MIDPLANE,
    AzimuthMoments,
    azimuth_cells,
    azimuth_moments,
)
from fieldviz.derived.plasma import net_vertical_field
from fieldviz.wedge.geometry import cell_volumes, centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["QualityFactor", "quality_averages", "quality_factor", "quality_word"]

# Noble, Krolik & Hawley 2010; Hawley, Guan & Krolik 2011; Sano et al. 2004 (from memory).
RESOLVED = {"theta": 10.0, "phi": 20.0}
UNRESOLVED = 6.0
PRODUCT = 250.0  # the upper end of what is quoted


@dataclass(frozen=True, eq=False)
class QualityFactor:
    """Cells per unstable wavelength along theta or phi.

    Attributes
    ----------
    direction : str
        "theta" or "phi".
    actual : (n,) array
        From sqrt(<B_i^2>/<rho>) of the band, by radius.
    net : (n,) array
        theta: from net B_z and the density at the midplane. phi: from the azimuth mean of B_phi,
        root mean square over the band.
    threshold : float
    share_resolved : float
        Share of the band's volume with Q above the threshold, cell by cell.
    """

    direction: str
    actual: Array
    net: Array
    threshold: float
    share_resolved: float

    @property
    def median(self) -> float:
        """Median of `actual` over the radii that have one."""
        good = np.isfinite(self.actual)
        return float(np.median(self.actual[good])) if good.any() else float("nan")


def quality_word(q_theta: float, q_phi: float | None) -> str:
    """Resolved, marginal or unresolved, in a word.

    Parameters
    ----------
    q_theta : float
    q_phi : float or None
        None where there is one cell in azimuth: then q_theta decides alone.

    Returns
    -------
    str
        Unresolved below 6 in either; resolved from 10 in theta and 20 in phi, or where the product
        reaches 250 (one may partly make up for the other); empty for NaN.
    """
    known = [q_theta] if q_phi is None else [q_theta, q_phi]
    if not np.all(np.isfinite(known)):
        return ""
    if min(known) < UNRESOLVED:
        return "unresolved"
    both = q_theta >= RESOLVED["theta"] and (q_phi is None or q_phi >= RESOLVED["phi"])
    return "resolved" if both or np.prod(known) >= PRODUCT else "marginal"


def quality_averages(snapshot: Snapshot) -> AzimuthMoments:
    """Go over the blocks for everything Q needs and the snapshot has."""
    fields = [n for n in ("magnetic_theta", "magnetic_phi") if snapshot.has(n)]
    gas = ["density", *(["pressure"] if snapshot.has("pressure") else [])]
    moments = azimuth_moments(snapshot, [*gas, *fields], pairs=[(name, name) for name in fields])
    return replace(moments, means={**moments.means, **_mean_lengths(snapshot, moments)})


def _mean_lengths(snapshot: Snapshot, moments: AzimuthMoments) -> dict[str, Array]:
    """Cell lengths along theta and phi averaged along azimuth; they need no field."""
    grid, mesh = snapshot.grid, moments.mesh
    found = {name: np.zeros(mesh.row_start.shape) for name in ("length_theta", "length_phi")}
    for block in range(grid.n_blocks):
        rows, columns, place = mesh.block_cells(block)
        r, theta, _ = grid.cell_centres(block)
        steps = np.diff(grid.phi_edges[block])
        along_theta = steps.sum() * r * np.diff(grid.theta_edges[block])[:, None]
        along_phi = np.sum(steps**2) * r * np.sin(theta)[:, None]
        for table, length in zip(found.values(), (along_theta, along_phi), strict=True):
            table[place] += length[np.ix_(rows, columns)] / grid.period
    return found


def quality_factor(
    snapshot: Snapshot, moments: AzimuthMoments, name: str, angle: Array
) -> QualityFactor | None:
    """Q along one direction.

    Parameters
    ----------
    snapshot : Snapshot
    moments : AzimuthMoments
        From `quality_averages`.
    name : str
        "theta" or "phi".
    angle : (n_r,) array
        Half height of the band for each column, radians.

    Returns
    -------
    QualityFactor or None
        None without that component of the field, and along phi with one cell in azimuth.

    Notes
    -----
    Q_i = 2 pi v_A,i/(Omega cell length) with Omega = sqrt(GM/r^3) for the profiles and
    sqrt(GM/R^3) for the share of cells.
    """
    field = f"magnetic_{name}"
    if field not in moments.means or (name == "phi" and azimuth_cells(snapshot.grid) == 1):
        return None
    mesh = moments.mesh
    shares = mesh.band_share(angle) * mesh.volumes

    def band_sum(table: Array) -> Array:
        return mesh.summed((np.where(shares > 0, table, 0.0) * shares).sum(0))

    r = centres(mesh.profile_edges)
    period = 2 * np.pi * np.sqrt(r**3 / snapshot.gm)
    density = band_sum(moments.means["density"])
    with np.errstate(invalid="ignore", divide="ignore"):
        length = band_sum(moments.means[f"length_{name}"]) / mesh.summed(shares.sum(0))
        per_speed = period / length / np.sqrt(snapshot.mu0)
        actual = per_speed * np.sqrt(band_sum(moments.mean_square(field)) / density)
        if name == "phi":
            net = per_speed * np.sqrt(band_sum(moments.means[field] ** 2) / density)
        else:
            net = per_speed * _net_over_root_density(snapshot, moments)
            # At the midplane the cells may be of another size than in the band.
            net = net * length / mesh.at_midplane(moments.means["length_theta"])
    share = _share_above(snapshot, moments, name, angle)
    return QualityFactor(name, actual, net, RESOLVED[name], share)


def _net_over_root_density(snapshot: Snapshot, moments: AzimuthMoments) -> Array:
    field = net_vertical_field(snapshot, moments)
    if field is None:
        return np.full(len(moments.mesh.columns), np.nan)
    return np.asarray(np.abs(field) / np.sqrt(moments.mesh.at_midplane(moments.means["density"])))


def _share_above(snapshot: Snapshot, moments: AzimuthMoments, name: str, angle: Array) -> float:
    """Share of the band's volume whose cells have Q above the threshold; bad cells left out."""
    from fieldviz.derived._survey_kernels import quality_share

    grid, mesh, unit = snapshot.grid, moments.mesh, np.array([0.0, 1.0])
    sums = np.zeros(2)
    for block in range(grid.n_blocks):
        r, theta, _ = grid.cell_centres(block)
        inside = np.abs(theta[:, None] - MIDPLANE) < np.interp(r, mesh.r, angle)
        if not inside.any():
            continue
        steps = np.diff(grid.phi_edges[block])
        R = r * np.sin(theta)[:, None]
        turn = 2 * np.pi * np.sqrt(R**3 / (snapshot.gm * snapshot.mu0))
        if name == "theta":
            length, per_step = r * np.diff(grid.theta_edges[block])[:, None], np.ones(len(steps))
        else:
            length, per_step = R, 1 / steps
        found = np.empty((len(steps), 2))
        quality_share(
            snapshot.cell_block(f"magnetic_{name}", block), snapshot.cell_block("density", block),
            inside, turn / length, per_step, RESOLVED[name], steps,
            cell_volumes(*grid.edges(block)[:2], unit)[0], found,
        )  # fmt: skip
        sums += found.sum(0)
    total, above = sums
    return float(above / total) if total else float("nan")
