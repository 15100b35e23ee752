"""Lines as VTK poly data: one polyline a line, fields on points, ends and length on cells."""

from __future__ import annotations

import numpy as np
from vtkmodules.util.numpy_support import numpy_to_vtk, numpy_to_vtkIdTypeArray
from vtkmodules.vtkCommonCore import vtkPoints, vtkStringArray
from vtkmodules.vtkCommonDataModel import vtkCellArray, vtkDataSetAttributes, vtkPolyData

from fieldviz.lines.line_set import LineSet
from fieldviz.wedge.typing import Array

__all__ = ["lines_to_vtk"]


def lines_to_vtk(lines: LineSet) -> vtkPolyData:
    """Turn lines into poly data.

    Parameters
    ----------
    lines : LineSet
        Lines of fewer than two points are left out, as they cannot be drawn.

    Returns
    -------
    vtkPolyData
        Point arrays: `r`, `theta`, `phi` (unwrapped) and the sampled fields. Cell arrays: `line`
        (its number), `length`, `twist`, `start_reason`, `end_reason`.
    """
    counts = np.diff(lines.offsets)
    kept = np.flatnonzero(counts >= 2)
    taken = np.repeat(counts >= 2, counts)
    data = vtkPolyData()
    points = vtkPoints()
    points.SetDataTypeToDouble()
    points.SetData(numpy_to_vtk(np.ascontiguousarray(lines.points[taken])))
    data.SetPoints(points)
    cells = vtkCellArray()
    offsets = np.concatenate([[0], np.cumsum(counts[kept])])
    cells.SetData(
        numpy_to_vtkIdTypeArray(offsets.astype(np.int64), deep=1),
        numpy_to_vtkIdTypeArray(np.arange(offsets[-1], dtype=np.int64), deep=1),
    )
    data.SetLines(cells)
    for axis, name in enumerate(("r", "theta", "phi")):
        _add(data.GetPointData(), name, lines.spherical[taken, axis])
    for name, values in lines.fields.items():
        _add(data.GetPointData(), name, values[taken])
    _add(data.GetCellData(), "line", kept.astype(np.int64))
    _add(data.GetCellData(), "length", lines.length[kept])
    _add(data.GetCellData(), "twist", lines.twist[kept])
    reasons = lines.end_reason
    for side, name in enumerate(("start_reason", "end_reason")):
        words = vtkStringArray()
        words.SetName(name)
        for line in kept:
            words.InsertNextValue(reasons[line][side])
        data.GetCellData().AddArray(words)
    return data


def _add(attributes: vtkDataSetAttributes, name: str, values: Array) -> None:
    array = numpy_to_vtk(np.ascontiguousarray(values))
    array.SetName(name)
    attributes.AddArray(array)
