"""Flux sheets followed in time: who is who, and what merged, split, appeared or went."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

import numpy as np
from scipy.optimize import linear_sum_assignment

from fieldviz.errors import FieldvizError
from fieldviz.sheets.flux_sheets import find_flux_sheets
from fieldviz.sheets.sheet_history import SheetEvent, SheetHistory, SheetTrack
from fieldviz.sheets.sheet_records import FluxSheet, FluxSheets
from fieldviz.wedge.snapshot import Snapshot

__all__ = [
    "FLUX_WEIGHT",
    "GATE",
    "KEPT_FLUX",
    "SheetEvent",
    "SheetHistory",
    "SheetTrack",
    "track_flux_sheets",
]

GATE = 1.0  # scale heights that a sheet may be from where it was expected
FLUX_WEIGHT = 0.5  # scale heights that a change of the flux by a factor e counts for
KEPT_FLUX = 0.7  # of their summed flux, which a merged sheet must hold
_MISSED = 1  # outputs that a sheet may be missed
_FORBIDDEN = 1e6


@dataclass(eq=False)
class _Track:
    """A track while it grows; `ending` is what its end will be called unless it is seen again."""

    number: int
    begin: str
    outputs: list[int] = field(default_factory=list)
    sheets: list[FluxSheet] = field(default_factory=list)
    ending: SheetEvent | None = None
    is_open: bool = True

    @property
    def last(self) -> FluxSheet:
        return self.sheets[-1]


def track_flux_sheets(
    series: Iterable[Snapshot | FluxSheets | tuple[float, FluxSheets]],
    *,
    gate: float = GATE,
    flux_weight: float = FLUX_WEIGHT,
    kept_flux: float = KEPT_FLUX,
    **search: object,
) -> SheetHistory:
    """Follow the flux sheets of a series of snapshots.

    Parameters
    ----------
    series : iterable of Snapshot, FluxSheets or (time, FluxSheets)
        In order of time; one is looked at after the other. Of equal times the first one counts.
    gate : float
        Scale heights that a sheet may be from where it was expected.
    flux_weight : float
        Weight of |ln(flux ratio)| in the cost, scale heights.
    kept_flux : float
        Share of their summed flux that a merged sheet must hold; the same backwards for a split.
    **search
        Passed on to `find_flux_sheets` for snapshots.

    Returns
    -------
    SheetHistory

    Raises
    ------
    FieldvizError
        Without outputs, or with times that fall.

    Notes
    -----
    From output to output sheets of one polarity are assigned so that the summed cost
    |ln(R_b/R_a) - v dt|/h + 0.5 |ln(Phi_b/Phi_a)| is least (Kuhn 1955, from memory), v the drift of
    ln R over the two outputs before. A sheet that finds no successor within the gate has merged
    with one within 1 H that holds 70 % of the flux of both; else it left, if it touched the end of
    the range; else it died. A sheet without predecessor: the same backwards. One that is back at
    the next output but one was never away. Common practice, no source.
    """
    for name, value in (("gate", gate), ("flux_weight", flux_weight), ("kept_flux", kept_flux)):
        if not (np.isfinite(value) and value >= 0) or (name == "gate" and value == 0):
            raise FieldvizError(
                f"Cannot track flux sheets: expected {name} to be a positive number, got {value}; "
                "leave it out for the usual one."
            )
    outputs, dropped = _outputs(series, search)
    tracker = _Tracker(outputs, gate, flux_weight, kept_flux)
    for output in range(len(outputs)):
        tracker.advance(output)
    return tracker.history(_notes(outputs, dropped, gate, flux_weight, kept_flux))


def _outputs(
    series: Iterable[Snapshot | FluxSheets | tuple[float, FluxSheets]], search: dict[str, object]
) -> tuple[list[tuple[float, FluxSheets]], int]:
    outputs: list[tuple[float, FluxSheets]] = []
    dropped = 0
    for item in series:
        time = float(item[0]) if isinstance(item, tuple) else float(item.time)
        if outputs and time == outputs[-1][0]:
            dropped += 1
            continue
        if not np.isfinite(time) or (outputs and time < outputs[-1][0]):
            before = f"after {outputs[-1][0]:.6g}" if outputs else "at the beginning"
            raise FieldvizError(
                f"Cannot track flux sheets: expected times that increase, got {time:.6g} {before}; "
                "sort the series."
            )
        if isinstance(item, Snapshot):
            sheets = find_flux_sheets(item, **search)  # type: ignore[arg-type]
        else:
            sheets = item[1] if isinstance(item, tuple) else item
        outputs.append((time, sheets))
    if not outputs:
        raise FieldvizError("Cannot track flux sheets: expected at least one output, got none.")
    return outputs, dropped


class _Tracker:
    """Tracks of all sheets up to an output."""

    def __init__(
        self,
        outputs: Sequence[tuple[float, FluxSheets]],
        gate: float,
        flux_weight: float,
        kept_flux: float,
    ) -> None:
        self.times = [time for time, _ in outputs]
        self.found = [sheets for _, sheets in outputs]
        self.gate, self.flux_weight, self.kept_flux = gate, flux_weight, kept_flux
        self.tracks: list[_Track] = []
        self.events: list[SheetEvent] = []

    def advance(self, output: int) -> None:
        """Take in the sheets of one output."""
        sheets = self.found[output].sheets
        taken: dict[int, _Track] = {}
        before: dict[int, FluxSheet] = {}
        for missed in range(_MISSED + 1):
            waiting = [
                track
                for track in self.tracks
                if track.is_open and track.outputs[-1] == output - 1 - missed
            ]
            free = [n for n in range(len(sheets)) if n not in taken]
            for track, n in self._assigned(waiting, [sheets[n] for n in free], output):
                before[free[n]] = track.last
                taken[free[n]] = track
        for n, track in taken.items():
            track.outputs.append(output)
            track.sheets.append(sheets[n])
            track.ending = None
        self._close(output)
        for track in self.tracks:
            if track.is_open and track.outputs[-1] == output - 1:
                track.ending = self._ending(track, output, taken, before)
        for n, sheet in enumerate(sheets):
            if n not in taken:
                self._begin(sheet, output, taken, before)

    def _assigned(
        self, tracks: list[_Track], sheets: list[FluxSheet], output: int
    ) -> list[tuple[_Track, int]]:
        """Pairs of least summed cost within the gate."""
        if not tracks or not sheets:
            return []
        cost = np.full((len(tracks), len(sheets)), _FORBIDDEN)
        for m, track in enumerate(tracks):
            for n, sheet in enumerate(sheets):
                away = self._distance(self._expected(track, output), np.log(sheet.radius), output)
                if away > self.gate or sheet.polarity != track.last.polarity:
                    continue
                with np.errstate(divide="ignore", invalid="ignore"):
                    change = abs(np.log(abs(sheet.flux / track.last.flux)))
                cost[m, n] = away + self.flux_weight * (change if np.isfinite(change) else 1.0)
        rows, columns = linear_sum_assignment(cost)
        return [
            (tracks[m], int(n))
            for m, n in zip(rows, columns, strict=True)
            if cost[m, n] < _FORBIDDEN
        ]

    def _expected(self, track: _Track, output: int) -> float:
        """Ln R at an output if the track went on as between its last two sheets."""
        here = float(np.log(track.last.radius))
        if len(track.sheets) < 2:
            return here
        a, b = track.outputs[-2:]
        drift = (here - np.log(track.sheets[-2].radius)) / (self.times[b] - self.times[a])
        return float(here + drift * (self.times[output] - self.times[b]))

    def _distance(self, one: float, other: float, output: int) -> float:
        return float(abs(one - other) / self.found[output].h)

    def _near(self, one: FluxSheet, other: FluxSheet, output: int) -> bool:
        away = self._distance(np.log(one.radius), np.log(other.radius), output)
        return one.polarity == other.polarity and away <= self.gate

    def _ending(
        self,
        track: _Track,
        output: int,
        taken: dict[int, _Track],
        before: dict[int, FluxSheet],
    ) -> SheetEvent:
        """What becomes of a track that was not found again, unless it is back next time."""
        sheets, after, time = self.found[output].sheets, self.times[output - 1], self.times[output]
        lost = track.last
        joined = [
            n
            for n in taken
            if self._near(lost, sheets[n], output)
            and abs(sheets[n].flux) >= self.kept_flux * abs(lost.flux + before[n].flux)
            and abs(sheets[n].flux) > abs(before[n].flux)
        ]
        if joined:
            n = min(joined, key=lambda n: abs(np.log(sheets[n].radius / lost.radius)))
            tracks = (track.number, taken[n].number)
            return SheetEvent("merge", after, time, tracks, sheets[n].radius)
        low, high = np.log(self.found[output].r_range)
        outside = not low < self._expected(track, output) < high
        kind = "left" if outside or "edge" in lost.flags else "death"
        return SheetEvent(kind, after, time, (track.number,), lost.radius)

    def _begin(
        self, sheet: FluxSheet, output: int, taken: dict[int, _Track], before: dict[int, FluxSheet]
    ) -> None:
        """Open a track for a sheet that none was followed to."""
        track = _Track(len(self.tracks), "first output", [output], [sheet])
        self.tracks.append(track)
        if output == 0:
            return
        after, time = self.times[output - 1], self.times[output]
        sheets = self.found[output].sheets
        parted = [
            n
            for n in taken
            if self._near(sheet, before[n], output)
            and abs(before[n].flux) >= self.kept_flux * abs(sheet.flux + sheets[n].flux)
            and abs(before[n].flux) > abs(sheets[n].flux)
        ]
        if parted:
            n = min(parted, key=lambda n: abs(np.log(before[n].radius / sheet.radius)))
            track.begin = "split"
            numbers: tuple[int, ...] = (taken[n].number, track.number)
        else:
            track.begin = "entered" if "edge" in sheet.flags else "birth"
            numbers = (track.number,)
        self.events.append(SheetEvent(track.begin, after, time, numbers, sheet.radius))

    def _close(self, output: int) -> None:
        """End for good what was missed for longer than is allowed."""
        for track in self.tracks:
            if track.is_open and track.ending and track.outputs[-1] < output - _MISSED:
                self._end(track)

    def _end(self, track: _Track) -> None:
        assert track.ending is not None
        self.events.append(track.ending)
        track.is_open = False

    def history(self, notes: tuple[str, ...]) -> SheetHistory:
        """Everything, once the last output is in."""
        for track in self.tracks:
            if track.is_open and track.ending:
                self._end(track)
        return SheetHistory(
            np.array(self.times),
            tuple(self.found),
            tuple(self._finished(track) for track in self.tracks),
            tuple(sorted(self.events, key=lambda event: (event.time, event.radius))),
            notes,
        )

    def _finished(self, track: _Track) -> SheetTrack:
        times = np.array([self.times[n] for n in track.outputs])
        radii = np.array([sheet.radius for sheet in track.sheets])
        gm = np.array([self.found[n].gm for n in track.outputs])
        turns = np.sqrt(gm / radii**3) / (2 * np.pi)
        end = track.ending.kind if track.ending else "last output"
        first, last = track.outputs[0], track.outputs[-1]
        return SheetTrack(
            track.number,
            tuple(track.outputs),
            times,
            radii,
            np.array([sheet.flux for sheet in track.sheets]),
            tuple(track.sheets),
            track.begin,
            end,
            float(np.sum(0.5 * (turns[1:] + turns[:-1]) * np.diff(times))),
            first == 0 or last == len(self.times) - 1,
            last - first + 1 - len(track.outputs),
        )


def _notes(
    outputs: Sequence[tuple[float, FluxSheets]],
    dropped: int,
    gate: float,
    flux_weight: float,
    kept_flux: float,
) -> tuple[str, ...]:
    notes = [
        f"sheets were followed within {gate:g} H, a change of flux by e counting {flux_weight:g} "
        f"H; a merged sheet holds {100 * kept_flux:g} % of the flux of both; these are our choice",
        "a sheet missed for one output is bridged; two sheets count as one as soon as the "
        "smoothing and the least prominence let no saddle be seen between them",
        *dict.fromkeys(sheets.criteria.note(sheets.profile) for _, sheets in outputs),
    ]
    if dropped:
        notes.append(f"{dropped} outputs with the time of the one before were left out")
    if len(outputs) == 1:
        notes.append("one output: nothing could be followed")
    return tuple(notes)
