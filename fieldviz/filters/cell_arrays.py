"""Add cell arrays to the blocks of a snapshot that is already in VTK."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkCommonDataModel import vtkDataObject, vtkMultiBlockDataSet, vtkStructuredGrid

from fieldviz.filters.pieces import add_arrays
from fieldviz.filters.trees import describe
from fieldviz.vtk_data.block_parts import BLOCK, EDGES, HALO, leaves
from fieldviz.wedge.coordinates import vectors_to_cartesian
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.halo import halo_array, halo_grid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["add_cells", "copied_tree"]


def add_cells(
    output: vtkMultiBlockDataSet,
    data: vtkDataObject,
    snapshot: Snapshot,
    arrays: Mapping[str, Array],
    *,
    vectors: Mapping[str, Sequence[str]],
    notes: Sequence[str] = (),
    colour: str = "",
) -> None:
    """Hand the input on with more cell arrays; its own are shared, not copied.

    Parameters
    ----------
    output : vtkMultiBlockDataSet
    data : vtkDataObject
        What `snapshot` was rebuilt from; its halos are filled for the new arrays, too.
    snapshot : Snapshot
    arrays : mapping of name to (n_blocks, n_phi, n_theta, n_r) array
    vectors : mapping of name to three names of arrays
        Cartesian vectors to add, from components along r, theta and phi.
    notes : sequence of str
    colour : str
        What a viewer colours by at first.
    """
    copied_tree(output, data)
    grids = list(leaves(output))
    haloed: dict[str, Array] = {}
    if any(vtk_to_numpy(g.GetFieldData().GetArray(HALO)).any() for g in grids):
        haloed = {name: halo_array(snapshot.grid, values) for name, values in arrays.items()}
    for grid in grids:
        block = int(grid.GetFieldData().GetArray(BLOCK).GetValue(0))
        halo = vtk_to_numpy(grid.GetFieldData().GetArray(HALO)).reshape(3, 2)
        own = {
            name: _with_halo(haloed[name][block], halo) if halo.any() else values[block]
            for name, values in arrays.items()
        }
        places = _cell_middles(snapshot, grid, block, halo)
        for name, parts in vectors.items():
            components = np.stack([own[part] for part in parts], axis=-1)
            turned = vectors_to_cartesian(components, places).astype(components.dtype)
            add_arrays(grid.GetCellData(), {name: turned.reshape(-1, 3)})
        add_arrays(grid.GetCellData(), {name: values.reshape(-1) for name, values in own.items()})
        if colour:
            grid.GetCellData().SetActiveScalars(colour)
    describe(output, snapshot, notes)


def copied_tree(output: vtkMultiBlockDataSet, data: vtkDataObject) -> None:
    """The same tree of blocks, each a copy that shares its arrays with the input's."""
    if isinstance(data, vtkMultiBlockDataSet):
        output.CopyStructure(data)
        places = data.NewIterator()
        places.InitTraversal()
        while not places.IsDoneWithTraversal():
            output.SetDataSet(places, _copied(places.GetCurrentDataObject()))
            places.GoToNextItem()
        output.GetFieldData().ShallowCopy(data.GetFieldData())
        return
    for number, leaf in enumerate(leaves(data)):
        output.SetBlock(number, _copied(leaf))


def _copied(leaf: vtkDataObject) -> vtkDataObject:
    copy = leaf.NewInstance()
    copy.ShallowCopy(leaf)
    return copy


def _with_halo(values: Array, halo: Array) -> Array:
    """The part of an array with ghosts all round that a block keeps."""
    taken = (
        slice(1 - low, size - 1 + high)
        for (low, high), size in zip(halo[::-1], values.shape, strict=True)
    )
    return np.ascontiguousarray(values[tuple(taken)])


def _cell_middles(snapshot: Snapshot, grid: vtkStructuredGrid, block: int, halo: Array) -> Any:
    """r, theta, phi of the cells of a block with its halo, (n_phi, n_theta, n_r, 3)."""
    if halo.any():
        around = halo_grid(snapshot.grid)
        sides = zip((around.r, around.theta, around.phi), halo, strict=True)
        axes = [m[block][1 - low : len(m[block]) - 1 + high] for m, (low, high) in sides]
    else:
        axes = [centres(vtk_to_numpy(grid.GetFieldData().GetArray(name))) for name in EDGES]
    r, theta, phi = axes
    mesh = np.meshgrid(phi, theta, r, indexing="ij")
    return np.stack(mesh[::-1], axis=-1)
