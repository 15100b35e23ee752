"""Compiled loops that follow lines through linearly interpolated components.

State is kept in x = ln r, theta and an unwrapped phi. With the parameter tau, ds = r dtau, the line
of a unit vector b is dx/dtau = b_r, dtheta/dtau = b_theta, dphi/dtau = b_phi/sin(theta): free of
scale. Each step uses the data of one block only, its ghost layer included, so the result does not
depend on who holds the other blocks.

Integrator: the embedded pair 5(4) of Dormand & Prince 1980 (coefficients from memory).
"""

from __future__ import annotations

import numpy as np
from numba import njit, prange

from fieldviz.wedge._kernels import _lattice_block, _wrapped

# Why a line ends; the words are in fieldviz.lines.line_set.
GOING_ON, INNER, OUTER, UPPER, LOWER, AXIS = range(6)
WEAK, NO_DATA, LENGTH, CLOSED, STEPS, OUTSIDE = range(6, 12)

_SAFETY = 0.9
_SMALLEST_SHARE = 1e-7  # of a cell: a step that shrinks below it ends the line
_SAME_POINT = 1e-14
_CLOSED_CELLS = 1e-3
# A line must have been this far from its seed before it can close. A ring of one azimuth cell gets
# half a cell away.
_LEFT_CELLS = 0.25
_CUT_ROUNDS = 8  # each brings the end of a line of limited length a step's length nearer
_CURVE_CELLS, _CURVE_PIECES = 0.1, 8  # this near to the seed the bend of a step is looked at


@njit(cache=True, nogil=True, inline="always")
def _hunt(centres, value, hint):
    """Lower index of the interval that holds a value, found from a near guess."""
    last = centres.shape[0] - 2
    while hint < last and value >= centres[hint + 1]:
        hint += 1
    while hint > 0 and value < centres[hint]:
        hint -= 1
    return hint


@njit(cache=True, nogil=True, error_model="numpy")
def _direction(field, x_c, theta_c, phi_c, x, theta, phi, cell):
    """b_r, b_theta, b_phi/sin(theta) and |B| by trilinear interpolation in one block."""
    i = _hunt(x_c, x, cell[0])
    j = _hunt(theta_c, theta, cell[1])
    k = _hunt(phi_c, phi, cell[2])
    cell[0], cell[1], cell[2] = i, j, k
    wi = (x - x_c[i]) / (x_c[i + 1] - x_c[i])
    wj = (theta - theta_c[j]) / (theta_c[j + 1] - theta_c[j])
    wk = (phi - phi_c[k]) / (phi_c[k + 1] - phi_c[k])
    w00, w01, w10, w11 = (1 - wk) * (1 - wj), (1 - wk) * wj, wk * (1 - wj), wk * wj
    b_r = b_t = b_p = 0.0
    for step in range(2):
        share, n = (wi, i + 1) if step else (1 - wi, i)
        s00, s01, s10, s11 = share * w00, share * w01, share * w10, share * w11
        # Single elements: views of rows would be counted, which takes as long as the sums.
        b_r += s00 * field[k, j, n, 0] + s01 * field[k, j + 1, n, 0]
        b_r += s10 * field[k + 1, j, n, 0] + s11 * field[k + 1, j + 1, n, 0]
        b_t += s00 * field[k, j, n, 1] + s01 * field[k, j + 1, n, 1]
        b_t += s10 * field[k + 1, j, n, 1] + s11 * field[k + 1, j + 1, n, 1]
        b_p += s00 * field[k, j, n, 2] + s01 * field[k, j + 1, n, 2]
        b_p += s10 * field[k + 1, j, n, 2] + s11 * field[k + 1, j + 1, n, 2]
    size = np.sqrt(b_r * b_r + b_t * b_t + b_p * b_p)
    if size > 0.0:
        b_r, b_t, b_p = b_r / size, b_t / size, b_p / size
    return b_r, b_t, b_p / np.sin(theta), size


@njit(cache=True, nogil=True, inline="always")
def _cell_size(x_c, theta_c, phi_c, theta, cell):
    """Smallest width of the present cell, in units of r."""
    i, j, k = cell[0], cell[1], cell[2]
    size = min(x_c[i + 1] - x_c[i], theta_c[j + 1] - theta_c[j])
    return min(size, np.sin(theta) * (phi_c[k + 1] - phi_c[k]))


@njit(cache=True, nogil=True, inline="always")
def _hermite(p0, f0, p1, f1, h, s):
    """Cubic through both ends of a step with both slopes, at the share s of it."""
    t = 1 - s
    return t * t * ((1 + 2 * s) * p0 + s * h * f0) + s * s * ((1 + 2 * t) * p1 - t * h * f1)


@njit(cache=True, nogil=True, inline="always")
def _arc(x0, slope0, x1, slope1, h, share):
    """Arc length over a share of a step: Simpson's rule for ds = r dtau."""
    middle = np.exp(_hermite(x0, slope0, x1, slope1, h, 0.5 * share))
    end = np.exp(_hermite(x0, slope0, x1, slope1, h, share))
    return share * h * (np.exp(x0) + 4 * middle + end) / 6


@njit(cache=True, nogil=True, inline="always")
def _crossing(p0, f0, p1, f1, h, wall):
    """Share of a step at which one coordinate meets a wall between its ends."""
    low, high = 0.0, 1.0
    above = p1 < wall  # the start itself may lie on the wall
    for _ in range(60):
        middle = 0.5 * (low + high)
        if (_hermite(p0, f0, p1, f1, h, middle) > wall) == above:
            low = middle
        else:
            high = middle
    return high


@njit(cache=True, nogil=True, inline="always")
def _axis_or(wall, theta):
    """Name a theta wall on the axis for what it is."""
    return AXIS if theta < 1e-12 or theta > np.pi - 1e-12 else wall


@njit(cache=True, nogil=True, inline="always")
def _near_seed(p, q, seed, period):
    """Nearest to the seed on the straight line from p to q: distance over r, share, azimuth on."""
    sine = np.sin(seed[1])
    turns = period * np.floor((p[2] - seed[2]) / period + 0.5)
    ax, at, ap = p[0] - seed[0], p[1] - seed[1], (p[2] - seed[2] - turns) * sine
    dx, dt, dp = q[0] - p[0], q[1] - p[1], (q[2] - p[2]) * sine
    square = dx * dx + dt * dt + dp * dp
    share = 0.0
    if square > 0.0:
        share = min(max(-(ax * dx + at * dt + ap * dp) / square, 0.0), 1.0)
    distance = np.sqrt((ax + share * dx) ** 2 + (at + share * dt) ** 2 + (ap + share * dp) ** 2)
    return distance, share, turns


@njit(cache=True, nogil=True, error_model="numpy")
def _curve_near_seed(p, slope0, q, slope1, h, seed, period):
    """Nearest to the seed on the cubic of a step, in pieces; what `_near_seed` gives."""
    here, there = p.copy(), np.empty(3)
    nearest, at, turns = np.inf, 0.0, 0.0
    for piece in range(_CURVE_PIECES):
        s = (piece + 1) / _CURVE_PIECES
        for axis in range(3):
            there[axis] = _hermite(p[axis], slope0[axis], q[axis], slope1[axis], h, s)
        distance, share, turned = _near_seed(here, there, seed, period)
        if distance < nearest:
            nearest, at, turns = distance, (piece + share) / _CURVE_PIECES, turned
        here[:] = there
    return nearest, at, turns


@njit(cache=True, nogil=True, error_model="numpy")
def _step(F, X, T, P, x, theta, phi, ax, at, ap, h, sign, cell):
    """One step of the embedded pair: end, slope and strength there, and the estimated error."""
    bx, bt, bp, _ = _direction(
        F, X, T, P, x + h / 5 * ax, theta + h / 5 * at, phi + h / 5 * ap, cell
    )
    h2 = sign * h  # slopes from here on are of the field, not yet of the walk
    cx, ct, cp, _ = _direction(
        F, X, T, P,
        x + 3 / 40 * h * ax + 9 / 40 * h2 * bx,
        theta + 3 / 40 * h * at + 9 / 40 * h2 * bt,
        phi + 3 / 40 * h * ap + 9 / 40 * h2 * bp, cell,
    )  # fmt: skip
    a1, a2, a3 = 44 / 45 * h, -56 / 15 * h2, 32 / 9 * h2
    dx, dt, dp, _ = _direction(
        F, X, T, P,
        x + a1 * ax + a2 * bx + a3 * cx,
        theta + a1 * at + a2 * bt + a3 * ct,
        phi + a1 * ap + a2 * bp + a3 * cp, cell,
    )  # fmt: skip
    a1, a2, a3, a4 = 19372 / 6561 * h, -25360 / 2187 * h2, 64448 / 6561 * h2, -212 / 729 * h2
    ex, et, ep, _ = _direction(
        F, X, T, P,
        x + a1 * ax + a2 * bx + a3 * cx + a4 * dx,
        theta + a1 * at + a2 * bt + a3 * ct + a4 * dt,
        phi + a1 * ap + a2 * bp + a3 * cp + a4 * dp, cell,
    )  # fmt: skip
    a1, a2, a3 = 9017 / 3168 * h, -355 / 33 * h2, 46732 / 5247 * h2
    a4, a5 = 49 / 176 * h2, -5103 / 18656 * h2
    gx, gt, gp, _ = _direction(
        F, X, T, P,
        x + a1 * ax + a2 * bx + a3 * cx + a4 * dx + a5 * ex,
        theta + a1 * at + a2 * bt + a3 * ct + a4 * dt + a5 * et,
        phi + a1 * ap + a2 * bp + a3 * cp + a4 * dp + a5 * ep, cell,
    )  # fmt: skip
    a1, a3, a4 = 35 / 384 * h, 500 / 1113 * h2, 125 / 192 * h2
    a5, a6 = -2187 / 6784 * h2, 11 / 84 * h2
    qx = x + a1 * ax + a3 * cx + a4 * dx + a5 * ex + a6 * gx
    qt = theta + a1 * at + a3 * ct + a4 * dt + a5 * et + a6 * gt
    qp = phi + a1 * ap + a3 * cp + a4 * dp + a5 * ep + a6 * gp
    fx, ft, fp, size = _direction(F, X, T, P, qx, qt, qp, cell)
    e1, e3, e4 = 71 / 57600 * h, -71 / 16695 * h2, 71 / 1920 * h2
    e5, e6, e7 = -17253 / 339200 * h2, 22 / 525 * h2, -1 / 40 * h2
    error = max(
        abs(e1 * ax + e3 * cx + e4 * dx + e5 * ex + e6 * gx + e7 * fx),
        abs(e1 * at + e3 * ct + e4 * dt + e5 * et + e6 * gt + e7 * ft),
    )
    turn = abs(e1 * ap + e3 * cp + e4 * dp + e5 * ep + e6 * gp + e7 * fp) * np.sin(theta)
    return qx, qt, qp, sign * fx, sign * ft, sign * fp, size, max(error, turn)


@njit(cache=True, nogil=True, error_model="numpy")
def _follow(
    place, seed, travel, cell, sign, field, x_c, theta_c, phi_c, x_edges, theta_edges, phi_edges,
    lattice, table, limits, points, weakest, tolerance, most_cells, longest, steps,
):  # fmt: skip
    """Follow one line until it ends or the buffer is full; return points, steps and the reason.

    `travel` holds length, step, farthest distance from the seed in cells, and whole turns of the
    wedge; `limits` the walls. phi stays within the wedge and is never rounded by a change of block.
    """
    lines_x, lines_theta, lines_phi = lattice
    first, period = lines_phi[0], lines_phi[-1] - lines_phi[0]
    count, p, q = 0, np.empty(3), np.empty(3)
    way_in, way_out = np.empty(3), np.empty(3)
    block = cell[3]
    x, theta, phi = place[0], place[1], place[2]
    fx, ft, fp, size = _direction(
        field[block], x_c[block], theta_c[block], phi_c[block], x, theta, phi, cell
    )
    while count < points.shape[0]:
        if not np.isfinite(size):
            return count, steps, NO_DATA
        if size <= weakest:
            return count, steps, WEAK
        if steps <= 0:
            return count, steps, STEPS
        width = _cell_size(x_c[block], theta_c[block], phi_c[block], theta, cell)
        h = min(travel[1], most_cells * width)
        F, X, T, P = field[block], x_c[block], theta_c[block], phi_c[block]
        ax, at, ap = sign * fx, sign * ft, sign * fp
        while True:
            q[0], q[1], q[2], fx, ft, fp, size, error = _step(
                F, X, T, P, x, theta, phi, ax, at, ap, h, sign, cell
            )
            error /= tolerance
            steps -= 1
            if error <= 1.0:
                break
            if not np.isfinite(error):
                if h <= _SMALLEST_SHARE * width:
                    return count, steps, NO_DATA
                h *= 0.25
            else:
                if h <= _SMALLEST_SHARE * width:
                    break  # As small as it gets: a kink of the interpolation.
                h *= max(0.2, _SAFETY * error**-0.2)
            if steps <= 0:
                return count, steps, STEPS
        # The next step's size; a very small error would divide by zero.
        travel[1] = h * min(5.0, _SAFETY * max(error, 1e-4) ** -0.2)

        share, reason = 1.0, GOING_ON
        for axis in range(2):
            start, slope0 = (x, ax) if axis == 0 else (theta, at)
            slope1 = fx if axis == 0 else ft
            for end in range(2):
                wall = limits[axis, end]
                if (q[axis] < wall) if end == 0 else (q[axis] > wall):
                    here = _crossing(start, slope0, q[axis], slope1, h, wall)
                    if here < share or reason == GOING_ON:
                        share = here
                        reason = INNER + end if axis == 0 else _axis_or(UPPER + end, wall)
        gained = _arc(x, ax, q[0], fx, h, share)
        if travel[0] + gained > longest:
            reason = LENGTH
            for _ in range(_CUT_ROUNDS):
                share *= (longest - travel[0]) / gained
                gained = _arc(x, ax, q[0], fx, h, share)
            gained = longest - travel[0]
        if reason != GOING_ON:
            ends = (
                _hermite(x, ax, q[0], fx, h, share),
                _hermite(theta, at, q[1], ft, h, share),
                _hermite(phi, ap, q[2], fp, h, share),
            )
            q[0], q[1], q[2] = ends
            if reason != LENGTH:
                axis = 0 if reason <= OUTER else 1
                low = abs(q[axis] - limits[axis, 0]) < abs(q[axis] - limits[axis, 1])
                q[axis] = limits[axis, 0] if low else limits[axis, 1]
        travel[0] += gained

        p[0], p[1], p[2] = x, theta, phi
        distance, part, turns = _near_seed(p, q, seed, period)
        may_close = travel[2] > _LEFT_CELLS and reason == GOING_ON
        if may_close and distance < _CURVE_CELLS * width:
            way_in[0], way_in[1], way_in[2] = ax, at, ap
            way_out[0], way_out[1], way_out[2] = fx, ft, fp
            distance, part, turns = _curve_near_seed(p, way_in, q, way_out, h, seed, period)
        if may_close and distance < _CLOSED_CELLS * width:
            reason = CLOSED
            q[0], q[1], q[2] = seed[0], seed[1], seed[2] + turns
            travel[0] -= (1.0 - part) * gained
        travel[2] = max(travel[2], _near_seed(q, q, seed, period)[0] / width)

        # A wall met once more by rounding only moves the last point onto it.
        if abs(q[0] - x) + abs(q[1] - theta) + abs(q[2] - phi) > _SAME_POINT:
            count += 1
        x, theta, phi = q[0], q[1], q[2]
        if count > 0:
            points[count - 1, 0], points[count - 1, 1] = x, theta
            points[count - 1, 2] = phi + travel[3] * period
        if phi < first:
            phi += period
            travel[3] -= 1.0
        elif phi >= first + period:
            phi -= period
            travel[3] += 1.0
        place[0], place[1], place[2] = x, theta, phi
        if reason != GOING_ON:
            return count, steps, reason
        inside = (
            x_edges[block, 0] <= x < x_edges[block, 1]
            and theta_edges[block, 0] <= theta < theta_edges[block, 1]
            and phi_edges[block, 0] <= phi < phi_edges[block, 1]
            and phi == q[2]
        )
        if not inside:
            block = _lattice_block(x, theta, phi, lines_x, lines_theta, lines_phi, table)
            cell[3] = block
            fx, ft, fp, size = _direction(
                field[block], x_c[block], theta_c[block], phi_c[block], x, theta, phi, cell
            )
        else:
            # First same as last: the slope at the end is the next step's first one.
            fx, ft, fp = sign * fx, sign * ft, sign * fp
    return count, steps, GOING_ON


@njit(cache=True, nogil=True, parallel=True, error_model="numpy")
def follow_lines(
    active, places, seeds, travels, cells, signs, field, x_c, theta_c, phi_c, x_edges,
    theta_edges, phi_edges, lattice, table, limits, points, counts, reasons, steps_left, weakest,
    tolerance, most_cells, longest,
):  # fmt: skip
    """Continue all active lines by at most a buffer of points each."""
    for n in prange(active.shape[0]):
        line = active[n]
        counts[n], steps_left[line], reasons[line] = _follow(
            places[line], seeds[line], travels[line], cells[line], signs[line], field, x_c, theta_c,
            phi_c, x_edges, theta_edges, phi_edges, lattice, table, limits, points[n], weakest,
            tolerance, most_cells, longest, steps_left[line],
        )  # fmt: skip


@njit(cache=True, nogil=True)
def start_blocks(places, lines_x, lines_theta, lines_phi, table, cells, turns):
    """Put each seed that lies inside the wedge into its block; -1 outside. phi is wrapped."""
    first, period = lines_phi[0], lines_phi[-1] - lines_phi[0]
    for line in range(places.shape[0]):
        x, theta, phi = places[line]
        inside = lines_x[0] <= x <= lines_x[-1] and lines_theta[0] <= theta <= lines_theta[-1]
        cells[line, 3] = -1
        if inside and np.isfinite(phi):
            local = _wrapped(phi, first, period)
            turns[line] = np.floor((phi - local) / period + 0.5)
            places[line, 2] = local
            cells[line, 3] = _lattice_block(x, theta, local, lines_x, lines_theta, lines_phi, table)
