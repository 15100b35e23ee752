"""Two themes, and one colour map for each quantity."""

from __future__ import annotations

from dataclasses import dataclass
from difflib import get_close_matches

import numpy as np
from cmcrameri import cm as _maps
from matplotlib.colors import Colormap, ListedColormap, to_rgb

from fieldviz.errors import RenderError

__all__ = ["THEMES", "Theme", "theme_named"]

Rgb = tuple[float, float, float]


@dataclass(frozen=True)
class Theme:
    """Colours and lights of a picture.

    Attributes
    ----------
    name : str
    ground, sky : str
        Background at the bottom and at the top of the page.
    ink, faint : str
        Text, and text of second rank.
    haze : str
        The disc's surface where it only lends a shape.
    haze_opacity : float
    outline : str
        Edge of a wall.
    line : str
        Poloidal field lines.
    critical : str
        Critical surfaces.
    critical_opacity : float
    key, fill, rim : float
        Intensities of the three lights that move with the camera.
    outer_share, inner_share : float
        Places in the colour map of the vertical field of the outer and inner sheet surfaces.
    outer_opacity : float
    maps : mapping of quantity to (map, first share, last share)
    """

    name: str
    ground: str
    sky: str
    ink: str
    faint: str
    haze: str
    haze_opacity: float
    outline: str
    line: str
    critical: str
    critical_opacity: float
    key: float
    fill: float
    rim: float
    outer_share: float
    inner_share: float
    outer_opacity: float
    maps: dict[str, tuple[str, float, float]]

    def colour_map(self, quantity: str) -> Colormap:
        """Colour map of a quantity, one of the keys of `maps`."""
        name, first, last = self.maps[quantity]
        colours = getattr(_maps, name)(np.linspace(first, last, 256))
        return ListedColormap(colours, name=f"{quantity} ({self.name})")

    def signed_speed(self, limits: tuple[float, float]) -> Colormap:
        """The map of speeds, and where the limits reach below 0 that of infall, from 0 outward."""
        low, high = limits
        if low >= 0:
            return self.colour_map("speed")
        below = max(1, round(512 * min(-low / (high - low), 1.0)))
        falling = self.colour_map("infall")(np.linspace(1, 0, below))
        rising = self.colour_map("speed")(np.linspace(0, 1, max(1, 512 - below)))
        return ListedColormap(np.concatenate([falling, rising]), name=f"v_r ({self.name})")

    def colour(self, quantity: str, share: float) -> Rgb:
        """One colour of a quantity's map, as red, green and blue in 0 to 1."""
        red, green, blue, _ = self.colour_map(quantity)(share)
        return red, green, blue

    def rgb(self, part: str) -> Rgb:
        """One of the theme's own colours as red, green and blue in 0 to 1."""
        red, green, blue = to_rgb(getattr(self, part))
        return red, green, blue


_DARK = Theme(
    name="dark",
    ground="#05070c",
    sky="#141c2b",
    ink="#e9edf2",
    faint="#93a0b2",
    haze="#93a5bd",
    haze_opacity=0.27,
    outline="#3a475c",
    line="#f2c14e",
    critical="#4fb7a6",
    critical_opacity=0.26,
    key=0.85,
    fill=0.38,
    rim=0.45,
    outer_share=0.50,
    inner_share=0.80,
    outer_opacity=0.32,
    maps={
        "density": ("oslo", 0.07, 0.96),
        "vertical_field": ("lajolla", 0.0, 1.0),
        "signed_field_on_lines": ("vik", 0.17, 0.83),
        "signed_field": ("berlin", 0.0, 1.0),
        "speed_on_lines": ("lipari", 0.22, 1.0),
        "speed": ("lipari", 0.04, 1.0),
        "infall": ("navia", 0.02, 0.85),
        "current": ("acton", 0.04, 1.0),
        "difference": ("vanimo", 0.0, 1.0),
    },
)

_LIGHT = Theme(
    name="light",
    ground="#ffffff",
    sky="#ffffff",
    ink="#15181d",
    faint="#5d6573",
    haze="#8f9dae",
    haze_opacity=0.26,
    outline="#aab2bd",
    line="#a34a12",
    critical="#1f8f7d",
    critical_opacity=0.24,
    key=0.80,
    fill=0.65,
    rim=0.60,
    outer_share=0.30,
    inner_share=0.62,
    outer_opacity=0.34,
    maps={
        "density": ("oslo_r", 0.03, 0.92),
        "vertical_field": ("lajolla_r", 0.0, 1.0),
        "signed_field_on_lines": ("vik", 0.08, 0.92),
        "signed_field": ("vik", 0.03, 0.97),
        "speed_on_lines": ("lipari_r", 0.0, 0.95),
        "speed": ("lipari_r", 0.0, 0.95),
        "infall": ("navia_r", 0.05, 0.9),
        "current": ("acton_r", 0.07, 1.0),
        "difference": ("broc", 0.0, 1.0),
    },
)

THEMES: dict[str, Theme] = {theme.name: theme for theme in (_DARK, _LIGHT)}


def theme_named(name: str) -> Theme:
    """The theme of a name.

    Raises
    ------
    RenderError
        If there is no such theme.
    """
    if name in THEMES:
        return THEMES[name]
    near = get_close_matches(name, THEMES, n=1, cutoff=0.0)
    raise RenderError(
        f"Cannot render in the theme '{name}': expected one of {', '.join(THEMES)}, got '{name}'; "
        f"use '{near[0] if near else 'dark'}'."
    )
