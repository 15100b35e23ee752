"""What a description says and a file does not bear out is one clear line."""

from __future__ import annotations

from dataclasses import replace

import h5py
import numpy as np
import pytest
from scattered_file import (
    MODEL,
    Choices,
    assert_same,
    axisymmetric_file,
    described,
    scatter,
    small_snapshot,
    unlike_blocks,
)

import fieldviz as fv
from fieldviz.errors import FieldvizError, GridError, LayoutError
from fieldviz.snapshots.layout_description import LayoutDescription
from fieldviz.snapshots.layout_tables import CoordinateTable, FieldTable, StackTable, TimeTable


def change(layout, what, **entries):
    """A copy with one entry of a table ("cells.density") replaced."""
    table, _, name = what.partition(".")
    old = getattr(layout, table)
    if not name:
        return replace(layout, **{table: replace(old, **entries)})
    base = old.get(name) or {"grid": CoordinateTable, "stacks": StackTable}.get(table, FieldTable)()
    return replace(layout, **{table: {**old, name: replace(base, **entries)}})


BAD_LAYOUTS = {
    "missing dataset": ("cells.density", {"dataset": "bog"}, "expected a dataset '/bog', got none"),
    "a group": ("cells.density", {"dataset": "lines"}, "to be a dataset, got a group"),
    "unknown stack": (
        "cells.density",
        {"dataset": "", "stack": "x", "variable": 0},
        "expected a stack out of none",
    ),
    "both": ("cells.density", {"stack": "x"}, "either dataset or stack, got both"),
    "neither": ("cells.density", {"dataset": ""}, "either dataset or stack, got neither"),
    "shapes disagree": ("cells.density", {"dataset": "wide"}, "4, 7.*cells"),
    "wrong axes": ("cells.density", {"order": ("block", "one", "phi", "theta", "r")}, "4 axes"),
    "not one": ("cells.density", {"dataset": "long", "order": ("one", *MODEL)}, "length 1"),
    "text": ("cells.density", {"dataset": "text"}, "real numbers"),
    "complex": ("cells.density", {"dataset": "complex"}, "real numbers"),
    "compound": ("cells.density", {"dataset": "compound"}, "real numbers"),
    "elsewhere": ("cells.density", {"dataset": "elsewhere"}, "linked to another file"),
    "external": ("cells.density", {"dataset": "external"}, "stored in other files"),
    "virtual": ("cells.density", {"dataset": "virtual"}, "stored in other files"),
    "scalar": ("cells.density", {"dataset": "about/star"}, "3 axes"),
    "edges missing": ("grid.r", {"edges": "lines/none"}, "expected a dataset"),
    "edges not increasing": ("grid.r", {"edges": "bad/wavy"}, "only rise or only fall"),
    "centres not increasing": ("grid.r", {"edges": "", "centres": "bad/wave"}, "only rise or only"),
    "NaN in edges": ("grid.r", {"edges": "bad/nan"}, "finite values, got 1 NaN"),
    "edges of another length": ("grid.r", {"edges": "lines/phi"}, "expected 7 values"),
    "edges in 3D": ("grid.r", {"edges": "data_0"}, "one row"),
    "text edges": ("grid.r", {"edges": "text"}, "real numbers"),
    "absurd edges": ("grid.r", {"edges": "bad/absurd"}, "free memory"),
    "no edges": ("grid.r", {"edges": ""}, "one of edges, centres and bounds, got none"),
    "edges and bounds": ("grid.r", {"bounds": (1.0, 2.0)}, "got edges and bounds"),
    "equal bounds": ("grid.r", {"edges": "", "bounds": (1.0, 1.0)}, "two different numbers"),
    "log bounds": (
        "grid.r",
        {"edges": "", "bounds": (-1.0, 1.0), "spacing": "log"},
        "positive numbers for log",
    ),
    "ln theta": ("grid.theta", {"transform": "ln"}, "logarithms for r alone"),
    "overflow": ("grid.r", {"edges": "bad/huge", "transform": "ln"}, "infinite ones after"),
    "latitude r": ("grid.r", {"measured_from": "pole"}, "for theta alone"),
    "negative r": ("grid.r", {"scale": -1.0}, "radii >= 0"),
    "degrees phi": ("grid.phi", {"scale": 30.0}, "at most 2 pi"),
    "no time": ("time", {"attribute": ""}, r"Cannot use \[time\].*got none"),
    "two times": ("time", {"value": 1.0}, "attribute and value"),
    "time missing": ("time", {"attribute": "@whenn"}, "attribute 'whenn'.*got none"),
    "time owner missing": ("time", {"attribute": "fog@when"}, "no such group or dataset"),
    "time not attribute": ("time", {"attribute": "when"}, "path@name"),
    "time NaN": ("time", {"attribute": "", "dataset": "bad/nan_time"}, "finite number, got nan"),
    "time a list": ("time", {"attribute": "", "dataset": "lines/r"}, "one finite number, got 7"),
    "time text": ("time", {"attribute": "", "dataset": "text"}, "real numbers"),
    "bad regex": ("time", {"attribute": "", "file_name": "("}, "regular expression"),
    "no group": ("time", {"attribute": "", "file_name": "fen"}, "one group"),
    "no match": ("time", {"attribute": "", "file_name": r"q(\d+)"}, "matches"),
    "no number": ("time", {"attribute": "", "file_name": r"(fen)"}, "find a number"),
    "gm": ("constants", {"gm": "nowhere"}, "expected a dataset"),
    "negative mu0": ("constants", {"mu0": -1.0}, "mu0 to be a positive"),
    "groups without pattern": ("blocks", {"stored": "groups"}, "PATTERN"),
    "no such groups": ("blocks", {"stored": "groups", "groups": "patch*"}, "match 'patch"),
    "no block axis": ("blocks", {"stored": "axis"}, "names the block axis"),
    "levels": ("blocks", {"level": "lines/r"}, "1 whole numbers"),
    "too many ghosts": ("axes", {"ghost_cells": {"r": 3}}, "more than 6 entries along r, got 6"),
    "absurd field": ("cells.density", {"dataset": "bad/absurd3"}, "cells"),
}


@pytest.fixture(scope="module")
def bad_file(tmp_path_factory):
    folder = tmp_path_factory.mktemp("bad")
    path = folder / "fen_t42.h5"
    layout = scatter(small_snapshot(3, faces=False), path, Choices(shared_edges=True, level=False))
    shape = (2, 4, 6)
    with h5py.File(folder / "other.h5", "w") as other:
        other["x"] = np.ones(shape)
    (folder / "raw.bin").write_bytes(np.ones(shape).tobytes())
    with h5py.File(path, "a") as file:
        file["wide"] = np.ones((2, 4, 7))
        file["long"] = np.ones((2, *shape))
        file["text"] = np.full(shape, b"fen")
        file["complex"] = np.ones(shape, dtype="c8")
        file["compound"] = np.zeros(shape, dtype=[("a", "f4"), ("b", "i2")])
        file["elsewhere"] = h5py.ExternalLink("other.h5", "x")
        file.create_dataset("external", shape, "f8", external=[("raw.bin", 0, 48 * 8)])
        source = h5py.VirtualLayout(shape, "f8")
        source[...] = h5py.VirtualSource("other.h5", "x", shape)
        file.create_virtual_dataset("virtual", source)
        file["bad/wavy"] = np.array([1, 2, 3, 2.5, 4, 5, 6])
        file["bad/wave"] = np.array([1, 2, 3, 2.5, 4, 5])
        file["bad/nan"] = np.array([1, 2, np.nan, 4, 5, 6, 7])
        file["bad/huge"] = np.arange(7) * 300.0
        file["bad/nan_time"] = np.nan
        file.create_dataset("bad/absurd", (1 << 50,), "f8", chunks=(1024,))
        file.create_dataset("bad/absurd3", (2, 4, 1 << 50), "f8", chunks=(1, 1, 1024))
    return path, layout


@pytest.mark.parametrize("case", BAD_LAYOUTS)
def test_what_does_not_fit_the_file_is_one_clear_line(bad_file, case):
    path, layout = bad_file
    what, entries, words = BAD_LAYOUTS[case]
    with pytest.raises(FieldvizError, match=words) as caught:
        fv.read_snapshot(path, layout=change(layout, what, **entries))
    message = str(caught.value)
    assert "expected" in message
    assert "got" in message
    assert "\n" not in message
    assert "fen_t42.h5" in message


def test_the_good_description_of_the_bad_file_reads(bad_file):
    path, layout = bad_file
    assert_same(fv.read_snapshot(path, layout=layout), small_snapshot(3, faces=False))


def test_a_variable_that_is_not_in_the_list_is_named(tmp_path):
    path, layout = described(tmp_path, stacked=True)
    layout = change(layout, "cells.density", variable="q9")
    with pytest.raises(LayoutError, match="q0, q1, q2, q3, got 'q9'"):
        fv.read_snapshot(path, layout=layout)
    optional = change(layout, "cells.density", optional=True)
    assert "density" not in fv.read_snapshot(path, layout=optional).cells


def test_a_variable_past_the_end_of_the_stack(tmp_path):
    path, layout = described(tmp_path, stacked=True)
    with pytest.raises(LayoutError, match="variable 4 within the 4 variables"):
        fv.read_snapshot(path, layout=change(layout, "cells.density", variable=4))


def test_blocks_that_run_both_ways_are_refused(tmp_path):
    path, layout, *_ = unlike_blocks(tmp_path, cuts=(4, 4))
    with h5py.File(path, "a") as file:
        file["part1/r"][...] = file["part1/r"][...][::-1]
    with pytest.raises(LayoutError, match="block 1 the other way round"):
        fv.read_snapshot(path, layout=layout)


def test_a_field_in_some_groups_only_is_refused(tmp_path):
    path, layout, *_ = unlike_blocks(tmp_path, cuts=(4, 4))
    with h5py.File(path, "a") as file:
        del file["part1/rho"]
    layout = change(layout, "cells.density", optional=True)
    with pytest.raises(LayoutError, match="in all 2 groups, got it in 1"):
        fv.read_snapshot(path, layout=layout)


def test_blocks_that_overlap_are_refused(tmp_path):
    path, layout, *_ = unlike_blocks(tmp_path, cuts=(4, 4))
    with h5py.File(path, "a") as file:
        file["part1/r"][...] = file["part0/r"][...]
    with pytest.raises(GridError, match="without overlap"):
        fv.read_snapshot(path, layout=layout)


def test_a_field_too_big_for_memory_is_refused_when_read(tmp_path):
    path = tmp_path / "vast.h5"
    with h5py.File(path, "w") as file:
        file.create_dataset("rho", (20_000, 20_000, 20_000), "f8", chunks=(8, 8, 8))
    layout = LayoutDescription(
        grid={
            "r": CoordinateTable(bounds=(1.0, 2.0)),
            "theta": CoordinateTable(bounds=(1.0, 2.0)),
            "phi": CoordinateTable(bounds=(0.0, 1.0)),
        },
        cells={"density": FieldTable(dataset="rho")},
        time=TimeTable(value=0.0),
    )
    read = fv.read_snapshot(path, layout=layout)
    for take in (lambda: read.cells["density"], lambda: read.cells.block("density", 0)):
        with pytest.raises(FieldvizError, match="free memory"):
            take()


def test_faces_across_phi_need_that_axis(tmp_path):
    path, layout, _ = axisymmetric_file(tmp_path)
    layout = replace(layout, faces={"magnetic_phi": FieldTable(dataset="rho")})
    with pytest.raises(LayoutError, match="faces across phi, got an order without phi"):
        fv.read_snapshot(path, layout=layout)
