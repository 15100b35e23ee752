"""`fieldviz inspect`: what is in a file, and how a foreign one could be read."""

from __future__ import annotations

import json
from pathlib import Path

from fieldviz.snapshots.inspection import inspect_file
from fieldviz.snapshots.inspection_text import format_inspection

__all__ = ["run"]


def run(path: Path, layout: Path | None, as_json: bool) -> str:
    """Inspect a file.

    Parameters
    ----------
    path : Path
    layout : Path or None
        Layout description of a file that fieldviz did not write.
    as_json : bool
        One JSON object, the proposal in its entry "proposal".

    Returns
    -------
    str
        Text for stdout. Of a file whose layout is not known: the inspection as comments, then the
        proposed description, so that the whole is a layout description.
    """
    inspection = inspect_file(path, layout)
    if as_json:
        return json.dumps(inspection.as_dict(), indent=2, allow_nan=False)
    text = format_inspection(inspection)
    if not inspection.proposal:
        return text
    comments = "\n".join(f"# {line}".rstrip() for line in text.splitlines())
    return f"{comments}\n\n{inspection.proposal}".rstrip("\n")
