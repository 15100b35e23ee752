"""Tracing by either interpolation: where lines end and why, weak fields, odd grids."""

from __future__ import annotations

import numpy as np
import pytest
from line_fields import (
    BOTH,
    PHI,
    THETA,
    R,
    formula_snapshot,
    psi_snapshot,
    vertical,
    winding_disc,
)

import fieldviz as fv
from fieldviz.errors import GridError

SEED = np.array([[2.0, 1.5, 0.05]])
RING = np.linspace(0, 2 * np.pi, 9)


def trace(snapshot, seeds, interpolation="linear", **options):
    return fv.trace_lines(snapshot, "magnetic", seeds, interpolation=interpolation, **options)


def outward():
    return formula_snapshot(lambda r, t, p: r**-2 + 0 * t + 0 * p, 0.0, 0.0)


def southward():
    return formula_snapshot(0.0, lambda r, t, p: 1 / (r * np.sin(t)) + 0 * p, 0.0)


# ---- walls --------------------------------------------------------------------------------------


@BOTH
@pytest.mark.parametrize(
    ("make", "axis", "walls"),
    [(outward, 0, ("inner wall", "outer wall")), (southward, 1, ("upper wall", "lower wall"))],
)
def test_lines_end_on_their_walls(interpolation, make, axis, walls):
    """Also from seeds on a wall: no part of the line lies along the wall."""
    span = ((R[0], R[-1]), (THETA[0], THETA[-1]))[axis]
    seeds = np.tile([2.0, 1.5, 0.1], (3, 1))
    seeds[1:, axis] = span
    lines = trace(make(), seeds, interpolation)
    assert lines.end_reason == [walls] * 3
    length = 3.0 if axis == 0 else 2.0 * np.ptp(THETA)
    np.testing.assert_allclose(lines.length, length, rtol=1e-8)
    for number in range(3):
        line = lines.line(number)
        assert (line[0, axis], line[-1, axis]) == span
        others = np.delete(line, axis, axis=1)
        np.testing.assert_allclose(others - others[0], 0, atol=1e-13)
        assert (np.diff(line[:, axis]) > 0).all()


@BOTH
def test_seeds_on_corners_and_edges(interpolation):
    """All eight corners of the wedge; phi on its seam. Every line of B_z keeps its R."""
    seeds = np.array([[r, t, p] for r in R[[0, -1]] for t in THETA[[0, -1]] for p in PHI[[0, -1]]])
    lines = trace(vertical(), seeds, interpolation)
    assert np.isfinite(lines.spherical).all()
    R_of = lines.spherical[:, 0] * np.sin(lines.spherical[:, 1])
    wanted = np.repeat(seeds[:, 0] * np.sin(seeds[:, 1]), np.diff(lines.offsets))
    np.testing.assert_allclose(R_of, wanted, rtol=5e-3)
    np.testing.assert_array_equal(lines.spherical[lines.offsets[:-1] + lines.seed_index], seeds)
    # From the seam and from a whole period on: the same line.
    np.testing.assert_allclose(lines.length[::2], lines.length[1::2], rtol=1e-12)


@BOTH
def test_seeds_outside_or_not_a_number(interpolation):
    bad = [[0.5, 1.5, 0], [9, 1.5, 0], [2, 0.1, 0], [2, 3.1, 0], [np.nan, 1.5, 0],
           [2, np.nan, 0], [2, 1.5, np.nan], [2, 1.5, np.inf], [-2, 1.5, 0]]  # fmt: skip
    lines = trace(vertical(), bad + SEED.tolist(), interpolation)
    assert lines.end_reason[:-1] == [("seed outside",) * 2] * len(bad)
    assert (lines.seed_index[:-1] == -1).all()
    assert (lines.length[:-1] == 0).all()
    assert lines.offsets[-2] == 0 < lines.offsets[-1]


@BOTH
def test_no_seeds(interpolation):
    lines = trace(vertical(), np.empty((0, 3)), interpolation)
    assert len(lines) == 0
    assert lines.spherical.shape == lines.points.shape == (0, 3)
    assert lines.footpoints.position.shape == (0, 2, 3)
    assert len(lines.midplane_crossings()[0]) == 0
    assert lines.end_reason == []


@BOTH
def test_layout_of_seeds_does_not_matter(interpolation):
    seeds = np.array([[2.0, 1.5, 0.1], [3.0, 1.4, 0.2]])
    kept = seeds.copy()
    plain = trace(vertical(), seeds, interpolation)
    for given in (np.asfortranarray(seeds), seeds.tolist(), seeds.astype(np.float32)):
        np.testing.assert_allclose(
            trace(vertical(), given, interpolation).spherical, plain.spherical, rtol=1e-6
        )
    np.testing.assert_array_equal(seeds, kept)
    one = trace(vertical(), seeds[0], interpolation)
    np.testing.assert_array_equal(one.spherical, plain.line(0))


# ---- limits -------------------------------------------------------------------------------------


@BOTH
@pytest.mark.parametrize("longest", [1e-6, 0.013, 0.5])
def test_longest(interpolation, longest):
    """Ends exactly there along a radial line, each way, also within a step: r = 2 -+ longest."""
    lines = trace(outward(), [[2.0, 1.5, 0.1]], interpolation, longest=longest)
    assert lines.end_reason == [("length", "length")]
    assert lines.length[0] == pytest.approx(2 * longest, rel=1e-12)
    moved = lines.spherical[[0, -1], 0] - 2.0
    np.testing.assert_allclose(moved, [-longest, longest], rtol=1e-7, atol=1e-14)


@BOTH
def test_most_steps(interpolation):
    lines = trace(vertical(), SEED, interpolation, most_steps=3)
    assert lines.end_reason == [("step limit", "step limit")]
    unlimited = trace(vertical(), SEED, interpolation)
    assert 2 < len(lines.spherical) < len(unlimited.spherical)
    at = unlimited.seed_index[0] - lines.seed_index[0]
    np.testing.assert_array_equal(
        lines.spherical, unlimited.spherical[at : at + len(lines.spherical)]
    )


@BOTH
def test_many_short_lines_and_a_long_one(interpolation):
    disc = winding_disc()
    rng = np.random.default_rng(0)
    n = 100_000
    seeds = np.column_stack([rng.uniform(1.1, 4.5, n), rng.uniform(1, 2, n), rng.uniform(0, 9, n)])
    lines = trace(disc, seeds, interpolation, direction="forward", longest=0.02)
    ends = np.array([end for _, end in lines.end_reason])
    assert (ends == "length").mean() > 0.99
    np.testing.assert_allclose(lines.length[ends == "length"], 0.02, rtol=1e-12)
    np.testing.assert_array_equal(lines.spherical[lines.offsets[:-1]], seeds)

    ring = psi_snapshot(
        lambda r, t: -(np.log(r / 1.7) ** 2) - (t - np.pi / 2) ** 2,
        r=np.geomspace(1, 3, 33),
        theta=np.pi / 2 + np.linspace(-0.5, 0.5, 33),
        phi=np.linspace(0, 0.4, 5),
        toroidal=0.21,
    )
    long = trace(ring, [[2.1, 1.6, 0.1]], interpolation, longest=3000.0, most_steps=10**6)
    assert set(long.end_reason[0]) <= {"length", "closed"}
    assert len(long.spherical) > 20_000
    # On its torus to the end.
    r, theta, _ = long.spherical.T
    psi = np.log(r / 1.7) ** 2 + (theta - np.pi / 2) ** 2
    assert np.ptp(psi) < 0.15 * psi.mean()


# ---- closed lines -------------------------------------------------------------------------------


@BOTH
@pytest.mark.parametrize("phi", [PHI, np.array([0.0, 0.1]), RING, np.linspace(0, 1, 4)])
def test_toroidal_lines_close_once(interpolation, phi):
    """Length R times the period, counted once though both ways were wanted."""
    snapshot = formula_snapshot(0.0, 0.0, lambda r, t, p: 1 / (r * np.sin(t)) + 0 * p, phi=phi)
    seeds = np.array([[2, 1.5, 0.05], [2, np.pi / 2, phi[0]], [1, 1.5, 0.3], [2, THETA[0], 7.1]])
    seeds[3, 2] = phi[0] + 0.37
    lines = trace(snapshot, seeds, interpolation)
    assert lines.end_reason == [("closed", "closed")] * 4
    around = seeds[:, 0] * np.sin(seeds[:, 1]) * np.ptp(phi)
    np.testing.assert_allclose(lines.length, around, rtol=1e-9)
    np.testing.assert_allclose(lines.twist, np.ptp(phi), rtol=1e-12)
    ahead = trace(snapshot, seeds, interpolation, direction="forward")
    np.testing.assert_array_equal(ahead.spherical, lines.spherical)
    backward = trace(snapshot, seeds, interpolation, direction="backward")
    np.testing.assert_allclose(backward.twist, np.ptp(phi), rtol=1e-12)


@BOTH
def test_poloidal_loops_close(interpolation):
    """Circles about an O-point at (ln 1.7, pi/2) in (ln r, theta), second order in the cell."""
    found = []
    radii = np.array([0.15, 0.2, 0.3, 0.4])
    for n in (32, 64, 128):
        loops = psi_snapshot(
            lambda r, t: -(np.log(r / 1.7) ** 2) - (t - np.pi / 2) ** 2,
            r=np.geomspace(1, 3, n + 1),
            theta=np.pi / 2 + np.linspace(-0.5, 0.5, n + 1),
            phi=np.linspace(0, 0.4, 3),
        )
        seeds = np.column_stack([np.full(4, 1.7), np.pi / 2 + radii, np.full(4, 0.1)])
        lines = trace(loops, seeds, interpolation)
        assert lines.end_reason == [("closed", "closed")] * 4
        # Length of r dl over a circle of radius a: 2 pi a 1.7 I_0(a).
        wanted = 2 * np.pi * radii * 1.7 * np.i0(radii)
        found.append(np.sqrt(np.mean((lines.length / wanted - 1) ** 2)))
    assert np.log2(found[0] / found[-1]) / 2 > 1.8
    assert found[-1] < 5e-4


# ---- weak, missing and broken fields ------------------------------------------------------------


@BOTH
@pytest.mark.parametrize("dtype", [np.float64, np.float32])
@pytest.mark.parametrize(
    ("value", "word"), [(0.0, "weak field"), (np.nan, "no data"), (np.inf, "no data")]
)
def test_nothing_to_follow(interpolation, value, word, dtype):
    snapshot = formula_snapshot(value, value, value, dtype=dtype)
    lines = trace(snapshot, SEED, interpolation)
    assert lines.end_reason == [(word, word)]
    np.testing.assert_array_equal(lines.spherical, SEED)
    assert lines.length[0] == 0


@BOTH
@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
@pytest.mark.parametrize("axis", [0, 1, 2])
def test_a_region_without_numbers(interpolation, axis, bad):
    """Lines end before the cells beyond r = 2.5; no point is NaN."""
    parts = [lambda r, t, p, v=v: np.full(np.broadcast_shapes(r.shape, t.shape, p.shape), v)
             for v in (1.0, 0.1, 0.3)]  # fmt: skip
    good = parts[axis]
    parts[axis] = lambda r, t, p: np.where(r > 2.5, bad, good(r, t, p))
    snapshot = formula_snapshot(*parts)
    seeds = [[2, 1.5, 0.1], [1.2, 1.3, 0.4], [3.0, 1.5, 0.1]]
    lines = trace(snapshot, seeds, interpolation)
    assert lines.end_reason[:2] == [("inner wall", "no data")] * 2
    assert lines.end_reason[2] == ("no data", "no data")
    assert np.isfinite(lines.spherical).all()
    assert np.isfinite(lines.length).all()
    assert 2.0 < lines.spherical[: lines.offsets[2], 0].max() <= R[R < 2.7].max()


@BOTH
def test_a_dead_region_stops_lines(interpolation):
    """B_r falls to zero at r = 2.5 and stays so: the end is there, weak or at a standstill."""
    still = formula_snapshot(lambda r, t, p: np.where(r < 2.5, 1.0, 0.0) + 0 * t + 0 * p, 0.0, 0.0)
    lines = trace(still, SEED, interpolation, most_steps=2000)
    start, end = lines.end_reason[0]
    assert start == "inner wall"
    assert end in ("weak field", "step limit")
    assert 2.2 < lines.spherical[-1, 0] < 2.8
    assert np.isfinite(lines.spherical).all()


@BOTH
def test_opposed_fields_do_not_hang(interpolation):
    """Both halves point at the sheet between them: lines end there at a finite length."""
    sheet = formula_snapshot(
        0.0, lambda r, t, p: np.where(t < THETA[8], 1.0, -1.0) + 0 * r + 0 * p, 0.0
    )
    lines = trace(sheet, SEED, interpolation, direction="forward")
    assert abs(lines.spherical[-1, 1] - THETA[8]) < np.diff(THETA).max()
    assert lines.end_reason[0][1] in ("weak field", "step limit", "no data")
    assert np.isfinite(lines.spherical).all()


@BOTH
@pytest.mark.parametrize("strength", [1e-30, 1e25])
def test_strength_in_single_precision(interpolation, strength):
    """Squares of these leave the range of float32."""
    lines = trace(vertical(strength, dtype=np.float32), SEED, interpolation)
    plain = trace(vertical(), SEED, interpolation)
    assert lines.end_reason == plain.end_reason
    np.testing.assert_allclose(lines.length, plain.length, rtol=1e-4)


# ---- odd grids ----------------------------------------------------------------------------------

TO_AXIS = np.linspace(0, np.pi, 17)


@BOTH
def test_axis_in_the_domain(interpolation):
    """Uniform B_z down to the axis: lines near it run along it, those on it are named or follow."""
    snapshot = vertical(theta=TO_AXIS, phi=RING)
    seeds = [[2, 0.01, 0.1], [2, 0.5, 0.3], [2, 0.0, 1.0], [2, np.pi, 1.0]]
    lines = trace(snapshot, seeds, interpolation)
    assert np.isfinite(lines.spherical).all()
    assert np.isfinite(lines.length).all()
    assert lines.end_reason[0] == ("inner wall", "outer wall")
    assert lines.length[0] == pytest.approx(3.0, rel=1e-3)
    for number in (2, 3):
        ends = set(lines.end_reason[number])
        assert ends <= {"axis", "inner wall", "outer wall"}
        sine = np.sin(lines.line(number)[:, 1])
        np.testing.assert_allclose(sine, 0, atol=1e-12)


@BOTH
def test_lines_that_meet_the_axis(interpolation):
    """Uniform B_x crosses the axis: lines end there or pass by it, and nothing is NaN."""
    across = formula_snapshot(
        lambda r, t, p: np.sin(t) * np.cos(p) + 0 * r,
        lambda r, t, p: np.cos(t) * np.cos(p) + 0 * r,
        lambda r, t, p: -np.sin(p) + 0 * r + 0 * t,
        theta=TO_AXIS,
        phi=np.linspace(0, 2 * np.pi, 33),
    )
    seeds = [[2, 0.3, 0.0], [2, 0.3, 0.02], [2, 2.9, 3.0], [2, 1e-9, 1.0]]
    lines = trace(across, seeds, interpolation)
    assert np.isfinite(lines.spherical).all()
    # Faces on the axis have no area, so "flux" cannot cross it and runs along it instead.
    known = {"axis", "outer wall"} | ({"inner wall"} if interpolation == "flux" else set())
    assert {w for ends in lines.end_reason for w in ends} <= known
    assert (lines.spherical[:, 1] >= 0).all()
    assert (lines.spherical[:, 1] <= np.pi).all()


def test_origin_in_the_domain():
    snapshot = vertical(r=np.linspace(0, 3, 13), theta=TO_AXIS, phi=RING)
    with pytest.raises(GridError, match="expected an inner radius above 0"):
        trace(snapshot, SEED)
    lines = trace(snapshot, [[0, 1, 0], [0.1, 1, 0], [1, 1, 0]], "flux")
    assert lines.end_reason[0] == ("axis", "axis")
    assert lines.end_reason[1:] == [("outer wall", "outer wall")] * 2
    assert np.isfinite(lines.length).all()


@BOTH
@pytest.mark.parametrize("phi", [np.array([0.0, 0.1]), RING])
def test_one_azimuth_cell_and_full_ring(interpolation, phi):
    """A helix of constant pitch: B_r = r^-2, B_phi = 3 sin(theta)/r turns by 3 (r - 1)."""
    helix = formula_snapshot(
        lambda r, t, p: r**-2 + 0 * t + 0 * p,
        0.0,
        lambda r, t, p: 3 * np.sin(t) / r + 0 * p,
        r=np.geomspace(1, 4, 65),
        phi=phi,
    )
    lines = trace(helix, [[1.0, 1.5, 0.05]], interpolation)
    assert lines.end_reason == [("inner wall", "outer wall")]
    assert lines.twist[0] == pytest.approx(9.0, rel=5e-3)
    end = lines.footpoints
    assert end.wraps[0, 1] == np.floor((0.05 + lines.twist[0]) / np.ptp(phi))
    assert phi[0] <= end.position[0, 1, 2] < phi[-1]


@BOTH
@pytest.mark.parametrize("shape", [(1, 2, 2), (1, 1, 1), (3, 1, 2)])
def test_grids_of_few_cells(interpolation, shape):
    edges = {
        "r": np.geomspace(1, 4, shape[2] + 1),
        "theta": np.linspace(1.2, 1.9, shape[1] + 1),
        "phi": np.linspace(0, 0.5, shape[0] + 1),
    }
    lines = trace(vertical(**edges), [[2.0, 1.5, 0.1]], interpolation)
    assert np.isfinite(lines.spherical).all()
    assert set(lines.end_reason[0]) <= {"lower wall", "upper wall", "outer wall", "inner wall"}
