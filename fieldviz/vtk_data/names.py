"""Names of arrays and parts in VTK objects made from snapshots."""

from __future__ import annotations

__all__ = ["GHOSTS", "LEVEL", "VECTORS", "level_name"]

LEVEL = "level"
# VTK knows ghost cells by this name only.
GHOSTS = "vtkGhostType"
# Cartesian vectors and the spherical components they are made of.
VECTORS = {
    "velocity": ("velocity_r", "velocity_theta", "velocity_phi"),
    "magnetic": ("magnetic_r", "magnetic_theta", "magnetic_phi"),
}


def level_name(level: int) -> str:
    """Name of the part that holds the blocks of one level."""
    return f"level {level}"
