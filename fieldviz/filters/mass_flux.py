"""The mass flux of a wind to look at: arrows on the launching surfaces, ribbons of equal mass."""

from __future__ import annotations

import numpy as np
from vtkmodules.vtkCommonDataModel import vtkPolyData
from vtkmodules.vtkFiltersCore import vtkGlyph3D
from vtkmodules.vtkFiltersSources import vtkArrowSource

from fieldviz.filters.pieces import add_arrays, poly_data, quads_of_rows, set_cells
from fieldviz.lines.seeds_wind import wind_plan
from fieldviz.lines.tracing import trace_lines
from fieldviz.wedge.coordinates import vectors_to_cartesian
from fieldviz.wedge.fields import VELOCITY
from fieldviz.wedge.sampling import PointSampler
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.launch_surfaces import LaunchSurface

__all__ = ["arrows", "flux_on", "ribbons"]

_ROUND = np.radians(7.5)  # between arrows along azimuth; our choice
_RIBBON = np.radians(1.2)  # width of a ribbon along azimuth; our choice


def flux_on(snapshot: Snapshot, surface: LaunchSurface, places: Array) -> Array:
    """Mass flux rho v.n away from the midplane at places of a launching surface.

    Parameters
    ----------
    snapshot : Snapshot
    surface : LaunchSurface
        Gives the slope of each column.
    places : (n, 3) array
        r, theta, phi.

    Returns
    -------
    (n,) array
        Code units; NaN without density or velocity, or outside.
    """
    if not snapshot.has("density", *VELOCITY):
        return np.full(len(places), np.nan)
    southward, outward = (_sampled(snapshot, places, VELOCITY[n]) for n in (1, 0))
    flux = np.empty(len(places))
    for side in surface.sides:
        mine = (places[:, 1] < 0.5 * np.pi) == (side.sign > 0)
        column = np.searchsorted(side.r_edges, places[mine, 0], side="right") - 1
        slope = side.slope[np.clip(column, 0, len(side.slope) - 1)]
        # The normal of theta(r), southward: (-slope, 1)/sqrt(1 + slope^2) along r and theta.
        along = (southward[mine] - slope * outward[mine]) / np.sqrt(1.0 + slope**2)
        flux[mine] = -side.sign * along
    return flux


def _sampled(snapshot: Snapshot, places: Array, velocity: str) -> Array:
    """Density times a component of the velocity, the product being linear between cells."""
    with np.errstate(invalid="ignore", over="ignore"):
        product = snapshot.cell("density") * snapshot.cell(velocity)
    return PointSampler(snapshot.grid, places).of_array(product).astype(np.float64)


def arrows(snapshot: Snapshot, surface: LaunchSurface, count: int, length: float) -> vtkPolyData:
    """Arrows along rho v on both sides, in rows even in ln r and in azimuth.

    The length of an arrow is in proportion to r^3 |rho v|, the largest one `length` of its radius:
    where a wind loses the same mass from every factor in r, arrows are alike but for scale.
    """
    snapshot.require("draw arrows of the mass flux", "density", *VELOCITY)
    grid, places = snapshot.grid, []
    turns = max(1, round(grid.period / _ROUND))
    phi = grid.phi_range[0] + (np.arange(turns) + 0.5) / turns * grid.period
    for side in surface.sides:
        edges = np.geomspace(side.r_edges[0] or side.r_edges[1], side.r_edges[-1], count + 1)
        r = np.sqrt(edges[1:] * edges[:-1])
        column = np.clip(np.searchsorted(side.r_edges, r, side="right") - 1, 0, len(side.theta) - 1)
        theta = side.theta[column]
        known = np.isfinite(theta)
        mesh = np.meshgrid(r[known], phi, indexing="ij")
        angles = np.broadcast_to(theta[known][:, None], mesh[0].shape)
        places.append(np.stack([mesh[0], angles, mesh[1]], axis=-1).reshape(-1, 3))
    where = np.concatenate(places)
    flux = np.stack([_sampled(snapshot, where, name) for name in VELOCITY], axis=1)
    known = np.isfinite(flux).all(axis=1)
    where, flux = where[known], flux[known]
    strength = np.sqrt(np.sum(flux**2, axis=1))
    weight = strength * where[:, 0] ** 2
    scaled = length * where[:, 0] * weight / (weight.max(initial=0.0) or 1.0)
    data = poly_data(where)
    vectors = vectors_to_cartesian(flux, where)
    add_arrays(data.GetPointData(), {"mass_flux_vector": vectors, "mass_flux_strength": strength})
    unit = vectors / np.where(strength > 0, strength, 1.0)[:, None]
    add_arrays(data.GetPointData(), {"arrow": unit * scaled[:, None]})
    return _glyphs(data)


def _glyphs(data: vtkPolyData) -> vtkPolyData:
    source, glyphs = vtkArrowSource(), vtkGlyph3D()
    source.SetTipResolution(12)
    source.SetShaftResolution(12)
    data.GetPointData().SetActiveVectors("arrow")
    glyphs.SetInputData(data)
    glyphs.SetSourceConnection(source.GetOutputPort())
    glyphs.SetVectorModeToUseVector()
    glyphs.SetScaleModeToScaleByVector()
    glyphs.Update()
    return glyphs.GetOutput()


def ribbons(
    snapshot: Snapshot,
    count: int,
    *,
    height: float,
    thickness: float | None,
    r_range: tuple[float, float] | None,
) -> vtkPolyData:
    """Ribbons along poloidal streamlines of the wind; each stands for the same mass loss."""
    plan = wind_plan(snapshot, count, scale_heights=height, thickness=thickness, r_range=r_range)
    lines = trace_lines(
        snapshot, "velocity", plan.points, direction="forward", poloidal=True, sample=["density"]
    )
    points, corners, amount, side, first = [], [], [], [], 0
    for number in range(len(lines)):
        line = lines.line(number)
        if len(line) < 2:
            continue
        edges = np.repeat(line[:, None, :], 2, axis=1)
        edges[:, 0, 2] -= 0.5 * _RIBBON
        edges[:, 1, 2] += 0.5 * _RIBBON
        points.append(edges.reshape(-1, 3))
        corners.append(first + quads_of_rows(len(line), 2))
        first += 2 * len(line)
        amount.append(np.full(len(line) - 1, plan.amount[number]))
        side.append(np.full(len(line) - 1, plan.group[number]))
    data = poly_data(np.concatenate([np.empty((0, 3)), *points]))
    set_cells(data, "Polys", np.concatenate([np.empty((0, 4), dtype=np.int64), *corners]))
    cells = {"amount": np.concatenate([np.empty(0), *amount])}
    cells["side"] = np.concatenate([np.empty(0, dtype=np.int64), *side])
    add_arrays(data.GetCellData(), cells)
    return data
