"""How seeds are placed: what Field-Line Seeds and Field Lines share."""

from __future__ import annotations

from typing import Any

import numpy as np
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkCommonDataModel import vtkPointSet

from fieldviz.errors import FieldvizError
from fieldviz.filters.base import Setting, given_range, given_value
from fieldviz.lines.seeds import equal_flux_plan, even_area_seeds
from fieldviz.lines.seeds_common import SeedPlan
from fieldviz.lines.seeds_sheets import sheet_plan
from fieldviz.lines.seeds_wind import wind_plan
from fieldviz.sheets.flux_sheets import find_flux_sheets
from fieldviz.vtk_data.block_parts import leaves
from fieldviz.wedge.coordinates import points_to_spherical
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["SEEDING", "SEED_SETTINGS", "placed_seeds", "seeds_of_points"]

EQUAL_FLUX, EVEN_AREA, SHEETS, WIND = "equal flux", "even area", "flux sheets", "wind"
SEEDING = (EQUAL_FLUX, EVEN_AREA, SHEETS, WIND)
SEED_SETTINGS = {
    "Count": Setting(100),
    "Radii": Setting((0.0, 0.0)),
    "SeedAngle": Setting(0.0),  # degrees above the midplane
    "Height": Setting(4.0),
    "Thickness": Setting(0.0),
}


def placed_seeds(snapshot: Snapshot, kind: str, settings: dict[str, Any]) -> SeedPlan:
    """Place seeds as the settings say.

    Parameters
    ----------
    snapshot : Snapshot
    kind : str
        One of SEEDING.
    settings : dict
        Values of SEED_SETTINGS.

    Returns
    -------
    SeedPlan
        With NaN amounts for seeds even in area: they stand for nothing.
    """
    count, r_range = settings["Count"], given_range(settings["Radii"])
    thickness = given_value(settings["Thickness"])
    theta = 0.5 * np.pi - np.radians(settings["SeedAngle"])
    if kind == EQUAL_FLUX:
        return equal_flux_plan(snapshot, count, r_range=r_range, theta=theta)
    if kind == EVEN_AREA:
        points = even_area_seeds(snapshot, count, r_range=r_range, theta=theta)
        nothing = np.full(len(points), np.nan)
        group, note = np.zeros(len(points), dtype=np.int64), "their density says nothing"
        return SeedPlan(points, nothing, group, np.nan, np.nan, "none", (note,))
    if kind == WIND:
        return wind_plan(
            snapshot, count, scale_heights=settings["Height"], thickness=thickness, r_range=r_range
        )
    sheets = find_flux_sheets(snapshot, thickness=thickness, r_range=r_range, lean=False)
    if not len(sheets):
        raise FieldvizError(
            "Cannot place seeds along flux sheets: expected at least one sheet, found none; choose "
            "another range of radii, or seeds of equal flux."
        )
    return sheet_plan(snapshot, list(sheets), count, thickness=thickness)


def seeds_of_points(data: Any) -> Array:
    """Seeds (n, 3) r, theta, phi of any points.

    Point arrays r, theta and phi are taken where they are all there, as Field-Line Seeds writes
    them, to the last bit; else the places of the points.
    """
    found = []
    for leaf in leaves(data):
        if not isinstance(leaf, vtkPointSet) or not leaf.GetNumberOfPoints():
            continue
        arrays = [leaf.GetPointData().GetArray(name) for name in ("r", "theta", "phi")]
        if all(array is not None for array in arrays):
            found.append(np.stack([vtk_to_numpy(array) for array in arrays], axis=1))
        else:
            places = vtk_to_numpy(leaf.GetPoints().GetData()).astype(np.float64)
            found.append(points_to_spherical(places))
    if not found:
        raise FieldvizError(
            "Cannot trace lines: expected points to start from, got none; connect an object with "
            "points to the seeds."
        )
    return np.concatenate(found)
