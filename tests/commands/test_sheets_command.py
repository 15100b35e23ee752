"""`fieldviz sheets`: a table of sheets, of several files their tracks; JSON agrees."""

from __future__ import annotations

import json

import pytest
from command_calls import call

import fieldviz as fv
from fieldviz.sheets.flux_sheets import find_flux_sheets

PLAIN = {"shape": (4, 40, 96), "magnetic_turbulence": 0.0}


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    path = tmp_path_factory.mktemp("sheets")
    for number, time in enumerate((0.0, 4.0, 8.0)):
        fv.write_snapshot(path / f"disc_{number}.h5", fv.demo_disc(time=time, **PLAIN))
    return path


def test_one_file_gives_its_sheets(capsys, folder):
    code, out, err = call(capsys, "sheets", folder / "disc_0.h5")
    assert (code, err) == (0, "")
    lines = out.splitlines()
    assert lines[0] == "5 flux sheets"
    assert lines[2] == "disc_0.h5, t = 0"
    rows = [line.split() for line in lines[4:9]]
    # Radii of the demo at t = 0.
    radii = [float(row[0]) for row in rows]
    assert radii == pytest.approx([1.4, 1.85, 2.15, 3.0, 4.2], abs=0.02)
    assert {row[1] for row in rows} == {"up"}
    assert "Pearson -" in out
    assert "thresholds are our choice" in out


def test_json_has_the_same_numbers(capsys, folder):
    path = folder / "disc_0.h5"
    answer = json.loads(call(capsys, "sheets", path, "--json")[1])
    found = find_flux_sheets(fv.read_snapshot(path))
    assert answer["file"] == str(path)
    assert [one["radius"] for one in answer["sheets"]] == [one.radius for one in found]
    assert answer["total_flux"] == found.total_flux
    assert answer["notes"] == list(found.notes)


def test_several_files_give_tracks(capsys, folder):
    code, out, err = call(capsys, "sheets", *sorted(folder.glob("*.h5"), reverse=True))
    assert code == 0
    # Two sheets of the demo merge at t = 6.667, one splits at 7.333.
    assert out.startswith("6 tracks of flux sheets; merge: 1, split: 1\n")
    assert "disc_0.h5 to disc_2.h5, t = 0 to 8" in out
    event = next(line.split() for line in out.splitlines() if line.startswith("  merge"))
    assert event[1:4] == ["4", "to", "8"]
    assert float(event[-1]) == pytest.approx(2.0, abs=0.05)
    assert err.splitlines()[-1] == "finding sheets: 3 of 3"


def test_a_pattern_is_a_series_too(capsys, folder):
    answer = json.loads(call(capsys, "sheets", folder / "disc_*.h5", "--json")[1])
    assert len(answer["files"]) == 3
    assert answer["times"] == [0.0, 4.0, 8.0]
    assert {event["kind"] for event in answer["events"]} == {"merge", "split"}


def test_radii_can_be_chosen(capsys, folder):
    out = call(capsys, "sheets", folder / "disc_0.h5", "--r-range", "1.2", "1.65")[1]
    assert out.startswith("1 flux sheet\n")


@pytest.mark.parametrize("arguments", [("none.h5",), ("none_*.h5",), ("a.h5", "b.h5")])
def test_nothing_to_read_is_one_line(capsys, tmp_path, arguments):
    code, out, err = call(capsys, "sheets", *(tmp_path / name for name in arguments))
    assert (code, out) == (1, "")
    assert len(err.splitlines()) == 1
    assert err.startswith("fieldviz: Cannot read")


def test_without_field_there_is_a_reason(capsys, tmp_path):
    disc = fv.demo_disc(shape=(1, 16, 16))
    grid = disc.grid
    bare = fv.Snapshot.from_arrays(
        grid.r_edges[0], grid.theta_edges[0], grid.phi_edges[0],
        cells={"density": disc.cells["density"][0], "pressure": disc.cells["pressure"][0]},
    )  # fmt: skip
    fv.write_snapshot(tmp_path / "bare.h5", bare)
    code, _, err = call(capsys, "sheets", tmp_path / "bare.h5")
    assert code == 1
    assert "magnetic_theta" in err
    assert len(err.splitlines()) == 1
