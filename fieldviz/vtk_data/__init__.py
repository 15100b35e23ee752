"""Snapshots as VTK objects, for any VTK program."""
