"""Where the camera stands, so that the data fill the free part of the page."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from fieldviz.wedge.typing import Array

__all__ = ["Camera", "PixelBox", "framed"]

_LENS = 18.0  # vertical view angle in degrees: narrow, as for a portrait


@dataclass(frozen=True)
class PixelBox:
    """A rectangle on the page in pixels; y grows downward."""

    left: float
    top: float
    right: float
    bottom: float

    @property
    def width(self) -> float:
        """Width in pixels."""
        return self.right - self.left

    @property
    def height(self) -> float:
        """Height in pixels."""
        return self.bottom - self.top

    def grown(self, by: float) -> PixelBox:
        """The box with a margin on every side."""
        return PixelBox(self.left - by, self.top - by, self.right + by, self.bottom + by)

    def meets(self, other: PixelBox) -> bool:
        """Whether the two boxes share an area."""
        return (
            self.left < other.right
            and other.left < self.right
            and self.top < other.bottom
            and other.top < self.bottom
        )

    def holds(self, points: Array) -> Array:
        """Which of (n, 2) pixel positions lie inside."""
        x, y = points.T
        return (x > self.left) & (x < self.right) & (y > self.top) & (y < self.bottom)


@dataclass(frozen=True)
class Camera:
    """A perspective camera, z upward.

    Attributes
    ----------
    position, focus : (3,) arrays
    view_angle : float
        Vertical, degrees.
    """

    position: Array
    focus: Array
    view_angle: float = _LENS

    @property
    def axes(self) -> Array:
        """Rows: unit vectors to the right, upward and away from the eye."""
        away = self.focus - self.position
        away = away / np.linalg.norm(away)
        right = np.cross(away, [0.0, 0.0, 1.0])
        right = right / np.linalg.norm(right)
        return np.stack([right, np.cross(right, away), away])

    def pixels(self, points: Array, size: tuple[int, int]) -> Array:
        """Positions on the page of (n, 3) points, (n, 2), y downward."""
        seen = (np.atleast_2d(points) - self.position) @ self.axes.T
        scale = 0.5 * size[1] / np.tan(np.radians(self.view_angle) / 2)
        flat = seen[:, :2] / seen[:, 2:] * scale
        return np.column_stack([0.5 * size[0] + flat[:, 0], 0.5 * size[1] - flat[:, 1]])

    def pixels_per_length(self, point: Array, size: tuple[int, int]) -> float:
        """Pixels that a unit length across the view covers at a point."""
        distance = float((np.asarray(point) - self.position) @ self.axes[2])
        return 0.5 * size[1] / np.tan(np.radians(self.view_angle) / 2) / distance


def framed(
    points: Array,
    azimuth: float,
    height: float,
    area: PixelBox,
    size: tuple[int, int],
    view_angle: float = _LENS,
) -> Camera:
    """A camera in a given direction from which points just fill an area of the page.

    Parameters
    ----------
    points : (n, 3) array
        What must be seen.
    azimuth, height : float
        Direction from the points to the camera, radians.
    area : PixelBox
        Where on the page the points go; they touch it on two opposite sides.
    size : (int, int)
        Page width and height in pixels.
    view_angle : float
        Vertical, degrees.

    Returns
    -------
    Camera
    """
    toward = np.array([
        np.cos(height) * np.cos(azimuth), np.cos(height) * np.sin(azimuth), np.sin(height)
    ])  # fmt: skip
    middle = 0.5 * (points.min(axis=0) + points.max(axis=0))
    reach = float(np.linalg.norm(points - middle, axis=1).max()) or 1.0
    distance = 2.0 * reach / np.tan(np.radians(view_angle) / 2)
    camera = Camera(middle + distance * toward, middle, view_angle)
    for _ in range(12):
        seen = camera.pixels(points, size)
        low, high = seen.min(axis=0), seen.max(axis=0)
        span = np.maximum(high - low, 1e-9)
        growth = min(area.width / span[0], area.height / span[1])
        wanted = np.array([area.left + area.right, area.top + area.bottom]) / 2
        shift = ((low + high) / 2 - wanted) / camera.pixels_per_length(camera.focus, size)
        right, up, _ = camera.axes
        focus = camera.focus + shift[0] * right - shift[1] * up
        length = np.linalg.norm(camera.position - camera.focus) / growth
        length = max(float(length), 1.2 * reach)
        camera = replace(camera, position=focus + length * toward, focus=focus)
    return camera
