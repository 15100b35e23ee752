"""Compiled loops that follow lines through cells with known fluxes through their faces.

In the coordinates u = r^3, w = -cos(theta), v = phi, scaled to 0..1 within a cell, a field whose
fluxes are linear between opposite faces has dxi/dt = F(xi) for each coordinate alone: its
divergence is constant (zero) in the cell and its lines are exponentials. So each cell is crossed
exactly, and only once (Pollock 1988, from memory, for groundwater).
"""

from __future__ import annotations

import numpy as np
from numba import njit, prange

from fieldviz.lines._kernels import (
    _CLOSED_CELLS,
    _CUT_ROUNDS,
    _LEFT_CELLS,
    CLOSED,
    GOING_ON,
    INNER,
    LENGTH,
    NO_DATA,
    STEPS,
    UPPER,
    WEAK,
    _axis_or,
)
from fieldviz.wedge._kernels import _interval, _lattice_block, _wrapped

_GAUSS = 0.5 * np.sqrt(0.6)


@njit(cache=True, nogil=True, inline="always")
def _flow(axis, value):
    """Coordinate in which flux is shared evenly across a cell."""
    if axis == 0:
        return value * value * value
    return -np.cos(value) if axis == 1 else value


@njit(cache=True, nogil=True, inline="always")
def _place(axis, low, high, xi):
    """Position at the share xi of a cell; its edges to the bit."""
    if xi <= 0.0:
        return low
    if xi >= 1.0:
        return high
    a, b = _flow(axis, low), _flow(axis, high)
    value = a + xi * (b - a)
    if axis == 0:
        return np.cbrt(value)
    return np.arccos(-value) if axis == 1 else value


@njit(cache=True, nogil=True, inline="always")
def _share(axis, low, high, value):
    """Inverse of `_place`, within 0..1."""
    a, b = _flow(axis, low), _flow(axis, high)
    return min(max((_flow(axis, value) - a) / (b - a), 0.0), 1.0)


@njit(cache=True, nogil=True, inline="always")
def _exit_time(low, high, xi):
    """Time until xi, moving with dxi/dt = low + (high - low) xi, leaves 0..1, and which way."""
    speed = low + (high - low) * xi
    end = high if speed > 0.0 else low
    if speed == 0.0 or (speed > 0.0) != (end > 0.0) or end == 0.0:
        return np.inf, 0
    way = (1.0 - xi) if speed > 0.0 else -xi
    change = (high - low) * way / speed
    if abs(change) < 1e-9:
        time = way / speed * (1.0 - 0.5 * change)
    else:
        time = np.log1p(change) * way / (speed * change)
    return max(time, 0.0), 1 if speed > 0.0 else -1


@njit(cache=True, nogil=True, inline="always")
def _moved(low, high, xi, time):
    """Share after a time."""
    slope, speed = high - low, low + (high - low) * xi
    growth = slope * time
    if abs(growth) < 1e-9:
        return xi + speed * time * (1.0 + 0.5 * growth)
    return xi + speed * np.expm1(growth) / slope


@njit(cache=True, nogil=True, inline="always")
def _cell_fluxes(block, i, j, k, faces, edges, sign, poloidal, flux):
    """Fluxes through the six faces of a cell, low and high, in the walk's direction."""
    B_r, B_theta, B_phi = faces
    r0, r1 = edges[0][block, i], edges[0][block, i + 1]
    t0, t1 = edges[1][block, j], edges[1][block, j + 1]
    width = edges[2][block, k + 1] - edges[2][block, k]
    step = 2.0 * np.sin(0.5 * (t0 + t1)) * np.sin(0.5 * (t1 - t0))
    annulus = 0.5 * (r1 - r0) * (r1 + r0)
    flux[0, 0] = sign * B_r[block, k, j, i] * r0 * r0 * step * width
    flux[0, 1] = sign * B_r[block, k, j, i + 1] * r1 * r1 * step * width
    flux[1, 0] = sign * B_theta[block, k, j, i] * annulus * np.sin(t0) * width
    flux[1, 1] = sign * B_theta[block, k, j + 1, i] * annulus * np.sin(t1) * width
    flux[2, 0] = flux[2, 1] = 0.0
    if not poloidal:
        flux[2, 0] = sign * B_phi[block, k, j, i] * annulus * (t1 - t0)
        flux[2, 1] = sign * B_phi[block, k + 1, j, i] * annulus * (t1 - t0)


@njit(cache=True, nogil=True, inline="always")
def _speed(flux, xi, r, theta, cube, step, width):
    """|dr/dt| at a place of a cell: the strength of the field times the cell's volume."""
    volume = cube / 3.0 * step * width
    b_r = (flux[0, 0] + (flux[0, 1] - flux[0, 0]) * xi[0]) / (r * r * step * width)
    b_t = (flux[1, 0] + (flux[1, 1] - flux[1, 0]) * xi[1]) * 3.0 * r
    # Next to the axis theta itself is rounded to 1e-8, and the flux falls with its square.
    b_t /= cube * max(np.sin(theta), 1e-8) * width
    b_p = (flux[2, 0] + (flux[2, 1] - flux[2, 0]) * xi[2]) * 3.0 * r * np.sin(theta) / (cube * step)
    return volume * np.sqrt(b_r * b_r + b_t * b_t + b_p * b_p)


@njit(cache=True, nogil=True, error_model="numpy")
def _crossed_length(flux, xi, time, low, high):
    """Arc length over a time within one cell: three-point Gauss quadrature of the speed."""
    cube = high[0] ** 3 - low[0] ** 3
    step = np.cos(low[1]) - np.cos(high[1])
    total, here = 0.0, np.empty(3)
    for point in range(3):
        at = time * (0.5 + (point - 1) * _GAUSS)
        for axis in range(3):
            here[axis] = _moved(flux[axis, 0], flux[axis, 1], xi[axis], at)
        r, theta = _place(0, low[0], high[0], here[0]), _place(1, low[1], high[1], here[1])
        weight = 4.0 / 9.0 if point == 1 else 5.0 / 18.0
        total += weight * _speed(flux, here, r, theta, cube, step, high[2] - low[2])
    return total * time


@njit(cache=True, nogil=True, error_model="numpy")
def _next_cell(cell, xi, axis, way, edges, lattice, table):
    """Step through a face into the next cell; whether that is a wall, and turns of the wedge."""
    block, turned = cell[3], 0
    n = edges[axis].shape[1] - 1
    xi[axis] = 0.0 if way > 0 else 1.0
    if 0 <= cell[axis] + way < n:
        cell[axis] += way
        return 0, turned
    edge = edges[axis][block, n if way > 0 else 0]
    lines = lattice[axis]
    last = lines.shape[0] - 1
    here = _interval(lines, edge) if edge < lines[last] else last
    beyond = here if way > 0 else here - 1
    if beyond < 0 or beyond >= last:
        if axis < 2:
            xi[axis] = 1.0 if way > 0 else 0.0
            return 1, turned
        turned = way
        beyond = 0 if way > 0 else last - 1
    spot, index = np.empty(3), np.empty(3, dtype=np.int64)
    for other in range(3):
        low, high = edges[other][block, cell[other]], edges[other][block, cell[other] + 1]
        spot[other] = _place(other, low, high, xi[other])
        index[other] = beyond if other == axis else _interval(lattice[other], spot[other])
    target = table[index[2], index[1], index[0]]
    for other in range(3):
        line = edges[other]
        if other == axis:
            cell[other] = 0 if way > 0 else n - 1
            continue
        c = cell[other]
        if line[target, c] == line[block, c] and line[target, c + 1] == line[block, c + 1]:
            continue  # The same cell edges: the share stays to the bit.
        cell[other] = _interval(line[target], spot[other])
        low, high = line[target, cell[other]], line[target, cell[other] + 1]
        xi[other] = _share(other, low, high, spot[other])
    cell[3] = target
    return 0, turned


@njit(cache=True, nogil=True, error_model="numpy")
def _follow(
    cell, xi, travel, sign, faces, edges, lattice, table, weakest, most_cells, longest, poloidal,
    seed, period, points, steps,
):  # fmt: skip
    """Follow one line; `travel` holds length, turns, the farthest distance and idle crossings."""
    flux, low, high, spot = np.empty((3, 2)), np.empty(3), np.empty(3), np.empty(3)
    start = np.empty(3)
    count = 0
    while count < points.shape[0] - 64:
        if steps <= 0:
            return count, steps, STEPS
        steps -= 1
        block = cell[3]
        _cell_fluxes(block, cell[0], cell[1], cell[2], faces, edges, sign, poloidal, flux)
        for axis in range(3):
            low[axis] = edges[axis][block, cell[axis]]
            high[axis] = edges[axis][block, cell[axis] + 1]
        time, axis_out, way = np.inf, -1, 0
        for axis in range(3):
            if not np.isfinite(flux[axis, 0] + flux[axis, 1]):
                return count, steps, NO_DATA
            here, direction = _exit_time(flux[axis, 0], flux[axis, 1], xi[axis])
            if here < time:
                time, axis_out, way = here, axis, direction
        cube = high[0] ** 3 - low[0] ** 3
        step = np.cos(low[1]) - np.cos(high[1])
        for axis in range(3):
            start[axis] = spot[axis] = _place(axis, low[axis], high[axis], xi[axis])
        pace = _speed(flux, xi, start[0], start[1], cube, step, high[2] - low[2])
        volume = cube / 3.0 * step * (high[2] - low[2])
        if axis_out < 0 or pace <= weakest * volume:
            return count, steps, WEAK
        travel[3] = travel[3] + 1.0 if time == 0.0 else 0.0
        if travel[3] > 6.0:
            return count, steps, WEAK  # Faces of neighbours that point at each other.
        if time > 0.0:
            # Speed grows exponentially: parts of equal time differ in length by up to e.
            parts = 1.0
            for axis in range(3):
                moved = _moved(flux[axis, 0], flux[axis, 1], xi[axis], time)
                growth = abs(flux[axis, 1] - flux[axis, 0]) * time
                parts = max(parts, np.ceil(abs(moved - xi[axis]) / most_cells - 1e-9), growth)
            parts = int(min(64.0, np.ceil(parts)))
            reason = GOING_ON
            for part in range(parts):
                piece = time / parts
                gained = _crossed_length(flux, xi, piece, low, high)
                if travel[0] + gained > longest:
                    reason = LENGTH
                    for _ in range(_CUT_ROUNDS):
                        piece *= (longest - travel[0]) / gained
                        gained = _crossed_length(flux, xi, piece, low, high)
                    gained = longest - travel[0]
                travel[0] += gained
                for axis in range(3):
                    xi[axis] = _moved(flux[axis, 0], flux[axis, 1], xi[axis], piece)
                    xi[axis] = min(max(xi[axis], 0.0), 1.0)
                if part == parts - 1 and reason == GOING_ON:
                    xi[axis_out] = 1.0 if way > 0 else 0.0
                for axis in range(3):
                    spot[axis] = _place(axis, low[axis], high[axis], xi[axis])
                    points[count, axis] = spot[axis]
                size = min((high[0] - low[0]) / spot[0], high[1] - low[1])
                size = min(size, np.sin(spot[1]) * (high[2] - low[2]))
                far, share, turns = _past_seed(start, spot, seed, period)
                if travel[2] > _LEFT_CELLS and far < _CLOSED_CELLS * size and reason == GOING_ON:
                    reason = CLOSED
                    points[count] = seed
                    points[count, 2] += turns
                    travel[0] -= (1.0 - share) * gained
                travel[2] = max(travel[2], _past_seed(spot, spot, seed, period)[0] / size)
                points[count, 2] += travel[1] * period
                count += 1
                if reason != GOING_ON:
                    return count, steps, reason
                start[0], start[1], start[2] = spot[0], spot[1], spot[2]
        wall, turned = _next_cell(cell, xi, axis_out, way, edges, lattice, table)
        travel[1] += turned
        if wall:
            if axis_out == 0:
                return count, steps, INNER + (1 if way > 0 else 0)
            return count, steps, _axis_or(UPPER + (1 if way > 0 else 0), spot[1])
    return count, steps, GOING_ON


@njit(cache=True, nogil=True, inline="always")
def _past_seed(p, q, seed, period):
    """Nearest to the seed on the straight line from p to q: distance over r, share, azimuth on."""
    sine, r = np.sin(seed[1]), seed[0]
    turns = period * np.floor((p[2] - seed[2]) / period + 0.5)
    ax, at, ap = (p[0] - r) / r, p[1] - seed[1], (p[2] - seed[2] - turns) * sine
    dx, dt, dp = (q[0] - p[0]) / r, q[1] - p[1], (q[2] - p[2]) * sine
    square = dx * dx + dt * dt + dp * dp
    share = 0.0
    if square > 0.0:
        share = min(max(-(ax * dx + at * dt + ap * dp) / square, 0.0), 1.0)
    distance = np.sqrt((ax + share * dx) ** 2 + (at + share * dt) ** 2 + (ap + share * dp) ** 2)
    return distance, share, turns


@njit(cache=True, nogil=True, error_model="numpy")
def start_cells(seeds, edges, lattice, table, cells, shares, turns):
    """Put each seed inside the wedge into its cell; block -1 outside."""
    first, period = lattice[2][0], lattice[2][-1] - lattice[2][0]
    for line in range(seeds.shape[0]):
        r, theta, phi = seeds[line]
        inside = lattice[0][0] <= r <= lattice[0][-1] and lattice[1][0] <= theta <= lattice[1][-1]
        cells[line, 3] = -1
        if not (inside and np.isfinite(phi)):
            continue
        local = _wrapped(phi, first, period)
        turns[line] = np.floor((phi - local) / period + 0.5)
        block = _lattice_block(r, theta, local, lattice[0], lattice[1], lattice[2], table)
        cells[line, 3] = block
        for axis in range(3):
            value = r if axis == 0 else (theta if axis == 1 else local)
            line_edges = edges[axis][block]
            c = _interval(line_edges, value)
            cells[line, axis] = c
            shares[line, axis] = _share(axis, line_edges[c], line_edges[c + 1], value)


@njit(cache=True, nogil=True, parallel=True, error_model="numpy")
def follow_lines(
    active, cells, shares, travels, sign, faces, edges, lattice, table, weakest, most_cells,
    longest, poloidal, seeds, period, points, counts, reasons, steps_left,
):  # fmt: skip
    """Continue all active lines by at most a buffer of points each."""
    for n in prange(active.shape[0]):
        line = active[n]
        counts[n], steps_left[line], reasons[line] = _follow(
            cells[line], shares[line], travels[line], sign, faces, edges, lattice, table, weakest,
            most_cells, longest, poloidal, seeds[line], period, points[n], steps_left[line],
        )  # fmt: skip
