"""`fieldviz host`: install the plugin for the host application, and check it."""

from __future__ import annotations

import sys
from pathlib import Path

from fieldviz.errors import FieldvizError
from fieldviz.host.check import check as checked
from fieldviz.host.install import install as installed
from fieldviz.host.install import macros_folder

__all__ = ["check", "install"]


def install(host: Path | None, folder: Path | None, *, macros: bool) -> str:
    """Install; return what was done, how to use it and how to undo it."""
    return installed(host, folder, macros=macros_folder() if macros else None).text


def check(folder: Path | None, snapshot: Path | None) -> str:
    """Check; return the table of what works, or show it and fail."""
    found = checked(folder, snapshot)
    if found.failed:
        print(found.text, file=sys.stderr)
        raise FieldvizError(
            f"Cannot rely on the plugin in {found.folder}: expected every step to work, got "
            f"failures in {', '.join(found.failed)}; the table above says why."
        )
    return found.text
