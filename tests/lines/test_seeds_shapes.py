"""Seeds on rings, cones and spheres, given points, and how numbers of seeds are shared out."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import fieldviz as fv
from fieldviz.lines.seeds_common import quantile, shared_out


@pytest.fixture(scope="module")
def disc():
    return fv.demo_disc(shape=(2, 8, 8))


def test_ring(disc):
    seeds = fv.ring_seeds(2.0, 1.2, 4, disc.grid)
    np.testing.assert_allclose(
        seeds, [[2.0, 1.2, np.pi / 32 * n] for n in (1, 3, 5, 7)], rtol=1e-14
    )


def test_ring_on_a_wedge_that_begins_elsewhere():
    grid = fv.Snapshot.from_arrays(
        [1.0, 2.0], [1.0, 2.0], [-0.5, 0.5], cells={"density": np.ones((1, 1, 1))}
    ).grid
    np.testing.assert_allclose(fv.ring_seeds(1.0, 1.0, 2, grid)[:, 2], [-0.25, 0.25])


def test_cone(disc):
    seeds = fv.cone_seeds(disc, 1.3, (3, 4))
    assert seeds.shape == (12, 3)
    r, theta, phi = seeds.T
    np.testing.assert_allclose(r.reshape(3, 4), np.tile(5 ** (np.arange(1, 8, 2) / 8), (3, 1)))
    assert (theta == 1.3).all()
    np.testing.assert_allclose(np.unique(phi), np.pi / 4 * np.array([1, 3, 5]) / 6)
    inner = fv.cone_seeds(disc, 1.3, (1, 5), r_range=(1.5, 2.0))
    assert ((inner[:, 0] > 1.5) & (inner[:, 0] < 2.0)).all()


def test_cone_from_the_origin():
    snapshot = fv.Snapshot.from_arrays(
        [0.0, 1.0, 2.0], [1.0, 2.0], [0.0, 0.5], cells={"density": np.ones((1, 1, 2))}
    )
    np.testing.assert_allclose(fv.cone_seeds(snapshot, 1.5, (1, 2))[:, 0], [0.5, 1.5])


def test_sphere_seeds_share_the_area(disc):
    """Each row of seeds has the same number on the same area: elementary, dA = r^2 dcos dphi."""
    seeds = fv.sphere_seeds(disc, 3.0, (2, 200))
    assert (seeds[:, 0] == 3.0).all()
    theta = seeds[:200, 1]
    assert (np.diff(theta) > 0).all()
    up, down = disc.grid.theta_range
    np.testing.assert_allclose(
        (np.cos(up) - np.cos(theta)) / (np.cos(up) - np.cos(down)), (np.arange(200) + 0.5) / 200
    )


def test_given_points_are_checked_and_copied():
    points = np.array([[1, 2, 3], [99, -1, 7]])
    seeds = fv.given_seeds(points)
    np.testing.assert_array_equal(seeds, points)
    assert seeds.dtype == np.float64
    own = np.ones((1, 3))
    fv.given_seeds(own)[0, 0] = 5
    assert own[0, 0] == 1


@pytest.mark.parametrize(
    ("points", "words"),
    [
        ([1.0, 2.0, 3.0], r"got \(3,\)"),
        (np.ones((3, 2)), r"got \(3, 2\)"),
        (np.ones((2, 3, 1)), r"got \(2, 3, 1\)"),
        (np.ones((0, 3)), "the number of points to be a whole number of 1"),
        ([[1, 2, np.nan], [1, 2, 3]], "1 of 2 rows, the first in row 0"),
        ([[1, 2, 3], [1, np.inf, 3]], "1 of 2 rows, the first in row 1"),
        ("points", "got str"),
        ([[1, 2, 3], [4]], "got list"),
        ([[1, 2, 3j]], "got list"),
        (None, r"got \(\)"),
    ],
)
def test_bad_points(points, words):
    with pytest.raises(fv.FieldvizError, match=words):
        fv.given_seeds(points)


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda d: fv.ring_seeds(6.0, 1.5, 3, d.grid), "expected a radius within"),
        (lambda d: fv.ring_seeds(np.nan, 1.5, 3, d.grid), "expected a radius within"),
        (lambda d: fv.ring_seeds(2.0, 0.1, 3, d.grid), "expected a colatitude"),
        (lambda d: fv.ring_seeds(2.0, 1.5, 0, d.grid), "expected count"),
        (lambda d: fv.cone_seeds(d, 3.0, (2, 2)), "expected a colatitude"),
        (lambda d: fv.cone_seeds(d, 1.5, (2, 0)), "each entry of the shape"),
        (lambda d: fv.cone_seeds(d, 1.5, (2, 2, 2)), r"expected a shape \(n_phi, n_r\)"),
        (lambda d: fv.cone_seeds(d, 1.5, 4), r"expected a shape \(n_phi, n_r\)"),
        (lambda d: fv.cone_seeds(d, 1.5, (2, 2), r_range=(2.0, 9.0)), "range of radii"),
        (lambda d: fv.sphere_seeds(d, 0.5, (2, 2)), "expected a radius within"),
        (lambda d: fv.sphere_seeds(d, 2.0, (5000, 5000)), "the number of seeds"),
        (lambda d: fv.sphere_seeds(d, 2.0, (2.5, 2)), "each entry of the shape"),
    ],
)
def test_bad_shapes(disc, make, words):
    with pytest.raises(fv.FieldvizError, match=words):
        make(disc)


@given(
    count=st.integers(1, 10_000),
    amounts=st.lists(st.floats(0, 1e6), min_size=1, max_size=9).filter(lambda a: sum(a) > 1e-6),
)
def test_shares_add_up_and_are_within_one_of_fair(count, amounts):
    found = shared_out(count, np.array(amounts))
    assert found.sum() == count
    assert (np.abs(found - count * np.array(amounts) / np.sum(amounts)) <= 1 + 1e-9 * count).all()
    assert (found[np.array(amounts) == 0] == 0).all()


@given(
    weight=st.lists(st.sampled_from([0.0, 1e-9, 0.5, 1.0, 7.0]), min_size=1, max_size=12).filter(
        lambda w: sum(w) > 0.1
    ),
    smooth=st.booleans(),
)
def test_quantiles_rise_and_avoid_what_has_no_weight(weight, smooth):
    edges = np.cumsum(np.concatenate([[0.0], 1 + np.arange(len(weight)) % 3]))
    share = np.linspace(0, 1, 101)
    cell, place = quantile(edges, np.array(weight), share, smooth=smooth)
    assert (np.diff(place) >= -1e-12).all()
    assert (np.array(weight)[cell] > 0).all()
    assert ((place >= edges[cell]) & (place <= edges[cell + 1])).all()
    if not smooth:
        cumulative = np.concatenate([[0.0], np.cumsum(weight)])
        back = np.interp(place, edges, cumulative) / cumulative[-1]
        np.testing.assert_allclose(back, share, atol=1e-12)
