"""Tables, their units and their text."""

from __future__ import annotations

import csv
import io

import numpy as np
import pytest

from fieldviz.diagnostics.absence import why_absent
from fieldviz.diagnostics.dimensions import (
    DENSITY,
    FIELD,
    FLUX,
    LENGTH,
    RATE,
    Dimension,
    physical_factor,
)
from fieldviz.diagnostics.plain import LARGEST_ARRAY, json_text, plain
from fieldviz.diagnostics.tables import Table, column_of, profile_table
from fieldviz.wedge.units import Unit, UnitScales

AU, SUN, YEAR = 1.495978707e13, 1.98841e33, 3.15576e7  # cm, g, s
# A disc of 1700 g/cm2 at 1 au about one solar mass: the mass unit is Sigma0 r0^2, the time unit
# 1/Omega, with GM of the sun 1.32712440018e26 cm3/s2 (IAU 2015).
SIGMA = 1700.0
OMEGA = np.sqrt(1.32712440018e26 / AU**3)
DISC = UnitScales(
    Unit(1.0, "au"), Unit(SIGMA * AU**2 / SUN, "Msun"), Unit(1 / (OMEGA * YEAR), "yr")
)


def test_code_labels_name_every_power():
    assert DENSITY.code_label == "code mass length^-3"
    assert FLUX.code_label == "code field length^2"
    assert Dimension(time=-1).code_label == "code time^-1"


@pytest.mark.parametrize(("mu0", "gauss"), [(1.0, 112.55), (4 * np.pi, 31.75)])
def test_the_field_comes_in_gauss(mu0, gauss):
    # B^2/(2 mu0) in the code is B^2/(8 pi) in gauss: textbook, e.g. Jackson 1975, appendix.
    factor, label = physical_factor(FIELD, DISC, mu0)
    assert label == "G"
    assert factor == pytest.approx(gauss, rel=2e-4)
    pressure = SIGMA * AU**2 / AU * OMEGA**2  # g/(cm s2)
    assert (factor**2 / (8 * np.pi)) == pytest.approx(pressure / (2 * mu0), rel=1e-3)


def test_rates_and_fluxes_in_physical_units():
    factor, label = physical_factor(RATE, DISC, 1.0)
    assert label == "Msun yr^-1"
    assert factor == pytest.approx(1.2022e-3, rel=2e-4)
    factor, label = physical_factor(FLUX, DISC, 1.0)
    assert label == "G au^2"
    assert factor == pytest.approx(physical_factor(FIELD, DISC, 1.0)[0])


def test_a_field_needs_three_known_labels():
    assert physical_factor(FIELD, UnitScales(Unit(1.0, "au")), 1.0) is None
    strange = UnitScales(Unit(1.0, "furlong"), Unit(1.0, "g"), Unit(1.0, "s"))
    assert physical_factor(FIELD, strange, 1.0) is None
    assert physical_factor(LENGTH, strange, 1.0) == (1.0, "furlong")


def test_physical_columns_follow_those_they_convert():
    table = profile_table(
        "t", "T", {"r": (LENGTH, np.array([1.0, 2.0])), "x": ("", np.array([3.0, np.nan]))}
    )
    found = table.in_units(UnitScales(length=Unit(5.0, "au")), 1.0)
    assert [column.head for column in found.columns] == ["r [code length]", "r [au]", "x"]
    assert [row[:2] for row in found.rows] == [(1.0, 5.0), (2.0, 10.0)]
    assert table.in_units(UnitScales(time=Unit(5.0, "yr")), 1.0).columns == table.columns


def test_csv_reads_back_with_commas_quotes_and_empty_cells():
    columns = (column_of("what, why"), column_of("value", LENGTH))
    table = Table("t", "T", columns, (('a "b", c', 1.5), ("d", None), ("e", float("nan"))))
    rows = list(csv.reader(io.StringIO(table.csv())))
    assert rows == [["what, why", "value [code length]"], ['a "b", c', "1.5"], ["d", ""], ["e", ""]]
    assert table.column("value")[0] == 1.5
    with pytest.raises(KeyError):
        table.column("nothing")


def test_csv_keeps_nine_digits():
    table = profile_table("t", "T", {"x": ("", np.array([np.pi * 1e-12]))})
    assert float(table.csv().splitlines()[1]) == pytest.approx(np.pi * 1e-12, rel=1e-8)


def test_plain_has_no_nan_and_leaves_large_arrays_out():
    value = {
        "a": np.array([1.0, np.nan, np.inf]),
        "b": np.float32(np.nan),
        "c": (np.int64(3), True, None, "x"),
        "d": np.zeros((2, 3)),
        "e": np.zeros(LARGEST_ARRAY + 1),
        "f": LENGTH,
    }
    found = plain(value)
    assert found["a"] == [1.0, None, None]
    assert found["b"] is None
    assert found["c"] == [3, True, None, "x"]
    assert found["d"] == {"left_out": "array of shape (2, 3)"}
    assert "left_out" in found["e"]
    assert found["f"]["length"] == 1
    assert "NaN" not in json_text(found)
    with pytest.raises(TypeError):
        plain(object())
    with pytest.raises(ValueError, match="JSON"):
        json_text({"a": float("nan")})


def test_absence_is_explained_by_the_note_that_shares_most_words():
    notes = (
        "median of all",
        "no ambipolar number: no diffusivity",
        "no alpha: there is no pressure",
    )
    assert why_absent("ambipolar number", notes) == notes[1]
    assert why_absent("alpha", notes) == notes[2]
    assert why_absent("anything", ()) == "no place has a finite number"
