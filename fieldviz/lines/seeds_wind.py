"""Seeds on the launching surfaces: every line stands for the same mass that leaves its side."""

from __future__ import annotations

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.lines.seeds_common import (
    SeedPlan,
    checked_count,
    checked_thickness,
    number_notes,
    places,
    shared_out,
    unit_points,
)
from fieldviz.lines.seeds_surface import ConeTable, array_on_cone, checked_r_range
from fieldviz.wedge.halo import halo_array
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.surfaces import MatchedCones, matched_cones

__all__ = ["wind_plan", "wind_seeds"]

_WORK = "place seeds in the wind"


def wind_seeds(
    snapshot: Snapshot,
    count: int,
    *,
    scale_heights: float = 4.0,
    thickness: float | None = None,
    r_range: tuple[float, float] | None = None,
    scatter_seed: int | None = None,
) -> Array:
    """Seeds on two matched cones, in proportion to the mass that leaves through them.

    Parameters
    ----------
    snapshot : Snapshot
        With `density` and `velocity_theta`; the thickness is worked out from `pressure` if it is
        there.
    count : int
        Number of lines on both sides together, 1 to 10 million.
    scale_heights : float
        Height of the cones in H; clipped to the grid.
    thickness : float, optional
        H/R; worked out from the snapshot by default.
    r_range : (float, float), optional
        Radii on the cones; the whole wedge by default.
    scatter_seed : int, optional
        Low-discrepancy points shifted by this seed instead of strata midpoints.

    Returns
    -------
    (count, 3) float64 array
        r, theta, phi: the upper side first, each in the order of r.

    Raises
    ------
    MissingFieldError, FieldvizError
        Also where no mass leaves through either cone.

    See Also
    --------
    wind_plan : the same with the side and the mass loss of each line.

    Notes
    -----
    Sides share the lines by their net mass loss, so one that loses none gets none. On a side the
    weight is the outward part of rho v.n dA only, inverted as in `equal_flux_seeds`. rho v_theta
    is linear in theta between cells. Common practice, no source.
    """
    return wind_plan(
        snapshot,
        count,
        scale_heights=scale_heights,
        thickness=thickness,
        r_range=r_range,
        scatter_seed=scatter_seed,
    ).points


def wind_plan(
    snapshot: Snapshot,
    count: int,
    *,
    scale_heights: float = 4.0,
    thickness: float | None = None,
    r_range: tuple[float, float] | None = None,
    scatter_seed: int | None = None,
) -> SeedPlan:
    """Seeds of the wind with what each line stands for; parameters as of `wind_seeds`.

    Returns
    -------
    SeedPlan
        `amount` is the net mass loss of the line's side over its number of lines; `group` is 0
        above and 1 below the midplane; `total` is the loss of the sides that have one, `net` that
        of both with signs. All for the wedge.

    Raises
    ------
    MissingFieldError, FieldvizError
    """
    count = checked_count(_WORK, count)
    snapshot.require(_WORK, "density", "velocity_theta")
    radii = checked_r_range(_WORK, snapshot.grid, r_range)
    cones = matched_cones(snapshot, checked_thickness(_WORK, snapshot, thickness), scale_heights)
    tables = _mass_flux(snapshot, cones, radii)
    outward = [sign * t.density * t.areas for sign, t in zip((-1.0, 1.0), tables, strict=True)]
    net = np.array([side.sum() for side in outward])
    loss = np.maximum(net, 0.0)
    if not loss.any():
        raise FieldvizError(
            f"Cannot {_WORK}: expected mass that leaves through a cone {cones.scale_heights:.3g} H "
            f"above or below the midplane, got a loss of {net[0]:.4g} above and {net[1]:.4g} "
            "below; choose another height or range of radii."
        )
    counts = shared_out(count, loss)
    points = [
        places(table, np.maximum(side, 0.0), *unit_points(_WORK, int(n), scatter_seed, stream))
        for stream, (table, side, n) in enumerate(zip(tables, outward, counts, strict=True))
        if n
    ]
    group = np.repeat(np.arange(2), counts)
    per_line = np.divide(loss, counts, out=np.zeros(2), where=counts > 0)
    return SeedPlan(
        np.concatenate(points),
        per_line[group],
        group,
        float(loss.sum()),
        float(net.sum()),
        f"mass loss, code units, {snapshot.grid.azimuth_sentence}",
        (*_surface_notes(cones, net), *number_notes(*tables)),
    )


def _mass_flux(
    snapshot: Snapshot, cones: MatchedCones, r_range: tuple[float, float]
) -> tuple[ConeTable, ConeTable]:
    """Southward mass flux on the upper and on the lower cone."""
    with np.errstate(invalid="ignore", over="ignore"):
        southward = snapshot.cell("density") * snapshot.cell("velocity_theta")
    haloed = halo_array(snapshot.grid, southward)
    upper = array_on_cone(snapshot.grid, haloed, cones.upper, r_range)
    return upper, array_on_cone(snapshot.grid, haloed, cones.lower, r_range)


def _surface_notes(cones: MatchedCones, net: Array) -> tuple[str, ...]:
    clipped = ", clipped to the grid" if cones.clipped else ""
    return (
        f"cones {cones.scale_heights:.3g} H from the midplane{clipped}",
        f"net mass loss {net[0]:.4g} above, {net[1]:.4g} below",
    )
