"""Fields of a described file: which dataset, which slice, which axis is which."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import h5py
import numpy as np

from fieldviz.errors import FieldvizError, LayoutError, SnapshotFileError
from fieldviz.snapshots.field_in_file import BlockPiece, FieldInFile
from fieldviz.snapshots.hdf5_access import safe_dataset, safe_member
from fieldviz.snapshots.layout_description import LayoutDescription
from fieldviz.snapshots.layout_tables import AXES, FieldTable, StackTable, nearest
from fieldviz.snapshots.references import absolute, read_names
from fieldviz.wedge.fields import usable_dtype
from fieldviz.wedge.snapshot import face_shape

__all__ = ["LocatedField", "Tile", "field_tables", "locate", "plan_field"]

Shape = tuple[int, int, int]


@dataclass(frozen=True)
class LocatedField:
    """One field in one dataset.

    Attributes
    ----------
    dataset : str
    order : tuple of str
        Names of all its axes.
    shape : tuple of int
    dtype : np.dtype
    variable : int or None
        Position along "variable".
    """

    dataset: str
    order: tuple[str, ...]
    shape: tuple[int, ...]
    dtype: np.dtype
    variable: int | None = None

    @property
    def n_blocks(self) -> int:
        """Blocks this dataset holds."""
        return self.shape[self.order.index("block")] if "block" in self.order else 1

    def cell_counts(self, layout: LayoutDescription, kind: str, name: str) -> Shape:
        """(n_phi, n_theta, n_r) of a block, without ghosts and without a face's extra entry."""
        extra = face_shape(name, (0, 0, 0)) if kind == "faces" else (0, 0, 0)
        counts = []
        for axis, more in zip(AXES, extra, strict=True):
            if axis not in self.order:
                counts.append(1)
                continue
            ghosts = 2 * layout.axes.ghost_cells.get(axis, 0)
            stored = self.shape[self.order.index(axis)]
            if stored - ghosts - more < 1:
                raise LayoutError(
                    f"Cannot use [{kind}.{name}]: expected '{self.dataset}' to have more than "
                    f"{ghosts + more} entries along {axis}, got {stored}; check order and "
                    "ghost_cells of [axes]."
                )
            counts.append(stored - ghosts - more)
        return counts[0], counts[1], counts[2]


@dataclass(frozen=True)
class Tile:
    """A part of a stored block that becomes one block of the model.

    Attributes
    ----------
    stored_block : int
    start : (int, int, int)
        First cell (phi, theta, r) in the order of the model.
    """

    stored_block: int
    start: Shape = (0, 0, 0)


def field_tables(layout: LayoutDescription) -> Iterator[tuple[str, str, FieldTable]]:
    """(kind, name, table) of all cell fields, then of all face fields."""
    for kind, tables in (("cells", layout.cells), ("faces", layout.faces)):
        for name, table in tables.items():
            yield kind, name, table


def locate(
    file: h5py.File, layout: LayoutDescription, kind: str, name: str, table: FieldTable, base: str
) -> LocatedField | None:
    """Find a field as seen from the group `base`; None if it is optional and not there."""
    where = f"[{kind}.{name}]"
    if bool(table.dataset) == bool(table.stack):
        raise LayoutError(
            f"Cannot use {where}: expected either dataset or stack, got "
            f"{'both' if table.dataset else 'neither'}; say where the field is."
        )
    stack = _stack(layout, where, table)
    path = absolute(base, stack.dataset if stack else table.dataset)
    if table.optional and safe_member(file, path) is None:
        return None
    dataset = safe_dataset(file, path)
    variable = None
    if stack is not None:
        variable = _variable(file, base, where, table, stack)
        if variable is None:
            return None
    order = _order(layout, where, table, stack)
    if face_needs_phi(kind, name, order):
        raise LayoutError(
            f"Cannot use {where}: expected faces across phi, got an order without phi; "
            "map the dataset as a cell field instead."
        )
    _check_dataset(dataset, where, path, order, variable)
    return LocatedField(path, order, dataset.shape, dataset.dtype, variable)


def face_needs_phi(kind: str, name: str, order: Sequence[str]) -> bool:
    """Whether a face field lacks the very axis it is face-centred along."""
    return kind == "faces" and name == "magnetic_phi" and "phi" not in order


def _stack(layout: LayoutDescription, where: str, table: FieldTable) -> StackTable | None:
    if not table.stack:
        return None
    if table.stack not in layout.stacks:
        raise LayoutError(
            f"Cannot use {where}: expected a stack out of {', '.join(layout.stacks) or 'none'}, "
            f"got '{table.stack}'{nearest(table.stack, layout.stacks)}; add [stacks.{table.stack}]."
        )
    stack = layout.stacks[table.stack]
    if not stack.dataset or table.variable is None:
        lacking = "variable" if stack.dataset else f"dataset in [stacks.{table.stack}]"
        raise LayoutError(
            f"Cannot use {where}: expected a {lacking}, got none; say which one it is."
        )
    return stack


def _variable(
    file: h5py.File, base: str, where: str, table: FieldTable, stack: StackTable
) -> int | None:
    if isinstance(table.variable, int):
        return table.variable
    names = stack.names
    if stack.names_from:
        names = read_names(file, base, stack.names_from, f"the variables of {where}")
    if table.variable in names:
        return names.index(table.variable)
    if table.optional:
        return None
    assert table.variable is not None
    raise LayoutError(
        f"Cannot use {where} with {file.filename}: expected a variable out of "
        f"{', '.join(names) or 'an empty list'}, got '{table.variable}'"
        f"{nearest(table.variable, names)}; mend the name or the list of the stack."
    )


def _order(
    layout: LayoutDescription, where: str, table: FieldTable, stack: StackTable | None
) -> tuple[str, ...]:
    order = table.order or (stack.order if stack else ()) or layout.axes.order
    wanted = {"block": layout.blocks.stored == "axis", "variable": stack is not None}
    for axis, needed in wanted.items():
        if needed and axis not in order:
            raise LayoutError(
                f"Cannot use {where}: expected an order that names the {axis} axis, got "
                f'{list(order)}; add "{axis}" where it stands, slowest first.'
            )
    return tuple(axis for axis in order if wanted.get(axis, True))


def _check_dataset(
    dataset: h5py.Dataset, where: str, path: str, order: tuple[str, ...], variable: int | None
) -> None:
    shape = dataset.shape
    if shape is None or len(shape) != len(order):
        raise LayoutError(
            f"Cannot use {where}: expected '{path}' with {len(order)} axes {list(order)}, got "
            f"shape {shape}; mend the order, or name another dataset."
        )
    for axis, length in zip(order, shape, strict=True):
        if axis == "one" and length != 1:
            raise LayoutError(
                f"Cannot use {where}: expected the axis \"one\" of '{path}' to have length 1, got "
                f"shape {shape} for {list(order)}; mend the order."
            )
        if axis == "variable" and variable is not None and variable >= length:
            raise LayoutError(
                f"Cannot use {where}: expected variable {variable} within the {length} variables "
                f"of '{path}' (counted from 0), got shape {shape} for {list(order)}; mend the "
                "list of names or the order."
            )
    try:
        usable_dtype(dataset.dtype)
    except FieldvizError:
        raise SnapshotFileError(
            f"Cannot use {where}: expected real numbers in '{path}', got type {dataset.dtype}; "
            "name another dataset."
        ) from None


def plan_field(
    layout: LayoutDescription,
    kind: str,
    name: str,
    located: Sequence[LocatedField],
    tiles: Sequence[Tile],
    counts: Sequence[Shape],
    tile_shape: Shape,
    reversed_axes: frozenset[str],
) -> FieldInFile:
    """How to read a field block by block.

    Parameters
    ----------
    layout : LayoutDescription
    kind, name : str
        "cells" or "faces", and the field.
    located : sequence of LocatedField
        One, or one per stored block.
    tiles : sequence of Tile
        Blocks of the model.
    counts : sequence of shape
        Cells of each stored block.
    tile_shape : (int, int, int)
        Cells of a model block.
    reversed_axes : frozenset of str
        Axes stored in falling order of our coordinate.
    """
    taken = _stored_shape(kind, name, tile_shape)
    pieces = []
    for tile in tiles:
        place = located[tile.stored_block if len(located) > 1 else 0]
        stored = _stored_shape(kind, name, counts[tile.stored_block])
        selection: list[int | slice] = []
        for axis in place.order:
            if axis not in AXES:
                index = {"block": tile.stored_block, "variable": place.variable or 0, "one": 0}
                selection.append(index[axis])
                continue
            n = AXES.index(axis)
            start = tile.start[n]
            if axis in reversed_axes:
                start = stored[n] - start - taken[n]
            start += layout.axes.ghost_cells.get(axis, 0)
            selection.append(slice(start, start + taken[n]))
        pieces.append(BlockPiece(place.dataset, tuple(selection)))
    table = (layout.cells if kind == "cells" else layout.faces)[name]
    return FieldInFile(
        tuple(pieces),
        taken,
        _stored_type({place.dtype for place in located}),
        order=tuple(axis for axis in located[0].order if axis in AXES),
        reversed_axes=reversed_axes,
        factor=table.scale * table.sign,
    )


def _stored_shape(kind: str, name: str, cells: Shape) -> Shape:
    n_phi, n_theta, n_r = cells if kind == "cells" else face_shape(name, cells)
    return n_phi, n_theta, n_r


def _stored_type(dtypes: set[np.dtype]) -> np.dtype:
    return dtypes.pop() if len(dtypes) == 1 else np.result_type(*dtypes)
