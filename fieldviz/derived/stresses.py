"""Stresses that carry angular momentum: Maxwell and Reynolds in the disc, and the wind's."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import MIDPLANE, AzimuthMoments, MeridionalMesh, azimuth_cells
from fieldviz.derived.local_thickness import LocalThickness, local_thickness
from fieldviz.derived.stress_tables import stress_absences, stress_averages, stress_parts
from fieldviz.errors import FieldvizError
from fieldviz.wedge.geometry import annulus_widths, centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["BandStress", "Stresses", "WindStress", "stresses"]

ALPHA_CONVENTION = (
    "alpha is T_rphi = alpha P (Shakura & Sunyaev 1973); written as nu = alpha c_s H the same "
    "stress is T = 1.5 alpha P, so that alpha is 2/3 of this one"
)
_SHARE_OF_RANGE = 0.9
_ROTATIONS = ("mean", "kepler")


@dataclass(frozen=True, eq=False)
class BandStress:
    """T_rphi averaged over |theta - pi/2| < n H/R, profiles (n,) in code pressure; or None.

    Attributes
    ----------
    maxwell_mean : array or None
        -<B_r><B_phi>/mu0, of the azimuthal means.
    maxwell_turbulent : array or None
        -<dB_r dB_phi>/mu0, of the deviations from them.
    reynolds : array or None
        <rho v_r dv_phi>.
    pressure : array or None
        What alpha is taken relative to: mean of the band, or of the midplane.
    """

    maxwell_mean: Array | None
    maxwell_turbulent: Array | None
    reynolds: Array | None
    pressure: Array | None

    @property
    def maxwell(self) -> Array | None:
        """-<B_r B_phi>/mu0: both parts; with one azimuth cell the first is all of it."""
        if self.maxwell_mean is None or self.maxwell_turbulent is None:
            return self.maxwell_mean
        return np.asarray(self.maxwell_mean + self.maxwell_turbulent)

    @property
    def alpha_maxwell(self) -> Array | None:
        """Maxwell stress over pressure."""
        return _over(self.maxwell, self.pressure)

    @property
    def alpha_reynolds(self) -> Array | None:
        """Reynolds stress over pressure."""
        return _over(self.reynolds, self.pressure)

    @property
    def alpha(self) -> Array | None:
        """Sum of both over pressure; None where either is missing."""
        if self.alpha_maxwell is None or self.alpha_reynolds is None:
            return None
        return np.asarray(self.alpha_maxwell + self.alpha_reynolds)


@dataclass(frozen=True, eq=False)
class WindStress:
    """Stress of one side's cone, positive where angular momentum leaves the disc.

    Profiles (n,) in code pressure; -T_thetaphi above and +T_thetaphi below the midplane.

    Attributes
    ----------
    side : str
        "upper" or "lower".
    theta : float
        Colatitude of the cone.
    reynolds, maxwell_mean, maxwell_turbulent : array or None
    extracting : float or None
        Share of the cone's area, in radius, where the field takes angular momentum from the disc:
        B_z B_phi < 0 above, > 0 below.
    """

    side: str
    theta: float
    reynolds: Array | None
    maxwell_mean: Array | None
    maxwell_turbulent: Array | None
    extracting: float | None

    @property
    def maxwell(self) -> Array | None:
        """Both magnetic parts."""
        if self.maxwell_mean is None or self.maxwell_turbulent is None:
            return self.maxwell_mean
        return np.asarray(self.maxwell_mean + self.maxwell_turbulent)

    @property
    def total(self) -> Array | None:
        """Reynolds and Maxwell; None where either is missing."""
        if self.maxwell is None or self.reynolds is None:
            return None
        return np.asarray(self.maxwell + self.reynolds)


@dataclass(frozen=True, eq=False)
class Stresses:
    """Stresses of one snapshot; profiles (n,) on the cells at the midplane.

    Attributes
    ----------
    r_edges : (n + 1,) array
    r : (n,) array
        Code length.
    band : BandStress
        T_rphi near the midplane.
    alpha, alpha_maxwell, alpha_reynolds : float or None
        int T dV/int P dV over all radii.
    wind : tuple of WindStress
        Upper and lower; empty where the wedge holds no midplane.
    midplane_pressure : (n,) array or None
    alpha_wind : tuple of (n,) array or None
        |T|/<P_mid> for each side of `wind`.
    height : float or None
        Half height of the band in H; None for all heights.
    sentence : str
    notes : tuple of str
    """

    r_edges: Array
    r: Array
    band: BandStress
    alpha: float | None
    alpha_maxwell: float | None
    alpha_reynolds: float | None
    wind: tuple[WindStress, ...]
    midplane_pressure: Array | None
    alpha_wind: tuple[Array | None, ...]
    height: float | None
    sentence: str
    notes: tuple[str, ...]


def stresses(
    snapshot: Snapshot,
    *,
    height: float | None = 2.0,
    cone_height: float = 4.0,
    rotation: str = "mean",
    relative_to: str = "band",
    thickness: float | None = None,
    density_floor: float | None = None,
) -> Stresses:
    """Work out what carries angular momentum.

    Parameters
    ----------
    snapshot : Snapshot
        Needs `density`; the velocity for Reynolds, the field for Maxwell, pressure for alpha.
    height : float or None
        Half height of the band in H; None for all heights.
    cone_height : float
        Height of the wind's cones in the median H, clipped to the grid.
    rotation : str
        v_phi is taken relative to its mass-weighted azimuthal "mean" or to the "kepler" speed
        sqrt(GM/R).
    relative_to : str
        alpha relative to the mean pressure of the "band" or to that of the "midplane".
    thickness : float, optional
        H/R everywhere; from the midplane sound speed at each radius by default.
    density_floor : float, optional
        Cells with a density up to 1.01 times this are left out.

    Returns
    -------
    Stresses

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    Balbus & Hawley 1998 (from memory). <v_r> drops out of <rho v_r dv_phi> with the mean rotation.
    With one cell in azimuth there are no deviations: those parts are None, not zero.
    """
    _check(height, cone_height, rotation, relative_to)
    moments = stress_averages(snapshot, density_floor)
    mesh = moments.mesh
    scale = local_thickness(snapshot, moments, thickness)
    angle = MIDPLANE if height is None else height * scale.columns
    shares = mesh.band_share(angle) * mesh.volumes
    turbulent = azimuth_cells(snapshot.grid) > 1
    parts = {
        c: stress_parts(snapshot, moments, c, rotation == "kepler", turbulent)
        for c in ("r", "theta")
    }
    pressure = moments.means.get("pressure")
    middle = None
    if pressure is not None and mesh.holds_midplane:
        middle = mesh.at_midplane(pressure)
    means = [_band_mean(mesh, table, shares) for table in parts["r"]]
    base = middle if relative_to == "midplane" else _band_mean(mesh, pressure, shares)
    band = BandStress(means[0], means[1], means[2], base)
    volume = mesh.summed(shares.sum(0))
    cones = _cones(mesh, parts["theta"], cone_height * scale.median)
    alphas = [_total(f, base, volume) for f in (band.maxwell, band.reynolds)]
    alpha = None if alphas[0] is None or alphas[1] is None else alphas[0] + alphas[1]
    winds = tuple(None if (t := _over(c.total, middle)) is None else np.abs(t) for c in cones)
    notes = _notes(snapshot, moments, scale, height, cone_height, cones, rotation, relative_to)
    notes += stress_absences(snapshot, turbulent, rotation, mesh)
    return Stresses(
        mesh.profile_edges,
        centres(mesh.profile_edges),
        band,
        alpha,
        alphas[0],
        alphas[1],
        cones,
        middle,
        winds,
        height,
        _sentence(alpha, alphas, height),
        notes,
    )


def _check(height: float | None, cone_height: float, rotation: str, relative_to: str) -> None:
    for name, value in (("height", height), ("cone_height", cone_height)):
        if value is not None and not 0 < value < np.inf:
            raise FieldvizError(
                f"Cannot work out stresses: expected {name} in H to be positive, got {value}."
            )
    if rotation not in _ROTATIONS:
        raise FieldvizError(
            f"Cannot work out stresses: expected rotation to be one of {', '.join(_ROTATIONS)}, "
            f"got '{rotation}'."
        )
    if relative_to not in ("band", "midplane"):
        raise FieldvizError(
            f"Cannot work out stresses: expected relative_to to be band or midplane, "
            f"got '{relative_to}'."
        )


def _band_mean(mesh: MeridionalMesh, table: Array | None, shares: Array) -> Array | None:
    if table is None:
        return None
    # A ring without numbers outside the band must not spoil the band.
    part = np.where(shares > 0, table, 0.0) * shares
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(mesh.summed(part.sum(0)) / mesh.summed(shares.sum(0)))


def _over(stress: Array | None, pressure: Array | None) -> Array | None:
    if stress is None or pressure is None:
        return None
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(stress / pressure)


def _total(stress: Array | None, pressure: Array | None, volume: Array) -> float | None:
    """Ratio of the integrals over all radii that have both."""
    if stress is None or pressure is None:
        return None
    good = np.isfinite(stress) & np.isfinite(pressure) & np.isfinite(volume)
    below = float(np.sum(pressure * volume, where=good))
    return float(np.sum(stress * volume, where=good)) / below if below > 0 else float("nan")


def _cones(
    mesh: MeridionalMesh, parts: tuple[Array | None, Array | None, Array | None], angle: float
) -> tuple[WindStress, ...]:
    """Stress on the cones at `angle` from the midplane, positive outward on both sides."""
    if not mesh.holds_midplane:
        return ()
    cones = []
    for side, sign, wall in (("upper", -1.0, 0), ("lower", 1.0, -1)):
        reach = abs(mesh.theta_edges[wall] - MIDPLANE)
        theta = MIDPLANE + sign * min(angle, _SHARE_OF_RANGE * reach)
        mean, fluctuating, reynolds = (
            None if t is None else sign * mesh.averaged(mesh.at_theta(t, theta)) for t in parts
        )
        cone = WindStress(side, float(theta), reynolds, mean, fluctuating, None)
        if (maxwell := cone.maxwell) is not None:
            area = annulus_widths(mesh.profile_edges)
            share = float(area[maxwell > 0].sum() / area.sum())
            cone = WindStress(side, float(theta), reynolds, mean, fluctuating, share)
        cones.append(cone)
    return tuple(cones)


def _notes(
    snapshot: Snapshot,
    moments: AzimuthMoments,
    scale: LocalThickness,
    height: float | None,
    cone_height: float,
    cones: tuple[WindStress, ...],
    rotation: str,
    relative_to: str,
) -> tuple[str, ...]:
    band = "all heights" if height is None else f"|theta - pi/2| < {height:g} H/R"
    against = "its mean <v_phi>_rho along azimuth" if rotation == "mean" else "sqrt(GM/R)"
    notes = [
        f"numbers are for the {snapshot.grid.azimuth_sentence}",
        ALPHA_CONVENTION,
        f"band: {band}, H/R = {scale.median:.4g} (median) from the {scale.source}; alpha is int T "
        f"dV over int P dV with the pressure of the {relative_to}",
        f"the Reynolds stress takes v_phi relative to {against}; one snapshot, no time average",
        *moments.notes,
    ]
    if cones:
        notes.append(
            "wind stress on the cones "
            + " and ".join(f"theta = {cone.theta:.5g} ({cone.side})" for cone in cones)
            + ", positive where angular momentum leaves the disc (Spruit 1996, from memory); "
            "alpha_wind = |T|/<P_mid>"
        )
        for cone in cones:
            if abs(cone.theta - MIDPLANE) < cone_height * scale.median * (1 - 1e-12):
                notes.append(f"the {cone.side} cone was clipped to the grid")
    return tuple(notes)


def _sentence(alpha: float | None, parts: list[float | None], height: float | None) -> str:
    where = "at all heights" if height is None else f"within {height:g} H"
    words = [
        f"{name} {value:.3g}"
        for name, value in zip(("Maxwell", "Reynolds"), parts, strict=True)
        if value is not None
    ]
    if not words:
        return "no alpha: pressure, or both field and velocity, are missing"
    total = "" if alpha is None else f" = {alpha:.3g}"
    return f"alpha{total} {where} ({', '.join(words)}), T = alpha P"
