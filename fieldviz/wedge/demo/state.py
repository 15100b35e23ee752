"""Density, pressure, azimuthal velocity and field of the Saltmarsh disc at points.

The wind keeps k (mass per flux), omega and l (angular momentum per mass) constant along each
field line. Mass load k = K'/psi0', omega = R_f^-3/2, wind density
rho_w = rho_b [1 + (x^2 - 1)/eps]^-2 with x = R/R_f and rho_b = K'/(R_f v_b); then
R B_phi = -sgn(k) omega R_f^2 eps sqrt(rho_b)/(1 + y), y = |k|/sqrt(rho_w), and
v_phi = omega R + k B_phi/rho_w. The Alfven point is at x^2 = lambda.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.wedge.demo.disc import SaltmarshDisc, smooth_step
from fieldviz.wedge.typing import Array

__all__ = ["DiscState", "disc_state"]


@dataclass(frozen=True)
class DiscState:
    """Axisymmetric state, arrays of the shape of the points."""

    density: Array
    pressure: Array
    velocity_phi: Array
    magnetic_phi: Array


@dataclass(frozen=True)
class _Wind:
    density: Array
    rotation_and_field_up: tuple[Array, Array]
    rotation_and_field_down: tuple[Array, Array]


def disc_state(disc: SaltmarshDisc, r: Array, theta: Array) -> DiscState:
    """State at points r, theta (arrays that broadcast)."""
    sine, cosine = np.sin(theta), np.cos(theta)
    R = r * sine
    wind = _slanted_wind(disc, r, theta) if disc.slanted else _wind(disc, r, theta)
    share = disc.wind_share(cosine) + disc.wind_share(-cosine)
    gap, gap_slope = _gaps(disc, R)
    h2 = disc.thickness**2
    body = R**-disc.density_slope * gap * np.exp((sine - 1) / h2)
    density = body * (1 - share) + wind.density
    pressure = density * h2 / R * (1 + (disc.wind_temperature - 1) * share)
    v_up, I_up = wind.rotation_and_field_up
    v_down, I_down = wind.rotation_and_field_down
    balance = np.maximum(1 / r + h2 / R * (-disc.density_slope - 1 + gap_slope), 0.01 / r)
    v_phi = np.sqrt(balance) * (1 - share) + np.where(cosine > 0, v_up, v_down) * share
    mix = smooth_step(
        (cosine - _reversal(disc, r) + disc.reversal_width) / (2 * disc.reversal_width)
    )
    B_phi = (I_up * mix + I_down * (1 - mix)) / R
    if disc.reversed_field:
        B_phi = -B_phi
    return DiscState(density, pressure, v_phi, B_phi)


def _reversal(disc: SaltmarshDisc, r: Array) -> Array:
    """cos(theta) where B_phi changes sign."""
    inner, outer = disc.r_range
    phase = 2 * np.pi * np.log(r / inner) / np.log(outer / inner)
    return disc.midplane_shift + disc.midplane_warp * np.sin(phase)


def _gaps(disc: SaltmarshDisc, R: Array) -> tuple[Array, Array]:
    """Depletion D(R) by all sheets and d ln D/d ln R."""
    depletion, slope = np.ones_like(R), np.zeros_like(R)
    for s in disc.sheets:
        x = (R - s.radius) / s.gap_width
        dip = s.gap_depth * np.exp(-0.5 * x * x)
        depletion = depletion * (1 - dip)
        slope = slope + dip * x / s.gap_width * R / (1 - dip)
    return depletion, slope


def _wind(disc: SaltmarshDisc, r: Array, theta: Array) -> _Wind:
    R, R_f = r * np.sin(theta), disc.footpoint(r, theta)
    loss = disc.loss_density(R_f)
    base = loss / (disc.base_speed * np.sqrt(R_f))
    density = base / (1 + np.maximum((R / R_f) ** 2 - 1, -0.5) / disc.acceleration) ** 2
    load = loss / disc.radial_flux_density(R_f)
    args = (disc, R, R_f, base, density)
    return _Wind(density, _line(*args, load), _line(*args, -disc.ratio * load))


def _slanted_wind(disc: SaltmarshDisc, r: Array, theta: Array) -> _Wind:
    """The odd wind: below, |v_R|, v_phi and the field's torque are those of the mirrored point.

    The lower mass flux is set by its own footpoint, so the density follows from
    rho |v_R| = t K'(R_f)/R on both sides. B_phi has one sign on both sides and balances B_theta, so
    that the net torque vanishes at every radius. Invariants hold on the upper side only.
    """
    above = np.where(theta > np.pi / 2, np.pi - theta, theta)
    wind = _wind(disc, r, above)
    foot, mirrored = disc.footpoint(r, theta), disc.footpoint(r, above)
    mass_ratio = disc.loss_density(foot) / disc.loss_density(mirrored)
    flux_ratio = disc.radial_flux_density(foot) * foot
    flux_ratio = flux_ratio / (disc.radial_flux_density(mirrored) * mirrored)
    v_phi, current = wind.rotation_and_field_up
    balanced = v_phi, current / flux_ratio
    return _Wind(wind.density * mass_ratio, balanced, balanced)


def _line(
    disc: SaltmarshDisc, R: Array, R_f: Array, base: Array, density: Array, load: Array
) -> tuple[Array, Array]:
    """v_phi and R B_phi on a line of signed mass load; a dead line corotates without B_phi."""
    omega = R_f**-1.5
    strength = np.abs(load) / np.sqrt(density)
    current = -np.sign(load) * omega * R_f**2 * disc.acceleration * np.sqrt(base) / (1 + strength)
    return omega * R - np.abs(current) * np.abs(load) / density / R, current
