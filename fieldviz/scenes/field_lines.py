"""Poloidal field lines of the azimuth-averaged field, and lines of any kind as tubes."""

from __future__ import annotations

from itertools import pairwise
from typing import Any

import numpy as np
import pyvista as pv
from contourpy import contour_generator
from scipy.interpolate import CubicSpline
from scipy.ndimage import gaussian_filter, gaussian_filter1d

from fieldviz.derived.flux_function import flux_function_at
from fieldviz.scenes.finite_cells import finite_field
from fieldviz.scenes.surfaces import empty_surface
from fieldviz.wedge.coordinates import points_to_cartesian
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = [
    "arrow_heads",
    "coarsest_cell",
    "equal_flux_levels",
    "in_plane",
    "poloidal_lines",
    "smoothed",
    "tubes",
]

_REFINEMENT = 4
_DIRECTION_WIDTH = (0.8, 3.0)  # cells along theta and r over which directions are averaged
_SMOOTHING = 1.2  # of the largest cells: lines are smoothed over this length
_MOST_LINES = 2000  # of edges in either direction
_HEAD = (7.5, 2.6)  # length and radius of an arrow head, in radii of its tube
_STEEPEST = 6.0  # d ln r/d theta beyond which field lines count as radial


def poloidal_lines(snapshot: Snapshot, r_end: float | None, count: int) -> list[Array]:
    """Contours of the flux function, equal flux between neighbours.

    Parameters
    ----------
    snapshot : Snapshot
        With the poloidal magnetic field.
    r_end : float or None
        Outer radius; None: the whole wedge.
    count : int
        Number of flux values.

    Returns
    -------
    list of (n, 2) arrays
        r and theta along each line.
    """
    grid = snapshot.grid
    x = _lines_of_edges(np.log(np.maximum(grid.r_edges, 1e-3 * grid.r_range[1])))
    if r_end is not None:
        x = x[x <= np.log(r_end) + 1e-12]
    theta = _lines_of_edges(grid.theta_edges)
    r = np.clip(np.exp(x), *grid.r_range)
    psi = flux_function_at(_without_gaps(snapshot), r, theta)
    x, y, fine = _refined(x, theta, psi, _slopes(x, theta, psi))
    generator = contour_generator(x, y, fine)
    lines = []
    for level in equal_flux_levels(psi, count):
        for line in generator.lines(float(level)):
            place = smoothed(np.asarray(line), _SMOOTHING * min(coarsest_cell(snapshot), 0.05))
            lines.append(np.column_stack([np.exp(place[:, 0]), place[:, 1]]))
    return lines


def equal_flux_levels(psi: Array, count: int) -> Array:
    """Values of psi with the same flux between neighbours and half of it beside the ends."""
    low, high = float(np.min(psi)), float(np.max(psi))
    return low + (high - low) * (np.arange(count) + 0.5) / count


def _lines_of_edges(edges: Array) -> Array:
    """All different edges of all blocks, thinned where there are very many."""
    lines = np.unique(edges)
    apart = np.concatenate([[True], np.diff(lines) > 1e-9 * np.ptp(lines)])
    lines = lines[apart]
    stride = -(-len(lines) // _MOST_LINES)
    return np.unique(np.append(lines[::stride], lines[-1]))


def _without_gaps(snapshot: Snapshot) -> Snapshot:
    """The poloidal field alone, cells or faces without a number filled from their neighbours."""
    names = ("magnetic_r", "magnetic_theta")
    on_faces = all(name in snapshot.faces for name in names)
    values = {
        name: finite_field(snapshot.faces[name] if on_faces else snapshot.cell(name))[0]
        for name in names
    }
    return Snapshot.from_grid(snapshot.grid, **{"faces" if on_faces else "cells": values})


def coarsest_cell(snapshot: Snapshot) -> float:
    """Width of the largest cells in ln r and theta."""
    grid = snapshot.grid
    steps = np.diff(grid.r_edges) / centres(grid.r_edges), np.diff(grid.theta_edges)
    return float(max(np.median(step, axis=1).max() for step in steps))


def smoothed(line: Array, width: float) -> Array:
    """A line with the traces of single cells taken out; its ends stay where they are.

    Vertices are spread evenly along the line and averaged with a normal weight of this width, in
    the coordinates given. Beyond its ends the line is continued by its own mirror image in the end
    point.

    Parameters
    ----------
    line : (n, 2) or (n, 3) array
        ln r, theta and perhaps phi.
    width : float
    """
    steps = np.linalg.norm(np.diff(line, axis=0), axis=1)
    length = np.concatenate([[0.0], np.cumsum(steps)])
    if length[-1] < 4.0 * width:
        return line
    count = int(np.ceil(length[-1] / (0.25 * width))) + 1
    even = np.column_stack(
        [np.interp(np.linspace(0, length[-1], count), length, axis) for axis in line.T]
    )
    chord = np.linspace(even[0], even[-1], count)
    # What is left is 0 at both ends; an odd continuation keeps it so.
    rest = even - chord
    doubled = np.concatenate([-rest[:0:-1], rest, -rest[-2::-1]])
    smooth = gaussian_filter1d(doubled, 4.0, axis=0)
    return np.asarray(chord + smooth[count - 1 : 2 * count - 1])


def _slopes(x: Array, theta: Array, psi: Array) -> Array:
    """D ln r/d theta of the field lines, between the rows of psi: (n_theta - 1, n_r)."""
    along_theta = np.diff(psi, axis=0) / np.diff(theta)[:, None]
    along_x = 0.5 * (np.gradient(psi[1:], x, axis=1) + np.gradient(psi[:-1], x, axis=1))
    # Directions change slowly even where the strength leaps: a mean over neighbours is better.
    along_theta, along_x = (
        gaussian_filter(values, _DIRECTION_WIDTH) for values in (along_theta, along_x)
    )
    steep = np.abs(along_x) < np.abs(along_theta) / _STEEPEST
    return np.where(steep, 0.0, -along_theta / np.where(steep, 1.0, along_x))


def _refined(x: Array, theta: Array, psi: Array, slopes: Array) -> tuple[Array, Array, Array]:
    """Psi on a finer mesh of ln r and theta, interpolated between rows along the field lines.

    A sheet is a steep step of psi that lies aslant on the mesh. Interpolation at constant r would
    turn it into a staircase; along the direction of the field psi hardly changes.
    """
    fine_x = np.interp(
        np.arange(_REFINEMENT * (len(x) - 1) + 1) / _REFINEMENT, np.arange(len(x)), x
    )
    rows = [CubicSpline(x, row) for row in psi]
    known = np.array([row(fine_x) for row in rows])
    result, heights = [known[0]], [theta[0]]
    for j, step in enumerate(np.diff(theta)):
        shift = np.interp(fine_x, x, slopes[j]) * step
        for part in np.arange(1, _REFINEMENT) / _REFINEMENT:
            # Past the ends of the radii a row is continued by its last value.
            above = rows[j](np.clip(fine_x - part * shift, x[0], x[-1]))
            below = rows[j + 1](np.clip(fine_x + (1 - part) * shift, x[0], x[-1]))
            result.append((1 - part) * above + part * below)
            heights.append(theta[j] + part * step)
        result.append(known[j + 1])
        heights.append(theta[j + 1])
    return fine_x, np.array(heights), np.array(result)


def in_plane(lines: list[Array], phi: float) -> list[Array]:
    """Lines (r, theta) put into the plane of one azimuth: (n, 3) arrays."""
    return [np.column_stack([line, np.full(len(line), phi)]) for line in lines]


def tubes(
    lines: list[Array],
    width: float,
    *,
    widening: bool = True,
    scalars: tuple[str, list[Array]] | None = None,
) -> Any:
    """Tubes along lines.

    Parameters
    ----------
    lines : list of (n, 3) arrays
        r, theta, phi.
    width : float
        Radius of a tube at the outermost point of all lines.
    widening : bool
        Tubes are thinner at smaller r.
    scalars : (name, list of (n,) arrays), optional
        Values along the lines.
    """
    kept = [n for n, line in enumerate(lines) if len(line) > 3]
    if not kept:
        return empty_surface()
    points = np.concatenate([lines[n] for n in kept])
    end = float(points[:, 0].max())
    starts = np.cumsum([0, *(len(lines[n]) for n in kept)])
    cells = np.concatenate(
        [
            np.concatenate([[stop - start], np.arange(start, stop)])
            for start, stop in pairwise(starts)
        ]
    )
    threads = pv.PolyData(points_to_cartesian(points), lines=cells)
    share = _widening(points[:, 0], end) if widening else np.ones(len(points))
    threads.point_data["width"] = width * share
    if scalars is not None:
        name, values = scalars
        threads.point_data[name] = np.concatenate([values[n] for n in kept])
    return threads.tube(scalars="width", absolute=True, n_sides=12)


def _widening(r: Array, end: float) -> Array:
    """Width of a tube at radius r over that at the outermost point."""
    return np.asarray(0.35 + 0.65 * r / end)


def arrow_heads(lines: list[Array], width: float, *, scalars: tuple[str, list[Array]]) -> Any:
    """A cone at the end of each line, pointing along it; parameters as of `tubes`."""
    kept = [n for n, line in enumerate(lines) if len(line) > 3]
    if not kept:
        return empty_surface()
    tips = points_to_cartesian(np.stack([lines[n][-1] for n in kept]))
    before = points_to_cartesian(np.stack([lines[n][-3] for n in kept]))
    along = tips - before
    end = max(float(lines[n][:, 0].max()) for n in kept)
    cloud = pv.PolyData(tips)
    cloud.point_data["along"] = along / np.linalg.norm(along, axis=1, keepdims=True)
    cloud.point_data["size"] = width * _widening(np.array([lines[n][-1, 0] for n in kept]), end)
    name, values = scalars
    cloud.point_data[name] = np.array([values[n][-1] for n in kept])
    length, base = _HEAD
    head = pv.Cone(center=(0.0, 0, 0), direction=(1, 0, 0), height=length, radius=base)
    head = head.compute_normals(cell_normals=False, split_vertices=True)
    return cloud.glyph(orient="along", scale="size", factor=1.0, geom=head)
