"""What field scores compare: azimuth means on one mesh, their weights, and formulas for cells."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import MeridionalMesh, azimuth_moments
from fieldviz.derived.current_density import current_density
from fieldviz.errors import FieldvizError
from fieldviz.symmetry.mirror import MIRROR_SIGNS, Formula, TableMirror
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["REGIONS", "WEIGHTS", "MeanTables", "log_even_mean", "mean_tables", "weights_of"]

REGIONS = ("wind", "disc", "all")
WEIGHTS = ("wind", "volume")
SPLIT = 2.0  # scale heights from the midplane at which the wind begins and the disc ends
_MOMENTUM = "momentum"


@dataclass(frozen=True, eq=False)
class MeanTables:
    """Azimuth means on the meridional mesh, tables (n_theta, n_r).

    Attributes
    ----------
    mesh : MeridionalMesh
    means : dict of name to table
        Of every quantity that is scored; density as it is.
    momentum : table
        |rho v_p|.
    formulas : dict of name to function
        The same quantities in cells of a block; density as ln(rho).
    band : (n_r,) int array
        Band of each column by its middle; -1 outside.
    n_bands : int
    h : float
    reach : float
        Angle up to which both sides have data.
    notes : tuple of str
    """

    mesh: MeridionalMesh
    means: dict[str, Array]
    momentum: Array
    formulas: dict[str, Formula]
    band: Array
    n_bands: int
    h: float
    reach: float
    notes: tuple[str, ...]

    def in_bands(self, table: Array) -> Array:
        """Sum over rows, and over the columns of each band; NaN counts as zero."""
        per_column = np.nansum(table, axis=0)
        used = self.band >= 0
        return np.bincount(self.band[used], per_column[used], minlength=self.n_bands)


def mean_tables(
    snapshot: Snapshot, h: float, reach: float, band_edges: Array, *, current: bool = False
) -> MeanTables:
    """Average along azimuth, block by block.

    Parameters
    ----------
    snapshot : Snapshot
        Needs density and velocity; components of the field where it has them.
    h : float
        H/R.
    reach : float
        Angle up to which both sides have data.
    band_edges : (n_bands + 1,) array
    current : bool
        The current density as well; it is worked out for the whole snapshot at once.

    Returns
    -------
    MeanTables
    """
    snapshot.require("score the symmetry of the fields", "density", *VELOCITY)
    names = ["density", *VELOCITY, *(name for name in MAGNETIC if snapshot.has(name))]
    formulas: dict[str, Formula] = {name: _cells_of(name) for name in names}
    formulas["velocity_phi"] = _beyond_kepler
    if current:
        found = current_density(snapshot)
        for axis in ("r", "theta", "phi"):
            formulas[f"current_{axis}"] = _part_of(getattr(found, axis))
    scored = tuple(name for name in MIRROR_SIGNS if name in formulas)
    moments = azimuth_moments(
        snapshot, volume=(*scored, _MOMENTUM), formulas={**formulas, _MOMENTUM: _momentum}
    )
    mesh = moments.mesh
    band = np.searchsorted(band_edges, mesh.r, side="right") - 1
    band[(band < 0) | (band >= len(band_edges) - 1)] = -1
    return MeanTables(
        mesh,
        {name: moments.means[name] for name in scored},
        moments.means[_MOMENTUM],
        {**{name: formulas[name] for name in scored}, "density": _log_density},
        band,
        len(band_edges) - 1,
        h,
        reach,
        moments.notes,
    )


def weights_of(tables: MeanTables, mirror: TableMirror, weight: str, region: str) -> Array:
    """Weight times volume of every cell of the mesh, zero where it is not compared.

    Parameters
    ----------
    tables : MeanTables
    mirror : TableMirror
    weight : str
        "wind": |rho v_p|, the mean of both sides. "volume": none.
    region : str
        "wind": beyond 2 H from the centre of the mirror. "disc": within. "all".

    Returns
    -------
    (n_theta, n_r) array
    """
    if weight not in WEIGHTS or region not in REGIONS:
        raise FieldvizError(
            f"Cannot score the fields: expected a weight of {' or '.join(WEIGHTS)} and a region of "
            f"{', '.join(REGIONS)}, got '{weight}' and '{region}'."
        )
    value = np.ones_like(tables.momentum)
    if weight == "wind":
        value = 0.5 * (tables.momentum + mirror(tables.momentum))
    split = min(SPLIT * tables.h, tables.reach)
    low, high = {"wind": (split, tables.reach), "disc": (0.0, split), "all": (0.0, tables.reach)}[
        region
    ]
    share = share_within(tables.mesh.theta_edges, mirror.centre, high)
    share -= share_within(tables.mesh.theta_edges, mirror.centre, low)
    there = np.isfinite(mirror(tables.momentum)) & np.isfinite(value) & (tables.band >= 0)
    return np.asarray(np.where(there, value * share * tables.mesh.volumes, 0.0))


def share_within(theta_edges: Array, centre: Array, angle: float) -> Array:
    """Share of each cell's volume within an angle of the centre, (n_theta, n_r)."""
    cosine = np.cos(theta_edges)[:, None]
    within = np.clip(cosine, np.cos(centre + angle), np.cos(centre - angle))
    share = -np.diff(within, axis=0) / -np.diff(cosine, axis=0)
    return np.asarray(np.clip(share, 0.0, 1.0))


def log_even_mean(tables: MeanTables, mirror: TableMirror, weights: Array) -> Array:
    """Mean of ln(rho) over both sides and each band at every height, (n_theta, n_r)."""
    log = np.log(tables.means["density"])  # only positive densities were averaged
    both = 0.5 * (log + mirror(log))
    used = np.where(np.isfinite(both), weights, 0.0)
    result = np.full(both.shape, np.nan)
    for band in range(tables.n_bands):
        mine = tables.band == band
        total = used[:, mine].sum(1)
        with np.errstate(invalid="ignore", divide="ignore"):
            mean = np.nansum(used * both, axis=1, where=mine) / total
        result[:, mine] = np.where(total > 0, mean, np.nan)[:, None]
    return result


def _cells_of(name: str) -> Formula:
    return lambda snapshot, block: snapshot.cell_block(name, block)


def _part_of(array: Array) -> Formula:
    return lambda _, block: array[block]


def _log_density(snapshot: Snapshot, block: int) -> Array:
    density = snapshot.cell_block("density", block).astype(np.float64)
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(np.log(density))


def _beyond_kepler(snapshot: Snapshot, block: int) -> Array:
    """v_phi minus the Kepler speed at its cylindrical radius."""
    r, theta, _ = snapshot.grid.cell_centres(block)
    kepler = np.sqrt(snapshot.gm / (r * np.sin(theta)[:, None]))
    return np.asarray(snapshot.cell_block("velocity_phi", block) - kepler)


def _momentum(snapshot: Snapshot, block: int) -> Array:
    density, v_r, v_theta = (
        snapshot.cell_block(name, block).astype(np.float64)
        for name in ("density", "velocity_r", "velocity_theta")
    )
    return np.asarray(density * np.hypot(v_r, v_theta))
