"""Legend samples: a little bent plate of the same material under the same lights."""

from __future__ import annotations

from typing import Any

import numpy as np
import pyvista as pv

from fieldviz.scenes.camera import Camera
from fieldviz.scenes.stage import Layer, Material, Quality, photograph
from fieldviz.scenes.theme import Theme

__all__ = ["lit_swatch"]

_BEND = np.radians(55.0)


def lit_swatch(
    material: Material, theme: Theme, size: tuple[int, int], veil: Material | None = None
) -> np.ndarray:
    """A picture of a material as the lights show it.

    Parameters
    ----------
    material : Material
        Of one colour.
    theme : Theme
    size : (int, int)
        Width and height in pixels.
    veil : Material, optional
        A translucent material that lies before the left half, as an outer surface does.

    Returns
    -------
    (height, width, 3) uint8 array
        A translucent material is shown as two plates, one behind the other, as a sheet has two
        walls.
    """
    aspect = size[0] / size[1]
    plates = [Layer("front", _plate(0.0, aspect), material)]
    if material.opacity < 1:
        plates.append(Layer("behind", _plate(0.3, aspect), material))
    if veil is not None:
        half = _plate(-0.3, aspect).clip("x", origin=(0, 0, 0))
        plates.append(Layer("veil", half, veil))
    camera = Camera(
        np.array([0.0, -60.0, 0.0]), np.zeros(3), float(2 * np.degrees(np.arctan(0.5 / 60)))
    )
    return photograph(plates, camera, theme, size, Quality(2, 4))


def _plate(depth: float, aspect: float) -> Any:
    """A part of an upright cylinder that fills a view one unit high and `aspect` wide."""
    angle = np.linspace(-_BEND, _BEND, 49)
    radius = 0.55 * aspect * 2 / (2 * np.sin(_BEND))
    x, y = radius * np.sin(angle), depth - radius * np.cos(angle) + radius
    z = np.array([-2.0, 2.0])
    plate = pv.StructuredGrid(
        np.broadcast_to(x, (1, 2, 49)).T.copy(),
        np.broadcast_to(y, (1, 2, 49)).T.copy(),
        np.broadcast_to(z[:, None], (1, 2, 49)).T.copy(),
    ).extract_surface(algorithm="geometry")
    normals = np.array(plate.points)
    normals = np.column_stack([normals[:, 0], normals[:, 1] - depth - radius, 0 * normals[:, 2]])
    plate.point_data["Normals"] = (normals / radius).astype(np.float32)
    plate.point_data.active_normals_name = "Normals"
    return plate
