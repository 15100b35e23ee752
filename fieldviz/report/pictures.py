"""Scenes and diagrams as pictures that are part of the page."""

from __future__ import annotations

import base64
import io
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from fieldviz.errors import FieldvizError
from fieldviz.report.contents import Picture
from fieldviz.report.material import Progress
from fieldviz.report.paper import Diagram
from fieldviz.report.texts import plain_number
from fieldviz.scenes.theme import THEMES
from fieldviz.wedge.snapshot import Snapshot

if TYPE_CHECKING:
    from PIL.Image import Image

__all__ = ["SCENES", "diagram_picture", "scene_pictures"]

SCENES = ("flux-sheets", "outflow", "azimuth-cut", "mirror-check", "current-sheet")
FOLDER = "pictures"
_SIZE = (1280, 720)
_LARGEST_PNG = 150_000  # bytes; above, the page holds a smaller form of the same picture
_TITLES = {
    "flux-sheets": "Flux sheets",
    "outflow": "Outflow",
    "azimuth-cut": "Cut at constant azimuth",
    "mirror-check": "Mirror check",
    "current-sheet": "Current sheet",
}
_CAPTIONS = {
    "flux-sheets": "nested surfaces of the vertical field, weighted with radius so that all radii "
    "share a scale, in a ring with its front taken away, with field lines that thread them",
    "azimuth-cut": "a sector of the wedge, its upper half opened down to the midplane, with "
    "density on the walls and poloidal field lines",
    "outflow": "streamlines that each carry the same mass, coloured by their poloidal speed, with "
    "the Alfvén surface behind the star",
    "mirror-check": "one side reflected onto the other and their difference, with the verdict",
    "current-sheet": "the surface where the azimuthal field changes sign, coloured by the current, "
    "and its section at the cut",
}


def scene_pictures(
    snapshot: Snapshot,
    folder: Path,
    *,
    scenes: Sequence[str] = SCENES,
    progress: Progress | None = None,
) -> tuple[tuple[Picture, ...], tuple[str, ...]]:
    """Draw scenes in both themes; their PNG files, with recipes, go to `folder`/pictures.

    Parameters
    ----------
    snapshot : Snapshot
    folder : Path
        Of the report; exists.
    scenes : sequence of str
        Names of scenes.
    progress : callable, optional

    Returns
    -------
    tuple of Picture, tuple of str
        The pictures, and why others are absent.
    """
    found, missing = [], []
    for number, name in enumerate(scenes):
        try:
            found.append(_scene(snapshot, name, folder))
        except FieldvizError as error:
            missing.append(f"No picture of the scene {name}. {error}")
        if progress is not None:
            progress(number + 1, len(scenes), "drawing scenes")
    pictures = folder / FOLDER
    if pictures.is_dir() and not any(pictures.iterdir()):
        pictures.rmdir()
    return tuple(found), tuple(missing)


def diagram_picture(diagram: Diagram) -> Picture:
    """A diagram as part of the page."""
    light, dark = (_uri(svg, "image/svg+xml") for svg in (diagram.light, diagram.dark))
    return Picture(diagram.title, diagram.caption, diagram.alt, light, dark)


def _scene(snapshot: Snapshot, name: str, folder: Path) -> Picture:
    from fieldviz.scenes.render import render

    written = {}
    for theme in THEMES:
        target = folder / FOLDER / f"{name}_{theme}.png"
        target.parent.mkdir(exist_ok=True)
        render(snapshot, name, target, theme=theme, size=_SIZE)
        written[theme] = target
    when = f"t = {plain_number(float(snapshot.time), 6)}"
    return Picture(
        _TITLES.get(name, name),
        f"At {when}: {_CAPTIONS.get(name, 'a scene')}. The file carries its recipe.",
        f"Three-dimensional picture at {when}: {_CAPTIONS.get(name, name)}.",
        _embedded(written["light"]),
        _embedded(written["dark"]),
        f"{FOLDER}/{written['light'].name}",
        _SIZE,
    )


def _embedded(path: Path) -> str:
    content = path.read_bytes()
    if len(content) <= _LARGEST_PNG:
        return _uri(content, "image/png")
    from PIL import Image

    with Image.open(path) as image:
        return _uri(_smaller(image), "image/webp")


def _smaller(image: Image) -> bytes:
    kept = io.BytesIO()
    image.convert("RGB").save(kept, format="WEBP", quality=90, method=4)
    return kept.getvalue()


def _uri(content: bytes, kind: str) -> str:
    return f"data:{kind};base64,{base64.b64encode(content).decode('ascii')}"


def scene_names(scenes: bool | Iterable[str]) -> tuple[str, ...]:
    """Names of the scenes that are asked for.

    Raises
    ------
    FieldvizError
        If there is no scene of a name.
    """
    if isinstance(scenes, bool):
        return SCENES if scenes else ()
    wanted = (scenes,) if isinstance(scenes, str) else tuple(scenes)
    unknown = [name for name in wanted if name not in SCENES]
    if unknown:
        raise FieldvizError(
            f"Cannot write the report: expected scenes among {', '.join(SCENES)}, got "
            f"{', '.join(unknown)}; leave them out and all are drawn."
        )
    return wanted
