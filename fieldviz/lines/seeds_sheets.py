"""Seeds along flux sheets: on the ridge of each, across its width by flux."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.lines.seeds_common import (
    SeedPlan,
    checked_count,
    checked_thickness,
    number_notes,
    quantile,
    shared_out,
    unit_points,
)
from fieldviz.lines.seeds_surface import ConeTable, checked_theta, magnetic_on_cone
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["HasRadius", "sheet_plan", "sheet_seeds"]

_MIDPLANE = 0.5 * np.pi
_WORK = "place seeds along sheets"
_REACH = 1.0  # scale heights either side in which the ridge is looked for
_SURROUNDINGS = 3.0  # scale heights either side over which the background is the median
_STEPS = 601  # points of the mean profile across a sheet


class HasRadius(Protocol):
    """A sheet as found: anything with a `radius`."""

    @property
    def radius(self) -> float:
        """Radius on the midplane."""


@dataclass(frozen=True, eq=False)
class _Ridge:
    """A sheet's ridge and width: `radius` (n_phi,), `inward` and `outward` half widths."""

    radius: Array
    inward: float
    outward: float
    without_maximum: int


def sheet_seeds(
    snapshot: Snapshot,
    sheets: Sequence[float | HasRadius],
    count: int,
    *,
    thickness: float | None = None,
    scatter_seed: int | None = None,
) -> Array:
    """Seeds along the ridges of flux sheets on the midplane.

    Parameters
    ----------
    snapshot : Snapshot
        With `magnetic_theta`; `density` and perhaps `pressure` unless `thickness` is given.
    sheets : sequence of float or of objects with a `radius`
        Where the sheets are, to within one scale height.
    count : int
        Number of lines on all sheets together, 1 to 10 million.
    thickness : float, optional
        H/R; worked out from the snapshot by default.
    scatter_seed : int, optional
        Low-discrepancy points shifted by this seed instead of strata midpoints.

    Returns
    -------
    (count, 3) float64 array
        r, theta, phi: sheet after sheet in the given order, each in the order of phi.

    Raises
    ------
    MissingFieldError, FieldvizError

    See Also
    --------
    sheet_plan : the same with the sheet and the flux of each line.

    Notes
    -----
    Ridge R(phi): the largest |B_z| r of each azimuth within 1 H of the sheet's radius, not beyond
    half way to the next sheet, refined by a parabola through three points. An azimuth without a
    maximum inside takes R between its neighbours. Width: the profile of |B_z| r about the ridge,
    averaged over azimuth, half way between its peak and its median over 3 H on either side. Sheets
    share the lines by the unsigned flux within that width; along the ridge and across the width
    they are at flux quantiles. Common practice, no source.
    """
    return sheet_plan(
        snapshot, sheets, count, thickness=thickness, scatter_seed=scatter_seed
    ).points


def sheet_plan(
    snapshot: Snapshot,
    sheets: Sequence[float | HasRadius],
    count: int,
    *,
    thickness: float | None = None,
    scatter_seed: int | None = None,
) -> SeedPlan:
    """Seeds of sheets with the sheet of each line; parameters as of `sheet_seeds`.

    Returns
    -------
    SeedPlan
        `group` is the sheet's place in `sheets`; `amount` is the unsigned flux within the sheet's
        width over its number of lines, `net` the upward flux within all widths, for the wedge.

    Raises
    ------
    MissingFieldError, FieldvizError
    """
    count = checked_count(_WORK, count)
    radii = _radii(snapshot, sheets)
    checked_theta(_WORK, snapshot.grid, _MIDPLANE)
    table = magnetic_on_cone(snapshot, _MIDPLANE, snapshot.grid.r_range, _WORK)
    if not table.density.any():
        raise FieldvizError(
            f"Cannot {_WORK}: expected a magnetic flux through the midplane, got zero or no number "
            "on every cell; choose another snapshot."
        )
    h = checked_thickness(_WORK, snapshot, thickness)
    ridges = [_ridge(table, radii, number, h) for number in range(len(radii))]
    fluxes = [_band_fluxes(table, ridge, np.abs(table.density)) for ridge in ridges]
    net = -sum(float(_band_fluxes(table, ridge, table.density).sum()) for ridge in ridges)
    per_sheet = np.array([flux.sum() for flux in fluxes])
    counts = shared_out(count, per_sheet)
    points = [
        _along(table, ridge, flux, unit_points(_WORK, int(n), scatter_seed, stream))
        for stream, (ridge, flux, n) in enumerate(zip(ridges, fluxes, counts, strict=True))
        if n
    ]
    group = np.repeat(np.arange(len(radii)), counts)
    per_line = np.divide(per_sheet, counts, out=np.zeros(len(radii)), where=counts > 0)
    return SeedPlan(
        np.concatenate(points),
        per_line[group],
        group,
        float(per_sheet.sum()),
        net,
        f"unsigned magnetic flux within the sheets' widths, code units, "
        f"{snapshot.grid.azimuth_sentence}",
        (*_ridge_notes(radii, ridges), *number_notes(table)),
    )


def _radii(snapshot: Snapshot, sheets: Sequence[float | HasRadius]) -> Array:
    low, high = snapshot.grid.r_range
    try:
        radii = np.array([float(getattr(sheet, "radius", sheet)) for sheet in sheets])  # type: ignore[arg-type]
    except (TypeError, ValueError):
        radii = np.array([np.nan])
    if not radii.size or not ((radii > low) & (radii < high)).all():
        raise FieldvizError(
            f"Cannot {_WORK}: expected at least one sheet, each a radius or an object with one, "
            f"within the wedge's {low:.6g} to {high:.6g}, got {sheets!r}; leave out the others."
        )
    return radii


def _ridge(table: ConeTable, radii: Array, number: int, h: float) -> _Ridge:
    radius, r = float(radii[number]), centres(table.r_edges)
    profile = np.abs(table.density) * r
    low, high = radius * (1 - _REACH * h), radius * (1 + _REACH * h)
    for other in radii[radii < radius]:
        low = max(low, 0.5 * (radius + other))
    for other in radii[radii > radius]:
        high = min(high, 0.5 * (radius + other))
    found = _maxima(r, profile, low, high)
    missing = int(np.isnan(found).sum())
    where = _filled_round(table, found, radius)
    return _Ridge(where, *_half_widths(table, profile, where, radius * h), missing)


def _maxima(r: Array, profile: Array, low: float, high: float) -> Array:
    """Radius of the largest value of each azimuth between two radii; NaN if it is no maximum."""
    first, last = (int(n) for n in np.searchsorted(r, (low, high)))
    found = np.full(len(profile), np.nan)
    if last <= first:
        return found
    i = first + np.argmax(profile[:, first:last], axis=1)
    k = np.flatnonzero((i > 0) & (i < len(r) - 1))
    i = i[k]
    before, peak, after = (profile[k, i + step] for step in (-1, 0, 1))
    good = (peak >= before) & (peak >= after) & (peak > 0)
    left, right = r[i] - r[i - 1], r[i + 1] - r[i]
    fall, rise = (peak - before) / left, (after - peak) / right
    bend = np.where(fall > rise, fall - rise, 1.0)
    # Zero of the parabola's slope, which is fall at -left/2 and rise at right/2.
    vertex = r[i] - 0.5 * left + 0.5 * (left + right) * fall / bend
    inside = np.clip(vertex, r[i] - left, r[i] + right)
    found[k] = np.where(good, np.where(fall > rise, inside, r[i]), np.nan)
    return found


def _filled_round(table: ConeTable, found: Array, radius: float) -> Array:
    """Gaps of a ridge filled from either side, round the wedge."""
    known = np.isfinite(found)
    if not known.any():
        return np.full(len(found), radius)
    phi, period = centres(table.phi_edges), table.phi_edges[-1] - table.phi_edges[0]
    return np.interp(phi, phi[known], found[known], period=period)


def _half_widths(
    table: ConeTable, profile: Array, ridge: Array, scale_height: float
) -> tuple[float, float]:
    """Inward and outward distance at which the mean profile about the ridge is half way down."""
    r = centres(table.r_edges)
    x = np.linspace(-_SURROUNDINGS, _SURROUNDINGS, _STEPS) * scale_height
    rows = [np.interp(R + x, r, row, np.nan, np.nan) for R, row in zip(ridge, profile, strict=True)]
    widths = np.diff(table.phi_edges)[:, None] * np.isfinite(rows)
    total = widths.sum(0)
    known = total > 0
    mean = np.sum(widths * np.nan_to_num(rows), axis=0)[known] / total[known]
    x = x[known]
    middle = int(np.argmin(np.abs(x)))
    half = 0.5 * (mean[middle] + np.median(mean))
    limit = _REACH * scale_height
    inward = _crossing(-x[middle::-1], mean[middle::-1], half, limit)
    return inward, _crossing(x[middle:], mean[middle:], half, limit)


def _crossing(x: Array, values: Array, level: float, limit: float) -> float:
    """First place at which values fall below a level, by linear interpolation; at most `limit`."""
    below = np.flatnonzero(values <= level)
    if not below.size or below[0] == 0:
        return limit
    i = int(below[0])
    part = (values[i - 1] - level) / (values[i - 1] - values[i])
    return float(min(x[i - 1] + part * (x[i] - x[i - 1]), limit))


def _shares(table: ConeTable, low: float, high: float) -> Array:
    """Share of every ring of patches, by area, that lies between two radii."""
    squares = np.square(table.r_edges)
    cut = np.clip(squares, low * low, high * high)
    return np.asarray(np.diff(cut) / np.diff(squares))


def _band_fluxes(table: ConeTable, ridge: _Ridge, density: Array) -> Array:
    """Flux of every azimuth within the sheet's width, (n_phi,)."""
    flux = density * table.areas
    return np.array(
        [
            row @ _shares(table, R - ridge.inward, R + ridge.outward)
            for R, row in zip(ridge.radius, flux, strict=True)
        ]
    )


def _along(table: ConeTable, ridge: _Ridge, fluxes: Array, unit: tuple[Array, Array]) -> Array:
    """Points of one sheet: phi by the flux along the ridge, then r by the flux across it."""
    u, v = unit
    azimuth, phi = quantile(table.phi_edges, fluxes, u)
    offset = np.empty(len(u))
    for k in np.unique(azimuth):
        some, R = azimuth == k, ridge.radius[k]
        shares = _shares(table, R - ridge.inward, R + ridge.outward)
        edges = np.clip(table.r_edges, R - ridge.inward, R + ridge.outward)
        weight = np.abs(table.density[k]) * table.areas[k] * shares
        offset[some] = np.sqrt(quantile(np.square(edges), weight, v[some])[1]) - R
    period = table.phi_edges[-1] - table.phi_edges[0]
    # Between azimuths the ridge is followed, not climbed in steps.
    R = np.interp(phi, centres(table.phi_edges), ridge.radius, period=period)
    r = np.clip(R + offset, table.r_edges[0], table.r_edges[-1])
    return np.stack([r, np.full(len(r), table.theta), phi], axis=1)


def _ridge_notes(radii: Array, ridges: list[_Ridge]) -> tuple[str, ...]:
    return tuple(
        f"sheet at {radius:.4g}: {ridge.without_maximum} of {len(ridge.radius)} azimuths have no "
        "maximum near it"
        for radius, ridge in zip(radii, ridges, strict=True)
        if ridge.without_maximum
    )
