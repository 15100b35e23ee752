"""Files as they are given to a command: one, several, or a pattern."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from fieldviz.snapshots.reader import read_snapshot
from fieldviz.snapshots.series import SnapshotSeries, read_series

__all__ = ["opened", "series_name", "several"]

_PATTERN = frozenset("*?[")


def several(files: Sequence[Path]) -> str | list[Path]:
    """What was given: a list of files, or a pattern; a file that exists is never a pattern."""
    given = list(files)
    if len(given) == 1 and not given[0].exists() and _PATTERN & set(str(given[0])):
        return str(given[0])
    return given


def opened(files: Sequence[Path], layout: Path | None) -> SnapshotSeries:
    """The files as a series, perhaps of one.

    Raises
    ------
    SnapshotFileError, LayoutError
    """
    given = several(files)
    if isinstance(given, list) and len(given) == 1:
        path = given[0]
        return SnapshotSeries([path], [read_snapshot(path, layout=layout).time], layout=layout)
    return read_series(given, layout=layout)


def series_name(series: SnapshotSeries) -> str:
    """Names of the first and the last file, with the times."""
    first, last = series.paths[0].name, series.paths[-1].name
    if len(series) == 1:
        return f"{first}, t = {series.times[0]:.6g}"
    return f"{first} to {last}, t = {series.times[0]:.6g} to {series.times[-1]:.6g}"
