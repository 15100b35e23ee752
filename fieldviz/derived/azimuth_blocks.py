"""Azimuth averages of one block of cells."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import TypeVar

import numpy as np

from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = [
    "BlockMoments",
    "Formula",
    "Pair",
    "Request",
    "RunningMoments",
    "block_moments",
    "over_kepler",
    "shared_out",
]

_Result = TypeVar("_Result")

Pair = tuple[str, str]
Formula = Callable[[Snapshot, int], Array | tuple[Array, Array]]
_THREADS = min(4, os.cpu_count() or 1)
_LEAST_PER_THREAD = 100_000  # cells; fewer are not worth a second thread


@dataclass(frozen=True)
class Request:
    """What is to be averaged; see `azimuth_moments`."""

    volume: tuple[str, ...]
    mass: tuple[str, ...]
    pairs: tuple[Pair, ...]
    mass_pairs: tuple[Pair, ...]
    needs_density: bool

    @property
    def names(self) -> tuple[str, ...]:
        """All fields that are looked at."""
        density = ("density",) if self.needs_density else ()
        return tuple(dict.fromkeys((*self.volume, *self.mass, *density)))

    def within(self, other: Request) -> bool:
        """Whether another one asks for all of this, and more."""
        return all(
            set(getattr(self, name)) <= set(getattr(other, name))
            for name in ("volume", "mass", "pairs", "mass_pairs")
        )


@dataclass(frozen=True, eq=False)
class BlockMoments:
    """Of one block, tables (n_theta, n_r); products are sums over azimuth about the means."""

    weight: Array
    means: dict[str, Array]
    products: dict[Pair, Array]
    mass: Array
    mass_means: dict[str, Array]
    mass_products: dict[Pair, Array]
    n_left_out: int


def over_kepler(snapshot: Snapshot, block: int) -> tuple[Array, Array]:
    """v_phi - sqrt(GM/R), as the field and what is taken off at each r and theta."""
    r, theta, _ = snapshot.grid.cell_centres(block)
    kepler = np.sqrt(snapshot.gm / (r * np.sin(theta)[:, None]))
    return snapshot.cell_block("velocity_phi", block), kepler


def block_moments(
    snapshot: Snapshot,
    block: int,
    request: Request,
    formulas: Mapping[str, Formula],
    least_density: float,
) -> BlockMoments:
    """Average one block along azimuth, one row theta = constant after the other.

    Parameters
    ----------
    snapshot : Snapshot
    block : int
    request : Request
    formulas : mapping of name to Formula
        A formula gives an array, or an array and what is to be taken off at each r and theta.
    least_density : float
        Cells must exceed it.

    Returns
    -------
    BlockMoments
    """
    from fieldviz.derived._azimuth_kernels import row_moments

    names = request.names
    shape = snapshot.grid.block_shape
    sources = [_source(snapshot, block, name, formulas) for name in names]
    n_phi, n_theta, n_r = shape
    counts = [len(request.volume), len(request.pairs), len(request.mass), len(request.mass_pairs)]
    found = [np.empty((n_theta, count, n_r)) for count in counts]
    weight, mass = np.empty((n_theta, n_r)), np.empty((n_theta, n_r))
    places = (
        _places(names, request.volume),
        _pair_places(names, request.pairs),
        _places(names, request.mass),
        _pair_places(names, request.mass_pairs),
    )
    density = names.index("density") if "density" in names else -1
    steps = np.diff(snapshot.grid.phi_edges[block])

    def work(rows: Sequence[int]) -> int:
        buffer = np.empty((len(names), n_phi, n_r))
        left_out = 0
        for j in rows:
            for place, (array, less) in enumerate(sources):
                buffer[place] = array[:, j]
                if less is not None:
                    buffer[place] -= less[j]
            left_out += row_moments(
                buffer, steps, density, least_density, *places,
                weight[j], found[0][j], found[1][j], mass[j], found[2][j], found[3][j],
            )  # fmt: skip
        return left_out

    left_out = sum(shared_out(work, n_theta, n_phi * n_theta * n_r))
    tables = [np.ascontiguousarray(np.moveaxis(table, 1, 0)) for table in found]
    return BlockMoments(
        weight,
        dict(zip(request.volume, tables[0], strict=True)),
        dict(zip(request.pairs, tables[1], strict=True)),
        mass,
        dict(zip(request.mass, tables[2], strict=True)),
        dict(zip(request.mass_pairs, tables[3], strict=True)),
        left_out,
    )


def shared_out(
    work: Callable[[Sequence[int]], _Result], n_pieces: int, n_cells: int
) -> list[_Result]:
    """Pieces shared out to threads; each is worked out alike whatever their number.

    Parameters
    ----------
    work : function of a sequence of int
        Works out the pieces of these numbers.
    n_pieces : int
    n_cells : int
        Of all pieces: a few are not worth a second thread.

    Returns
    -------
    list
        What `work` gave on each thread.
    """
    threads = max(1, min(_THREADS, n_cells // _LEAST_PER_THREAD, n_pieces))
    if threads == 1:
        return [work(range(n_pieces))]
    with ThreadPoolExecutor(threads) as pool:
        return list(pool.map(work, [range(n, n_pieces, threads) for n in range(threads)]))


def _source(
    snapshot: Snapshot, block: int, name: str, formulas: Mapping[str, Formula]
) -> tuple[Array, Array | None]:
    if name not in formulas:
        return snapshot.cell_block(name, block), None
    made = formulas[name](snapshot, block)
    array, less = made if isinstance(made, tuple) else (made, None)
    return np.broadcast_to(array, snapshot.grid.block_shape), less


def _places(names: Sequence[str], some: Sequence[str]) -> Array:
    return np.array([names.index(name) for name in some], dtype=np.int64)


def _pair_places(names: Sequence[str], pairs: Sequence[Pair]) -> Array:
    found = [(names.index(a), names.index(b)) for a, b in pairs]
    return np.array(found, dtype=np.int64).reshape(-1, 2)


class RunningMoments:
    """Weighted means and covariances of one weighting, grown block by block.

    Parameters
    ----------
    shape : tuple of int
    names : iterable of str
    pairs : iterable of Pair
    """

    def __init__(self, shape: tuple[int, ...], names: Iterable[str], pairs: Iterable[Pair]):
        self.weight = np.zeros(shape)
        self.means = {name: np.zeros(shape) for name in names}
        self.products = {pair: np.zeros(shape) for pair in pairs}

    def add(
        self,
        total: Array,
        means: Mapping[str, Array],
        products: Mapping[Pair, Array],
        cells: tuple[IntArray, IntArray, tuple[slice, slice]],
    ) -> None:
        """Take in one block; `cells` as of `MeridionalMesh.block_cells`."""
        rows, columns, place = cells

        def onto_mesh(table: Array) -> Array:
            return table[np.ix_(rows, columns)]

        before, more = self.weight[place], onto_mesh(total)
        after = before + more
        share = more / np.where(after > 0, after, 1.0)
        steps = {name: onto_mesh(means[name]) - self.means[name][place] for name in means}
        for pair, product in products.items():
            joined = onto_mesh(product) + steps[pair[0]] * steps[pair[1]] * before * share
            self.products[pair][place] += joined
        for name, step in steps.items():
            self.means[name][place] += step * share
        self.weight[place] = after

    def results(self) -> tuple[dict[str, Array], dict[Pair, Array]]:
        """Means, and covariances both ways round; NaN where nothing was used."""
        there = np.where(self.weight > 0, self.weight, np.nan)
        means = {
            name: np.where(self.weight > 0, table, np.nan) for name, table in self.means.items()
        }
        covariances = {pair: table / there for pair, table in self.products.items()}
        return means, covariances | {(b, a): table for (a, b), table in covariances.items()}
