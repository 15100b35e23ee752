"""What all seeds share: the plan, checks, points of the unit square, inverse cumulatives."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.thickness import disc_thickness
from fieldviz.errors import FieldvizError
from fieldviz.lines.seeds_surface import ConeTable
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = [
    "MOST_SEEDS",
    "SeedPlan",
    "checked_count",
    "checked_thickness",
    "number_notes",
    "places",
    "quantile",
    "shared_out",
    "unit_points",
]

MOST_SEEDS = 10_000_000
_GOLDEN = 0.5 * (np.sqrt(5.0) - 1.0)
_HALVINGS = 54  # of an interval: as fine as a double


@dataclass(frozen=True, eq=False)
class SeedPlan:
    """Seeds, and what each line that starts there stands for.

    Attributes
    ----------
    points : (n, 3) float64 array
        r, theta, phi.
    amount : (n,) array
        What each line stands for: `unit` says of what. Numbers are for the wedge.
    group : (n,) int array
        Number of the sheet; 0 above and 1 below the midplane for the wind; else 0.
    total : float
        Sum that was divided.
    net : float
        The same integral with signs: upward flux for the field, signed mass loss for the wind.
    unit : str
        What `amount`, `total` and `net` are.
    notes : tuple of str
        What the seeds rest on.
    """

    points: Array
    amount: Array
    group: IntArray
    total: float
    net: float
    unit: str
    notes: tuple[str, ...] = ()


def checked_count(work: str, count: object, name: str = "count") -> int:
    """Refuse a number of seeds that is not whole, not positive or beyond MOST_SEEDS."""
    number = 0
    if isinstance(count, (int, float, np.integer, np.floating)) and not isinstance(count, bool):
        number = int(count) if 1 <= count <= MOST_SEEDS else 0
    if number < 1 or number != count:
        raise FieldvizError(
            f"Cannot {work}: expected {name} to be a whole number of 1 to {MOST_SEEDS:,}, "
            f"got {count!r}; ask for another number of seeds."
        )
    return number


def checked_thickness(work: str, snapshot: Snapshot, given: float | None) -> float:
    """H/R as given, or worked out from the snapshot."""
    if given is None:
        return disc_thickness(snapshot).h
    if not 0 < given < 1:
        raise FieldvizError(
            f"Cannot {work}: expected a thickness H/R of 0 to 1, got {given}; leave it out and it "
            "is worked out."
        )
    return float(given)


def unit_points(
    work: str, count: int, scatter_seed: int | None, stream: int = 0
) -> tuple[Array, Array]:
    """Points of the unit square that divide it evenly.

    Parameters
    ----------
    work : str
        What it is for, for the error.
    count : int
    scatter_seed : int or None
        None: middles of `count` strata in the first coordinate, golden-ratio steps in the second.
        Any run of neighbours then spreads over the whole second coordinate. A seed: Halton points
        of bases 2 and 3 (Halton 1960), shifted as a whole by a random vector (Cranley & Patterson
        1976), in the order of the first coordinate.
    stream : int
        Tells sets with the same seed apart.

    Returns
    -------
    (count,), (count,) arrays
        Both within [0, 1). Sources are given from memory.
    """
    if scatter_seed is None:
        number = np.arange(count, dtype=np.float64)
        return (number + 0.5) / count, np.mod(0.5 + number * _GOLDEN, 1.0)
    whole = isinstance(scatter_seed, (int, np.integer)) and not isinstance(scatter_seed, bool)
    if not whole or scatter_seed < 0:
        raise FieldvizError(
            f"Cannot {work}: expected scatter_seed to be a whole number >= 0 or None, got "
            f"{scatter_seed!r}; leave it out for strata midpoints."
        )
    from scipy.stats import qmc

    shift = np.random.default_rng([int(scatter_seed), stream]).uniform(size=2)
    both = np.mod(qmc.Halton(d=2, scramble=False).random(count) + shift, 1.0)
    both = both[np.argsort(both[:, 0], kind="stable")]
    return both[:, 0], both[:, 1]


def quantile(
    edges: Array, weight: Array, share: Array, *, smooth: bool = False
) -> tuple[IntArray, Array]:
    """Invert a cumulative.

    Parameters
    ----------
    edges : (n + 1,) array
        Coordinate in which each interval's weight is spread.
    weight : (n,) array
        Not negative, not all zero. Intervals of no weight are never chosen.
    share : (m,) array
        Within [0, 1].
    smooth : bool
        Between edges a monotone cubic (Fritsch & Butland 1984, from memory), which is a straight
        line where neighbours have one density, instead of a straight line everywhere.

    Returns
    -------
    (m,) int array
        Interval of each.
    (m,) array
        Coordinate of each.
    """
    cumulative = np.concatenate([[0.0], np.cumsum(weight)])
    target = share * cumulative[-1]
    filled = np.flatnonzero(np.diff(cumulative) > 0)
    cell = np.searchsorted(cumulative, target, side="right") - 1
    cell = np.clip(cell, filled[0], filled[-1])
    part = np.clip((target - cumulative[cell]) / (cumulative[cell + 1] - cumulative[cell]), 0, 1)
    if smooth:
        part = _bent(edges, cumulative, cell, part)
    return cell, edges[cell] + part * (edges[cell + 1] - edges[cell])


def _bent(edges: Array, cumulative: Array, cell: IntArray, part: Array) -> Array:
    """Where within its interval a monotone cubic reaches the share `part` of the step over it."""
    from scipy.interpolate import PchipInterpolator

    slope = PchipInterpolator(edges, cumulative).derivative()(edges)
    mean = np.diff(cumulative)[cell] / np.diff(edges)[cell]
    start, end = slope[cell] / mean, slope[cell + 1] / mean
    low, high = np.zeros(len(cell)), np.ones(len(cell))
    for _ in range(_HALVINGS):
        x = 0.5 * (low + high)
        # Hermite's cubic from 0 to 1 with the slopes start and end.
        value = x * (start + x * ((3 - 2 * start - end) + x * (start + end - 2)))
        below = value < part
        low, high = np.where(below, x, low), np.where(below, high, x)
    return 0.5 * (low + high)


def places(table: ConeTable, weight: Array, u: Array, v: Array) -> Array:
    """Points on a cone at quantiles of a weight: first r, then phi at that r.

    Parameters
    ----------
    table : ConeTable
    weight : (n_phi, n_r) array
        Of each patch, not negative, not all zero. It is even in phi within a patch; in r^2 the
        cumulative is a monotone cubic, exact at the edges.
    u, v : (m,) arrays
        Shares of the cumulative in r, and of that in phi within the ring of patches at r.

    Returns
    -------
    (m, 3) array
    """
    ring, square = quantile(np.square(table.r_edges), weight.sum(axis=0), u, smooth=True)
    points = np.empty((len(u), 3))
    points[:, 0] = np.clip(np.sqrt(square), table.r_edges[0], table.r_edges[-1])
    points[:, 1] = table.theta
    order = np.argsort(ring, kind="stable")
    starts = np.flatnonzero(np.diff(ring[order], prepend=-1))
    for some in np.split(order, starts[1:]):
        _, phi = quantile(table.phi_edges, weight[:, ring[some[0]]], v[some])
        points[some, 2] = phi
    return points


def shared_out(count: int, amounts: Array) -> IntArray:
    """Share `count` in proportion to amounts >= 0 by largest remainders; the first of equals."""
    quota = count * np.asarray(amounts, dtype=np.float64) / np.sum(amounts)
    whole = np.floor(quota).astype(np.int64)
    order = np.argsort(whole - quota, kind="stable")
    whole[order[: count - int(whole.sum())]] += 1
    return np.asarray(whole)


def number_notes(*tables: ConeTable) -> tuple[str, ...]:
    """Say how much of the surfaces had no number, if any."""
    bad = sum(table.without_number for table in tables)
    if not bad:
        return ()
    size = sum(table.density.size for table in tables)
    return (f"{bad} of {size} patches with NaN or infinite values got no seeds",)
