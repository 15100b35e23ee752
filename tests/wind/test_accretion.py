"""Accretion between the surfaces and the ejection index against closed forms."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import fieldviz as fv
from fieldviz.errors import FieldvizError
from fieldviz.wind.accretion import ejection_index, global_index
from fieldviz.wind.outflow import outflow


def falling(exponent, shape=(2, 40, 48), layer=0.1):
    """rho v_r r^2 = -r^exponent within |cos theta| < sin(layer), else 0."""
    r = np.geomspace(1, 4, shape[2] + 1)
    theta = np.linspace(np.pi / 2 - 0.5, np.pi / 2 + 0.5, shape[1] + 1)
    made = fv.Snapshot.from_arrays(r, theta, np.linspace(0, 0.5, shape[0] + 1))
    r_c, theta_c, _ = made.grid.cell_centres(0)
    inside = np.abs(theta_c[:, None] - np.pi / 2) < layer
    speed = np.where(inside, -(r_c ** (exponent - 2)), 0.0)
    cells = {
        "density": np.ones(shape),
        "velocity_r": np.broadcast_to(speed, shape),
        "velocity_theta": np.zeros(shape),
        "velocity_phi": np.ones(shape),
    }
    return made.with_cells(**{name: values[None] for name, values in cells.items()})


@settings(max_examples=6)
@given(st.floats(-1.0, 2.0), st.floats(0.1, 10))
def test_a_power_law_gives_its_exponent(xi, size):
    r = np.geomspace(1, 5, 64)
    found = ejection_index(r, size * r**xi)
    assert found.value == pytest.approx(xi, abs=1e-10)
    assert found.error < 1e-9


@pytest.mark.parametrize("xi", [0.1, 0.5, 1.2])
def test_accretion_of_a_snapshot_gives_its_exponent(xi):
    found = outflow(falling(xi), 3.0, thickness=0.1)
    exact = 0.5 * 2 * np.sin(0.1) * found.accretion.r**xi
    np.testing.assert_allclose(found.accretion.rate, exact, rtol=2e-3)
    assert found.ejection.value == pytest.approx(xi, abs=3e-3)
    assert f"ejection index {found.ejection.value:.3g}" in found.ejection.sentence


def test_the_error_is_that_of_many_noisy_profiles():
    """Independent noise: the mean jackknife error is the scatter of the slopes."""
    rng = np.random.default_rng(5)
    r = np.geomspace(1, 5, 96)
    found = [ejection_index(r, r**0.4 * np.exp(0.1 * rng.standard_normal(96))) for _ in range(150)]
    scatter = np.std([f.value for f in found])
    assert np.mean([f.error for f in found]) == pytest.approx(scatter, rel=0.3)
    assert np.mean([f.value for f in found]) == pytest.approx(0.4, abs=0.01)


def test_uneven_radii_count_by_their_range():
    """A kinked profile: many points in one half must not pull the slope."""
    even = np.geomspace(1, 4, 400)
    uneven = np.sort(np.concatenate([np.geomspace(1, 2, 380), np.geomspace(2.01, 4, 60)]))

    def kinked(r):
        return np.where(r < 2, r**0.2, 2**0.2 * (r / 2) ** 0.8)

    a, b = (ejection_index(r, kinked(r)).value for r in (even, uneven))
    assert a == pytest.approx(b, abs=0.01)


@pytest.mark.parametrize(
    ("rate", "word"),
    [
        (lambda r: r - 2.0, "changes sign"),
        (lambda r: -r, "outward"),
        (lambda r: 0 * r, "changes sign"),
    ],
)
def test_undefined_where_accretion_is_not_accretion(rate, word):
    r = np.geomspace(1, 4, 40)
    found = ejection_index(r, rate(r))
    assert np.isnan(found.value)
    assert np.isnan(found.total)
    assert word in found.reason
    assert word in found.sentence


def test_undefined_below_a_factor_of_two():
    r = np.geomspace(1, 4, 65)
    assert "factor 2" in ejection_index(r, r, r_range=(1.0, 1.9)).reason
    assert ejection_index(r, r, r_range=(1.0, 2.01)).value == pytest.approx(1.0)
    few = ejection_index(r[::8], r[::8])
    assert np.isnan(few.error)
    assert any("no error" in note for note in few.notes)
    with pytest.raises(FieldvizError, match="increasing radii"):
        ejection_index(r[::-1], r)


def test_radii_without_a_number_are_left_out_and_said():
    r = np.geomspace(1, 4, 65)
    rate = r**0.3
    rate[10] = np.nan
    found = ejection_index(r, rate)
    assert found.value == pytest.approx(0.3, abs=1e-10)
    assert any(note.startswith("1 radii") for note in found.notes)


def test_global_form_inverts_the_power_law():
    """Mdot_w = Mdot_acc(r_out) - Mdot_acc(r_in) of r^xi."""
    assert global_index(1.0, 5**0.37 - 1, (1.0, 5.0)) == pytest.approx(0.37)
    assert np.isnan(global_index(-1.0, 0.5, (1.0, 5.0)))
    assert np.isnan(global_index(1.0, -1.5, (1.0, 5.0)))
    assert np.isnan(global_index(1.0, 0.5, (0.0, 5.0)))


def test_demo_accretion_is_the_stream_function_and_its_index():
    disc = fv.SaltmarshDisc()
    found = outflow(fv.demo_disc(shape=(1, 192, 192)), 5.0)
    cones = np.pi / 2 - 0.5, np.pi / 2 + 0.5
    exact = np.array([disc.inflow(r, *cones) for r in found.accretion.r])
    np.testing.assert_allclose(found.accretion.rate, exact, rtol=2e-3)
    fitted = ejection_index(found.accretion.r, exact)
    assert found.ejection.value == pytest.approx(fitted.value, abs=1e-3)
    both = np.log(exact[-1] / exact[0]) / np.log(5)
    assert found.ejection.total == pytest.approx(both, abs=2e-3)


def test_split_by_height_adds_up_and_knows_where_gas_falls():
    """The demo's gas falls in at |cos theta| > 0.3 only, the other one within 1 H."""
    for disc, height, midplane in ((fv.demo_disc(shape=(1, 96, 48)), 5.0, 0), (falling(0.3), 3, 1)):
        found = outflow(disc, height, thickness=0.1).accretion
        total = found.midplane + found.upper_layer + found.lower_layer
        np.testing.assert_allclose(total, found.rate, rtol=1e-12)
        np.testing.assert_allclose(found.midplane / found.rate, midplane, atol=1e-10)
        np.testing.assert_allclose(found.upper_layer, found.lower_layer, atol=1e-12)
    assert "100.0 % within 1 H" in found.sentence


def test_a_fit_over_its_own_range():
    disc = fv.demo_disc(shape=(1, 96, 64))
    one = outflow(disc, 5.0, fit_range=(1.5, 4.0)).ejection
    two = outflow(disc, 5.0, radii=(1.5, 4.0)).ejection
    assert one == two
    assert one.r_range == pytest.approx((1.5, 4.0))
