"""Snapshots out of VTK objects: what a block must carry so that its meaning survives a pipeline.

Cell values travel as cell arrays. What VTK has no place for travels as field data of every block,
which filters of any VTK program hand on: exact edges, the block's number and level, the width of
its halo, face-centred fields, constants and units. Nothing is copied on the way into VTK; on the
way back a block without halo is a view.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

import numpy as np
from vtkmodules.util.numpy_support import numpy_to_vtk
from vtkmodules.vtkCommonCore import vtkStringArray
from vtkmodules.vtkCommonDataModel import (
    vtkDataObject,
    vtkFieldData,
    vtkMultiBlockDataSet,
    vtkStructuredGrid,
)

from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.vtk_data.block_parts import (
    BLOCK,
    EDGES,
    FACES,
    HALO,
    MADE,
    BlockParts,
    block_parts,
    leaves,
)
from fieldviz.wedge.fields import Fields, missing_sentence, usable_dtype
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["keep_meaning", "keep_meaning_of_tree", "snapshot_from_vtk", "snapshot_of_parts"]

_NO_HALO = (0, 0, 0, 0, 0, 0)


def keep_meaning(
    block_data: vtkStructuredGrid,
    snapshot: Snapshot,
    block: int,
    *,
    halo: Sequence[int] = _NO_HALO,
    faces: bool = True,
) -> None:
    """Write into a block's field data what `snapshot_from_vtk` needs.

    Parameters
    ----------
    block_data : vtkStructuredGrid
        As made by `block_to_vtk`: time, constants and units are in its field data already.
    snapshot : Snapshot
    block : int
    halo : six int
        Ghost cells below and above in r, theta and phi.
    faces : bool
        Hand on face-centred fields; without them fluxes come from cell values.
    """
    data, grid = block_data.GetFieldData(), snapshot.grid
    assert grid.level is not None
    _put(data, BLOCK, np.array([block, grid.n_blocks, grid.level[block]], dtype=np.int64))
    _put(data, HALO, np.array(halo, dtype=np.int64))
    for name, edges in zip(EDGES, grid.edges(block), strict=True):
        _put(data, name, edges)
    cells = block_data.GetCellData()
    carried = [name for name in snapshot.faces if faces and cells.HasArray(name)]
    for name in carried:
        _put(data, FACES + name, snapshot.faces.block(name, block).reshape(-1))
    made = vtkStringArray()
    made.SetName(MADE)
    for name in carried:
        if name not in snapshot.cells:
            made.InsertNextValue(name)
    data.AddArray(made)


def keep_meaning_of_tree(
    tree: vtkMultiBlockDataSet, snapshot: Snapshot, *, faces: bool = True
) -> vtkMultiBlockDataSet:
    """The same for all blocks of a tree made by `to_vtk` without halo; returns the tree."""
    grid = snapshot.grid
    numbers = np.argsort(np.asarray(grid.level), kind="stable")
    for number, leaf in zip(numbers, leaves(tree), strict=True):
        keep_meaning(leaf, snapshot, int(number), faces=faces)
    return tree


def snapshot_from_vtk(data: vtkDataObject, *, work: str = "use these data") -> Snapshot:
    """Rebuild the snapshot that a reader or `keep_meaning` put into VTK.

    Parameters
    ----------
    data : vtkMultiBlockDataSet, vtkPartitionedDataSetCollection or vtkStructuredGrid
        All blocks, whole; more cell arrays of one component become fields by their own name.
    work : str
        What it is for, for the error.

    Returns
    -------
    Snapshot
        Numbers equal to the last bit. Cell values of a block without halo are views of VTK's
        memory; they are put together into one array when all blocks are asked for.

    Raises
    ------
    FieldvizError
        If the data did not come from a snapshot, or blocks are missing, cut or doubled.
    """
    return snapshot_of_parts(block_parts(data, work), work)


def snapshot_of_parts(parts: Sequence[BlockParts], work: str) -> Snapshot:
    """Put a snapshot together from the parts of its blocks; see `snapshot_from_vtk`."""
    if not parts:
        raise FieldvizError(
            f"Cannot {work}: expected a snapshot, got an empty object; see why the step before "
            "gave nothing."
        )
    blocks = sorted(parts, key=lambda block: block.number)
    _check_complete(blocks, work)
    r, theta, phi = (np.stack([block.edges[axis] for block in blocks]) for axis in range(3))
    return Snapshot(
        WedgeGrid(r, theta, phi, np.array([block.level for block in blocks])),
        _BlockFields([block.cells for block in blocks]),
        _BlockFields([block.faces for block in blocks]),
        **blocks[0].constants,  # type: ignore[arg-type]
    )


class _BlockFields(Fields):
    """Fields that every block has, put together when all blocks are asked for."""

    def __init__(self, blocks: Sequence[Mapping[str, Array]]) -> None:
        self._blocks = blocks
        self._names = [n for n in blocks[0] if all(n in block for block in blocks)]
        self._whole: dict[str, Array] = {}

    def __getitem__(self, name: str) -> Array:
        self._check(name)
        if name not in self._whole:
            parts = [self.block(name, block) for block in range(len(self._blocks))]
            one = len(parts) == 1 and parts[0].flags.c_contiguous
            self._whole[name] = parts[0][None] if one else np.stack(parts)
        return self._whole[name]

    def block(self, name: str, block: int) -> Array:
        self._check(name)
        values = self._blocks[block][name]
        return values.astype(usable_dtype(values.dtype), copy=False)

    def _check(self, name: str) -> None:
        if name not in self._names:
            raise MissingFieldError(missing_sentence(name, dict.fromkeys(self._names)))

    def __iter__(self) -> Iterator[str]:
        return iter(self._names)

    def __len__(self) -> int:
        return len(self._names)

    def __contains__(self, name: object) -> bool:
        return name in self._names


def _check_complete(blocks: Sequence[BlockParts], work: str) -> None:
    count, numbers = blocks[0].count, [block.number for block in blocks]
    if len(set(numbers)) != len(numbers):
        raise FieldvizError(
            f"Cannot {work}: expected every block once, got {len(numbers)} with {len(set(numbers))}"
            " numbers, as a repeated wedge has; repeat in azimuth last."
        )
    if len(numbers) != count:
        raise FieldvizError(
            f"Cannot {work}: expected all {count} blocks of the snapshot, got {len(numbers)}; take "
            "the region and the limit on levels away in the reader."
        )


def _put(data: vtkFieldData, name: str, values: Array) -> None:
    array = numpy_to_vtk(np.ascontiguousarray(values))
    array.SetName(name)
    data.AddArray(array)
