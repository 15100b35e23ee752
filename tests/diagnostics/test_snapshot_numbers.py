"""All numbers of one snapshot."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.derived.shared import is_shared, once, sharing
from fieldviz.derived.structure import disc_structure
from fieldviz.derived.thickness import disc_thickness
from fieldviz.diagnostics import parts as all_parts
from fieldviz.diagnostics.parts import PARTS, Part
from fieldviz.diagnostics.plain import json_text
from fieldviz.diagnostics.snapshot_numbers import measure
from fieldviz.errors import FieldvizError
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.units import Unit, UnitScales

SHAPE = (4, 48, 48)
MAGNETIC_PARTS = {
    "flux_function",
    "flux_sheets",
    "magnetic_midplane",
    "current_sheets",
    "wind_lines",
    "divergence",
}


def without(snapshot, *names):
    """The same snapshot without some fields."""
    return Snapshot.from_grid(
        snapshot.grid,
        cells={name: snapshot.cells[name] for name in snapshot.cells if name not in names},
        faces={name: snapshot.faces[name] for name in snapshot.faces if name not in names},
        time=snapshot.time,
    )


@pytest.fixture(scope="module")
def disc(small_disc):
    return small_disc(shape=SHAPE)


@pytest.fixture(scope="module")
def numbers(disc):
    return measure(disc)


def scalars(numbers):
    """Value of each (part, quantity) of the summary."""
    return {(row[0], row[1]): row[2] for row in numbers.tables()["summary"].rows}


def absences(numbers):
    """Reason of each (part, quantity) that has no value."""
    rows = numbers.tables()["summary"].rows
    return {(row[0], row[1]): row[6] for row in rows if row[2] is None or row[2] != row[2]}


def test_every_part_gives_a_result_on_a_whole_disc(numbers):
    assert set(numbers.parts) == {part.name for part in PARTS}
    assert numbers.reasons == {}
    assert all(seconds >= 0 for seconds in numbers.seconds.values())
    assert numbers["symmetry"].result.word == "even"
    assert numbers["thickness"].result.h == pytest.approx(0.1, rel=1e-2)


def test_results_are_those_of_the_diagnostics_themselves(disc, numbers):
    alone = disc_structure(disc)
    shared = numbers["structure"].result
    np.testing.assert_allclose(shared.surface_density, alone.surface_density, rtol=1e-13)
    assert shared.sentence == alone.sentence
    assert shared.notes == alone.notes
    assert scalars(numbers)["structure", "mass of the wedge"] == pytest.approx(alone.mass)
    assert numbers.tables()["radial"].column("surface density") == list(shared.surface_density)


def test_absent_scalars_say_why(numbers):
    found = absences(numbers)
    assert all(found.values())
    assert "no diffusivity" in found["plasma", "ambipolar Elsasser number, median of the wedge"]


def test_json_round_trip_has_no_nan(numbers):
    text = json_text(numbers.to_dict())
    assert "NaN" not in text
    assert "Infinity" not in text
    found = json.loads(text)
    assert found == numbers.to_dict()
    assert found["parts"]["structure"]["reason"] is None
    # Maps and fields are not written as numbers.
    assert len(text) < 2e6


def test_without_a_field_of_force(disc):
    numbers = measure(without(disc, "magnetic_r", "magnetic_theta", "magnetic_phi"))
    assert set(numbers.reasons) == MAGNETIC_PARTS
    assert all("magnetic" in reason for reason in numbers.reasons.values())
    assert numbers["symmetry"].result.torque is None
    found = absences(numbers)
    assert all(found.values())
    assert "magnetic" in found["stresses", "alpha, Maxwell"]
    assert "net B_z" not in [column.name for column in numbers.tables()["radial"].columns]
    json_text(numbers.to_dict())


def test_without_pressure(disc):
    numbers = measure(without(disc, "pressure"))
    assert numbers.reasons == {}
    found = absences(numbers)
    assert all(found.values())
    assert "pressure" in found["stresses", "alpha"]
    assert "pressure" in found["structure", "H/R from the sound speed, median"]
    assert numbers["thickness"].result.source.startswith("spread of the density")
    json_text(numbers.to_dict())


def test_without_velocity(disc):
    numbers = measure(without(disc, "velocity_r", "velocity_theta", "velocity_phi"))
    assert {"mach", "wind_lines", "symmetry"} <= set(numbers.reasons)
    assert all("velocity" in numbers.reasons[name] for name in ("mach", "wind_lines", "symmetry"))
    found = absences(numbers)
    assert all(found.values())
    assert "velocity" in found["stresses", "alpha, Reynolds"]
    assert "velocity" in found["outflow", "mass loss, upper"]


def test_density_alone(disc):
    names = [name for name in disc.cell_names if name != "density"]
    numbers = measure(without(disc, *names))
    assert numbers["structure"].result is not None
    assert all(numbers.reasons[name] for name in MAGNETIC_PARTS | {"outflow", "symmetry", "mach"})
    json_text(numbers.to_dict())


def test_nothing_at_all(disc):
    numbers = measure(without(disc, *disc.cell_names))
    assert set(numbers.reasons) >= {part.name for part in PARTS} - {"plasma"}
    json_text(numbers.to_dict())


def test_reversed_field_changes_signs_alone(disc, numbers):
    reversed_field = Snapshot.from_grid(
        disc.grid,
        cells={name: disc.cells[name] for name in disc.cells},
        faces={name: -disc.faces[name] for name in disc.faces},
        time=disc.time,
    )
    turned, before, after = measure(reversed_field), scalars(numbers), {}
    after = scalars(turned)
    odd = ("net flux of the range",)
    for key, value in before.items():
        if key[1] in odd:
            assert after[key] == pytest.approx(-value, rel=1e-9)
        elif isinstance(value, float) and np.isfinite(value) and abs(value) > 1e-9:
            assert after[key] == pytest.approx(value, rel=1e-6), key
        elif isinstance(value, str):
            assert after[key] == value, key
    assert [s.polarity for s in turned["flux_sheets"].result] == [
        -s.polarity for s in numbers["flux_sheets"].result
    ]


def test_two_levels(small_disc):
    numbers = measure(small_disc(shape=SHAPE, levels=2))
    assert numbers.reasons == {}
    assert numbers.levels == (0, 1)
    assert len(numbers.tables()["levels"].rows) == 2
    assert numbers["symmetry"].result.word == "even"
    json_text(numbers.to_dict())


def test_one_azimuth(small_disc):
    numbers = measure(small_disc(shape=(1, 48, 48)))
    assert numbers.reasons == {}
    assert all(absences(numbers).values())


def test_a_cell_without_a_number_is_said(disc):
    density = disc.cells["density"].copy()
    density[0, 1, 20, 20] = np.nan
    spoilt = disc.with_cells(density=density)
    numbers = measure(spoilt, parts=["structure", "resolution"])
    assert any("left out" in note for note in numbers["structure"].notes)
    share = scalars(numbers)["resolution", "share of cells of density without a number"]
    assert share == pytest.approx(1 / disc.grid.n_cells)


def test_units_stand_beside_code_numbers(disc):
    scales = UnitScales(Unit(5.0, "au"), Unit(0.01, "Msun"), Unit(2.0, "yr"))
    numbers = measure(replace(disc, units=scales), parts=["structure", "plasma", "flux_sheets"])
    rows = {row[1]: row for row in numbers.tables()["summary"].rows}
    mass = rows["mass of the wedge"]
    assert mass[5] == "Msun"
    assert mass[4] == pytest.approx(0.01 * mass[2])
    flux = rows["net flux of the range"]
    assert flux[5] == "G au^2"
    heads = [column.head for column in numbers.tables()["radial"].columns]
    assert heads[:4] == ["r inner [code length]", "r inner [au]", "r outer [code length]",
                         "r outer [au]"]  # fmt: skip
    plain_heads = [c.head for c in numbers.tables(physical=False)["radial"].columns]
    assert "r inner [au]" not in plain_heads
    assert numbers.to_dict()["units"]["length"] == {"value": 5.0, "label": "au"}


def test_parts_can_be_chosen_and_must_exist(disc):
    assert list(measure(disc, parts=["plasma", "thickness"]).parts) == ["thickness", "plasma"]
    with pytest.raises(FieldvizError, match=r"expected parts among .* got weather"):
        measure(disc, parts=["weather"])
    with pytest.raises(FieldvizError, match="got none"):
        measure(disc, parts=[])


def test_a_fault_of_the_program_passes(disc, monkeypatch):
    broken = Part("thickness", "Thickness", "fieldviz.derived.thickness", "no_such_function")
    monkeypatch.setattr(all_parts, "PARTS", (broken,))
    with pytest.raises(AttributeError):
        measure(disc)


def test_sharing_keeps_within_its_block_only(disc):
    calls = []

    def make():
        calls.append(1)
        return len(calls)

    with sharing(disc):
        assert once(disc, "x", make) == once(disc, "x", make) == 1
        assert disc_thickness(disc) is disc_thickness(disc)
        with sharing(disc):
            assert once(disc, "x", make) == 1
        assert is_shared(disc)
    assert not is_shared(disc)
    assert once(disc, "x", make) == 2
    assert disc_thickness(disc) is not disc_thickness(disc)


def test_sharing_does_not_hide_a_bad_cell_from_others(disc):
    """A field without a number must cost only the averages that need it."""
    pressure = disc.cells["pressure"].copy()
    pressure[0, 0, 10, 10] = np.nan
    spoilt = disc.with_cells(pressure=pressure)
    with sharing(spoilt):
        within = disc_structure(spoilt)
    assert within.notes == disc_structure(spoilt).notes
    np.testing.assert_array_equal(within.surface_density, disc_structure(spoilt).surface_density)
    assert within.mass == pytest.approx(disc_structure(disc).mass, rel=1e-14)


def test_numbers_are_in_the_order_of_parts(numbers):
    assert list(numbers.parts) == [part.name for part in PARTS]
    assert fv.__version__ == numbers.to_dict()["version"]
