"""`fieldviz report`: a folder with a page, its tables and all numbers."""

from __future__ import annotations

import json
from collections.abc import Generator, Iterator, Sequence
from pathlib import Path

from fieldviz.commands.given_files import several
from fieldviz.commands.progress import tracked
from fieldviz.report.write import NUMBERS, write_report

__all__ = ["run"]


def run(
    paths: Sequence[Path],
    output: Path,
    *,
    layout: Path | None,
    title: str | None,
    scenes: bool,
    kept: Path | None = None,
    processes: bool = False,
) -> str:
    """Write the report; return the verdict, what is amiss with the files, and the page's name."""
    shown = _Shown()
    try:
        page = write_report(
            several(paths), output, title=title, scenes=scenes, layout=layout, kept=kept,
            executor="processes" if processes else None, progress=shown,
        )  # fmt: skip
    finally:
        shown.close()
    numbers = json.loads((output / NUMBERS).read_text(encoding="utf-8"))
    return "\n".join([numbers["sentence"], *numbers["notes"], str(page)])


class _Shown:
    """Shows steps of several kinds, one bar after the other."""

    def __init__(self) -> None:
        self._what = ""
        self._bar: Iterator[int] = iter(())

    def __call__(self, done: int, total: int, what: str) -> None:
        """Say that another one is done."""
        if what != self._what:
            self.close()
            self._what, self._bar = what, tracked(range(total), what, total)
        next(self._bar, None)
        if done == total:
            next(self._bar, None)  # runs out, which ends the bar as a full one

    def close(self) -> None:
        """Take the bar away."""
        if isinstance(self._bar, Generator):
            self._bar.close()
