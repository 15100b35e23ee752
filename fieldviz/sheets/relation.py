"""How the vertical field and the surface density go together along radius."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import signal, stats

from fieldviz.sheets.flux_profile import FluxProfile
from fieldviz.sheets.running import running_median
from fieldviz.wedge.typing import Array

__all__ = ["FluxDensityRelation", "flux_density_relation", "surface_density_background"]

LAG_REACH = 2.0  # scale heights either way over which one series is shifted
_LEAST_RINGS = 8
_LEAST_INDEPENDENT = 3.0


@dataclass(frozen=True, eq=False)
class FluxDensityRelation:
    """Correlation of ln(B_z/B_bg) with ln(Sigma/Sigma_bg) over radius.

    Attributes
    ----------
    pearson, spearman : float
        Negative where flux sits in gaps.
    pearson_chance, spearman_chance : float
        Two-sided probability of so strong a correlation between unrelated series of `n_effective`
        values; NaN with fewer than 3.
    n_effective : float
        Range over twice the longer autocorrelation length.
    correlation_length : float
        The longer of the two e-folding lengths of the autocorrelation, scale heights.
    lags : (n,) array
        Shifts in scale heights; positive compares B_z with the surface density farther out.
    lagged : (n,) array
        Pearson's coefficient at each.
    best_lag : float
        Shift of the strongest correlation.
    share_used : float
        Share of the range, in ln r, with B_z of the background's sign and a positive density.
    notes : tuple of str
    """

    pearson: float
    spearman: float
    pearson_chance: float
    spearman_chance: float
    n_effective: float
    correlation_length: float
    lags: Array
    lagged: Array
    best_lag: float
    share_used: float
    notes: tuple[str, ...]


def surface_density_background(profile: FluxProfile, reach: float) -> Array:
    """Smooth background of the surface density.

    Parameters
    ----------
    profile : FluxProfile
        With a surface density.
    reach : float
        Half width of the running median, scale heights.

    Returns
    -------
    (n_r,) array
        Running median of Sigma r^p, over r^p; -p is the median slope of ln Sigma against ln r
        (Theil 1950, Sen 1968, from memory). NaN where Sigma is not positive.
    """
    assert profile.surface_density is not None
    sigma, r = profile.surface_density, profile.r
    good = sigma > 0
    if good.sum() < 2:
        return np.full(len(r), np.nan)
    # A thousand rings give half a million slopes; more rings are thinned.
    some = np.flatnonzero(good)[:: max(1, int(good.sum()) // 1000)]
    slope = float(stats.theilslopes(np.log(sigma[some]), np.log(r[some])).slope)
    dx = np.diff(np.log(profile.r_edges)) / profile.h
    flat = running_median(profile.x[good], dx[good], sigma[good] / r[good] ** slope, reach)
    background = np.full(len(r), np.nan)
    background[good] = flat * r[good] ** slope
    return background


def flux_density_relation(
    profile: FluxProfile, *, reach: float, lag_reach: float = LAG_REACH
) -> FluxDensityRelation | None:
    """Correlate ln(B_z/B_bg) with ln(Sigma/Sigma_bg) over the rings of a profile.

    Parameters
    ----------
    profile : FluxProfile
    reach : float
        Half width of the running medians, scale heights.
    lag_reach : float
        Largest shift, scale heights.

    Returns
    -------
    FluxDensityRelation or None
        None without a surface density, or with fewer than 8 rings that can be used.

    Notes
    -----
    Common practice, no source. B_z is not smoothed. Rings where B_z or its background vanish or
    differ in sign have no logarithm and are left out.
    """
    if profile.surface_density is None:
        return None
    dx = np.diff(np.log(profile.r_edges)) / profile.h
    with np.errstate(divide="ignore", invalid="ignore"):
        flux = profile.f / running_median(profile.x, dx, profile.f, reach)
        mass = profile.surface_density / surface_density_background(profile, reach)
        a, b = np.log(flux), np.log(mass)
    good = np.isfinite(a) & np.isfinite(b) & ~profile.bridged
    if good.sum() < _LEAST_RINGS or np.ptp(a[good]) == 0 or np.ptp(b[good]) == 0:
        return None
    even, a_even, b_even = _evenly(profile.x, a, b, good)
    step = float(even[1] - even[0])
    length = max(_correlation_length(v, step) for v in (a_even, b_even))
    n_effective = float(dx[good].sum() / (2 * length))
    pearson = float(np.corrcoef(a_even, b_even)[0, 1])
    spearman = float(stats.spearmanr(a_even, b_even).statistic)
    lags, lagged = _lag_scan(a_even, b_even, step, lag_reach)
    share = float(dx[good].sum() / dx.sum())
    return FluxDensityRelation(
        pearson,
        spearman,
        _chance(pearson, n_effective),
        _chance(spearman, n_effective),
        n_effective,
        length,
        lags,
        lagged,
        float(lags[np.nanargmax(np.abs(lagged))]),
        share,
        _notes(share, n_effective),
    )


def _evenly(x: Array, a: Array, b: Array, good: Array) -> tuple[Array, Array, Array]:
    """Both series at even steps in x, the finest there are; gaps are bridged linearly."""
    low, high = x[good][[0, -1]]
    count = max(_LEAST_RINGS, round((high - low) / float(np.diff(x).min())) + 1)
    even = np.linspace(low, high, count)
    return even, np.interp(even, x[good], a[good]), np.interp(even, x[good], b[good])


def _correlation_length(values: Array, step: float) -> float:
    """Lag at which the autocorrelation falls to 1/e, at least half a step."""
    centred = values - values.mean()
    n = len(centred)
    auto = signal.correlate(centred, centred)[n - 1 :] / float(centred @ centred)
    below = np.flatnonzero(auto <= np.exp(-1))
    if not below.size:
        return n * step
    i = int(below[0])
    part = (auto[i - 1] - np.exp(-1)) / (auto[i - 1] - auto[i])
    return float(max((i - 1 + part) * step, 0.5 * step))


def _lag_scan(a: Array, b: Array, step: float, reach: float) -> tuple[Array, Array]:
    most = min(int(reach / step), len(a) - _LEAST_RINGS)
    shifts = np.arange(-most, most + 1)
    found = []
    for shift in shifts:
        one = a[: len(a) - shift] if shift >= 0 else a[-shift:]
        other = b[shift:] if shift >= 0 else b[: len(b) + shift]
        flat = np.ptp(one) == 0 or np.ptp(other) == 0
        found.append(np.nan if flat else float(np.corrcoef(one, other)[0, 1]))
    return shifts * step, np.array(found)


def _chance(coefficient: float, n_effective: float) -> float:
    """Two-sided probability by Student's t with n_effective - 2 degrees of freedom."""
    if n_effective < _LEAST_INDEPENDENT:
        return float("nan")
    free = n_effective - 2
    rest = max(1 - coefficient**2, 1e-300)
    return float(2 * stats.t.sf(abs(coefficient) * np.sqrt(free / rest), free))


def _notes(share: float, n_effective: float) -> tuple[str, ...]:
    notes = [
        "the surface density is the column over the wedge's colatitudes; negative correlation is "
        "expected where flux sits in gaps"
    ]
    if share < 1:
        notes.append(
            f"{100 * (1 - share):.3g} % of the range was left out: no number, or B_z not of the "
            "background's sign"
        )
    if n_effective < _LEAST_INDEPENDENT:
        notes.append("no significance: fewer than 3 independent rings")
    return tuple(notes)
