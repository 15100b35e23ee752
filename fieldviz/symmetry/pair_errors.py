"""From sums over azimuth and time to judged pairs with errors."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from fieldviz.symmetry.jackknife import (
    LEAST_BLOCKS,
    Errors,
    azimuth_blocks,
    correlation_length,
    estimate,
    jackknife,
    larger,
    no_errors,
)
from fieldviz.symmetry.pairs import Pair, judge_pair
from fieldviz.symmetry.side_sums import SIDES, SideSums
from fieldviz.wedge.typing import Array

__all__ = ["TimedSums", "judged_pair"]

_SAME = 1e-6  # of a pair's size: what varies less with azimuth is rounding of single precision
_FLUXES = ("outflow", "torque")
_UNITS = {
    "outflow": "mass loss of the wedge, code mass per code time, positive away from the midplane",
    "bend": "mean v_R of leaving gas, code velocity, positive away from the star",
    "torque": "angular momentum of the wedge taken by the field, code units, positive away from it",
    "lean": "mean angle of the poloidal field from the vertical, weighted as the bend, degrees, "
    "positive outward going away from the midplane; beside the bend, not part of the verdict",
}


@dataclass(eq=False)
class TimedSums:
    """Sums of each snapshot of a series.

    Attributes
    ----------
    orbit : float
        2 pi/Omega at the outer radius: blocks of time are at least as long.
    times : list of float
        Rising.
    sums : list of SideSums
    """

    orbit: float
    times: list[float] = field(default_factory=list)
    sums: list[SideSums] = field(default_factory=list)

    def add(self, time: float, sums: SideSums) -> None:
        """Take in one more snapshot."""
        self.times.append(time)
        self.sums.append(sums)

    def weights(self) -> Array:
        """Share of the time that each snapshot stands for: up to the middles between them."""
        times = np.array(self.times)
        if len(times) == 1:
            return np.ones(1)
        middles = 0.5 * (times[1:] + times[:-1])
        ends = [2 * times[0] - middles[0], *middles, 2 * times[-1] - middles[-1]]
        widths = np.diff(ends)
        return np.asarray(widths / widths.sum())

    def mean(self) -> SideSums:
        """Time mean; only what every snapshot has."""
        first = self.sums[0]
        names = tuple(
            name for name in first.numerators if all(name in s.numerators for s in self.sums)
        )
        n_bins, _, n_bands = first.numerators["outflow"].shape
        mean = SideSums.nothing(names, n_bins, n_bands)
        for weight, sums in zip(self.weights(), self.sums, strict=True):
            mean.add(sums, float(weight))
        return mean

    def by_time(self, name: str) -> tuple[Array, Array] | str:
        """Numerator and denominator of one pair by block of time, or why there are none."""
        span = self.times[-1] - self.times[0]
        # The first and the last snapshot stand for half a step beyond.
        if len(self.times) > 1:
            span *= len(self.times) / (len(self.times) - 1)
        count = min(int(span / self.orbit * (1 + 1e-9)), len(self.times))
        if count < LEAST_BLOCKS:
            return (
                f"fewer than {LEAST_BLOCKS} blocks of time of an orbit at the outer radius "
                f"({self.orbit:.4g})"
            )
        weights = self.weights()
        ends = np.cumsum(weights)
        block = np.minimum(((ends - 0.5 * weights) * count).astype(int), count - 1)
        kept = np.unique(block)
        if len(kept) < LEAST_BLOCKS:
            return f"snapshots in fewer than {LEAST_BLOCKS} blocks of time of an orbit"

        def summed(part: str) -> Array:
            tables = np.array(
                [w * getattr(s, part)[name].sum(0) for w, s in zip(weights, self.sums, strict=True)]
            )
            return np.array([tables[block == b].sum(0) for b in kept])

        return summed("numerators"), summed("denominators")


def judged_pair(name: str, *, sums: TimedSums, mean: SideSums, band_edges: Array) -> Pair:
    """Work out one pair with its errors and give it its word.

    Parameters
    ----------
    name : str
        "outflow", "bend", "torque" or "lean".
    sums : TimedSums
    mean : SideSums
        Their time mean.
    band_edges : (n_bands + 1,) array

    Returns
    -------
    Pair
    """
    numerator, denominator = mean.numerators[name], mean.denominators[name]
    adds_up = name in _FLUXES
    totals, bands = estimate(numerator.sum(0), denominator.sum(0), adds_up=adds_up)
    scale = {
        "outflow": mean.inflow,
        "torque": mean.inflow_torque,
        "bend": mean.kepler_speed,
        "lean": 90.0,
    }[name]
    return judge_pair(
        name,
        (float(totals[0]), float(totals[1])),
        (bands[0], bands[1]),
        band_edges,
        scale=scale,
        unit=_UNITS[name],
        notes=_notes(name, mean),
        errors=_errors(name, numerator, denominator, sums, adds_up),
    )


def _errors(
    name: str, numerator: Array, denominator: Array, sums: TimedSums, adds_up: bool
) -> Errors:
    azimuth = _azimuth_errors(numerator, denominator, adds_up)
    if len(sums.times) == 1:
        return azimuth
    by_time = sums.by_time(name)
    if isinstance(by_time, str):
        time = no_errors(numerator.shape[-1], by_time)
    else:
        time = jackknife(*by_time, adds_up=adds_up, source="blocks of time")
    if not azimuth.n_blocks and not time.n_blocks:
        return no_errors(numerator.shape[-1], f"{azimuth.source}; {time.source}")
    return larger(azimuth, time)


def _azimuth_errors(numerator: Array, denominator: Array, adds_up: bool) -> Errors:
    n_bins, _, n_bands = numerator.shape
    if n_bins == 1:
        return no_errors(n_bands, "no estimate: axisymmetric")
    length = correlation_length(numerator, denominator)
    starts = azimuth_blocks(n_bins, length)
    if starts is None:
        why = (
            f"fewer than {LEAST_BLOCKS} cells of azimuth"
            if n_bins < LEAST_BLOCKS
            else f"fewer than {LEAST_BLOCKS} blocks of azimuth are longer than the correlation "
            f"length, {length:.2g} of the wedge"
        )
        return no_errors(n_bands, f"no estimate: {why}")
    found = jackknife(
        np.add.reduceat(numerator, starts, axis=0),
        np.add.reduceat(denominator, starts, axis=0),
        adds_up=adds_up,
        source="blocks of azimuth",
    )
    totals, _ = estimate(numerator.sum(0), denominator.sum(0), adds_up=adds_up)
    if not np.nansum(found.sides) > _SAME * np.nansum(np.abs(totals)):
        return no_errors(n_bands, "no estimate: axisymmetric")
    return found


def _notes(name: str, mean: SideSums) -> tuple[str, ...]:
    notes = []
    count = mean.left_out["gas"]
    if name in ("torque", "lean"):
        count = mean.left_out["field"]
    if count:
        notes.append(f"{count} cells with NaN or infinite values were left out")
    if name == "bend":
        notes += [
            f"no gas moves away from the midplane on the {side} side: it counts as zero"
            for index, (side, _) in enumerate(SIDES)
            if mean.denominators["bend"][:, index].sum() == 0
        ]
    return tuple(notes)
