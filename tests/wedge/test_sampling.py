"""Values at points: the mask, symmetry under mirror and rotation, bounds."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from wedge_builders import GRIDS, PHI, THETA, R, block_grid, filled, points_within

from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.sampling import PointSampler, sample
from fieldviz.wedge.snapshot import Snapshot


@pytest.mark.parametrize("name", GRIDS)
def test_cell_centres_give_the_cell_values(name):
    grid = GRIDS[name]()
    cells = np.random.default_rng(0).normal(size=(grid.n_blocks, *grid.block_shape))
    for block in range(grid.n_blocks):
        r, theta, phi = grid.cell_centres(block)
        mesh = np.meshgrid(phi, theta, r, indexing="ij")
        points = np.stack([mesh[2].ravel(), mesh[1].ravel(), mesh[0].ravel()], axis=1)
        values = PointSampler(grid, points).of_array(cells)
        np.testing.assert_allclose(values, cells[block].ravel(), rtol=1e-9, atol=1e-9)


def test_mask_and_value_outside():
    grid = GRIDS["blocks"]()
    snapshot = Snapshot.from_grid(grid, cells={"density": np.ones((8, *grid.block_shape), "f4")})
    inside = [
        [2.0, 1.5, 0.1],
        [R[0], THETA[0], PHI[0]],
        [R[-1], THETA[-1], PHI[-1]],
        [2, 1.5, 77.0],
    ]
    outside = [
        [0.9, 1.5, 0.1], [4.1, 1.5, 0.1], [2.0, 0.5, 0.1], [2.0, 2.9, 0.1], [np.nan, 1.5, 0.1],
        [2.0, np.nan, 0.1], [2.0, 1.5, np.nan], [np.inf, 1.5, 0.1], [2.0, 1.5, np.inf],
    ]  # fmt: skip
    values, mask = sample(snapshot, np.array(inside + outside), ["density"])
    assert mask.tolist() == [True] * len(inside) + [False] * len(outside)
    np.testing.assert_array_equal(values["density"][:4], np.float32(1))
    assert np.isnan(values["density"][4:]).all()
    assert values["density"].dtype == np.float32
    values, _ = sample(snapshot, np.array(outside), ["density"], outside=-5.0)
    assert (values["density"] == -5).all()


def test_no_points_give_no_values():
    grid = GRIDS["one block"]()
    sampler = PointSampler(grid, np.empty((0, 3)))
    assert sampler.of_array(np.ones((1, *grid.block_shape))).shape == (0,)


@pytest.mark.parametrize("shape", [(3,), (4, 2), (2, 2, 3)])
def test_points_of_wrong_shape_are_refused(shape):
    with pytest.raises(FieldvizError, match=r"shape \(n, 3\)"):
        PointSampler(GRIDS["one block"](), np.ones(shape))


def test_a_missing_field_is_refused_before_any_work():
    grid = GRIDS["one block"]()
    snapshot = Snapshot.from_grid(grid, cells={"density": np.ones((1, *grid.block_shape))})
    with pytest.raises(MissingFieldError, match="Cannot sample"):
        sample(snapshot, np.ones((1, 3)), ["density", "heat"])


@settings(max_examples=40)
@given(st.integers(0, 2**31), st.integers(-20, 20), st.sampled_from([1, 2, 4]))
def test_turning_the_disc_by_whole_cells_turns_the_samples(seed, cells_turned, n_blocks):
    rng = np.random.default_rng(seed)
    cells = rng.normal(size=(8, 16, 16))
    grid = block_grid(R, THETA, PHI, (n_blocks, 1, 1))

    def blocks_of(values):
        return values.reshape(n_blocks, 8 // n_blocks, 16, 16)

    points = points_within(grid, 300, seed)
    turned = points + np.array([0, 0, cells_turned * grid.period / 8])
    before = PointSampler(grid, points).of_array(blocks_of(cells))
    after = PointSampler(grid, turned).of_array(blocks_of(np.roll(cells, cells_turned, axis=0)))
    np.testing.assert_allclose(after, before, atol=1e-11)


@settings(max_examples=40)
@given(st.integers(0, 2**31), st.sampled_from(["one block", "two levels", "three levels"]))
def test_mirroring_the_disc_mirrors_the_samples(seed, name):
    grid = GRIDS[name]()
    rng = np.random.default_rng(seed)
    cells = rng.lognormal(size=(grid.n_blocks, *grid.block_shape))
    mirrored = WedgeGrid(
        grid.r_edges, np.pi - grid.theta_edges[:, ::-1], grid.phi_edges, grid.level
    )
    points = points_within(grid, 300, seed)
    flipped = points * [1, -1, 1] + [0, np.pi, 0]
    # Corners may round to the other side of the outer wall.
    flipped[:, 1] = np.clip(flipped[:, 1], *mirrored.theta_range)
    before = PointSampler(grid, points).of_array(cells, positive=True)
    after = PointSampler(mirrored, flipped).of_array(cells[:, :, ::-1], positive=True)
    # At a jump in level the wall itself belongs to the lower block: stay off it.
    jumps = np.unique(grid.theta_edges[:, [0, -1]])
    off = np.abs(points[:, 1, None] - jumps).min(axis=1) > 1e-9
    np.testing.assert_allclose(after[off], before[off], rtol=1e-9)


@pytest.mark.parametrize("name", GRIDS)
def test_samples_inside_lie_between_the_cells(name):
    # Away from walls and level jumps linear interpolation makes no new extremes.
    grid = GRIDS[name]()
    cells = np.random.default_rng(0).uniform(1, 2, size=(grid.n_blocks, *grid.block_shape))
    points = points_within(grid, 2000)
    clear = np.ones(len(points), bool)
    if len(grid.levels) == 1:
        margin_r, margin_t = R[-1] - R[-2], np.diff(THETA).max()
        for axis, (low, high), margin in (
            (0, grid.r_range, margin_r),
            (1, grid.theta_range, margin_t),
        ):
            clear &= (points[:, axis] > low + margin) & (points[:, axis] < high - margin)
        values = PointSampler(grid, points).of_array(cells)[clear]
        assert clear.sum() > 500
        assert values.min() >= 1
        assert values.max() <= 2
    else:
        values = PointSampler(grid, points).of_array(cells, positive=True)
        assert values.min() > 0


def test_many_fields_share_one_location():
    grid = GRIDS["two levels"]()
    snapshot = Snapshot.from_grid(
        grid,
        cells={
            "a": filled(grid, lambda r, theta, phi: r + 0 * theta + 0 * phi),
            "b": filled(grid, lambda r, theta, phi: theta + 0 * r + 0 * phi).astype(np.float32),
        },
    )
    points = points_within(grid, 100)
    values, mask = sample(snapshot, points, ["b", "a"])
    assert mask.all()
    assert list(values) == ["b", "a"]
    np.testing.assert_allclose(values["a"], points[:, 0], atol=1e-12)
    np.testing.assert_allclose(values["b"], points[:, 1], atol=1e-5)
    assert values["b"].dtype == np.float32
