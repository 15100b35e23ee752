"""Compiled loops that follow lines through linearly interpolated components.

State is kept in x = ln r, theta and an unwrapped phi. With the parameter tau, ds = r dtau, the line
of a unit vector b is dx/dtau = b_r, dtheta/dtau = b_theta, dphi/dtau = b_phi/sin(theta): free of
scale. Each step uses the data of one block only, its ghost layer included, so the result does not
depend on who holds the other blocks.

Integrator: the embedded pair 3(2) of Bogacki & Shampine 1989 (coefficients from memory). No step is
longer than half a cell, and at cell centres the interpolation has kinks: there a pair of higher
order costs more and gains nothing.
"""

from __future__ import annotations

import numpy as np
from numba import njit, prange

from fieldviz.wedge._kernels import _lattice_block, _wrapped

# Why a line ends; the words are in fieldviz.lines.reasons.
GOING_ON, INNER, OUTER, UPPER, LOWER, AXIS = range(6)
WEAK, NO_DATA, LENGTH, CLOSED, STEPS, OUTSIDE = range(6, 12)

_SAFETY = 0.9
# Roots near the cube root that the order asks for, on the careful side: grow by the fourth root of
# the error, shrink by its square root. A cube root takes as long as a third of a step.
_GROWTH, _SMALL_ERROR = 2.0, 0.04
_SMALLEST_SHARE = 1e-7  # of the longest step: one that shrinks below it ends the line
_SAME_POINT = 1e-14
_CLOSED_CELLS = 1e-3
# A line must have been this far from its seed before it can close. A ring of one azimuth cell gets
# half a cell away.
_LEFT_CELLS = 0.25
_CUT_ROUNDS = 8  # each brings the end of a line of limited length a step's length nearer
_CURVE_CELLS, _CURVE_PIECES = 0.1, 8  # this near to the seed the bend of a step is looked at
_SMALL_ANGLE = 0.1  # up to here the series of `_sine` is exact to rounding
_ONE, _TWO, _THREE = np.uint64(1), np.uint64(2), np.uint64(3)
_FUSED = {"contract"}  # a product and a sum in one instruction


@njit(cache=True, nogil=True, inline="always")
def _hunt(centres, value, hint):
    """Lower index of the interval that holds a value, found from a near guess."""
    last = centres.shape[0] - 2
    while hint < last and value >= centres[hint + 1]:
        hint += 1
    while hint > 0 and value < centres[hint]:
        hint -= 1
    return hint


@njit(cache=True, nogil=True, inline="always")
def _sine(theta, centre, sine, cosine):
    """sin(theta) from a centre nearby: a call of the library takes as long as the eight corners."""
    d = theta - centre
    if abs(d) > _SMALL_ANGLE:
        return np.sin(theta)
    square = d * d
    odd = d * (1 - square / 6 * (1 - square / 20 * (1 - square / 42)))
    even = 1 - square / 2 * (1 - square / 12 * (1 - square / 30 * (1 - square / 56)))
    return sine * even + cosine * odd


@njit(cache=True, nogil=True, inline="always")
def _between(field, at, low, high):
    """One component between two neighbours in r."""
    return low * field[at] + high * field[at + _THREE]


@njit(cache=True, nogil=True, inline="always")
def _direction(field, first, axes, x, theta, phi, i, j, k):
    """b_r, b_theta, b_phi/sin(theta) and |B| by trilinear interpolation in one block; its cell."""
    X, T, P, per_x, per_theta, per_phi, sines, cosines = axes
    i, j, k = _hunt(X, x, i), _hunt(T, theta, j), _hunt(P, phi, k)
    wi, wj, wk = (x - X[i]) * per_x[i], (theta - T[j]) * per_theta[j], (phi - P[k]) * per_phi[k]
    w11 = wk * wj
    w10, w01, vi = wk - w11, wj - w11, 1 - wi
    w00 = 1 - wk - w01
    # Unsigned places in the flat field: signed ones are asked whether they count from the end.
    row = 3 * X.shape[0]
    page = row * T.shape[0]
    near = first + k * page + j * row + 3 * i
    a, b = np.uint64(near), np.uint64(near + row)
    c, d = np.uint64(near + page), np.uint64(near + page + row)
    b_r = w00 * _between(field, a, vi, wi) + w01 * _between(field, b, vi, wi)
    b_r += w10 * _between(field, c, vi, wi) + w11 * _between(field, d, vi, wi)
    b_t = w00 * _between(field, a + _ONE, vi, wi) + w01 * _between(field, b + _ONE, vi, wi)
    b_t += w10 * _between(field, c + _ONE, vi, wi) + w11 * _between(field, d + _ONE, vi, wi)
    b_p = w00 * _between(field, a + _TWO, vi, wi) + w01 * _between(field, b + _TWO, vi, wi)
    b_p += w10 * _between(field, c + _TWO, vi, wi) + w11 * _between(field, d + _TWO, vi, wi)
    size = np.sqrt(b_r * b_r + b_t * b_t + b_p * b_p)
    per_size = 1.0 / size if size > 0.0 else 0.0
    per_sine = 1.0 / _sine(theta, T[j], sines[j], cosines[j])
    return b_r * per_size, b_t * per_size, b_p * per_size * per_sine, size, i, j, k


@njit(cache=True, nogil=True, inline="always")
def _hermite(p0, f0, p1, f1, h, s):
    """Cubic through both ends of a step with both slopes, at the share s of it."""
    t = 1 - s
    return t * t * ((1 + 2 * s) * p0 + s * h * f0) + s * s * ((1 + 2 * t) * p1 - t * h * f1)


@njit(cache=True, nogil=True, inline="always")
def _arc(r0, slope0, r1, slope1, h):
    """Arc length of a step: the trapezium of ds = r dtau with its end correction, fourth order."""
    return h * (0.5 * (r0 + r1) + h / 12 * (r0 * slope0 - r1 * slope1))


@njit(cache=True, nogil=True)
def _part_of_arc(x0, slope0, x1, slope1, h, share):
    """Arc length over the first share of a step: Simpson's rule."""
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


@njit(cache=True, nogil=True, error_model="numpy")
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
def _on_curve(p, slope0, q, slope1, h, s):
    """The point at the share s of a step."""
    return (
        _hermite(p[0], slope0[0], q[0], slope1[0], h, s),
        _hermite(p[1], slope0[1], q[1], slope1[1], h, s),
        _hermite(p[2], slope0[2], q[2], slope1[2], h, s),
    )


@njit(cache=True, nogil=True, error_model="numpy")
def _curve_near_seed(p, slope0, q, slope1, h, seed, period):
    """Nearest to the seed on the cubic of a step, in pieces; what `_near_seed` gives."""
    here = p
    nearest, at, turns = np.inf, 0.0, 0.0
    for piece in range(_CURVE_PIECES):
        there = _on_curve(p, slope0, q, slope1, h, (piece + 1) / _CURVE_PIECES)
        distance, share, turned = _near_seed(here, there, seed, period)
        if distance < nearest:
            nearest, at, turns = distance, (piece + share) / _CURVE_PIECES, turned
        here = there
    return nearest, at, turns


@njit(cache=True, nogil=True, error_model="numpy")
def _at_wall(p, slope0, q, slope1, h, limits):
    """Where a step first meets a wall: reason, share of the step, the point on the wall."""
    share, reason, end = 1.0, GOING_ON, q
    for axis in range(2):
        for side in range(2):
            wall = limits[axis, side]
            beyond = q[axis] > wall if side else q[axis] < wall
            if not beyond:
                continue
            here = _crossing(p[axis], slope0[axis], q[axis], slope1[axis], h, wall)
            if here < share or reason == GOING_ON:
                share = here
                point = _on_curve(p, slope0, q, slope1, h, share)
                if axis == 0:
                    reason, end = INNER + side, (wall, point[1], point[2])
                else:
                    reason, end = _axis_or(UPPER + side, wall), (point[0], wall, point[2])
    return reason, share, end


@njit(cache=True, nogil=True, error_model="numpy")
def _ended(p, slope0, q, slope1, h, gained, limits, room, may_close, seed, width, period):
    """Whether a step ends its line: reason, end point, arc length gained."""
    reason, share, end = _at_wall(p, slope0, q, slope1, h, limits)
    if reason != GOING_ON:
        gained = _part_of_arc(p[0], slope0[0], q[0], slope1[0], h, share)
    if gained > room:
        for _ in range(_CUT_ROUNDS):
            share *= room / gained
            gained = _part_of_arc(p[0], slope0[0], q[0], slope1[0], h, share)
        return LENGTH, _on_curve(p, slope0, q, slope1, h, share), room
    if may_close and reason == GOING_ON:
        distance, part, turns = _near_seed(p, q, seed, period)
        if distance < _CURVE_CELLS * width:
            distance, part, turns = _curve_near_seed(p, slope0, q, slope1, h, seed, period)
        if distance < _CLOSED_CELLS * width:
            return CLOSED, (seed[0], seed[1], seed[2] + turns), part * gained
    return reason, end, gained


@njit(cache=True, nogil=True, inline="always")
def _step(field, first, axes, x, theta, phi, ax, at, ap, h, sign, i, j, k):
    """One step of the embedded pair: end, slope and strength there, the estimated error, cell."""
    h2 = sign * h  # slopes from here on are of the field, not yet of the walk
    bx = bt = bp = cx = ct = cp = fx = ft = fp = size = 0.0
    qx, qt, qp = x + 0.5 * h * ax, theta + 0.5 * h * at, phi + 0.5 * h * ap
    for stage in range(3):  # a loop, as each copy of the interpolation takes seconds to compile
        if stage == 1:
            bx, bt, bp = fx, ft, fp
            qx, qt, qp = x + 0.75 * h2 * bx, theta + 0.75 * h2 * bt, phi + 0.75 * h2 * bp
        elif stage == 2:
            cx, ct, cp = fx, ft, fp
            s1, s2, s3 = 2 / 9 * h, 1 / 3 * h2, 4 / 9 * h2
            qx = x + s1 * ax + s2 * bx + s3 * cx
            qt = theta + s1 * at + s2 * bt + s3 * ct
            qp = phi + s1 * ap + s2 * bp + s3 * cp
        fx, ft, fp, size, i, j, k = _direction(field, first, axes, qx, qt, qp, i, j, k)
    e1, e2, e3, e4 = -5 / 72 * h, 1 / 12 * h2, 1 / 9 * h2, -1 / 8 * h2
    error = max(
        abs(e1 * ax + e2 * bx + e3 * cx + e4 * fx), abs(e1 * at + e2 * bt + e3 * ct + e4 * ft)
    )
    turn = abs(e1 * ap + e2 * bp + e3 * cp + e4 * fp) * axes[6][j]
    return qx, qt, qp, sign * fx, sign * ft, sign * fp, size, max(error, turn), i, j, k


@njit(cache=True, nogil=True, error_model="numpy", fastmath=_FUSED)
def _within_block(
    field, first, axes, box, limits, place, seed, travel, cell, sign, points, count, steps, rules
):
    """Follow one line until it ends, leaves the block, or the buffer is full.

    Returns count, steps left and the reason; with "going on" and room left it has left the block.
    """
    weakest, tolerance, most_cells, longest, period = rules
    x, theta, phi = place[0], place[1], place[2]
    length, h_next, farthest, turns = travel[0], travel[1], travel[2], travel[3]
    per_x, per_theta, per_phi = axes[3], axes[4], axes[5]
    fx, ft, fp, size, i, j, k = _direction(
        field, first, axes, x, theta, phi, cell[0], cell[1], cell[2]
    )
    fx, ft, fp = sign * fx, sign * ft, sign * fp
    r, reason, inside = np.exp(x), GOING_ON, True
    while inside and reason == GOING_ON and count < points.shape[0]:
        if not size > weakest or not size < np.inf:
            reason = WEAK if size <= weakest else NO_DATA
            break
        if steps <= 0:
            reason = STEPS
            break
        ax, at, ap = fx, ft, fp
        cell_step = 1 / max(abs(ax) * per_x[i], abs(at) * per_theta[j], abs(ap) * per_phi[k])
        h = min(h_next, most_cells * cell_step)
        while True:
            qx, qt, qp, fx, ft, fp, size, error, i, j, k = _step(
                field, first, axes, x, theta, phi, ax, at, ap, h, sign, i, j, k
            )
            error /= tolerance
            steps -= 1
            if error <= 1.0:
                break
            if h <= _SMALLEST_SHARE * most_cells * cell_step:
                if not np.isfinite(error):
                    reason = NO_DATA
                break  # As small as it gets: a kink of the interpolation.
            if steps <= 0:
                reason = STEPS
                break
            h *= max(0.2, _SAFETY / np.sqrt(error)) if np.isfinite(error) else 0.25
        if reason != GOING_ON:
            break
        # No root where it would tell little: the next step waits for it.
        h_next = h * (_GROWTH if error < _SMALL_ERROR else _SAFETY / np.sqrt(np.sqrt(error)))
        r_end = np.exp(qx)
        gained = _arc(r, ax, r_end, fx, h)
        inside = box[0] <= qx < box[1] and box[2] <= qt < box[3] and box[4] <= qp < box[5]
        # Further from the seed than a step and a look around, nothing can close.
        about = h + _CURVE_CELLS * cell_step
        at_seed = abs(qx - seed[0]) <= about and abs(qt - seed[1]) <= about
        if not inside or at_seed or farthest <= _LEFT_CELLS or length + gained > longest:
            width = np.sin(theta) / per_phi[k]
            width = min(min(1 / per_x[i], 1 / per_theta[j]), width)
            reason, (qx, qt, qp), gained = _ended(
                (x, theta, phi), (ax, at, ap), (qx, qt, qp), (fx, ft, fp), h, gained, limits,
                longest - length, farthest > _LEFT_CELLS, seed, width, period,
            )  # fmt: skip
            r_end = np.exp(qx)
            q = (qx, qt, qp)
            farthest = max(farthest, _near_seed(q, q, seed, period)[0] / width)
        length += gained
        # A wall met once more by rounding only moves the last point onto it.
        if abs(qx - x) + abs(qt - theta) + abs(qp - phi) > _SAME_POINT:
            count += 1
        x, theta, phi, r = qx, qt, qp, r_end
        if count > 0:
            points[count - 1, 0], points[count - 1, 1] = r, theta
            points[count - 1, 2] = phi + turns * period
    place[0], place[1], place[2] = x, theta, phi
    travel[0], travel[1], travel[2] = length, h_next, farthest
    cell[0], cell[1], cell[2] = i, j, k
    return count, steps, reason


@njit(cache=True, nogil=True, error_model="numpy")
def _follow(
    place, seed, travel, cell, sign, field, centres, boxes, lattice, table, limits, points, rules,
    steps,
):  # fmt: skip
    """Follow one line until it ends or the buffer is full; return points, steps and the reason.

    `travel` holds length, step, farthest distance from the seed in cells, and whole turns of the
    wedge; `limits` the walls. phi stays within the wedge and is never rounded by a change of block.
    """
    X, T, P, per_x, per_theta, per_phi, sines, cosines = centres
    lines_x, lines_theta, lines_phi = lattice
    period = rules[4]
    size = 3 * X.shape[1] * T.shape[1] * P.shape[1]
    count, reason = np.int64(0), GOING_ON  # a plain 0 would be a type of its own, compiled apart
    while count < points.shape[0] and reason == GOING_ON:
        b = cell[3]
        # One view of each array for a block: views are counted, which takes as long as a step.
        axes = (
            X[b], T[b], P[b], per_x[b], per_theta[b], per_phi[b], sines[b], cosines[b]
        )  # fmt: skip
        count, steps, reason = _within_block(
            field, b * size, axes, boxes[b], limits, place, seed, travel, cell, sign, points,
            count, steps, rules,
        )  # fmt: skip
        if place[2] < lines_phi[0]:
            place[2] += period
            travel[3] -= 1.0
        elif place[2] >= lines_phi[0] + period:
            place[2] -= period
            travel[3] += 1.0
        cell[3] = _lattice_block(
            place[0], place[1], place[2], lines_x, lines_theta, lines_phi, table
        )
    return count, steps, reason


@njit(cache=True, nogil=True, parallel=True, error_model="numpy")
def follow_lines(
    active, places, seeds, travels, cells, sign, field, centres, boxes, lattice, table, limits,
    points, counts, reasons, steps_left, rules,
):  # fmt: skip
    """Continue all active lines by at most a buffer of points each."""
    for n in prange(active.shape[0]):
        line = active[n]
        counts[n], steps_left[line], reasons[line] = _follow(
            places[line], seeds[line], travels[line], cells[line], sign, field, centres, boxes,
            lattice, table, limits, points[n], rules, steps_left[line],
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
