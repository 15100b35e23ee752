"""Parameters and closed forms of the Saltmarsh disc.

Units: GM = r0 = 1, mu0 = 1. The disc was invented for this project; nothing in it is taken from a
simulation. N is the normal distribution function, c = cos(theta).

Midplane flux function
    psi0(R) = B0 R^(2-b)/(2-b) + sum_k F_k [N((R-R_k)/w_k) - 0.3 N((R-R_k)/W_k)], R B_z = psi0'
Field lines
    of the hourglass  R = R_f + t (sqrt(z^2 + b_h^2 R_f^2) - b_h R_f);  slanted  R = R_f + t z.
    psi = psi0(R_f) with the footpoint R_f = r g(theta); A_phi = psi/(r sin theta).
Mass flux
    rho v_p from the stream function chi = K(R_f) W(c), W = S(c) - p S(-c), S a smooth step over
    c = 0.3 to 0.42; K grows as R^xi and by a step at every sheet. Steady continuity is exact.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.special import ndtr

from fieldviz.errors import FieldvizError
from fieldviz.wedge.typing import Array

__all__ = ["WINDS", "FluxSheetLaw", "SaltmarshDisc", "smooth_step"]

# Mass loss of the lower side over that of the upper one.
WINDS = {"even": 1.0, "odd": 1.0, "one-sided": 0.0, "through-flow": -1.0}

_FIXED_SHEETS = (1.4, 4.2)
_MERGING_AT, _MERGING_SEPARATION, _MERGED_AT = 2.0, 0.30, 10.0
_SPLITTING_AT, _SPLIT_SEPARATION, _SPLIT_BEGIN, _SPLIT_END = 3.0, 0.45, 4.0, 14.0
_SHEET_WIDTH = 0.25  # standard deviation in local scale heights
_GAP_WIDTH = 0.6  # the same for the density gap
_RETURN_SHARE, _RETURN_WIDTH = 0.3, 16.0  # flux taken from the surroundings, and how widely
_TILT, _BEND_HEIGHT = 0.75, 0.2
_WIND_BASE, _WIND_FULL = 0.3, 0.42


@dataclass(frozen=True)
class FluxSheetLaw:
    """One sheet of the disc: `radius`, flux, and the widths of sheet, return flux and gap."""

    radius: float
    flux: float
    width: float
    return_width: float
    gap_depth: float
    gap_width: float
    mass_step: float


def smooth_step(x: Array) -> Array:
    """0 below 0, 1 above 1, twice differentiable between."""
    x = np.clip(x, 0.0, 1.0)
    return x * x * x * (x * (6 * x - 15) + 10)


def _bell(x: Array) -> Array:
    return np.exp(-0.5 * x * x) / np.sqrt(2 * np.pi)


@dataclass(frozen=True)
class SaltmarshDisc:
    """The invented disc of the demonstration, with its closed forms.

    Attributes
    ----------
    wind : str
        "even", "odd", "one-sided" or "through-flow".
    side_ratio : float or None
        Mass loss of the lower side over that of the upper one; by default what `wind` means.
    time : float
        0 to 14: the pair at R = 2 merges at 6.667, the sheet at R = 3 splits at 7.333.
    r_range : (float, float)
    theta_reach : (float, float)
        Angles above and below the midplane that the wedge covers, radians.
    period : float
        Azimuth of the wedge, radians.
    thickness : float
        H/R.
    density_slope : float
        a in rho_mid ~ R^-a.
    beta : float
        Plasma beta of the background net vertical field.
    magnetic_turbulence, velocity_turbulence : float
        rms of random solenoidal fluctuations near the midplane, in units of the background B_z
        and of the sound speed. The azimuthal mean of the poloidal part is zero.
    sheet_wander : float
        Amplitude in R by which sheets bend with azimuth.
    field_noise : float
        rms of axisymmetric noise in B_z, in units of the background.
    wind_scatter : float
        rms of azimuthal scatter of each side's mass loss; the totals do not change.
    midplane_shift, midplane_warp : float
        cos(theta) at which B_phi reverses, and the amplitude of its variation with radius.
    reversed_field : bool
        Turn the whole magnetic field round.
    seed : int
        Of all random numbers.
    """

    wind: str = "even"
    side_ratio: float | None = None
    time: float = 0.0
    r_range: tuple[float, float] = (1.0, 5.0)
    theta_reach: tuple[float, float] = (0.7, 0.7)
    period: float = np.pi / 4
    thickness: float = 0.1
    density_slope: float = 1.5
    beta: float = 1e4
    magnetic_turbulence: float = 0.0
    velocity_turbulence: float = 0.0
    sheet_wander: float = 0.0
    field_noise: float = 0.0
    wind_scatter: float = 0.0
    midplane_shift: float = 0.0
    midplane_warp: float = 0.0
    reversed_field: bool = False
    seed: int = 1

    mass_loss_scale: float = 6e-6
    ejection_index: float = 0.25
    base_speed: float = 0.1
    acceleration: float = 1.0
    reversal_width: float = 0.1
    wind_temperature: float = 4.0

    def __post_init__(self) -> None:
        if self.wind not in WINDS:
            raise FieldvizError(
                f"Cannot make the demo disc: expected wind to be one of {', '.join(WINDS)}, "
                f"got '{self.wind}'."
            )
        inner, outer = self.r_range
        if not 0 < inner < outer or min(self.theta_reach) <= 0 or max(self.theta_reach) >= 1.2:
            raise FieldvizError(
                "Cannot make the demo disc: expected 0 < r_in < r_out and a reach of 0 to 1.2 rad "
                f"on each side, got r_range {self.r_range} and theta_reach {self.theta_reach}."
            )
        if not 0 < self.period <= 2 * np.pi + 1e-9:
            raise FieldvizError(
                f"Cannot make the demo disc: expected a period of 0 to 2 pi, got {self.period}."
            )

    @property
    def ratio(self) -> float:
        """Mass loss of the lower side over that of the upper one."""
        return WINDS[self.wind] if self.side_ratio is None else self.side_ratio

    @property
    def slanted(self) -> bool:
        """Whether the field lines lean one way through the whole disc (the odd wind)."""
        return self.wind == "odd"

    @property
    def field_slope(self) -> float:
        """B in B_z ~ R^-b of the background."""
        return (self.density_slope + 1) / 2

    @property
    def background_field(self) -> float:
        """B_z of the background at R = 1."""
        return float(np.sqrt(2 * self.thickness**2 / self.beta))

    # ---- sheets -------------------------------------------------------------------------------

    def separations(self) -> tuple[float, float]:
        """Distances in R of the merging and of the splitting pair at this time."""
        merging = _MERGING_SEPARATION * max(0.0, 1 - self.time / _MERGED_AT)
        progress = (self.time - _SPLIT_BEGIN) / (_SPLIT_END - _SPLIT_BEGIN)
        return merging, _SPLIT_SEPARATION * float(np.clip(progress, 0.0, 1.0))

    @cached_property
    def sheets(self) -> tuple[FluxSheetLaw, ...]:
        """All sheets, two for each pair. Width and flux go with the pair's middle: they stay."""
        merging, splitting = self.separations()
        laws = [(radius, radius, 10.0, 0.8, 0.05) for radius in _FIXED_SHEETS]
        for middle, distance in ((_MERGING_AT, merging), (_SPLITTING_AT, splitting)):
            laws += [(middle + s * distance / 2, middle, 7.0, 0.45, 0.035) for s in (-1, 1)]
        return tuple(self._sheet(*law) for law in laws)

    def _sheet(
        self, radius: float, middle: float, peak: float, gap_depth: float, mass_step: float
    ) -> FluxSheetLaw:
        width = _SHEET_WIDTH * self.thickness * middle
        amplitude = peak * self.background_field * middle ** (1 - self.field_slope)
        return FluxSheetLaw(
            radius,
            amplitude * np.sqrt(2 * np.pi) * width,
            width,
            _RETURN_WIDTH * width,
            gap_depth,
            _GAP_WIDTH * self.thickness * middle,
            mass_step,
        )

    def sheet_radii(self) -> list[float]:
        """Radii at which R B_z peaks; a pair nearer than two widths is one sheet."""
        merging, splitting = self.separations()
        radii = list(_FIXED_SHEETS)
        for middle, distance in ((_MERGING_AT, merging), (_SPLITTING_AT, splitting)):
            width = _SHEET_WIDTH * self.thickness * middle
            radii += (
                [middle] if distance <= 2 * width else self._pair_peaks(middle, distance, width)
            )
        return sorted(radii)

    @staticmethod
    def _pair_peaks(middle: float, distance: float, width: float) -> list[float]:
        # Peaks of two equal bells at +-d: x = d tanh(x d / w^2), solved by iteration from d.
        half = distance / 2
        x = half
        for _ in range(200):
            x = half * np.tanh(x * half / width**2)
        return [float(middle - x), float(middle + x)]

    def events(self) -> dict[str, float]:
        """Times at which the pair becomes one maximum and the opening sheet two."""
        merging = 2 * _SHEET_WIDTH * self.thickness * _MERGING_AT
        splitting = 2 * _SHEET_WIDTH * self.thickness * _SPLITTING_AT
        return {
            "merge": _MERGED_AT * (1 - merging / _MERGING_SEPARATION),
            "split": _SPLIT_BEGIN + (_SPLIT_END - _SPLIT_BEGIN) * splitting / _SPLIT_SEPARATION,
        }

    # ---- magnetic flux ------------------------------------------------------------------------

    def midplane_flux_function(self, R: Array, shift: Array | float = 0.0) -> Array:
        """psi0(R), up positive; `shift` moves the sheets outward."""
        slope = 2 - self.field_slope
        psi = self.background_field * R**slope / slope
        for s in self.sheets:
            psi = psi + s.flux * (
                ndtr((R - s.radius - shift) / s.width)
                - _RETURN_SHARE * ndtr((R - s.radius) / s.return_width)
            )
        return psi + self._noise_flux(R) if self.field_noise else psi

    def radial_flux_density(self, R: Array) -> Array:
        """psi0'(R) = R B_z on the midplane, without noise."""
        value = self.background_field * R ** (1 - self.field_slope)
        for s in self.sheets:
            value = value + s.flux * (
                _bell((R - s.radius) / s.width) / s.width
                - _RETURN_SHARE * _bell((R - s.radius) / s.return_width) / s.return_width
            )
        return value

    def _noise_flux(self, R: Array) -> Array:
        rng = np.random.default_rng([self.seed, 77])
        n = 20
        wave = 2 * np.pi / (self.thickness * rng.uniform(0.5, 4.0, n))
        phase = rng.uniform(0, 2 * np.pi, n)
        log_r, q = np.log(R), 2 - self.field_slope
        total = np.zeros_like(R)
        # d/dR [R^q (q sin - k cos)/(q^2 + k^2)] = R^(q-1) sin(k ln R + phase)
        for k, f in zip(wave, phase, strict=True):
            angle = k * log_r + f
            total = total + (q * np.sin(angle) - k * np.cos(angle)) / (q * q + k * k)
        return self.field_noise * np.sqrt(2 / n) * self.background_field * R**q * total

    def footpoint_factor(self, theta: Array) -> Array:
        """g(theta) = R_f/r of the field line through (r, theta)."""
        sine, cosine = np.sin(theta), np.cos(theta)
        if self.slanted:
            return sine - _TILT * cosine
        q = 1 - 2 * _TILT * _BEND_HEIGHT
        root = np.sqrt(sine**2 * _BEND_HEIGHT**2 + q * cosine**2)
        return (sine * (1 - _TILT * _BEND_HEIGHT) - _TILT * root) / q

    def footpoint(self, r: Array, theta: Array) -> Array:
        """Radius R_f at which the field line through (r, theta) crosses the midplane."""
        return np.asarray(r) * self.footpoint_factor(np.asarray(theta))

    def flux_function(self, r: Array, theta: Array) -> Array:
        """psi(r, theta) = r sin(theta) A_phi, constant along axisymmetric field lines."""
        return self._polarity * self.midplane_flux_function(self.footpoint(r, theta))

    def flux(self, r1: float, r2: float) -> float:
        """Vertical flux through the wedge's midplane between two radii, up positive."""
        R = np.array([r1, r2])
        low, high = self.midplane_flux_function(R)
        return float(self._polarity * self.period * (high - low))

    @property
    def _polarity(self) -> int:
        return -1 if self.reversed_field else 1

    # ---- mass flux ----------------------------------------------------------------------------

    def loss_function(self, R: Array) -> Array:
        """K(R): mass lost within R per side and radian, once the wind is complete."""
        value = R**self.ejection_index
        for s in self.sheets:
            value = value + s.mass_step * ndtr((R - s.radius) / s.width)
        return self.mass_loss_scale * value

    def loss_density(self, R: Array) -> Array:
        """K'(R)."""
        value = self.ejection_index * R ** (self.ejection_index - 1)
        for s in self.sheets:
            value = value + s.mass_step * _bell((R - s.radius) / s.width) / s.width
        return self.mass_loss_scale * value

    @staticmethod
    def wind_share(cosine: Array) -> Array:
        """S(c): how much of the upper wind has left the disc at cos(theta) = c."""
        return smooth_step((cosine - _WIND_BASE) / (_WIND_FULL - _WIND_BASE))

    def wind_window(self, cosine: Array) -> Array:
        """W(c) = S(c) - p S(-c)."""
        return self.wind_share(cosine) - self.ratio * self.wind_share(-cosine)

    def stream_function(self, r: Array, theta: Array) -> Array:
        """chi(r, theta): rho v_p = curl(chi/(r sin theta) phi-hat)."""
        return self.loss_function(self.footpoint(r, theta)) * self.wind_window(np.cos(theta))

    def mass_loss(self, theta: float, r1: float, r2: float) -> float:
        """Mass that leaves the disc through the cone at `theta`, in the wedge, per unit time.

        Parameters
        ----------
        theta : float
            Colatitude of the cone: above pi/2 the lower side.
        r1, r2 : float
            Radii on the cone.

        Returns
        -------
        float
            Positive away from the midplane; code mass over code time.
        """
        g = self.footpoint_factor(np.asarray(theta))
        low, high = self.loss_function(np.array([r1, r2]) * g)
        cosine = np.cos(theta)
        side = np.sign(cosine)
        return float(side * self.period * self.wind_window(np.asarray(cosine)) * (high - low))

    def inflow(self, r: float, theta_up: float, theta_down: float) -> float:
        """Mass that crosses the sphere r inward between two cones, in the wedge, per unit time."""
        up, down = self.stream_function(np.asarray(r), np.array([theta_up, theta_down]))
        return float(self.period * (up - down))
