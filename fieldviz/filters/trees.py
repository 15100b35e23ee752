"""Snapshots as trees of blocks that a pipeline can hand on, with halos only where blocks meet."""

from __future__ import annotations

from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass, field
from functools import partial

import numpy as np
from vtkmodules.util.numpy_support import numpy_to_vtk, vtk_to_numpy
from vtkmodules.vtkCommonCore import vtkPoints, vtkStringArray
from vtkmodules.vtkCommonDataModel import (
    vtkDataObject,
    vtkMultiBlockDataSet,
    vtkStructuredGrid,
)

from fieldviz.vtk_data.block_parts import leaves
from fieldviz.vtk_data.names import level_name
from fieldviz.vtk_data.snapshot_from_vtk import keep_meaning
from fieldviz.vtk_data.snapshot_to_vtk import add_field_data, block_to_vtk
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo as haloed_field
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["FIRST_AZIMUTH", "NOTES", "PERIOD", "Part", "describe", "fill_tree", "read_once"]

PERIOD = "azimuth period"
FIRST_AZIMUTH = "first azimuth"
NOTES = "notes"
# What a viewer colours by at first: the one whose range needs no logarithm.
_COLOURS = ("magnetic_phi", "velocity_phi", "density")
_ALL = (-np.inf, np.inf)


@dataclass(frozen=True)
class Part:
    """Which part of a snapshot to show; cells count by their middles.

    Attributes
    ----------
    finest_level : int
        Blocks of finer levels are left out.
    r, theta, phi : (float, float)
        Code length and radians.
    """

    finest_level: int = 99
    r: tuple[float, float] = _ALL
    theta: tuple[float, float] = _ALL
    phi: tuple[float, float] = field(default=_ALL)

    def inside(self, edges: Sequence[Array]) -> list[Array] | None:
        """Cells inside along phi, theta, r as first and last + 1; None if there are none."""
        found = []
        for array, (low, high) in zip(edges, (self.r, self.theta, self.phi), strict=True):
            middle = centres(array)
            inside = np.flatnonzero((middle >= low) & (middle <= high))
            if not inside.size:
                return None
            found.append(np.array([inside[0], inside[-1] + 1]))
        return found[::-1]


def fill_tree(
    tree: vtkMultiBlockDataSet,
    snapshot: Snapshot,
    *,
    halo: bool = True,
    faces: bool = True,
    part: Part | None = None,
    progress: Callable[[float], None] = lambda share: None,
    only: Collection[int] | None = None,
) -> None:
    """Put a snapshot into a MultiBlock: level, then block.

    Parameters
    ----------
    tree : vtkMultiBlockDataSet
    snapshot : Snapshot
    halo : bool
        Give blocks a ghost cell where another block lies beside them, across levels too, so that
        contours close. Walls and the seams of the wedge get none: they stay visible.
    faces : bool
        Hand face-centred fields on to filters.
    part : Part, optional
        All by default.
    progress : callable
        Told the share that is done.
    only : collection of int, optional
        Numbers of the blocks to put in; the tree has a place for every block all the same.
    """
    names, part, grid = snapshot.cell_names, part or Part(), snapshot.grid
    only = range(grid.n_blocks) if only is None else only
    with_halo = halo and grid.n_blocks > 1
    values = read_once(partial(haloed_field, snapshot) if with_halo else snapshot.cell, only)
    assert grid.level is not None
    levels = [level for level in grid.levels if level <= part.finest_level]
    for place, level in enumerate(levels):
        blocks = vtkMultiBlockDataSet()
        for index, block in enumerate(np.flatnonzero(grid.level == level)):
            number = int(block)
            blocks.SetNumberOfBlocks(index + 1)
            blocks.GetMetaData(index).Set(blocks.NAME(), f"block {number}")
            inside = part.inside(grid.edges(number))
            if inside is None or number not in only:
                continue
            data = block_to_vtk(snapshot, number, names, values, halo=with_halo)
            sides = _sides_with_neighbours(grid, number) if with_halo else (0,) * 6
            keep_meaning(data, snapshot, number, halo=sides, faces=faces)
            blocks.SetBlock(index, _cut(data, grid.block_shape, sides, inside, with_halo))
            progress((place + (index + 1) / np.count_nonzero(grid.level == level)) / len(levels))
        tree.SetBlock(place, blocks)
        tree.GetMetaData(place).Set(tree.NAME(), level_name(level))
    describe(tree, snapshot)
    for leaf in leaves(tree):
        _add_azimuth(leaf, grid)
        for name in _COLOURS:
            if leaf.GetCellData().SetActiveScalars(name) >= 0:
                break


def read_once(read: Callable[[str], Array], only: Collection[int]) -> Callable[[str, int], Array]:
    """Blocks of fields, each field made when its first block is asked for; the others are let go.

    Parameters
    ----------
    read : callable
        Gives all blocks of a field.
    only : collection of int
        Blocks that will be asked for.
    """
    place = {number: n for n, number in enumerate(only)}
    kept: dict[str, Array] = {}

    def values(name: str, block: int) -> Array:
        if name not in kept:
            every = read(name)
            kept[name] = every if len(place) == len(every) else every[list(place)]
        return kept[name][place[block]]

    return values


def _sides_with_neighbours(grid: WedgeGrid, block: int) -> tuple[int, ...]:
    """1 where another block lies beside this one, below and above in r, theta, phi."""
    sides = []
    for axis, (low, high) in enumerate((grid.r_range, grid.theta_range, grid.phi_range)):
        edges = grid.edges(block)[axis]
        closed = axis == 2 and grid.is_full_ring
        sides += [int(closed or edges[0] > low), int(closed or edges[-1] < high)]
    return tuple(sides)


def _cut(
    data: vtkStructuredGrid,
    shape: tuple[int, int, int],
    sides: Sequence[int],
    inside: Sequence[Array],
    with_halo: bool,
) -> vtkStructuredGrid:
    """The block with halo on some sides only, and without cells outside of a region."""
    taken = []
    for count, axis, (first, last) in zip(shape, (2, 1, 0), inside, strict=True):
        pad = int(with_halo)
        # Where the region ends, the halo ends too: it shows no cells that were not asked for.
        low = pad + first - (sides[2 * axis] if first == 0 else 0)
        high = pad + last + (sides[2 * axis + 1] if last == count else 0)
        taken.append(slice(int(low), int(high)))
    haloed = tuple(count + 2 * int(with_halo) for count in shape)
    if all(s.start == 0 and s.stop == n for s, n in zip(taken, haloed, strict=True)):
        return data
    nodes = tuple(slice(s.start, s.stop + 1) for s in taken)
    result = vtkStructuredGrid()
    result.SetDimensions(*(s.stop - s.start for s in reversed(nodes)))
    points = vtkPoints()
    points.SetDataTypeToDouble()
    places = vtk_to_numpy(data.GetPoints().GetData()).reshape(*(n + 1 for n in haloed), 3)
    points.SetData(numpy_to_vtk(np.ascontiguousarray(places[nodes]).reshape(-1, 3)))
    result.SetPoints(points)
    for index in range(data.GetCellData().GetNumberOfArrays()):
        array = data.GetCellData().GetArray(index)
        values = vtk_to_numpy(array).reshape(*haloed, array.GetNumberOfComponents())
        part = np.ascontiguousarray(values[tuple(taken)])
        part = part.reshape(-1, part.shape[-1]) if part.shape[-1] > 1 else part.reshape(-1)
        copied = numpy_to_vtk(part)
        copied.SetName(array.GetName())
        result.GetCellData().AddArray(copied)
    result.GetFieldData().ShallowCopy(data.GetFieldData())
    return result


def describe(data: vtkDataObject, snapshot: Snapshot, notes: Sequence[str] = ()) -> None:
    """Write time, constants, units, the wedge's azimuth and notes into field data."""
    add_field_data(data.GetFieldData(), snapshot)
    _add_azimuth(data, snapshot.grid)
    if notes:
        words = vtkStringArray()
        words.SetName(NOTES)
        for note in notes:
            words.InsertNextValue(note)
        data.GetFieldData().AddArray(words)


def _add_azimuth(data: vtkDataObject, grid: WedgeGrid) -> None:
    for name, value in ((PERIOD, grid.period), (FIRST_AZIMUTH, grid.phi_range[0])):
        array = numpy_to_vtk(np.array([value]))
        array.SetName(name)
        data.GetFieldData().AddArray(array)
