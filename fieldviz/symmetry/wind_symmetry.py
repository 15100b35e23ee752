"""Is the wind even, odd or one-sided: three pairs of numbers from a snapshot or a series."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import asdict, dataclass, replace

import numpy as np

from fieldviz.derived.thickness import Thickness, disc_thickness
from fieldviz.errors import FieldvizError
from fieldviz.symmetry.displaced import DisplacedMidplane, displaced_midplane
from fieldviz.symmetry.field_scores import (
    Energies,
    FieldScores,
    field_energies,
    scores_of_energies,
)
from fieldviz.symmetry.mean_tables import mean_tables
from fieldviz.symmetry.pair_errors import TimedSums, judged_pair
from fieldviz.symmetry.pairs import Pair
from fieldviz.symmetry.side_sums import azimuth_bins, side_sums
from fieldviz.symmetry.verdict import NAMING, verdict_sentence, wind_word
from fieldviz.wedge.fields import VELOCITY
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.surfaces import MatchedCones, matched_cones

__all__ = ["Symmetry", "wind_symmetry", "wind_symmetry_of_series"]

_BANDS = 6


@dataclass(frozen=True)
class Symmetry:
    """Verdict on the wind of one snapshot, or of the time mean of a series.

    Attributes
    ----------
    word : str
        no wind, inflow, one-sided upper, one-sided lower, through-flow, even, odd or mixed.
    sentence : str
        The verdict in one sentence.
    outflow, bend : Pair
    torque : Pair or None
        None without a magnetic field.
    lean : Pair or None
        Beside the bend, not part of the verdict: mean angle of the poloidal field from the
        vertical, with the same weights. None without all of the field.
    field_scores : FieldScores or None
        None where they were not asked for.
    displaced : DisplacedMidplane or None
        The second scoring of the field, of the last snapshot of a series; None without B_phi.
    thickness : Thickness
    cones : MatchedCones
    time : float
        Of the snapshot; the middle of a series.
    times : tuple of float
        Of all snapshots used.
    wedge : str
        What the azimuth covers; numbers are for the wedge.
    share_outside : float
        Share of |rho v_p| beyond the angle both sides reach, not compared.
    naming : str
        What "even" means here, and what others mean by such words.
    notes : tuple of str
        What the numbers rest on.
    """

    word: str
    sentence: str
    outflow: Pair
    bend: Pair
    torque: Pair | None
    lean: Pair | None
    field_scores: FieldScores | None
    displaced: DisplacedMidplane | None
    thickness: Thickness
    cones: MatchedCones
    time: float
    times: tuple[float, ...]
    wedge: str
    share_outside: float
    naming: str
    notes: tuple[str, ...]

    @property
    def pairs(self) -> tuple[Pair, ...]:
        """The pairs that could be judged."""
        return tuple(p for p in (self.outflow, self.bend, self.torque) if p is not None)

    def to_dict(self) -> dict[str, object]:
        """Plain numbers and words for JSON; NaN becomes None."""
        return _plain(asdict(self))  # type: ignore[return-value]


def wind_symmetry(
    snapshot: Snapshot,
    *,
    scale_heights: float = 4.0,
    thickness: float | None = None,
    r_range: tuple[float, float] | None = None,
    fields: bool = True,
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
    fields : bool
        Score the fields as well.

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
    Errors are from a jackknife over blocks of azimuth; what changes in time they do not know.

    Examples
    --------
    >>> import fieldviz as fv
    >>> fv.wind_symmetry(fv.demo_disc(shape=(4, 96, 96), wind="odd")).word
    'odd'
    """
    return wind_symmetry_of_series(
        [snapshot], scale_heights=scale_heights, thickness=thickness, r_range=r_range, fields=fields
    )


def wind_symmetry_of_series(
    snapshots: Iterable[Snapshot],
    *,
    scale_heights: float = 4.0,
    thickness: float | None = None,
    r_range: tuple[float, float] | None = None,
    fields: bool = True,
) -> Symmetry:
    """Compare the two sides of the wind in the time mean of a series.

    Parameters
    ----------
    snapshots : iterable of Snapshot
        In order of time; one is in memory at a time. Of equal times the first one counts.
    scale_heights, thickness, r_range, fields
        As for `wind_symmetry`; H/R, the cones and the radii are those of the first snapshot.

    Returns
    -------
    Symmetry
        Fluxes and weighted sums are averaged over time, then compared. Errors: the larger one of
        the jackknife over azimuth and that over blocks of time of at least one orbit at the
        outer radius.

    Raises
    ------
    MissingFieldError, FieldvizError
        Also without snapshots, or with times that fall.
    """
    work: _Work | None = None
    for snapshot in snapshots:
        if work is None:
            work = _Work(snapshot, scale_heights, thickness, r_range, fields)
        work.add(snapshot)
        del snapshot  # before the next one is read
    if work is None:
        raise FieldvizError(
            "Cannot judge the wind: expected at least one snapshot, got none; check the series."
        )
    return work.result()


class _Work:
    """What is fixed by the first snapshot, and small tables of every one."""

    def __init__(
        self,
        first: Snapshot,
        scale_heights: float,
        thickness: float | None,
        r_range: tuple[float, float] | None,
        fields: bool,
    ):
        first.require("judge the wind", "density", *VELOCITY)
        self.thickness = _given_thickness(thickness) or disc_thickness(first)
        self.cones = matched_cones(first, self.thickness.h, scale_heights)
        self.band_edges = _band_edges(first, r_range)
        self.wedge = first.grid.azimuth_sentence
        self.n_bins = azimuth_bins(first.grid)
        orbit = 2 * np.pi * np.sqrt(self.band_edges[-1] ** 3 / first.gm)
        self.sums = TimedSums(float(orbit))
        self.energies: list[Energies] = []
        self.displaced: DisplacedMidplane | None = None
        self.fields = fields
        self.repeated = 0
        self.table_notes: tuple[str, ...] = ()

    def add(self, snapshot: Snapshot) -> None:
        times = self.sums.times
        if times and snapshot.time == times[-1]:
            self.repeated += 1
            return
        if times and not snapshot.time > times[-1]:
            raise FieldvizError(
                f"Cannot judge the wind of the series: expected times that rise, got "
                f"{snapshot.time:.6g} after {times[-1]:.6g}; sort the snapshots by time."
            )
        if times:
            self._check_same_wedge(snapshot)
        sums = side_sums(snapshot, self.cones, self.band_edges, self.n_bins)
        self.sums.add(snapshot.time, sums)
        if self.fields:
            tables = mean_tables(snapshot, self.thickness.h, self.cones.reach, self.band_edges)
            self.energies.append(field_energies(snapshot, tables))
            self.table_notes = tables.notes
            self.displaced = displaced_midplane(snapshot.grid, tables, self.thickness)

    def _check_same_wedge(self, snapshot: Snapshot) -> None:
        snapshot.require("judge the wind", "density", *VELOCITY)
        grid = snapshot.grid
        up, down = grid.theta_range
        reach = min(0.5 * np.pi - up, down - 0.5 * np.pi)
        low, high = grid.r_range
        slack = 1e-6 * high
        fits = reach > self.cones.reach - 1e-6 and grid.azimuth_sentence == self.wedge
        if not (fits and low <= self.band_edges[0] + slack and high >= self.band_edges[-1] - slack):
            raise FieldvizError(
                f"Cannot judge the wind of the series: expected snapshots of one wedge, got "
                f"another one at t = {snapshot.time:.6g}; take snapshots that cover the same "
                "radii and angles, or give the radii."
            )

    def result(self) -> Symmetry:
        mean = self.sums.mean()
        kwargs = {"sums": self.sums, "mean": mean, "band_edges": self.band_edges}
        outflow, bend = (judged_pair(name, **kwargs) for name in ("outflow", "bend"))  # type: ignore[arg-type]
        torque, lean = (
            judged_pair(name, **kwargs) if name in mean.numerators else None  # type: ignore[arg-type]
            for name in ("torque", "lean")
        )
        word = wind_word(outflow, bend, torque)
        judged = [pair for pair in (outflow, bend, torque) if pair is not None]
        scores = self._scores()
        return Symmetry(
            word,
            verdict_sentence(word, judged, self._caveats(judged, torque)),
            outflow,
            bend,
            torque,
            lean,
            scores,
            self.displaced,
            self.thickness,
            self.cones,
            0.5 * (self.sums.times[0] + self.sums.times[-1]),
            tuple(self.sums.times),
            self.wedge,
            mean.share_outside,
            NAMING,
            self._notes(mean.share_outside),
        )

    def _scores(self) -> FieldScores | None:
        if not self.fields:
            return None
        weights = self.sums.weights()
        names = [n for n in self.energies[0] if all(n in parts for parts in self.energies)]
        mean = {
            name: np.tensordot(weights, [parts[name] for parts in self.energies], 1)
            for name in names
        }
        found = scores_of_energies(mean, self.band_edges, "wind", "wind", self.table_notes)
        if len(self.energies) > 1:
            note = "energies of the even and odd parts are averaged over time"
            found = replace(found, notes=(*found.notes, note))
        return found

    def _caveats(self, judged: list[Pair], torque: Pair | None) -> list[str]:
        caveats = []
        if len(self.sums.times) == 1 and all(pair.interval is None for pair in judged):
            caveats.append("single snapshot")
        if torque is None:
            caveats.append("the torque is not judged: the snapshot has no magnetic field")
        if self.displaced is not None and self.displaced.sentence:
            caveats.append(self.displaced.sentence)
        return caveats

    def _notes(self, share_outside: float) -> tuple[str, ...]:
        cones, thickness, n = self.cones, self.thickness, len(self.sums.times)
        notes = [
            f"numbers are for the {self.wedge}",
            f"launching surfaces at {cones.scale_heights:.3g} H ({cones.angle:.4g} rad) from the "
            f"midplane, H/R = {thickness.h:.4g} from {thickness.source}",
            "thresholds are our choice: even needs a ratio of at least 1/3; a pair below a "
            "thousandth of its natural scale or below three errors counts as none; bands must "
            "agree for 70 % of the sum; an interval that reaches into another class is mixed",
            "errors are one standard error, by delete-one jackknife over blocks of azimuth, and of "
            "time for a series; intervals are two-sigma ones, wider for few blocks",
        ]
        if n > 1:
            notes.append(
                f"mean of {n} snapshots, t = {self.sums.times[0]:.6g} to {self.sums.times[-1]:.6g};"
                " H/R and surfaces are those of the first"
            )
        else:
            notes.append("single snapshot: no error knows what changes in time")
        if self.repeated:
            notes.append(f"{self.repeated} snapshots of a time that was there already were dropped")
        if cones.clipped:
            notes.append("the surfaces were clipped to the grid: they lie lower than asked for")
        if share_outside > 0:
            notes.append(
                f"{100 * share_outside:.2g} % of |rho v_p| lies where only one side has data and "
                "was not compared"
            )
        if self.displaced is not None:
            notes.append(self.displaced.note)
        return tuple(notes)


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
    edges = np.geomspace(low, high, _BANDS + 1)
    edges[0], edges[-1] = low, high  # not off by a rounding
    return edges


def _plain(value: object) -> object:
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if isinstance(value, float):
        return float(value) if np.isfinite(value) else None
    return value
