"""What `fieldviz symmetry` prints: tables, errors, field scores, the warning; series and JSON."""

import json
from pathlib import Path

import pytest

import fieldviz as fv
from fieldviz.commands.symmetry import run
from fieldviz.errors import FieldvizError


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    path = tmp_path_factory.mktemp("series")
    for n in range(3):
        disc = fv.demo_disc(shape=(16, 32, 24), time=float(n), wind_scatter=0.3, midplane_shift=0.1)
        fv.write_snapshot(path / f"disc_{n}.h5", disc)
    return path


def call(*files, as_json=False):
    return run(files, layout=None, scale_heights=4.0, thickness=0.1, r_range=None, as_json=as_json)


def test_text_has_tables_errors_scores_and_the_warning(folder):
    text = call(folder / "disc_0.h5")
    first = text.splitlines()[0]
    assert first.startswith("even wind: gas leaves")
    assert "±" in first
    for part in (
        "two-sigma interval", "by radius", "full field", "velocity_phi", "8 blocks of azimuth",
        "some papers call 'odd'", "about the magnetic midplane", "single snapshot", "lean",
    ):  # fmt: skip
        assert part in text.replace("\n    ", " "), part
    assert max(map(len, text.splitlines()[1:])) < 180


def test_several_files_or_a_pattern_are_a_series(capsys, folder):
    files = sorted(folder.glob("*.h5"))
    one = call(*files[::-1])
    assert one == call(*files) == call(Path(folder / "disc_*.h5"))
    assert "disc_0.h5 to disc_2.h5, t = 0 to 2, mean of 3 snapshots" in one
    assert "reading snapshots: 3 of 3" in capsys.readouterr().err


def test_json_agrees_with_the_text(folder):
    answer = json.loads(call(folder / "disc_1.h5", as_json=True))
    assert answer["file"].endswith("disc_1.h5")
    outflow = answer["outflow"]
    assert outflow["interval"][0] < outflow["angle"] < outflow["interval"][1]
    assert outflow["angle_error"] > 0
    assert answer["field_scores"]["scores"][0]["name"] == "density"
    assert answer["sentence"] == call(folder / "disc_1.h5").splitlines()[0]
    series = json.loads(call(Path(folder / "disc_*.h5"), as_json=True))
    assert len(series["files"]) == 3
    assert series["times"] == [0.0, 1.0, 2.0]


def test_what_is_not_there_is_said(folder):
    with pytest.raises(FieldvizError, match="Cannot read"):
        call(folder / "none.h5")
    with pytest.raises(FieldvizError, match="expected files that match"):
        call(Path(folder / "none_*.h5"))
