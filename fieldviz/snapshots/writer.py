"""Write a snapshot in the native layout; the file appears whole or not at all."""

from __future__ import annotations

from pathlib import Path

import h5py
import numpy as np

from fieldviz.errors import SnapshotFileError
from fieldviz.output import whole_file
from fieldviz.snapshots.hdf5_sink import new_hdf5
from fieldviz.snapshots.native import LAYOUT_MARK, LAYOUT_VERSION
from fieldviz.wedge.fields import Fields
from fieldviz.wedge.snapshot import Snapshot

__all__ = ["write_snapshot"]


def write_snapshot(path: str | Path, snapshot: Snapshot, *, compress: bool = False) -> None:
    """Write a snapshot, block by block.

    Parameters
    ----------
    path : str or Path
        Final name; an older file of that name is replaced once the new one is whole.
    snapshot : Snapshot
    compress : bool
        Store each block gzip-compressed: smaller, slower to read.

    Raises
    ------
    SnapshotFileError
        If the file cannot be written; nothing is left under `path`.

    Examples
    --------
    >>> import fieldviz as fv
    >>> disc = fv.demo_disc(shape=(4, 32, 24))
    >>> fv.write_snapshot("disc.h5", disc)  # doctest: +SKIP
    """
    _check_names(path, snapshot)
    with whole_file(path) as temporary, new_hdf5(temporary) as (file, sink):
        _write_attributes(file, snapshot)
        for name in ("r_edges", "theta_edges", "phi_edges", "level"):
            file[f"grid/{name}"] = getattr(snapshot.grid, name)
        for kind, fields in (("cells", snapshot.cells), ("faces", snapshot.faces)):
            for name in fields:
                _write_field(file, f"{kind}/{name}", fields, name, snapshot.grid.n_blocks, compress)
                sink.check()


def _check_names(path: str | Path, snapshot: Snapshot) -> None:
    for name in (*snapshot.cells, *snapshot.faces):
        if name in ("", ".") or "/" in name or "\0" in name:
            raise SnapshotFileError(
                f"Cannot write {path}: expected a field name without '/' and NUL, got {name!r}; "
                "rename the field."
            )


def _write_attributes(file: h5py.File, snapshot: Snapshot) -> None:
    file.attrs[LAYOUT_MARK] = LAYOUT_VERSION
    for name in ("time", "mu0", "gm"):
        file.attrs[name] = float(getattr(snapshot, name))
    if snapshot.gamma is not None:
        file.attrs["gamma"] = float(snapshot.gamma)
    if snapshot.title:
        file.attrs["title"] = _stored(snapshot.title)
    for name in ("length", "mass", "time"):
        unit = getattr(snapshot.units, name)
        if unit is not None:
            file.attrs[f"{name}_unit"] = unit.value
            file.attrs[f"{name}_unit_label"] = _stored(unit.label)


def _stored(words: str) -> np.bytes_ | h5py.Empty:
    # Of fixed length: words of variable length lie in a heap, and the HDF5 library can search a
    # damaged heap for ever.
    return np.bytes_(words.encode()) if words else h5py.Empty("S1")


def _write_field(
    file: h5py.File, where: str, fields: Fields, name: str, n_blocks: int, compress: bool
) -> None:
    first = fields.block(name, 0)
    options: dict[str, object] = {}
    if compress:
        options = {"chunks": (1, *first.shape), "compression": "gzip", "shuffle": True}
    dataset = file.create_dataset(where, (n_blocks, *first.shape), dtype=first.dtype, **options)
    dataset[0] = first
    for block in range(1, n_blocks):
        dataset[block] = np.ascontiguousarray(fields.block(name, block))
