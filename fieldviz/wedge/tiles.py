"""The same snapshot in smaller blocks, so that one of them fits into memory however large it is."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from fieldviz.wedge.fields import Fields
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot, face_shape
from fieldviz.wedge.typing import Array

__all__ = ["TiledFields", "azimuth_window", "tiled"]

Slices = tuple[slice, slice, slice]


@dataclass(frozen=True)
class _Tile:
    """Where a tile lies: block of the source, first cell along phi, theta, r."""

    block: int
    first: tuple[int, int, int]


class TiledFields(Fields):
    """Fields of another snapshot in smaller blocks; nothing is kept.

    Parameters
    ----------
    source : Fields
    tiles : sequence of tile
    shapes : mapping of name to the shape (n_phi, n_theta, n_r) of the field on one tile
    """

    def __init__(
        self, source: Fields, tiles: Sequence[_Tile], shapes: dict[str, tuple[int, int, int]]
    ) -> None:
        self._source, self._tiles, self._shapes = source, tuple(tiles), shapes

    def __getitem__(self, name: str) -> Array:
        return np.stack([self.block(name, block) for block in range(len(self._tiles))])

    def block(self, name: str, block: int) -> Array:
        """One tile; a file is read no further than that."""
        whole = tuple(slice(0, n) for n in self._shapes[name])
        return np.ascontiguousarray(self.part(name, block, (whole[0], whole[1], whole[2])))

    def part(self, name: str, block: int, where: Slices) -> Array:
        """A part of one tile."""
        tile, spans = self._tiles[block], []
        for first, taken, n in zip(tile.first, where, self._shapes[name], strict=True):
            low, high, _ = taken.indices(n)
            spans.append(slice(first + low, first + high))
        return self._source.part(name, tile.block, (spans[0], spans[1], spans[2]))

    def __iter__(self) -> Iterator[str]:
        return iter(self._source)

    def __len__(self) -> int:
        return len(self._source)

    def __contains__(self, name: object) -> bool:
        return name in self._source


def tiled(snapshot: Snapshot, most_cells: float) -> Snapshot:
    """The same snapshot in blocks of at most so many cells, cut along theta, then phi, then r.

    Parameters
    ----------
    snapshot : Snapshot
    most_cells : float
        At least one cell is taken.

    Returns
    -------
    Snapshot
        The snapshot itself where its blocks are small enough. Else its fields are read from the
        original at each use; a field asked for as a whole takes all its memory.
    """
    shape = _tile_shape(snapshot.grid.block_shape, most_cells)
    return _of_tiles(snapshot, shape, _all_tiles(snapshot.grid, shape))


def azimuth_window(snapshot: Snapshot, most_cells: float) -> Snapshot:
    """The cells of the first azimuths of a snapshot, at all radii and colatitudes.

    Parameters
    ----------
    snapshot : Snapshot
    most_cells : float
        The window holds about so many cells, but at least one cell of the coarsest level in
        azimuth.

    Returns
    -------
    Snapshot
        A wedge of its own, which repeats after the window: its first and last azimuth see each
        other as neighbours. The snapshot itself where all of it is small enough.
    """
    grid = snapshot.grid
    if grid.n_cells <= most_cells:
        return snapshot
    n_phi, *across = grid.block_shape
    widths = np.ptp(grid.phi_edges, axis=1)
    in_window = 1
    for count in _divisors(n_phi):
        width = widths.max() * count / n_phi
        # Cells of all levels within a window of this width.
        if (
            np.sum(np.prod(across) * n_phi * np.minimum(width / widths, 1.0) * widths)
            / (grid.period)
            <= most_cells
        ):
            in_window = max(in_window, count)
    shape = (in_window, across[0], across[1])
    end = grid.phi_range[0] + widths.max() * in_window / n_phi
    tiles = [
        tile
        for tile in _all_tiles(grid, shape)
        if grid.phi_edges[tile.block, tile.first[0] + in_window] <= end + grid.edge_tolerance
    ]
    return _of_tiles(snapshot, shape, tiles)


def _divisors(n: int) -> list[int]:
    return [count for count in range(1, n + 1) if n % count == 0]


def _tile_shape(shape: tuple[int, int, int], most_cells: float) -> tuple[int, int, int]:
    """Largest divisors of a block's shape that keep a tile small enough.

    Cut along theta first: averages along azimuth then see whole rows, and add up as before.
    """
    found = list(shape)
    for axis in (1, 0, 2):
        rest = int(np.prod(found)) // found[axis]
        fitting = [n for n in _divisors(found[axis]) if n * rest <= most_cells]
        found[axis] = max(fitting, default=1)
        if fitting:
            break
    return found[0], found[1], found[2]


def _all_tiles(grid: WedgeGrid, shape: tuple[int, int, int]) -> list[_Tile]:
    starts = [range(0, n, step) for n, step in zip(grid.block_shape, shape, strict=True)]
    return [
        _Tile(block, (k, j, i))
        for block in range(grid.n_blocks)
        for k in starts[0]
        for j in starts[1]
        for i in starts[2]
    ]


def _of_tiles(snapshot: Snapshot, shape: tuple[int, int, int], tiles: list[_Tile]) -> Snapshot:
    grid = snapshot.grid
    if shape == grid.block_shape and len(tiles) == grid.n_blocks:
        return snapshot

    def edges(axis: int, array: Array) -> Array:
        n = shape[axis]
        return np.stack([array[t.block, t.first[axis] : t.first[axis] + n + 1] for t in tiles])

    assert grid.level is not None
    small = WedgeGrid(
        edges(2, grid.r_edges),
        edges(1, grid.theta_edges),
        edges(0, grid.phi_edges),
        grid.level[[tile.block for tile in tiles]],
    )
    cells = dict.fromkeys(snapshot.cells, shape)
    faces = {name: face_shape(name, shape) for name in snapshot.faces}
    return replace(
        snapshot,
        grid=small,
        cells=TiledFields(snapshot.cells, tiles, cells),
        faces=TiledFields(snapshot.faces, tiles, faces),
    )
