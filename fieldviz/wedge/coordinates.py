"""Points and vectors between spherical-polar and Cartesian form.

theta is colatitude: 0 at the north pole, pi/2 on the midplane. The unit vector theta-hat points
south, so that on the midplane v_z = -v_theta.
"""

from __future__ import annotations

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.wedge.typing import Array

__all__ = [
    "cylindrical_components",
    "points_to_cartesian",
    "points_to_spherical",
    "vectors_to_cartesian",
    "vectors_to_spherical",
]


def _triples(name: str, values: Array) -> Array:
    array = np.asarray(values)
    if array.shape[-1:] != (3,):
        raise FieldvizError(
            f"Cannot convert {name}: expected an array whose last axis has length 3, "
            f"got shape {array.shape}."
        )
    return array


def points_to_cartesian(points: Array) -> Array:
    """(..., 3) points r, theta, phi to x, y, z."""
    r, theta, phi = np.moveaxis(_triples("points", points), -1, 0)
    R = r * np.sin(theta)
    return np.stack([R * np.cos(phi), R * np.sin(phi), r * np.cos(theta)], axis=-1)


def points_to_spherical(points: Array) -> Array:
    """(..., 3) points x, y, z to r, theta in [0, pi], phi in [0, 2 pi).

    At the origin theta and phi are 0.
    """
    x, y, z = np.moveaxis(_triples("points", points), -1, 0)
    R = np.hypot(x, y)
    return np.stack(
        [np.hypot(R, z), np.arctan2(R, z), np.mod(np.arctan2(y, x), 2 * np.pi)], axis=-1
    )


def _rotation(points: Array) -> tuple[Array, Array, Array, Array]:
    _, theta, phi = np.moveaxis(_triples("points", points), -1, 0)
    return np.sin(theta), np.cos(theta), np.sin(phi), np.cos(phi)


def vectors_to_cartesian(vectors: Array, points: Array) -> Array:
    """Spherical components to Cartesian ones.

    Parameters
    ----------
    vectors : (..., 3) array
        Components along r, theta (south) and phi.
    points : (..., 3) array
        Where the vectors stand: r, theta, phi.

    Returns
    -------
    (..., 3) array
        Components along x, y, z.
    """
    sin_t, cos_t, sin_p, cos_p = _rotation(points)
    v_r, v_t, v_p = np.moveaxis(_triples("vectors", vectors), -1, 0)
    v_R = v_r * sin_t + v_t * cos_t
    return np.stack(
        [v_R * cos_p - v_p * sin_p, v_R * sin_p + v_p * cos_p, v_r * cos_t - v_t * sin_t], axis=-1
    )


def vectors_to_spherical(vectors: Array, points: Array) -> Array:
    """Cartesian components to spherical ones at spherical `points`; see `vectors_to_cartesian`."""
    sin_t, cos_t, sin_p, cos_p = _rotation(points)
    v_x, v_y, v_z = np.moveaxis(_triples("vectors", vectors), -1, 0)
    v_R = v_x * cos_p + v_y * sin_p
    return np.stack(
        [v_R * sin_t + v_z * cos_t, v_R * cos_t - v_z * sin_t, v_y * cos_p - v_x * sin_p], axis=-1
    )


def cylindrical_components(v_r: Array, v_theta: Array, theta: Array) -> tuple[Array, Array]:
    """v_R (away from the axis) and v_z (up) from v_r and v_theta (south) at colatitude theta."""
    sine, cosine = np.sin(theta), np.cos(theta)
    return v_r * sine + v_theta * cosine, v_r * cosine - v_theta * sine
