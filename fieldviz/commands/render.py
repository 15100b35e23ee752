"""`fieldviz render`: one picture of a scene."""

from __future__ import annotations

from pathlib import Path

from fieldviz.errors import FieldvizError
from fieldviz.scenes.render import render
from fieldviz.snapshots.reader import read_snapshot

__all__ = ["run"]

_LARGEST = 7680


def run(
    path: Path,
    *,
    scene: str,
    output: Path | None,
    layout: Path | None,
    theme: str,
    size: str,
    quality: str,
) -> str:
    """Draw the picture; return its name."""
    output = output or Path(f"{path.stem}_{scene}_{theme}.png")
    if output.suffix.lower() != ".png":
        raise FieldvizError(
            f"Cannot draw {output}: expected a name ending in .png, got '{output.suffix}'."
        )
    snapshot = read_snapshot(path, layout=layout)
    render(snapshot, scene, output, theme=theme, size=_pixels(size), quality=quality)
    return str(output)


def _pixels(size: str) -> tuple[int, int]:
    try:
        width, height = (int(part) for part in size.lower().split("x"))
    except ValueError:
        width = height = 0
    if not (320 <= width <= _LARGEST and 180 <= height <= _LARGEST):
        raise FieldvizError(
            f"Cannot draw a picture of size '{size}': expected WIDTHxHEIGHT from 320x180 to "
            f"{_LARGEST}x{_LARGEST}, for example 1920x1080."
        )
    return width, height
