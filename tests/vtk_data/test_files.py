"""Exported files, read back by VTK's own readers."""

import subprocess
import sys

import numpy as np
import pytest
import pyvista as pv

import fieldviz as fv
from fieldviz.errors import FieldvizError, SnapshotFileError
from fieldviz.vtk_data.files import write_vtk


@pytest.fixture(scope="module")
def disc():
    return fv.demo_disc(shape=(4, 16, 16), levels=2, precision="single")


@pytest.mark.parametrize("suffix", [".vtm", ".vtkhdf"])
def test_export_comes_back_equal(disc, tmp_path, suffix):
    path = tmp_path / f"disc{suffix}"
    written = write_vtk(path, fv.to_vtk(disc))
    assert written[0] == path
    assert all(name.exists() for name in written)
    back = pv.read(path)
    assert back.keys() == ["level 0", "level 1"]
    level = disc.grid.level
    for part, number in enumerate(disc.grid.levels):
        for index, block in enumerate(np.flatnonzero(level == number)):
            grid = back[part][index]
            np.testing.assert_array_equal(grid["density"], disc.cells["density"][block].ravel())
            assert grid["magnetic"].shape == (grid.n_cells, 3)


def test_xml_export_keeps_time(disc, tmp_path):
    write_vtk(tmp_path / "disc.vtm", fv.to_vtk(disc))
    assert pv.read(tmp_path / "disc.vtm")[0][0].field_data["TimeValue"][0] == disc.time


def test_export_again_replaces_the_old_one(disc, tmp_path):
    for _ in range(2):
        write_vtk(tmp_path / "disc.vtm", fv.to_vtk(disc))
    assert sorted(p.name for p in tmp_path.iterdir()) == ["disc", "disc.vtm"]


def test_export_does_not_replace_a_folder_of_other_data(disc, tmp_path):
    (tmp_path / "disc").mkdir()
    (tmp_path / "disc" / "thesis.tex").write_text("years of work")
    with pytest.raises(FieldvizError, match=r"thesis\.tex"):
        write_vtk(tmp_path / "disc.vtm", fv.to_vtk(disc))
    assert (tmp_path / "disc" / "thesis.tex").read_text() == "years of work"
    assert sorted(p.name for p in tmp_path.iterdir()) == ["disc"]


def test_unknown_suffix_and_missing_folder(disc, tmp_path):
    with pytest.raises(FieldvizError, match=r"\.vtm or \.vtkhdf"):
        write_vtk(tmp_path / "disc.obj", fv.to_vtk(disc))
    with pytest.raises(SnapshotFileError, match="no folder"):
        write_vtk(tmp_path / "nowhere" / "disc.vtkhdf", fv.to_vtk(disc))
    assert not list(tmp_path.iterdir())


FULL_DISK = """
import resource, signal, sys
import fieldviz as fv
from fieldviz.errors import SnapshotFileError
from fieldviz.vtk_data.files import write_vtk
data = fv.to_vtk(fv.demo_disc(shape=(8, 32, 32)))
signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
resource.setrlimit(resource.RLIMIT_FSIZE, (40_000, 40_000))
try:
    write_vtk(sys.argv[1], data)
except SnapshotFileError as error:
    print(error)
"""


def test_a_disk_that_fills_up_leaves_nothing_and_one_line(tmp_path):
    done = subprocess.run(
        [sys.executable, "-c", FULL_DISK, str(tmp_path / "disc.vtm")],
        capture_output=True, text=True, timeout=120, check=True,
    )  # fmt: skip
    assert done.stdout.startswith("Cannot write")
    assert done.stdout.count("\n") == 1
    assert done.stderr == ""
    assert not list(tmp_path.iterdir())
