"""Snapshots as VTK objects: levels, in them blocks, each a structured grid with cell data."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import partial

import numpy as np
from vtkmodules.util.numpy_support import numpy_to_vtk
from vtkmodules.vtkCommonCore import vtkDoubleArray, vtkPoints, vtkStringArray
from vtkmodules.vtkCommonDataModel import (
    vtkDataSetAttributes,
    vtkFieldData,
    vtkMultiBlockDataSet,
    vtkStructuredGrid,
)

from fieldviz._version import __version__
from fieldviz.vtk_data.names import GHOSTS, LEVEL, VECTORS, level_name
from fieldviz.wedge.halo import halo as haloed
from fieldviz.wedge.halo import halo_grid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["block_to_vtk", "to_vtk"]

CellValues = Callable[[str, int], Array]


def to_vtk(
    snapshot: Snapshot,
    *,
    fields: Sequence[str] | None = None,
    vectors: bool = True,
    halo: bool = False,
) -> vtkMultiBlockDataSet:
    """Turn a snapshot into a VTK MultiBlock: level, then block.

    Parameters
    ----------
    snapshot : Snapshot
    fields : sequence of str, optional
        Cell fields to hand over; all by default.
    vectors : bool
        Add Cartesian `velocity` and `magnetic` (three components) where their parts are there.
    halo : bool
        Give every block its layer of ghost cells, marked in `vtkGhostType`: DUPLICATECELL where a
        neighbour or the repeated wedge owns the cell, HIDDENCELL past a wall.

    Returns
    -------
    vtkMultiBlockDataSet
        Structured grids with i = r, j = theta, k = phi. Scalars are views of the snapshot's
        memory, not copies. Field data: `TimeValue`, constants, units, title, version.

    Raises
    ------
    MissingFieldError

    Examples
    --------
    >>> import fieldviz as fv
    >>> fv.to_vtk(fv.demo_disc(shape=(4, 32, 24))).GetNumberOfBlocks()
    1
    """
    names = tuple(snapshot.cell_names if fields is None else fields)
    snapshot.require("convert to VTK", *names)
    values = _read_once(partial(haloed, snapshot) if halo else snapshot.cell)
    grid = snapshot.grid
    assert grid.level is not None
    tree = vtkMultiBlockDataSet()
    for part, level in enumerate(grid.levels):
        blocks = vtkMultiBlockDataSet()
        for index, block in enumerate(np.flatnonzero(grid.level == level)):
            data = block_to_vtk(snapshot, int(block), names, values, vectors=vectors, halo=halo)
            blocks.SetBlock(index, data)
            blocks.GetMetaData(index).Set(blocks.NAME(), f"block {int(block)}")
        tree.SetBlock(part, blocks)
        tree.GetMetaData(part).Set(tree.NAME(), level_name(level))
    add_field_data(tree.GetFieldData(), snapshot)
    return tree


def _read_once(read: Callable[[str], Array]) -> CellValues:
    """Blocks of fields, each field read or given its halo when its first block is asked for."""
    kept: dict[str, Array] = {}

    def values(name: str, block: int) -> Array:
        if name not in kept:
            kept[name] = read(name)
        return kept[name][block]

    return values


def block_to_vtk(
    snapshot: Snapshot,
    block: int,
    names: Sequence[str],
    values: CellValues,
    *,
    vectors: bool = True,
    halo: bool = False,
) -> vtkStructuredGrid:
    """One block as a structured grid.

    Parameters
    ----------
    snapshot : Snapshot
    block : int
    names : sequence of str
        Cell fields.
    values : callable (name, block) -> (n_phi, n_theta, n_r) array
        Gives the cell values, with ghosts where `halo` is set.
    vectors, halo : bool
        See `to_vtk`.

    Returns
    -------
    vtkStructuredGrid
    """
    r, theta, phi = _edges(snapshot, block, halo)
    data = vtkStructuredGrid()
    data.SetDimensions(len(r), len(theta), len(phi))
    points = vtkPoints()
    points.SetDataTypeToDouble()
    points.SetData(numpy_to_vtk(_points(r, theta, phi).reshape(-1, 3)))
    data.SetPoints(points)
    cell_data = data.GetCellData()
    for name in names:
        _add(cell_data, name, values(name, block).reshape(-1))
    for name, parts in VECTORS.items() if vectors else ():
        if all(part in names for part in parts):
            components = [values(part, block) for part in parts]
            _add(cell_data, name, _cartesian(components, theta, phi).reshape(-1, 3))
    assert snapshot.grid.level is not None
    n_cells = (len(r) - 1) * (len(theta) - 1) * (len(phi) - 1)
    _add(cell_data, LEVEL, np.full(n_cells, snapshot.grid.level[block], dtype=np.int16))
    if halo:
        _add(cell_data, GHOSTS, _ghost_marks(snapshot, r, theta, phi))
    add_field_data(data.GetFieldData(), snapshot)
    return data


def _edges(snapshot: Snapshot, block: int, with_halo: bool) -> tuple[Array, Array, Array]:
    if not with_halo:
        return snapshot.grid.edges(block)
    around = halo_grid(snapshot.grid)
    return around.r_edges[block], around.theta_edges[block], around.phi_edges[block]


def _points(r: Array, theta: Array, phi: Array) -> Array:
    from fieldviz.wedge._kernels import nodes_to_cartesian

    points = np.empty((len(phi), len(theta), len(r), 3))
    nodes_to_cartesian(r, np.sin(theta), np.cos(theta), np.sin(phi), np.cos(phi), points)
    return points


def _cartesian(components: Sequence[Array], theta_edges: Array, phi_edges: Array) -> Array:
    from fieldviz.wedge._kernels import rotate_to_cartesian

    theta = 0.5 * (theta_edges[1:] + theta_edges[:-1])
    phi = 0.5 * (phi_edges[1:] + phi_edges[:-1])
    dtype = np.result_type(*components)
    vectors = np.empty((*components[0].shape, 3), dtype=dtype)
    trigonometry = (f(angle).astype(dtype) for angle in (theta, phi) for f in (np.sin, np.cos))
    rotate_to_cartesian(*components, *trigonometry, vectors)
    return vectors


def _ghost_marks(snapshot: Snapshot, r: Array, theta: Array, phi: Array) -> Array:
    """Marks of a haloed block; cell centres beyond r or theta of the wedge are hidden."""
    shape = (len(phi) - 1, len(theta) - 1, len(r) - 1)
    marks = np.full(shape, np.uint8(vtkDataSetAttributes.DUPLICATECELL))
    marks[1:-1, 1:-1, 1:-1] = 0
    for axis, edges, (low, high) in (
        (2, r, snapshot.grid.r_range),
        (1, theta, snapshot.grid.theta_range),
    ):
        middle = 0.5 * (edges[1:] + edges[:-1])
        outside = (middle < low) | (middle > high)
        index = [slice(None)] * 3
        index[axis] = outside  # type: ignore[call-overload]
        marks[tuple(index)] |= np.uint8(vtkDataSetAttributes.HIDDENCELL)
    return marks.reshape(-1)


def _add(attributes: vtkDataSetAttributes, name: str, values: Array) -> None:
    # numpy_to_vtk keeps the array alive and does not copy it when it is contiguous.
    array = numpy_to_vtk(values)
    array.SetName(name)
    attributes.AddArray(array)


def add_field_data(field_data: vtkFieldData, snapshot: Snapshot) -> None:
    """Write time, constants, units and title into field data."""
    numbers = {"TimeValue": snapshot.time, "mu0": snapshot.mu0, "gm": snapshot.gm}
    if snapshot.gamma is not None:
        numbers["gamma"] = snapshot.gamma
    words = {"title": snapshot.title, "fieldviz version": __version__}
    for quantity in ("length", "mass", "time"):
        unit = getattr(snapshot.units, quantity)
        if unit is not None:
            numbers[f"{quantity} unit"] = unit.value
            words[f"{quantity} unit label"] = unit.label
    for name, number in numbers.items():
        array = vtkDoubleArray()
        array.SetName(name)
        array.InsertNextValue(number)
        field_data.AddArray(array)
    for name, word in words.items():
        strings = vtkStringArray()
        strings.SetName(name)
        strings.InsertNextValue(word)
        field_data.AddArray(strings)
