"""What makes a flux sheet: thresholds that are our choice, in one place."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.sheets.flux_profile import FluxProfile
from fieldviz.wedge.typing import Array

__all__ = [
    "ABSOLUTE",
    "CONTRAST",
    "COVERAGE",
    "PROMINENCE",
    "RISE",
    "SheetCriteria",
]

CONTRAST = 3.0  # f over its background
# Height of a maximum over the saddle to a higher one, in backgrounds: without and with noise.
LEAST_PROMINENCE, PROMINENCE = 0.02, 0.5
RISE = 1.5  # f above its background, in spreads
ABSOLUTE = 5.0  # the same where the background is no scale
COVERAGE = 0.6  # share of the azimuth over which a ridge must be there

_LOST = 0.3  # a background below this many spreads is no scale
_MIXED = 0.3  # net over unsigned flux below which the field has no background anywhere
_NEGLIGIBLE = 1e-3  # of the largest |f|: rounding in an empty background is no sheet


@dataclass(frozen=True)
class SheetCriteria:
    """Thresholds for sheets.

    Attributes
    ----------
    contrast : float
        f = r <B_z> at the peak must exceed this many backgrounds b ...
    prominence : float or None
        ... and the maximum stand out by this many b (topographic prominence); None for 0.5, or for
        0.02 where the profile has hardly any noise from ring to ring, so that sheets that merge
        are two until they are one,
    rise : float
        ... and exceed b by this many spreads s.
    absolute : float
        Where b is below 0.3 s or of the other sign, or the net flux of the range below 0.3 of the
        unsigned one, the peak must exceed b by this many s instead.
    coverage : float
        Share of the azimuth over which the ridge must be there; less is a patch.
    """

    contrast: float = CONTRAST
    prominence: float | None = None
    rise: float = RISE
    absolute: float = ABSOLUTE
    coverage: float = COVERAGE

    def __post_init__(self) -> None:
        for name in ("contrast", "prominence", "rise", "absolute", "coverage"):
            value = getattr(self, name)
            if value is None and name == "prominence":
                continue
            if not (np.isfinite(value) and value >= 0) or (name == "coverage" and value > 1):
                wanted = "a share of 0 to 1" if name == "coverage" else "a number >= 0"
                raise FieldvizError(
                    f"Cannot find flux sheets: expected {name} to be {wanted}, got {value}; leave "
                    "it out for the usual one."
                )

    def without_scale(self, profile: FluxProfile, polarity: int) -> Array:
        """Where the background is no scale for sheets of a polarity, (n_r,) bool array."""
        if profile.net_share < _MIXED:
            return np.ones(len(profile.f), dtype=bool)
        return np.asarray(polarity * profile.background <= _LOST * profile.spread)

    def threshold(self, profile: FluxProfile, polarity: int) -> Array:
        """What f times the polarity must exceed at a peak, (n_r,)."""
        background, spread = polarity * profile.background, profile.spread
        relative = np.maximum(self.contrast * background, background + self.rise * spread)
        least = np.where(
            self.without_scale(profile, polarity), background + self.absolute * spread, relative
        )
        return np.maximum(least, _NEGLIGIBLE * float(np.abs(profile.smooth).max()))

    def least_prominence(self, profile: FluxProfile) -> float:
        """How far a maximum must stand out, in backgrounds."""
        if self.prominence is not None:
            return self.prominence
        return LEAST_PROMINENCE if profile.quiet else PROMINENCE

    def note(self, profile: FluxProfile) -> str:
        """The thresholds in words."""
        return (
            f"thresholds are our choice: a peak exceeds {self.contrast:g} backgrounds, stands out "
            f"by {self.least_prominence(profile):g} of them and exceeds the background by "
            f"{self.rise:g} spreads; by {self.absolute:g} spreads where the background is no "
            f"scale; its ridge covers {100 * self.coverage:g} % of the azimuth"
        )
