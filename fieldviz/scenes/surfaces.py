"""Surfaces of a display grid: contours and faces, found in index space and put into space.

A contour in index space is a contour on a plain brick of numbers: fast, and free of gaps. Its
points then move to x, y, z by the node coordinates, and its normals follow from the gradient.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pyvista as pv
from scipy.ndimage import map_coordinates

from fieldviz.scenes.display_grid import DisplayGrid
from fieldviz.wedge.coordinates import points_to_cartesian, vectors_to_cartesian
from fieldviz.wedge.typing import Array

__all__ = ["contour", "empty_surface", "face", "merged"]

_AXES = {"phi": 0, "theta": 1, "r": 2}


def empty_surface() -> Any:
    """A surface without points."""
    return pv.PolyData()


def contour(grid: DisplayGrid, name: str, level: float, carry: tuple[str, ...] = ()) -> Any:
    """The surface where a field has a value.

    Parameters
    ----------
    grid : DisplayGrid
    name : str
    level : float
    carry : tuple of str
        Fields to have on the surface's points.

    Returns
    -------
    pyvista.PolyData
        With smooth normals that point to smaller values; empty where the level is not reached.
    """
    if min(grid.shape) < 2:
        return empty_surface()
    brick = pv.ImageData(dimensions=grid.shape[::-1])
    brick.point_data["values"] = np.ascontiguousarray(grid.fields[name]).ravel()
    surface = brick.contour(
        [level],
        scalars="values",
        method="flying_edges",
        compute_normals=False,
        compute_scalars=False,
    )
    return _placed(grid, surface, carry, name)


def face(
    grid: DisplayGrid,
    axis: str,
    index: int,
    carry: tuple[str, ...] = (),
    above: tuple[str, float] | None = None,
) -> Any:
    """A face of constant phi, theta or r.

    Parameters
    ----------
    grid : DisplayGrid
    axis : str
        "phi", "theta" or "r".
    index : int
        Node on that axis; negative from the end.
    carry : tuple of str
        Fields to have on the points.
    above : (str, float), optional
        Keep only where this field is above this value.
    """
    number = _AXES[axis]
    at = range(grid.shape[number])[index]
    dimensions = list(grid.shape)
    dimensions[number] = 1
    origin = [0, 0, 0]
    origin[2 - number] = at
    flat = pv.ImageData(dimensions=dimensions[::-1], origin=origin)
    if above is None:
        surface = flat.extract_surface(algorithm="geometry")
    else:
        values = np.take(grid.fields[above[0]], [at], axis=number)
        flat.point_data["values"] = np.ascontiguousarray(values).ravel()
        kept = flat.clip_scalar(scalars="values", value=above[1], invert=False)
        if not kept.n_cells:
            return empty_surface()
        surface = kept.extract_surface(algorithm="geometry")
    surface.clear_data()
    return _placed(grid, surface.triangulate(), carry, number)


def merged(parts: list[Any]) -> Any:
    """One surface of several; points are not joined, so edges stay sharp."""
    parts = [part for part in parts if part.n_points]
    if not parts:
        return empty_surface()
    return pv.merge(parts, merge_points=False) if len(parts) > 1 else parts[0]


def _placed(grid: DisplayGrid, surface: Any, carry: tuple[str, ...], across: str | int) -> Any:
    """Move index-space points to x, y, z; add normals and fields, and drop hidden parts.

    `across` is the field of a contour or the number of a face's axis: where normals come from.
    """
    if not surface.n_points or not surface.n_cells:
        return empty_surface()
    index = np.asarray(surface.points, dtype=np.float64).T[::-1]
    spherical = np.stack(
        [
            np.interp(index[axis], np.arange(len(nodes)), nodes)
            for axis, nodes in ((2, grid.r), (1, grid.theta), (0, grid.phi))
        ],
        axis=-1,
    )
    placed = pv.PolyData(points_to_cartesian(spherical).astype(np.float32), surface.faces)
    if isinstance(across, str):
        normals = _normals(grid, across, index, spherical)
    else:
        along = np.zeros_like(spherical)
        along[:, 2 - across] = 1.0
        normals = vectors_to_cartesian(along, spherical)
    placed = _wound(placed, normals)
    placed.point_data["Normals"] = normals.astype(np.float32)
    placed.point_data.active_normals_name = "Normals"
    for name in carry:
        placed.point_data[name] = _at(grid.fields[name], index)
    return _without_hidden(grid, placed, index)


def _wound(surface: Any, normals: Array) -> Any:
    """The surface with its triangles wound so that their fronts are where the normals point."""
    triangles = surface.regular_faces
    a, b, c = (np.asarray(surface.points)[triangles[:, corner]] for corner in range(3))
    fronts = np.einsum("ij,ij->i", np.cross(b - a, c - a), normals[triangles[:, 0]])
    if fronts.sum() >= 0:
        return surface
    return pv.PolyData(surface.points, pv.CellArray.from_regular_cells(triangles[:, ::-1]))


def _at(array: Array, index: Array) -> Array:
    return np.asarray(map_coordinates(array, index, order=1, mode="nearest"), dtype=np.float32)


def _normals(grid: DisplayGrid, name: str, index: Array, spherical: Array) -> Array:
    """Unit vectors against the gradient."""
    values = grid.fields[name]
    r, theta, _ = spherical.T
    scale = (np.ones_like(r), r, r * np.sin(theta))
    parts = [
        _at(np.gradient(values, nodes, axis=axis), index) / factor
        for (axis, nodes), factor in zip(
            ((2, grid.r), (1, grid.theta), (0, grid.phi)), scale, strict=True
        )
    ]
    vectors = -vectors_to_cartesian(np.stack(parts, axis=-1), spherical)
    length = np.linalg.norm(vectors, axis=-1, keepdims=True)
    return np.asarray(vectors / np.where(length > 0, length, 1), dtype=np.float32)


def _without_hidden(grid: DisplayGrid, surface: Any, index: Array) -> Any:
    if grid.hidden is None:
        return surface
    nearest = tuple(np.rint(index).astype(int))
    bad = grid.hidden[nearest]
    triangles = surface.regular_faces
    keep = ~bad[triangles].any(axis=1)
    if keep.all():
        return surface
    if not keep.any():
        return empty_surface()
    kept = pv.PolyData(surface.points, pv.CellArray.from_regular_cells(triangles[keep]))
    for name in surface.point_data:
        kept.point_data[name] = surface.point_data[name]
    if "Normals" in kept.point_data:
        kept.point_data.active_normals_name = "Normals"
    return kept
