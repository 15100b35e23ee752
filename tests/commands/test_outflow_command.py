"""`fieldviz outflow`: losses of both sides and budgets; of several files the course in time."""

from __future__ import annotations

import json

import pytest
from command_calls import call

import fieldviz as fv
from fieldviz.wind.outflow import outflow


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    path = tmp_path_factory.mktemp("outflow")
    for number in range(3):
        disc = fv.demo_disc(shape=(2, 48, 48), time=float(number), side_ratio=0.5)
        fv.write_snapshot(path / f"disc_{number}.h5", disc)
    return path


def row(out, name):
    return next(line.split() for line in out.splitlines() if line.startswith(f"  {name}  "))


def test_one_file_gives_both_sides_and_budgets(capsys, folder):
    code, out, err = call(capsys, "outflow", folder / "disc_0.h5", "--surface", "5")
    assert (code, err) == (0, "")
    assert out.startswith("mass loss ")
    _, upper, lower, both = row(out, "mass")
    # The demo's lower side loses the given share of the upper one through any cone.
    assert float(lower) / float(upper) == pytest.approx(0.5, abs=1e-3)
    assert float(both) == pytest.approx(float(upper) + float(lower), rel=1e-3)
    for part in ("lever arm", "energy", "mass budget", "ejection index", "moved by -1 H", "5 H"):
        assert part in out, part
    assert "no neighbouring snapshot" in out


def test_json_has_the_same_numbers(capsys, folder):
    path = folder / "disc_0.h5"
    answer = json.loads(call(capsys, "outflow", path, "--json")[1])
    found = outflow(fv.read_snapshot(path))
    assert answer["file"] == str(path)
    assert answer["sentence"] == found.sentence
    assert sum(answer["mass"]["upper"]["bins"]) == pytest.approx(found.upper, rel=1e-12)
    assert answer["full_disc_factor"] == found.full_disc_factor


def test_several_files_give_the_course_in_time(capsys, folder):
    code, out, err = call(capsys, "outflow", *sorted(folder.glob("*.h5"), reverse=True))
    assert code == 0
    assert "disc_0.h5 to disc_2.h5, t = 0 to 2" in out
    times = [line.split()[0] for line in out.splitlines() if line.startswith(("  0", "  1", "  2"))]
    assert times == ["0", "1", "2"]
    # Budgets know the neighbours in time, and the note on it stands there once.
    assert out.count("the change in time") == 1
    assert "no neighbouring snapshot" not in out
    assert "measuring outflow: 3 of 3" in err
    answer = json.loads(call(capsys, "outflow", folder / "disc_*.h5", "--json")[1])
    assert answer["times"] == [0.0, 1.0, 2.0]
    assert len(answer["snapshots"]) == 3


def test_radii_and_named_surfaces(capsys, folder):
    path = folder / "disc_0.h5"
    out = call(capsys, "outflow", path, "--surface", "slow", "--r-range", "1.5", "4")[1]
    assert "slow surface" in out
    whole = json.loads(call(capsys, "outflow", path, "--json")[1])
    part = json.loads(call(capsys, "outflow", path, "--json", "--r-range", "1.5", "4")[1])
    assert sum(part["mass"]["upper"]["bins"]) < sum(whole["mass"]["upper"]["bins"])
    contour = call(capsys, "outflow", path, "--surface", "density=1e-4")
    assert contour[0] == 0
    assert "density" in contour[1].splitlines()[0]


@pytest.mark.parametrize("surface", ["sloow", "density=high", "-3"])
def test_a_surface_that_is_none_is_one_line(capsys, folder, surface):
    code, out, err = call(capsys, "outflow", folder / "disc_0.h5", f"--surface={surface}")
    assert (code, out) == (1, "")
    assert len(err.splitlines()) == 1
    assert err.startswith("fieldviz: Cannot ")


def test_nothing_to_read_is_one_line(capsys, tmp_path):
    code, _, err = call(capsys, "outflow", tmp_path / "none.h5")
    assert code == 1
    assert len(err.splitlines()) == 1
