"""Make a picture of a snapshot."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any, cast

import numpy as np
from scipy.spatial import ConvexHull, QhullError

from fieldviz.errors import RenderError
from fieldviz.scenes.camera import Camera, PixelBox, framed
from fieldviz.scenes.composition import Composition
from fieldviz.scenes.description import Scene, scene_named
from fieldviz.scenes.furniture import (
    data_mask,
    put_footer,
    put_header,
    put_radius_marks,
    put_scale_bar,
)
from fieldviz.scenes.off_screen import prepare_off_screen
from fieldviz.scenes.page import Page
from fieldviz.scenes.panels import FlatComposition, paint_panels
from fieldviz.scenes.recipe import make_recipe, picture_path, write
from fieldviz.scenes.stage import Quality, photograph, quality_named
from fieldviz.scenes.theme import Theme, theme_named
from fieldviz.scenes.wording import time_text
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["compose", "paint", "render"]

_SMALLEST = (240, 180)
_LARGEST = 16384


def render(
    snapshot: Snapshot,
    scene: str | Scene = "flux-sheets",
    path: str | Path | None = None,
    *,
    theme: str = "dark",
    size: tuple[int, int] = (1920, 1080),
    description: Scene | None = None,
    quality: str = "still",
) -> np.ndarray:
    """Make a picture of a snapshot, and write it where a path is given.

    Parameters
    ----------
    snapshot : Snapshot
    scene : str or scene description
        "flux-sheets", "outflow", "azimuth-cut", "mirror-check", "current-sheet", or a description
        with its settings.
    path : str or Path, optional
        PNG file; it carries its recipe in its metadata and appears only when it is whole.
    theme : str
        "dark" for talks, "light" for print.
    size : (int, int)
        Width and height in pixels.
    description : scene description, optional
        Settings for the scene named by `scene`.
    quality : str
        "still" or the quicker "preview".

    Returns
    -------
    (height, width, 3) uint8 array

    Raises
    ------
    RenderError
        If this machine cannot render, or a name or size is not usable.
    MissingFieldError
        If the snapshot lacks what the scene shows.

    Examples
    --------
    >>> import fieldviz as fv
    >>> disc = fv.demo_disc(shape=(4, 32, 48))
    >>> fv.render(disc, "azimuth-cut", size=(320, 180), quality="preview").shape
    (180, 320, 3)
    """
    chosen = _chosen_scene(scene, description)
    look, grade = theme_named(theme), quality_named(quality)
    size = _checked_size(size)
    target = None if path is None else picture_path(path)
    prepare_off_screen()
    composition = compose(snapshot, chosen, look, grade.nodes)
    image, _ = paint(composition, time_text(snapshot), look, size, grade)
    if target is not None:
        recipe = make_recipe(
            snapshot, chosen, composition.drawn, theme=theme, size=size, quality=quality
        )
        write(target, image, recipe)
    return image


def _chosen_scene(scene: str | Scene, description: Scene | None) -> Scene:
    named = scene_named(scene) if isinstance(scene, str) else scene
    if description is None:
        return named
    if isinstance(scene, str) and description.scene != scene and scene != "flux-sheets":
        raise RenderError(
            f"Cannot render the scene '{scene}': expected a description of that scene, got one of "
            f"'{description.scene}'; give the description alone."
        )
    return description


def _checked_size(size: tuple[int, int]) -> tuple[int, int]:
    width, height = (int(value) for value in size)
    if width < _SMALLEST[0] or height < _SMALLEST[1] or max(width, height) > _LARGEST:
        raise RenderError(
            f"Cannot render: expected a size from {_SMALLEST[0]} x {_SMALLEST[1]} to {_LARGEST} "
            f"pixels a side, got {width} x {height}."
        )
    return width, height


def compose(
    snapshot: Snapshot, scene: Scene, theme: Theme, nodes: int = 2_800_000
) -> Composition | FlatComposition:
    """Make a scene's layers, legends and caption from a snapshot, on at most so many nodes."""
    from fieldviz.scenes.azimuth_cut import compose_azimuth_cut
    from fieldviz.scenes.current_view import compose_current_sheet
    from fieldviz.scenes.flux_sheets import compose_flux_sheets
    from fieldviz.scenes.mirror_check import compose_mirror_check
    from fieldviz.scenes.outflow_view import compose_outflow

    makers: dict[str, Callable[..., Composition | FlatComposition]] = {
        "azimuth-cut": compose_azimuth_cut,
        "flux-sheets": compose_flux_sheets,
        "outflow": compose_outflow,
        "mirror-check": compose_mirror_check,
        "current-sheet": compose_current_sheet,
    }
    return makers[scene.scene](snapshot, cast(Any, scene), theme, nodes)


def paint(
    composition: Composition | FlatComposition,
    time: str,
    theme: Theme,
    size: tuple[int, int],
    quality: Quality,
) -> tuple[np.ndarray, Page]:
    """Photograph a composition and write its page.

    Returns
    -------
    (height, width, 3) uint8 array
    Page
        With the extents of all its texts.
    """
    if isinstance(composition, FlatComposition):
        return paint_panels(composition, time, theme, size)
    page = Page(size, theme)
    put_header(page, composition.title, composition.subtitle, time)
    footer = put_footer(page, composition)
    points = _all_points(composition)
    camera = _camera(page, composition, points, footer)
    if composition.scale_bar:
        put_scale_bar(page, camera, np.zeros(3), size[1] - 120 * page.scale)
    image = photograph(composition.layers, camera, theme, size, quality)
    if composition.radius_marks:
        occupied = data_mask(image, max(round(4 * page.scale), 1))
        put_radius_marks(page, camera, composition.radius_marks, occupied)
    return page.over(image), page


def _all_points(composition: Composition) -> Array:
    """Points of all layers, (n, 3)."""
    clouds = [np.asarray(layer.mesh.points, dtype=float) for layer in composition.layers]
    return np.concatenate([cloud for cloud in clouds if len(cloud)] or [np.eye(3)])


def _outermost(points: Array) -> Array:
    """The corners of the points' convex hull: as good as all of them for framing."""
    try:
        return np.asarray(points[ConvexHull(points).vertices])
    except QhullError:  # all in one plane
        return points


def _camera(page: Page, composition: Composition, points: Array, footer: float) -> Camera:
    """The nearest camera for which the data stay clear of the texts."""
    s = page.scale
    words = [placed.box.grown(14 * s) for placed in page.texts]
    corners = _outermost(points)
    # Beside the header if the data's shape allows it, else below.
    header = [placed.box.bottom for placed in page.texts if placed.box.bottom < 0.5 * footer]
    tops = [36 * s, 60 * s, 84 * s, 108 * s, 132 * s, 156 * s, max(header) + 16 * s]
    for top in tops:
        area = PixelBox(64 * s, top, page.size[0] - 64 * s, footer - 10 * s)
        camera = framed(corners, composition.azimuth, composition.height, area, page.size)
        seen = camera.pixels(points, page.size)
        if not any(box.holds(seen).any() for box in words):
            break
    return camera
