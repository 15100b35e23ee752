"""What a scene shows: plain settings that can be written as and read from TOML.

A setting that is None is taken from the data.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from difflib import get_close_matches
from math import isfinite
from typing import Any, ClassVar

import tomlkit
from tomlkit.exceptions import TOMLKitError

from fieldviz.errors import RenderError

__all__ = [
    "AzimuthCut",
    "FluxSheets",
    "Scene",
    "scene_from_toml",
    "scene_named",
    "scene_names",
    "scene_to_toml",
]

# Tables a picture's recipe has beside the scene; `scene_from_toml` passes over them.
RECIPE_TABLES = ("fieldviz", "picture", "snapshot", "drawn")


@dataclass(frozen=True)
class AzimuthCut:
    """The wedge opened at constant azimuth.

    Attributes
    ----------
    cut_azimuth : float or None
        Azimuth of the wall, degrees. None: the end of the wedge.
    sector : float
        Azimuth from the near edge to the wall, degrees.
    opened_share : float
        Share of the sector whose upper half is taken away, 0.1 to 0.9.
    outer_radius : float or None
        Radius at which the picture ends, code length. None: the whole wedge.
    line_count : int
        Poloidal field lines, equal flux between neighbours.
    surface_level : float
        Density of the disc's body over that of the midplane at the same radius.
    density_exponent, field_exponent : float or None
        a and b in rho R^a and B_z R^b. None: fitted to the midplane, to the nearest quarter.
    field_limit : float or None
        Upper end of the colours of B_z R^b, code units. None: a high percentile.
    density_limits : (float, float) or None
        Ends of the colours of log10 density, code units. None: percentiles.
    camera_azimuth, camera_height : float
        Direction of the camera from the near edge of the sector and above the midplane, degrees.
    """

    scene: ClassVar[str] = "azimuth-cut"

    cut_azimuth: float | None = None
    sector: float = 45.0
    opened_share: float = 0.42
    outer_radius: float | None = None
    line_count: int = 26
    surface_level: float = 0.1
    density_exponent: float | None = None
    field_exponent: float | None = None
    field_limit: float | None = None
    density_limits: tuple[float, float] | None = None
    camera_azimuth: float = -60.0
    camera_height: float = 19.0

    def __post_init__(self) -> None:
        _check_range(self, "sector", 5.0, 180.0)
        _check_range(self, "opened_share", 0.1, 0.9)
        _check_range(self, "line_count", 1, 400)
        _check_range(self, "surface_level", 1e-8, 0.99)
        _check_range(self, "camera_height", -89.0, 89.0)
        _check_limits(self, "density_limits")


@dataclass(frozen=True)
class FluxSheets:
    """Nested surfaces of constant B_z R^b in a ring whose front is taken away.

    Attributes
    ----------
    shown_azimuth : float
        Azimuth of the ring that is shown, degrees; the rest is taken away in front.
    outer_level, inner_level : float or None
        B_z R^b of the translucent and of the opaque surface, code units. None: from the median
        and the peaks on the midplane.
    height_limit : float
        The translucent surfaces end at abs(z)/R of this value.
    inner_height_limit : float
        The opaque surfaces end at abs(z)/R of this value, so that both are seen from above.
    line_count : int
        Field lines along the sheets over the shown azimuth, about; 0 for none.
    line_height_limit : float
        Field lines end at abs(z)/R of this value.
    surface_level : float
        Density of the disc's surface over that of the midplane at the same radius.
    outer_radius : float or None
        Radius at which the picture ends, code length. None: the whole wedge.
    density_exponent, field_exponent : float or None
        a and b in rho R^a and B_z R^b. None: fitted to the midplane, to the nearest quarter.
    density_limits : (float, float) or None
        Ends of the colours of log10 density, code units. None: percentiles.
    camera_azimuth, camera_height : float
        Direction of the camera from the middle of the opening and above the midplane, degrees.
    """

    scene: ClassVar[str] = "flux-sheets"

    shown_azimuth: float = 270.0
    outer_level: float | None = None
    inner_level: float | None = None
    height_limit: float = 0.5
    inner_height_limit: float = 0.3
    line_count: int = 72
    line_height_limit: float = 0.8
    surface_level: float = 0.1
    outer_radius: float | None = None
    density_exponent: float | None = None
    field_exponent: float | None = None
    density_limits: tuple[float, float] | None = None
    camera_azimuth: float = 6.0
    camera_height: float = 28.0

    def __post_init__(self) -> None:
        _check_range(self, "shown_azimuth", 20.0, 360.0)
        _check_range(self, "height_limit", 0.02, 10.0)
        _check_range(self, "inner_height_limit", 0.02, 10.0)
        _check_range(self, "line_count", 0, 2000)
        _check_range(self, "line_height_limit", 0.02, 10.0)
        _check_range(self, "surface_level", 1e-8, 0.99)
        _check_range(self, "camera_height", -89.0, 89.0)
        _check_limits(self, "density_limits")


Scene = AzimuthCut | FluxSheets
_SCENES: dict[str, type[AzimuthCut] | type[FluxSheets]] = {
    kind.scene: kind for kind in (AzimuthCut, FluxSheets)
}


def _check_range(scene: object, name: str, low: float, high: float) -> None:
    value = getattr(scene, name)
    if not low <= value <= high:
        raise RenderError(
            f"Cannot use this scene: expected {name} between {low:g} and {high:g}, got {value}."
        )


def _check_limits(scene: object, name: str) -> None:
    limits = getattr(scene, name)
    if limits is not None and not limits[0] < limits[1]:
        raise RenderError(
            f"Cannot use this scene: expected {name} as two increasing numbers, got {limits}."
        )


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
    AzimuthCut or FluxSheets

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


def _value(key: str, kind: str, given: Any) -> float | int | tuple[float, ...]:
    """A TOML value as the setting's type; `kind` is the annotation of the setting."""
    if kind.startswith("tuple"):
        if isinstance(given, list) and len(given) == 2 and all(map(_is_number, given)):
            return tuple(float(n) for n in given)
        wanted = "two numbers"
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
