"""The parts of a snapshot that one block in VTK carries, read back out of it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkCommonDataModel import (
    vtkCompositeDataSet,
    vtkDataObject,
    vtkFieldData,
    vtkStructuredGrid,
)

from fieldviz.errors import FieldvizError
from fieldviz.vtk_data.names import GHOSTS, LEVEL
from fieldviz.wedge.typing import Array
from fieldviz.wedge.units import Unit, UnitScales

__all__ = ["BLOCK", "EDGES", "FACES", "HALO", "MADE", "BlockParts", "block_parts", "leaves",
           "words_of"]  # fmt: skip

_PREFIX = "fieldviz "
BLOCK = _PREFIX + "block"  # number, of how many, level
HALO = _PREFIX + "halo"  # ghost cells below and above in r, theta, phi
EDGES = tuple(f"{_PREFIX}{axis} edges" for axis in ("r", "theta", "phi"))
FACES = _PREFIX + "faces "
MADE = _PREFIX + "made from faces"
_FACE_AXES = {"magnetic_r": 2, "magnetic_theta": 1, "magnetic_phi": 0}


@dataclass(frozen=True, eq=False)
class BlockParts:
    """What a snapshot needs to know of one block; arrays are views of VTK's memory.

    Attributes
    ----------
    number, count, level : int
        Which block, of how many, at which level.
    edges : three arrays
        r, theta and phi.
    cells, faces : dict of str to array
        Without halo, (n_phi, n_theta, n_r); faces have one more along their own axis.
    constants : dict
        Time, constants and units of the snapshot.
    """

    number: int
    count: int
    level: int
    edges: tuple[Array, Array, Array]
    cells: dict[str, Array]
    faces: dict[str, Array]
    constants: dict[str, object]


def block_parts(data: vtkDataObject, work: str) -> list[BlockParts]:
    """Parts of all blocks that are there, in the order of VTK's tree.

    Raises
    ------
    FieldvizError
        For anything that `keep_meaning` did not mark, and blocks that were cut.
    """
    return [_parts(leaf, work) for leaf in leaves(data)]


def _parts(leaf: vtkDataObject, work: str) -> BlockParts:
    data = leaf.GetFieldData()
    if not isinstance(leaf, vtkStructuredGrid) or not data.HasArray(BLOCK):
        raise FieldvizError(
            f"Cannot {work}: expected blocks of a snapshot with their edges, got a "
            f"{leaf.GetClassName()} without them; connect the filter to the snapshot reader, or to "
            "a filter that keeps its blocks whole."
        )
    number, count, level = (int(v) for v in vtk_to_numpy(data.GetArray(BLOCK)))
    halo = tuple(int(v) for v in vtk_to_numpy(data.GetArray(HALO)))
    r, theta, phi = (np.array(vtk_to_numpy(data.GetArray(name))) for name in EDGES)
    shape = (len(phi) - 1, len(theta) - 1, len(r) - 1)
    low, high = halo[::2][::-1], halo[1::2][::-1]
    haloed = tuple(a + n + b for a, n, b in zip(low, shape, high, strict=True))
    dimensions = [0, 0, 0]
    leaf.GetDimensions(dimensions)
    if tuple(n - 1 for n in reversed(dimensions)) != haloed:
        raise FieldvizError(
            f"Cannot {work}: expected whole blocks, got block {number} cut to a part of its cells; "
            "take the region away in the reader and give the filter its own range of radii instead."
        )
    inner = tuple(slice(a, a + n) for a, n in zip(low, shape, strict=True))
    return BlockParts(number, count, level, (r, theta, phi), _cells(leaf, haloed, inner),
                      _faces(data, shape), _constants(data))  # fmt: skip


def _cells(
    leaf: vtkStructuredGrid, haloed: tuple[int, ...], inner: tuple[slice, ...]
) -> dict[str, Array]:
    """Scalars without their halo, by name."""
    data, found = leaf.GetCellData(), {}
    left_out = {GHOSTS, LEVEL, *words_of(leaf.GetFieldData(), MADE)}
    for index in range(data.GetNumberOfArrays()):
        array = data.GetArray(index)  # None for words
        if array is None or array.GetNumberOfComponents() != 1 or array.GetName() in left_out:
            continue
        found[array.GetName()] = vtk_to_numpy(array).reshape(haloed)[inner]
    return found


def _faces(data: vtkFieldData, block_shape: tuple[int, int, int]) -> dict[str, Array]:
    """Face-centred fields by name."""
    found = {}
    for name, axis in _FACE_AXES.items():
        array = data.GetArray(FACES + name)
        if array is not None:
            shape = list(block_shape)
            shape[axis] += 1
            found[name] = vtk_to_numpy(array).reshape(shape)
    return found


def _constants(data: vtkFieldData) -> dict[str, object]:
    def number(name: str) -> float | None:
        array = data.GetArray(name)
        return None if array is None else float(array.GetValue(0))

    units = {}
    for quantity in ("length", "mass", "time"):
        value = number(f"{quantity} unit")
        if value is not None:
            units[quantity] = Unit(value, "".join(words_of(data, f"{quantity} unit label")))
    return {
        "time": number("TimeValue"),
        "mu0": number("mu0"),
        "gm": number("gm"),
        "gamma": number("gamma"),
        "title": "".join(words_of(data, "title")),
        "units": UnitScales(**units),
    }


def leaves(data: vtkDataObject) -> Iterator[vtkDataObject]:
    """The data sets of a composite data set that are there, or the object itself."""
    if not isinstance(data, vtkCompositeDataSet):
        yield data
        return
    places = data.NewIterator()
    places.InitTraversal()
    while not places.IsDoneWithTraversal():
        yield places.GetCurrentDataObject()
        places.GoToNextItem()


def words_of(data: vtkFieldData, name: str) -> list[str]:
    """Strings of a field-data array; none without it."""
    array = data.GetAbstractArray(name)
    if array is None:
        return []
    return [array.GetValue(n) for n in range(array.GetNumberOfValues())]
