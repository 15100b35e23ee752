"""Seeds and field lines as filters."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkCommonDataModel import vtkPolyData

from fieldviz.filters.base import SNAPSHOT, FieldvizAlgorithm, Setting, given_value
from fieldviz.filters.pieces import add_arrays, colour_first, poly_data, set_cells
from fieldviz.filters.ranks import Ranks, whole_snapshot
from fieldviz.filters.seeding import SEED_SETTINGS, SEEDING, placed_seeds, seeds_of_points
from fieldviz.filters.trees import describe
from fieldviz.lines.line_set import LineSet
from fieldviz.lines.tracing import trace_lines
from fieldviz.vtk_data.lines_to_vtk import lines_to_vtk
from fieldviz.wedge.coordinates import vectors_to_cartesian
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["FieldLineSeeds", "FieldLines", "drawn_lines", "followed"]

TRACED = ("magnetic", "poloidal magnetic", "velocity", "poloidal velocity")
INTERPOLATIONS = ("auto", "flux", "linear")
DIRECTIONS = ("both", "forward", "backward")
_PARTS = {"magnetic": MAGNETIC, "velocity": VELOCITY}
TRACING_SETTINGS = {
    "Interpolation": Setting("auto", INTERPOLATIONS),
    "Direction": Setting("both", DIRECTIONS),
    "Tolerance": Setting(1e-6),
    "LongestStep": Setting(0.4),
    "LongestLine": Setting(0.0),
    "MostSteps": Setting(20_000),
    "SampleFields": Setting(1),
}


class FieldLineSeeds(FieldvizAlgorithm):
    """Points for lines to start from, each with what its line stands for.

    Settings
    --------
    Seeding : str
        "equal flux", "even area", "flux sheets" or "wind".
    Count, Radii, SeedAngle, Height, Thickness
        Number of seeds; radii (0, 0 for all); degrees of the cone above the midplane, for the first
        two kinds; height of the launching surfaces in H, for the wind; H/R (0: worked out).
    """

    TITLE = "Fieldviz Field-Line Seeds"
    OUTPUTS = ("vtkPolyData",)
    SETTINGS = {"Seeding": Setting(SEEDING[0], SEEDING), **SEED_SETTINGS}  # noqa: RUF012

    def work(self, inputs: Any, outputs: Any) -> None:
        """Place the seeds."""
        snapshot = whole_snapshot(inputs[0], "place seeds")
        if Ranks().rank:
            return
        plan = placed_seeds(snapshot, self.GetSeeding(), self.settings)
        data = poly_data(plan.points)
        set_cells(data, "Verts", np.arange(len(plan.points))[:, None])
        add_arrays(data.GetPointData(), {"amount": plan.amount, "group": plan.group})
        describe(data, snapshot, (f"amount is {plan.unit}", *plan.notes))
        outputs[0].ShallowCopy(data)


class FieldLines(FieldvizAlgorithm):
    """Lines of the magnetic field or of the flow.

    Settings
    --------
    Field : str
        "magnetic", "poloidal magnetic", "velocity" or "poloidal velocity".
    Seeding, Count, Radii, SeedAngle, Height, Thickness
        As of `FieldLineSeeds`; not used where the second input is connected.
    Interpolation : str
        "flux", "linear", or "auto": flux where the magnetic field is on faces.
    Direction, Tolerance, LongestStep, LongestLine, MostSteps
        As of `trace_lines`; steps in cells, lines in code length (0: 20 outer radii).
    SampleFields : bool
        Sample all fields along the lines.
    """

    TITLE = "Fieldviz Field Lines"
    INPUTS = (SNAPSHOT, ("vtkPointSet", "vtkCompositeDataSet"))
    OPTIONAL = (1,)
    OUTPUTS = ("vtkPolyData",)
    SETTINGS = {  # noqa: RUF012
        "Field": Setting(TRACED[0], TRACED),
        "Seeding": Setting(SEEDING[0], SEEDING),
        **SEED_SETTINGS,
        **TRACING_SETTINGS,
    }

    def work(self, inputs: Any, outputs: Any) -> None:
        """Place seeds or take those that are given, and follow the lines."""
        snapshot = whole_snapshot(inputs[0], "trace lines")
        if Ranks().rank:
            return
        per_line: dict[str, Array] = {}
        notes: tuple[str, ...] = ()
        if inputs[1] is None:
            plan = placed_seeds(snapshot, self.GetSeeding(), self.settings)
            seeds, per_line = plan.points, {"amount": plan.amount, "group": plan.group}
            notes = (f"amount is {plan.unit}", *plan.notes)
        else:
            seeds = seeds_of_points(inputs[1])
        self.UpdateProgress(0.2)
        lines = followed(snapshot, self.GetField(), seeds, self.settings)
        self.UpdateProgress(0.9)
        outputs[0].ShallowCopy(drawn_lines(lines, per_line))
        describe(outputs[0], snapshot, notes)


def followed(snapshot: Snapshot, field: str, seeds: Array, settings: Mapping[str, Any]) -> LineSet:
    """Follow lines as the settings (TRACING_SETTINGS) say."""
    name = field.removeprefix("poloidal ")
    interpolation = settings["Interpolation"]
    if interpolation == "auto":
        on_faces = all(part in snapshot.faces for part in MAGNETIC)
        interpolation = "flux" if on_faces and name == "magnetic" else "linear"
    return trace_lines(
        snapshot,
        name,
        seeds,
        direction=settings["Direction"],
        interpolation=interpolation,
        tolerance=settings["Tolerance"],
        most_cells=settings["LongestStep"],
        longest=given_value(settings["LongestLine"]),
        most_steps=settings["MostSteps"],
        poloidal=field.startswith("poloidal "),
        sample=snapshot.cell_names if settings["SampleFields"] else (),
    )


def drawn_lines(
    lines: LineSet,
    per_line: Mapping[str, Array] | None = None,
) -> vtkPolyData:
    """Lines as poly data, with Cartesian vectors, and numbers of each line as cell arrays."""
    data = lines_to_vtk(lines)
    kept = vtk_to_numpy(data.GetCellData().GetArray("line"))
    add_arrays(
        data.GetCellData(), {name: np.asarray(v)[kept] for name, v in (per_line or {}).items()}
    )
    counts = np.diff(lines.offsets)
    taken = np.repeat(counts >= 2, counts)
    for name, parts in _PARTS.items():
        if all(part in lines.fields for part in parts):
            components = np.stack([lines.fields[part][taken] for part in parts], axis=1)
            vectors = vectors_to_cartesian(components, lines.spherical[taken])
            strength = np.sqrt(np.sum(np.square(components, dtype=np.float64), axis=1))
            add_arrays(data.GetPointData(), {name: vectors, f"{name}_strength": strength})
    colour_first(data, f"{lines.name}_strength")
    return data
