"""Where a field lies in a file, and how its axes run there.

One description serves the native layout and every foreign one: which dataset, which slices, which
axis is which, what is turned round, what it is multiplied with.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from fieldviz.errors import FieldvizError, MissingFieldError, SnapshotFileError
from fieldviz.snapshots.hdf5_access import check_fits_memory, open_hdf5, safe_dataset
from fieldviz.wedge.fields import Fields, missing_sentence, usable_dtype
from fieldviz.wedge.typing import Array

__all__ = ["BlockPiece", "FieldInFile", "FileFields"]

_MANY_VALUES = 1e7
Selection = tuple[int | slice, ...]


@dataclass(frozen=True)
class BlockPiece:
    """One block of one field.

    Attributes
    ----------
    dataset : str
        Path of the dataset.
    selection : tuple of int and slice
        What to take of it; a whole number drops its axis.
    """

    dataset: str
    selection: Selection


@dataclass(frozen=True)
class FieldInFile:
    """All blocks of one field.

    Attributes
    ----------
    pieces : tuple of BlockPiece
        One per block, in block order.
    shape : (int, int, int)
        (n_phi, n_theta, n_r) of a block as the model sees it.
    order : tuple of str
        Names of the axes that a piece's selection leaves, slowest first: some of "phi", "theta",
        "r". An axis that is not named has length 1.
    reversed_axes : frozenset of str
        Axes stored in falling order of our coordinate.
    factor : float
        What stored values are multiplied with (scale times sign).
    stored : np.dtype
        Type in the file.
    whole : str or None
        Dataset whose plain content is all blocks in the model's own order, if there is one: then
        the field is read in one go.
    """

    pieces: tuple[BlockPiece, ...]
    shape: tuple[int, int, int]
    stored: np.dtype
    order: tuple[str, ...] = ("phi", "theta", "r")
    reversed_axes: frozenset[str] = field(default_factory=frozenset)
    factor: float = 1.0
    whole: str | None = None

    @property
    def dtype(self) -> np.dtype:
        """Type of the values once read."""
        return usable_dtype(self.stored)

    def read_block(self, file: h5py.File, block: int) -> Array:
        """One block, (n_phi, n_theta, n_r), in native byte order."""
        piece = self.pieces[block]
        n_values = float(np.prod(self.shape, dtype=float))
        if n_values > _MANY_VALUES:
            check_fits_memory(f"'{piece.dataset}'", n_values, self.dtype.itemsize)
        return self._as_model(self._selected(safe_dataset(file, piece.dataset), piece.selection))

    def read_part(self, file: h5py.File, block: int, where: tuple[slice, slice, slice]) -> Array:
        """A part of one block; `where` are slices along phi, theta and r with step 1."""
        piece = self.pieces[block]
        ranges = {
            name: part.indices(n)[:2]
            for name, part, n in zip(("phi", "theta", "r"), where, self.shape, strict=True)
        }
        axes = list(self.order)
        selection: list[int | slice] = []
        for taken in piece.selection:
            if not isinstance(taken, slice):
                selection.append(taken)
                continue
            name = axes.pop(0)
            n = self.shape[("phi", "theta", "r").index(name)]
            low, high = ranges[name]
            if name in self.reversed_axes:
                low, high = n - high, n - low
            first = taken.start or 0
            selection.append(slice(first + low, first + high))
        shape = tuple(high - low for low, high in ranges.values())
        dataset = safe_dataset(file, piece.dataset)
        return self._as_model(self._selected(dataset, tuple(selection)), shape)

    def _selected(self, dataset: h5py.Dataset, selection: Selection) -> Array:
        if self.stored.kind == "b":  # HDF5 converts no truth values.
            return np.asarray(dataset[selection], dtype=self.dtype)
        return np.asarray(dataset.astype(self.dtype)[selection])

    def read(self, file: h5py.File) -> Array:
        """All blocks, (n_blocks, n_phi, n_theta, n_r)."""
        values = np.empty((len(self.pieces), *self.shape), dtype=self.dtype)
        if self.whole is not None:
            safe_dataset(file, self.whole).read_direct(values)
            return values
        for block in range(len(self.pieces)):
            values[block] = self.read_block(file, block)
        return values

    def _as_model(self, stored: Array, shape: tuple[int, ...] | None = None) -> Array:
        axes = [self.order.index(name) for name in ("phi", "theta", "r") if name in self.order]
        values = stored.transpose(axes).reshape(shape or self.shape)
        turned: Any = tuple(
            slice(None, None, -1 if name in self.reversed_axes else 1)
            for name in ("phi", "theta", "r")
        )
        values = values[turned]
        if self.factor != 1.0:
            values = values * self.dtype.type(self.factor)
        return np.ascontiguousarray(values)


class FileFields(Fields):
    """Fields of a file; one is read when it is first used and then kept.

    Parameters
    ----------
    path : Path
    plans : mapping of str to FieldInFile
    """

    def __init__(self, path: Path, plans: Mapping[str, FieldInFile]) -> None:
        self._path = path
        self._plans = dict(plans)
        self._kept: dict[str, Array] = {}

    def __getitem__(self, name: str) -> Array:
        if name not in self._kept:
            plan = self._plan(name)
            n_values = float(len(plan.pieces)) * float(np.prod(plan.shape, dtype=float))
            check_fits_memory(f"'{name}' of {self._path}", n_values, plan.dtype.itemsize)
            with self._reading(name) as file:
                self._kept[name] = plan.read(file)
        return self._kept[name]

    def block(self, name: str, block: int) -> Array:
        """One block; read from the file unless the whole field is here already."""
        if name in self._kept:
            return self._kept[name][block]
        plan = self._plan(name)
        with self._reading(name) as file:
            return plan.read_block(file, block)

    def part(self, name: str, block: int, where: tuple[slice, slice, slice]) -> Array:
        """A part of one block; read from the file unless the whole field is here already."""
        if name in self._kept:
            return self._kept[name][block][where]
        plan = self._plan(name)
        with self._reading(name) as file:
            return plan.read_part(file, block, where)

    @contextmanager
    def _reading(self, name: str) -> Iterator[h5py.File]:
        with open_hdf5(self._path) as file:
            try:
                yield file
            except FieldvizError:
                raise
            except (TypeError, ValueError, IndexError) as error:
                # The plan fitted when it was made.
                raise SnapshotFileError(
                    f"Cannot read '{name}' of {self._path}: expected the dataset that was there "
                    "before, got another shape or type, so the file has changed since it was "
                    "opened; open it again."
                ) from error

    def _plan(self, name: str) -> FieldInFile:
        if name not in self._plans:
            raise MissingFieldError(missing_sentence(name, self._plans))
        return self._plans[name]

    def stored_dtype(self, name: str) -> np.dtype:
        """Type in which the file holds a field."""
        return self._plan(name).stored

    def origin(self, name: str) -> tuple[str, float]:
        """Dataset a field comes from (of its first block), and the factor applied to it."""
        plan = self._plan(name)
        return plan.pieces[0].dataset, plan.factor

    def __iter__(self) -> Iterator[str]:
        return iter(self._plans)

    def __len__(self) -> int:
        return len(self._plans)

    def __contains__(self, name: object) -> bool:
        return name in self._plans
