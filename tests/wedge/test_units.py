"""Unit scales as arithmetic; tests/outside compares them with reference constants."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldviz.errors import FieldvizError
from fieldviz.wedge.units import Unit, UnitScales

FULL = UnitScales(Unit(2.0, "au"), Unit(3.0, "Msun"), Unit(5.0, "yr"))


@pytest.mark.parametrize(
    ("powers", "factor", "label"),
    [
        ({"length": 1}, 2.0, "au"),
        ({"length": -3, "mass": 1}, 3 / 8, "Msun au^-3"),
        ({"mass": 1, "time": -1}, 3 / 5, "Msun yr^-1"),
        ({"length": 1, "time": -1}, 2 / 5, "au yr^-1"),
        ({"length": 2, "mass": 1, "time": -2}, 12 / 25, "Msun au^2 yr^-2"),
        ({}, 1.0, ""),
    ],
)
def test_conversions(powers, factor, label):
    assert FULL.conversion(**powers) == (pytest.approx(factor), label)


def test_a_missing_scale_gives_none_only_where_it_is_needed():
    scales = UnitScales(length=Unit(5.2, "au"))
    assert scales.conversion(length=1) == (5.2, "au")
    assert scales.conversion(length=1, time=-1) is None
    assert scales.conversion(mass=1) is None


def test_truth_of_scales():
    assert not UnitScales()
    assert UnitScales(time=Unit(1.0, "yr"))


@given(st.integers(-3, 3), st.integers(-3, 3), st.integers(-3, 3))
def test_a_conversion_and_its_inverse_cancel(length, mass, time):
    there, _ = FULL.conversion(length=length, mass=mass, time=time)
    back, _ = FULL.conversion(length=-length, mass=-mass, time=-time)
    assert there * back == pytest.approx(1)


@pytest.mark.parametrize("value", [0.0, -1.0, float("nan"), float("inf")])
def test_scales_that_are_no_scales_are_refused(value):
    with pytest.raises(FieldvizError, match="positive number of 'au'"):
        Unit(value, "au")
