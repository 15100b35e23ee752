"""Streamlines of the wind: where they begin, which are shown, and their speed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.thickness import disc_thickness
from fieldviz.errors import FieldvizError
from fieldviz.lines.line_set import LineSet
from fieldviz.lines.seeds_shapes import cone_seeds
from fieldviz.lines.seeds_wind import wind_plan
from fieldviz.lines.tracing import trace_lines
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["WindLines", "wind_lines"]

_HEIGHTS = (4.0, 5.0, 6.0, 7.0, 8.0, 10.0, 12.0)  # in H, tried from below
_HIGHEST = 0.85  # of the angle both sides have: lines need room above their beginning
_NEARLY_ALL = 0.9  # of the largest loss
_WITHOUT_DENSITY = 0.7  # of the angle both sides have
_SHORTEST = 0.02  # of the outer radius
_SIDES = ("above", "below")


@dataclass(frozen=True)
class WindLines:
    """Lines to draw.

    Attributes
    ----------
    places : list of (n, 3) arrays
        r, theta, unwrapped phi of each line, from its launch outward.
    speeds : list of (n,) arrays
        Poloidal speed over the Kepler speed at the radius where the line begins.
    share_above : float
        Share of the mass loss that leaves above; NaN where it is not known.
    angle : float
        Of the cones on which lines begin, from the midplane, radians.
    scale_heights : float or None
        The same in H.
    notes : tuple of str
        What is missing or different, for the caption.
    """

    places: list[Array]
    speeds: list[Array]
    share_above: float
    angle: float
    scale_heights: float | None
    notes: tuple[str, ...]


def wind_lines(
    snapshot: Snapshot, count: int, launch_height: float | None, first: float, r_end: float | None
) -> WindLines:
    """Trace streamlines from both launching cones, repeated around the axis.

    Parameters
    ----------
    snapshot : Snapshot
        With the velocity; with density lines stand for equal mass, else they are spread evenly.
    count : int
        Lines over the whole ring, about.
    launch_height : float or None
        Of the cones, in H; None: `_HEIGHTS`.
    first : float
        Azimuth, radians, from which whole wedges are filled; where the last one does not fit into
        the ring, the rest stays empty.
    r_end : float or None
        Lines end at this radius.
    """
    per_wedge = max(2, round(count * snapshot.grid.period / (2 * np.pi))) if count else 0
    if not per_wedge:
        return WindLines([], [], np.nan, np.nan, None, ())
    seeds, share, height, notes = _seeds(snapshot, per_wedge, launch_height)
    if not len(seeds):
        return WindLines([], [], np.nan, np.nan, None, notes)
    lines = trace_lines(
        snapshot,
        "velocity",
        seeds,
        direction="forward",
        sample=("velocity_r", "velocity_theta"),
    )
    places, speeds, dropped = _outward(snapshot, lines, r_end)
    if dropped:
        notes = (*notes, f"{dropped} of {len(lines)} lines of a wedge do not get out: not shown")
    turns = _turns(snapshot.grid, first)
    angle = float(np.abs(0.5 * np.pi - seeds[0, 1]))
    return WindLines(
        [place + np.array([0.0, 0.0, turn]) for turn in turns for place in places],
        [speed for _ in turns for speed in speeds],
        share,
        angle,
        height,
        notes,
    )


def _turns(wedge: WedgeGrid, first: float) -> Array:
    """Angles by which the wedge is turned to fill the ring."""
    start = np.ceil((first - wedge.phi_range[0]) / wedge.period - 1e-9)
    count = max(1, int(np.floor(2 * np.pi / wedge.period + 1e-6)))
    return np.asarray((start + np.arange(count)) * wedge.period)


def _seeds(
    snapshot: Snapshot, count: int, launch_height: float | None
) -> tuple[Array, float, float | None, tuple[str, ...]]:
    """Seeds, share of the loss above, height in H, and what must be said."""
    if not snapshot.has("density"):
        return _even_seeds(snapshot, count)
    height = _launch_height(snapshot) if launch_height is None else launch_height
    try:
        plan = wind_plan(snapshot, count, scale_heights=height)
    except FieldvizError:
        return np.empty((0, 3)), np.nan, height, ("no streamline: no mass leaves on either side",)
    losses = np.array([plan.amount[plan.group == side].sum() for side in (0, 1)])
    notes = tuple(
        f"no streamline {_SIDES[side]}: no mass leaves there"
        for side in (0, 1)
        if not losses[side] > 0
    )
    return plan.points, float(losses[0] / losses.sum()), height, notes


def _launch_height(snapshot: Snapshot) -> float:
    """The lowest cones through which nearly all of the largest loss passes."""
    h = disc_thickness(snapshot).h
    reach = _reach(snapshot)
    tried = [k for k in _HEIGHTS if k * h <= _HIGHEST * reach] or [_HIGHEST * reach / h]
    losses = np.array([_loss(snapshot, k) for k in tried])
    return tried[int(np.argmax(losses >= _NEARLY_ALL * losses.max()))]


def _loss(snapshot: Snapshot, height: float) -> float:
    try:
        return wind_plan(snapshot, 2, scale_heights=height).total
    except FieldvizError:
        return 0.0


def _reach(snapshot: Snapshot) -> float:
    low, high = snapshot.grid.theta_range
    return min(0.5 * np.pi - low, high - 0.5 * np.pi)


def _even_seeds(
    snapshot: Snapshot, count: int
) -> tuple[Array, float, float | None, tuple[str, ...]]:
    angle = _WITHOUT_DENSITY * _reach(snapshot)
    if angle <= 0:
        return np.empty((0, 3)), np.nan, None, ("no streamline: the wedge has one side only",)
    n_phi = max(1, round(np.sqrt(count / 8)))
    shape = (n_phi, max(1, count // (2 * n_phi)))
    parts = [cone_seeds(snapshot, 0.5 * np.pi + side * angle, shape) for side in (-1, 1)]
    return np.concatenate(parts), np.nan, None, ("no density: lines are spread evenly, no disc",)


def _outward(
    snapshot: Snapshot, lines: LineSet, r_end: float | None
) -> tuple[list[Array], list[Array], int]:
    """Lines that leave the wedge outward, cut at `r_end`, with their speeds."""
    speed = np.hypot(lines.value("velocity_r"), lines.value("velocity_theta"))
    end = snapshot.grid.r_range[1] if r_end is None else r_end
    places, speeds, dropped = [], [], 0
    for n, (_, reason) in enumerate(lines.end_reason):
        part = slice(int(lines.offsets[n]), int(lines.offsets[n + 1]))
        place = lines.spherical[part]
        if reason not in ("upper wall", "lower wall", "outer wall"):
            dropped += 1
            continue
        inside = place[:, 0] <= end
        stop = len(place) if inside.all() else int(np.argmin(inside))
        if stop < 4 or lines.length[n] < _SHORTEST * end:
            continue
        kepler = np.sqrt(snapshot.gm / (place[0, 0] * np.sin(place[0, 1])))
        places.append(place[:stop])
        speeds.append(speed[part][:stop] / kepler)
    return places, speeds, dropped
