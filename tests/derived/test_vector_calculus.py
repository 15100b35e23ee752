"""Gradient, divergence and curl: order, blindness to blocks, walls, axis, what stays local."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

sys.path.insert(0, str(Path(__file__).parent))

from calculus_fields import (
    MESHES,
    NAMES,
    b_phi,
    b_r,
    b_theta,
    block_grid,
    curl_of,
    divergence_of,
    filled,
    gradient_of,
    log_mesh,
    random_snapshot,
    scalar,
    snapshot_of,
    split,
    stretched_mesh,
)

import fieldviz as fv
from fieldviz.derived.stencils import stencils
from fieldviz.errors import FieldvizError, MissingFieldError

WORK = {
    "gradient": (
        lambda grid: fv.gradient(snapshot_of(grid, [scalar], ["dye"]), "dye"),
        gradient_of(scalar),
    ),
    "divergence": (
        lambda grid: (fv.divergence(snapshot_of(grid, (b_r, b_theta, b_phi)), "magnetic"),),
        (divergence_of(b_r, b_theta, b_phi),),
    ),
    "curl": (
        lambda grid: fv.curl(snapshot_of(grid, (b_r, b_theta, b_phi)), NAMES),
        curl_of(b_r, b_theta, b_phi),
    ),
}


def all_of(snapshot):
    """Every derivative of the magnetic field, as one tuple of arrays."""
    return (
        *fv.curl(snapshot, "magnetic"),
        fv.divergence(snapshot, "magnetic"),
        *fv.gradient(snapshot, "magnetic_r"),
    )


@pytest.mark.parametrize("mesh", MESHES)
@pytest.mark.parametrize("work", WORK)
def test_second_order_everywhere_in_the_largest_error(work, mesh):
    """Walls and level jumps are counted: it is the largest error of all cells that falls by 4."""
    compute, truth = WORK[work]
    largest, mean = [], []
    for n in (32, 64):
        grid = MESHES[mesh](n)
        errors = [
            found - filled(grid, formula)
            for found, formula in zip(compute(grid), truth, strict=True)
        ]
        largest.append([np.abs(error).max() for error in errors])
        mean.append([np.sqrt(np.square(error).mean()) for error in errors])
    assert np.min(np.divide(largest[0], largest[1])) > 2**1.75
    assert np.min(np.divide(mean[0], mean[1])) > 2**1.85
    assert np.max(mean[1]) < 0.05


@pytest.mark.parametrize("mesh", ["log r", "stretched"])
def test_the_gradient_is_numpys_own_on_an_uncut_mesh(mesh):
    """numpy.gradient with edge_order=2 is the same scheme on uneven spacing, walls included."""
    edges = {"log r": log_mesh, "stretched": stretched_mesh}[mesh](16)
    snapshot = random_snapshot(block_grid(*edges))
    r, theta, phi = snapshot.grid.cell_centres(0)
    values = snapshot.cell("magnetic_r")[0]
    found = fv.gradient(snapshot, "magnetic_r")
    size = np.abs(found.r).max()
    expected = np.gradient(values, r, axis=2, edge_order=2)
    np.testing.assert_allclose(found.r[0], expected, rtol=0, atol=1e-13 * size)
    expected = np.gradient(values, theta, axis=1, edge_order=2) / r
    np.testing.assert_allclose(found.theta[0], expected, rtol=0, atol=1e-13 * size)
    wrapped = (np.roll(values, -1, 0) - np.roll(values, 1, 0)) / (2 * (phi[1] - phi[0]))
    expected = wrapped / (r * np.sin(theta)[:, None])
    np.testing.assert_allclose(found.phi[0], expected, rtol=0, atol=1e-12 * size)


@pytest.mark.parametrize("mesh", MESHES)
@pytest.mark.parametrize("counts", [(1, 2, 1), (2, 2, 2), (1, 1, 4)])
@pytest.mark.parametrize("dtype", ["f4", "f8"])
def test_cutting_blocks_changes_no_value(mesh, counts, dtype):
    grid = MESHES[mesh](32)
    if any(n // count < 3 for n, count in zip(grid.block_shape, counts, strict=True)):
        counts = (1, 2, 1)
    whole = random_snapshot(grid, dtype=dtype)
    finer, cells = split(grid, [whole.cell(name) for name in NAMES], counts)
    pieces = fv.Snapshot.from_grid(finer, cells=dict(zip(NAMES, cells, strict=True)))
    assert finer.n_blocks == grid.n_blocks * np.prod(counts)
    before, after = all_of(whole), all_of(pieces)
    for expected, found in zip(split(grid, before, counts)[1], after, strict=True):
        np.testing.assert_allclose(found, expected, rtol=0, atol=1e-12 * np.abs(expected).max())


@pytest.mark.parametrize("counts", [(1, 1, 1), (2, 4, 2)])
def test_div_curl_and_curl_grad_are_zero(counts):
    """Vector identities that the discrete forms keep: slopes along different axes commute."""
    snapshot = random_snapshot(block_grid(*stretched_mesh(16), counts))
    turned = fv.curl(snapshot, "magnetic")
    with_curl = snapshot.with_cells(a=turned.r, b=turned.theta, c=turned.phi)
    parts = fv.gradient(with_curl, "c").phi
    assert np.abs(fv.divergence(with_curl, ("a", "b", "c"))).max() < 1e-11 * np.abs(parts).max()
    slope = fv.gradient(snapshot, "magnetic_r")
    with_slope = snapshot.with_cells(a=slope.r, b=slope.theta, c=slope.phi)
    size = np.abs(fv.gradient(with_slope, "a").r).max()
    for component in fv.curl(with_slope, ("a", "b", "c")):
        assert np.abs(component).max() < 1e-11 * size


SEEDS = st.integers(0, 2**32 - 1)


@settings(max_examples=25)
@given(SEEDS)
def test_a_mirrored_disc_has_the_mirrored_derivatives(seed):
    """B is an axial vector: of its mirror image, curl is polar and gains no further sign."""
    r, _, phi = log_mesh(8)
    theta = np.pi / 2 + np.array([-0.6, -0.3, -0.2, -0.1, 0.0, 0.1, 0.2, 0.3, 0.6])
    grid = block_grid(r, theta, phi, (1, 2, 1))
    field = random_snapshot(grid, seed)
    signs = dict(zip(NAMES, (-1, 1, -1), strict=True))

    def flipped(array):
        return array[::-1, :, ::-1]

    mirrored = fv.Snapshot.from_grid(
        grid, cells={name: signs[name] * flipped(field.cell(name)) for name in NAMES}
    )
    here, there = fv.curl(field, "magnetic"), fv.curl(mirrored, "magnetic")
    for sign, before, after in zip((1, -1, 1), here, there, strict=True):
        np.testing.assert_allclose(after, sign * flipped(before), rtol=0, atol=1e-11)
    np.testing.assert_allclose(
        fv.divergence(mirrored, "magnetic"),
        -flipped(fv.divergence(field, "magnetic")),
        rtol=0,
        atol=1e-11,
    )


@settings(max_examples=25)
@given(SEEDS, st.integers(1, 7))
def test_turning_by_whole_cells_turns_the_derivatives(seed, cells):
    field = random_snapshot(block_grid(*log_mesh(16)), seed)
    turned = field.with_cells(**{name: np.roll(field.cell(name), cells, 1) for name in NAMES})
    for before, after in zip(all_of(field), all_of(turned), strict=True):
        np.testing.assert_allclose(after, np.roll(before, cells, 1), rtol=0, atol=1e-10)


@settings(max_examples=25)
@given(SEEDS, st.floats(-1e3, 1e3), st.sampled_from(["log r", "two levels", "corner"]))
def test_derivatives_are_linear(seed, factor, mesh):
    grid = MESHES[mesh](16)
    one, two = random_snapshot(grid, seed), random_snapshot(grid, seed + 1)
    both = fv.Snapshot.from_grid(
        grid, cells={name: one.cell(name) + factor * two.cell(name) for name in NAMES}
    )
    for a, b, found in zip(all_of(one), all_of(two), all_of(both), strict=True):
        size = np.abs(a).max() + abs(factor) * np.abs(b).max()
        np.testing.assert_allclose(found, a + factor * b, rtol=0, atol=1e-12 * size)


@pytest.mark.parametrize("place", [(0, 2, 5, 6), (1, 0, 0, 0), (2, 3, 7, 7)])
def test_nan_reaches_only_cells_whose_stencil_touches_it(place):
    clean = random_snapshot(block_grid(*log_mesh(16), (2, 2, 2)))
    bad = clean.cell("magnetic_r").copy()
    bad[place] = np.nan
    found = all_of(clean.with_cells(magnetic_r=bad))
    spoilt = np.zeros(bad.shape, dtype=bool)
    for before, after in zip(all_of(clean), found, strict=True):
        different = ~(before == after)
        assert np.isnan(after[different]).all()
        spoilt |= different
    # Itself, and along each axis two cells, or at a wall the two inside it and those between.
    assert 1 <= np.count_nonzero(spoilt) <= 7
    known = stencils(clean.grid)
    assert spoilt[place]
    blocks = set(np.nonzero(spoilt)[0].tolist())
    assert blocks <= {place[0], *known.neighbour[place[0]].ravel().tolist()}


def test_one_azimuth_cell_has_no_derivative_along_phi():
    r, theta, _ = log_mesh(8)
    snapshot = random_snapshot(block_grid(r, theta, [0.0, 0.1], (1, 2, 1)))
    assert not fv.gradient(snapshot, "magnetic_phi").phi.any()
    only_theta = snapshot.with_cells(
        **{name: 0 * snapshot.cell(name) for name in (NAMES[0], NAMES[2])}
    )
    turned = fv.curl(only_theta, "magnetic")
    assert not turned.r.any()
    assert turned.phi.any()


def test_blocks_of_one_azimuth_cell_see_their_neighbours():
    r, theta, phi = log_mesh(8)
    whole = random_snapshot(block_grid(r, theta, phi))
    finer, cells = split(whole.grid, [whole.cell(name) for name in NAMES], (4, 1, 1))
    pieces = fv.Snapshot.from_grid(finer, cells=dict(zip(NAMES, cells, strict=True)))
    expected = split(whole.grid, [fv.gradient(whole, "magnetic_r").phi], (4, 1, 1))[1][0]
    found = fv.gradient(pieces, "magnetic_r").phi
    assert found.any()
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-12 * np.abs(expected).max())


@pytest.mark.parametrize("shape", [(1, 1, 1), (1, 2, 1), (3, 1, 2), (2, 2, 2)])
def test_thin_blocks_give_finite_values_and_no_slope_of_a_constant(shape):
    grid = block_grid(
        np.linspace(1, 2, shape[2] + 1),
        np.linspace(1, 2, shape[1] + 1),
        np.linspace(0, 1, shape[0] + 1),
    )
    snapshot = fv.Snapshot.from_grid(grid, cells={"dye": np.full((1, *shape), 3.0)})
    for component in fv.gradient(snapshot, "dye"):
        np.testing.assert_allclose(component, 0, atol=1e-13)


def axis_grid(n):
    return block_grid(np.linspace(1, 2, n + 1), np.linspace(0, np.pi, n + 1), np.linspace(
        0, 2 * np.pi, n + 1))  # fmt: skip


def test_the_axis_costs_no_accuracy_to_an_axisymmetric_field():
    """B = sin(theta) (r^2 phi-hat + cos(theta) theta-hat): its curl and divergence by hand."""

    def error(n):
        snapshot = snapshot_of(
            axis_grid(n),
            (
                lambda r, t, p: 0 * r * t * p,
                lambda r, t, p: np.sin(t) * np.cos(t) + 0 * r * p,
                lambda r, t, p: r**2 * np.sin(t) + 0 * p,
            ),
        )
        turned = fv.curl(snapshot, "magnetic")
        spread = fv.divergence(snapshot, "magnetic")
        truth = (
            filled(snapshot.grid, lambda r, t, p: 2 * r * np.cos(t) + 0 * p),
            filled(
                snapshot.grid, lambda r, t, p: (2 * np.cos(t) ** 2 - np.sin(t) ** 2) / r + 0 * p
            ),
        )
        return [np.abs(turned.r - truth[0]).max(), np.abs(spread - truth[1]).max()]

    ratios = np.divide(error(24), error(48))
    assert np.all(ratios > 3.5)


def test_a_field_across_the_axis_converges_away_from_it():
    """A uniform field along x has no curl; next to the axis one order is lost, as documented."""

    def largest(n):
        turned = fv.curl(
            snapshot_of(
                axis_grid(n),
                (
                    lambda r, t, p: np.sin(t) * np.cos(p) + 0 * r,
                    lambda r, t, p: np.cos(t) * np.cos(p) + 0 * r,
                    lambda r, t, p: -np.sin(p) + 0 * r * t,
                ),
            ),
            "magnetic",
        ).r
        assert np.isfinite(turned).all()
        return np.abs(turned).max(), np.abs(turned[:, :, n // 4 : -n // 4]).max()

    coarse, fine = largest(24), largest(48)
    assert coarse[0] / fine[0] > 1.7
    assert coarse[1] / fine[1] > 3.5


def test_single_precision_stays_and_costs_only_its_rounding():
    grid = MESHES["two levels"](32)
    double = snapshot_of(grid, (b_r, b_theta, b_phi))
    single = fv.Snapshot.from_grid(
        grid, cells={name: double.cell(name).astype("f4") for name in NAMES}
    )
    smallest = min(np.diff(edges, axis=1).min() for edges in (grid.r_edges, grid.theta_edges,
                                                              grid.phi_edges))  # fmt: skip
    for exact, found in zip(all_of(double), all_of(single), strict=True):
        assert found.dtype == np.float32
        assert exact.dtype == np.float64
        np.testing.assert_allclose(found, exact, rtol=0, atol=20 * 6e-8 / smallest)


def test_face_fields_give_the_flux_out_of_each_cell_over_its_volume():
    r, theta, phi = (edges[:4] for edges in log_mesh(8))
    random = np.random.default_rng(3)
    faces = {
        "magnetic_r": random.normal(size=(3, 3, 4)),
        "magnetic_theta": random.normal(size=(3, 4, 3)),
        "magnetic_phi": random.normal(size=(4, 3, 3)),
    }
    found = fv.divergence(fv.Snapshot.from_arrays(r, theta, phi, faces=faces), "magnetic")
    k, j, i = 1, 2, 0
    turn, fall = phi[k + 1] - phi[k], np.cos(theta[j]) - np.cos(theta[j + 1])
    ring = (r[i + 1] ** 2 - r[i] ** 2) / 2
    out_r = [r[i + a] ** 2 * fall * turn * faces["magnetic_r"][k, j, i + a] for a in (0, 1)]
    out_t = [ring * np.sin(theta[j + a]) * turn * faces["magnetic_theta"][k, j + a, i]
             for a in (0, 1)]  # fmt: skip
    out_p = [ring * (theta[j + 1] - theta[j]) * faces["magnetic_phi"][k + a, j, i] for a in (0, 1)]
    volume = (r[i + 1] ** 3 - r[i] ** 3) / 3 * fall * turn
    expected = sum(high - low for low, high in (out_r, out_t, out_p)) / volume
    assert found[0, k, j, i] == pytest.approx(expected, rel=1e-12)


def test_the_demo_discs_faces_are_free_of_divergence(small_disc):
    disc = small_disc(levels=2)
    found = fv.divergence(disc, "magnetic")
    cells_only = fv.Snapshot.from_grid(disc.grid, cells={name: disc.cell(name) for name in NAMES})
    assert np.abs(found).max() < 1e-10 * np.abs(fv.divergence(cells_only, "magnetic")).max()


def test_errors_name_the_work():
    snapshot = random_snapshot(block_grid(*log_mesh(8)))
    with pytest.raises(MissingFieldError, match=r"Cannot work out the gradient: .*density"):
        fv.gradient(snapshot, "density")
    with pytest.raises(MissingFieldError, match=r"Cannot work out the curl: .*velocity_r"):
        fv.curl(snapshot, "velocity")
    with pytest.raises(MissingFieldError, match=r"Cannot work out the divergence: .*velocity_r"):
        fv.divergence(snapshot, "velocity")
    with pytest.raises(
        FieldvizError, match=r"expected 'magnetic', 'velocity' or .* got 'electric'"
    ):
        fv.curl(snapshot, "electric")
    with pytest.raises(FieldvizError, match="got 2 names"):
        fv.divergence(snapshot, NAMES[:2])
