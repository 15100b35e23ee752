"""Series laid out in space and time."""

from __future__ import annotations

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.derived.plasma import plasma
from fieldviz.derived.structure import disc_structure
from fieldviz.diagnostics.series_numbers import measure_series
from fieldviz.diagnostics.space_time import space_time
from fieldviz.diagnostics.stored_sheets import stored_sheets
from fieldviz.errors import FieldvizError
from fieldviz.sheets.flux_sheets import find_flux_sheets
from fieldviz.sheets.tracking import track_flux_sheets
from fieldviz.wedge.demo import demo_disc
from fieldviz.wedge.snapshot import Snapshot

PARTS = ["structure", "plasma", "flux_sheets", "symmetry"]
TIMES = (0.0, 8.0, 16.0)


def disc_at(time, shape=(4, 48, 96), **parameters):
    return demo_disc(shape=shape, time=time, **parameters)


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    folder = tmp_path_factory.mktemp("run")
    for number, time in enumerate(TIMES):
        fv.write_snapshot(folder / f"disc_{number}.h5", disc_at(time))
    return folder


@pytest.fixture(scope="module")
def numbers(folder):
    return measure_series(str(folder / "disc_*.h5"), folder / "numbers", parts=PARTS)


@pytest.fixture(scope="module")
def found(numbers):
    return space_time(numbers)


def test_maps_are_the_profiles_of_each_time(found):
    assert found.vertical_field.shape == (3, 96)
    np.testing.assert_array_equal(found.times, TIMES)
    disc = disc_at(TIMES[1])
    np.testing.assert_allclose(found.r_edges, disc.grid.r_edges[0])
    np.testing.assert_allclose(found.vertical_field[1], found.r * plasma(disc).net_field)
    np.testing.assert_allclose(found.surface_density[1], disc_structure(disc).surface_density)


def test_the_wind_is_even_at_every_radius(found):
    assert found.words == ("even",) * 3
    for name in ("outflow", "bend", "torque"):
        assert np.abs(found.wind_angle[name]).max() < 5.0


def test_a_one_sided_wind_has_an_angle_of_45_degrees(folder, tmp_path):
    # atan2(d, u) - 45 degrees with d = 0: upper only is -45.
    fv.write_snapshot(tmp_path / "one.h5", disc_at(0.0, wind="one-sided"))
    found = space_time(measure_series([tmp_path / "one.h5"], parts=PARTS))
    np.testing.assert_allclose(found.wind_angle["outflow"], -45.0, atol=2.0)


def test_tracks_from_stored_sheets_are_those_of_the_snapshots(found):
    alone = track_flux_sheets([disc_at(time) for time in TIMES])
    assert len(found.history.tracks) == len(alone.tracks)
    for mine, other in zip(found.history.tracks, alone.tracks, strict=True):
        assert (mine.outputs, mine.begin, mine.end) == (other.outputs, other.begin, other.end)
        np.testing.assert_allclose(mine.radii, other.radii, rtol=1e-13)
        np.testing.assert_allclose(mine.fluxes, other.fluxes, rtol=1e-13)
    assert [event.kind for event in found.history.events] == [event.kind for event in alone.events]


def test_stored_sheets_keep_what_they_hold(numbers):
    sheets = find_flux_sheets(disc_at(TIMES[0]))
    stored = stored_sheets(numbers.records[0].result("flux_sheets"))
    assert len(stored) == len(sheets)
    for mine, other in zip(stored, sheets, strict=True):
        assert (mine.radius, mine.flux, mine.flags) == (other.radius, other.flux, other.flags)
        np.testing.assert_array_equal(mine.ridge.radius, other.ridge.radius)
    inner, outer = sheets.r_range
    assert stored.profile.flux(inner, outer) == pytest.approx(
        float(np.sum(sheets.profile.f * np.diff(sheets.profile.r_edges))) * sheets.profile.period
    )


def test_reversed_field_turns_the_map_over(found, tmp_path):
    disc = disc_at(TIMES[0])
    turned = Snapshot.from_grid(
        disc.grid,
        cells={name: disc.cells[name] for name in disc.cells},
        faces={name: -disc.faces[name] for name in disc.faces},
    )
    fv.write_snapshot(tmp_path / "turned.h5", turned)
    other = space_time(measure_series([tmp_path / "turned.h5"], parts=PARTS))
    np.testing.assert_allclose(other.vertical_field[0], -found.vertical_field[0], rtol=1e-12)
    assert all(sheet.polarity == -1 for sheet in other.history.found[0])


def test_what_is_absent_is_nan_and_noted(folder, tmp_path):
    disc = disc_at(3.0)
    gas = ("density", "pressure")
    bare = Snapshot.from_grid(
        disc.grid, cells={name: disc.cells[name] for name in gas}, time=disc.time
    )
    fv.write_snapshot(tmp_path / "bare.h5", bare)
    paths = [folder / "disc_0.h5", tmp_path / "bare.h5"]
    found = space_time(measure_series(paths, parts=PARTS))
    assert np.isfinite(found.vertical_field[0]).all()
    assert np.isnan(found.vertical_field[1]).all()
    assert np.isfinite(found.surface_density).all()
    assert "no vertical field at 1 of 2 times" in found.notes
    assert "no bend angle at 1 of 2 times" in found.notes
    alone = space_time(measure_series([tmp_path / "bare.h5"], parts=PARTS))
    assert alone.history is None
    assert any(note.startswith("no tracks of flux sheets") for note in alone.notes)


def test_meshes_that_differ_take_the_ring_they_lie_in(folder, tmp_path):
    fv.write_snapshot(tmp_path / "coarse.h5", disc_at(4.0, shape=(4, 48, 48)))
    found = space_time(measure_series([folder / "disc_0.h5", tmp_path / "coarse.h5"], parts=PARTS))
    assert found.surface_density.shape == (2, 96)
    coarse = disc_structure(disc_at(4.0, shape=(4, 48, 48))).surface_density
    np.testing.assert_allclose(found.surface_density[1], np.repeat(coarse, 2))
    assert any("meshes differ" in note for note in found.notes)


def test_a_series_without_profiles_is_refused(folder):
    series = measure_series([folder / "disc_0.h5"], parts=["thickness"])
    with pytest.raises(FieldvizError, match="expected a snapshot with profiles, got none of 1"):
        space_time(series)
