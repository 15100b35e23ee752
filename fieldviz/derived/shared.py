"""Intermediate results that several diagnostics of one snapshot need, worked out once.

Only within `sharing`: outside it nothing is kept, so that arrays may be changed between two calls.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import TypeVar
from weakref import WeakKeyDictionary

from fieldviz.wedge.snapshot import Snapshot

__all__ = ["is_shared", "once", "sharing"]

_Result = TypeVar("_Result")
_kept: WeakKeyDictionary[Snapshot, dict[str, object]] = WeakKeyDictionary()


@contextmanager
def sharing(snapshot: Snapshot) -> Iterator[None]:
    """Keep what `once` works out for this snapshot until the block ends."""
    if snapshot in _kept:
        yield
        return
    _kept[snapshot] = {}
    try:
        yield
    finally:
        del _kept[snapshot]


def is_shared(snapshot: Snapshot) -> bool:
    """Whether results for this snapshot are being kept."""
    return snapshot in _kept


def once(snapshot: Snapshot, name: str, make: Callable[[], _Result]) -> _Result:
    """What `make` gives: within `sharing` worked out at the first call only.

    Parameters
    ----------
    snapshot : Snapshot
    name : str
        One name for one function and its options.
    make : callable
        An error it raises is not kept.
    """
    kept = _kept.get(snapshot)
    if kept is None:
        return make()
    if name not in kept:
        kept[name] = make()
    return kept[name]  # type: ignore[return-value]
