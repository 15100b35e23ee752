"""Words of the wind and their sentence, in the stated order."""

from dataclasses import replace

import numpy as np
import pytest

from fieldviz.symmetry.pairs import judge_pair
from fieldviz.symmetry.verdict import short_error, verdict_sentence, wind_word

EDGES = np.array([1.0, 2.0])
SIDES = {
    "even": (1.0, 1.0),
    "odd": (1.0, -1.0),
    "negative": (-1.0, -1.0),
    "upper": (1.0, 0.0),
    "lower": (0.0, 1.0),
    "none": (0.0, 0.0),
}


def pair(name, sides):
    u, d = SIDES[sides]
    return judge_pair(name, (u, d), (np.array([u]), np.array([d])), EDGES, scale=0.0, unit="")


CASES = [
    ("none", "even", "even", "no wind"),
    ("negative", "even", "even", "inflow"),
    ("upper", "even", "even", "one-sided upper"),
    ("lower", "odd", "odd", "one-sided lower"),
    ("odd", "even", "even", "through-flow"),
    ("even", "even", "even", "even"),
    ("even", "odd", "odd", "odd"),
    ("even", "even", "odd", "mixed"),
    ("even", "odd", "even", "mixed"),
    ("even", "negative", "even", "mixed"),
]


@pytest.mark.parametrize(("outflow", "bend", "torque", "word"), CASES)
def test_order_of_words(outflow, bend, torque, word):
    pairs = pair("outflow", outflow), pair("bend", bend), pair("torque", torque)
    assert wind_word(*pairs) == word
    assert verdict_sentence(word, pairs, ["x"]).startswith(word)


def test_without_a_field_two_pairs_decide():
    assert wind_word(pair("outflow", "even"), pair("bend", "even"), None) == "even"
    assert wind_word(pair("outflow", "even"), pair("bend", "odd"), None) == "odd"


def test_even_sentence_can_be_quoted():
    pairs = pair("outflow", "even"), pair("bend", "even"), pair("torque", "even")
    assert verdict_sentence("even", pairs, ["single snapshot"]) == (
        "even wind: gas leaves, leans outward and carries angular momentum away on both sides "
        "(outflow angle +0.0 degrees; single snapshot)"
    )
    measured = replace(pairs[0], angle=-1.2, angle_error=0.8), *pairs[1:]
    assert verdict_sentence("even", measured, []) == (
        "even wind: gas leaves, leans outward and carries angular momentum away on both sides "
        "(outflow angle -1.2 ± 0.8 degrees)"
    )


def test_odd_sentence_names_the_angles_that_make_it_odd():
    pairs = pair("outflow", "even"), pair("bend", "odd"), pair("torque", "odd")
    sentence = verdict_sentence("odd", pairs, [])
    assert "bend angle -90.0 degrees, torque angle -90.0 degrees" in sentence


def test_a_small_error_is_not_rounded_to_nothing():
    assert [short_error(e) for e in (1.26, 0.05, 0.034, 0.0)] == ["1.3", "0.1", "0.03", "0.0"]


def test_a_pair_that_is_mixed_itself_settles_nothing():
    pairs = pair("outflow", "even"), replace(pair("bend", "even"), word="mixed")
    sentence = verdict_sentence("mixed", pairs, [])
    assert "the pairs do not settle it: the outflow is even and the bend is mixed" in sentence


def test_mixed_sentence_names_what_disagrees():
    pairs = pair("outflow", "even"), pair("bend", "even"), pair("torque", "odd")
    assert "the bend is even and the torque is odd" in verdict_sentence("mixed", pairs, [])
