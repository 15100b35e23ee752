"""Streamlines of the mean wind: lever arms, critical points, what is conserved along them."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from fieldviz.derived.azimuth_sums import AzimuthMoments, azimuth_moments
from fieldviz.lines.azimuth_mean import azimuth_mean
from fieldviz.lines.critical_points import CriticalPoints, critical_points
from fieldviz.lines.seeds_wind import wind_plan
from fieldviz.lines.tracing import trace_lines
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["LINES", "WindLines", "mean_snapshot", "wind_lines"]

LINES = 32  # both sides together; each stands for the same mass loss of its side
_WORK = "follow the mean wind"


@dataclass(frozen=True, eq=False)
class WindLines:
    """Streamlines of the azimuth-averaged wind; arrays (n_lines,), code units.

    Attributes
    ----------
    points : CriticalPoints
    mass_loss : array
        What each line stands for, of the wedge.
    launch_radius, launch_theta : arrays
        Where the judged leg begins.
    sentence : str
    notes : tuple of str
    """

    points: CriticalPoints
    mass_loss: Array
    launch_radius: Array
    launch_theta: Array
    sentence: str
    notes: tuple[str, ...]


def wind_lines(snapshot: Snapshot, *, count: int = LINES, scale_heights: float = 4.0) -> WindLines:
    """Follow the azimuth-averaged wind from the launching surfaces and judge its lines.

    Parameters
    ----------
    snapshot : Snapshot
        Needs `density`, the velocity and the magnetic field.
    count : int
        Lines on both sides together.
    scale_heights : float
        Height of the launching surfaces, H.

    Returns
    -------
    WindLines

    Raises
    ------
    MissingFieldError, FieldvizError
        Also where no mass leaves.
    """
    snapshot.require(_WORK, "density", *VELOCITY, *MAGNETIC)
    mean = mean_snapshot(snapshot)
    plan = wind_plan(mean, count, scale_heights=scale_heights)
    lines = trace_lines(mean, "velocity", plan.points, poloidal=True)
    found = critical_points(mean, lines, from_height=scale_heights)
    launch = found.invariants.launch
    notes = (
        f"{count} streamlines of the azimuth-averaged wind; on each side every line stands for the "
        "same mass loss",
        *plan.notes,
        *found.notes,
        *(note for note in found.invariants.notes if note not in found.notes),
    )
    return WindLines(found, plan.amount, launch[:, 0], launch[:, 1], _sentence(found), tuple(notes))


def mean_snapshot(snapshot: Snapshot) -> Snapshot:
    """The azimuthal mean, from averages that are known already where they are the same numbers.

    One level, and no cell left out: else `azimuth_mean`, which interpolates at level jumps and
    keeps cells without a number visible.
    """
    names = ["density", *(["pressure"] if snapshot.has("pressure") else []), *MAGNETIC]
    if len(snapshot.grid.levels) > 1:
        return azimuth_mean(snapshot)
    moments = azimuth_moments(snapshot, names, VELOCITY)
    if moments.n_left_out:
        return azimuth_mean(snapshot)
    return _from_moments(snapshot, moments, names)


def _from_moments(snapshot: Snapshot, moments: AzimuthMoments, names: list[str]) -> Snapshot:
    cells = {name: moments.means[name] for name in names}
    cells |= {name: moments.mass_means[name] for name in VELOCITY}
    mesh = moments.mesh
    mean = Snapshot.from_arrays(
        mesh.r_edges,
        mesh.theta_edges,
        np.array(snapshot.grid.phi_range),
        cells={name: table[None] for name, table in cells.items()},
        time=snapshot.time,
        mu0=snapshot.mu0,
        gm=snapshot.gm,
        gamma=snapshot.gamma,
    )
    return replace(mean, title=snapshot.title, units=snapshot.units, source=snapshot.source)


def _sentence(found: CriticalPoints) -> str:
    words = []
    for side in ("upper", "lower"):
        here = np.array([name == side for name in found.side], dtype=bool)
        arms = found.lambda_l[here]
        arms = arms[np.isfinite(arms)]
        crossed = here & np.isfinite(found.alfven.arc)
        if arms.size:
            words.append(
                f"{side} side: median lever arm lambda {np.median(arms):.3g}, "
                f"{np.count_nonzero(crossed)} of {np.count_nonzero(here)} lines pass the Alfven "
                "point inside the grid"
            )
    return "; ".join(words) or "no line of the mean wind has a lever arm"
