"""The declaration of the plugin: one XML file, with the places of the icons put in."""

from __future__ import annotations

from pathlib import Path
from xml.sax.saxutils import escape

__all__ = ["ICONS", "PLUGIN", "XML", "declaration"]

_HERE = Path(__file__).resolve().parent
PLUGIN = _HERE / "plugin"  # nothing else may be in it: the host tries every file there
XML = PLUGIN / "fieldviz_plugin.xml"
ICONS = _HERE / "icons"


def declaration(icons: Path = ICONS) -> str:
    """Text of the declaration; the host finds icons by absolute paths only."""
    place = escape(icons.as_posix(), {'"': "&quot;"})
    return XML.read_text(encoding="utf-8").replace("{icons}", place)
