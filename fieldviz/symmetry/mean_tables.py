"""What field scores compare: azimuth means on one mesh, their weights, and formulas for cells."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_blocks import over_kepler
from fieldviz.derived.azimuth_sums import (
    OVER_KEPLER,
    AzimuthMoments,
    MeridionalMesh,
    azimuth_moments,
)
from fieldviz.derived.current_density import current_density
from fieldviz.errors import FieldvizError
from fieldviz.symmetry.mirror import MIRROR_SIGNS, Formula, TableMirror
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.chunks import by_chunks, same_type

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
        The same quantities in cells of a block, or cells and what is to be taken off.
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
    formulas["velocity_phi"] = over_kepler
    if current:
        found = current_density(snapshot)
        for axis in ("r", "theta", "phi"):
            formulas[f"current_{axis}"] = _part_of(getattr(found, axis))
    scored = tuple(name for name in MIRROR_SIGNS if name in formulas)
    means, momentum, moments = _means(snapshot, scored, formulas)
    mesh = moments.mesh
    band = np.searchsorted(band_edges, mesh.r, side="right") - 1
    band[(band < 0) | (band >= len(band_edges) - 1)] = -1
    return MeanTables(
        mesh,
        means,
        momentum,
        {name: formulas[name] for name in scored},
        band,
        len(band_edges) - 1,
        h,
        reach,
        moments.notes,
    )


def _means(
    snapshot: Snapshot, scored: tuple[str, ...], formulas: dict[str, Formula]
) -> tuple[dict[str, Array], Array, AzimuthMoments]:
    """Means of what is scored, that of |rho v_p|, and what they rest on."""
    own = {name: formulas[name] for name in scored if name.startswith("current")}
    shared = {name: OVER_KEPLER if name == "velocity_phi" else name for name in scored}
    moments = azimuth_moments(snapshot, volume=shared.values(), formulas=own)
    only = azimuth_moments(snapshot, volume=(_MOMENTUM,), formulas={_MOMENTUM: _momentum})
    if moments.n_left_out or only.n_left_out:
        # What is left out of one is left out of all.
        own[_MOMENTUM] = _momentum
        volume = (*shared.values(), _MOMENTUM)
        moments = only = azimuth_moments(snapshot, volume=volume, formulas=own)
    means = {name: moments.means[its] for name, its in shared.items()}
    return means, only.means[_MOMENTUM], moments


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


def _momentum(snapshot: Snapshot, block: int) -> Array:
    from fieldviz.symmetry._kernels import mass_flux_size

    names = ("density", "velocity_r", "velocity_theta")
    fields = same_type([snapshot.cell_block(name, block) for name in names])
    size = np.empty(fields[0].shape)

    def work(start: int, stop: int) -> int:
        mass_flux_size(*fields, start, stop, size)
        return 0

    by_chunks(len(size), size.size, work)
    return size
