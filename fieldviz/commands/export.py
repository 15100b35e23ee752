"""`fieldviz export`: a snapshot as VTK's XML or VTKHDF."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from fieldviz.snapshots.reader import read_snapshot
from fieldviz.vtk_data.files import write_vtk
from fieldviz.vtk_data.snapshot_to_vtk import to_vtk

__all__ = ["run"]


def run(
    path: Path, output: Path, *, layout: Path | None, fields: Sequence[str] | None, halo: bool
) -> str:
    """Write the export; return what was written, a line each."""
    snapshot = read_snapshot(path, layout=layout)
    written = write_vtk(output, to_vtk(snapshot, fields=fields, halo=halo))
    return "\n".join(str(name) for name in written)
