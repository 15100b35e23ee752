"""Exact areas and volumes of spherical-polar cells, and their centres.

Arrays are ordered (phi, theta, r), r fastest. Lengths are in the unit of `r_edges`, angles in
radians. Formulas: differences are written as products, so that thin cells keep full precision.
"""

from __future__ import annotations

import numpy as np

from fieldviz.wedge.typing import Array

__all__ = [
    "annulus_widths",
    "area_phi",
    "area_r",
    "area_theta",
    "cell_volumes",
    "centres",
    "cosine_steps",
    "wedge_volume",
]


def centres(edges: Array) -> Array:
    """Middles between neighbouring edges, along the last axis."""
    return 0.5 * (edges[..., 1:] + edges[..., :-1])


def cosine_steps(theta_edges: Array) -> Array:
    """cos(theta_j) - cos(theta_j+1), positive for increasing colatitude."""
    return 2.0 * np.sin(centres(theta_edges)) * np.sin(0.5 * np.diff(theta_edges))


def annulus_widths(r_edges: Array) -> Array:
    """(r_i+1^2 - r_i^2)/2: what a unit angle of a flat ring covers."""
    return centres(r_edges) * np.diff(r_edges)


def _shell_widths(r_edges: Array) -> Array:
    low, high = r_edges[..., :-1], r_edges[..., 1:]
    return (high - low) * (high * high + high * low + low * low) / 3.0


def cell_volumes(r_edges: Array, theta_edges: Array, phi_edges: Array) -> Array:
    """Volumes of one block's cells.

    Parameters
    ----------
    r_edges, theta_edges, phi_edges : (n + 1,) arrays
        Edges of the block.

    Returns
    -------
    (n_phi, n_theta, n_r) array
        (r_i+1^3 - r_i^3)/3 (cos th_j - cos th_j+1) dphi, in length^3.
    """
    return (
        np.diff(phi_edges)[:, None, None]
        * cosine_steps(theta_edges)[:, None]
        * _shell_widths(r_edges)
    )


def area_r(r_edges: Array, theta_edges: Array, phi_edges: Array) -> Array:
    """Areas of the faces across r, (n_phi, n_theta, n_r + 1): r^2 (cos steps) dphi."""
    return np.diff(phi_edges)[:, None, None] * cosine_steps(theta_edges)[:, None] * r_edges**2


def area_theta(r_edges: Array, theta_edges: Array, phi_edges: Array) -> Array:
    """Areas of the faces across theta, (n_phi, n_theta + 1, n_r): annulus sin(theta) dphi."""
    # sin(pi) is 1e-16 in floating point; on the axis the area is zero by definition.
    sine = np.where(theta_edges >= np.pi, 0.0, np.sin(theta_edges))
    return np.diff(phi_edges)[:, None, None] * sine[:, None] * annulus_widths(r_edges)


def area_phi(r_edges: Array, theta_edges: Array, phi_edges: Array) -> Array:
    """Areas of the faces across phi, (n_phi + 1, n_theta, n_r): annulus dtheta."""
    face = np.diff(theta_edges)[:, None] * annulus_widths(r_edges)
    return np.broadcast_to(face, (len(phi_edges), *face.shape))


def wedge_volume(r: tuple[float, float], theta: tuple[float, float], period: float) -> float:
    """Volume between two radii and two colatitudes over an azimuth `period`."""
    block = cell_volumes(np.array(r), np.array(theta), np.array([0.0, period]))
    return float(block[0, 0, 0])
