"""Progress on stderr for work of more than a moment; stdout is kept for results."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import TypeVar

__all__ = ["tracked"]

T = TypeVar("T")


def tracked(items: Iterable[T], what: str, total: int) -> Iterator[T]:
    """Go through `items` and show how far along `what` is, with the time left.

    Parameters
    ----------
    items : iterable
    what : str
        In words, for example "writing snapshots".
    total : int
        How many there are.
    """
    from rich.console import Console
    from rich.progress import (
        BarColumn,
        MofNCompleteColumn,
        Progress,
        TextColumn,
        TimeRemainingColumn,
    )

    columns = (
        TextColumn("{task.description}"),
        BarColumn(),
        MofNCompleteColumn(),
        TimeRemainingColumn(),
    )
    console = Console(stderr=True)
    with Progress(*columns, console=console, disable=not console.is_terminal) as progress:
        task = progress.add_task(what, total=total)
        for number, item in enumerate(items):
            if not console.is_terminal:
                console.print(f"{what}: {number + 1} of {total}", highlight=False)
            yield item
            progress.advance(task)
