"""Repeat a wedge, or anything drawn in it, round the axis."""

from __future__ import annotations

from typing import Any

import numpy as np
from vtkmodules.util.numpy_support import numpy_to_vtk, vtk_to_numpy
from vtkmodules.vtkCommonCore import vtkPoints
from vtkmodules.vtkCommonDataModel import (
    vtkDataObject,
    vtkDataSetAttributes,
    vtkMultiBlockDataSet,
    vtkPointSet,
)

from fieldviz.errors import FieldvizError
from fieldviz.filters.base import FieldvizAlgorithm, Setting
from fieldviz.filters.cell_arrays import copied_tree
from fieldviz.filters.ranks import Ranks
from fieldviz.filters.trees import PERIOD
from fieldviz.vtk_data.block_parts import leaves
from fieldviz.wedge.typing import Array

__all__ = ["RepeatInAzimuth"]

_MOST_COPIES = 720
_WHOLE = 1e-4  # as `WedgeGrid.repeats`


class RepeatInAzimuth(FieldvizAlgorithm):
    """Copies of the input, each turned by one wedge more; vectors turn along.

    Settings
    --------
    Copies : int
        0 for as many as the ring holds.
    Angle : float
        Degrees between copies; 0 for the wedge's own azimuth.
    """

    TITLE = "Fieldviz Repeat In Azimuth"
    INPUTS = (("vtkCompositeDataSet", "vtkPointSet"),)
    SETTINGS = {"Copies": Setting(0), "Angle": Setting(0.0)}  # noqa: RUF012

    def work(self, inputs: Any, outputs: Any) -> None:
        """Turn the copies."""
        data, (output,) = inputs[0], outputs
        period = np.radians(self.GetAngle()) or _period(data)
        held = 2 * np.pi / period
        whole = round(held) if abs(held - round(held)) < _WHOLE else int(held)
        copies = self.GetCopies() or max(1, whole)
        if not 1 <= copies <= _MOST_COPIES:
            raise FieldvizError(
                f"Cannot repeat in azimuth: expected 1 to {_MOST_COPIES} copies, got {copies}; "
                "choose fewer, or a larger angle."
            )
        for copy in range(copies):
            tree = vtkMultiBlockDataSet()
            copied_tree(tree, data)
            # A whole turn divided exactly, where it is one, so that the last seam closes.
            angle = 2 * np.pi * copy / whole if whole == round(held, 4) else copy * period
            for leaf in leaves(tree) if copy else ():
                _turn(leaf, angle)
            output.SetBlock(copy, tree)
            output.GetMetaData(copy).Set(vtkMultiBlockDataSet.NAME(), f"copy {copy}")
            self.UpdateProgress((copy + 1) / copies)
        output.GetFieldData().ShallowCopy(data.GetFieldData())


def _period(data: vtkDataObject) -> float:
    known = 0.0
    for part in (data, *leaves(data)):
        array = part.GetFieldData().GetArray(PERIOD)
        if array is not None and array.GetValue(0) > 0:
            known = float(array.GetValue(0))
            break
    # A rank without lines or surfaces does as the others do.
    known = max(Ranks().gather(known))
    if known:
        return known
    raise FieldvizError(
        "Cannot repeat in azimuth: expected data that know the wedge's azimuth, as the snapshot "
        "reader and the other filters give, got none; name the angle."
    )


def _turn(leaf: vtkPointSet, angle: float) -> None:
    """Turn points and Cartesian vectors about the z axis."""
    if leaf.GetPoints() is not None:
        points = vtkPoints()
        points.SetData(numpy_to_vtk(_turned(vtk_to_numpy(leaf.GetPoints().GetData()), angle)))
        leaf.SetPoints(points)
    for attributes in (leaf.GetPointData(), leaf.GetCellData()):
        _turn_vectors(attributes, angle)


def _turn_vectors(attributes: vtkDataSetAttributes, angle: float) -> None:
    for index in range(attributes.GetNumberOfArrays()):
        array = attributes.GetArray(index)
        if array is None or array.GetNumberOfComponents() != 3:
            continue
        turned = numpy_to_vtk(_turned(vtk_to_numpy(array), angle))
        turned.SetName(array.GetName())
        attributes.AddArray(turned)  # takes the place of the one of its name


def _turned(vectors: Array, angle: float) -> Array:
    cosine, sine = np.cos(angle), np.sin(angle)
    turned = np.empty_like(vectors)
    turned[:, 0] = cosine * vectors[:, 0] - sine * vectors[:, 1]
    turned[:, 1] = sine * vectors[:, 0] + cosine * vectors[:, 1]
    turned[:, 2] = vectors[:, 2]
    return turned
