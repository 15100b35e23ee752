"""Mass that falls in between the launching surfaces, by height, and the ejection index."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import MIDPLANE
from fieldviz.errors import FieldvizError
from fieldviz.wedge.typing import Array
from fieldviz.wind.column_places import SphereSums
from fieldviz.wind.launch_surfaces import LaunchSurface
from fieldviz.wind.meridional_fluxes import FluxTables
from fieldviz.wind.side_fluxes import Loss

__all__ = [
    "Accretion",
    "EjectionIndex",
    "accretion",
    "ejection_index",
    "global_index",
    "global_indices",
]

MIDPLANE_LAYER = 1.0  # H from the midplane that counts as midplane, not surface layer; our choice
LEAST_FACTOR = 2.0  # in radius, for the fit of the ejection index
BLOCKS = 8  # in ln r, for its error; our choice
NEGLIGIBLE = 1e-3  # of the larger side, below which a side counts as dead; our choice
_LEAST_PER_BLOCK = 2


@dataclass(frozen=True, eq=False)
class Accretion:
    """Mass that crosses spheres between the launching surfaces, inward positive; for the wedge.

    Attributes
    ----------
    r : (n,) array
        Radii of the spheres: the faces of the grid within the range asked for, and its ends.
    rate : (n,) array
        Mdot_acc; NaN with a reason where there is no surface or no number.
    midplane, upper_layer, lower_layer : (n,) arrays
        Its parts nearer the midplane than `midplane_height`, and above and below that.
    midplane_height : float
        In H.
    reason : str
    notes : tuple of str
    """

    r: Array
    rate: Array
    midplane: Array
    upper_layer: Array
    lower_layer: Array
    midplane_height: float
    reason: str
    notes: tuple[str, ...]

    @property
    def sentence(self) -> str:
        """In one sentence."""
        if self.reason:
            return f"accretion: none given, {self.reason}"
        shares = []
        for part in (self.midplane, self.upper_layer, self.lower_layer):
            total, size = np.nanmean(self.rate), np.nanmean(np.abs(self.rate))
            shares.append(np.nanmean(part) / total if size and abs(total) > 0 else np.nan)
        return (
            f"accretion {self.rate[0]:.4g} at r = {self.r[0]:.4g} and {self.rate[-1]:.4g} at r = "
            f"{self.r[-1]:.4g}, of its mean over r {100 * shares[0]:.1f} % within "
            f"{self.midplane_height:g} H of the midplane, {100 * shares[1]:.1f} % above and "
            f"{100 * shares[2]:.1f} % below that"
        )


def accretion(
    tables: FluxTables,
    surface: LaunchSurface,
    radii: Array,
    *,
    midplane_height: float = MIDPLANE_LAYER,
) -> Accretion:
    """Work out Mdot_acc(r), minus the integral of rho v_r dA_r between the launching surfaces.

    Parameters
    ----------
    tables : FluxTables
    surface : LaunchSurface
    radii : (n,) array
        Spheres within the grid. Between faces of the grid the rate is linear in r.
    midplane_height : float
        Height in H that parts the midplane from the surface layers; no part goes beyond a surface.

    Returns
    -------
    Accretion
    """
    notes: tuple[str, ...] = (f"midplane is |theta - pi/2| < {midplane_height:g} H/R, our choice",)
    if "mass" in tables.reasons:
        nothing = np.full(len(radii), np.nan)
        reason = tables.reasons["mass"]
        return Accretion(radii, nothing, nothing, nothing, nothing, midplane_height, reason, notes)
    sums = SphereSums.of_flux(tables.mesh, tables.radial["mass"])
    upper, lower = (side.on_edges for side in surface.sides)
    angle = midplane_height * surface.h
    top = np.maximum(upper, MIDPLANE - angle)
    bottom = np.minimum(lower, MIDPLANE + angle)
    limits = ((upper, lower), (top, bottom), (upper, top), (bottom, lower))
    edges = tables.mesh.r_edges
    parts = [np.interp(radii, edges, -sums.between(*pair)) for pair in limits]
    bad = ~np.isfinite(parts[0])
    reason = "no surface or no number anywhere" if bad.all() else ""
    if bad.any() and not bad.all():
        notes += (f"{np.count_nonzero(bad)} of {len(radii)} radii have no surface or no number",)
    return Accretion(radii, parts[0], parts[1], parts[2], parts[3], midplane_height, reason, notes)


@dataclass(frozen=True)
class EjectionIndex:
    """xi = d ln Mdot_acc/d ln r, fitted and global.

    Attributes
    ----------
    value, error : float
        Slope of least squares in ln r, and its error from leaving out blocks in ln r; NaN with a
        reason.
    upper, lower, total : float
        Global form ln(1 + Mdot_w/Mdot_acc(r_in))/ln(r_out/r_in) for the wind of each side and of
        both; NaN for a dead side.
    r_range : (float, float)
    reason : str
    notes : tuple of str
    """

    value: float
    error: float
    upper: float
    lower: float
    total: float
    r_range: tuple[float, float]
    reason: str
    notes: tuple[str, ...]

    @property
    def sentence(self) -> str:
        """In one sentence."""
        if self.reason:
            return f"ejection index undefined: {self.reason}"
        return (
            f"ejection index {self.value:.3g} ± {self.error:.2g} for r = {self.r_range[0]:.4g} to "
            f"{self.r_range[1]:.4g} (least squares), {self.total:.3g} from the wind of both sides "
            f"(upper alone {self.upper:.3g}, lower alone {self.lower:.3g})"
        )


def ejection_index(
    r: Array,
    rate: Array,
    *,
    r_range: tuple[float, float] | None = None,
    wind: Loss | None = None,
    blocks: int = BLOCKS,
) -> EjectionIndex:
    """Fit the ejection index of an accretion profile.

    Parameters
    ----------
    r, rate : (n,) arrays
        Radii, increasing, and Mdot_acc, inward positive.
    r_range : (float, float), optional
        Radii used; a factor of 2 at least.
    wind : Loss, optional
        Mass loss between these radii, for the global forms.
    blocks : int
        Blocks in ln r of which each is left out once for the error.

    Returns
    -------
    EjectionIndex
        NaN with a reason where Mdot_acc changes sign or is outward.

    Raises
    ------
    FieldvizError

    Notes
    -----
    Ferreira & Pelletier 1995; jackknife over blocks after Efron 1982, Kunsch 1989 (from memory).
    Every radius counts with the range of ln r it stands for.
    """
    if r.shape != rate.shape or r.ndim != 1 or len(r) < 2 or np.any(np.diff(r) <= 0):
        raise FieldvizError(
            "Cannot fit the ejection index: expected increasing radii and as many rates, got "
            f"shapes {r.shape} and {rate.shape}."
        )
    low, high = r_range or (float(r[0]), float(r[-1]))
    used = (r >= low) & (r <= high) & (r > 0)
    notes: list[str] = []
    if np.any(used & ~np.isfinite(rate)):
        notes.append(f"{np.count_nonzero(used & ~np.isfinite(rate))} radii without a number unused")
        used &= np.isfinite(rate)
    x, y = r[used], rate[used]
    sides = global_indices(x, y, wind)
    reason = _undefined(x, y, wind)
    span = (float(x[0]), float(x[-1])) if len(x) else (low, high)
    if reason:
        nothing = np.nan
        return EjectionIndex(
            nothing, nothing, nothing, nothing, nothing, span, reason, tuple(notes)
        )
    value, error = _fit(np.log(x), np.log(y), blocks)
    if np.isnan(error):
        notes.append(f"no error: fewer than {_LEAST_PER_BLOCK} radii to a block")
    else:
        notes.append(f"the error is the jackknife over {blocks} blocks even in ln r")
    return EjectionIndex(value, error, *sides, span, "", tuple(notes))


def _undefined(r: Array, rate: Array, wind: Loss | None) -> str:
    if len(r) < 2 or r[-1] < LEAST_FACTOR * r[0] * (1 - 1e-12):
        return f"it needs at least a factor {LEAST_FACTOR:g} in r with numbers"
    if rate.min() <= 0 <= rate.max():
        return "the accretion rate changes sign"
    if rate.max() < 0:
        return "mass moves outward between the surfaces"
    if wind is not None:
        size = np.nansum(
            [abs(part) for side in wind.sides for part in (side.positive, side.negative)]
        )
        if rate.max() < NEGLIGIBLE * size:
            return "there is no accretion to speak of beside the wind"
    return ""


def global_indices(r: Array, rate: Array, wind: Loss | None) -> tuple[float, float, float]:
    """Global forms for upper, lower and both sides; NaN for a dead side or without a wind."""
    if wind is None or len(r) < 2:
        return np.nan, np.nan, np.nan
    upper, lower = wind.upper.net, wind.lower.net
    largest = np.nanmax([abs(upper), abs(lower), 0.0])
    alive = [s if abs(s) > NEGLIGIBLE * largest else np.nan for s in (upper, lower)]
    span = (float(r[0]), float(r[-1]))
    found = [global_index(float(rate[0]), s, span) for s in (*alive, upper + lower)]
    return found[0], found[1], found[2]


def global_index(rate_in: float, loss: float, r_range: tuple[float, float]) -> float:
    """ln(1 + Mdot_w/Mdot_in)/ln(r_out/r_in); NaN where that has no meaning."""
    if not (rate_in > 0 and loss > -rate_in and 0 < r_range[0] < r_range[1]):
        return float("nan")
    return float(np.log1p(loss / rate_in) / np.log(r_range[1] / r_range[0]))


def _fit(x: Array, y: Array, blocks: int) -> tuple[float, float]:
    weight = np.gradient(x) if len(x) > 2 else np.ones(len(x))

    def slope(kept: Array) -> float:
        w, a, b = weight[kept], x[kept], y[kept]
        da, db = a - np.average(a, weights=w), b - np.average(b, weights=w)
        return float(np.sum(w * da * db) / np.sum(w * da * da))

    value = slope(np.ones(len(x), dtype=bool))
    edges = np.linspace(x[0], x[-1], blocks + 1)[1:-1]
    number = np.searchsorted(edges, x, side="right")
    if np.bincount(number, minlength=blocks).min() < _LEAST_PER_BLOCK:
        return value, float("nan")
    left_out = np.array([slope(number != n) for n in range(blocks)])
    variance = (blocks - 1) / blocks * np.sum((left_out - left_out.mean()) ** 2)
    return value, float(np.sqrt(variance))
