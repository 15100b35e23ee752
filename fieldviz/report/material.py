"""What a report is made from: the numbers of all snapshots, and the verdict on them together."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterable
from concurrent.futures import Executor
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from fieldviz.diagnostics.plain import json_text, plain
from fieldviz.diagnostics.series_numbers import SeriesNumbers, SnapshotRecord, measure_series
from fieldviz.diagnostics.snapshot_numbers import measure
from fieldviz.diagnostics.space_time import SpaceTime, space_time
from fieldviz.errors import FieldvizError
from fieldviz.snapshots.reader import read_snapshot
from fieldviz.snapshots.series import SnapshotSeries
from fieldviz.symmetry.wind_symmetry import wind_symmetry_of_series
from fieldviz.wedge.snapshot import Snapshot

if TYPE_CHECKING:
    from fieldviz.snapshots.layout_description import LayoutDescription

__all__ = ["Material", "Progress", "Source", "gather"]

Source = Snapshot | SnapshotSeries | str | Path | Iterable[str | Path]
Progress = Callable[[int, int, str], None]
_IN_MEMORY = "a snapshot in memory"


@dataclass(frozen=True, eq=False)
class Material:
    """Numbers of a snapshot or of a series.

    Attributes
    ----------
    series : SeriesNumbers
        One record for each snapshot, plain numbers, in order of time.
    verdict : dict or None
        `Symmetry` as plain numbers: of the snapshot, or of the time mean of the series.
    no_verdict : str
        Why there is none; else empty.
    course : SpaceTime or None
        None for one snapshot, or where no profiles are known.
    no_course : str
    last : Snapshot
        The last one, for pictures.
    in_memory : bool
        It came as a snapshot and not from a file.
    """

    series: SeriesNumbers
    verdict: dict[str, Any] | None
    no_verdict: str
    course: SpaceTime | None
    no_course: str
    last: Snapshot
    in_memory: bool = False

    @property
    def records(self) -> tuple[SnapshotRecord, ...]:
        """Measured snapshots in order of time."""
        return self.series.records

    @property
    def is_series(self) -> bool:
        """More than one snapshot was measured."""
        return len(self.records) > 1


def gather(
    source: Source,
    *,
    layout: str | Path | LayoutDescription | None = None,
    kept: str | Path | None = None,
    executor: Executor | str | None = None,
    progress: Progress | None = None,
) -> Material:
    """Measure all snapshots and judge them together.

    Raises
    ------
    FieldvizError
        If no snapshot could be measured, or nothing matches.
    """
    if isinstance(source, Snapshot):
        return _of_snapshot(source, progress)
    layout = source.layout if isinstance(source, SnapshotSeries) else layout

    def measured(done: int, total: int, record: SnapshotRecord) -> None:
        if progress is not None:
            progress(done, total, "measuring snapshots")

    series = measure_series(source, kept, layout=layout, executor=executor, progress=measured)
    if not series.records:
        raise FieldvizError(
            f"Cannot write the report: expected at least one snapshot that can be measured, got "
            f"none of {len(series.failed)}. {series.failed[0].reason}"
        )
    last = read_snapshot(series.records[-1].path, layout=layout)
    if len(series) == 1:
        verdict, reason = _own_verdict(series.records[0])
        return Material(series, verdict, reason, None, "", last)
    verdict, reason = _mean_verdict(series, layout, progress)
    course, why = _course(series)
    return Material(series, verdict, reason, course, why, last)


def _of_snapshot(snapshot: Snapshot, progress: Progress | None) -> Material:
    numbers = json.loads(json_text(measure(snapshot).to_dict()))
    if progress is not None:
        progress(1, 1, "measuring snapshots")
    record = SnapshotRecord(Path(snapshot.source or _IN_MEMORY), snapshot.time, numbers)
    verdict, reason = _own_verdict(record)
    series = SeriesNumbers((record,), (), (), ())
    return Material(series, verdict, reason, None, "", snapshot, in_memory=True)


def _own_verdict(record: SnapshotRecord) -> tuple[dict[str, Any] | None, str]:
    found = record.result("symmetry")
    return found, "" if found else _reason(record, "symmetry")


def _reason(record: SnapshotRecord, part: str) -> str:
    return str((record.numbers or {})["parts"][part]["reason"])


def _mean_verdict(
    series: SeriesNumbers,
    layout: str | Path | LayoutDescription | None,
    progress: Progress | None,
) -> tuple[dict[str, Any] | None, str]:
    """The verdict on the time mean of all snapshots that could be judged by themselves."""
    usable = [record for record in series.records if record.result("symmetry")]
    if not usable:
        return None, _reason(series.records[0], "symmetry")

    def opened() -> Iterable[Snapshot]:
        for number, record in enumerate(usable):
            yield read_snapshot(record.path, layout=layout)
            if progress is not None:
                progress(number + 1, len(usable), "judging the time mean")

    try:
        return plain(wind_symmetry_of_series(opened())), ""  # type: ignore[return-value]
    except FieldvizError as error:
        return None, str(error)


def _course(series: SeriesNumbers) -> tuple[SpaceTime | None, str]:
    try:
        return space_time(series), ""
    except FieldvizError as error:
        return None, str(error)
