"""What a layout description points at: datasets, attributes, and groups that match a pattern.

A reference is the path of a dataset, or "path@name" for an attribute; "@name" is an attribute of
the group one stands in. A path that starts with "/" starts at the root of the file.
"""

from __future__ import annotations

import fnmatch
import re

import h5py
import numpy as np

from fieldviz.errors import LayoutError, SnapshotFileError
from fieldviz.snapshots.hdf5_access import check_fits_memory, safe_dataset, safe_member, text
from fieldviz.snapshots.layout_tables import nearest
from fieldviz.wedge.typing import Array

__all__ = [
    "absolute",
    "matching_groups",
    "natural_key",
    "read_names",
    "read_number_at",
    "read_numbers",
    "read_text_at",
]


def absolute(base: str, path: str) -> str:
    """Give the full path of `path` as seen from the group `base`."""
    return path if path.startswith("/") else f"{base.rstrip('/')}/{path}"


def natural_key(name: str) -> list[tuple[int, int, str]]:
    """Give a sorting key by which "block_2" stands before "block_10"."""
    parts = re.findall(r"\d+|\D+", name)
    return [(0, int(part), "") if part.isdecimal() else (1, 0, part) for part in parts]


def matching_groups(file: h5py.File, pattern: str) -> list[str]:
    """Find the groups that match a pattern, in natural order."""
    found = [""]
    for part in pattern.strip("/").split("/"):
        deeper = []
        for path in found:
            group = safe_member(file, path) if path else file
            if isinstance(group, h5py.Group):
                names = sorted(fnmatch.filter(group, part), key=natural_key)
                deeper += [f"{path}/{name}" for name in names]
        found = deeper
    groups = [path for path in found if isinstance(safe_member(file, path), h5py.Group)]
    if not groups:
        raise LayoutError(
            f"Cannot read {file.filename}: expected groups that match '{pattern}', got none; the "
            f"root group holds {_some(list(file))}."
        )
    return groups


def _raw(file: h5py.File, base: str, reference: str, what: str) -> np.ndarray:
    path, mark, name = reference.partition("@")
    if not mark:
        dataset = safe_dataset(file, absolute(base, reference))
        if dataset.shape is None:
            raise SnapshotFileError(
                f"Cannot read {file.filename}: expected {what} in '{reference}', got an empty "
                "dataset; name another one."
            )
        size = max(dataset.dtype.itemsize, 8)
        check_fits_memory(
            f"'{reference}' of {file.filename}", float(np.prod(dataset.shape, dtype=float)), size
        )
        return np.asarray(dataset[()])
    where = absolute(base, path) if path else base
    owner = safe_member(file, where) if where.strip("/") else file
    if owner is None:
        raise SnapshotFileError(
            f"Cannot read {file.filename}: expected '{where}' with an attribute '{name}' for "
            f"{what}, got no such group or dataset; `fieldviz inspect` lists what the file has."
        )
    if name not in owner.attrs:
        raise SnapshotFileError(
            f"Cannot read {file.filename}: expected an attribute '{name}' of '{where}' for "
            f"{what}, got none{nearest(name, owner.attrs)}; '{where}' has "
            f"{_some(list(owner.attrs))}."
        )
    return np.asarray(owner.attrs[name])


def read_numbers(file: h5py.File, base: str, reference: str, what: str) -> Array:
    """Read the real numbers of a dataset or an attribute, in double precision."""
    raw = _raw(file, base, reference, what)
    if raw.dtype.kind not in "fiu":
        raise SnapshotFileError(
            f"Cannot read {file.filename}: expected {what} in '{reference}' to be real numbers, "
            f"got type {raw.dtype}; name another dataset or attribute."
        )
    return np.asarray(raw, dtype=np.float64)


def read_number_at(file: h5py.File, base: str, reference: str, what: str) -> float:
    """Read the one finite number of a dataset or an attribute."""
    values = read_numbers(file, base, reference, what)
    if values.size != 1 or not np.isfinite(values).all():
        got = f"{values.size} numbers" if values.size != 1 else str(values.reshape(-1)[0])
        raise SnapshotFileError(
            f"Cannot read {file.filename}: expected {what} in '{reference}' to be one finite "
            f"number, got {got}; mend it in the file, or give it in the layout description."
        )
    return float(values.reshape(-1)[0])


def read_names(file: h5py.File, base: str, reference: str, what: str) -> tuple[str, ...]:
    """Read the texts of a dataset or an attribute, without padding."""
    raw = _raw(file, base, reference, what)
    if raw.dtype.kind not in "SUO":
        raise SnapshotFileError(
            f"Cannot read {file.filename}: expected {what} in '{reference}' to be texts, "
            f"got type {raw.dtype}; name another dataset, or list the names in the description."
        )
    names = tuple(text(value).strip() for value in raw.reshape(-1))
    if len(names) == 1 and re.search(r"[\s,;]", names[0]):
        return tuple(re.split(r"[\s,;]+", names[0]))
    return names


def read_text_at(file: h5py.File, base: str, reference: str, what: str) -> str:
    """Read one text."""
    return text(_raw(file, base, reference, what)).strip()


def _some(names: list[str]) -> str:
    shown = ", ".join(names[:8]) or "nothing"
    return f"{shown} and {len(names) - 8} more" if len(names) > 8 else shown
