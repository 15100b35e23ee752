"""The errors fieldviz raises on purpose.

Every message reads: cannot do what: expected this, got that; what to do.
"""

from __future__ import annotations

__all__ = [
    "FieldvizError",
    "GridError",
    "LayoutError",
    "MissingFieldError",
    "RenderError",
    "SnapshotFileError",
]


class FieldvizError(Exception):
    """Base of all errors a user can meet; its text is one clear line."""


class GridError(FieldvizError, ValueError):
    """The edges or blocks do not describe a wedge."""


class SnapshotFileError(FieldvizError, OSError):
    """A file cannot be read or written as a snapshot."""


class LayoutError(FieldvizError, ValueError):
    """A layout description is unreadable or does not fit its file."""


class MissingFieldError(FieldvizError, KeyError):
    """A field that the work needs is not in the snapshot."""

    def __str__(self) -> str:
        return str(self.args[0]) if self.args else "a field is missing"


class RenderError(FieldvizError, RuntimeError):
    """A picture cannot be made on this machine or from these data."""
