"""fieldviz: snapshots of magnetised protoplanetary discs become 3D evidence.

Importing the package is cheap: names are looked up in their rooms when first used.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

from fieldviz._version import __version__

if TYPE_CHECKING:
    from fieldviz.derived.current_density import current_density as current_density
    from fieldviz.derived.edge_current import edge_current as edge_current
    from fieldviz.derived.flux_function import flux_function as flux_function
    from fieldviz.derived.flux_function import flux_function_at as flux_function_at
    from fieldviz.derived.mach import mach_numbers as mach_numbers
    from fieldviz.derived.plasma import plasma as plasma
    from fieldviz.derived.resolution import resolution as resolution
    from fieldviz.derived.stresses import stresses as stresses
    from fieldviz.derived.structure import disc_structure as disc_structure
    from fieldviz.derived.turbulence import turbulence as turbulence
    from fieldviz.derived.vector_calculus import curl as curl
    from fieldviz.derived.vector_calculus import divergence as divergence
    from fieldviz.derived.vector_calculus import gradient as gradient
    from fieldviz.diagnostics.series_numbers import measure_series as measure_series
    from fieldviz.diagnostics.snapshot_numbers import measure as measure
    from fieldviz.diagnostics.space_time import space_time as space_time
    from fieldviz.errors import FieldvizError as FieldvizError
    from fieldviz.lines.azimuth_mean import azimuth_mean as azimuth_mean
    from fieldviz.lines.critical_points import critical_points as critical_points
    from fieldviz.lines.line_invariants import line_invariants as line_invariants
    from fieldviz.lines.line_set import LineSet as LineSet
    from fieldviz.lines.seeds import equal_flux_plan as equal_flux_plan
    from fieldviz.lines.seeds import equal_flux_seeds as equal_flux_seeds
    from fieldviz.lines.seeds import even_area_seeds as even_area_seeds
    from fieldviz.lines.seeds_common import SeedPlan as SeedPlan
    from fieldviz.lines.seeds_shapes import cone_seeds as cone_seeds
    from fieldviz.lines.seeds_shapes import given_seeds as given_seeds
    from fieldviz.lines.seeds_shapes import ring_seeds as ring_seeds
    from fieldviz.lines.seeds_shapes import sphere_seeds as sphere_seeds
    from fieldviz.lines.seeds_sheets import sheet_plan as sheet_plan
    from fieldviz.lines.seeds_sheets import sheet_seeds as sheet_seeds
    from fieldviz.lines.seeds_wind import wind_plan as wind_plan
    from fieldviz.lines.seeds_wind import wind_seeds as wind_seeds
    from fieldviz.lines.tracing import trace_lines as trace_lines
    from fieldviz.report.write import write_report as write_report
    from fieldviz.scenes.render import render as render
    from fieldviz.sheets.current_sheets import current_sheets as current_sheets
    from fieldviz.sheets.flux_sheets import find_flux_sheets as find_flux_sheets
    from fieldviz.sheets.magnetic_midplane import magnetic_midplane as magnetic_midplane
    from fieldviz.sheets.tracking import track_flux_sheets as track_flux_sheets
    from fieldviz.snapshots.reader import read_snapshot as read_snapshot
    from fieldviz.snapshots.series import SnapshotSeries as SnapshotSeries
    from fieldviz.snapshots.series import read_series as read_series
    from fieldviz.snapshots.writer import write_snapshot as write_snapshot
    from fieldviz.symmetry.wind_symmetry import wind_symmetry as wind_symmetry
    from fieldviz.symmetry.wind_symmetry import wind_symmetry_of_series as wind_symmetry_of_series
    from fieldviz.vtk_data.snapshot_to_vtk import to_vtk as to_vtk
    from fieldviz.wedge.demo import SaltmarshDisc as SaltmarshDisc
    from fieldviz.wedge.demo import demo_disc as demo_disc
    from fieldviz.wedge.sampling import sample as sample
    from fieldviz.wedge.snapshot import Block as Block
    from fieldviz.wedge.snapshot import Snapshot as Snapshot
    from fieldviz.wedge.units import Unit as Unit
    from fieldviz.wedge.units import UnitScales as UnitScales
    from fieldviz.wind.outflow import outflow as outflow

_HOMES = {
    "Block": "fieldviz.wedge.snapshot",
    "FieldvizError": "fieldviz.errors",
    "LineSet": "fieldviz.lines.line_set",
    "SaltmarshDisc": "fieldviz.wedge.demo",
    "SeedPlan": "fieldviz.lines.seeds_common",
    "Snapshot": "fieldviz.wedge.snapshot",
    "SnapshotSeries": "fieldviz.snapshots.series",
    "Unit": "fieldviz.wedge.units",
    "UnitScales": "fieldviz.wedge.units",
    "azimuth_mean": "fieldviz.lines.azimuth_mean",
    "cone_seeds": "fieldviz.lines.seeds_shapes",
    "critical_points": "fieldviz.lines.critical_points",
    "curl": "fieldviz.derived.vector_calculus",
    "current_density": "fieldviz.derived.current_density",
    "current_sheets": "fieldviz.sheets.current_sheets",
    "demo_disc": "fieldviz.wedge.demo",
    "disc_structure": "fieldviz.derived.structure",
    "divergence": "fieldviz.derived.vector_calculus",
    "edge_current": "fieldviz.derived.edge_current",
    "equal_flux_plan": "fieldviz.lines.seeds",
    "equal_flux_seeds": "fieldviz.lines.seeds",
    "even_area_seeds": "fieldviz.lines.seeds",
    "find_flux_sheets": "fieldviz.sheets.flux_sheets",
    "flux_function": "fieldviz.derived.flux_function",
    "flux_function_at": "fieldviz.derived.flux_function",
    "given_seeds": "fieldviz.lines.seeds_shapes",
    "gradient": "fieldviz.derived.vector_calculus",
    "line_invariants": "fieldviz.lines.line_invariants",
    "mach_numbers": "fieldviz.derived.mach",
    "magnetic_midplane": "fieldviz.sheets.magnetic_midplane",
    "measure": "fieldviz.diagnostics.snapshot_numbers",
    "measure_series": "fieldviz.diagnostics.series_numbers",
    "outflow": "fieldviz.wind.outflow",
    "plasma": "fieldviz.derived.plasma",
    "read_series": "fieldviz.snapshots.series",
    "read_snapshot": "fieldviz.snapshots.reader",
    "render": "fieldviz.scenes.render",
    "resolution": "fieldviz.derived.resolution",
    "ring_seeds": "fieldviz.lines.seeds_shapes",
    "sample": "fieldviz.wedge.sampling",
    "sheet_plan": "fieldviz.lines.seeds_sheets",
    "sheet_seeds": "fieldviz.lines.seeds_sheets",
    "space_time": "fieldviz.diagnostics.space_time",
    "sphere_seeds": "fieldviz.lines.seeds_shapes",
    "stresses": "fieldviz.derived.stresses",
    "to_vtk": "fieldviz.vtk_data.snapshot_to_vtk",
    "trace_lines": "fieldviz.lines.tracing",
    "track_flux_sheets": "fieldviz.sheets.tracking",
    "turbulence": "fieldviz.derived.turbulence",
    "wind_plan": "fieldviz.lines.seeds_wind",
    "wind_seeds": "fieldviz.lines.seeds_wind",
    "wind_symmetry": "fieldviz.symmetry.wind_symmetry",
    "wind_symmetry_of_series": "fieldviz.symmetry.wind_symmetry",
    "write_report": "fieldviz.report.write",
    "write_snapshot": "fieldviz.snapshots.writer",
}

__all__ = ["__version__", *_HOMES]


def __getattr__(name: str) -> object:
    if name not in _HOMES:
        raise AttributeError(f"module 'fieldviz' has no attribute '{name}'")
    value = getattr(import_module(_HOMES[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
