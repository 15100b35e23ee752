"""Means and covariances along azimuth on the common mesh."""

import numpy as np
import pytest
from disc_changes import cell_fields, refined_blocks, stirred
from hypothesis import given, settings
from hypothesis import strategies as st

import fieldviz as fv
from fieldviz.derived.azimuth_sums import azimuth_cells, azimuth_moments, meridional_mesh
from fieldviz.errors import FieldvizError, MissingFieldError

PHI, THETA, R = np.linspace(0, 0.5, 9), np.pi / 2 + np.linspace(-0.4, 0.4, 9), np.geomspace(1, 2, 9)
REFINED = {
    "one azimuth": lambda k, j, i: k == 0,
    "above": lambda k, j, i: j == 0,
    "outside": lambda k, j, i: i == 1,
    "one corner": lambda k, j, i: (k, j, i) == (1, 0, 1),
}


def wavy(r, theta, phi):
    return {
        "density": 2 + np.cos(4 * phi) * r + theta,
        "a": 1e3 + r * np.sin(phi * 12) + theta,
        "b": np.cos(phi * 12) * theta,
    }


def by_hand(snapshot, weighted):
    """Mean, and covariance of a and b, at every place of the mesh from all cells over it."""
    mesh = meridional_mesh(snapshot.grid)
    phi_edges = np.unique(snapshot.grid.phi_edges)
    shape = (len(phi_edges) - 1, len(mesh.theta), len(mesh.r))
    p, t, r = np.meshgrid(0.5 * (phi_edges[1:] + phi_edges[:-1]), mesh.theta, mesh.r, indexing="ij")
    block = snapshot.grid.locate(r, t, p)
    picked = {name: np.empty(shape) for name in ("density", "a", "b")}
    for index in np.ndindex(*shape):
        n = block[index]
        edges = snapshot.grid.edges(n)
        i, j, k = (
            np.searchsorted(e, x[index], side="right") - 1
            for e, x in zip(edges, (r, t, p), strict=True)
        )
        for name, values in picked.items():
            values[index] = snapshot.cell(name)[n, k, j, i]
    weight = np.broadcast_to(np.diff(phi_edges)[:, None, None], shape)
    weight = weight * picked["density"] if weighted else weight
    mean = {n: np.average(v, 0, weight) for n, v in picked.items()}
    product = (picked["a"] - mean["a"]) * (picked["b"] - mean["b"])
    return mean["a"], np.average(product, 0, weight)


@pytest.mark.parametrize("where", REFINED)
def test_levels_are_joined_as_if_by_hand(where):
    snapshot = refined_blocks((PHI, THETA, R), wavy, REFINED[where])
    assert snapshot.grid.levels == [0, 1]
    found = azimuth_moments(
        snapshot, ("a", "b"), ("a", "b"), pairs=[("a", "b")], mass_pairs=[("a", "b")]
    )
    for weighted, means, covariances in (
        (False, found.means, found.covariances),
        (True, found.mass_means, found.mass_covariances),
    ):
        mean, covariance = by_hand(snapshot, weighted)
        np.testing.assert_allclose(means["a"], mean, rtol=1e-14)
        np.testing.assert_allclose(covariances["b", "a"], covariance, atol=1e-12)
    assert np.allclose(found.azimuth, 0.5)


@pytest.mark.parametrize("where", REFINED)
def test_volumes_of_the_mesh_are_those_of_the_wedge(where):
    snapshot = refined_blocks((PHI, THETA, R), wavy, REFINED[where])
    mesh = meridional_mesh(snapshot.grid)
    assert mesh.volumes.sum() == pytest.approx(snapshot.grid.wedge_volume, rel=1e-13)
    found = azimuth_moments(snapshot, ["density"])
    mass = sum(
        float((snapshot.cell("density")[n] * snapshot.grid.volumes(n)).sum())
        for n in range(snapshot.grid.n_blocks)
    )
    assert (found.means["density"] * mesh.volumes).sum() == pytest.approx(mass, rel=1e-13)


def test_small_fluctuations_on_a_fast_rotation_keep_their_digits():
    """Variance 0.5e-16 about 1e3 would vanish in <v^2> - <v>^2."""
    phi = 0.5 * (PHI[1:] + PHI[:-1])
    size = 1e-8
    values = 1e3 + size * np.cos(4 * np.pi * phi / 0.5)[:, None, None] * np.ones((8, 8, 8))
    snapshot = fv.Snapshot.from_arrays(R, THETA, PHI, cells={"a": values})
    found = azimuth_moments(snapshot, ["a"], pairs=[("a", "a")])
    np.testing.assert_allclose(found.covariances["a", "a"], size**2 / 2, rtol=1e-4)


@settings(max_examples=15)
@given(st.floats(0.001, 0.5), st.integers(2, 9))
def test_bands_have_their_exact_volume(angle, n):
    theta = np.pi / 2 + np.linspace(-0.3, 0.5, n)
    snapshot = fv.Snapshot.from_arrays([1, 2, 3], theta, [0, 1])
    mesh = meridional_mesh(snapshot.grid)
    found = (mesh.band_share(angle) * mesh.volumes).sum()
    exact = (27 - 1) / 3 * (np.sin(min(angle, 0.3)) + np.sin(min(angle, 0.5)))
    assert found == pytest.approx(exact, rel=1e-12)


def test_surfaces_and_the_midplane_are_interpolated_between_cells_own_middles():
    """A function linear in theta comes out exactly, whatever the levels on either side."""
    for where in ("above", "outside"):
        snapshot = refined_blocks(
            (PHI, THETA, R), lambda r, t, p: {"a": 3 * t + 0 * r + 0 * p}, REFINED[where]
        )
        found = azimuth_moments(snapshot, ["a"])
        at = found.mesh.at_theta(found.means["a"], 1.45)
        np.testing.assert_allclose(at, 3 * 1.45, rtol=1e-13)
        np.testing.assert_allclose(found.mesh.at_midplane(found.means["a"]), 1.5 * np.pi)
        assert np.isnan(found.mesh.at_theta(found.means["a"], 0.5)).all()


def test_edges_that_differ_by_rounding_are_one():
    disc = fv.demo_disc(shape=(2, 16, 16), levels=2)
    grid = disc.grid
    single = type(grid)(
        grid.r_edges.astype(np.float32),
        grid.theta_edges.astype(np.float32),
        grid.phi_edges.astype(np.float32),
        grid.level,
    )
    here, there = meridional_mesh(grid), meridional_mesh(single)
    assert there.row_start.shape == here.row_start.shape
    assert there.volumes.sum() == pytest.approx(single.wedge_volume, rel=1e-6)


def test_bad_cells_are_left_out_of_everything_and_counted():
    disc = stirred(shape=(4, 16, 8))
    speed, density = disc.cell("velocity_r").copy(), disc.cell("density").copy()
    speed[0, 1, 5, 3] = np.nan
    density[0, :, 7, 2] = -1.0
    spoilt = disc.with_cells(velocity_r=speed, density=density)
    found = azimuth_moments(spoilt, ["pressure"], ["velocity_r"])
    assert found.n_left_out == 5
    expected = np.delete(disc.cell("pressure")[0, :, 5, 3], 1).mean()
    assert found.means["pressure"][5, 3] == pytest.approx(expected)
    assert np.isnan(found.means["pressure"][7, 2])
    assert np.isnan(found.mass_means["velocity_r"][7, 2])
    assert np.isfinite(found.means["pressure"]).sum() == found.means["pressure"].size - 1
    volumes = disc.grid.volumes(0)
    share = (volumes[1, 5, 3] + volumes[:, 7, 2].sum()) / volumes.sum()
    assert found.share_left_out == pytest.approx(share)
    assert found.notes[0].startswith("5 cells")


def test_cells_at_the_floor_are_left_out_when_it_is_given():
    disc = stirred(shape=(4, 16, 8))
    density = disc.cell("density").copy()
    density[0, 0, :2] = 1e-9
    found = azimuth_moments(disc.with_cells(density=density), ["pressure"], density_floor=1e-9)
    assert found.n_left_out == 2 * 8
    assert "of the floor" in found.notes[0]


def test_more_than_a_tenth_left_out_is_flagged():
    disc = stirred(shape=(4, 16, 8))
    density = np.where(np.arange(16)[:, None] < 4, np.nan, disc.cell("density"))
    found = azimuth_moments(disc.with_cells(density=density), ["density"])
    assert "more than 10 %" in found.notes[0]


def test_what_cannot_be_averaged_is_refused():
    disc = cell_fields(fv.demo_disc(shape=(2, 8, 8)))
    with pytest.raises(MissingFieldError, match="nothing_such"):
        azimuth_moments(disc, ["nothing_such"])
    with pytest.raises(FieldvizError, match="ask for its mean"):
        azimuth_moments(disc, ["density"], pairs=[("density", "pressure")])
    assert azimuth_moments(disc).means == {}
    assert azimuth_cells(disc.grid) == 2
    assert azimuth_cells(fv.demo_disc(shape=(1, 8, 8)).grid) == 1


def test_profiles_are_on_the_cells_at_the_midplane_and_weighted_by_area():
    """Only blocks that do not touch the midplane are refined: profiles keep the coarse cells."""
    theta = np.pi / 2 + np.linspace(-0.2, 0.6, 9)
    snapshot = refined_blocks((PHI, theta, R), wavy, lambda k, j, i: j == 1)
    mesh = meridional_mesh(snapshot.grid)
    assert snapshot.grid.levels == [0, 1]
    np.testing.assert_allclose(mesh.profile_edges, R, rtol=1e-15)
    assert len(mesh.r) == 16
    low, middle, high = R[:-1], 0.5 * (R[1:] + R[:-1]), R[1:]
    areas = middle**2 - low**2, high**2 - middle**2
    values = mesh.r[::2], mesh.r[1::2]
    expected = (areas[0] * values[0] + areas[1] * values[1]) / (areas[0] + areas[1])
    np.testing.assert_allclose(mesh.averaged(mesh.r), expected, rtol=1e-14)
    np.testing.assert_allclose(mesh.summed(mesh.r), values[0] + values[1], rtol=1e-14)
    np.testing.assert_allclose(mesh.spread(R[:-1]), np.repeat(R[:-1], 2))
