"""What is in any HDF5 file: groups, datasets, attributes; links to other files are only named."""

from __future__ import annotations

from dataclasses import dataclass

import h5py
import numpy as np

from fieldviz.errors import SnapshotFileError
from fieldviz.snapshots.hdf5_access import safe_dataset, text

__all__ = ["AttributeEntry", "DatasetEntry", "Listing", "list_file", "type_name"]

_LONGEST_ATTRIBUTE = 4096
_DEEPEST = 32
_MOST_OBJECTS = 200_000


@dataclass(frozen=True)
class DatasetEntry:
    """One dataset.

    Attributes
    ----------
    path : str
    shape : tuple of int
    dtype : np.dtype
    unit : str
        Its attribute `units` or `unit`, else empty.
    problem : str
        Why it cannot be read, else empty.
    """

    path: str
    shape: tuple[int, ...]
    dtype: np.dtype
    unit: str = ""
    problem: str = ""

    @property
    def name(self) -> str:
        """Last part of the path."""
        return self.path.rpartition("/")[2]

    @property
    def group(self) -> str:
        """Path of the group it is in."""
        return self.path.rpartition("/")[0] or "/"

    @property
    def is_numeric(self) -> bool:
        """Whether it holds real numbers that can be read."""
        return self.dtype.kind in "fiub" and not self.problem


@dataclass(frozen=True)
class AttributeEntry:
    """One attribute: its owner's path, its name and its value as plain data."""

    owner: str
    name: str
    value: float | int | str | list[object]

    @property
    def reference(self) -> str:
        """How a layout description points at it."""
        return f"{self.owner}@{self.name}" if self.owner != "/" else f"@{self.name}"


@dataclass(frozen=True)
class Listing:
    """All that was found.

    Attributes
    ----------
    datasets : tuple of DatasetEntry
    attributes : tuple of AttributeEntry
    links : tuple of str
        Links to other files, which are not followed, and groups too deep to look into.
    """

    datasets: tuple[DatasetEntry, ...]
    attributes: tuple[AttributeEntry, ...]
    links: tuple[str, ...]


def list_file(file: h5py.File) -> Listing:
    """List a file without reading any dataset.

    Parameters
    ----------
    file : h5py.File
        Open for reading.

    Returns
    -------
    Listing
    """
    datasets: list[DatasetEntry] = []
    links: list[str] = []
    attributes = _attributes(file, "/")
    seen = {h5py.h5o.get_info(file.id).addr}
    todo: list[tuple[h5py.Group, str]] = [(file, "")]
    while todo:
        group, path = todo.pop(0)
        for name in group:
            where = f"{path}/{name}"
            link = group.get(name, getlink=True)
            if isinstance(link, h5py.ExternalLink):
                links.append(f"{where} (a link to {link.filename})")
            if not isinstance(link, h5py.HardLink):
                continue
            found = group[name]
            address = h5py.h5o.get_info(found.id).addr
            if address in seen:
                continue
            seen.add(address)
            if len(seen) > _MOST_OBJECTS:
                return Listing(tuple(datasets), tuple(attributes), (*links, "(and more)"))
            attributes += _attributes(found, where)
            if isinstance(found, h5py.Dataset):
                datasets.append(_dataset_entry(file, found, where))
            elif isinstance(found, h5py.Group) and where.count("/") < _DEEPEST:
                todo.append((found, where))
            elif isinstance(found, h5py.Group):
                links.append(f"{where} (too deep, not looked into)")
    return Listing(tuple(datasets), tuple(attributes), tuple(links))


def _dataset_entry(file: h5py.File, dataset: h5py.Dataset, where: str) -> DatasetEntry:
    problem = "" if dataset.shape is not None else "empty"
    try:
        safe_dataset(file, where)
    except SnapshotFileError:
        problem = "data kept in other files"
    unit = ""
    for name in ("units", "unit", "Units", "Unit"):
        if name in dataset.attrs and not unit:
            value = _plain(dataset, name)
            unit = value if isinstance(value, str) else ""
    try:
        dtype = dataset.dtype
    except TypeError:
        dtype, problem = np.dtype("V1"), "a type that cannot be read"
    return DatasetEntry(where, dataset.shape or (), dtype, unit, problem)


def _attributes(owner: h5py.Group | h5py.Dataset, path: str) -> list[AttributeEntry]:
    found = []
    for name in owner.attrs:
        value = _plain(owner, name)
        if value is not None:
            found.append(AttributeEntry(path, name, value))
    return found


def _plain(owner: h5py.Group | h5py.Dataset, name: str) -> float | int | str | list[object] | None:
    """Give an attribute as plain data; None for what is absurdly long or of a strange type."""
    try:
        shape = owner.attrs.get_id(name).shape
        if shape is None or np.prod(shape, dtype=float) > _LONGEST_ATTRIBUTE:
            return None
        value = np.asarray(owner.attrs[name])
    except (OSError, TypeError, ValueError, KeyError, RuntimeError):
        return None  # A type of number or text that has no counterpart here.
    if value.dtype.kind in "SUO":
        texts: list[object] = [text(item) for item in value.reshape(-1)]
        return str(texts[0]) if value.ndim == 0 and texts else texts
    if value.dtype.kind not in "fiub":
        return None
    plain: float | int | list[object] = value.tolist()
    return plain


def type_name(dtype: np.dtype) -> str:
    """Name a stored type in words: "float32", "float64 big-endian", "text"."""
    if dtype.kind in "SUO":
        return "text"
    if dtype.kind == "V":
        return "compound"
    big = dtype.byteorder == ">" and dtype.itemsize > 1
    return f"{dtype.newbyteorder('=').name}{' big-endian' if big else ''}"
