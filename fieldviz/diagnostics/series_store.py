"""The numbers of a series on disk: one file for each snapshot, whole or absent, and its key."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from fieldviz._version import __version__
from fieldviz.diagnostics.plain import json_text
from fieldviz.diagnostics.snapshot_numbers import FORM
from fieldviz.errors import SnapshotFileError
from fieldviz.output import whole_file

if TYPE_CHECKING:
    from fieldviz.snapshots.layout_description import LayoutDescription

__all__ = ["input_key", "made_folder", "read_record", "record_path", "write_record"]

Record = dict[str, Any]
SUFFIX = ".numbers.json"


def input_key(
    path: Path, parts: Sequence[str], layout: str | Path | LayoutDescription | None
) -> Record:
    """What the numbers of one file depend on; equal keys mean equal numbers.

    Raises
    ------
    SnapshotFileError, LayoutError
    """
    try:
        state = path.stat()
    except OSError as error:
        raise SnapshotFileError(
            f"Cannot read {path}: expected a file, got '{error.strerror}'; check its name."
        ) from error
    return {
        "form": FORM,
        "version": __version__,
        "name": path.name,
        "size": state.st_size,
        "modified": state.st_mtime_ns,
        "parts": list(parts),
        "layout": _layout_mark(layout),
    }


def _layout_mark(layout: str | Path | LayoutDescription | None) -> str | None:
    if layout is None:
        return None
    from fieldviz.snapshots.layout_description import layout_to_toml, read_layout

    return hashlib.sha256(layout_to_toml(read_layout(layout)).encode()).hexdigest()


def made_folder(folder: str | Path) -> Path:
    """The folder for records, made where it is missing.

    Raises
    ------
    SnapshotFileError
    """
    folder = Path(folder)
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise SnapshotFileError(
            f"Cannot keep numbers in {folder}: expected a folder that can be made, got "
            f"'{error.strerror}'; choose another place."
        ) from error
    return folder


def record_path(folder: Path, path: Path) -> Path:
    """File of a snapshot's numbers; files of one name in different folders do not meet."""
    mark = hashlib.sha256(str(path.resolve()).encode()).hexdigest()[:8]
    return folder / f"{path.stem}.{mark}{SUFFIX}"


def write_record(target: Path, key: Record, record: Record) -> None:
    """Write numbers with their key; the file appears whole or not at all."""
    with whole_file(target) as temporary:
        temporary.write_text(json_text({"key": key, "numbers": record}), encoding="utf-8")


def read_record(target: Path, key: Record) -> Record | None:
    """Numbers of an earlier run; None where there are none, or of other inputs."""
    try:
        found = json.loads(target.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return None
    if not isinstance(found, dict) or found.get("key") != key:
        return None
    numbers = found.get("numbers")
    return numbers if isinstance(numbers, dict) else None
