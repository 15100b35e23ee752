"""Follow the lines of a vector field through blocks, levels and the repeating azimuth."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from fieldviz.errors import FieldvizError, GridError
from fieldviz.lines import reasons
from fieldviz.lines.half import Half, followed_to_the_end
from fieldviz.lines.line_set import LineSet
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo_array, halo_grid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray

__all__ = ["trace_lines"]

_VECTORS = {"magnetic": MAGNETIC, "velocity": VELOCITY}
_DIRECTIONS = {"both": (1, -1), "forward": (1,), "backward": (-1,)}
_WEAKEST = 1e-8
_LINES_AT_ONCE = 2048


def trace_lines(
    snapshot: Snapshot,
    name: str,
    seeds: Array,
    *,
    direction: str = "both",
    interpolation: str = "linear",
    tolerance: float = 1e-6,
    most_cells: float = 0.4,
    longest: float | None = None,
    most_steps: int = 20_000,
    poloidal: bool = False,
    sample: Sequence[str] = (),
) -> LineSet:
    """Trace lines from seeds.

    Parameters
    ----------
    snapshot : Snapshot
    name : str
        "magnetic" or "velocity".
    seeds : (n, 3) array
        r, theta, phi; phi wraps with the wedge. A seed outside the wedge, or NaN, gives a line
        without points whose reason is "seed outside".
    direction : str
        "both", "forward" (along the field) or "backward".
    interpolation : str
        "linear": trilinear in the spherical components, steps with error control. "flux": from
        fluxes through faces, without divergence in any cell, and exact in it (magnetic only).
    tolerance : float
        Largest estimated error of a step over r; linear only.
    most_cells : float
        Longest step in cells.
    longest : float, optional
        Longest line each way, code length; 20 times the outer radius by default.
    most_steps : int
        Most steps each way, rejected ones included.
    poloidal : bool
        Follow the part without the azimuthal component.
    sample : sequence of str
        Cell fields to sample along the lines.

    Returns
    -------
    LineSet
        One line per seed, in their order.

    Raises
    ------
    MissingFieldError, FieldvizError

    Examples
    --------
    >>> import fieldviz as fv
    >>> disc = fv.demo_disc(shape=(4, 48, 48))
    >>> fv.trace_lines(disc, "magnetic", [[2.0, 1.57, 0.1]]).end_reason
    [('lower wall', 'upper wall')]
    """
    places = _checked_seeds(seeds)
    _check_options(direction, interpolation, tolerance, most_cells, most_steps, longest)
    if name not in _VECTORS:
        raise FieldvizError(
            f"Cannot trace '{name}': expected one of {', '.join(_VECTORS)}; name one of these."
        )
    snapshot.require(f"trace lines of '{name}'", *_VECTORS[name])
    snapshot.require("sample fields along lines", *sample)
    limit = 20.0 * snapshot.grid.r_range[1] if longest is None else float(longest)
    if interpolation == "flux":
        from fieldviz.lines.flux_tracing import FluxWalk

        follow = FluxWalk(snapshot, name, most_cells, limit, most_steps, poloidal).follow
    else:
        follow = LinearWalk(
            snapshot, name, tolerance, most_cells, limit, most_steps, poloidal
        ).follow
    lines = _traced(snapshot.grid, name, places, follow, _DIRECTIONS[direction])
    return lines.with_fields(snapshot, *sample) if sample else lines


def _followed(
    follow: Callable[[Array, int], Half], seeds: Array, signs: Sequence[int]
) -> list[Half]:
    """Follow all seeds each way; a line that closed on the first way is not followed again."""
    first = follow(seeds, signs[0])
    if len(signs) == 1:
        return [first]
    closed = first.reason == reasons.CLOSED
    second = follow(np.where(closed[:, None], np.nan, seeds), signs[1])
    second.reason[closed] = reasons.CLOSED
    return [first, second]


class LinearWalk:
    """A field ready to be followed with linear interpolation; see `trace_lines`."""

    def __init__(
        self,
        snapshot: Snapshot,
        name: str,
        tolerance: float,
        most_cells: float,
        longest: float,
        most_steps: int,
        poloidal: bool,
    ) -> None:
        from fieldviz.lines._point_kernels import largest_number

        self.grid = snapshot.grid
        self.field = _haloed_vectors(snapshot, name, poloidal)
        if self.grid.r_range[0] <= 0:
            raise GridError(
                "Cannot trace lines: expected an inner radius above 0, got 0; cut the origin away."
            )
        around = halo_grid(self.grid)
        x, theta, phi = np.log(around.r), around.theta, around.phi
        steps = (1.0 / np.diff(axis) for axis in (x, theta, phi))
        self.centres = (x, theta, phi, *steps, np.sin(theta), np.cos(theta))
        ends = [0, -1]
        edges = (
            np.log(self.grid.r_edges[:, ends]),
            *(lines[:, ends] for lines in (self.grid.theta_edges, self.grid.phi_edges)),
        )
        self.boxes = np.concatenate(edges, axis=1)
        table = self.grid.table
        self.lattice = (np.log(table.r), table.theta, table.phi)
        self.limits = np.array([self.lattice[0][[0, -1]], table.theta[[0, -1]]])
        weakest = _WEAKEST * largest_number(self.field.reshape(-1))
        self.rules = (weakest, tolerance, most_cells, longest, self.grid.period)
        self.most_steps = most_steps

    def follow(self, seeds: Array, sign: int) -> Half:
        """Follow all seeds along (+1) or against (-1) the field."""
        from fieldviz.lines import _kernels

        places = seeds.copy()
        with np.errstate(invalid="ignore", divide="ignore"):
            places[:, 0] = np.log(seeds[:, 0])
        # A seed on the outermost or innermost edge stays on it.
        on_edge = np.isin(seeds[:, 0], self.grid.r_range)
        places[on_edge, 0] = np.where(
            seeds[on_edge, 0] == self.grid.r_range[0], self.limits[0, 0], self.limits[0, 1]
        )
        n = len(seeds)
        cells = np.zeros((n, 4), dtype=np.int64)
        travel = np.zeros((n, 4))
        travel[:, 1] = np.inf
        _kernels.start_blocks(places, *self.lattice, self.grid.table.block, cells, travel[:, 3])
        reason = np.where(cells[:, 3] < 0, _kernels.OUTSIDE, _kernels.GOING_ON)
        # No azimuth on the axis, so no direction either.
        on_axis = (reason == _kernels.GOING_ON) & (np.sin(places[:, 1]) < 1e-12)
        reason[on_axis] = _kernels.AXIS
        steps = np.full(n, self.most_steps, dtype=np.int64)
        start, field = places.copy(), self.field.reshape(-1)

        def advance(active: IntArray, points: Array, counts: IntArray) -> None:
            _kernels.follow_lines(
                active, places, start, travel, cells, float(sign), field, self.centres, self.boxes,
                self.lattice, self.grid.table.block, self.limits, points, counts, reason, steps,
                self.rules,
            )  # fmt: skip

        return Half(followed_to_the_end(advance, reason, 64), reason, travel[:, 0])


def _haloed_vectors(snapshot: Snapshot, name: str, poloidal: bool) -> Array:
    """Components with their ghost layer, (n_blocks, n_phi + 2, n_theta + 2, n_r + 2, 3)."""
    parts = _VECTORS[name]
    shape = (snapshot.grid.n_blocks, *(n + 2 for n in snapshot.grid.block_shape), 3)
    dtype = np.result_type(*(snapshot.cell(part).dtype for part in parts))
    vectors = np.empty(shape, dtype=dtype)
    if poloidal:
        vectors[..., 2] = 0
    for axis, part in enumerate(parts[: 2 if poloidal else 3]):
        component = halo_array(snapshot.grid, snapshot.cell(part), out=vectors[..., axis])
        _keep_sign_at_walls(component, snapshot.grid)
    return vectors


def _keep_sign_at_walls(haloed: Array, grid: WedgeGrid) -> None:
    """Let no component change sign between the last cell and a wall if it did not before.

    A steep front would else be continued to a zero that is not there, and lines would turn round
    it for ever.
    """
    r, theta = grid.r_range, grid.theta_range
    walls = (
        (grid.r_edges[:, 0] == r[0], (0, 1, 2), 3),
        (grid.r_edges[:, -1] == r[1], (-1, -2, -3), 3),
        (grid.theta_edges[:, 0] == theta[0], (0, 1, 2), 2),
        (grid.theta_edges[:, -1] == theta[1], (-1, -2, -3), 2),
    )
    for blocks, (ghost, first, second), axis in walls:
        if haloed.shape[axis] < 4:
            continue
        view = np.moveaxis(haloed, axis, -1)
        for block in np.flatnonzero(blocks):
            one, two, beyond = (view[block, ..., n] for n in (first, second, ghost))
            side = np.sign(one)  # no products: they leave the range of single precision
            false = (side == np.sign(two)) & (side == -np.sign(one + beyond)) & (side != 0)
            beyond[false] = 0


def _traced(
    grid: WedgeGrid, name: str, seeds: Array, follow: Callable[[Array, int], Half],
    signs: Sequence[int],
) -> LineSet:  # fmt: skip
    """Trace some seeds at a time and lay their lines down behind those before: held only once."""
    n = len(seeds)
    counts = np.zeros((2, n), dtype=np.int64)  # backward, forward
    end_code = np.full((n, 2), reasons.NOT_TRACED, dtype=np.int64)
    length, offsets = np.zeros(n), np.zeros(n + 1, dtype=np.int64)
    seed_index = np.full(n, -1, dtype=np.int64)
    spherical = np.empty((0, 3))
    for start in range(0, n, _LINES_AT_ONCE):
        part = slice(start, min(start + _LINES_AT_ONCE, n))
        halves = _followed(follow, seeds[part], signs)
        for half, sign in zip(halves, signs, strict=True):
            side = 1 if sign > 0 else 0
            counts[side, part], end_code[part, side] = half.counts, half.reason
            length[part] += half.length
        has_seed = (end_code[part] != reasons.WORDS.index("seed outside")).all(axis=1)
        many = np.cumsum(counts[:, part].sum(0) + has_seed)
        offsets[start + 1 : part.stop + 1] = offsets[start] + many
        spherical.resize((offsets[part.stop], 3), refcheck=False)  # moves no byte where it can
        seed_at = offsets[part] + counts[0, part]
        spherical[seed_at[has_seed]] = seeds[part][has_seed]
        seed_index[part][has_seed] = counts[0, part][has_seed]
        for half, sign in zip(halves, signs, strict=True):
            half.lay_out(seed_at, sign, spherical)
    return LineSet(
        spherical, offsets, seed_index, end_code, length, name, grid.period, grid.phi_range[0]
    )


def _checked_seeds(seeds: Array) -> Array:
    places = np.array(seeds, dtype=np.float64, ndmin=2, order="C")
    if places.ndim != 2 or places.shape[1] != 3:
        raise FieldvizError(
            f"Cannot trace lines: expected seeds of shape (n, 3) holding r, theta, phi, got shape "
            f"{np.shape(seeds)}; stack them so."
        )
    return places


def _check_options(
    direction: str, interpolation: str, tolerance: float, most_cells: float, most_steps: int,
    longest: float | None,
) -> None:  # fmt: skip
    for what, given, known in (
        ("direction", direction, tuple(_DIRECTIONS)),
        ("interpolation", interpolation, ("linear", "flux")),
    ):
        if given not in known:
            raise FieldvizError(
                f"Cannot trace lines: expected {what} to be one of {', '.join(known)}, "
                f"got '{given}'; name one of these."
            )
    for what, number, low, high in (
        ("tolerance", tolerance, 1e-13, 1e-2),
        ("most_cells", most_cells, 1e-3, 0.5),
        ("most_steps", most_steps, 1, 10_000_000),
        ("longest", np.inf if longest is None else longest, 1e-300, np.inf),
    ):
        if not low <= number <= high:
            raise FieldvizError(
                f"Cannot trace lines: expected {what} between {low:g} and {high:g}, got {number}; "
                "choose a value in that range, or leave it out for the default."
            )
