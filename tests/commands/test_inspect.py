"""`fieldviz inspect`: what it prints can be used."""

from __future__ import annotations

import json

import h5py
import numpy as np
import pytest

import fieldviz as fv
from fieldviz.commands.inspect import run
from fieldviz.errors import FieldvizError
from fieldviz.snapshots.layout_description import layout_from_toml, read_layout


@pytest.fixture
def foreign(tmp_path):
    path = tmp_path / "heather_12.h5"
    with h5py.File(path, "w") as file:
        file["rho"] = np.arange(1.0, 85.0).reshape(3, 4, 7)
        file["r_edges"] = np.geomspace(1, 4, 8)
        file["theta_edges"] = np.linspace(1.2, 1.9, 5)
        file["phi_edges"] = np.linspace(0, 1, 4)
    return path


def test_a_foreign_file_gives_a_description_that_reads_it(foreign, tmp_path):
    text = run(foreign, None, False)
    layout = tmp_path / "layout.toml"
    layout.write_text(text)
    assert text.startswith(f"# {foreign}")
    assert "# /rho " in text
    assert "# unsure:" in text
    snapshot = fv.read_snapshot(foreign, layout=layout)
    assert snapshot.time == 12
    assert snapshot.cells["density"][0, 0, 0, 1] == 2.0


def test_a_foreign_file_with_its_description(foreign, tmp_path):
    layout = tmp_path / "layout.toml"
    layout.write_text(run(foreign, None, False))
    text = run(foreign, layout, False)
    assert "read by a layout description" in text
    assert "cells/density" in text
    assert "fieldviz_layout_description" not in text


def test_json_holds_both(foreign):
    found = json.loads(run(foreign, None, True))
    assert found["kind"] == "unknown"
    assert {entry["path"] for entry in found["datasets"]} >= {"/rho", "/r_edges"}
    description = layout_from_toml(found["proposal"])
    assert description.cells["density"].dataset == "rho"


def test_a_native_file(tmp_path):
    path = tmp_path / "fen.h5"
    fv.write_snapshot(
        path,
        fv.Snapshot.from_arrays(
            [1.0, 2.0, 3.0], [1.2, 1.5, 1.8], [0, 0.5, 1.0], cells={"density": np.ones((2, 2, 2))}
        ),
    )
    text = run(path, None, False)
    assert "in fieldviz's own layout" in text
    assert "warning: no velocity_r" in text
    assert json.loads(run(path, None, True))["grid"]["n_cells"] == 8


def test_names_with_line_breaks_stay_in_comments(foreign, tmp_path):
    with h5py.File(foreign, "a") as file:
        file["odd\nname = 3"] = np.ones((3, 4, 7))
        file.attrs["note"] = "first\nsecond = 2"
    layout = tmp_path / "layout.toml"
    layout.write_text(run(foreign, None, False))
    assert read_layout(layout).cells["density"].dataset == "rho"
    assert "odd_name_3" in fv.read_snapshot(foreign, layout=layout).cells


def test_what_cannot_be_inspected_raises_one_line(tmp_path):
    with pytest.raises(FieldvizError, match="no such file"):
        run(tmp_path / "none.h5", None, False)
