"""`fieldviz lines` as a user meets it."""

import json

import numpy as np
import pytest
import pyvista as pv
from command_calls import call

import fieldviz as fv


@pytest.fixture(scope="module")
def disc_file(tmp_path_factory):
    path = tmp_path_factory.mktemp("disc") / "disc.h5"
    fv.write_snapshot(path, fv.demo_disc(shape=(4, 64, 64), precision="single"))
    return path


@pytest.mark.parametrize("suffix", [".vtp", ".csv", ".npz"])
def test_every_output_holds_the_same_lines(capsys, tmp_path, disc_file, suffix):
    target = tmp_path / f"lines{suffix}"
    code, out, _ = call(
        capsys, "lines", disc_file, "--count", 12, "-o", target, "--sample", "density", "--json"
    )
    assert code == 0
    summary = json.loads(out)
    assert summary["lines"] == 12
    assert summary["interpolation"] == "flux"
    assert sum(end["lines"] for end in summary["ends"]) == 12
    disc = fv.read_snapshot(disc_file)
    truth = fv.trace_lines(
        disc, "magnetic", fv.equal_flux_seeds(disc, 12), interpolation="flux", sample=["density"]
    )
    assert summary["points"] == len(truth.spherical)
    if suffix == ".vtp":
        points, density = np.asarray(pv.read(target).points), pv.read(target)["density"]
    elif suffix == ".csv":
        table = np.genfromtxt(target, delimiter=",", names=True)
        points = np.stack([table[n] for n in "xyz"], axis=-1)
        density = table["density"]
        assert table["line"][-1] == 11
    else:
        with np.load(target) as stored:
            points, density = stored["points"], stored["field_density"]
            np.testing.assert_array_equal(stored["offsets"], truth.offsets)
    np.testing.assert_allclose(points, truth.points, rtol=1e-15)
    np.testing.assert_allclose(density, truth.value("density"), rtol=1e-6)


@pytest.mark.parametrize(
    ("options", "phrase"),
    [
        (["--seeds", "sheets", "--radii", 1.4, 3.0], "sheets seeds"),
        (["--seeds", "sheets"], "sheets seeds"),
        (["--seeds", "wind", "--field", "velocity", "--direction", "forward"], "not traced"),
        (["--seeds", "even-area", "--interpolation", "linear"], "linear interpolation"),
    ],
)
def test_kinds_of_seeds(capsys, disc_file, options, phrase):
    code, out, _ = call(capsys, "lines", disc_file, "--count", 10, *options)
    assert code == 0
    assert "10 lines" in out
    assert phrase in out


def test_given_points(capsys, tmp_path, disc_file):
    points = tmp_path / "points.csv"
    points.write_text("# r, theta, phi\n2.0,1.57,0.1\n9.0,1.57,0.1\n")
    code, out, _ = call(capsys, "lines", disc_file, "--seeds", "points", "--points", points)
    assert code == 0
    assert "2 lines" in out
    assert "seed outside" in out


@pytest.mark.parametrize(
    "options",
    [
        ["--count", 0],
        ["--count", 100_000_000],
        ["--tolerance", 0, "--interpolation", "linear"],
        ["--seeds", "points"],
        ["--seeds", "points", "--points", "nowhere.csv"],
        ["--sample", "temperature"],
        ["--field", "velocity", "--interpolation", "flux"],
        ["-o", "lines.txt"],
        ["-o", "nowhere/lines.vtp"],
    ],
)
def test_bad_input_is_one_line_and_exit_1(capsys, tmp_path, monkeypatch, disc_file, options):
    monkeypatch.chdir(tmp_path)
    code, out, err = call(capsys, "lines", disc_file, *options)
    assert code == 1
    assert out == ""
    assert err.startswith("fieldviz: Cannot")
    assert err.count("\n") == 1
    assert not list(tmp_path.iterdir())


def test_seeds_along_sheets_where_there_are_none(capsys, tmp_path, disc_file):
    smooth, disc = tmp_path / "smooth.h5", fv.read_snapshot(disc_file)
    theta = disc.grid.cell_centres(0)[1][:, None] + np.zeros(disc.grid.block_shape)
    cells = {n: disc.cell(n) for n in ("density", "pressure")}
    cells |= {"magnetic_r": np.cos(theta)[None], "magnetic_theta": -np.sin(theta)[None]}
    fv.write_snapshot(smooth, fv.Snapshot.from_grid(disc.grid, cells=cells))
    code, _, err = call(capsys, "lines", smooth, "--seeds", "sheets")
    assert code == 1
    assert "expected at least one flux sheet, found none" in err


def test_streamlines_tell_of_the_wind(capsys, tmp_path, disc_file):
    target = tmp_path / "wind.vtp"
    code, out, _ = call(
        capsys, "lines", disc_file, "--seeds", "wind", "--field", "poloidal-velocity", "--height",
        4.5, "--count", 12, "-o", target, "--json",
    )  # fmt: skip
    assert code == 0
    sides = json.loads(out)["wind"]["sides"]
    assert sides["upper"]["lines"] == sides["lower"]["lines"] == 6
    for side in sides.values():
        assert sum(side["drift_words"]["k"].values()) == 6
        assert 1 < side["lever_arm_momentum_median"] < 20
    written = pv.read(target)
    k = written["invariant_k"]
    height = np.arcsin(written.points[:, 2] / np.linalg.norm(written.points, axis=1))
    # Mass leaves along B above and against it below: k changes sign with the side.
    assert np.nanmedian(k[height > 0.45]) > 0 > np.nanmedian(k[height < -0.45])
    code, out, _ = call(
        capsys, "lines", disc_file, "--seeds", "wind", "--field", "velocity", "--count", 12
    )
    assert code == 0
    assert "upper wind, 6 streamlines" in out
    assert "lever arm" in out


def test_streamlines_without_a_field_say_why_the_wind_is_not_judged(capsys, tmp_path, disc_file):
    bare = tmp_path / "bare.h5"
    disc = fv.read_snapshot(disc_file)
    kept = {n: disc.cell(n) for n in disc.cell_names if not n.startswith("magnetic")}
    fv.write_snapshot(bare, fv.Snapshot.from_grid(disc.grid, cells=kept))
    code, out, _ = call(
        capsys, "lines", bare, "--seeds", "wind", "--field", "velocity", "--count", 4
    )
    assert code == 0
    assert "not judged: " in out
    assert "magnetic" in out
