"""fieldviz: snapshots of magnetised protoplanetary discs become 3D evidence.

Importing the package is cheap: names are looked up in their rooms when first used.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

from fieldviz._version import __version__

if TYPE_CHECKING:
    from fieldviz.errors import FieldvizError as FieldvizError
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
    "SaltmarshDisc": "fieldviz.wedge.demo",
    "Snapshot": "fieldviz.wedge.snapshot",
    "SnapshotSeries": "fieldviz.snapshots.series",
    "Unit": "fieldviz.wedge.units",
    "UnitScales": "fieldviz.wedge.units",
    "demo_disc": "fieldviz.wedge.demo",
    "read_series": "fieldviz.snapshots.series",
    "read_snapshot": "fieldviz.snapshots.reader",
    "render": "fieldviz.scenes.render",
    "sample": "fieldviz.wedge.sampling",
    "to_vtk": "fieldviz.vtk_data.snapshot_to_vtk",
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
