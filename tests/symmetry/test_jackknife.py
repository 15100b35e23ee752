"""Delete-one errors against closed forms, and how blocks are chosen."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from fieldviz.symmetry.jackknife import (
    azimuth_blocks,
    correlation_length,
    estimate,
    jackknife,
    larger,
    no_errors,
    widening,
)


def sums(values):
    """(n_blocks, 2) values as sums of one band with even weights."""
    values = np.asarray(values, float)[:, :, None]
    return values / len(values), np.full_like(values, 1 / len(values))


def errors(values):
    return jackknife(*sums(values), adds_up=True, source="blocks")


@settings(max_examples=20)
@given(st.integers(0, 10**6), st.integers(3, 12))
def test_of_a_mean_it_is_the_standard_error(seed, n):
    """For a mean the jackknife is s/sqrt(n) exactly (Efron 1982)."""
    values = np.random.default_rng(seed).normal(3, 1, size=(n, 2))
    expected = values.std(0, ddof=1) / np.sqrt(n)
    np.testing.assert_allclose(errors(values).sides, expected, rtol=1e-10)


def test_small_errors_of_the_angle_follow_from_those_of_the_sides():
    """d a = (u dd - d du)/(u^2 + d^2), to first order."""
    noise = 1e-4 * np.random.default_rng(4).normal(size=(8, 2))
    u, d = 2.0, 1.0
    found = errors(noise + np.array([u, d]))
    along = (u * noise[:, 1] - d * noise[:, 0]) / (u * u + d * d)
    expected = np.degrees(along.std(ddof=1) / np.sqrt(8))
    assert found.angle == pytest.approx(expected, rel=1e-3)
    # P = cos(2 a)
    a = np.arctan2(d, u) - np.pi / 4
    assert found.score == pytest.approx(2 * abs(np.sin(2 * a)) * np.radians(expected), rel=1e-3)
    assert found.half_width == pytest.approx(widening(8) * found.angle)


def test_angles_either_side_of_180_are_near_each_other():
    values = np.array([[-1.0, -1.0 + 0.1 * (-1) ** n] for n in range(8)])
    assert errors(values).angle < 3


def test_means_weigh_and_fluxes_add_up():
    numerator = np.array([[[2.0, 6.0]], [[2.0, 6.0]]]).swapaxes(0, 1)
    denominator = np.array([[[1.0, 2.0]], [[1.0, 2.0]]]).swapaxes(0, 1)
    assert estimate(numerator, denominator, adds_up=True)[0].ravel().tolist() == [5.0, 5.0]
    assert estimate(numerator, denominator, adds_up=False)[0].ravel() == pytest.approx([8 / 3] * 2)


def test_intervals_are_wider_for_few_blocks():
    """Student's t; 2.4288 and 3.3068 are its 97.725 % points for 7 and 3 degrees of freedom."""
    assert widening(8) == pytest.approx(2.4288, abs=2e-4)
    assert widening(4) == pytest.approx(3.3068, abs=2e-4)
    assert widening(8) == pytest.approx(stats.t.ppf(stats.norm.cdf(2), 7), rel=1e-9)
    assert widening(10**6) == pytest.approx(2, abs=1e-4)


def test_the_larger_one_counts_number_by_number():
    a, b = errors([[1, 2], [2, 2], [3, 2.0], [2, 2]]), errors([[2, 1], [2, 2], [2, 3.0], [2, 2]])
    both = larger(a, b)
    np.testing.assert_allclose(both.sides, np.maximum(a.sides, b.sides))
    assert larger(a, no_errors(1, "why")) is a
    assert larger(no_errors(1, "why"), b) is b


@pytest.mark.parametrize("wave", [1, 2, 4])
def test_correlation_length_of_a_wave(wave):
    """cos(2 pi m x) has the autocorrelation cos(2 pi m x), 1/e at arccos(1/e)/(2 pi m)."""
    x = (np.arange(256) + 0.5) / 256
    profile = np.broadcast_to((2 + np.cos(2 * np.pi * wave * x))[:, None, None], (256, 2, 1))
    expected = 2 * np.arccos(np.exp(-1)) / (2 * np.pi * wave)
    assert correlation_length(profile, np.ones_like(profile)) == pytest.approx(expected, rel=1e-3)


def test_correlation_of_what_does_not_vary_or_remember():
    ones = np.ones((16, 2, 3))
    assert correlation_length(ones, ones) == 0
    single = ones.copy()
    single[3] = 2
    assert correlation_length(single, ones) == pytest.approx(1 / 16)
    assert correlation_length(ones, np.zeros_like(ones)) == 0


@pytest.mark.parametrize(
    ("n_bins", "length", "count"),
    [
        (64, 0.0, 8), (64, 0.12, 8), (64, 0.13, 4), (64, 0.25, 4), (64, 0.26, None),
        (6, 0.1, 6), (6, 0.2, None), (4, 0.25, 4), (3, 0.0, None), (1, 0.0, None),
    ],
)  # fmt: skip
def test_blocks_outreach_the_correlation_or_there_is_no_estimate(n_bins, length, count):
    starts = azimuth_blocks(n_bins, length)
    assert (None if starts is None else len(starts)) == count
