"""fieldviz: snapshots of magnetised protoplanetary discs become 3D evidence.

Importing the package is cheap: names are looked up in their rooms when first used.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

from fieldviz._version import __version__

if TYPE_CHECKING:
    from fieldviz.derived.current_density import current_density as current_density
    from fieldviz.derived.flux_function import flux_function as flux_function
    from fieldviz.derived.vector_calculus import curl as curl
    from fieldviz.derived.vector_calculus import divergence as divergence
    from fieldviz.derived.vector_calculus import gradient as gradient
    from fieldviz.errors import FieldvizError as FieldvizError
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
    from fieldviz.scenes.render import render as render
    from fieldviz.snapshots.reader import read_snapshot as read_snapshot
    from fieldviz.snapshots.series import SnapshotSeries as SnapshotSeries
    from fieldviz.snapshots.series import read_series as read_series
    from fieldviz.snapshots.writer import write_snapshot as write_snapshot
    from fieldviz.symmetry.wind_symmetry import wind_symmetry as wind_symmetry
    from fieldviz.vtk_data.snapshot_to_vtk import to_vtk as to_vtk
    from fieldviz.wedge.demo import SaltmarshDisc as SaltmarshDisc
    from fieldviz.wedge.demo import demo_disc as demo_disc
    from fieldviz.wedge.sampling import sample as sample
    from fieldviz.wedge.snapshot import Block as Block
    from fieldviz.wedge.snapshot import Snapshot as Snapshot
    from fieldviz.wedge.units import Unit as Unit
    from fieldviz.wedge.units import UnitScales as UnitScales

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
    "cone_seeds": "fieldviz.lines.seeds_shapes",
    "curl": "fieldviz.derived.vector_calculus",
    "current_density": "fieldviz.derived.current_density",
    "demo_disc": "fieldviz.wedge.demo",
    "divergence": "fieldviz.derived.vector_calculus",
    "equal_flux_plan": "fieldviz.lines.seeds",
    "equal_flux_seeds": "fieldviz.lines.seeds",
    "even_area_seeds": "fieldviz.lines.seeds",
    "flux_function": "fieldviz.derived.flux_function",
    "given_seeds": "fieldviz.lines.seeds_shapes",
    "gradient": "fieldviz.derived.vector_calculus",
    "read_series": "fieldviz.snapshots.series",
    "read_snapshot": "fieldviz.snapshots.reader",
    "render": "fieldviz.scenes.render",
    "ring_seeds": "fieldviz.lines.seeds_shapes",
    "sample": "fieldviz.wedge.sampling",
    "sheet_plan": "fieldviz.lines.seeds_sheets",
    "sheet_seeds": "fieldviz.lines.seeds_sheets",
    "sphere_seeds": "fieldviz.lines.seeds_shapes",
    "to_vtk": "fieldviz.vtk_data.snapshot_to_vtk",
    "trace_lines": "fieldviz.lines.tracing",
    "wind_plan": "fieldviz.lines.seeds_wind",
    "wind_seeds": "fieldviz.lines.seeds_wind",
    "wind_symmetry": "fieldviz.symmetry.wind_symmetry",
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
