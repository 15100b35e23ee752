"""What a person is told of a file is what is in it."""

from __future__ import annotations

import json
import tracemalloc

import h5py
import numpy as np
import pytest
from scattered_file import Choices, scatter, small_snapshot

import fieldviz as fv
from fieldviz.errors import FieldvizError, LayoutError, SnapshotFileError
from fieldviz.snapshots.inspection import inspect_file, inspect_snapshot
from fieldviz.snapshots.inspection_text import format_inspection

R, THETA, PHI = (
    np.geomspace(1, 4, 17),
    np.linspace(1.1, np.pi - 1.1, 13),
    np.linspace(0, np.pi / 4, 5),
)
SHAPE = (4, 12, 16)


def smooth_cells(dtype="f4"):
    r, theta, _ = np.meshgrid(*(0.5 * (a[1:] + a[:-1]) for a in (R, THETA, PHI)), indexing="ij")
    density = (r**-1.5 * np.exp(-(((theta - np.pi / 2) / 0.2) ** 2))).T.astype(dtype)
    cells = {"density": density, "pressure": density * dtype_of(dtype)(0.01)}
    for axis in ("r", "theta", "phi"):
        cells[f"velocity_{axis}"] = np.sin(density)
    return cells


def dtype_of(dtype):
    return np.dtype(dtype).type


def snapshot(cells=None, *, faces=None, theta=THETA, phi=PHI, **constants):
    return fv.Snapshot.from_arrays(
        R,
        theta,
        phi,
        cells=smooth_cells() if cells is None else cells,
        faces=faces or {},
        **constants,
    )


def has_warning(inspection, *words):
    return any(all(word in line for word in words) for line in inspection.warnings)


def test_a_native_file(tmp_path):
    scales = fv.UnitScales(length=fv.Unit(5.2, "au"), mass=fv.Unit(2.0, "g"))
    path = tmp_path / "fen.h5"
    fv.write_snapshot(path, snapshot(time=2.5, gamma=1.4, title="fen", units=scales))
    with h5py.File(path, "a") as file:
        file["cells/velocity_r"].attrs["units"] = "au/yr"
    found = inspect_file(path)
    assert found.kind == "native"
    assert (found.time, found.title) == (2.5, "fen")
    assert found.constants == {"mu0": 1.0, "gm": 1.0, "gamma": 1.4}
    assert found.units == {"length": "5.2 au", "mass": "2 g"}
    assert found.warnings == ()
    grid = found.grid
    assert grid.n_cells == 4 * 12 * 16
    assert grid.block_shape == {"phi": 4, "theta": 12, "r": 16}
    assert grid.r == (1.0, 4.0)
    np.testing.assert_allclose(
        grid.degrees_from_midplane, (90 - np.degrees(1.1),) * 2 * np.array([1, -1])
    )
    assert grid.azimuth == "wedge of 45 degrees, 8 of them make the ring"
    fields = {report.name: report for report in found.fields}
    density = smooth_cells()["density"]
    assert fields["density"].minimum == density.min()
    assert fields["density"].maximum == density.max()
    assert fields["density"].shape == (1, *SHAPE)
    assert fields["density"].stored_type == "float32"
    assert fields["density"].unit == "code (0.0142239 g au^-3)"
    assert fields["pressure"].unit == "code"
    assert fields["velocity_r"].unit == "au/yr"


def test_levels_are_counted():
    found = inspect_snapshot(small_snapshot(0, levels=3))
    assert found.grid.blocks_of_level == {1: 7, 2: 8}


def test_values_that_are_not_finite_are_counted_and_left_out_of_the_range():
    cells = smooth_cells()
    cells["density"][0, 0, :3] = np.nan
    cells["pressure"][1, 2, 3] = np.inf
    found = inspect_snapshot(snapshot(cells))
    assert has_warning(found, "cells/density: 3 of 768 values are NaN")
    assert has_warning(found, "cells/pressure: 1 of 768")
    assert {r.name: r.non_finite for r in found.fields if r.non_finite} == {
        "density": 3,
        "pressure": 1,
    }
    assert all(np.isfinite(report.maximum) for report in found.fields)


def test_a_field_without_any_finite_value():
    cells = smooth_cells()
    cells["velocity_r"][:] = np.nan
    report = next(r for r in inspect_snapshot(snapshot(cells)).fields if r.name == "velocity_r")
    assert (report.minimum, report.maximum, report.non_finite) == (None, None, 768)


def test_density_that_is_not_positive():
    cells = smooth_cells()
    cells["density"][0, 0, 0] = 0
    cells["density"][0, 0, 1] = -1
    found = inspect_snapshot(snapshot(cells))
    assert has_warning(found, "cells/density: 2 of 768 values are 0 or below")
    assert not has_warning(found, "velocity", "0 or below")


def test_density_at_a_floor():
    cells = smooth_cells()
    floor = np.quantile(cells["density"], 0.2)
    cells["density"] = np.maximum(cells["density"], floor)
    found = inspect_snapshot(snapshot(cells))
    report = next(report for report in found.fields if report.name == "density")
    wanted = np.mean(cells["density"] <= 1.01 * floor)
    assert report.at_floor == pytest.approx(wanted)
    assert has_warning(found, "cells/density", "looks like a floor")


def test_grids_that_deserve_a_word():
    lopsided = inspect_snapshot(snapshot(theta=np.linspace(1.1, 2.0, 13)))
    assert has_warning(lopsided, "26.97 degrees above the midplane and 24.59 below")
    odd = inspect_snapshot(snapshot(phi=np.linspace(0, 1.0, 5)))
    assert has_warning(odd, "57.2958 degrees", "not a whole multiple")
    ring = inspect_snapshot(snapshot(phi=np.linspace(0, 2 * np.pi, 5)))
    assert ring.warnings == ()
    flat = fv.Snapshot.from_arrays(
        R, THETA, [0, 1.0], cells={"density": smooth_cells()["density"][:1]}
    )
    found = inspect_snapshot(flat)
    assert has_warning(found, "single azimuth cell")
    assert has_warning(found, "no velocity_r, velocity_theta, velocity_phi")


def test_the_coarsest_level_missing():
    assert has_warning(inspect_snapshot(small_snapshot(0, levels=2)), "all blocks are at level 1")


@pytest.mark.parametrize("dtype", ["f4", "f8"])
def test_divergence_is_told_and_warned_of(tmp_path, dtype):
    grid = snapshot().grid
    random = np.random.default_rng(0).normal(size=(5, 13, 16)), np.random.default_rng(1)
    along_r = random[0]
    faces = {  # From a potential along r: fluxes of every cell cancel.
        "magnetic_r": np.zeros((4, 12, 17), dtype),
        "magnetic_theta": (np.diff(along_r, axis=0) / grid.area_theta(0)).astype(dtype),
        "magnetic_phi": (-np.diff(along_r, axis=1) / grid.area_phi(0)).astype(dtype),
    }
    good = inspect_snapshot(snapshot(faces=faces))
    assert good.warnings == ()
    assert good.divergence["face"] < 1e-6
    faces["magnetic_theta"][1, 2, 3] *= 1.001
    path = tmp_path / "fen.h5"
    fv.write_snapshot(path, snapshot(faces=faces))
    assert has_warning(inspect_file(path), "div B of the face field is", "(block 0)")


def test_half_precision_faces_are_judged_as_such(tmp_path):
    grid = snapshot().grid
    flux = np.diff(np.random.default_rng(0).normal(size=(5, 13, 16)), axis=0)
    flux_phi = -np.diff(np.random.default_rng(0).normal(size=(5, 13, 16)), axis=1)
    path = tmp_path / "half.h5"
    fv.write_snapshot(path, snapshot())
    with h5py.File(path, "a") as file:
        file["faces/magnetic_r"] = np.zeros((1, 4, 12, 17), "f2")
        file["faces/magnetic_theta"] = (flux / grid.area_theta(0)).astype("f2")[None]
        file["faces/magnetic_phi"] = (flux_phi / grid.area_phi(0)).astype("f2")[None]
    found = inspect_file(path)
    assert found.divergence["face"] > 1e-5
    assert not has_warning(found, "div B")


def test_a_described_file(tmp_path):
    path = tmp_path / "fen_t42.h5"
    wanted = small_snapshot(3)
    layout = scatter(wanted, path, Choices(endian=">", degrees=True))
    with h5py.File(path, "a") as file:
        file["data_0"].attrs["unit"] = "stone per bucket"
    found = inspect_file(path, layout)
    assert found.kind == "described"
    fields = {(report.kind, report.name): report for report in found.fields}
    assert fields["cells", "density"].unit == "stone per bucket"
    assert fields["cells", "density"].stored_type == "float32 big-endian"
    assert fields["cells", "density"].maximum == wanted.cells["density"].max()
    assert ("faces", "magnetic_r") in fields
    scaled = scatter(wanted, path, Choices(scale=2.0))
    with h5py.File(path, "a") as file:
        file["data_0"].attrs["unit"] = "stone per bucket"
    fields = {report.name: report for report in inspect_file(path, scaled).fields}
    assert fields["density"].unit == "code"  # What the file states holds no longer after scaling.


def test_a_file_of_unknown_layout(tmp_path):
    path = tmp_path / "unknown.h5"
    with h5py.File(path, "w") as file:
        file["a/numbers"] = np.array([[1.0, np.nan], [3.0, -2.0]])
        file["a/words"] = ["one", "two"]
        file["a/pairs"] = np.zeros(3, dtype=[("x", "f4")])
        file["whole"] = np.arange(5, dtype=">i2")
        file["empty"] = h5py.Empty("f4")
        file["hollow"] = np.zeros((0, 4))
        file["single"] = 7
        file["away"] = h5py.ExternalLink("other.h5", "x")
        file.attrs["year"] = 1987
        file["a"].attrs["note"] = "hand-made"
    found = inspect_file(path)
    assert found.kind == "unknown"
    reports = {report.path: report for report in found.datasets}
    numbers = reports["/a/numbers"].range
    assert (numbers.minimum, numbers.maximum, numbers.non_finite) == (-2.0, 3.0, 1)
    assert reports["/a/words"].range.note == "one, two"
    assert reports["/a/pairs"].stored_type == "compound"
    assert reports["/whole"].stored_type == "int16 big-endian"
    assert reports["/whole"].range.maximum == 4
    assert reports["/single"].range.minimum == 7
    assert reports["/empty"].range.note == "empty"
    assert reports["/hollow"].range.minimum is None
    assert found.attributes == {"@year": 1987, "/a@note": "hand-made"}
    assert has_warning(found, "not followed: /away (a link to other.h5)")
    assert "fieldviz_layout_description = 1" in found.proposal


def test_a_large_dataset_is_read_in_part_and_in_pieces(tmp_path):
    path = tmp_path / "large.h5"
    with h5py.File(path, "w") as file:
        data = file.create_dataset("big", (40, 1024, 1024), "f4", chunks=(1, 1024, 1024))
        data[0], data[39] = 3.0, 9.0
        vast = file.create_dataset("vast", (2, 1 << 40), "f8", chunks=(1, 1 << 16))
        vast[0, 5] = 4.0
        file.create_dataset("lumps", (1 << 30,), "f8", chunks=(1 << 25,))
    tracemalloc.start()
    found = inspect_file(path)
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert peak < 64 * 2**20
    reports = {report.path: report.range for report in found.datasets}
    assert reports["/big"].maximum == 3.0
    assert reports["/big"].share == pytest.approx(16 / 40)
    assert reports["/vast"].maximum == 4.0
    assert 0 < reports["/vast"].share < 1e-5
    assert "chunks" in reports["/lumps"].note
    assert "range of the first 40 %" in format_inspection(found)


def test_one_block_of_one_field_in_memory(tmp_path):
    path = tmp_path / "many.h5"
    n_blocks, size = 32, 48
    edges = np.linspace(0, 1.0, n_blocks + 1)
    blocks = [
        fv.Block(
            np.geomspace(1, 4, size + 1),
            np.linspace(1.2, 1.9, size + 1),
            np.linspace(edges[n], edges[n + 1], size + 1),
            cells={"density": np.full((size,) * 3, 1.0 + n), "pressure": np.ones((size,) * 3)},
        )
        for n in range(n_blocks)
    ]
    fv.write_snapshot(path, fv.Snapshot.from_blocks(blocks))
    inspect_file(path)
    tracemalloc.start()
    found = inspect_file(path)
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    block_bytes = 8 * size**3
    assert peak < 4 * block_bytes  # Of 64 blocks in the file.
    assert next(r for r in found.fields if r.name == "density").maximum == n_blocks


def test_the_text_is_aligned_and_harmless(tmp_path):
    path = tmp_path / "fen.h5"
    fv.write_snapshot(path, snapshot(time=1.0))
    text = format_inspection(inspect_file(path))
    lines = text.splitlines()
    heads = next(line for line in lines if line.startswith("field "))
    rows = [line for line in lines if line.startswith("cells/")]
    assert len(rows) == 5
    assert len({line.index("float32") for line in rows}) == 1
    assert heads.index("type") == rows[0].index("float32")
    assert "no warnings" in text
    assert all(line == line.rstrip() for line in lines)
    with h5py.File(tmp_path / "bad.h5", "w") as file:
        file["esc\x1b[31m\nname"] = np.ones(3)
        file.attrs["esc"] = "\x1b]0;x\x07\r"
    text = format_inspection(inspect_file(tmp_path / "bad.h5"))
    assert all(letter.isprintable() or letter == "\n" for letter in text)


def test_plain_data_for_json():
    cells = smooth_cells()
    cells["velocity_r"][:] = np.nan
    found = inspect_snapshot(snapshot(cells)).as_dict()
    again = json.loads(json.dumps(found, allow_nan=False))
    assert again["grid"]["blocks_of_level"] == {"0": 1}
    assert again["fields"][2]["minimum"] is None
    assert again["grid"]["block_shape"]["r"] == 16


def test_what_cannot_be_inspected(tmp_path):
    with pytest.raises(SnapshotFileError, match="no such file"):
        inspect_file(tmp_path / "none.h5")
    (tmp_path / "text.h5").write_text("no HDF5")
    with pytest.raises(SnapshotFileError, match="another kind of file"):
        inspect_file(tmp_path / "text.h5")
    path = tmp_path / "fen.h5"
    fv.write_snapshot(path, snapshot())
    with pytest.raises(LayoutError, match="got a folder"):
        inspect_file(path, tmp_path)
    cut = tmp_path / "cut.h5"
    cut.write_bytes(path.read_bytes()[:-4000])
    with pytest.raises(FieldvizError, match="truncated"):
        inspect_file(cut)
