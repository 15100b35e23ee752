"""Ghost cells: exact for linear fields, second order across levels, and blind to blocks.

The truths are the formulas the fields were made from, or NumPy's own padding of the uncut array.
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from wedge_builders import GRIDS, PHI, THETA, R, block_grid, filled, points_within

from fieldviz.errors import FieldvizError
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.halo import halo, halo_array, halo_grid
from fieldviz.wedge.sampling import PointSampler
from fieldviz.wedge.snapshot import Snapshot

LINEAR_GRIDS = [name for name in GRIDS if name != "one azimuth cell"]


def at_centres(around, formula):
    return formula(
        around.r[:, None, None, :], around.theta[:, None, :, None], around.phi[:, :, None, None]
    )


@pytest.mark.parametrize("name", GRIDS)
def test_a_constant_field_stays_constant(name):
    grid = GRIDS[name]()
    cells = np.full((grid.n_blocks, *grid.block_shape), 0.1)
    np.testing.assert_allclose(halo_array(grid, cells), 0.1, rtol=1e-14)


@pytest.mark.parametrize("name", GRIDS)
def test_a_field_linear_in_r_and_theta_is_continued_exactly(name):
    grid = GRIDS[name]()

    def linear(r, theta, phi):
        return 2 + 3 * r - 1.5 * theta + 0 * phi

    haloed = halo_array(grid, filled(grid, linear))
    np.testing.assert_allclose(haloed, at_centres(halo_grid(grid), linear), rtol=0, atol=1e-12)


@pytest.mark.parametrize("name", GRIDS)
def test_a_field_linear_in_r_and_theta_is_sampled_exactly(name):
    grid = GRIDS[name]()
    points = points_within(grid, 2000)
    sampler = PointSampler(grid, points)
    values = sampler.of_array(filled(grid, lambda r, theta, phi: r - 2 * theta + 0 * phi))
    assert sampler.inside.all()
    np.testing.assert_allclose(values, points[:, 0] - 2 * points[:, 1], rtol=0, atol=1e-12)


def test_ghosts_of_a_cut_grid_are_the_neighbours_cells():
    rng = np.random.default_rng(4)
    whole = rng.normal(size=(8, 16, 16))
    grid = block_grid(R, THETA, PHI, (2, 4, 2))
    blocks = [
        whole[k * 4 : k * 4 + 4, j * 4 : j * 4 + 4, i * 8 : i * 8 + 8]
        for k in range(2)
        for j in range(4)
        for i in range(2)
    ]
    haloed = halo_array(grid, np.stack(blocks))
    padded = np.pad(whole, ((1, 1), (0, 0), (0, 0)), mode="wrap")
    padded = np.pad(padded, ((0, 0), (1, 1), (1, 1)), constant_values=np.nan)  # walls: not here
    for number, (k, j, i) in enumerate(np.ndindex(2, 4, 2)):
        expected = padded[k * 4 : k * 4 + 6, j * 4 : j * 4 + 6, i * 8 : i * 8 + 10]
        inside = np.isfinite(expected)
        np.testing.assert_array_equal(haloed[number][inside], expected[inside])


def test_ghosts_next_to_a_level_jump_hold_the_neighbours_phi_variation():
    grid = GRIDS["two levels"]()

    def wave(r, theta, phi):
        return np.cos(2 * np.pi * phi / 0.8) + 0 * r + 0 * theta

    haloed = halo_array(grid, filled(grid, wave))
    # Linear interpolation over a coarse cell of width 0.1: h^2/8 (2 pi/0.8)^2 = 0.077.
    error = np.abs(haloed - at_centres(halo_grid(grid), wave))
    assert error.max() < 0.078
    assert error[:, 1:-1, 1:-1, 1:-1].max() == 0


@st.composite
def cut_grids(draw):
    """Edges with uneven steps, numbers of blocks that divide them, and a seed."""
    seed = draw(st.integers(0, 2**31))
    rng = np.random.default_rng(seed)
    edges, blocks = [], []
    # Azimuths on both sides of 0, where differences of edges are not exact.
    for low, high in ((0.3, 3.0), (0.2, 2.9), (-1.5, 1.5)):
        count = draw(st.integers(1, 3))
        n = count * draw(st.integers(2, 4))
        edges.append(np.sort(low + (high - low) * (np.arange(n + 1) + rng.uniform(size=n + 1)) / n))
        blocks.append(count)
    edges[1] = 0.2 + (edges[1] - 0.2) * 0.7
    return edges, (blocks[2], blocks[1], blocks[0]), seed


@settings(max_examples=80)
@given(cut_grids(), st.sampled_from([np.float32, np.float64]), st.booleans())
def test_cutting_a_grid_into_blocks_changes_no_sampled_bit(made, dtype, positive):
    (r, theta, phi), blocks, seed = made
    rng = np.random.default_rng(seed)
    cells = rng.lognormal(size=(len(phi) - 1, len(theta) - 1, len(r) - 1)).astype(dtype)
    one = block_grid(r, theta, phi)
    many = block_grid(r, theta, phi, blocks)
    points = points_within(one, 300, seed)
    size = [n // b for n, b in zip(cells.shape, blocks, strict=True)]
    parts = [
        cells[tuple(slice(c * s, (c + 1) * s) for c, s in zip(corner, size, strict=True))]
        for corner in np.ndindex(*blocks)
    ]
    whole = PointSampler(one, points).of_array(cells[None], positive=positive)
    pieces = PointSampler(many, points).of_array(np.stack(parts), positive=positive)
    np.testing.assert_array_equal(pieces, whole)


def test_the_order_of_blocks_changes_no_bit():
    grid = GRIDS["three levels"]()
    rng = np.random.default_rng(0)
    cells = rng.normal(size=(grid.n_blocks, *grid.block_shape))
    order = rng.permutation(grid.n_blocks)
    shuffled = WedgeGrid(
        grid.r_edges[order], grid.theta_edges[order], grid.phi_edges[order], grid.level[order]
    )
    np.testing.assert_array_equal(
        halo_array(shuffled, cells[order]), halo_array(grid, cells)[order]
    )


def test_sampling_across_level_jumps_converges_at_second_order():
    def smooth(r, theta, phi):
        return r**-1.5 * np.exp(-3 * (theta - 1.5) ** 2) * (1 + 0.3 * np.cos(2 * np.pi * phi / 0.8))

    errors = []
    for n in (16, 32, 64):
        grid = block_grid(
            np.geomspace(1, 4, n + 1),
            np.pi / 2 + np.linspace(-0.7, 0.6, n + 1),
            np.linspace(-0.3, 0.5, n // 2 + 1),
            (2, 4, 2),
            [((2.5, 1.6, 0.0), 1)],
        )
        points = points_within(grid, 20000, seed=3)
        # The jump's surroundings: within a coarse cell of the refined block.
        near = np.abs(points[:, 0] - 2.0) < 6.0 / n
        values = PointSampler(grid, points).of_array(filled(grid, smooth))
        error = np.abs(values - smooth(*points.T))
        errors.append([error.max(), error[near].max()])
    slopes = -np.diff(np.log2(errors), axis=0)
    assert (slopes > 1.7).all(), slopes
    assert (slopes < 2.5).all(), slopes


def test_a_single_azimuth_cell_has_no_azimuth_variation():
    grid = GRIDS["one azimuth cell"]()
    rng = np.random.default_rng(1)
    haloed = halo_array(grid, rng.normal(size=(grid.n_blocks, *grid.block_shape)))
    np.testing.assert_array_equal(haloed[:, 0], haloed[:, 1])
    np.testing.assert_array_equal(haloed[:, 2], haloed[:, 1])


@pytest.mark.parametrize("shape", [(1, 1, 1), (1, 1, 4), (2, 4, 1), (1, 3, 2)])
def test_few_cells_give_finite_ghosts(shape):
    grid = block_grid(
        np.linspace(1, 2, shape[2] + 1), np.linspace(1, 2, shape[1] + 1),
        np.linspace(0, 1, shape[0] + 1),
    )  # fmt: skip
    cells = np.random.default_rng(0).normal(size=(1, *shape))
    haloed = halo_array(grid, cells)
    assert np.isfinite(haloed).all()
    assert np.abs(haloed).max() <= 9 * np.abs(cells).max()  # continued twice: at most 3 x 3


@settings(max_examples=30)
@given(st.integers(0, 2**31), st.sampled_from(sorted(GRIDS)))
def test_positive_quantities_stay_positive(seed, name):
    grid = GRIDS[name]()
    rng = np.random.default_rng(seed)
    cells = rng.lognormal(sigma=4, size=(grid.n_blocks, *grid.block_shape))
    snapshot = Snapshot.from_grid(grid, cells={"density": cells})
    assert halo(snapshot, "density").min() > 0
    points = points_within(grid, 500, seed)
    assert PointSampler(grid, points).of_array(cells, positive=True).min() > 0


def test_quantities_of_either_sign_are_continued_through_zero():
    grid = block_grid([3.0, 4.0, 5.0], THETA, PHI)
    cells = filled(grid, lambda r, theta, phi: r - 3.25 + 0 * theta + 0 * phi)
    snapshot = Snapshot.from_grid(grid, cells={"velocity_r": cells, "density": cells})
    assert halo(snapshot, "velocity_r")[0, 4, 4, 0] == pytest.approx(-0.75)
    assert halo(snapshot, "density")[0, 4, 4, 0] > 0


@pytest.mark.parametrize("name", ["one block", "blocks", "three levels"])
def test_nan_stays_local(name):
    grid = GRIDS[name]()
    rng = np.random.default_rng(2)
    cells = rng.normal(size=(grid.n_blocks, *grid.block_shape))
    broken = cells.copy()
    middle = tuple(n // 2 for n in grid.block_shape)
    block = grid.n_blocks // 2
    broken[(block, *middle)] = np.nan
    points = points_within(grid, 5000)
    sampler = PointSampler(grid, points)
    values, clean = sampler.of_array(broken), sampler.of_array(cells)
    bad = np.isnan(values)
    np.testing.assert_array_equal(values[~bad], clean[~bad])
    r, theta, phi = (axis[n] for axis, n in zip(
        grid.cell_centres(block), middle[::-1], strict=True))  # fmt: skip
    steps = [4 * np.diff(axis[0]).max() for axis in (R[None], THETA[None], PHI[None])]
    turn = np.abs(points[bad][:, 2] - phi)
    turn = np.abs(turn - grid.period * np.round(turn / grid.period))
    assert (np.abs(points[bad][:, 0] - r) < steps[0]).all()
    assert (np.abs(points[bad][:, 1] - theta) < steps[1]).all()
    assert (turn < steps[2]).all()


def test_a_nan_reaches_one_cell_and_no_further():
    grid = block_grid(R, THETA, PHI, (2, 2, 2))
    cells = np.zeros((8, *grid.block_shape))
    cells[0, -1, -1, -1] = np.nan  # the corner where all blocks meet
    haloed = halo_array(grid, cells)
    # The cell itself and its image in each of the seven other blocks; azimuth has two blocks,
    # so none touches it twice.
    assert np.count_nonzero(np.isnan(haloed)) == 8


def test_single_precision_stays_single():
    grid = GRIDS["two levels"]()
    cells = np.ones((grid.n_blocks, *grid.block_shape), dtype=np.float32)
    assert halo_array(grid, cells).dtype == np.float32


def test_a_wrong_shape_is_refused():
    grid = GRIDS["one block"]()
    with pytest.raises(FieldvizError, match="expected an array of shape"):
        halo_array(grid, np.ones((1, 2, 3, 4)))


def test_a_linear_field_is_continued_past_the_origin():
    grid = block_grid(np.linspace(0, 1, 9), THETA, PHI)
    cells = filled(grid, lambda r, theta, phi: 1 + 2 * r - theta + 0 * phi)
    around = halo_grid(grid)
    assert (np.diff(around.r) > 0).all()
    haloed = halo_array(grid, cells)
    expected = at_centres(around, lambda r, theta, phi: 1 + 2 * r - theta + 0 * phi)
    np.testing.assert_allclose(haloed, expected, atol=1e-12)


def test_a_linear_field_is_continued_past_the_axis():
    grid = block_grid(R, np.linspace(0, np.pi, 17), PHI, (1, 2, 1))
    cells = filled(grid, lambda r, theta, phi: 1 + 2 * r - theta + 0 * phi)
    expected = at_centres(halo_grid(grid), lambda r, theta, phi: 1 + 2 * r - theta + 0 * phi)
    np.testing.assert_allclose(halo_array(grid, cells), expected, atol=1e-12)


def test_ghost_edges_are_those_of_the_neighbours():
    grid = GRIDS["stretched"]()
    whole = 1 + np.linspace(0, 1.5, 17) ** 2 + np.linspace(0, 0.1, 17)
    around = halo_grid(grid)
    for block in range(grid.n_blocks):
        start = int(np.searchsorted(whole, grid.r_edges[block, 0]))
        if start > 0:
            assert around.r_edges[block, 0] == whole[start - 1]
        if start + 8 < 16:
            assert around.r_edges[block, -1] == whole[start + 9]


def test_ghost_edges_in_azimuth_are_those_of_the_neighbours_to_the_bit():
    # 0.2 - (0.2 - -0.1) is not -0.1 in floating point.
    phi = np.array([-0.7, -0.1, 0.2, 0.5])
    around = halo_grid(block_grid(R, THETA, phi, (3, 1, 1)))
    np.testing.assert_array_equal(around.phi_edges[1], [-0.7, -0.1, 0.2, 0.5])
    assert around.phi_edges[2, 0] == -0.1
    np.testing.assert_allclose(around.phi_edges[0], [-1.0, -0.7, -0.1, 0.2], rtol=1e-14)
    np.testing.assert_allclose(around.phi_edges[2], [-0.1, 0.2, 0.5, 1.1], rtol=1e-14)


def test_a_steep_positive_field_stays_positive_across_a_level_jump():
    # Towards the coarse side the fine cells fall so fast that a straight line would cross zero.
    grid = GRIDS["two levels"]()
    cells = filled(grid, lambda r, theta, phi: np.exp(-40 * (r - 1)) + 0 * theta + 0 * phi)
    assert halo_array(grid, cells, positive=True).min() > 0
    assert halo_array(grid, cells[:, ::-1, ::-1, ::-1], positive=True).min() > 0
