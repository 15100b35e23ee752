"""Score, angle and word of a pair."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldviz.symmetry.jackknife import Errors
from fieldviz.symmetry.pairs import judge_pair, pair_angle, pair_class, pair_score

# Recomputed here by hand from P = 2 u d/(u^2 + d^2) and atan2(d, u) - 45 degrees.
TABLE = [
    (1.0, 1.0, 1.0, 0.0, "even"),
    (1.0, 0.8, 40 / 41, -6.340191745909905, "even"),
    (1.0, 0.5, 0.8, -18.43494882292201, "even"),
    (1.0, 0.25, 8 / 17, -30.96375653207352, "upper only"),
    (1.0, 0.0, 0.0, -45.0, "upper only"),
    (1.0, -0.25, -8 / 17, -59.03624346792648, "upper only"),
    (1.0, -0.5, -0.8, -71.56505117707799, "odd"),
    (1.0, -1.0, -1.0, -90.0, "odd"),
    (-1.0, -1.0, 1.0, 180.0, "reversed"),
    (0.0, 1.0, 0.0, 45.0, "lower only"),
    (-1.0, 1.0, -1.0, 90.0, "odd"),
    (-1.0, 0.0, 0.0, 135.0, "reversed"),
]


@pytest.mark.parametrize(("upper", "lower", "score", "angle", "word"), TABLE)
def test_table(upper, lower, score, angle, word):
    assert pair_score(upper, lower) == pytest.approx(score, abs=1e-14)
    assert pair_angle(upper, lower) == pytest.approx(angle, abs=1e-11)
    assert pair_class(upper, lower) == word


sizes = st.floats(-1e6, 1e6).filter(lambda x: abs(x) > 1e-6)


@given(sizes, sizes, st.floats(1e-6, 1e6))
def test_a_common_factor_changes_nothing(upper, lower, factor):
    assert pair_score(factor * upper, factor * lower) == pytest.approx(
        pair_score(upper, lower), abs=1e-9
    )
    assert pair_angle(factor * upper, factor * lower) == pytest.approx(
        pair_angle(upper, lower), abs=1e-9
    )


@given(sizes, sizes)
def test_swapping_the_sides_keeps_the_score_and_turns_the_angle(upper, lower):
    assert pair_score(lower, upper) == pair_score(upper, lower)
    a, b = pair_angle(upper, lower), pair_angle(lower, upper)
    assert (a + b) % 360 == pytest.approx(0, abs=1e-9) or (a + b) % 360 == pytest.approx(360)
    swap = {"upper only": "lower only", "lower only": "upper only"}
    if abs(upper) != abs(lower):
        word = pair_class(upper, lower)
        assert pair_class(lower, upper) == swap.get(word, word)


@given(sizes, sizes)
def test_score_and_angle_agree(upper, lower):
    """P = cos(2 a) for every pair."""
    expected = np.cos(np.radians(2 * pair_angle(upper, lower)))
    assert pair_score(upper, lower) == pytest.approx(expected, abs=1e-9)


def test_the_score_alone_would_not_tell_two_infalling_sides():
    assert pair_score(-1, -1) == pair_score(1, 1) == 1
    assert pair_class(-1, -1, negative="inflow") == "inflow"
    assert abs(pair_angle(-1, -1)) == 180


def test_nothing_on_either_side():
    assert np.isnan(pair_score(0, 0))
    assert np.isnan(pair_angle(0, 0))
    assert pair_class(0, 0) == "none"


def judge(upper, lower, scale=0.0):
    bands = np.asarray(upper, float), np.asarray(lower, float)
    totals = (float(np.nansum(bands[0])), float(np.nansum(bands[1])))
    edges = np.arange(1.0, len(bands[0]) + 2)
    return judge_pair("outflow", totals, bands, edges, scale=scale, unit="")


def test_bands_that_disagree_are_mixed():
    assert judge([1, 1, 1, 1], [1, 1, 1, 1]).word == "even"
    assert judge([3, 3, 0, 0], [0, 0, 3, 3]).word == "mixed"
    # Three quarters of the sum in one class is enough.
    assert judge([3, 3, 3, 3], [3, 3, 3, 0]).word == "even"


def test_below_a_thousandth_of_the_scale_is_none():
    assert judge([1e-4], [1e-4], scale=1.0).word == "none"
    assert judge([1e-3], [1e-3], scale=1.0).word == "even"


def test_a_side_without_value_counts_as_zero():
    pair = judge_pair(
        "bend", (1.0, np.nan), (np.array([1.0]), np.array([np.nan])), np.array([1.0, 2.0]),
        scale=1.0, unit="",
    )  # fmt: skip
    assert pair.word == "upper only"
    assert np.isnan(pair.score)
    assert np.isnan(pair.angle)


def with_error(upper, lower, error, half_width=None, n_bands=1):
    angles = np.full(n_bands, error)
    sides = np.full(2, np.radians(error) * np.hypot(upper, lower))
    half = 2 * error if half_width is None else half_width
    errors = Errors(sides, 0.01, error, angles, half, 8, "8 blocks")
    bands = np.full(n_bands, upper / n_bands), np.full(n_bands, lower / n_bands)
    edges = np.arange(1.0, n_bands + 2)
    return judge_pair("outflow", (upper, lower), bands, edges, scale=0, unit="", errors=errors)


def test_an_interval_that_reaches_into_another_class_is_mixed():
    """The classes meet at 26.57 degrees, where the ratio is 1/3."""
    lower = np.tan(np.radians(45 - 20.0))
    assert with_error(1.0, lower, 3.0).word == "even"
    assert with_error(1.0, lower, 3.4).word == "mixed"
    assert with_error(1.0, 0.0, 5.0).word == "upper only"
    assert with_error(1.0, 0.0, 10.0).word == "mixed"


def test_below_three_errors_is_none():
    """|u| + |d| = 2 and an error of 2 radians(e) meet at e = 19.1 degrees."""
    assert with_error(1.0, 1.0, 18.0, half_width=1.0).word == "even"
    assert with_error(1.0, 1.0, 20.0, half_width=1.0).word == "none"


def test_scores_within_the_interval_of_the_angle():
    """Near +1 the score is flat: the interval of the angle tells what that of the score hides."""
    pair = with_error(1.0, 1.0, 5.0)
    assert pair.interval == pytest.approx((-10, 10))
    assert pair.score_interval == pytest.approx((np.cos(np.radians(20)), 1))
    pair = with_error(1.0, 0.8, 1.0)
    assert pair.score == pytest.approx(0.9756, abs=1e-4)
    assert pair.interval[1] < -4
    assert pair.score_interval[1] < 0.99


def test_errors_stand_with_the_pair_and_its_bands():
    pair = with_error(1.0, 0.9, 2.0, n_bands=3)
    assert pair.angle_error == 2.0
    assert [band.angle_error for band in pair.bands] == [2.0] * 3
    assert judge([1], [1]).angle_error is None
    assert judge([1], [1]).interval is None
