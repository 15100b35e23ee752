"""Seeds on a cone: equal magnetic flux for every line, and an even-area set beside it.

Unsigned flux is divided, whatever the net flux is. Turning the field round changes no seed, and a
snapshot without net flux needs no rule of its own; a net field that does not change sign has both
fluxes alike. Where signs mix, lines of both signs are placed, each with the same amount, and the
plan says how much cancels. Common practice, no source.
"""

from __future__ import annotations

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.lines.seeds_common import (
    SeedPlan,
    checked_count,
    number_notes,
    places,
    unit_points,
)
from fieldviz.lines.seeds_surface import (
    ConeTable,
    checked_r_range,
    checked_theta,
    magnetic_on_cone,
)
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["equal_flux_plan", "equal_flux_seeds", "even_area_seeds"]

_MIDPLANE = 0.5 * np.pi
_EQUAL = "place seeds of equal flux"
_EVEN = "place seeds even in area"


def equal_flux_seeds(
    snapshot: Snapshot,
    count: int,
    *,
    r_range: tuple[float, float] | None = None,
    theta: float = _MIDPLANE,
    scatter_seed: int | None = None,
) -> Array:
    """Seeds on a cone such that every line carries the same magnetic flux.

    Parameters
    ----------
    snapshot : Snapshot
        With `magnetic_theta`, on faces or cells.
    count : int
        Number of lines, 1 to 10 million.
    r_range : (float, float), optional
        Radii on the cone; the whole wedge by default.
    theta : float
        Colatitude of the cone, radians; the midplane by default.
    scatter_seed : int, optional
        Low-discrepancy points shifted by this seed instead of strata midpoints.

    Returns
    -------
    (count, 3) float64 array
        r, theta, phi in the order of r.

    Raises
    ------
    MissingFieldError, FieldvizError

    See Also
    --------
    equal_flux_plan : the same with the flux of each line.

    Notes
    -----
    Inverse cumulative of |B_theta| dA: first r from the flux through rings, then phi from the flux
    along the ring of patches at r. Seed i is at the share (i + 1/2)/count in r and at golden-ratio
    steps in phi. Between neighbours in r lies the flux of one line. With faces the cumulative is
    exact at cell edges; between them it is a monotone cubic in r^2, exact for a uniform field.
    Cells without a number carry no flux. Common practice, no source.

    Examples
    --------
    >>> import fieldviz as fv
    >>> fv.equal_flux_seeds(fv.demo_disc(shape=(4, 32, 24)), 100).shape
    (100, 3)
    """
    return equal_flux_plan(
        snapshot, count, r_range=r_range, theta=theta, scatter_seed=scatter_seed
    ).points


def equal_flux_plan(
    snapshot: Snapshot,
    count: int,
    *,
    r_range: tuple[float, float] | None = None,
    theta: float = _MIDPLANE,
    scatter_seed: int | None = None,
) -> SeedPlan:
    """Seeds of equal flux with the flux of each line; parameters as of `equal_flux_seeds`.

    Returns
    -------
    SeedPlan
        `amount` is the unsigned flux over the number of lines, `net` the upward flux
        -sum B_theta dA, all for the wedge.

    Raises
    ------
    MissingFieldError, FieldvizError
    """
    count = checked_count(_EQUAL, count)
    theta = checked_theta(_EQUAL, snapshot.grid, theta)
    table = magnetic_on_cone(
        snapshot, theta, checked_r_range(_EQUAL, snapshot.grid, r_range), _EQUAL
    )
    weight = np.abs(table.density) * table.areas
    total = float(weight.sum())
    if not total > 0:
        raise FieldvizError(
            f"Cannot {_EQUAL}: expected a magnetic flux through the cone theta = {theta:.6g}, got "
            f"{_emptiness(table)}; choose another cone or range, or use even_area_seeds."
        )
    points = places(table, weight, *unit_points(_EQUAL, count, scatter_seed))
    net = -float(np.sum(table.density * table.areas))
    where = "read from faces" if table.from_faces else "interpolated between cells"
    notes = (
        f"B_theta {where}",
        f"net flux is {abs(net) / total:.3g} of the unsigned flux that is divided",
        *number_notes(table),
    )
    return SeedPlan(
        points,
        np.full(count, total / count),
        np.zeros(count, dtype=np.int64),
        total,
        net,
        f"unsigned magnetic flux, code units, {snapshot.grid.azimuth_sentence}",
        notes,
    )


def even_area_seeds(
    snapshot: Snapshot,
    count: int,
    *,
    r_range: tuple[float, float] | None = None,
    theta: float = _MIDPLANE,
    scatter_seed: int | None = None,
) -> Array:
    """Seeds on a cone, even in area: lines where the field is weak, too.

    Their density says nothing about the field; show them fainter, and say so.

    Parameters
    ----------
    snapshot : Snapshot
        Only its grid is used.
    count : int
        Number of lines, 1 to 10 million.
    r_range : (float, float), optional
        Radii on the cone; the whole wedge by default.
    theta : float
        Colatitude of the cone, radians; the midplane by default.
    scatter_seed : int, optional
        Low-discrepancy points shifted by this seed instead of strata midpoints.

    Returns
    -------
    (count, 3) float64 array
        r, theta, phi in the order of r: r even in r^2, phi in golden-ratio steps, half a wedge
        away from `equal_flux_seeds`, which they would cover in a uniform field.

    Raises
    ------
    FieldvizError
    """
    grid = snapshot.grid
    count = checked_count(_EVEN, count)
    theta = checked_theta(_EVEN, grid, theta)
    low, high = checked_r_range(_EVEN, grid, r_range)
    u, v = unit_points(_EVEN, count, scatter_seed, stream=1)
    points = np.empty((count, 3))
    points[:, 0] = np.clip(np.sqrt(low**2 + u * (high**2 - low**2)), low, high)
    points[:, 1] = theta
    points[:, 2] = grid.phi_range[0] + np.mod(v + 0.5, 1.0) * grid.period
    return points


def _emptiness(table: ConeTable) -> str:
    if table.without_number == table.density.size:
        return "no number on any cell"
    if table.without_number:
        return "zero on every cell that has a number"
    return "zero on every cell"
