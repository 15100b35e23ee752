"""Lean of the field against closed forms of the demo disc."""

import numpy as np
import pytest
from flow_changes import changed, mirrored, without
from hypothesis import given, settings
from hypothesis import strategies as st

import fieldviz as fv
from fieldviz.errors import MissingFieldError
from fieldviz.wind.inclination import inclination, lean

_TILT = np.degrees(np.arctan(0.75))


@settings(max_examples=20)
@given(st.floats(0.3, 2.8), st.floats(-85, 85), st.sampled_from([1, -1]))
def test_lean_of_a_line_of_known_angle(theta, degrees, polarity):
    """tan i = sgn(z) B_R/B_z, whatever the polarity."""
    side = 1 if theta <= np.pi / 2 else -1
    B_R, B_z = np.sin(np.radians(degrees)), side * np.cos(np.radians(degrees))
    b_r = B_R * np.sin(theta) + B_z * np.cos(theta)
    b_theta = B_R * np.cos(theta) - B_z * np.sin(theta)
    found, sideways = lean(polarity * b_r, polarity * b_theta, theta)
    assert found == pytest.approx(degrees, abs=1e-9)
    assert not sideways


def test_nearly_level_lines_lie_sideways():
    found, sideways = lean(np.array([1.0, -1.0, 0.0]), np.array([0.04, 0.04, 0.0]), np.pi / 2)
    assert found[:2].tolist() == [-90.0, 90.0]
    assert np.isnan(found[2])
    assert sideways.tolist() == [True, True, False]


def test_the_demo_leans_as_its_lines_do():
    """R = R_f + t (sqrt(z^2 + b^2 R_f^2) - b R_f): tan i = t z/sqrt(z^2 + b^2 R_f^2)."""
    disc = fv.SaltmarshDisc()
    theta = np.pi / 2 - 0.45
    c, g = np.cos(theta), disc.footpoint_factor(theta)
    exact = np.degrees(np.arctan(0.75 * c / np.hypot(c, 0.2 * g)))
    errors = []
    for n in (96, 192):
        found = inclination(fv.demo_disc(shape=(1, n, n)), 4.5, radii=(1.5, 4.0), thickness=0.1)
        errors.append(abs(found.upper.mean - exact))
        assert found.lower.mean == pytest.approx(found.upper.mean, rel=1e-9)
        assert found.total.share_sideways == 0
    assert found.total.share_steep == pytest.approx(1.0)
    # Measured at 192: 0.096 degrees; 96 is 3.5 times that.
    assert errors[-1] < 0.15
    assert errors[0] > 3 * errors[-1]


def test_odd_wind_leans_outward_above_and_inward_below():
    found = inclination(fv.demo_disc(shape=(1, 96, 96), wind="odd"), 5.0)
    assert found.upper.mean == pytest.approx(_TILT, abs=0.5)
    assert found.lower.mean == pytest.approx(-_TILT, abs=0.5)
    assert found.upper.share_steep == pytest.approx(1.0)
    assert found.lower.share_steep == 0
    shares = found.upper.mass_flux / (found.upper.mass_flux + found.lower.mass_flux)
    assert found.total.share_steep == pytest.approx(shares)


def half_steep():
    """Wind away from the midplane; field that leans 40 and 20 degrees in halves of the azimuth."""
    shape = (4, 20, 6)
    theta = np.linspace(np.pi / 2 - 0.5, np.pi / 2 + 0.5, 21)
    made = fv.Snapshot.from_arrays(np.geomspace(1, 2, 7), theta, np.linspace(0, 0.4, 5))
    middle = made.grid.cell_centres(0)[1][:, None]
    angle = np.radians([40, 40, 20, 20])[:, None, None]
    side = np.where(middle <= np.pi / 2, 1.0, -1.0)
    B_R, B_z = np.sin(angle), side * np.cos(angle)
    cells = {
        "density": 1.0 + 0 * angle,
        "velocity_r": 0.0 * angle,
        "velocity_theta": -side * np.array([1.0, 1.0, 3.0, 3.0])[:, None, None],
        "magnetic_r": B_R * np.sin(middle) + B_z * np.cos(middle),
        "magnetic_theta": B_R * np.cos(middle) - B_z * np.sin(middle),
    }
    return made.with_cells(
        **{name: np.broadcast_to(values, shape)[None].copy() for name, values in cells.items()}
    )


def test_shares_are_of_mass_not_of_area():
    """A quarter of the mass leaves where the field is steep, though that is half of the area."""
    found = inclination(half_steep(), 3.0, thickness=0.1)
    for side in (found.upper, found.lower, found.total):
        assert side.share_steep == pytest.approx(0.25)
        assert side.mean == pytest.approx(0.25 * 40 + 0.75 * 20)
    assert "25 % of the mass" in found.sentence
    assert any("does not mean no wind" in note for note in found.notes)


def test_polarity_and_mirror():
    disc = fv.demo_disc(shape=(4, 48, 32), magnetic_turbulence=3.0, side_ratio=0.4)
    cells = {name: disc.cell(name) for name in disc.cell_names}
    disc = fv.Snapshot.from_grid(disc.grid, cells=cells)
    here = inclination(disc, 4.0, thickness=0.1)
    back = inclination(changed(disc, magnetic=-1.0), 4.0, thickness=0.1)
    assert (here.upper, here.lower, here.total) == (back.upper, back.lower, back.total)
    turned = inclination(mirrored(disc), 4.0, thickness=0.1)
    assert turned.upper.share_steep == pytest.approx(here.lower.share_steep)
    assert turned.lower.mean == pytest.approx(here.upper.mean)


def test_nothing_leaves_or_nothing_known():
    dead = inclination(fv.demo_disc(shape=(1, 48, 32), wind="one-sided"), 5.0)
    assert np.isnan(dead.lower.mean)
    assert dead.lower.reason == "no mass leaves"
    assert dead.total.share_steep == dead.upper.share_steep
    with pytest.raises(MissingFieldError, match="inclination"):
        inclination(without(half_steep(), "magnetic"), 3.0, thickness=0.1)
