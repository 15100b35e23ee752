"""The commands as a user meets them: output, exit codes, one line for each failure."""

import json
import subprocess
import sys

import h5py
import numpy as np
import pytest
from command_calls import call

import fieldviz as fv
from fieldviz.cli import app


@pytest.fixture(scope="module")
def disc_file(tmp_path_factory):
    path = tmp_path_factory.mktemp("disc") / "disc.h5"
    fv.write_snapshot(path, fv.demo_disc(shape=(4, 64, 48), precision="single"))
    return path


COMMANDS = [
    "sample", "inspect", "render", "symmetry", "sheets", "outflow", "report", "lines", "export",
    "host install", "host check",
]  # fmt: skip


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_has_help_with_an_example(capsys, command):
    code, out, _ = call(capsys, *command.split(), "--help")
    assert code == 0
    assert f"Example: fieldviz {command}" in " ".join(out.split())


def test_no_command_is_forgotten():
    known = {command.split()[0] for command in COMMANDS}
    assert {name for name in app if not name.startswith("-")} == known


@pytest.mark.parametrize(
    "arguments",
    [
        ["nonsense"],
        ["symmetry"],
        ["symmetry", "a.h5", "--no-such"],
        ["render", "a", "--theme", "x"],
    ],
)
def test_a_wrong_call_exits_with_2(capsys, arguments):
    code, out, err = call(capsys, *arguments)
    assert code == 2
    assert out == ""
    assert err


@pytest.mark.parametrize("command", ["inspect", "render", "symmetry"])
def test_a_missing_file_is_one_line_and_exit_1(capsys, tmp_path, command):
    code, out, err = call(capsys, command, tmp_path / "nowhere.h5")
    assert code == 1
    assert out == ""
    assert err.startswith("fieldviz: Cannot read")
    assert err.count("\n") == 1


def test_symmetry_text_and_json_agree(capsys, disc_file):
    code, text, _ = call(capsys, "symmetry", disc_file)
    assert code == 0
    code, out, _ = call(capsys, "symmetry", disc_file, "--json")
    assert code == 0
    answer = json.loads(out)
    assert text.startswith(answer["sentence"])
    assert answer["word"] == "even"
    assert answer["outflow"]["upper"] == pytest.approx(
        fv.wind_symmetry(fv.read_snapshot(disc_file)).outflow.upper
    )


def test_symmetry_takes_radii_and_thickness(capsys, disc_file):
    code, out, _ = call(
        capsys, "symmetry", disc_file, "--r-range", 1.5, 3, "--thickness", 0.12, "--json"
    )
    answer = json.loads(out)
    assert code == 0
    assert answer["outflow"]["bands"][0]["r_low"] == pytest.approx(1.5)
    assert answer["outflow"]["bands"][-1]["r_high"] == pytest.approx(3)
    assert answer["thickness"] == {"h": 0.12, "spread": [0.12, 0.12], "source": "given"}


def test_sample_writes_a_series_that_reads_back(capsys, tmp_path):
    folder = tmp_path / "new" / "series"
    code, out, err = call(
        capsys, "sample", "-o", folder, "--times", 3, 0, "--shape", 4, 16, 24, "--wind", "odd",
        "--levels", 2, "--compress",
    )  # fmt: skip
    assert code == 0
    assert len(out.splitlines()) == 2
    assert "writing snapshots: 2 of 2" in err
    series = fv.read_series(str(folder / "*.h5"))
    assert series.times == (0.0, 3.0)
    assert series[0].grid.levels == [0, 1]
    again = fv.demo_disc(
        shape=(4, 16, 24), time=3.0, wind="odd", levels=2, precision="single",
        magnetic_turbulence=0.5, velocity_turbulence=0.05, sheet_wander=0.02,
    )  # fmt: skip
    np.testing.assert_array_equal(series[1].cell("density"), again.cell("density"))


def test_sample_refuses_what_cannot_be(capsys, tmp_path):
    code, _, err = call(capsys, "sample", "-o", tmp_path, "--shape", 4, 30, 24, "--levels", 2)
    assert code == 1
    assert "divide" in err
    (tmp_path / "file").write_text("")
    code, _, err = call(capsys, "sample", "-o", tmp_path / "file")
    assert code == 1
    assert err.count("\n") == 1


def test_export(capsys, tmp_path, disc_file):
    target = tmp_path / "disc.vtkhdf"
    code, out, _ = call(
        capsys, "export", disc_file, "-o", target, "--fields", "density", "pressure"
    )
    assert code == 0
    assert out.strip() == str(target)
    code, _, err = call(capsys, "export", disc_file, "-o", tmp_path / "disc.csv")
    assert code == 1
    assert ".vtm" in err


@pytest.mark.parametrize("size", ["big", "10x10", "1920", "99999x99999", "1920x1080x3"])
def test_sizes_that_cannot_be_drawn(capsys, tmp_path, disc_file, size):
    picture = tmp_path / "picture.png"
    code, _, err = call(capsys, "render", disc_file, "-o", picture, "--size", size)
    assert code == 1
    assert "WIDTHxHEIGHT" in err
    assert not picture.exists()


def test_a_foreign_file_is_pointed_to_inspect(capsys, tmp_path):
    path = tmp_path / "foreign.h5"
    with h5py.File(path, "w") as file:
        file["rho"] = np.ones((4, 4, 4))
    code, _, err = call(capsys, "symmetry", path)
    assert code == 1
    assert "fieldviz inspect" in err


def test_the_module_runs_and_a_closed_pipe_is_no_error(disc_file):
    command = f"'{sys.executable}' -m fieldviz symmetry '{disc_file}' --json"
    done = subprocess.run(
        ["bash", "-c", f"set -o pipefail; {command} | head -1"], capture_output=True, text=True,
        timeout=120, check=False,
    )  # fmt: skip
    assert (done.returncode, done.stdout, done.stderr) == (0, "{\n", "")
