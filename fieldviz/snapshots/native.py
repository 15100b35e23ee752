"""The native layout, version 1: what is where in a file that fieldviz writes.

::

    /                 attributes: fieldviz_layout = 1, time, mu0, gm, [gamma], [title],
                      [length_unit, length_unit_label, and the same for mass and time]
    /grid/r_edges     (n_blocks, n_r + 1), and theta_edges, phi_edges alike
    /grid/level       (n_blocks,) whole numbers, may be absent
    /cells/NAME       (n_blocks, n_phi, n_theta, n_r)
    /faces/magnetic_r|theta|phi   one more entry along their own axis
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path

import h5py
import numpy as np

from fieldviz.errors import FieldvizError, MissingFieldError, SnapshotFileError
from fieldviz.snapshots.field_in_file import BlockPiece, FieldInFile, FileFields
from fieldviz.snapshots.hdf5_access import check_fits_memory, safe_dataset, safe_member, text
from fieldviz.wedge.fields import missing_sentence, usable_dtype
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot, face_shape
from fieldviz.wedge.typing import Array
from fieldviz.wedge.units import Unit, UnitScales

__all__ = ["LAYOUT_MARK", "LAYOUT_VERSION", "is_native", "open_native", "read_number"]

LAYOUT_MARK = "fieldviz_layout"
LAYOUT_VERSION = 1
_UNIT_NAMES = ("length", "mass", "time")


def is_native(file: h5py.File) -> bool:
    """Whether a file carries the mark of the native layout."""
    return LAYOUT_MARK in file.attrs


def open_native(file: h5py.File, path: Path, fields: Sequence[str] | None) -> Snapshot:
    """Describe a native file as a snapshot whose fields are read when used.

    Parameters
    ----------
    file : h5py.File
    path : Path
    fields : sequence of str, optional
        Only these fields; all by default.

    Returns
    -------
    Snapshot
    """
    version = int(read_number(file, LAYOUT_MARK, path))
    if version != LAYOUT_VERSION:
        raise SnapshotFileError(
            f"Cannot read {path}: expected {LAYOUT_MARK} {LAYOUT_VERSION}, got {version}; "
            "update fieldviz."
        )
    edges = [_edges(file, path, name) for name in ("r", "theta", "phi")]
    # Edges that disagree are the grid's to complain of, before levels can disagree with them.
    agree = len({len(axis) for axis in edges}) == 1
    level = _level(file, path, len(edges[0])) if agree else None
    with _naming(path):
        grid = WedgeGrid(edges[0], edges[1], edges[2], level)
    cell_plans = _plans(file, path, grid, "cells")
    face_plans = _plans(file, path, grid, "faces")
    if fields is not None:
        cell_plans, face_plans = _chosen(cell_plans, face_plans, fields)
    gamma = read_number(file, "gamma", path) if "gamma" in file.attrs else None
    time, mu0, gm = (read_number(file, name, path) for name in ("time", "mu0", "gm"))
    units = _units(file, path)
    with _naming(path):
        return Snapshot(
            grid,
            FileFields(path, cell_plans),
            FileFields(path, face_plans),
            time=time,
            mu0=mu0,
            gm=gm,
            gamma=gamma,
            title=text(file.attrs.get("title", "")),
            units=units,
            source=str(path),
        )


def read_number(file: h5py.File, name: str, path: Path) -> float:
    """One real attribute of the root group."""
    if name not in file.attrs:
        raise SnapshotFileError(
            f"Cannot read {path}: expected an attribute '{name}' of the root group, got none; "
            "add it to the file."
        )
    value = file.attrs[name]
    try:
        single = np.size(value) == 1 and not np.iscomplexobj(value)
        number = float(np.asarray(value).reshape(-1)[0]) if single else np.nan
    except (TypeError, ValueError):
        number = np.nan
    if not np.isfinite(number):
        raise SnapshotFileError(
            f"Cannot read {path}: expected the attribute '{name}' to be one finite number, "
            f"got {text(value)!r}; mend it in the file."
        )
    return number


def _edges(file: h5py.File, path: Path, name: str) -> Array:
    dataset = safe_dataset(file, f"grid/{name}_edges")
    if dataset.ndim != 2 or dataset.dtype.kind not in "fiu":
        raise SnapshotFileError(
            f"Cannot read {path}: expected grid/{name}_edges to be numbers of shape "
            f"(n_blocks, n + 1), got shape {dataset.shape} of type {dataset.dtype}; "
            "check how the file was written."
        )
    check_fits_memory(f"grid/{name}_edges of {path}", np.prod(dataset.shape, dtype=float), 8)
    return np.asarray(dataset[...], dtype=np.float64)


def _level(file: h5py.File, path: Path, n_blocks: int) -> Array | None:
    if safe_member(file, "grid/level") is None:
        return None
    dataset = safe_dataset(file, "grid/level")
    # Looked at before it is read: an absurd size must not take memory.
    if dataset.shape != (n_blocks,) or dataset.dtype.kind not in "iu":
        raise SnapshotFileError(
            f"Cannot read {path}: expected grid/level to be {n_blocks} whole numbers, got shape "
            f"{dataset.shape} of type {dataset.dtype}; mend it, or remove it and the levels are "
            "worked out."
        )
    return np.asarray(dataset[...])


@contextmanager
def _naming(path: Path, where: str = "") -> Iterator[None]:
    """Put the file's name before what the model says of its content."""
    try:
        yield
    except FieldvizError as error:
        place = f"In '{where}' of {path}" if where else f"In {path}"
        raise type(error)(f"{place}: {error}") from error


def _plans(file: h5py.File, path: Path, grid: WedgeGrid, kind: str) -> dict[str, FieldInFile]:
    group = safe_member(file, kind)
    if group is None:
        return {}
    if not isinstance(group, h5py.Group):
        raise SnapshotFileError(
            f"Cannot read {path}: expected '{kind}' to be a group of datasets, got one dataset; "
            "check how the file was written."
        )
    plans = {}
    for name in group:
        with _naming(path):
            shape = grid.block_shape if kind == "cells" else face_shape(name, grid.block_shape)
        where = f"{kind}/{name}"
        dataset = safe_dataset(file, where)
        expected = (grid.n_blocks, *shape)
        if dataset.shape != expected:
            raise SnapshotFileError(
                f"Cannot read {path}: expected '{where}' of shape {expected} "
                f"(block, phi, theta, r), got {dataset.shape}; grid and fields disagree."
            )
        with _naming(path, where):
            usable_dtype(dataset.dtype)
        pieces = tuple(
            BlockPiece(where, (block, slice(None), slice(None), slice(None)))
            for block in range(grid.n_blocks)
        )
        plans[name] = FieldInFile(pieces, shape, dataset.dtype, whole=where)
    return plans


def _chosen(
    cells: dict[str, FieldInFile], faces: dict[str, FieldInFile], fields: Sequence[str]
) -> tuple[dict[str, FieldInFile], dict[str, FieldInFile]]:
    for name in fields:
        if name not in cells and name not in faces:
            raise MissingFieldError(missing_sentence(name, cells | faces))
    return (
        {name: plan for name, plan in cells.items() if name in fields},
        {name: plan for name, plan in faces.items() if name in fields},
    )


def _units(file: h5py.File, path: Path) -> UnitScales:
    scales = {}
    for name in _UNIT_NAMES:
        if f"{name}_unit" in file.attrs:
            value = read_number(file, f"{name}_unit", path)
            label = text(file.attrs.get(f"{name}_unit_label", f"{name} unit"))
            with _naming(path, f"{name}_unit"):
                scales[name] = Unit(value, label)
    return UnitScales(**scales)
