"""Read a snapshot from the native layout, or from any HDF5 file with a layout description."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from fieldviz.errors import SnapshotFileError
from fieldviz.snapshots.hdf5_access import open_hdf5
from fieldviz.snapshots.native import is_native, open_native
from fieldviz.wedge.snapshot import Snapshot

if TYPE_CHECKING:
    from fieldviz.snapshots.layout_description import LayoutDescription

__all__ = ["read_snapshot"]


def read_snapshot(
    path: str | Path,
    *,
    fields: Sequence[str] | None = None,
    layout: str | Path | LayoutDescription | None = None,
) -> Snapshot:
    """Open a snapshot; its fields are read when they are first used.

    Parameters
    ----------
    path : str or Path
        An HDF5 file.
    fields : sequence of str, optional
        Only these fields; all by default.
    layout : str, Path or LayoutDescription, optional
        Layout description (TOML) of a file that fieldviz did not write.

    Returns
    -------
    Snapshot

    Raises
    ------
    SnapshotFileError, GridError, LayoutError, MissingFieldError
        Each with one line that says what was expected, what was found and what to do.

    Examples
    --------
    >>> import fieldviz as fv
    >>> snapshot = fv.read_snapshot("sample_wedge/saltmarsh_000.h5")  # doctest: +SKIP
    """
    path = Path(path)
    with open_hdf5(path) as file:
        if layout is not None:
            from fieldviz.snapshots.foreign import open_foreign
            from fieldviz.snapshots.layout_description import read_layout

            return open_foreign(file, path, read_layout(layout), fields)
        if not is_native(file):
            raise SnapshotFileError(
                f"Cannot read {path}: expected a file in fieldviz's own layout, got another "
                f"HDF5 file; run `fieldviz inspect {path}` for a proposed layout description, "
                "check it, and give it with --layout."
            )
        return open_native(file, path, fields)
