"""All numbers of every snapshot of a series, one after the other or side by side, resumable."""

from __future__ import annotations

import json
import os
from collections.abc import Callable, Iterable, Iterator, Sequence
from concurrent.futures import BrokenExecutor, Executor, Future, ProcessPoolExecutor, as_completed
from contextlib import contextmanager
from dataclasses import dataclass, replace
from multiprocessing import get_context
from pathlib import Path
from typing import TYPE_CHECKING, Any

from fieldviz.diagnostics.parts import chosen_parts
from fieldviz.diagnostics.plain import json_text
from fieldviz.diagnostics.series_store import (
    input_key,
    made_folder,
    read_record,
    record_path,
    write_record,
)
from fieldviz.diagnostics.snapshot_numbers import measure
from fieldviz.errors import FieldvizError
from fieldviz.snapshots.reader import read_snapshot
from fieldviz.snapshots.series import SnapshotSeries, expanded

if TYPE_CHECKING:
    from fieldviz.snapshots.layout_description import LayoutDescription

__all__ = ["SeriesNumbers", "SnapshotRecord", "measure_series"]

PROCESSES = "processes"
Progress = Callable[[int, int, "SnapshotRecord"], None]


@dataclass(frozen=True, eq=False)
class SnapshotRecord:
    """The numbers of one file of a series.

    Attributes
    ----------
    path : Path
    time : float or None
        Code time; None where the file could not be opened.
    numbers : dict or None
        As `SnapshotNumbers.to_dict` gives them.
    reason : str
        Why there are none; else empty.
    reused : bool
        Whether they are those of an earlier run.
    """

    path: Path
    time: float | None
    numbers: dict[str, Any] | None = None
    reason: str = ""
    reused: bool = False

    def result(self, part: str) -> dict[str, Any] | None:
        """Result of a part; None where it is absent."""
        if self.numbers is None:
            return None
        found: dict[str, Any] | None = self.numbers["parts"].get(part, {}).get("result")
        return found

    def table(self, name: str) -> dict[str, list[Any]]:
        """Columns of a table by name, code units; empty where there is no such table."""
        if self.numbers is None or name not in self.numbers["tables"]:
            return {}
        table = self.numbers["tables"][name]
        names = [column["name"] for column in table["columns"]]
        # A physical column follows the code one of the same name.
        places = {key: names.index(key) for key in names}
        return {key: [row[place] for row in table["rows"]] for key, place in places.items()}


@dataclass(frozen=True, eq=False)
class SeriesNumbers:
    """The numbers of a series.

    Attributes
    ----------
    records : tuple of SnapshotRecord
        Those that were measured, in order of time.
    failed : tuple of SnapshotRecord
        Files without numbers, each with its reason.
    dropped : tuple of Path
        Files left out because another one, earlier in name, has the same time.
    notes : tuple of str
    """

    records: tuple[SnapshotRecord, ...]
    failed: tuple[SnapshotRecord, ...]
    dropped: tuple[Path, ...]
    notes: tuple[str, ...]

    @property
    def times(self) -> tuple[float, ...]:
        """Code times of the records."""
        return tuple(record.time for record in self.records if record.time is not None)

    def __len__(self) -> int:
        return len(self.records)


def measure_series(
    series_or_paths: SnapshotSeries | str | Path | Iterable[str | Path],
    folder: str | Path | None = None,
    *,
    parts: Iterable[str] | None = None,
    layout: str | Path | LayoutDescription | None = None,
    executor: Executor | str | None = None,
    progress: Progress | None = None,
) -> SeriesNumbers:
    """Measure every snapshot of a series; what an earlier run finished is used again.

    Parameters
    ----------
    series_or_paths : SnapshotSeries, or pattern, path or iterable of paths
        Files in any order. Given as paths, one that cannot be opened does not stop the others.
    folder : str or Path, optional
        Where one JSON file for each snapshot is kept, and looked for. A file counts as finished
        where name, size and time of modification of the snapshot, the parts, the layout
        description and the version of fieldviz are the same.
    parts : iterable of str, optional
        As of `measure`.
    layout : str, Path or LayoutDescription, optional
        Layout description for paths; a series has its own.
    executor : concurrent.futures.Executor or "processes", optional
        Where snapshots are measured side by side; "processes" uses the processors of this machine
        if there is more than one snapshot to measure. By default one after the other.
    progress : callable (done, total, record), optional
        Called after each snapshot, in order of completion.

    Returns
    -------
    SeriesNumbers
        In order of time whatever the order of completion.

    Raises
    ------
    FieldvizError
        If nothing matches, or the folder cannot be used. What a single snapshot raises becomes its
        reason; other errors are faults of the program and pass.

    Notes
    -----
    Every snapshot is opened where it is measured, and only its plain numbers come back: memory
    holds as many snapshots as the executor has workers.
    """
    chosen = tuple(part.name for part in chosen_parts(parts))
    if isinstance(series_or_paths, SnapshotSeries):
        layout, dropped = series_or_paths.layout, series_or_paths.dropped
        paths: Sequence[Path] = series_or_paths.paths
    else:
        paths, dropped = expanded(series_or_paths), ()
    if executor is not None and not isinstance(executor, Executor) and executor != PROCESSES:
        raise FieldvizError(
            f"Cannot measure the series: expected an executor or '{PROCESSES}', got {executor!r}; "
            "leave it out to measure one snapshot after the other."
        )
    kept = None if folder is None else made_folder(folder)
    opened = [_opened(path, layout) for path in paths]
    unreadable = [record for record in opened if record.time is None]
    waiting, same = _by_time([record for record in opened if record.time is not None])
    done: list[SnapshotRecord] = []
    for record in _measured(waiting, chosen, layout, kept, executor):
        done.append(record)
        if progress is not None:
            progress(len(done), len(waiting), record)
    good = sorted((r for r in done if r.numbers is not None), key=lambda r: (r.time, str(r.path)))
    bad = [*unreadable, *(record for record in done if record.numbers is None)]
    dropped = (*dropped, *same)
    return SeriesNumbers(
        tuple(good),
        tuple(sorted(bad, key=lambda r: str(r.path))),
        dropped,
        _notes(good, bad, dropped),
    )


def _opened(path: Path, layout: str | Path | LayoutDescription | None) -> SnapshotRecord:
    try:
        return SnapshotRecord(path, read_snapshot(path, layout=layout).time)
    except FieldvizError as error:
        return SnapshotRecord(path, None, reason=str(error))


def _by_time(records: list[SnapshotRecord]) -> tuple[list[SnapshotRecord], list[Path]]:
    """In order of time; of equal times the first in name stays."""
    kept: list[SnapshotRecord] = []
    same: list[Path] = []
    for record in sorted(records, key=lambda r: (r.time, str(r.path))):
        if kept and record.time == kept[-1].time:
            same.append(record.path)
        else:
            kept.append(record)
    return kept, same


def _measured(
    waiting: list[SnapshotRecord],
    parts: tuple[str, ...],
    layout: str | Path | LayoutDescription | None,
    folder: Path | None,
    executor: Executor | str | None,
) -> Iterator[SnapshotRecord]:
    """Records as they are finished: first those of an earlier run."""
    to_do = []
    for record in waiting:
        known = None
        if folder is not None:
            key = input_key(record.path, parts, layout)
            known = read_record(record_path(folder, record.path), key)
        if known is None:
            to_do.append(record)
        else:
            yield replace(record, numbers=known, reused=True)
    with _workers(executor, len(to_do)) as workers:
        if workers is None:
            for record in to_do:
                yield _measured_one(record, parts, layout, folder)
            return
        futures = {
            workers.submit(_measured_one, record, parts, layout, folder): record for record in to_do
        }
        try:
            for future in as_completed(futures):
                yield _outcome(future, futures[future])
        finally:
            for future in futures:
                future.cancel()


@contextmanager
def _workers(executor: Executor | str | None, count: int) -> Iterator[Executor | None]:
    if isinstance(executor, Executor):
        yield executor
    elif executor == PROCESSES and count > 1:
        # Not forked: threads of the numerical libraries do not survive that.
        size = min(count, os.cpu_count() or 1)
        with ProcessPoolExecutor(size, mp_context=get_context("spawn")) as pool:
            yield pool
    else:
        yield None


def _outcome(future: Future[SnapshotRecord], record: SnapshotRecord) -> SnapshotRecord:
    try:
        return future.result()
    except BrokenExecutor:
        reason = (
            f"Cannot measure {record.path}: expected a worker that finishes, got one that was "
            "ended, perhaps for want of memory; run again with fewer workers, and what is "
            "finished is used."
        )
        return replace(record, reason=reason)


def _measured_one(
    record: SnapshotRecord,
    parts: tuple[str, ...],
    layout: str | Path | LayoutDescription | None,
    folder: Path | None,
) -> SnapshotRecord:
    """Read, measure and keep one snapshot."""
    try:
        # Before reading: a file that changes meanwhile must not keep a key it does not deserve.
        key = input_key(record.path, parts, layout)
        snapshot = read_snapshot(record.path, layout=layout)
        numbers = measure(snapshot, parts=parts).to_dict()
        if folder is not None:
            write_record(record_path(folder, record.path), key, numbers)
    except FieldvizError as error:
        return replace(record, reason=str(error))
    except MemoryError:
        reason = (
            f"Cannot measure {record.path}: expected memory for one batch, got none left; close "
            "other programs or use fewer workers."
        )
        return replace(record, reason=reason)
    return replace(record, numbers=json.loads(json_text(numbers)))


def _notes(
    good: list[SnapshotRecord], bad: list[SnapshotRecord], dropped: Sequence[Path]
) -> tuple[str, ...]:
    notes = []
    if dropped:
        names = ", ".join(path.name for path in dropped)
        notes.append(f"left out, as another file has the same time: {names}")
    notes += [f"{record.path.name} has no numbers: {record.reason}" for record in bad]
    for part in sorted({name for r in good if r.numbers for name in r.numbers["parts"]}):
        without = [r for r in good if r.numbers and r.numbers["parts"][part]["reason"]]
        if without and without[0].numbers:
            reason = without[0].numbers["parts"][part]["reason"]
            notes.append(f"{part} is absent in {len(without)} of {len(good)} snapshots: {reason}")
    return tuple(notes)
