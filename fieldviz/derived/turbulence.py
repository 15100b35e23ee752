"""Turbulent speeds over the sound speed, against height in H."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import AzimuthMoments, azimuth_cells, azimuth_moments
from fieldviz.derived.local_thickness import LocalThickness, local_thickness
from fieldviz.errors import FieldvizError
from fieldviz.wedge.fields import VELOCITY
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["ONE_SNAPSHOT", "Turbulence", "turbulence"]

ONE_SNAPSHOT = (
    "one snapshot: deviations are from the mean along azimuth only, so that motion that is the "
    "same at all azimuths (m = 0) is missed, and a spiral or a vortex counts as turbulence"
)


@dataclass(frozen=True, eq=False)
class Turbulence:
    """Turbulent speeds; a component is None where it cannot be had, and `notes` says why.

    Attributes
    ----------
    r_edges, theta_edges : (n_r + 1,), (n_theta + 1,) arrays
        Mesh of the tables: the finest edges of all blocks.
    sigma_r, sigma_theta, sigma_phi : (n_theta, n_r) arrays or None
        sqrt(<(v_i - <v_i>_rho)^2>_rho) along azimuth, over the sound speed.
    sound_speed : (n_theta, n_r) array or None
        sqrt(<P>/<rho>), code velocity.
    height : (n_theta, n_r) array
        z/H of the cells, positive above the midplane.
    height_edges : (n_bins + 1,) array
        Bins of z/H for the profiles.
    profile_r, profile_theta, profile_phi : (n_bins,) arrays or None
        The same over the band of radii, squares weighted by mass; NaN in empty bins.
    r_band : (float, float)
    sentence : str
    notes : tuple of str
    """

    r_edges: Array
    theta_edges: Array
    sigma_r: Array | None
    sigma_theta: Array | None
    sigma_phi: Array | None
    sound_speed: Array | None
    height: Array
    height_edges: Array
    profile_r: Array | None
    profile_theta: Array | None
    profile_phi: Array | None
    r_band: tuple[float, float]
    sentence: str
    notes: tuple[str, ...]

    @property
    def heights(self) -> Array:
        """Middles of the bins of z/H."""
        return centres(self.height_edges)


def turbulence(
    snapshot: Snapshot,
    *,
    r_band: tuple[float, float] | None = None,
    height_step: float = 0.5,
    thickness: float | None = None,
    density_floor: float | None = None,
) -> Turbulence:
    """Work out turbulent speeds in units of the sound speed.

    Parameters
    ----------
    snapshot : Snapshot
        Needs `density`, `pressure` and at least one component of the velocity.
    r_band : (float, float), optional
        Radii of the profiles; the whole wedge by default. Columns count by their middles.
    height_step : float
        Width of the bins in H.
    thickness : float, optional
        H/R everywhere; from the midplane sound speed at each radius by default.
    density_floor : float, optional
        Cells with a density up to 1.01 times this are left out.

    Returns
    -------
    Turbulence

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    Common practice, no source. A profile is sqrt(sum M sigma_v^2 / sum M c_s^2) over a bin.
    """
    snapshot.require("work out turbulent speeds", "density")
    low, high = _band(snapshot, r_band)
    if not 0 < height_step < np.inf:
        raise FieldvizError(
            "Cannot work out turbulent speeds: expected height_step to be positive, "
            f"got {height_step}."
        )
    moving = tuple(name for name in VELOCITY if snapshot.has(name))
    volume = ["density", *(["pressure"] if snapshot.has("pressure") else [])]
    moments = azimuth_moments(
        snapshot,
        volume,
        moving,
        mass_pairs=[(name, name) for name in moving],
        density_floor=density_floor,
    )
    mesh = moments.mesh
    scale = local_thickness(snapshot, moments, thickness)
    height = np.cos(mesh.theta)[:, None] / scale.columns
    sound = _sound_speed(moments)
    used = (mesh.r >= low) & (mesh.r <= high)
    edges = _height_edges(height[:, used], height_step)
    mass = moments.means["density"] * mesh.volumes
    tables: dict[str, Array | None] = dict.fromkeys(VELOCITY)
    profiles: dict[str, Array | None] = dict.fromkeys(VELOCITY)
    if sound is not None and azimuth_cells(snapshot.grid) > 1:
        for name in moving:
            square = moments.mass_covariances[name, name]
            with np.errstate(invalid="ignore", divide="ignore"):
                tables[name] = np.sqrt(square) / sound
            profiles[name] = _profile(
                mass[:, used], square[:, used], sound[:, used], height[:, used], edges
            )
    return Turbulence(
        mesh.r_edges,
        mesh.theta_edges,
        tables["velocity_r"],
        tables["velocity_theta"],
        tables["velocity_phi"],
        sound,
        height,
        edges,
        profiles["velocity_r"],
        profiles["velocity_theta"],
        profiles["velocity_phi"],
        (low, high),
        _sentence(edges, list(profiles.values())),
        _notes(snapshot, moments, scale, (low, high)),
    )


def _band(snapshot: Snapshot, r_band: tuple[float, float] | None) -> tuple[float, float]:
    inner, outer = snapshot.grid.r_range
    low, high = r_band or (inner, outer)
    if not inner <= low < high <= outer:
        raise FieldvizError(
            f"Cannot use these radii: expected a range within {inner:.6g} to {outer:.6g}, "
            f"got {low:.6g} to {high:.6g}."
        )
    return float(low), float(high)


def _sound_speed(moments: AzimuthMoments) -> Array | None:
    if "pressure" not in moments.means:
        return None
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(np.sqrt(moments.means["pressure"] / moments.means["density"]))


def _height_edges(height: Array, step: float) -> Array:
    """Bins that are symmetric about z = 0."""
    known = np.abs(height[np.isfinite(height)])
    count = int(np.ceil(known.max() / step)) if known.size else 1
    return step * np.arange(-max(count, 1), max(count, 1) + 1)


def _profile(mass: Array, square: Array, sound: Array, height: Array, edges: Array) -> Array:
    good = np.isfinite(mass) & np.isfinite(square) & np.isfinite(sound) & np.isfinite(height)
    # Not a weighted histogram: NumPy's sums up all bins first, and thin air loses its digits.
    place = np.searchsorted(edges, height[good], side="right") - 1
    place = np.clip(place, 0, len(edges) - 2)
    sums = [
        np.bincount(place, weights=(mass * values)[good], minlength=len(edges) - 1)
        for values in (square, sound**2)
    ]
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(np.sqrt(sums[0] / sums[1]))


def _notes(
    snapshot: Snapshot,
    moments: AzimuthMoments,
    scale: LocalThickness,
    band: tuple[float, float],
) -> tuple[str, ...]:
    notes = [
        f"r = {band[0]:.4g} to {band[1]:.4g}, time {snapshot.time:.6g}, "
        f"{snapshot.grid.azimuth_sentence}",
        ONE_SNAPSHOT,
        f"H/R = {scale.median:.4g} (median) from the {scale.source}; c_s = sqrt(P/rho) in place",
        *moments.notes,
    ]
    if azimuth_cells(snapshot.grid) == 1:
        notes.append("no turbulent speeds: one cell in azimuth has no deviation from its mean")
    if not snapshot.has("pressure"):
        notes.append("no turbulent speeds over the sound speed: there is no pressure")
    missing = [name for name in VELOCITY if not snapshot.has(name)]
    if missing:
        notes.append(f"no turbulent speeds of {', '.join(missing)}: no such field")
    return tuple(notes)


def _sentence(edges: Array, profiles: list[Array | None]) -> str:
    near = np.abs(centres(edges)) == np.abs(centres(edges)).min()
    words = [
        f"sigma_{name} {np.sqrt(np.mean(profile[near] ** 2)):.3g} c_s"
        for name, profile in zip(("r", "theta", "phi"), profiles, strict=True)
        if profile is not None
    ]
    if not words:
        return "no turbulent speeds: see the notes"
    reach = np.abs(edges[:-1][near]).max()
    return f"within {reach:.3g} H of the midplane {', '.join(words)}; {ONE_SNAPSHOT.split(':')[0]}"
