"""Snapshots in order of time, opened when used."""

from __future__ import annotations

import glob
from collections.abc import Iterable, Iterator, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from fieldviz.errors import SnapshotFileError
from fieldviz.snapshots.reader import read_snapshot
from fieldviz.wedge.snapshot import Snapshot

if TYPE_CHECKING:
    from fieldviz.snapshots.layout_description import LayoutDescription

__all__ = ["SnapshotSeries", "expanded", "read_series"]


class SnapshotSeries(Sequence[Snapshot]):
    """Snapshots sorted by time; one is opened each time it is asked for.

    Attributes
    ----------
    paths : tuple of Path
        Files in order of time.
    times : tuple of float
        Their code times, strictly increasing.
    dropped : tuple of Path
        Files left out because another one, earlier in name, has the same time.
    layout : str, Path, LayoutDescription or None
        How the files are to be read.
    """

    def __init__(
        self,
        paths: Sequence[Path],
        times: Sequence[float],
        *,
        layout: str | Path | LayoutDescription | None = None,
        dropped: Sequence[Path] = (),
    ) -> None:
        self.paths = tuple(paths)
        self.times = tuple(times)
        self.dropped = tuple(dropped)
        self.layout = layout

    def __len__(self) -> int:
        return len(self.paths)

    def __getitem__(self, index):  # type: ignore[no-untyped-def]
        if isinstance(index, slice):
            return SnapshotSeries(self.paths[index], self.times[index], layout=self.layout)
        return read_snapshot(self.paths[index], layout=self.layout)

    def __iter__(self) -> Iterator[Snapshot]:
        return (self[index] for index in range(len(self)))

    def __repr__(self) -> str:
        span = f", t = {self.times[0]:.6g} to {self.times[-1]:.6g}" if self.times else ""
        return f"SnapshotSeries({len(self)} snapshots{span})"


def read_series(
    paths_or_pattern: str | Path | Iterable[str | Path],
    *,
    layout: str | Path | LayoutDescription | None = None,
) -> SnapshotSeries:
    """Open a series; no field is read.

    Parameters
    ----------
    paths_or_pattern : str, Path or iterable of them
        One pattern such as "run/disc_*.h5", or file names in any order.
    layout : str, Path or LayoutDescription, optional
        Layout description for files that fieldviz did not write.

    Returns
    -------
    SnapshotSeries
        Sorted by time. Of files with the same time, as restarts leave them, the one first in name
        stays and the others are listed in `dropped`.

    Raises
    ------
    SnapshotFileError
        If nothing matches, or a file cannot be read.
    """
    paths = expanded(paths_or_pattern)
    timed = sorted((read_snapshot(path, layout=layout).time, str(path), path) for path in paths)
    kept: list[tuple[float, Path]] = []
    dropped: list[Path] = []
    for time, _, path in timed:
        if kept and time == kept[-1][0]:
            dropped.append(path)
        else:
            kept.append((time, path))
    return SnapshotSeries(
        [path for _, path in kept], [time for time, _ in kept], layout=layout, dropped=dropped
    )


def expanded(paths_or_pattern: str | Path | Iterable[str | Path]) -> list[Path]:
    """Files that are meant, each once, in order of name; SnapshotFileError if there are none."""
    if isinstance(paths_or_pattern, str | Path):
        pattern = str(paths_or_pattern)
        found = sorted({Path(name) for name in glob.glob(pattern)}) or (  # noqa: PTH207 - may be absolute
            [Path(pattern)] if Path(pattern).exists() else []
        )
        if not found:
            raise SnapshotFileError(
                f"Cannot read the series '{pattern}': expected files that match, got none; "
                "check the folder and the pattern."
            )
        return found
    found = sorted({Path(path) for path in paths_or_pattern})
    if not found:
        raise SnapshotFileError("Cannot read the series: expected at least one file, got none.")
    return found
