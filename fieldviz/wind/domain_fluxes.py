"""What passes spheres beyond the launching surfaces, and the edges of the domain."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from fieldviz.wedge.geometry import annulus_widths
from fieldviz.wedge.typing import Array
from fieldviz.wind.column_places import SphereSums, places_at
from fieldviz.wind.launch_surfaces import LaunchSurface
from fieldviz.wind.meridional_fluxes import FluxTables

__all__ = ["EdgeFlux", "SphereFlux", "edge_flux", "sphere_flux"]


@dataclass(frozen=True, eq=False)
class SphereFlux:
    """Flux through spheres beyond the launching surfaces, outward positive; for the wedge.

    Attributes
    ----------
    r : (n,) array
    upper, lower : (n,) arrays
        From the surface to the wedge's edge on each side; NaN without a surface or a number.
    """

    r: Array
    upper: Array
    lower: Array


@dataclass(frozen=True)
class EdgeFlux:
    """Flux out of the whole domain through its four edges; for the wedge.

    Attributes
    ----------
    inner, outer : float
        Through the smallest and the largest sphere; positive out of the domain.
    north, south : float
        Through the smallest and the largest colatitude.
    """

    inner: float
    outer: float
    north: float
    south: float

    @property
    def total(self) -> float:
        """All four."""
        return self.inner + self.outer + self.north + self.south


def sphere_flux(
    tables: FluxTables, surface: LaunchSurface, names: tuple[str, ...], radii: Array
) -> SphereFlux:
    """Sum of some quantities through spheres at `radii`, outside the launching surfaces."""
    if any(name in tables.reasons for name in names):
        nothing = np.full(len(radii), np.nan)
        return SphereFlux(radii, nothing, nothing)
    table = np.sum([tables.radial[name] for name in names], axis=0)
    sums = SphereSums.of_flux(tables.mesh, table)
    low, high = tables.mesh.theta_edges[0], tables.mesh.theta_edges[-1]
    upper, lower = (side.on_edges for side in surface.sides)
    beyond = (sums.between(low, upper), sums.between(lower, high))
    return SphereFlux(radii, *(np.interp(radii, tables.mesh.r_edges, f) for f in beyond))


def edge_flux(tables: FluxTables, names: tuple[str, ...]) -> EdgeFlux:
    """Sum of some quantities through the edges of the domain.

    Values are continued linearly from the cells to the edges; a quantity that is absent is NaN.
    """
    if any(name in tables.reasons for name in names):
        return EdgeFlux(np.nan, np.nan, np.nan, np.nan)
    mesh = tables.mesh
    radial = np.sum([tables.radial[name] for name in names], axis=0)
    through = SphereSums.of_flux(mesh, radial).per_cell[:, [0, -1]].sum(0)
    return EdgeFlux(
        -float(through[0]),
        float(through[1]),
        -_through_cone(tables, tables.southward, names, float(mesh.theta_edges[0])),
        _through_cone(tables, tables.southward, names, float(mesh.theta_edges[-1])),
    )


def _through_cone(
    tables: FluxTables, southward: Mapping[str, Array], names: tuple[str, ...], theta: float
) -> float:
    mesh = tables.mesh
    places = places_at(mesh, np.full((1, len(mesh.r)), theta))
    # sin(pi) is 1e-16 in floating point; the axis has no area.
    sine = 0.0 if theta >= np.pi else np.sin(theta)
    density = np.sum([places.of(southward[name])[0] for name in names], axis=0)
    return float((density * annulus_widths(mesh.r_edges)).sum() * sine * mesh.period)
