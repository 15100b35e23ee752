"""The recipe of a picture: everything needed to make it again, as TOML text within the PNG."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import tomlkit
from PIL import Image, UnidentifiedImageError
from PIL.PngImagePlugin import PngInfo
from tomlkit.exceptions import TOMLKitError

from fieldviz._version import __version__
from fieldviz.errors import RenderError
from fieldviz.output import whole_file
from fieldviz.scenes.description import Scene, scene_table
from fieldviz.wedge.snapshot import Snapshot

__all__ = ["RECIPE_KEY", "make_recipe", "picture_path", "read_recipe", "write"]

RECIPE_KEY = "fieldviz-recipe"


def make_recipe(
    snapshot: Snapshot,
    scene: Scene,
    drawn: Mapping[str, Any],
    *,
    theme: str,
    size: tuple[int, int],
    quality: str,
) -> dict[str, Any]:
    """Collect a recipe.

    Parameters
    ----------
    snapshot : Snapshot
    scene : Scene
    drawn : mapping
        Settings as they were used, those taken from the data included.
    theme, size, quality
        As given to `render`.

    Returns
    -------
    dict
        Tables `scene` and `settings` (readable by `scene_from_toml`), `picture`, `snapshot`,
        `drawn`, and the version as `fieldviz`.
    """
    return {
        "fieldviz": __version__,
        **scene_table(scene),
        "picture": {"size": list(size), "theme": theme, "quality": quality},
        "snapshot": {
            "file": Path(snapshot.source).name,
            "time": float(snapshot.time),
            "cells": snapshot.grid.n_cells,
            "blocks": snapshot.grid.n_blocks,
        },
        "drawn": dict(drawn),
    }


def picture_path(path: str | Path) -> Path:
    """The path, if it is one for a PNG file; checked before any work is done for it."""
    target = Path(path)
    if target.suffix.lower() != ".png":
        raise RenderError(
            f"Cannot write {target}: expected a name that ends in .png, got '{target.suffix}'; "
            "pictures are PNG files."
        )
    return target


def write(path: str | Path, image: np.ndarray, recipe: Mapping[str, Any]) -> None:
    """Write a picture with its recipe; the file appears only when it is whole.

    Parameters
    ----------
    path : str or Path
        Must end in .png.
    image : (h, w, 3) uint8 array
    recipe : mapping

    Raises
    ------
    RenderError, SnapshotFileError
    """
    target = picture_path(path)
    information = PngInfo()
    information.add_itxt(RECIPE_KEY, tomlkit.dumps(recipe))
    information.add_text("Software", f"fieldviz {__version__}")
    with whole_file(target) as temporary:
        Image.fromarray(image).save(temporary, format="PNG", pnginfo=information, optimize=False)


def read_recipe(path: str | Path) -> dict[str, Any]:
    """Read the recipe of a picture.

    Parameters
    ----------
    path : str or Path

    Returns
    -------
    dict
        See `make_recipe`. `scene_from_toml` also takes its TOML text.

    Raises
    ------
    RenderError
        If the file is no PNG with a recipe.
    """
    try:
        with Image.open(path) as picture:
            picture.load()
            text = getattr(picture, "text", {}).get(RECIPE_KEY)
    except (OSError, UnidentifiedImageError) as error:
        reason = getattr(error, "strerror", None) or "not a picture"
        raise RenderError(
            f"Cannot read the recipe of {path}: expected a PNG file, got {reason}."
        ) from error
    if text is None:
        raise RenderError(
            f"Cannot read the recipe of {path}: expected a picture made by fieldviz, got one "
            "without a recipe; it may have been saved again by another program."
        )
    try:
        return dict(tomlkit.parse(text).unwrap())
    except TOMLKitError as error:
        raise RenderError(
            f"Cannot read the recipe of {path}: expected TOML text, got an error ({error})."
        ) from error
