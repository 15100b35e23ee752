"""The grid: what is refused, what is mended, and where points lie."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from wedge_builders import GRIDS, PHI, THETA, R, block_grid, grid_of, leaves

from fieldviz.errors import FieldvizError, GridError
from fieldviz.wedge.grid import WedgeGrid


def stacked(found):
    r, theta, phi, level = zip(*found, strict=True)
    return np.stack(r), np.stack(theta), np.stack(phi), np.array(level)


def one_line(caught):
    message = str(caught.value)
    assert "\n" not in message
    assert message.startswith("Cannot ")
    assert "got" in message
    return message


# ---- what is refused --------------------------------------------------------------------------


def test_overlapping_blocks_are_refused_by_number():
    r, theta, phi, level = stacked(leaves(R, THETA, PHI, (1, 1, 2)))
    r[1] = r[0]
    with pytest.raises(GridError, match="blocks 0 and 1 covering the same place") as caught:
        WedgeGrid(r, theta, phi, level)
    one_line(caught)


def test_a_parent_left_beside_its_children_is_an_overlap():
    found = leaves(R, THETA, PHI, (1, 2, 2), [((1.0, 1.0, 0.0), 1)])
    parent = leaves(R, THETA, PHI, (1, 2, 2))[0]
    with pytest.raises(GridError, match="keep only the finest"):
        grid_of([*found, parent])


@pytest.mark.parametrize("missing", range(8))
def test_a_missing_block_is_a_gap(missing):
    found = leaves(R, THETA, PHI, (2, 2, 2))
    lost = found.pop(missing)
    with pytest.raises(GridError, match="got a gap at") as caught:
        grid_of(found)
    message = one_line(caught)
    assert f"r {lost[0][0]:.6g} to {lost[0][-1]:.6g}" in message


def test_a_partial_overlap_is_refused():
    r, theta, phi, level = stacked(leaves(R, THETA, PHI, (1, 1, 2)))
    r[1] = r[1] - 0.5 * (r[1, 1] - r[1, 0])
    with pytest.raises(GridError, match="covering the same place"):
        WedgeGrid(r, theta, phi, level)


@pytest.mark.parametrize("axis", ["r", "theta", "phi"])
@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
def test_edges_that_are_not_finite_are_refused(axis, bad):
    edges = {"r": R.copy(), "theta": THETA.copy(), "phi": PHI.copy()}
    edges[axis][2] = bad
    with pytest.raises(GridError, match=f"finite {axis}_edges, got 1 NaN") as caught:
        WedgeGrid(edges["r"][None], edges["theta"][None], edges["phi"][None])
    one_line(caught)


@pytest.mark.parametrize("axis", ["r", "theta", "phi"])
@pytest.mark.parametrize("how", ["equal", "falling", "reversed"])
def test_edges_that_do_not_increase_are_refused(axis, how):
    edges = {"r": R.copy(), "theta": THETA.copy(), "phi": PHI.copy()}
    if how == "equal":
        edges[axis][3] = edges[axis][2]
    elif how == "falling":
        edges[axis][3], edges[axis][2] = edges[axis][2], edges[axis][3]
    else:
        edges[axis] = edges[axis][::-1]
    with pytest.raises(GridError, match=f"{axis}_edges that increase") as caught:
        WedgeGrid(edges["r"][None], edges["theta"][None], edges["phi"][None])
    one_line(caught)


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"r": R - 2}, "radii >= 0"),
        ({"theta": np.degrees(THETA)}, "degrees"),
        ({"theta": THETA - np.pi / 2}, "latitudes"),
        ({"phi": np.linspace(0, 360, 9)}, "degrees"),
        ({"phi": np.linspace(0, 6.3, 9)}, "at most 2 pi"),
        ({"r": R[:1]}, "shape"),
        ({"r": np.ones((2, 2, 2))}, "shape"),
        ({"r": np.empty((0, 3))}, "shape"),
        ({"r": np.stack([R, R + 3])}, "same number of blocks"),
    ],
)
def test_edges_out_of_range_or_shape_are_refused(change, said):
    edges = {"r": R, "theta": THETA, "phi": PHI, **change}
    with pytest.raises(GridError, match=said) as caught:
        WedgeGrid(edges["r"], edges["theta"], edges["phi"])
    one_line(caught)


@pytest.mark.parametrize("level", [np.zeros(2, int), np.zeros(1), np.zeros((1, 1), int), ["a"]])
def test_levels_of_wrong_shape_or_type_are_refused(level):
    with pytest.raises(GridError, match="whole-number levels") as caught:
        WedgeGrid(R, THETA, PHI, level)
    one_line(caught)


def test_edges_that_no_two_blocks_share_are_refused_before_memory_is_taken():
    rng = np.random.default_rng(0)
    n = 1200
    start = rng.uniform(1, 2, size=(3, n, 1))
    r, theta, phi = (s + np.array([0.0, 0.5, 1.0]) for s in start)
    with pytest.raises(FieldvizError, match="jittered"):
        WedgeGrid(r, theta, phi, edge_tolerance=0.0)


# ---- what is mended ---------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["blocks", "two levels", "three levels", "full ring"])
def test_shared_edges_that_differ_in_single_precision_are_made_one(name):
    exact = GRIDS[name]()
    rng = np.random.default_rng(5)

    def jittered(edges):
        # Twice the spacing of float32 numbers, up or down.
        return edges.astype(np.float32) * (1 + 2.4e-7 * rng.choice([-1, 0, 1], size=edges.shape))

    grid = WedgeGrid(
        jittered(exact.r_edges), jittered(exact.theta_edges), jittered(exact.phi_edges)
    )
    total = sum(grid.volumes(block).sum() for block in range(grid.n_blocks))
    assert total == pytest.approx(grid.wedge_volume, rel=1e-12)
    assert total == pytest.approx(exact.wedge_volume, rel=1e-5)
    assert len(grid.table.r) == len(exact.table.r)
    np.testing.assert_array_equal(grid.table.block, exact.table.block)
    np.testing.assert_array_equal(grid.level, exact.level)
    assert grid.is_full_ring == exact.is_full_ring
    if grid.is_full_ring:
        assert grid.period == 2 * np.pi


def test_the_given_edge_arrays_are_not_changed():
    r, theta, phi = R.copy(), THETA.copy(), PHI.copy()
    grid = WedgeGrid(r, theta, phi)
    np.testing.assert_array_equal(r, R)
    assert not np.shares_memory(grid.r_edges, r)
    with pytest.raises(ValueError, match="read-only"):
        grid.r_edges[0, 0] = 2.0


def test_theta_just_past_the_poles_is_clipped():
    grid = WedgeGrid(R, np.linspace(-1e-8, np.pi + 1e-8, 9), PHI)
    assert grid.theta_range == (0.0, np.pi)


@pytest.mark.parametrize("name", GRIDS)
def test_levels_are_worked_out_from_the_cells(name):
    given_levels = GRIDS[name]()
    grid = WedgeGrid(given_levels.r_edges, given_levels.theta_edges, given_levels.phi_edges)
    np.testing.assert_array_equal(grid.level, given_levels.level)


def test_levels_of_an_axisymmetric_refined_grid_are_worked_out():
    r, theta, phi = R[:9], THETA[:9], np.array([0.0, 0.2])
    half = [edges[::2] for edges in (r, theta)]
    coarse = [(half[0] + 10, half[1], phi)]
    # Refined in r and theta only; the azimuth has its one cell at both levels.
    fine_r = np.linspace(2, half[0][0] + 10, 9)
    fine = [(fine_r[i : i + 5], theta[j : j + 5], phi) for j in (0, 4) for i in (0, 4)]
    stacked_edges = [np.stack(axis) for axis in zip(*coarse, *fine, strict=True)]
    assert WedgeGrid(*stacked_edges).level.tolist() == [0, 1, 1, 1, 1]


# ---- what it says of itself -------------------------------------------------------------------


def test_azimuth_in_words():
    ring = WedgeGrid(R, THETA, np.linspace(0, 2 * np.pi, 5))
    assert ring.is_full_ring
    assert ring.repeats == 1
    assert ring.azimuth_sentence == "full ring"
    eighth = WedgeGrid(R, THETA, np.linspace(-0.2, -0.2 + np.pi / 4, 5))
    assert (eighth.is_full_ring, eighth.repeats) == (False, 8)
    assert "45 degrees" in eighth.azimuth_sentence
    odd = WedgeGrid(R, THETA, np.linspace(0, 1.0, 5))
    assert odd.repeats is None
    assert "not a whole multiple" in odd.azimuth_sentence


def test_counts_and_ranges():
    grid = GRIDS["two levels"]()
    assert grid.block_shape == (4, 4, 8)
    assert grid.n_blocks == 15 + 8
    assert grid.n_cells == 23 * 128
    assert grid.levels == [0, 1]
    assert grid.r_range == (R[0], R[-1])
    assert grid.theta_range == (THETA[0], THETA[-1])
    assert grid.period == pytest.approx(0.8)


# ---- where points lie -------------------------------------------------------------------------


def brute_force(grid, r, theta, phi):
    """Which block holds each point, by looking at every block: half-open, outer walls closed."""
    found = np.full(len(r), -1)
    last = [grid.r_range[1], grid.theta_range[1]]
    for block in range(grid.n_blocks):
        inside = np.ones(len(r), bool)
        for values, edges, end in ((r, grid.r_edges[block], last[0]),
                                   (theta, grid.theta_edges[block], last[1]),
                                   (phi, grid.phi_edges[block], np.inf)):  # fmt: skip
            inside &= (values >= edges[0]) & (
                (values < edges[-1]) | (values == end) & (edges[-1] == end)
            )
        found[inside] = block
    return found


@pytest.mark.parametrize("name", GRIDS)
def test_locate_agrees_with_looking_at_every_block(name):
    grid = GRIDS[name]()
    rng = np.random.default_rng(6)
    points = []
    for edges, (low, high) in ((grid.r_edges, grid.r_range), (grid.theta_edges, grid.theta_range),
                               (grid.phi_edges, grid.phi_range)):  # fmt: skip
        anywhere = rng.uniform(low - 0.1 * (high - low), high + 0.1 * (high - low), 3000)
        anywhere[:1500] = rng.choice(edges.ravel(), 1500)  # on edges and corners
        points.append(rng.permutation(anywhere))
    # The last azimuth is the first one.
    first, period = grid.phi_range[0], grid.period
    phi = points[2]
    phi = np.where(phi >= grid.phi_range[1], np.maximum(phi - period, first), phi)
    phi = np.where(phi < first, phi + period, phi)
    np.testing.assert_array_equal(
        grid.locate(points[0], points[1], points[2]), brute_force(grid, points[0], points[1], phi)
    )


def test_locate_outside_and_nan():
    grid = GRIDS["blocks"]()
    inside = (2.0, 1.5, 0.1)
    assert grid.locate(*map(np.array, inside)) >= 0
    for axis, value in [(0, 0.999), (0, 4.001), (1, 0.5), (1, 2.5), (0, np.nan), (1, np.nan),
                        (2, np.nan), (2, np.inf), (0, np.inf), (1, -np.inf)]:  # fmt: skip
        point = list(inside)
        point[axis] = value
        assert grid.locate(*map(np.array, point)) == -1, (axis, value)


@given(
    st.floats(-1e6, 1e6),
    st.sampled_from([(0.0, 2 * np.pi), (0.1, 0.8), (-0.3, 0.5), (-np.pi, np.pi), (2.9, 3.6)]),
)
def test_every_azimuth_lies_in_some_block(phi, ends):
    grid = block_grid(R, THETA, np.linspace(*ends, 5), (2, 1, 1))
    block = grid.locate(np.array([2.0]), np.array([1.5]), np.array([phi]))
    assert block[0] >= 0
    wrapped = grid.wrap(np.array([phi]))[0]
    turns = (phi - wrapped) / grid.period
    assert abs(turns - round(turns)) < 1e-6


@pytest.mark.parametrize("ends", [(0.1, 0.8), (-0.3, 0.5), (0.0, 2 * np.pi)])
@pytest.mark.parametrize("step", [-1, 1])
def test_azimuths_one_rounding_beside_the_seam_lie_in_a_block(ends, step):
    grid = block_grid(R, THETA, np.linspace(*ends, 5), (2, 1, 1))
    for turn in range(-3, 4):
        for end in ends:
            phi = np.nextafter(end + turn * grid.period, step * np.inf)
            assert grid.locate(np.array([2.0]), np.array([1.5]), np.array([phi]))[0] >= 0
    assert grid.locate(np.array([2.0]), np.array([1.5]), np.array([-1e-300]))[0] >= 0


def test_ten_thousand_blocks_locate_right():
    phi, theta, r = 10, 25, 40
    grid = block_grid(
        np.geomspace(1, 10, 2 * r + 1), np.linspace(0.6, 2.6, 2 * theta + 1),
        np.linspace(0, 2 * np.pi, 2 * phi + 1), (phi, theta, r),
    )  # fmt: skip
    assert grid.n_blocks == 10_000
    rng = np.random.default_rng(0)
    points = np.stack([rng.uniform(1, 10, 4000), rng.uniform(0.6, 2.6, 4000),
                       rng.uniform(0, 2 * np.pi, 4000)])  # fmt: skip
    block = grid.locate(*points)
    for edges, values in zip((grid.r_edges, grid.theta_edges, grid.phi_edges), points, strict=True):
        assert (edges[block, 0] <= values).all()
        assert (values <= edges[block, -1]).all()


def test_thousands_of_mixed_blocks_tile():
    found = leaves(
        np.geomspace(1, 10, 33), np.linspace(0.6, 2.6, 33), np.linspace(0, 1, 17), (8, 16, 16),
        [((r, 1.5, phi), 2) for r in np.geomspace(1.05, 9.5, 20) for phi in (0.1, 0.6)],
    )  # fmt: skip
    assert len(found) > 2500
    grid = grid_of(found)
    assert grid.levels == [0, 1, 2]
    total = sum(grid.volumes(block).sum() for block in range(grid.n_blocks))
    assert total == pytest.approx(grid.wedge_volume, rel=1e-11)
