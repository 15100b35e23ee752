"""What is known of flux sheets once they are found."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import overload

from fieldviz.sheets.criteria import SheetCriteria
from fieldviz.sheets.flux_profile import FluxProfile
from fieldviz.sheets.relation import FluxDensityRelation
from fieldviz.sheets.ridges import Ridge
from fieldviz.wedge.typing import Array

__all__ = ["FluxSheet", "FluxSheets"]


@dataclass(frozen=True, eq=False)
class FluxSheet:
    """One sheet; fluxes are for the wedge, code units, up positive.

    Attributes
    ----------
    radius : float
        Radius of the peak on the midplane, mean over azimuth.
    polarity : int
        1 where B_z is up, -1 where it is down.
    width : float
        FWHM over the background in local scale heights, without the smoothing; NaN where the sheet
        is no wider than the smoothing or its sides were not found.
    inner, outer : float
        Radii at which it is half way between background and peak.
    limits : (float, float)
        Radii between which `flux` is counted: where the profile returns to a tenth of its height
        over the background, or the minimum before the next sheet.
    flux : float
        Through the midplane between the limits.
    share : float or None
        Of the net flux of the range; None where there is none.
    unsigned_share : float
        Of the flux without sign of the azimuth mean.
    peak, background : float
        r <B_z> at the peak after smoothing, and its background.
    contrast : float or None
        Peak over background; None where the background is no scale.
    field : float
        <B_z> at the peak, along the ridge, not smoothed.
    beta_z : float or None
        2 mu0 P/<B_z>^2 at the peak; None without pressure.
    depletion : float or None
        Sigma/Sigma_bg at the peak; None without density.
    separation : float or None
        To the next sheet outward, in local scale heights; None for the outermost.
    flux_between, field_between : float or None
        Flux and mean B_z between the limits of this sheet and those of the next one outward; None
        for the outermost and where the limits touch.
    coverage : float
        Share of the azimuth at which the ridge is there.
    wander : float
        rms of R(phi) about its mean, local scale heights.
    ridge : Ridge or None
        R(phi).
    tilt, bending : float or None
        dR/dz and R d^2R/dz^2 of the ridge at the midplane; None where it was lost within 0.5 H.
    heights, radii : arrays
        z/H, and the cylindrical radius of the ridge there.
    flags : tuple of str
        "edge": it touches the end of the range. "polarity": against the net flux. "patch": covers
        too little of the azimuth. "spiral": its ridge does not close after one turn of the wedge.
        "absolute threshold": the background is no scale. "blended": no
        half height before the next sheet. "width not resolved": under 6 cells per FWHM.
    """

    radius: float
    polarity: int
    width: float
    inner: float
    outer: float
    limits: tuple[float, float]
    flux: float
    share: float | None
    unsigned_share: float
    peak: float
    background: float
    contrast: float | None
    field: float
    beta_z: float | None
    depletion: float | None
    separation: float | None
    flux_between: float | None
    field_between: float | None
    coverage: float
    wander: float
    ridge: Ridge | None
    tilt: float | None
    bending: float | None
    heights: Array
    radii: Array
    flags: tuple[str, ...]


@dataclass(frozen=True, eq=False)
class FluxSheets(Sequence[FluxSheet]):
    """The sheets of one snapshot, inner ones first; behaves as a tuple of them.

    Attributes
    ----------
    sheets : tuple of FluxSheet
    patches : tuple of FluxSheet
        The same for what covers too little of the azimuth; `flux` is that of its own azimuths.
    relation : FluxDensityRelation or None
        Of B_z to the surface density.
    profile : FluxProfile
    criteria : SheetCriteria
    time : float
    h : float
        H/R.
    gm : float
        Gravitational parameter of the star.
    r_range : (float, float)
        Radii that were searched.
    total_flux, unsigned_flux : float
        Of the range: net, and without the sign of the azimuth mean.
    notes : tuple of str
        What the numbers rest on, and why some are absent.
    """

    sheets: tuple[FluxSheet, ...]
    patches: tuple[FluxSheet, ...]
    relation: FluxDensityRelation | None
    profile: FluxProfile
    criteria: SheetCriteria
    time: float
    h: float
    gm: float
    r_range: tuple[float, float]
    total_flux: float
    unsigned_flux: float
    notes: tuple[str, ...]

    def __len__(self) -> int:
        return len(self.sheets)

    def __iter__(self) -> Iterator[FluxSheet]:
        return iter(self.sheets)

    @overload
    def __getitem__(self, index: int) -> FluxSheet: ...
    @overload
    def __getitem__(self, index: slice) -> tuple[FluxSheet, ...]: ...
    def __getitem__(self, index: int | slice) -> FluxSheet | tuple[FluxSheet, ...]:
        return self.sheets[index]
