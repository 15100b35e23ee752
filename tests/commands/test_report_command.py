"""`fieldviz report`: the verdict and the page on stdout, steps on stderr, one line on failure."""

from __future__ import annotations

import json
from dataclasses import replace

import pytest
from command_calls import call

import fieldviz as fv
from fieldviz.commands.report import _Shown, run


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    path = tmp_path_factory.mktemp("runs")
    for number in range(2):
        disc = fv.demo_disc(shape=(2, 24, 24), time=float(number))
        fv.write_snapshot(path / f"disc_{number}.h5", replace(disc, title="A <run>"))
    return path


@pytest.fixture(autouse=True)
def _no_diagrams(monkeypatch):
    monkeypatch.setattr("fieldviz.report.write.report_diagrams", lambda material: ((), ()))


def test_it_prints_the_verdict_and_the_page(capsys, folder, tmp_path):
    target = tmp_path / "report"
    code, out, err = call(capsys, "report", folder / "disc_*.h5", "-o", target, "--no-scenes")
    assert code == 0
    sentence, page = out.splitlines()
    assert sentence.startswith("Even wind: gas leaves")
    assert page == str(target / "report.html")
    assert "A &lt;run&gt;" in (target / "report.html").read_text("utf-8")
    assert err.splitlines() == [
        "measuring snapshots: 1 of 2", "measuring snapshots: 2 of 2",
        "judging the time mean: 1 of 2", "judging the time mean: 2 of 2",
        "drawing diagrams: 1 of 1",
    ]  # fmt: skip


def test_several_files_title_and_what_is_amiss(capsys, folder, tmp_path):
    bad = tmp_path / "bad.h5"
    bad.write_text("no HDF5")
    files = [folder / "disc_0.h5", folder / "disc_1.h5", bad]
    code, out, _ = call(
        capsys, "report", *files, "-o", tmp_path / "r", "--title", "Mine", "--no-scenes"
    )
    assert code == 0
    assert "bad.h5 has no numbers: Cannot read" in out
    numbers = json.loads((tmp_path / "r" / "numbers.json").read_text("utf-8"))
    assert numbers["title"] == "Mine"
    assert numbers["command"].startswith("fieldviz report ")
    assert numbers["command"].endswith("--title Mine --no-scenes")


def test_keeping_numbers(folder, tmp_path):
    kept = tmp_path / "kept"
    run(
        [folder / "disc_0.h5"], tmp_path / "r", layout=None, title=None, scenes=False, kept=kept
    )  # fmt: skip
    assert [path.name.split(".")[0] for path in kept.iterdir()] == ["disc_0"]


@pytest.mark.parametrize("name", ["none.h5", "none_*.h5"])
def test_nothing_to_read_is_one_line(capsys, tmp_path, name):
    code, out, err = call(capsys, "report", tmp_path / name, "-o", tmp_path / "r")
    assert (code, out) == (1, "")
    assert len(err.splitlines()) == 1
    assert err.startswith("fieldviz: Cannot ")
    assert list(tmp_path.iterdir()) == []


def test_a_folder_of_other_things_is_one_line(capsys, folder, tmp_path):
    (tmp_path / "notes.txt").write_text("mine")
    code, _, err = call(capsys, "report", folder / "disc_0.h5", "-o", tmp_path)
    assert code == 1
    assert len(err.splitlines()) == 1
    assert "other things in it (notes.txt)" in err


def test_wrong_calls(capsys, folder):
    assert call(capsys, "report", "-o", "r")[0] == 2
    assert call(capsys, "report", folder / "disc_0.h5")[0] == 2


def test_help_has_an_example(capsys):
    code, out, _ = call(capsys, "report", "--help")
    assert code == 0
    assert "fieldviz report" in out
    assert "Example" in out


def test_steps_of_several_kinds_follow_each_other(capsys):
    shown = _Shown()
    for step in ((1, 2, "a"), (2, 2, "a"), (1, 3, "b")):
        shown(*step)
    shown.close()
    shown.close()
    assert capsys.readouterr().err.splitlines() == ["a: 1 of 2", "a: 2 of 2", "b: 1 of 3"]
