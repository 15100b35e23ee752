"""Flux sheets of a snapshot: where vertical flux gathers near the midplane."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import numpy as np

from fieldviz.sheets.criteria import (
    ABSOLUTE,
    CONTRAST,
    COVERAGE,
    RISE,
    SheetCriteria,
)
from fieldviz.sheets.flux_map import MIDPLANE, FluxMap, flux_maps
from fieldviz.sheets.flux_profile import (
    BACKGROUND_REACH,
    BAND,
    FluxProfile,
    flux_profile,
)
from fieldviz.sheets.measure import (
    HEIGHTS,
    Candidate,
    Extent,
    Lean,
    candidate_along,
    profile_peaks,
    sheet_extent,
    sheet_lean,
)
from fieldviz.sheets.relation import (
    FluxDensityRelation,
    flux_density_relation,
    surface_density_background,
)
from fieldviz.sheets.ridges import LEAST_AZIMUTHS, find_ridges, uniform_ridge
from fieldviz.sheets.sheet_records import FluxSheet, FluxSheets
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["FluxSheet", "FluxSheets", "find_flux_sheets"]

_CELLS_PER_WIDTH = 6.0  # with fewer cells across its FWHM a sheet's width is not resolved
_LEAST_PATCH = 0.1  # share of the azimuth below which a piece of a ridge is not reported
_SAME_SHEET = 0.3  # scale heights: what is nearer to a ridge than this belongs to it
_NO_NET_FLUX = 1e-3  # of the unsigned flux; shares of less are not given


def find_flux_sheets(
    snapshot: Snapshot,
    *,
    thickness: float | None = None,
    r_range: tuple[float, float] | None = None,
    band: float = BAND,
    smoothing: float | None = None,
    background_reach: float = BACKGROUND_REACH,
    contrast: float = CONTRAST,
    prominence: float | None = None,
    rise: float = RISE,
    absolute: float = ABSOLUTE,
    coverage: float = COVERAGE,
    lean: bool = True,
) -> FluxSheets:
    """Find the flux sheets of a snapshot and measure them.

    Parameters
    ----------
    snapshot : Snapshot
        Needs `magnetic_theta`; `density` unless `thickness` is given; `pressure` for beta_z.
    thickness : float, optional
        H/R; worked out from the snapshot by default.
    r_range : (float, float), optional
        Radii to search; leave out what a boundary treatment damps. The whole wedge by default.
    band : float
        Half thickness of the band about the midplane, scale heights.
    smoothing : float, optional
        Standard deviation of the smoothing of the profile, scale heights; by default what its noise
        asks for, see `flux_profile`.
    background_reach : float
        Half width of the running median, scale heights.
    contrast, prominence, rise, absolute, coverage : float, optional
        Thresholds; see `SheetCriteria`.
    lean : bool
        Whether to follow the sheets to 1 H above and below the midplane.

    Returns
    -------
    FluxSheets

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    Maxima of r <B_z> against x = ln r / h over a running median (its spread is 1.4826 times the
    median deviation: Huber & Ronchetti 2009, from memory). With 4 cells or more in azimuth the mean
    is taken along each ridge R(phi) of the map (`find_ridges`), so that a sheet that bends with
    azimuth is one sheet of its own width. Else common practice, no source.

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.sheets.flux_sheets import find_flux_sheets
    >>> [round(s.radius, 1) for s in find_flux_sheets(fv.demo_disc(shape=(1, 96, 160)))]
    [1.4, 1.9, 2.2, 3.0, 4.2]
    """
    criteria = SheetCriteria(contrast, prominence, rise, absolute, coverage)
    profile, of_band = flux_profile(
        snapshot,
        thickness=thickness,
        r_range=r_range,
        band=band,
        smoothing=smoothing,
        background_reach=background_reach,
    )
    of_mean = [
        one
        for polarity in (1, -1)
        for one in profile_peaks(
            polarity * profile.f, polarity * profile.smooth, profile, criteria, polarity
        )
    ]
    sheets, patches = _sheets_and_patches(of_mean, of_band, profile, criteria)
    relation = flux_density_relation(profile, reach=background_reach)
    work = _Measuring(snapshot, profile, background_reach, sheets + patches, lean)
    return FluxSheets(
        work.measured(sheets),
        tuple(work.measured([one])[0] for one in patches),
        relation,
        profile,
        criteria,
        snapshot.time,
        profile.h,
        snapshot.gm,
        (float(profile.r_edges[0]), float(profile.r_edges[-1])),
        work.total,
        work.unsigned,
        (
            *profile.notes,
            criteria.note(profile),
            *_more_notes(work, profile, of_band, relation, criteria),
        ),
    )


def _sheets_and_patches(
    of_mean: list[Candidate], of_band: FluxMap, profile: FluxProfile, criteria: SheetCriteria
) -> tuple[list[Candidate], list[Candidate]]:
    """Candidates along ridges: those that go far enough round, and the others."""
    if len(of_band.phi_edges) - 1 < LEAST_AZIMUTHS:
        ridges = [
            uniform_ridge(of_band, float(np.exp(profile.h * one.x)), one.polarity)
            for one in of_mean
        ]
    else:
        ridges = find_ridges(of_band, profile, criteria)
    sheets: list[Candidate] = []
    patches: list[Candidate] = []
    for ridge in sorted(ridges, key=lambda ridge: -ridge.coverage):
        whole = ridge.coverage >= criteria.coverage
        if ridge.coverage < _LEAST_PATCH:
            continue
        one = candidate_along(ridge, of_band, profile, criteria, whole=whole)
        if one is None or (whole and any(_claims(other, one, profile) for other in sheets)):
            continue
        (sheets if whole else patches).append(one)
    # A maximum of the mean that no ridge explains: nothing goes round there.
    patches += [
        one
        for one in of_mean
        if not any(_claims(other, one, profile) for other in sheets + patches)
    ]
    return sorted(sheets, key=lambda one: one.x), sorted(patches, key=lambda one: one.x)


def _claims(one: Candidate, other: Candidate, profile: FluxProfile) -> bool:
    """Whether a maximum lies where the ridge of a candidate runs."""
    if one.polarity != other.polarity or one.ridge is None:
        return False
    if other.ridge is not None:
        return abs(one.x - other.x) <= 0.5 * _SAME_SHEET
    x = np.log(one.ridge.radius[np.isfinite(one.ridge.radius)]) / profile.h
    return bool(x.min() - _SAME_SHEET <= other.x <= x.max() + _SAME_SHEET)


class _Measuring:
    """What the measures of all sheets share."""

    def __init__(
        self,
        snapshot: Snapshot,
        profile: FluxProfile,
        reach: float,
        candidates: list[Candidate],
        lean: bool,
    ) -> None:
        self.profile, self.mu0 = profile, snapshot.mu0
        edges = profile.r_edges
        self.total = profile.flux(float(edges[0]), float(edges[-1]))
        self.unsigned = float(np.sum(np.abs(profile.f) * np.diff(edges)) * profile.period)
        self.depletion: Array | None = None
        if profile.surface_density is not None:
            self.depletion = profile.surface_density / surface_density_background(profile, reach)
        self.cones: dict[float, FluxMap] = {}
        if lean and candidates:
            self.cones = _cones(snapshot, profile)

    @property
    def has_net_flux(self) -> bool:
        """Whether shares of the net flux mean anything."""
        return abs(self.total) > _NO_NET_FLUX * self.unsigned

    def measured(self, candidates: list[Candidate]) -> tuple[FluxSheet, ...]:
        """All sheets, each limited by its neighbours."""
        x = [None, *(one.x for one in candidates), None]
        extents = [
            sheet_extent(one, self.profile, x[n], x[n + 2]) for n, one in enumerate(candidates)
        ]
        sheets = [self._sheet(one, extent) for one, extent in zip(candidates, extents, strict=True)]
        for n, (a, b) in enumerate(pairwise(sheets)):
            flux, field = self._between(a.limits[1], b.limits[0])
            sheets[n] = replace(
                a,
                separation=2 * (b.radius - a.radius) / (self.profile.h * (a.radius + b.radius)),
                flux_between=flux,
                field_between=field,
            )
        return tuple(sheets)

    def _sheet(self, one: Candidate, extent: Extent) -> FluxSheet:
        """One sheet by itself."""
        profile, h = self.profile, self.profile.h
        radius = float(np.exp(h * one.x))
        limits = (float(np.exp(h * extent.foot_inner)), float(np.exp(h * extent.foot_outer)))
        lean = Lean(np.zeros(1), np.array([radius]), None, None)
        if self.cones:
            lean = sheet_lean(one, profile, self.cones, max(HEIGHTS))
        flux = self._flux(one, limits)
        background = float(np.interp(one.x, profile.x, profile.background))
        B_z = one.polarity * float(np.interp(one.x, profile.x, one.raw)) / radius
        return FluxSheet(
            radius=radius,
            polarity=one.polarity,
            width=extent.width,
            inner=float(np.exp(h * extent.inner)),
            outer=float(np.exp(h * extent.outer)),
            limits=limits,
            flux=flux,
            share=flux / self.total if self.has_net_flux else None,
            unsigned_share=abs(flux) / self.unsigned,
            peak=one.polarity * one.height,
            background=background,
            contrast=None if one.absolute else one.polarity * one.height / background,
            field=B_z,
            beta_z=self._beta(one.x, B_z),
            depletion=self._at(self.depletion, one.x),
            separation=None,
            flux_between=None,
            field_between=None,
            coverage=0.0 if one.ridge is None else one.ridge.coverage,
            wander=float("nan") if one.ridge is None else one.ridge.wander / (h * radius),
            ridge=one.ridge,
            tilt=lean.tilt,
            bending=lean.bending,
            heights=lean.heights,
            radii=lean.radii,
            flags=self._flags(one, extent),
        )

    def _flux(self, one: Candidate, limits: tuple[float, float]) -> float:
        phi = centres(self.profile.midplane.phi_edges)
        if one.ridge is None or (not one.shift.any() and one.share.all()):
            return self.profile.flux(*limits)
        own = one.ridge.phi
        period = self.profile.period
        shift = np.interp(phi, own, one.shift, period=period)
        nearest = np.abs((phi[:, None] - own + 0.5 * period) % period - 0.5 * period).argmin(1)
        return self.profile.flux(*limits, shift=shift, share=one.share[nearest])

    def _between(self, inner: float, outer: float) -> tuple[float | None, float | None]:
        if outer - inner <= 1e-9 * outer:
            return None, None
        flux = self.profile.flux(inner, outer)
        return flux, flux / (0.5 * (outer**2 - inner**2) * self.profile.period)

    def _at(self, values: Array | None, x: float) -> float | None:
        return None if values is None else float(np.interp(x, self.profile.x, values))

    def _beta(self, x: float, B_z: float) -> float | None:
        pressure = self._at(self.profile.pressure, x)
        return None if pressure is None else 2 * self.mu0 * pressure / B_z**2

    def _flags(self, one: Candidate, extent: Extent) -> tuple[str, ...]:
        against = self.has_net_flux and one.polarity * self.total < 0
        patch = one.ridge is None or not one.share.all()
        flags = {
            "edge": extent.edge,
            "polarity": against,
            "patch": patch,
            "spiral": one.ridge is not None and one.ridge.spiral,
            "absolute threshold": one.absolute,
            "blended": extent.blended,
            "width not resolved": not extent.cells >= _CELLS_PER_WIDTH,
        }
        return tuple(name for name, is_set in flags.items() if is_set)


def _cones(snapshot: Snapshot, profile: FluxProfile) -> dict[float, FluxMap]:
    """Maps on cones above and below the midplane, as far as the wedge reaches."""
    low, high = snapshot.grid.theta_range
    angles = {z: MIDPLANE - np.arctan(profile.h * z) for z in HEIGHTS}
    inside = {z: theta for z, theta in angles.items() if low < theta < high}
    edges = (float(profile.r_edges[0]), float(profile.r_edges[-1]))
    maps = flux_maps(snapshot, [(theta, 0.0) for theta in inside.values()], edges)
    return dict(zip(inside, maps, strict=True))


def _more_notes(
    work: _Measuring,
    profile: FluxProfile,
    of_band: FluxMap,
    relation: FluxDensityRelation | None,
    criteria: SheetCriteria,
) -> tuple[str, ...]:
    notes = []
    n_phi = len(of_band.phi_edges) - 1
    if n_phi < LEAST_AZIMUTHS:
        notes.append(
            f"{n_phi} cells in azimuth are too few for ridges: each is the profile's maximum, and "
            "coverage and wander say nothing"
        )
    if not work.has_net_flux:
        notes.append("no shares of the net flux: it is less than a thousandth of the unsigned one")
    if profile.surface_density is not None and relation is None:
        notes.append("no relation to the surface density: fewer than 8 rings could be used")
    for name, ring, inside in (("inner", 0, 1), ("outer", -1, -2)):
        polarity = -1 if profile.smooth[ring] < 0 else 1
        f = polarity * profile.smooth
        if f[ring] > f[inside] and f[ring] > criteria.threshold(profile, polarity)[ring]:
            notes.append(
                f"the profile rises to the {name} end of the range: no maximum, so no sheet"
            )
    return tuple(notes)
