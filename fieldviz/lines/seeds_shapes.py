"""Seeds on plain shapes: rings, cones, spheres, and points given by hand."""

from __future__ import annotations

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.lines.seeds_common import checked_count
from fieldviz.lines.seeds_surface import checked_r_range, checked_theta
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["cone_seeds", "given_seeds", "ring_seeds", "sphere_seeds"]


def ring_seeds(radius: float, theta: float, count: int, grid: WedgeGrid) -> Array:
    """Seeds on a circle about the axis, even in azimuth.

    Parameters
    ----------
    radius : float
        Spherical radius r.
    theta : float
        Colatitude, radians.
    count : int
        1 to 10 million.
    grid : WedgeGrid
        Says what the azimuth covers: `snapshot.grid`.

    Returns
    -------
    (count, 3) float64 array
        r, theta, phi; phi in the middles of `count` equal parts of the wedge.

    Raises
    ------
    FieldvizError
    """
    work = "place seeds on a ring"
    count = checked_count(work, count)
    r, colatitude = _checked_radius(work, grid, radius), checked_theta(work, grid, theta)
    return _lattice(grid, np.array([r]), np.array([colatitude]), count)


def cone_seeds(
    snapshot: Snapshot,
    theta: float,
    shape: tuple[int, int],
    *,
    r_range: tuple[float, float] | None = None,
) -> Array:
    """Seeds in rows and columns on a cone.

    Parameters
    ----------
    snapshot : Snapshot
        Only its grid is used.
    theta : float
        Colatitude, radians.
    shape : (n_phi, n_r)
    r_range : (float, float), optional
        The whole wedge by default.

    Returns
    -------
    (n_phi * n_r, 3) float64 array
        r fastest: middles of equal parts of ln r (of r where the range begins at the origin) and
        of the azimuth.

    Raises
    ------
    FieldvizError
    """
    work = "place seeds on a cone"
    grid = snapshot.grid
    n_phi, n_r = _checked_shape(work, shape, "(n_phi, n_r)")
    colatitude = checked_theta(work, grid, theta)
    low, high = checked_r_range(work, grid, r_range)
    r = low * (high / low) ** _middles(n_r) if low > 0 else high * _middles(n_r)
    return _lattice(grid, r, np.array([colatitude]), n_phi)


def sphere_seeds(snapshot: Snapshot, r: float, shape: tuple[int, int]) -> Array:
    """Seeds in rows and columns on the wedge's part of a sphere, each on the same area.

    Parameters
    ----------
    snapshot : Snapshot
        Only its grid is used.
    r : float
        Radius of the sphere.
    shape : (n_phi, n_theta)

    Returns
    -------
    (n_phi * n_theta, 3) float64 array
        theta fastest: middles of equal parts of cos(theta), from north to south, and of azimuth.

    Raises
    ------
    FieldvizError
    """
    work = "place seeds on a sphere"
    grid = snapshot.grid
    n_phi, n_theta = _checked_shape(work, shape, "(n_phi, n_theta)")
    radius = _checked_radius(work, grid, r)
    up, down = np.cos(grid.theta_range)
    theta = np.arccos(up + (down - up) * _middles(n_theta))
    return _lattice(grid, np.array([radius]), theta, n_phi)


def given_seeds(points: Array) -> Array:
    """Check points given by hand.

    Parameters
    ----------
    points : (n, 3) array
        r, theta, phi. Points outside the wedge are allowed: tracing ends there at once.

    Returns
    -------
    (n, 3) float64 array
        A copy.

    Raises
    ------
    FieldvizError
        If the shape is another, a coordinate is not finite, or there are more than 10 million.
    """
    work = "use these points as seeds"
    try:
        array = np.array(points, dtype=np.float64)
    except (TypeError, ValueError):
        raise FieldvizError(
            f"Cannot {work}: expected numbers r, theta, phi for each point, got "
            f"{type(points).__name__} that does not hold them; give an array of shape (n, 3)."
        ) from None
    if array.ndim != 2 or array.shape[1] != 3:
        raise FieldvizError(
            f"Cannot {work}: expected shape (n, 3) holding r, theta, phi, got {array.shape}; give "
            "one row for each point."
        )
    checked_count(work, len(array), "the number of points")
    bad = np.flatnonzero(~np.isfinite(array).all(axis=1))
    if bad.size:
        raise FieldvizError(
            f"Cannot {work}: expected finite coordinates, got NaN or infinite values in "
            f"{bad.size} of {len(array)} rows, the first in row {bad[0]}; leave these out."
        )
    return array


def _middles(count: int) -> Array:
    return np.asarray((np.arange(count) + 0.5) / count)


def _lattice(grid: WedgeGrid, r: Array, theta: Array, n_phi: int) -> Array:
    """All combinations, r fastest, then theta."""
    phi = grid.phi_range[0] + _middles(n_phi) * grid.period
    mesh = np.meshgrid(phi, theta, r, indexing="ij")
    return np.stack([mesh[2].ravel(), mesh[1].ravel(), mesh[0].ravel()], axis=1)


def _checked_radius(work: str, grid: WedgeGrid, radius: float) -> float:
    low, high = grid.r_range
    if not low <= radius <= high:
        raise FieldvizError(
            f"Cannot {work}: expected a radius within the wedge's {low:.6g} to {high:.6g}, got "
            f"{radius}; choose one inside."
        )
    return float(radius)


def _checked_shape(work: str, shape: tuple[int, int], wanted: str) -> tuple[int, int]:
    if np.ndim(shape) != 1 or len(shape) != 2:
        raise FieldvizError(
            f"Cannot {work}: expected a shape {wanted}, got {shape!r}; give two whole numbers."
        )
    first, second = (checked_count(work, n, "each entry of the shape") for n in shape)
    checked_count(work, first * second, "the number of seeds")
    return first, second
