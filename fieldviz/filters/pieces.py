"""Pieces of output: points, surfaces and tables as VTK objects, with arrays by name."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from vtkmodules.util.numpy_support import numpy_to_vtk, numpy_to_vtkIdTypeArray
from vtkmodules.vtkCommonCore import vtkPoints, vtkStringArray
from vtkmodules.vtkCommonDataModel import (
    vtkCellArray,
    vtkDataSetAttributes,
    vtkPolyData,
    vtkTable,
)

from fieldviz.wedge.coordinates import points_to_cartesian
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.typing import Array, IntArray

__all__ = [
    "add_arrays",
    "azimuth_nodes",
    "colour_first",
    "fill_table",
    "poly_data",
    "quads_of_rows",
    "set_cells",
]

_STEP = np.radians(1.5)  # of drawn surfaces along azimuth; our choice

Values = Array | IntArray | Sequence[str]


def azimuth_nodes(grid: WedgeGrid) -> Array:
    """Azimuths from one face of the wedge to the other, in even steps of 1.5 degrees or less."""
    low, high = grid.phi_range
    return np.linspace(low, high, int(np.ceil(grid.period / _STEP)) + 1)


def poly_data(spherical: Array) -> vtkPolyData:
    """Poly data with points (n, 3) r, theta, phi, which are kept as point arrays too."""
    data = vtkPolyData()
    points = vtkPoints()
    points.SetDataTypeToDouble()
    points.SetData(numpy_to_vtk(np.ascontiguousarray(points_to_cartesian(spherical))))
    data.SetPoints(points)
    add_arrays(
        data.GetPointData(),
        {name: spherical[:, axis] for axis, name in enumerate(("r", "theta", "phi"))},
    )
    return data


def set_cells(data: vtkPolyData, kind: str, corners: IntArray) -> None:
    """Give poly data cells of one kind ("Verts", "Lines" or "Polys"), (n_cells, n_corners)."""
    cells = vtkCellArray()
    count, size = corners.shape
    offsets = np.arange(count + 1, dtype=np.int64) * size
    cells.SetData(
        numpy_to_vtkIdTypeArray(offsets, deep=1),
        numpy_to_vtkIdTypeArray(np.ascontiguousarray(corners, dtype=np.int64).reshape(-1), deep=1),
    )
    getattr(data, f"Set{kind}")(cells)


def quads_of_rows(n_rows: int, n_columns: int) -> IntArray:
    """Corners of the quadrilaterals between points in rows, ((n_rows-1) * (n_columns-1), 4)."""
    number = np.arange(n_rows * n_columns).reshape(n_rows, n_columns)
    corners = (number[:-1, :-1], number[:-1, 1:], number[1:, 1:], number[1:, :-1])
    return np.stack(corners, axis=-1).reshape(-1, 4)


def add_arrays(attributes: vtkDataSetAttributes, arrays: Mapping[str, Values]) -> None:
    """Add numbers or words by name."""
    for name, values in arrays.items():
        attributes.AddArray(_array(name, values))


def colour_first(data: vtkPolyData, *names: str) -> None:
    """Let the first of these arrays that is there be what a viewer colours by."""
    for name in names:
        for attributes in (data.GetPointData(), data.GetCellData()):
            if attributes.HasArray(name):
                attributes.SetActiveScalars(name)
                return


def _array(name: str, values: Values) -> object:
    if isinstance(values, np.ndarray):
        array = numpy_to_vtk(np.ascontiguousarray(values))
    else:
        array = vtkStringArray()
        for value in values:
            array.InsertNextValue(str(value))
    array.SetName(name)
    return array


def fill_table(table: vtkTable, columns: Mapping[str, Sequence[object]]) -> None:
    """Fill a table; a column is numbers (None becomes NaN) or words."""
    for name, values in columns.items():
        numbers = all(v is None or isinstance(v, (int, float, np.number)) for v in values)
        if numbers:
            column: Values = np.array([np.nan if v is None else v for v in values], dtype=float)
        else:
            column = ["" if v is None else str(v) for v in values]
        table.AddColumn(_array(name, column))
