"""Results as plain numbers, words, lists and mappings, fit for JSON."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import fields, is_dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import MeridionalMesh
from fieldviz.lines.line_set import LineSet
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot

__all__ = ["LARGEST_ARRAY", "json_text", "plain"]

LARGEST_ARRAY = 4096  # elements; maps and fields are for pictures, not for a file of numbers
_DATA = (Snapshot, WedgeGrid, MeridionalMesh, LineSet)


def plain(value: object) -> object:
    """Turn a result into what JSON can hold.

    Parameters
    ----------
    value : object
        Dataclasses, mappings, sequences, arrays, numbers and words, nested.

    Returns
    -------
    object
        NaN and infinite numbers become None. Arrays of more than `LARGEST_ARRAY` elements, and of
        more than one axis, give only their shape; so do grids and snapshots, by name.

    Raises
    ------
    TypeError
        For anything else.
    """
    if value is None or isinstance(value, bool | str):
        return value
    if isinstance(value, np.ndarray):
        return _array(value)
    if isinstance(value, np.generic):
        return plain(value.item())
    if isinstance(value, int):
        return value
    if isinstance(value, float):
        return value if np.isfinite(value) else None
    if isinstance(value, _DATA):
        return {"left_out": type(value).__name__}
    if is_dataclass(value) and not isinstance(value, type):
        shown = [field.name for field in fields(value) if not field.name.startswith("_")]
        return {name: plain(getattr(value, name)) for name in shown}
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, Sequence):
        return [plain(item) for item in value]
    raise TypeError(f"no plain form of {type(value).__name__}")


def json_text(value: object) -> str:
    """JSON of a plain value; raises ValueError on NaN, which `plain` leaves none of."""
    return json.dumps(value, allow_nan=False, separators=(",", ":"), ensure_ascii=False)


def _array(values: np.ndarray) -> object:
    if values.ndim > 1 or values.size > LARGEST_ARRAY:
        return {"left_out": f"array of shape {values.shape}"}
    return [plain(item) for item in values.tolist()]
