"""What a scene hands over to be photographed and annotated."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from matplotlib.colors import Colormap

from fieldviz.scenes.stage import Layer
from fieldviz.wedge.typing import Array

__all__ = ["ColourBar", "Composition", "RadiusMarks", "Swatches"]


@dataclass(frozen=True)
class ColourBar:
    """A colour bar: label, map, values at its ends, ticks with their texts."""

    label: str
    colour_map: Colormap
    limits: tuple[float, float]
    ticks: list[tuple[float, str]]


@dataclass(frozen=True)
class Swatches:
    """Samples of surfaces under the lights of the picture.

    Attributes
    ----------
    label : str
    entries : list of (str, str or None, str)
        Layer, layer that lies around it and veils it, text.
    """

    label: str
    entries: list[tuple[str, str | None, str]]


@dataclass(frozen=True)
class RadiusMarks:
    """Radius ticks along one edge of the data.

    Attributes
    ----------
    name : str
        Axis label.
    points : (n, 3) array
        Where the ticks stand.
    beside : (n, 3) array
        Points a little inside the data, from which the ticks lead away.
    texts : list of str
    """

    name: str
    points: Array
    beside: Array
    texts: list[str]


@dataclass(frozen=True)
class Composition:
    """A scene made from a snapshot, not yet a picture.

    Attributes
    ----------
    title, subtitle : str
    layers : list of Layer
    azimuth, height : float
        Direction from the data to the camera, radians.
    legends : list of ColourBar or Swatches
    caption : list of str
        What was done to the data, in short phrases.
    radius_marks : list of RadiusMarks
        Edges that could carry the radius ticks, the best first.
    scale_bar : bool
        Show a bar of round length, true at the middle of the data.
    drawn : dict
        Settings as they were used, those taken from the data included.
    """

    title: str
    subtitle: str
    layers: list[Layer]
    azimuth: float
    height: float
    legends: list[ColourBar | Swatches]
    caption: list[str]
    radius_marks: list[RadiusMarks] = field(default_factory=list)
    scale_bar: bool = False
    drawn: dict[str, Any] = field(default_factory=dict)

    def layer(self, name: str) -> Layer:
        """The layer of a name."""
        return next(layer for layer in self.layers if layer.name == name)

    def without(self, *names: str) -> Composition:
        """A copy without some layers, everything else as it was."""
        from dataclasses import replace

        return replace(self, layers=[layer for layer in self.layers if layer.name not in names])
