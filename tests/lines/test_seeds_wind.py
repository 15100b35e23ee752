"""Seeds in the wind against the mass loss of the Saltmarsh disc, known in closed form."""

import numpy as np
import pytest

import fieldviz as fv

SHAPE = (4, 64, 96)
MIDPLANE = np.pi / 2


@pytest.mark.parametrize("ratio", [1.0, 0.5, 0.25, 0.0, -1.0])
def test_sides_share_the_lines_by_their_mass_loss(ratio, small_disc):
    snapshot = small_disc(shape=SHAPE, side_ratio=ratio)
    plan = fv.wind_plan(snapshot, 300)
    above = plan.points[:, 1] < MIDPLANE
    p = max(ratio, 0.0)
    assert above.sum() == round(300 / (1 + p))
    assert (~above).sum() == 300 - above.sum()
    np.testing.assert_array_equal(plan.group, np.where(above, 0, 1))
    np.testing.assert_allclose(np.abs(plan.points[:, 1] - MIDPLANE), 0.4, rtol=2e-3)
    np.testing.assert_array_equal(plan.points, fv.wind_seeds(snapshot, 300))


def test_the_other_side_may_be_the_stronger_one(small_disc):
    found = np.bincount(fv.wind_plan(small_disc(shape=SHAPE, side_ratio=3.0), 400).group)
    assert found.tolist() == [100, 300]


@pytest.mark.parametrize("ratio", [1.0, 0.5])
def test_amount_and_radii_follow_the_closed_form(ratio):
    disc = fv.SaltmarshDisc(side_ratio=ratio)
    plan = fv.wind_plan(fv.demo_disc(shape=(4, 128, 192), side_ratio=ratio), 90, thickness=0.1)
    for side, theta in enumerate((MIDPLANE - 0.4, MIDPLANE + 0.4)):
        chosen = plan.group == side
        r, per_line = plan.points[chosen, 0], plan.amount[chosen][0]
        exact = disc.mass_loss(theta, 1, 5)
        # Second order in the cell size; 1e-2 of the loss and a fifth of a line at this size.
        assert per_line * chosen.sum() == pytest.approx(exact, rel=1e-2)
        share = np.array([disc.mass_loss(theta, 1, x) for x in r]) / exact
        wanted = (np.arange(len(r)) + 0.5) / len(r)
        np.testing.assert_allclose(share, wanted, atol=0.2 / len(r))
    assert plan.total == pytest.approx(plan.net, rel=1e-12)


def test_range_and_height(small_disc):
    snapshot = small_disc(shape=SHAPE)
    plan = fv.wind_plan(
        snapshot, 50, scale_heights=5.0, thickness=0.1, r_range=(2.0, 3.0), scatter_seed=1
    )
    r, theta, phi = plan.points.T
    assert 2.0 <= r.min() < 2.1
    assert 2.9 < r.max() <= 3.0
    np.testing.assert_allclose(np.unique(theta), [MIDPLANE - 0.5, MIDPLANE + 0.5])
    assert 0 <= phi.min() < phi.max() <= np.pi / 4
    assert "clipped" in fv.wind_plan(snapshot, 5, scale_heights=9.0).notes[0]


@pytest.mark.parametrize("parts", [{"blocks": (2, 4, 3)}, {"levels": 2}])
def test_blocks_and_levels(parts, small_disc):
    one = fv.wind_plan(small_disc(shape=SHAPE), 200, thickness=0.1)
    other = fv.wind_plan(small_disc(shape=SHAPE, **parts), 200, thickness=0.1)
    np.testing.assert_array_equal(one.group, other.group)
    # A tenth of a coarse cell; blocks alone change the demo's own values by rounding.
    tolerance = 1e-9 if "blocks" in parts else 0.1 * (5 ** (1 / 96) - 1)
    np.testing.assert_allclose(one.points[:, 0], other.points[:, 0], rtol=tolerance)


def test_reversing_the_field_or_scaling_the_density_moves_nothing(small_disc):
    plain = small_disc(shape=SHAPE, side_ratio=0.5)
    plan = fv.wind_plan(plain, 60)
    turned = fv.wind_plan(small_disc(shape=SHAPE, side_ratio=0.5, reversed_field=True), 60)
    np.testing.assert_array_equal(plan.points, turned.points)
    heavier = plain.with_cells(
        density=8 * plain.cell("density"), pressure=8 * plain.cell("pressure")
    )
    scaled = fv.wind_plan(heavier, 60)
    np.testing.assert_array_equal(plan.points, scaled.points)
    np.testing.assert_allclose(scaled.amount, 8 * plan.amount, rtol=1e-12)


def flow(v_theta):
    """Uniform density and a given v_theta(theta, phi): (n_phi, n_theta) values."""
    theta, phi = MIDPLANE + np.linspace(-0.7, 0.7, 15), np.linspace(0, 0.8, 5)
    shape = (4, 14, 8)
    middles = 0.5 * (theta[1:] + theta[:-1])
    values = np.broadcast_to(np.asarray(v_theta(middles, np.arange(4)[:, None]))[..., None], shape)
    cells = {"density": np.ones(shape), "velocity_theta": values}
    return fv.Snapshot.from_arrays(np.linspace(1, 2, 9), theta, phi, cells=cells)


def test_inward_patches_get_no_lines():
    """Outward in azimuths 0 and 1, half as fast inward in 2; nothing moves in 3."""
    speeds = np.array([1.0, 2.0, -0.5, 0.0])
    plan = fv.wind_plan(flow(lambda t, k: np.sign(t - MIDPLANE) * speeds[k]), 120, thickness=0.1)
    for side in (0, 1):
        phi = plan.points[plan.group == side, 2]
        assert np.histogram(phi, np.linspace(0, 0.8, 5))[0] == pytest.approx([20, 40, 0, 0], abs=1)
    area = np.cos(0.4) * 1.5 * 0.2
    np.testing.assert_allclose(plan.amount, area * 2.5 / 60, rtol=1e-12)


@pytest.mark.parametrize("speed", [0.0, -1.0, np.nan])
def test_nothing_leaves(speed):
    with pytest.raises(fv.FieldvizError, match="expected mass that leaves through a cone"):
        fv.wind_seeds(flow(lambda t, k: speed * np.sign(t - MIDPLANE) + 0 * k), 5, thickness=0.1)


def test_cells_without_a_number_are_left_out():
    bad = np.array([1.0, np.nan, 1.0, 1.0])
    plan = fv.wind_plan(flow(lambda t, k: np.sign(t - MIDPLANE) * bad[k]), 60, thickness=0.1)
    found = np.histogram(plan.points[:, 2], np.linspace(0, 0.8, 5))[0]
    assert found == pytest.approx([20, 0, 20, 20], abs=1)
    assert "16 of 64 patches" in plan.notes[-1]


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"count": 0}, "expected count to be a whole number"),
        ({"thickness": 0.0}, "expected a thickness H/R"),
        ({"thickness": float("nan")}, "expected a thickness H/R"),
        ({"scale_heights": -1.0}, "expected a positive height"),
        ({"r_range": (1.0, 2.5)}, "expected a range of radii"),
        ({"thickness": 0.5}, "expected at least 3 H on each side"),
    ],
)
def test_bad_input(change, words):
    settings = {"count": 5, "thickness": 0.1, **change}
    with pytest.raises(fv.FieldvizError, match=words):
        fv.wind_seeds(flow(lambda t, k: t - MIDPLANE + 0 * k), **settings)


def test_missing_field():
    snapshot = fv.Snapshot.from_arrays(
        [1.0, 2.0], [1.0, 2.0], [0.0, 1.0], cells={"density": np.ones((1, 1, 1))}
    )
    with pytest.raises(fv.FieldvizError, match="without velocity_theta"):
        fv.wind_seeds(snapshot, 5)
