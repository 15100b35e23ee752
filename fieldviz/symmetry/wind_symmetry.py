"""Is the wind even, odd or one-sided: three pairs of numbers from one snapshot."""

from __future__ import annotations

from dataclasses import asdict, dataclass

import numpy as np

from fieldviz.derived.thickness import Thickness, disc_thickness
from fieldviz.errors import FieldvizError
from fieldviz.symmetry.bend import side_averages
from fieldviz.symmetry.pairs import Pair, judge_pair
from fieldviz.symmetry.verdict import verdict_sentence, wind_word
from fieldviz.wedge.halo import halo_array
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.cone_flux import cone_integral
from fieldviz.wind.surfaces import MatchedCones, matched_cones

__all__ = ["Symmetry", "wind_symmetry"]

_BANDS = 6
NAMING = (
    "'even' means mirror-symmetric for every quantity: wind outward on both sides, B_phi reversing "
    "at the midplane. Dynamo papers call that the dipole or 'A' type, and some call 'odd' the "
    "state whose B_phi does not reverse: say which quantity is meant."
)


@dataclass(frozen=True)
class Symmetry:
    """Verdict on the wind of one snapshot.

    Attributes
    ----------
    word : str
        no wind, inflow, one-sided upper, one-sided lower, through-flow, even, odd or mixed.
    sentence : str
        The verdict in one sentence.
    outflow, bend : Pair
    torque : Pair or None
        None without a magnetic field.
    thickness : Thickness
    cones : MatchedCones
    time : float
    wedge : str
        What the azimuth covers; numbers are for the wedge.
    share_outside : float
        Share of |rho v_p| beyond the angle both sides reach, not compared.
    notes : tuple of str
        What the numbers rest on.
    """

    word: str
    sentence: str
    outflow: Pair
    bend: Pair
    torque: Pair | None
    thickness: Thickness
    cones: MatchedCones
    time: float
    wedge: str
    share_outside: float
    notes: tuple[str, ...]

    @property
    def pairs(self) -> tuple[Pair, ...]:
        """The pairs that could be judged."""
        return tuple(p for p in (self.outflow, self.bend, self.torque) if p is not None)

    def as_dict(self) -> dict[str, object]:
        """Plain numbers and words for JSON; NaN becomes None."""
        return _plain(asdict(self))  # type: ignore[return-value]


def wind_symmetry(
    snapshot: Snapshot,
    *,
    scale_heights: float = 4.0,
    thickness: float | None = None,
    r_range: tuple[float, float] | None = None,
) -> Symmetry:
    """Compare the two sides of the wind.

    Parameters
    ----------
    snapshot : Snapshot
        Needs `density` and the velocity; `magnetic_*` for the torque.
    scale_heights : float
        Height of the launching surfaces in H above and below the midplane.
    thickness : float, optional
        H/R; worked out from the snapshot by default.
    r_range : (float, float), optional
        Radii to use; the whole wedge by default.

    Returns
    -------
    Symmetry

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    Outflow: mass leaving through matched cones. Bend: mean cylindrical radial velocity beyond the
    cones, weighted with |rho v_p|, over cells moving away from the midplane. Torque: angular
    momentum that the field carries out through the cones. Each is an (upper, lower) pair.

    Examples
    --------
    >>> import fieldviz as fv
    >>> fv.wind_symmetry(fv.demo_disc(shape=(4, 96, 96), wind="odd")).word
    'odd'
    """
    snapshot.require("judge the wind", "density", "velocity_r", "velocity_theta", "velocity_phi")
    measured = _given_thickness(thickness) or disc_thickness(snapshot)
    cones = matched_cones(snapshot, measured.h, scale_heights)
    band_edges = _band_edges(snapshot, r_range)
    averages = side_averages(snapshot, cones, band_edges)
    outflow = _outflow(snapshot, cones, band_edges, averages.accretion_rate)
    bend = judge_pair(
        "bend",
        averages.bend_total,
        averages.bend,
        band_edges,
        scale=averages.kepler_speed,
        unit="mean v_R of leaving gas, code velocity, positive away from the star",
        notes=averages.notes,
    )
    torque = _torque(snapshot, cones, band_edges, averages.accretion_torque)
    word = wind_word(outflow, bend, torque)
    notes, caveats = _notes(snapshot, measured, cones, averages.share_outside, torque)
    judged = [pair for pair in (outflow, bend, torque) if pair is not None]
    return Symmetry(
        word,
        verdict_sentence(word, judged, caveats),
        outflow,
        bend,
        torque,
        measured,
        cones,
        snapshot.time,
        snapshot.grid.azimuth_sentence,
        averages.share_outside,
        notes,
    )


def _given_thickness(h: float | None) -> Thickness | None:
    if h is None:
        return None
    if not 0 < h < 1:
        raise FieldvizError(f"Cannot use this thickness: expected H/R of 0 to 1, got {h}.")
    return Thickness(h, (h, h), "given")


def _band_edges(snapshot: Snapshot, r_range: tuple[float, float] | None) -> Array:
    inner, outer = snapshot.grid.r_range
    low, high = r_range or (inner, outer)
    if not inner <= low < high <= outer:
        raise FieldvizError(
            f"Cannot use these radii: expected a range within {inner:.6g} to {outer:.6g}, "
            f"got {low:.6g} to {high:.6g}."
        )
    if low == 0:
        low = 1e-3 * high
    return np.geomspace(low, high, _BANDS + 1)


def _cone_pair(
    name: str,
    snapshot: Snapshot,
    southward: Array,
    cones: MatchedCones,
    band_edges: Array,
    *,
    scale: float,
    unit: str,
) -> Pair:
    """Judge what leaves through both cones: minus the southward flux above, plus it below."""
    bad = ~np.isfinite(southward)
    notes: tuple[str, ...] = ()
    if bad.any():
        southward[bad] = 0.0
        notes = (f"{bad.sum()} cells with NaN or infinite values were taken as zero",)
    haloed = halo_array(snapshot.grid, southward)
    upper = -cone_integral(snapshot.grid, haloed, cones.upper, band_edges)
    lower = cone_integral(snapshot.grid, haloed, cones.lower, band_edges)
    totals = (float(upper.sum()), float(lower.sum()))
    return judge_pair(name, totals, (upper, lower), band_edges, scale=scale, unit=unit, notes=notes)


def _outflow(
    snapshot: Snapshot, cones: MatchedCones, band_edges: Array, accretion_rate: float
) -> Pair:
    southward = snapshot.cell("density") * snapshot.cell("velocity_theta")
    return _cone_pair(
        "outflow",
        snapshot,
        southward,
        cones,
        band_edges,
        scale=accretion_rate,
        unit="mass loss of the wedge, code mass per code time, positive away from the midplane",
    )


def _torque(
    snapshot: Snapshot, cones: MatchedCones, band_edges: Array, accretion_torque: float
) -> Pair | None:
    if not snapshot.has("magnetic_theta", "magnetic_phi"):
        return None
    grid = snapshot.grid
    # -R B_theta B_phi/mu0 is the southward flux of angular momentum by the field.
    southward = snapshot.cell("magnetic_theta") * snapshot.cell("magnetic_phi")
    for block in range(grid.n_blocks):
        r, theta, _ = grid.cell_centres(block)
        southward[block] *= (-np.sin(theta)[:, None] * r / snapshot.mu0).astype(southward.dtype)
    return _cone_pair(
        "torque",
        snapshot,
        southward,
        cones,
        band_edges,
        scale=accretion_torque,
        unit="angular momentum of the wedge taken by the field, code units, positive away from it",
    )


def _notes(
    snapshot: Snapshot,
    thickness: Thickness,
    cones: MatchedCones,
    share_outside: float,
    torque: Pair | None,
) -> tuple[tuple[str, ...], list[str]]:
    caveats = ["single snapshot, no error estimate"]
    notes = [
        f"numbers are for the {snapshot.grid.azimuth_sentence}",
        f"launching surfaces at {cones.scale_heights:.3g} H ({cones.angle:.4g} rad) from the "
        f"midplane, H/R = {thickness.h:.4g} from {thickness.source}",
        "thresholds are our choice: even needs a ratio of at least 1/3; a pair below a thousandth "
        "of its natural scale counts as none; bands must agree for 70 % of the sum",
        NAMING,
    ]
    if cones.clipped:
        notes.append("the surfaces were clipped to the grid: they lie lower than asked for")
    if share_outside > 0.001:
        notes.append(
            f"{100 * share_outside:.1f} % of |rho v_p| lies where only one side has data and was "
            "not compared"
        )
    if torque is None:
        caveats.append("the torque is not judged: the snapshot has no magnetic field")
    return tuple(notes), caveats


def _plain(value: object) -> object:
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if isinstance(value, float):
        return float(value) if np.isfinite(value) else None
    return value
