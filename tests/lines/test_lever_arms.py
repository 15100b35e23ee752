"""Lever arms of lines beside those of the whole flow, on the demo's closed form."""

import numpy as np
import pytest
from scipy.integrate import quad

import fieldviz as fv
from fieldviz.lines.critical_points import critical_points
from fieldviz.lines.lever_arms import index_of_lever_arm, lever_arms
from fieldviz.wind.outflow import outflow

# Between the inner wall and the first flux sheet, where l varies slowly from line to line.
RADII = (1.6, 1.7)


def arms(snapshot, radii=RADII, count=6):
    seeds = fv.wind_seeds(snapshot, count, scale_heights=4.5, thickness=0.1, r_range=radii)
    lines = fv.trace_lines(snapshot, "velocity", seeds, poloidal=True)
    points = critical_points(snapshot, lines, from_height=4.5, thickness=0.1)
    return lever_arms(outflow(snapshot, 4.5, radii=radii, thickness=0.1), points)


def exact_lever_arm(disc, radii):
    """Mean over mass of lambda = 1 + eps (sqrt(rho_b)/|k| - 1)."""
    g = disc.footpoint_factor(np.pi / 2 - 0.45)

    def loss(foot):
        return disc.loss_density(foot)

    def weighted(foot):
        base = loss(foot) / (disc.base_speed * np.sqrt(foot))
        lever = 1 + disc.acceleration * (
            np.sqrt(base) * disc.radial_flux_density(foot) / loss(foot) - 1
        )
        return lever * loss(foot)

    ends = radii[0] * g, radii[1] * g
    return quad(weighted, *ends)[0] / quad(loss, *ends)[0]


def test_three_lever_arms_are_one_on_the_demo():
    exact = exact_lever_arm(fv.SaltmarshDisc(), RADII)
    found = arms(fv.demo_disc(shape=(1, 192, 240)))
    for side in (found.upper, found.lower, found.total):
        assert side.lambda_A == pytest.approx(exact, rel=0.01)
        assert side.lambda_l == pytest.approx(exact, rel=0.01)
        assert side.lambda_eff_at_foot == pytest.approx(exact, rel=0.02)
        assert side.steady_ideal
        assert side.share_of_limits == 0
        assert side.index_of_lambda_l == pytest.approx(0.5 / (side.lambda_l - 1))
    assert found.upper.n_lines == found.lower.n_lines == 3
    assert found.total.n_lines == 6
    assert "torque over mass loss" in found.sentence


def test_a_dead_side_has_none():
    found = arms(fv.demo_disc(shape=(1, 96, 120), wind="one-sided"))
    assert found.lower.n_lines == 0
    assert np.isnan(found.lower.lambda_A)
    assert np.isnan(found.lower.lambda_eff)
    assert np.isnan(found.lower.index_of_lambda_eff)
    assert found.lower.steady_ideal is None
    assert any("lower: no line" in note for note in found.notes)
    assert found.upper.lambda_eff > 1


def test_limits_are_said():
    heavy = fv.demo_disc(shape=(1, 96, 120), mass_loss_scale=1e-7, base_speed=0.03)
    found = arms(heavy)
    assert found.upper.share_of_limits == 1
    assert found.upper.steady_ideal is None
    assert "at least" in found.sentence
    assert any("lower limit on 100 %" in note for note in found.notes)


def test_both_sides_of_the_relation_are_kept_apart():
    """The demo's index is prescribed: it is not that of its lever arm, and both are given."""
    disc = fv.demo_disc(shape=(1, 96, 120))
    found = arms(disc, radii=(1.5, 4.0), count=8)
    assert found.index == outflow(disc, 4.5, radii=(1.5, 4.0), thickness=0.1).ejection.value
    assert abs(found.index - found.total.index_of_lambda_eff) > 0.1
    short = arms(disc)
    assert np.isnan(short.index)
    assert any("no ejection index" in note for note in short.notes)


def test_index_of_a_lever_arm():
    """xi = 1/(2(lambda - 1)), Ferreira 1997: lambda 13.5 goes with 0.04."""
    assert index_of_lever_arm(13.5) == pytest.approx(0.04)
    assert np.isnan(index_of_lever_arm(1.0))
    assert np.isnan(index_of_lever_arm(np.nan))
