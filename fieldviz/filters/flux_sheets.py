"""Flux sheets as a filter: curtains through what was measured, and a table."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from vtkmodules.vtkCommonDataModel import vtkPolyData

from fieldviz.filters.base import FieldvizAlgorithm, Setting, given_range, given_value
from fieldviz.filters.pieces import (
    add_arrays,
    azimuth_nodes,
    colour_first,
    fill_table,
    poly_data,
    quads_of_rows,
    set_cells,
)
from fieldviz.filters.ranks import Ranks, whole_snapshot
from fieldviz.filters.trees import describe
from fieldviz.sheets.criteria import CONTRAST, COVERAGE
from fieldviz.sheets.flux_sheets import FluxSheet, FluxSheets, find_flux_sheets
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["FluxSheetSurfaces"]

COLUMNS = (
    "radius", "polarity", "width", "inner", "outer", "flux", "share", "unsigned_share", "contrast",
    "field", "beta_z", "depletion", "separation", "flux_between", "field_between", "coverage",
    "wander", "tilt", "bending",
)  # fmt: skip
_ON_SURFACES = ("radius", "polarity", "width", "flux", "unsigned_share", "contrast", "beta_z")
_STRAIGHT = 0.25  # H to either side of a sheet that could not be followed away from the midplane


class FluxSheetSurfaces(FieldvizAlgorithm):
    """Finds flux sheets; the first output is their surfaces, the second their table.

    Settings
    --------
    Radii, Thickness
        Radii to search (0, 0 for all); H/R (0: worked out).
    Contrast, Prominence, Coverage
        Thresholds; see `SheetCriteria`. Prominence 0: 0.5, or 0.02 without noise.
    Patches : bool
        Also what covers too little of the azimuth to be called a sheet.
    """

    TITLE = "Fieldviz Flux Sheets"
    OUTPUTS = ("vtkPolyData", "vtkTable")
    SETTINGS = {  # noqa: RUF012
        "Radii": Setting((0.0, 0.0)),
        "Thickness": Setting(0.0),
        "Contrast": Setting(CONTRAST),
        "Prominence": Setting(0.0),
        "Coverage": Setting(COVERAGE),
        "Patches": Setting(0),
    }

    def work(self, inputs: Any, outputs: Any) -> None:
        """Find, measure and draw the sheets."""
        snapshot = whole_snapshot(inputs[0], "find flux sheets")
        if Ranks().rank:
            return
        found = find_flux_sheets(
            snapshot,
            thickness=given_value(self.GetThickness()),
            r_range=given_range(self.GetRadii()),
            contrast=self.GetContrast(),
            prominence=given_value(self.GetProminence()),
            coverage=self.GetCoverage(),
        )
        self.UpdateProgress(0.8)
        listed = [*found.sheets, *(found.patches if self.GetPatches() else ())]
        notes = (f"{len(found.sheets)} sheets, {len(found.patches)} patches", *found.notes)
        outputs[0].ShallowCopy(_surfaces(snapshot, found, listed))
        kinds = ["sheet" if one in found.sheets else "patch" for one in listed]
        columns: dict[str, Sequence[object]] = {"kind": kinds}
        columns |= {name: [getattr(one, name) for one in listed] for name in COLUMNS}
        columns["flags"] = ["; ".join(one.flags) for one in listed]
        fill_table(outputs[1], columns)
        for output in outputs:
            describe(output, snapshot, notes)


def _surfaces(snapshot: Snapshot, found: FluxSheets, sheets: Sequence[FluxSheet]) -> vtkPolyData:
    """One curtain a sheet where its ridge R(phi) is, moved with height as its azimuth mean is."""
    phi = azimuth_nodes(snapshot.grid)
    points: list[Array] = [np.empty((0, 3))]
    heights: list[Array] = [np.empty(0)]
    corners: list[IntArray] = [np.empty((0, 4), dtype=np.int64)]
    first = 0
    for sheet in sheets:
        places, z = _curtain(sheet, found.h, phi)
        points.append(places.reshape(-1, 3))
        heights.append(np.repeat(z, len(phi)))
        quads = quads_of_rows(len(z), len(phi)).reshape(len(z) - 1, len(phi) - 1, 4)
        corners.append(first + quads[:, _there(sheet, phi)].reshape(-1, 4))
        first += len(z) * len(phi)
    data = poly_data(np.concatenate(points))
    set_cells(data, "Polys", np.concatenate(corners))
    add_arrays(data.GetPointData(), {"height": np.concatenate(heights)})
    counts = [len(one) for one in corners[1:]]
    numbers = {"sheet": np.repeat(np.arange(len(sheets)), counts)}
    for name in _ON_SURFACES:
        values = [np.nan if getattr(s, name) is None else float(getattr(s, name)) for s in sheets]
        numbers[name] = np.repeat(np.array(values, dtype=np.float64), counts)
    add_arrays(data.GetCellData(), numbers)
    colour_first(data, "unsigned_share")
    return data


def _there(sheet: FluxSheet, phi: Array) -> Array:
    """Between which neighbouring azimuths the ridge was found, (n_phi - 1,) bool."""
    if sheet.ridge is None:
        return np.ones(len(phi) - 1, dtype=bool)
    own = sheet.ridge.phi
    nearest = np.abs(0.5 * (phi[1:] + phi[:-1])[:, None] - own).argmin(axis=1)
    return np.isfinite(sheet.ridge.radius[nearest])


def _curtain(sheet: FluxSheet, h: float, phi: Array) -> tuple[Array, Array]:
    """Points (n_heights, n_phi, 3) of a sheet, and the heights z/H they lie at."""
    z, moved = sheet.heights, sheet.radii - sheet.radius
    if len(z) < 2:
        z, moved = np.array([-_STRAIGHT, 0.0, _STRAIGHT]), np.zeros(3)
    ridge = np.full(len(phi), sheet.radius) if sheet.ridge is None else sheet.ridge.filled(phi)
    R = ridge + moved[:, None]
    points = np.empty((*R.shape, 3))
    slope = np.arctan(h * z)[:, None]
    points[..., 0] = R / np.cos(slope)
    points[..., 1] = 0.5 * np.pi - slope
    points[..., 2] = phi
    return points, z
