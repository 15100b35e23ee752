"""What leaves through the launching surfaces, side by side and bin by bin in radius."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import MeridionalMesh
from fieldviz.wedge.geometry import annulus_widths
from fieldviz.wedge.typing import Array
from fieldviz.wind.column_places import places_at, rebinned
from fieldviz.wind.launch_surfaces import LaunchSurface, SurfaceSide
from fieldviz.wind.meridional_fluxes import FluxTables

__all__ = ["Loss", "SideFlux", "across", "loss_through", "sum_of_losses", "through_surface"]

# Points along each piece of a surface that is no cone: by the cells it crosses in theta.
_PER_ROW, _LEAST_STEPS, _MOST_STEPS = 4, 8, 512


@dataclass(frozen=True, eq=False)
class SideFlux:
    """What leaves through one side, positive away from the midplane; code units, for the wedge.

    Attributes
    ----------
    radii : (n + 1,) array
        Edges of the bins.
    bins : (n,) array
        Net flux through each bin; 0 where the surface does not exist, NaN where data are missing.
    outward, inward : (n,) arrays
        Its positive and its negative part: what leaves and, negative, what comes back.
    """

    radii: Array
    bins: Array
    outward: Array
    inward: Array

    @property
    def net(self) -> float:
        """All bins together."""
        return float(self.bins.sum())

    @property
    def positive(self) -> float:
        """Positive part of all bins."""
        return float(self.outward.sum())

    @property
    def negative(self) -> float:
        """Negative part of all bins."""
        return float(self.inward.sum())

    @property
    def cumulative(self) -> Array:
        """Net flux within each edge, (n + 1,)."""
        return np.concatenate([[0.0], np.cumsum(self.bins)])

    @property
    def per_ln_r(self) -> Array:
        """d/d ln r of the cumulative flux, (n,); the innermost bin is NaN if it begins at r = 0."""
        with np.errstate(divide="ignore"):
            width = np.diff(np.log(self.radii))
        return np.where(np.isfinite(width), self.bins / width, np.nan)


@dataclass(frozen=True, eq=False)
class Loss:
    """Loss of one quantity through both sides.

    Attributes
    ----------
    name : str
    upper, lower : SideFlux
    reason : str
        Why it is NaN; empty where it is not.
    """

    name: str
    upper: SideFlux
    lower: SideFlux
    reason: str = ""

    @property
    def total(self) -> float:
        """Net loss of both sides."""
        return self.upper.net + self.lower.net

    @property
    def sides(self) -> tuple[SideFlux, SideFlux]:
        """Upper and lower side."""
        return self.upper, self.lower


def through_surface(
    mesh: MeridionalMesh, side: SurfaceSide, flux: Array, size: Array
) -> tuple[Array, Array, Array]:
    """Integrate over each column's piece of a launching surface.

    Parameters
    ----------
    mesh : MeridionalMesh
    side : SurfaceSide
    flux, size : (n_theta, n_r) arrays
        F_theta - r S' F_r, and the mean of its absolute value.

    Returns
    -------
    net, positive, negative : (n_r,) arrays
        Away from the midplane, for the wedge. 0 in columns without a surface.

    Notes
    -----
    The surface theta = S(r) has the vector element r sin S dphi (theta-hat - r S' r-hat) dr. A
    cone's areas are exact; other pieces take points even in r at the middle radius of the column,
    with the flux linear in theta between cells: second order.
    """
    there = side.there
    rows = np.max(np.abs(side.outer - side.inner)[there], initial=0.0)
    rows /= np.diff(mesh.theta_edges).min()
    count = int(np.clip(_PER_ROW * np.ceil(rows), _LEAST_STEPS, _MOST_STEPS)) if rows > 0 else 1
    steps = (np.arange(count) + 0.5) / count
    theta = side.inner + steps[:, None] * (side.outer - side.inner)
    theta = np.where(there, theta, mesh.theta_edges[0])
    places = places_at(mesh, theta)
    area = annulus_widths(mesh.r_edges) * mesh.period
    sine = np.sin(theta)
    net = -side.sign * (places.of(flux) * sine).mean(0) * area
    both = np.maximum((places.of(size) * sine).mean(0) * area, np.abs(net))
    parts = (net, 0.5 * (both + net), 0.5 * (net - both))
    found = [np.where(there, part, 0.0) for part in parts]
    return found[0], found[1], found[2]


def across(tables: FluxTables, side: SurfaceSide, name: str) -> Array:
    """Flux density across a side's surface, F_theta - r S' F_r, (n_theta, n_r)."""
    if not np.any(side.slope[side.there]):
        return tables.southward[name]
    slope = np.where(side.there, side.slope, 0.0)
    return np.asarray(tables.southward[name] - slope * tables.radial[name])


def loss_through(tables: FluxTables, surface: LaunchSurface, name: str, radii: Array) -> Loss:
    """What leaves of one quantity through both sides of a surface, in bins of radius.

    A side on which the surface exists nowhere, and a quantity that is absent, are NaN.
    """
    sides, reason = [], tables.reasons.get(name, "")
    for side in surface.sides:
        if reason or not side.there.any():
            nothing = np.full(len(radii) - 1, np.nan)
            sides.append(SideFlux(radii, nothing, nothing, nothing))
            continue
        parts = through_surface(tables.mesh, side, across(tables, side, name), tables.size[name])
        edges = tables.mesh.r_edges
        sides.append(SideFlux(radii, *(rebinned(part, edges, radii) for part in parts)))
    if not reason:
        reason = "; ".join(
            f"no surface on the {side.side} side" for side in surface.sides if not side.there.any()
        )
    if not reason and not np.isfinite([s.net for s in sides]).all():
        reason = "cells on the surface have no number over the whole azimuth"
    return Loss(name, sides[0], sides[1], reason)


def sum_of_losses(name: str, parts: list[Loss]) -> Loss:
    """Several losses together; positive and negative parts are those of the summed bins."""
    reason = "; ".join(dict.fromkeys(part.reason for part in parts if part.reason))
    sides = []
    for flux in zip(*(part.sides for part in parts), strict=True):
        net = np.sum([one.bins for one in flux], axis=0)
        sides.append(SideFlux(flux[0].radii, net, np.maximum(net, 0.0), np.minimum(net, 0.0)))
    return Loss(name, sides[0], sides[1], reason)
