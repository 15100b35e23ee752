"""Any layout that a description can tell of gives the snapshot that went in."""

from __future__ import annotations

import itertools
import tempfile
from dataclasses import replace
from pathlib import Path

import h5py
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
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
from fieldviz.errors import LayoutError, MissingFieldError
from fieldviz.snapshots.foreign_grid import edges_from_centres
from fieldviz.snapshots.layout_description import (
    LayoutDescription,
    layout_from_toml,
    layout_to_toml,
    write_layout,
)
from fieldviz.snapshots.layout_tables import (
    AxesTable,
    BlocksTable,
    CoordinateTable,
    FieldTable,
    TimeTable,
)


@st.composite
def layouts(draw):
    levels = draw(st.integers(1, 3))
    stored = draw(
        st.sampled_from(["single", "axis", "groups"] if levels == 1 else ["axis", "groups"])
    )
    flag = st.booleans()
    latitude = draw(flag)
    turned = draw(st.sets(st.sampled_from(MODEL)))
    scale = draw(st.sampled_from([1.0, 1.0, 2.0, 3.7e-3]))
    choices = Choices(
        stored=stored,
        order=draw(st.permutations(MODEL).map(tuple)),
        block_place=draw(st.integers(0, 3)),
        variable_place=draw(st.integers(0, 3)),
        stacked=draw(flag),
        names_in_file=draw(flag),
        reversed_axes=frozenset(turned),
        degrees=draw(flag),
        latitude=latitude,
        log_r=draw(st.sampled_from(["none", "ln", "log10"])),
        length_scale=draw(st.sampled_from([1.0, 0.1])),
        endian=draw(st.sampled_from(["<", ">"])),
        compressed=draw(flag),
        field_type=draw(st.sampled_from(["same", "same", "f2"])),
        scale=scale,
        sign=draw(st.sampled_from([1, -1])),
        ghosts=draw(st.dictionaries(st.sampled_from(MODEL), st.integers(1, 3))),
        ghosts_in_edges=draw(flag),
        time=draw(st.sampled_from(["attribute", "dataset", "file_name", "value"])),
        shared_edges=draw(flag),
        level=draw(flag),
        centres=draw(flag),
    )
    snapshot = small_snapshot(
        draw(st.integers(0, 99)),
        levels=levels,
        dtype="f4" if choices.field_type == "f2" else draw(st.sampled_from(["f4", "f8"])),
        faces=draw(flag),
        spacing=draw(st.sampled_from(["log", "linear"])) if choices.log_r == "none" else "log",
    )
    return snapshot, choices


@given(layouts())
@settings(max_examples=50, deadline=None, suppress_health_check=list(HealthCheck))
def test_any_layout_gives_the_snapshot_back(case):
    snapshot, choices = case
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "fen_t42.h5"
        layout = scatter(snapshot, path, choices)
        assert layout_from_toml(layout_to_toml(layout)) == layout
        toml = Path(folder) / "layout.toml"
        write_layout(toml, layout)
        read = fv.read_snapshot(path, layout=toml)
        rtol = 0.0
        if choices.scale not in (1.0, 2.0):
            rtol = 1e-6
        if choices.field_type == "f2":
            rtol = 1e-2
        last = read.grid.n_blocks - 1
        lazily = read.cells.block("density", last).copy()
        assert_same(read, snapshot, rtol=rtol, level_stored=choices.level)
        np.testing.assert_array_equal(lazily, read.cells["density"][last])
        assert read.title == "moss"
        assert read.units.length.label == "au"


def test_a_half_precision_file_is_read_as_single(tmp_path):
    path, layout = described(tmp_path, field_type="f2", endian=">")
    read = fv.read_snapshot(path, layout=layout)
    assert read.cells["density"].dtype == np.float32
    with h5py.File(path) as file:
        stored = file["data_0"][...]
    np.testing.assert_array_equal(read.cells["density"][0], stored.astype("f4"))


@pytest.mark.parametrize("dtype", ["i2", ">i8", "u1", "?"])
def test_whole_numbers_and_truth_values_become_double(tmp_path, dtype):
    path, layout = described(tmp_path)
    values = np.arange(48).reshape(2, 4, 6) % 2 if dtype == "?" else np.arange(48).reshape(2, 4, 6)
    with h5py.File(path, "a") as file:
        file["whole"] = values.astype(dtype)
    layout = replace(layout, cells={"zone": FieldTable(dataset="whole")}, faces={})
    zone = fv.read_snapshot(path, layout=layout).cells["zone"]
    assert zone.dtype == np.float64
    np.testing.assert_array_equal(zone[0], values)


def test_only_the_fields_asked_for(tmp_path):
    path, layout = described(tmp_path)
    read = fv.read_snapshot(path, layout=layout, fields=["density"])
    assert list(read.cells) == ["density"]
    assert not read.faces
    with pytest.raises(MissingFieldError, match="pressure"):
        fv.read_snapshot(path, layout=layout, fields=["pressure"])
    with pytest.raises(MissingFieldError, match="not in the snapshot"):
        fv.read_snapshot(path, layout=layout, fields=["bogwater"])


def test_a_series_takes_a_description(tmp_path):
    for number in (10, 9):
        path = tmp_path / f"fen_t{number}.h5"
        layout = scatter(small_snapshot(number), path, Choices(time="file_name"))
    series = fv.read_series(str(tmp_path / "*.h5"), layout=layout)
    assert [path.name for path in series.paths] == ["fen_t9.h5", "fen_t10.h5"]
    np.testing.assert_array_equal(series[1].cells["density"], small_snapshot(10).cells["density"])


def test_groups_stand_in_natural_order(tmp_path):
    path, layout = described(tmp_path, small_snapshot(1, levels=2), stored="groups")
    read = fv.read_snapshot(path, layout=layout)
    # patch_8 ... patch_15: as plain text patch_10 would come first.
    np.testing.assert_array_equal(read.grid.r_edges, small_snapshot(1, levels=2).grid.r_edges)


def test_data_without_azimuth_are_a_full_ring(tmp_path):
    path, layout, density = axisymmetric_file(tmp_path)
    read = fv.read_snapshot(path, layout=layout)
    assert read.grid.block_shape == (1, 5, 7)
    assert read.grid.is_full_ring
    # Latitudes rise northward, so the first stored row is the southernmost.
    np.testing.assert_array_equal(read.cells["density"][0, 0], density[::-1])
    np.testing.assert_allclose(read.grid.r_edges[0], np.geomspace(1, 8, 8))
    np.testing.assert_allclose(read.grid.theta_range, np.pi / 2 + np.radians([-20, 20]))


def test_data_without_azimuth_take_bounds(tmp_path):
    path, layout, _ = axisymmetric_file(tmp_path, phi=CoordinateTable(bounds=(0.0, 0.5)))
    assert fv.read_snapshot(path, layout=layout).grid.phi_range == (0.0, 0.5)


def test_bounds_per_block_from_the_file(tmp_path):
    snapshot = small_snapshot(2, levels=2, spacing="linear", faces=False)
    path, layout = described(tmp_path, snapshot, stored="axis")
    tables = {}
    with h5py.File(path, "a") as file:
        for axis in ("r", "theta", "phi"):
            edges = getattr(snapshot.grid, f"{axis}_edges")
            file[f"box/{axis}"] = edges[:, [0, -1]]
            tables[axis] = CoordinateTable(bounds=f"box/{axis}", spacing="uniform")
    read = fv.read_snapshot(path, layout=replace(layout, grid=tables))
    assert_same(read, snapshot)


@pytest.mark.parametrize("turned", [False, True])
def test_unlike_blocks_are_cut_into_one_shape(tmp_path, turned):
    path, layout, r, whole, side = unlike_blocks(tmp_path, turned=turned)
    read = fv.read_snapshot(path, layout=layout)
    assert read.grid.block_shape == (4, 8, 4)
    assert read.grid.n_blocks == 3
    for block in range(3):
        start = int(np.searchsorted(r, read.grid.r_edges[block, 0]))
        np.testing.assert_array_equal(read.cells["density"][block], whole[..., start : start + 4])
        np.testing.assert_array_equal(read.faces["magnetic_r"][block], side[..., start : start + 5])


def test_unlike_blocks_without_a_common_size_are_refused(tmp_path):
    path, layout, *_ = unlike_blocks(tmp_path, cuts=(9, 6))
    with pytest.raises(LayoutError, match="at least 4 cells along r, got 3"):
        fv.read_snapshot(path, layout=layout)


def test_stretched_centres_meet_their_edges_to_second_order():
    errors = []
    for n in (20, 40):
        x = np.linspace(0, 1, n + 1)
        edges = 1.0 + x + 2.0 * x**2
        inferred = edges_from_centres(0.5 * (edges[1:] + edges[:-1]))
        errors.append(np.abs(inferred - edges)[2:-2].max())
    assert 3.0 < errors[0] / errors[1] < 5.0


@pytest.mark.parametrize("dtype", ["f4", "f8"])
def test_uniform_and_logarithmic_centres_give_exact_edges(dtype):
    for edges in (np.linspace(100, 130, 41), np.geomspace(0.3, 40, 33), np.linspace(2, -2, 9)):
        centres = (0.5 * (edges[1:] + edges[:-1])).astype(dtype).astype("f8")
        tolerance = 1e-5 if dtype == "f4" else 1e-12
        np.testing.assert_allclose(edges_from_centres(centres), edges, rtol=tolerance, atol=1e-9)


def test_blocks_with_stretched_centres_still_touch(tmp_path):
    r = 1.0 + 3.0 * np.linspace(0, 1, 25) ** 1.3
    centres = 0.5 * (r[1:] + r[:-1])
    path = tmp_path / "stretched.h5"
    with h5py.File(path, "w") as file:
        file["rho"] = np.ones((3, 4, 6, 8))
        file["r"] = centres.reshape(3, 8)
    layout = LayoutDescription(
        blocks=BlocksTable(stored="axis"),
        axes=AxesTable(order=("block", "phi", "theta", "r")),
        grid={
            "r": CoordinateTable(centres="r"),
            "theta": CoordinateTable(bounds=(1.2, 1.9)),
            "phi": CoordinateTable(bounds=(0.0, 1.0)),
        },
        cells={"density": FieldTable(dataset="rho")},
        time=TimeTable(value=0.0),
    )
    read = fv.read_snapshot(path, layout=layout)
    np.testing.assert_array_equal(read.grid.r_edges[:-1, -1], read.grid.r_edges[1:, 0])
    np.testing.assert_allclose(read.grid.r_edges[0], r[:9], rtol=0.02)


def test_an_axis_of_length_one_and_an_order_of_its_own(tmp_path):
    path, layout = described(tmp_path)
    snapshot = small_snapshot(3)
    with h5py.File(path, "a") as file:
        file["odd"] = snapshot.cells["density"][0].transpose(2, 0, 1)[None, ...]
    table = FieldTable(dataset="odd", order=("one", "r", "phi", "theta"))
    read = fv.read_snapshot(path, layout=replace(layout, cells={"density": table}))
    np.testing.assert_array_equal(read.cells["density"], snapshot.cells["density"])


THETA_CASES = [
    ("radian", "", (0.2, 0.9), None),  # northern latitude or northern colatitude
    ("radian", "", (60.0, 120.0), None),  # degrees said to be radians
    ("radian", "pole", (-0.3, 0.3), None),
    ("degree", "midplane", (60.0, 120.0), None),
    ("degree", "", (60.0, 120.0), (60.0, 120.0)),
    ("radian", "", (-0.3, 0.4), (90 - np.degrees(0.4), 90 + np.degrees(0.3))),
    ("radian", "midplane", (0.2, 0.9), (90 - np.degrees(0.9), 90 - np.degrees(0.2))),
    ("degree", "pole", (90.0, 30.0), (30.0, 90.0)),
]


@pytest.mark.parametrize(("unit", "measured_from", "bounds", "wanted"), THETA_CASES)
def test_theta_is_understood_or_refused(tmp_path, unit, measured_from, bounds, wanted):
    table = CoordinateTable(bounds=bounds, unit=unit, measured_from=measured_from)
    path, layout, _ = axisymmetric_file(tmp_path, theta=table)
    if wanted is None:
        with pytest.raises(LayoutError, match=r"Cannot use \[grid.theta\].*expected.*got"):
            fv.read_snapshot(path, layout=layout)
    else:
        low, high = fv.read_snapshot(path, layout=layout).grid.theta_range
        np.testing.assert_allclose(np.degrees([low, high]), wanted)


def test_every_order_of_axes(tmp_path):
    snapshot = small_snapshot(5)
    for order in itertools.permutations(MODEL):
        path, layout = described(tmp_path, snapshot, order=order)
        assert_same(fv.read_snapshot(path, layout=layout), snapshot)
