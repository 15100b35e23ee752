"""The electric current density on the edges of cells, from the magnetic field on their faces.

Stokes' theorem on the loop through the centres of the four faces that meet at an edge. With
differences between the two sides of the edge, lengths and areas of the loop exact:

    J_r A_r         = [B_phi sin(theta)]_theta r dphi - [B_theta]_phi r dtheta
    J_theta A_theta = [B_r]_phi dr - [B_phi r]_r sin(theta) dphi
    J_phi A_phi     = [B_theta r]_r dtheta - [B_r]_theta dr

It is the most compact form that a face-centred field allows (Evans & Hawley 1988, from memory):
the current out of every closed surface of loops is zero to rounding.

At a level jump the faces beyond it are parabolas through those of the other level; at the walls in
r and theta they are continued by parabolas, so that the current there is one-sided. All of it is
second order.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from fieldviz.derived.stencils import Stencils, stencils
from fieldviz.errors import MissingFieldError
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.geometry import annulus_widths, cosine_steps
from fieldviz.wedge.halo import HaloGrid, halo_grid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["EdgeCurrent", "cell_current", "edge_current"]

R, THETA, PHI = range(3)  # axes as in `Stencils`; in arrays they run the other way
WALLS = "current on a wall is one-sided: the field is continued past it by a parabola"
_SAME_ANGLE = 1e-9
_DOUBLE = np.dtype(np.float64)


@dataclass(frozen=True, eq=False)
class EdgeCurrent:
    """Current density along the edges of cells, at the middle of each edge.

    Attributes
    ----------
    r : (n_blocks, n_phi + 1, n_theta + 1, n_r) array
        J_r on edges along r, field over length and mu0, in the precision of the field.
    theta : (n_blocks, n_phi + 1, n_theta, n_r + 1) array
        J_theta on edges along theta.
    phi : (n_blocks, n_phi, n_theta + 1, n_r + 1) array
        J_phi on edges along phi.
    snapshot : Snapshot
        What it was worked out from.
    notes : tuple of str
        What the numbers rest on.
    """

    r: Array
    theta: Array
    phi: Array
    snapshot: Snapshot
    notes: tuple[str, ...]

    @cached_property
    def one_sided(self) -> tuple[Array, Array, Array]:
        """Edges on a wall in r or theta, for each component; bool, of the component's shape."""
        grid = self.snapshot.grid
        on_r = _on_ends(grid.r_edges, grid.r_range)[:, None, None, :]
        on_theta = _on_ends(grid.theta_edges, grid.theta_range)[:, None, :, None]
        return (
            np.broadcast_to(on_theta, self.r.shape),
            np.broadcast_to(on_r, self.theta.shape),
            np.broadcast_to(on_theta | on_r, self.phi.shape),
        )

    def cell_means(self) -> tuple[Array, Array, Array]:
        """Mean of the four edges around each cell, (n_blocks, n_phi, n_theta, n_r) each."""
        return (
            _mean_of_two(_mean_of_two(self.r, 1), 2),
            _mean_of_two(_mean_of_two(self.theta, 1), 3),
            _mean_of_two(_mean_of_two(self.phi, 2), 3),
        )


def edge_current(snapshot: Snapshot) -> EdgeCurrent:
    """Work out J = curl B / mu0 on edges.

    Parameters
    ----------
    snapshot : Snapshot
        With all three magnetic components on faces. `mu0` is 1, or 4 pi for Gaussian fields (c=1).

    Returns
    -------
    EdgeCurrent
        A NaN in B spoils only the edges whose loop, or whose continuation past a wall, reaches it.

    Raises
    ------
    MissingFieldError
        If a component has no face values; `current_density` works from cell values.

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.derived.edge_current import edge_current
    >>> edge_current(fv.demo_disc(shape=(4, 32, 24))).phi.shape
    (1, 4, 33, 25)
    """
    missing = [name for name in MAGNETIC if name not in snapshot.faces]
    if missing:
        raise MissingFieldError(
            "Cannot work out the current on edges: expected the magnetic field on faces, got a "
            f"snapshot without face values of {', '.join(missing)}; use current_density, which "
            "takes cell values."
        )
    grid = snapshot.grid
    known, around = stencils(grid), halo_grid(grid)
    faces = _Faces(snapshot, known, around)
    shapes = ((1, 1, 0), (1, 0, 1), (0, 1, 1))
    found = [
        np.empty((grid.n_blocks, *(n + m for n, m in zip(grid.block_shape, more, strict=True))),
                 faces.dtype)
        for more in shapes
    ]  # fmt: skip
    for block in range(grid.n_blocks):
        for component, values in zip(found, _block_current(faces, block), strict=True):
            component[block] = values / snapshot.mu0
    notes = [WALLS]
    notes += _current_on_the_axis(snapshot, found[R])
    if grid.r_range[0] == 0:
        for component in found[1:]:
            component[grid.r_edges[:, 0] == 0, ..., 0] = np.nan
        notes.append("no current on edges at the origin, where their loops have no area: NaN")
    without = sum(int(np.count_nonzero(~np.isfinite(component))) for component in found)
    if without:
        notes.append(f"{without} edges have no number")
    return EdgeCurrent(found[R], found[THETA], found[PHI], snapshot, tuple(notes))


def cell_current(snapshot: Snapshot) -> tuple[Array, Array, Array]:
    """The same as `edge_current(snapshot).cell_means()`, without keeping the edges.

    Parameters
    ----------
    snapshot : Snapshot
        With all three magnetic components on faces, and neither axis nor origin in the wedge.

    Returns
    -------
    J_r, J_theta, J_phi : (n_blocks, n_phi, n_theta, n_r) arrays
        In the precision of the field.
    """
    from fieldviz.derived._current_kernels import cell_currents

    grid = snapshot.grid
    faces = _Faces(snapshot, stencils(grid), halo_grid(grid))
    shape = (grid.n_blocks, *grid.block_shape)
    found = np.empty(shape, faces.dtype), np.empty(shape, faces.dtype), np.empty(shape, faces.dtype)
    for block in range(grid.n_blocks):
        around = faces.around
        r, theta, phi = around.r[block], around.theta[block], around.phi[block]
        r_own, theta_own, _ = grid.cell_centres(block)
        layers = [
            faces.with_layers(component, block, axis, faces.dtype)
            for component in (R, THETA, PHI)
            for axis in (R, THETA, PHI)
            if axis != component
        ]
        cell_currents(
            *layers, r, r_own, np.diff(r), annulus_widths(r), np.sin(theta), np.sin(theta_own),
            np.diff(theta), cosine_steps(theta), np.diff(phi), 1.0 / snapshot.mu0,
            *(component[block] for component in found),
        )  # fmt: skip
    return found


class _Faces:
    """Face values block by block, with one layer more along an axis across their own."""

    def __init__(self, snapshot: Snapshot, known: Stencils, around: HaloGrid) -> None:
        self.grid, self.known, self.around = snapshot.grid, known, around
        self._values = [
            _with_level_jumps(snapshot, known, around, axis, name)
            for axis, name in enumerate(MAGNETIC)
        ]
        self.dtype = np.result_type(*self._values)

    def with_layers(
        self, component: int, block: int, axis: int, dtype: np.dtype = _DOUBLE
    ) -> Array:
        """Face values, and the next ones beyond both ends of an axis across their own."""
        values, where = self._values[component], 2 - axis
        own = values[block].astype(dtype, copy=False)
        layers = []
        for side in (0, 1):
            layer = self._past_wall(own, block, axis, side)
            if layer is None:
                other, index = self.known.beyond[block, axis, side]
                layer = np.take(values[other], [index], axis=where)
            layers.append(layer.astype(dtype, copy=False))
        return np.concatenate([layers[0], own, layers[1]], axis=where)

    def _past_wall(self, own: Array, block: int, axis: int, side: int) -> Array | None:
        """The parabola through the last three values, one step past a wall; None without one."""
        if axis == PHI:
            return None
        name = ("r", "theta")[axis]
        if np.isnan(getattr(self.known, name).walls[block, side]):
            return None
        places, where = getattr(self.around, name)[block], 2 - axis
        count = min(3, own.shape[where])
        index = np.arange(count) if side == 0 else own.shape[where] - 1 - np.arange(count)
        nodes, ghost = places[index + 1], places[-1 if side else 0]
        total = np.zeros(1)
        for n in range(count):
            others = np.delete(nodes, n)
            weight = np.prod((ghost - others) / (nodes[n] - others))
            total = total + weight * np.take(own, [index[n]], axis=where)
        return total


def _with_level_jumps(
    snapshot: Snapshot, known: Stencils, around: HaloGrid, axis: int, name: str
) -> Array:
    """Face values of a component, and in extra blocks the faces beyond level jumps."""
    from fieldviz.derived._kernels import fill_layers

    values, table = snapshot.faces[name], snapshot.grid.table
    if not known.n_extra:
        return values
    extended = np.zeros((len(values) + known.n_extra, *values.shape[1:]), values.dtype)
    extended[: len(values)] = values
    places = [around.r, around.theta, around.phi]
    places[axis] = (around.r_edges, around.theta_edges, around.phi_edges)[axis]
    # Along its own axis a block holds the faces of both its ends: no neighbour is needed.
    neighbour = known.neighbour.copy()
    neighbour[:, axis] = -1
    sides = known.sides[known.sides[:, 1] != axis]
    fill_layers(
        sides, extended, known.beyond, neighbour, *places, (table.r, table.theta, table.phi),
        table.block,
    )  # fmt: skip
    return extended


def _block_current(faces: _Faces, block: int) -> tuple[Array, Array, Array]:
    """Curl of B on one block's edges."""
    around, grid = faces.around, faces.grid
    r, theta, phi = around.r[block], around.theta[block], around.phi[block]
    r_own, theta_own, _ = grid.cell_centres(block)
    dr, dtheta, dphi = np.diff(r), np.diff(theta)[:, None], np.diff(phi)[:, None, None]
    caps, rings = cosine_steps(theta)[:, None], annulus_widths(r)
    sine, own_sine = np.sin(theta)[:, None], np.sin(theta_own)[:, None]

    def across(component: int, axis: int, metric: Array | float = 1.0) -> Array:
        return np.diff(metric * faces.with_layers(component, block, axis), axis=2 - axis)

    # On the axis and at the origin loops have no area; see `_current_on_the_axis`.
    with np.errstate(divide="ignore", invalid="ignore"):
        along_r = across(PHI, THETA, sine) * dphi - across(THETA, PHI) * dtheta
        along_r /= r_own * caps * dphi
        along_theta = across(R, PHI) * dr - across(PHI, R, r) * own_sine * dphi
        along_theta /= rings * own_sine * dphi
        along_phi = (across(THETA, R, r) * dtheta - across(R, THETA) * dr) / (rings * dtheta)
    return along_r, along_theta, along_phi


def _current_on_the_axis(snapshot: Snapshot, along_r: Array) -> list[str]:
    """Set J_r on the axis from the loop around it, where the blocks there are alike; notes."""
    grid, notes = snapshot.grid, []
    for side, end in ((0, 0.0), (-1, np.pi)):
        if grid.theta_range[side] != end:
            continue
        touching = np.flatnonzero(grid.theta_edges[:, side] == end)
        unknown = 0
        for inner, outer in np.unique(grid.r_edges[touching][:, [0, -1]], axis=0):
            alike = (grid.r_edges[touching, 0] == inner) & (grid.r_edges[touching, -1] == outer)
            ring = touching[alike]
            spans = np.ptp(grid.phi_edges[ring], axis=1)
            closed = abs(spans.sum() - grid.period) < _SAME_ANGLE
            value = _loop_around_axis(snapshot, ring, side) if closed else np.nan
            along_r[ring, :, side, :] = value / snapshot.mu0
            unknown += 0 if closed else int(np.size(along_r[ring, :, side, :]))
        notes.append("current along the axis is from the loop of B_phi around it")
        if unknown:
            notes.append(f"{unknown} edges on the axis, between levels, have no loop: NaN")
    return notes


def _loop_around_axis(snapshot: Snapshot, ring: Array, side: int) -> Array:
    """Curl of B along the axis, (n_r,), from B_phi on the cells around it."""
    grid, total = snapshot.grid, np.zeros(snapshot.grid.block_shape[2])
    for block in ring:
        faces = snapshot.faces.block("magnetic_phi", int(block))[:, side].astype(np.float64)
        total += np.diff(grid.phi_edges[block]) @ (0.5 * (faces[1:] + faces[:-1]))
    r, theta, _ = grid.cell_centres(int(ring[0]))
    # 1 - cos = 2 sin^2(half); at the south pole southward is inward, and the loop runs backward.
    away = theta[0] if side == 0 else np.pi - theta[-1]
    sign = 1.0 if side == 0 else -1.0
    return np.asarray(sign * total * np.sin(away) / (2 * r * np.sin(away / 2) ** 2 * grid.period))


def _on_ends(edges: Array, ends: tuple[float, float]) -> Array:
    return np.asarray((edges == ends[0]) | (edges == ends[1]))


def _mean_of_two(values: Array, axis: int) -> Array:
    low = np.take(values, range(values.shape[axis] - 1), axis=axis)
    return (low + np.take(values, range(1, values.shape[axis]), axis=axis)) * values.dtype.type(0.5)
