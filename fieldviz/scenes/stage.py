"""The stage: layers under three lights, and the way a picture of them is taken."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pyvista as pv
from matplotlib.colors import Colormap

from fieldviz.errors import RenderError
from fieldviz.scenes.camera import Camera
from fieldviz.scenes.off_screen import prepare_off_screen
from fieldviz.scenes.theme import Rgb, Theme

__all__ = ["Layer", "Material", "Quality", "background", "photograph", "quality_named"]

# Peeling ends early when a pass changes no more than this share of the pixels.
_NEGLIGIBLE = 3e-3
_KEY, _FILL, _RIM = (
    ((-1.2, 1.0, 1.2), "#fff1de"),
    ((1.5, 0.1, 0.8), "#d7e6ff"),
    ((0.3, 1.5, -1.6), "#ffffff"),
)


@dataclass(frozen=True)
class Material:
    """How a surface takes colour and light.

    Attributes
    ----------
    colour : (r, g, b) or None
        One colour for all of it.
    scalars, colour_map, limits
        Or a point field, its colour map, and the values at the map's ends.
    rgba : bool
        Or the point field `scalars` holds red, green, blue and alpha, uint8.
    opacity : float
    lit : bool
        Whether the lights matter.
    ambient, diffuse, specular, specular_power : float
    """

    colour: Rgb | None = None
    scalars: str | None = None
    colour_map: Colormap | None = None
    limits: tuple[float, float] | None = None
    rgba: bool = False
    opacity: float = 1.0
    lit: bool = True
    ambient: float = 0.0
    diffuse: float = 1.0
    specular: float = 0.0
    specular_power: float = 20.0


@dataclass(frozen=True)
class Layer:
    """A surface with its material and a name."""

    name: str
    mesh: Any
    material: Material = field(default_factory=Material)

    @property
    def is_translucent(self) -> bool:
        """Whether something can be seen through it."""
        return self.material.opacity < 1 or self.material.rgba


@dataclass(frozen=True)
class Quality:
    """How much work a picture may take.

    Attributes
    ----------
    oversampling : int
        Pixels of the window along each pixel of the picture.
    peels : int
        Passes of depth peeling at most.
    nodes : int
        Nodes of the display grid at most.
    """

    oversampling: int
    peels: int
    nodes: int = 2_800_000


_QUALITIES = {"still": Quality(2, 8), "preview": Quality(1, 4, 700_000)}


def quality_named(name: str) -> Quality:
    """What "still" (double window, averaged) and "preview" (quick) mean."""
    if name not in _QUALITIES:
        raise RenderError(
            f"Cannot render in the quality '{name}': expected still or preview, got '{name}'."
        )
    return _QUALITIES[name]


@contextmanager
def _lit_stage(theme: Theme, size: tuple[int, int]) -> Iterator[Any]:
    prepare_off_screen()
    plotter = pv.Plotter(off_screen=True, window_size=list(size), lighting="none")
    try:
        for (position, colour), intensity in zip(
            (_KEY, _FILL, _RIM), (theme.key, theme.fill, theme.rim), strict=True
        ):
            light = pv.Light(light_type="camera light", color=colour, intensity=intensity)
            light.position = position
            light.focal_point = (0, 0, 0)
            plotter.add_light(light)
        yield plotter
    finally:
        plotter.close()


def photograph(
    layers: list[Layer], camera: Camera, theme: Theme, size: tuple[int, int], quality: Quality
) -> np.ndarray:
    """Take a picture of layers.

    Parameters
    ----------
    layers : list of Layer
        Empty ones are passed over.
    camera : Camera
    theme : Theme
    size : (int, int)
        Width and height of the picture.
    quality : Quality

    Returns
    -------
    (height, width, 3) uint8 array
    """
    picture = background(theme, size)
    shown = [layer for layer in layers if layer.mesh.n_points]
    if not shown:
        return picture
    # Every pass of the peeling costs by the pixel: only where the data are is rendered.
    region = _data_region(shown, camera, size)
    left, top, right, bottom = region
    part = _render_region(shown, camera, theme, size, region, quality)
    if right - left == size[0]:
        picture[top:bottom] = part
        return picture
    ground = picture[top:bottom, :1].astype(np.int16)
    change = part.astype(np.int16) - part[:, :1]
    picture[top:bottom, left:right] = np.clip(ground + change, 0, 255).astype(np.uint8)
    return picture


def background(theme: Theme, size: tuple[int, int]) -> np.ndarray:
    """The empty page, (height, width, 3) uint8: from `sky` at the top to `ground`."""
    share = ((np.arange(size[1]) + 0.5) / size[1])[:, None]
    sky, ground = np.array(theme.rgb("sky")), np.array(theme.rgb("ground"))
    column = np.rint(255 * (sky + (ground - sky) * share)).astype(np.uint8)
    return np.repeat(column[:, None], size[0], axis=1)


_Region = tuple[int, int, int, int]


def _data_region(layers: list[Layer], camera: Camera, size: tuple[int, int]) -> _Region:
    """Left, top, right, bottom of the pixels with data, and a few more."""
    seen = np.concatenate([camera.pixels(np.asarray(layer.mesh.points), size) for layer in layers])
    low = np.clip(np.floor(seen.min(axis=0)) - 4, 0, np.array(size) - 2).astype(int)
    high = np.clip(np.ceil(seen.max(axis=0)) + 4, low + 2, size).astype(int)
    return int(low[0]), int(low[1]), int(high[0]), int(high[1])


def _render_region(
    layers: list[Layer],
    camera: Camera,
    theme: Theme,
    size: tuple[int, int],
    region: _Region,
    quality: Quality,
) -> np.ndarray:
    left, top, right, bottom = region
    factor = quality.oversampling
    window = ((right - left) * factor, (bottom - top) * factor)
    with _lit_stage(theme, window) as plotter:
        # Multi-sampling makes translucent surfaces vanish under depth peeling in software.
        plotter.disable_anti_aliasing()
        sky, ground = np.array(theme.rgb("sky")), np.array(theme.rgb("ground"))
        ends = [sky + (ground - sky) * y / size[1] for y in (bottom, top)]
        plotter.set_background(tuple(ends[0]), top=tuple(ends[1]))
        for layer in layers:
            _add(plotter, layer)
        if any(layer.is_translucent for layer in layers):
            plotter.enable_depth_peeling(quality.peels, _NEGLIGIBLE)
        _aim(plotter, camera, size, region)
        plotter.render()
        image = np.asarray(plotter.screenshot(None, return_img=True))[..., :3]
    return _averaged(image, factor)


def _aim(plotter: Any, camera: Camera, size: tuple[int, int], region: _Region) -> None:
    """Point the camera so that the window shows one region of the page."""
    left, top, right, bottom = region
    width, height = right - left, bottom - top
    plotter.camera.position = tuple(camera.position)
    plotter.camera.focal_point = tuple(camera.focus)
    plotter.camera.up = (0.0, 0.0, 1.0)
    half = np.tan(np.radians(camera.view_angle) / 2) * height / size[1]
    plotter.camera.view_angle = float(np.degrees(2 * np.arctan(half)))
    plotter.camera.SetWindowCenter(
        (left + right - size[0]) / width, (size[1] - top - bottom) / height
    )
    plotter.reset_camera_clipping_range()


def _add(plotter: Any, layer: Layer) -> None:
    material = layer.material
    options: dict[str, Any] = {
        "opacity": material.opacity,
        "lighting": material.lit,
        # Without lights VTK adds both: only so are the colours those of the bar.
        "ambient": material.ambient if material.lit else 0.0,
        "diffuse": material.diffuse if material.lit else 1.0,
        "specular": material.specular,
        "specular_power": material.specular_power,
        "smooth_shading": material.lit,
        "show_scalar_bar": False,
    }
    if material.lit and "Normals" not in layer.mesh.point_data:
        options["smooth_shading"] = False
    if material.rgba:
        options |= {"scalars": material.scalars, "rgb": True}
    elif material.scalars is not None:
        options |= {
            "scalars": material.scalars,
            "cmap": material.colour_map,
            "clim": material.limits,
            "interpolate_before_map": True,
        }
    else:
        options["color"] = material.colour
    plotter.add_mesh(layer.mesh, **options)


def _averaged(image: np.ndarray, factor: int) -> np.ndarray:
    if factor == 1:
        return np.ascontiguousarray(image)
    height, width, channels = image.shape
    boxes = image.reshape(height // factor, factor, width // factor, factor, channels)
    return boxes.mean(axis=(1, 3)).round().astype(np.uint8)
