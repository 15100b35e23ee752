"""What a scene shows: plain settings that can be written as and read from TOML.

A setting that is None is taken from the data.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import fields
from difflib import get_close_matches
from math import isfinite
from typing import Any, get_args

import tomlkit
from tomlkit.exceptions import TOMLKitError

from fieldviz.errors import RenderError
from fieldviz.scenes.settings import (
    AzimuthCut,
    CurrentSheetView,
    FluxSheets,
    MirrorCheck,
    OutflowView,
    Scene,
)

__all__ = [
    "AzimuthCut",
    "CurrentSheetView",
    "FluxSheets",
    "MirrorCheck",
    "OutflowView",
    "Scene",
    "scene_from_toml",
    "scene_named",
    "scene_names",
    "scene_to_toml",
]

# Tables a picture's recipe has beside the scene; `scene_from_toml` passes over them.
RECIPE_TABLES = ("fieldviz", "picture", "snapshot", "drawn")


_SCENES: dict[str, type[Scene]] = {kind.scene: kind for kind in get_args(Scene)}


def scene_names() -> tuple[str, ...]:
    """Names of all scenes."""
    return tuple(_SCENES)


def scene_named(name: str) -> Scene:
    """The scene of a name with its default settings.

    Raises
    ------
    RenderError
        If there is no such scene; the nearest name is given.
    """
    if name not in _SCENES:
        raise RenderError(
            f"Cannot draw the scene '{name}': expected one of {', '.join(_SCENES)}, got '{name}'; "
            f"did you mean '{_nearest(name, _SCENES)}'?"
        )
    return _SCENES[name]()


def scene_to_toml(scene: Scene) -> str:
    """A scene as TOML text: its name and every setting that is not taken from the data."""
    return tomlkit.dumps(scene_table(scene))


def scene_table(scene: Scene) -> dict[str, Any]:
    """A scene as a mapping that TOML can hold."""
    settings = {
        field.name: list(value) if isinstance(value, tuple) else value
        for field in fields(scene)
        if (value := getattr(scene, field.name)) is not None
    }
    return {"scene": scene.scene, "settings": settings}


def scene_from_toml(text: str) -> Scene:
    """Read a scene from TOML text, or from the text of a picture's recipe.

    Parameters
    ----------
    text : str
        `scene = "name"` and a table `settings`; what is left out keeps its default.

    Returns
    -------
    Scene

    Raises
    ------
    RenderError
        If the text is no TOML, or a scene, key or value is not known; the nearest key is given.
    """
    try:
        table = tomlkit.parse(text).unwrap()
    except TOMLKitError as error:
        raise RenderError(
            f"Cannot read the scene: expected TOML text, got an error ({error}); mend that line."
        ) from error
    known = ("scene", "settings", *RECIPE_TABLES)
    for key in table:
        if key not in known:
            raise _unknown_key(key, ("scene", "settings"))
    if not isinstance(table.get("scene"), str):
        raise RenderError(
            'Cannot read the scene: expected the line scene = "NAME", got no such line; '
            f"name one of {', '.join(_SCENES)}."
        )
    return _with_settings(scene_named(table["scene"]), table.get("settings", {}))


def _with_settings(default: Scene, settings: object) -> Scene:
    if not isinstance(settings, Mapping):
        raise RenderError(
            f"Cannot read the scene: expected settings as a table, got {settings!r}; "
            "write [settings] and one line for each."
        )
    names = {field.name: str(field.type) for field in fields(default)}
    for key in settings:
        if key not in names:
            raise _unknown_key(key, names)
    values: dict[str, Any] = {
        key: _value(key, names[key], given) for key, given in settings.items()
    }
    return type(default)(**values)


def _value(key: str, kind: str, given: Any) -> float | int | bool | tuple[float, ...]:
    """A TOML value as the setting's type; `kind` is the annotation of the setting."""
    if kind.startswith("tuple"):
        if isinstance(given, list) and len(given) == 2 and all(map(_is_number, given)):
            return tuple(float(n) for n in given)
        wanted = "two numbers"
    elif kind == "bool":
        if isinstance(given, bool):
            return given
        wanted = "true or false"
    elif kind == "int":
        if _is_number(given) and given == int(given):
            return int(given)
        wanted = "a whole number"
    else:
        if _is_number(given):
            return float(given)
        wanted = "a number"
    raise RenderError(f"Cannot read the scene: expected {key} to be {wanted}, got {given!r}.")


def _is_number(given: object) -> bool:
    return isinstance(given, int | float) and not isinstance(given, bool) and isfinite(given)


def _unknown_key(key: str, known: Mapping[str, object] | tuple[str, ...]) -> RenderError:
    return RenderError(
        f"Cannot read the scene: expected one of the keys {', '.join(known)}, got '{key}'; "
        f"did you mean '{_nearest(key, known)}'?"
    )


def _nearest(word: str, known: Mapping[str, object] | tuple[str, ...]) -> str:
    return get_close_matches(word, list(known), n=1, cutoff=0.0)[0]
