"""The profile of the vertical flux near the midplane, its background, and the gas beside it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import ndtri

from fieldviz.derived.azimuth_sums import azimuth_moments
from fieldviz.derived.thickness import Thickness, disc_thickness
from fieldviz.errors import FieldvizError
from fieldviz.sheets.flux_map import MIDPLANE, WORK, FluxMap, flux_maps
from fieldviz.sheets.running import Kernel, gaussian_kernel, row_medians
from fieldviz.wedge.geometry import annulus_widths, centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = [
    "BACKGROUND_REACH",
    "BAND",
    "SMOOTHING",
    "FluxProfile",
    "flux_profile",
    "given_thickness",
]

BAND = 0.5  # scale heights either side of the midplane over which B_z is averaged
# Standard deviation of the smoothing, scale heights: without noise the lesser is enough, and sheets
# that merge stay apart until they are one.
SMOOTHING, LEAST_SMOOTHING = 0.1, 0.03
QUIET = 0.003  # of the median |f|: noise from ring to ring below which a profile counts as without
BACKGROUND_REACH = 3.0  # scale heights either side over which the background is the median


@dataclass(frozen=True, eq=False)
class FluxProfile:
    """Azimuth mean of the vertical flux against radius, with what it is measured by.

    Attributes
    ----------
    r_edges : (n_r + 1,) array
    f : (n_r,) array
        r <B_z> averaged over the band, up positive; rings without a number are bridged.
    smooth : (n_r,) array
        f after smoothing.
    background, spread : (n_r,) arrays
        Running median of `smooth`, and 1.4826 times the median deviation from it, in units of f;
        less where that of single azimuths is less, see `row_medians`.
    midplane : FluxMap
        The map at theta = pi/2 itself, for fluxes.
    surface_density, pressure : (n_r,) arrays or None
        Column over the wedge's colatitudes, and midplane pressure.
    h : float
        H/R.
    period : float
        Azimuth of the wedge.
    kernel : Kernel
        The smoothing.
    quiet : bool
        Whether f has hardly any noise from ring to ring.
    bridged : (n_r,) bool array
        Rings that had no number.
    notes : tuple of str
    """

    r_edges: Array
    f: Array
    smooth: Array
    background: Array
    spread: Array
    midplane: FluxMap
    surface_density: Array | None
    pressure: Array | None
    h: float
    period: float
    kernel: Kernel
    quiet: bool
    bridged: Array
    notes: tuple[str, ...]

    @property
    def r(self) -> Array:
        """Middles of the rings."""
        return centres(self.r_edges)

    @property
    def x(self) -> Array:
        """The coordinate ln r / h: distances are in local scale heights."""
        return np.log(self.r) / self.h

    @property
    def field(self) -> Array:
        """<B_z>, (n_r,)."""
        return self.f / self.r

    @property
    def net_share(self) -> float:
        """Net flux of the range over the flux without sign of the azimuth mean; 0 without flux."""
        per_ring = self.f * np.diff(self.r_edges)
        unsigned = float(np.abs(per_ring).sum())
        return abs(float(per_ring.sum())) / unsigned if unsigned else 0.0

    def flux(
        self,
        inner: float,
        outer: float,
        shift: Array | float = 0.0,
        share: Array | float = 1.0,
    ) -> float:
        """Upward flux through the midplane of the wedge between two radii.

        Parameters
        ----------
        inner, outer : float
        shift : (n_phi,) array or float
            By how much ln r / h of both is larger at each azimuth of `midplane`.
        share : (n_phi,) array or float
            How much of each azimuth counts, 0 to 1.

        Returns
        -------
        float
            Patches without a number count as their ring's mean.
        """
        table = self.midplane
        ring = np.nan_to_num(table.mean())
        density = np.where(np.isfinite(table.density), table.density, ring)
        n_phi = len(density)
        factor = np.exp(self.h * np.broadcast_to(np.asarray(shift, dtype=np.float64), (n_phi,)))
        widths = np.diff(table.phi_edges) * np.broadcast_to(share, (n_phi,))
        if n_phi > 1 and np.ptp(factor) == 0 and np.ndim(share) == 0:
            density, factor, widths = ring[None], factor[:1], widths.sum(keepdims=True)
        total = 0.0
        for row, scale, width in zip(density, factor, widths, strict=True):
            ends = np.array([inner, outer]) * scale
            per_ring = row * np.diff(table.r_edges) * width
            total += float(np.diff(_up_to(ends, table.r_edges, per_ring))[0])
        return total


def given_thickness(snapshot: Snapshot, thickness: float | None) -> Thickness:
    """H/R as given, or worked out from the snapshot."""
    if thickness is None:
        return disc_thickness(snapshot)
    if not 0 < thickness < 1:
        raise FieldvizError(
            f"Cannot {WORK}: expected a thickness H/R of 0 to 1, got {thickness}; leave it out "
            "and it is worked out."
        )
    return Thickness(float(thickness), (float(thickness),) * 2, "given")


def flux_profile(
    snapshot: Snapshot,
    *,
    thickness: float | None = None,
    r_range: tuple[float, float] | None = None,
    band: float = BAND,
    smoothing: float | None = None,
    background_reach: float = BACKGROUND_REACH,
) -> tuple[FluxProfile, FluxMap]:
    """Profile r <B_z> of the band about the midplane, and the map it is the mean of.

    Parameters
    ----------
    snapshot : Snapshot
        With `magnetic_theta`; `density` and perhaps `pressure` unless `thickness` is given.
    thickness : float, optional
        H/R; worked out from the snapshot by default.
    r_range : (float, float), optional
        Radii to use; the whole wedge by default.
    band : float
        Half thickness of the band, scale heights.
    smoothing : float, optional
        Standard deviation of the Gaussian smoothing, scale heights; 0 for none. By default 0.1, or
        0.03 where f has hardly any noise from ring to ring.
    background_reach : float
        Half width of the running median, scale heights.

    Returns
    -------
    FluxProfile, FluxMap

    Raises
    ------
    MissingFieldError, FieldvizError
    """
    _check_positive(band=band, background_reach=background_reach)
    if smoothing is not None and not 0 <= smoothing < background_reach:
        raise FieldvizError(
            f"Cannot {WORK}: expected a smoothing of 0 to {background_reach:g} scale heights, "
            f"got {smoothing}; choose one in between."
        )
    measured = given_thickness(snapshot, thickness)
    h = measured.h
    of_band, of_midplane = flux_maps(snapshot, [(MIDPLANE, band * h), (MIDPLANE, 0.0)], r_range)
    f = of_band.mean()
    bridged = ~np.isfinite(f)
    if bridged.all():
        raise FieldvizError(
            f"Cannot {WORK}: expected a vertical field near the midplane, got no number in any "
            "ring; choose another snapshot."
        )
    r_edges, r = of_band.r_edges, of_band.r
    f = np.interp(r, r[~bridged], f[~bridged])
    x, dx = np.log(r) / h, np.diff(np.log(np.maximum(r_edges, 1e-12 * r_edges[-1]))) / h
    quiet = _ring_noise(f) < QUIET * float(np.median(np.abs(f)))
    if smoothing is None:
        smoothing = LEAST_SMOOTHING if quiet else SMOOTHING
    kernel = gaussian_kernel(x, dx, smoothing)
    smooth = kernel.apply(f)
    rows = kernel.apply(np.where(np.isfinite(of_band.density), of_band.density, f))
    widths = np.diff(of_band.phi_edges)
    background, spread = row_medians(x, dx, rows, widths, smooth, background_reach)
    sigma, pressure, absent = _gas(snapshot, r_edges)
    notes = (
        *_notes(snapshot, measured, of_band, bridged, band, kernel, background_reach),
        *absent,
    )
    profile = FluxProfile(
        r_edges,
        f,
        smooth,
        background,
        spread,
        of_midplane,
        sigma,
        pressure,
        h,
        snapshot.grid.period,
        kernel,
        quiet,
        bridged,
        notes,
    )
    return profile, of_band


def _ring_noise(f: Array) -> float:
    """Standard deviation of what differs from ring to ring, between the sheets.

    From the lower quartile of the second differences, as sheets make up to half of them large;
    common practice, no source.
    """
    if len(f) < 3:
        return np.inf
    quartile = float(np.percentile(np.abs(np.diff(f, 2)), 25))
    return quartile / (ndtri(0.625) * np.sqrt(6.0))


def _check_positive(**numbers: float) -> None:
    for name, value in numbers.items():
        if not (np.isfinite(value) and value > 0):
            raise FieldvizError(
                f"Cannot {WORK}: expected {name} to be a positive number of scale heights, got "
                f"{value}; leave it out for the usual one."
            )


def _up_to(radii: Array, r_edges: Array, per_ring: Array) -> Array:
    """Sum from the innermost edge up to each radius, even in r^2 within a ring."""
    cumulative = np.concatenate([[0.0], np.cumsum(per_ring)])
    return np.asarray(np.interp(np.square(radii), np.square(r_edges), cumulative))


def _gas(snapshot: Snapshot, r_edges: Array) -> tuple[Array | None, Array | None, tuple[str, ...]]:
    """Surface density and midplane pressure of each ring, or why there is none."""
    names = tuple(name for name in ("density", "pressure") if snapshot.has(name))
    reasons = {
        "density": "no depletion and no relation to the surface density: the snapshot has no "
        "density",
        "pressure": "no plasma beta: the snapshot has no pressure",
    }
    absent = tuple(reason for name, reason in reasons.items() if name not in names)
    if not names:
        return None, None, absent
    moments = azimuth_moments(snapshot, names)
    mesh = moments.mesh
    sigma = pressure = None
    if "density" in names:
        mass = np.nansum(moments.means["density"] * mesh.volumes, axis=0)
        cumulative = _up_to(r_edges, mesh.r_edges, mass)
        sigma = np.diff(cumulative) / (annulus_widths(r_edges) * mesh.period)
    if "pressure" in names:
        r = centres(mesh.profile_edges)
        pressure = np.interp(centres(r_edges), r, mesh.at_midplane(moments.means["pressure"]))
    return sigma, pressure, (*moments.notes, *absent)


def _notes(
    snapshot: Snapshot,
    measured: Thickness,
    of_band: FluxMap,
    bridged: Array,
    band: float,
    kernel: Kernel,
    background_reach: float,
) -> tuple[str, ...]:
    notes = [
        f"numbers are for the {snapshot.grid.azimuth_sentence}",
        f"B_z is the mean over {band:g} H either side of the midplane from "
        + ("face fluxes" if of_band.from_faces else "cell values, interpolated to faces")
        + f"; H/R = {measured.h:.4g} from {measured.source}",
        f"the background is the running median over {background_reach:g} H either side",
        kernel.note,
    ]
    if of_band.without_number:
        share = 100 * of_band.without_number / of_band.density.size
        notes.append(
            f"{of_band.without_number} patches of the midplane ({share:.3g} %) had no number and "
            f"were left out; {int(bridged.sum())} whole rings were bridged"
        )
    return tuple(notes)
