"""Filters in a pipeline: times, choices, parts of the wedge, and errors that end in one line."""

from pathlib import Path

import numpy as np
import pytest
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkCommonCore import vtkOutputWindow, vtkPoints, vtkStringOutputWindow
from vtkmodules.vtkCommonDataModel import vtkMultiBlockDataSet, vtkPolyData, vtkStructuredGrid

import fieldviz as fv
from fieldviz.filters.base import FieldvizAlgorithm
from fieldviz.filters.current import CurrentDensity
from fieldviz.filters.field_lines import FieldLines, FieldLineSeeds
from fieldviz.filters.flux_sheets import FluxSheetSurfaces
from fieldviz.filters.mirror import WindSymmetry
from fieldviz.filters.outflow import OutflowSurfaces
from fieldviz.filters.reader import SnapshotReader
from fieldviz.filters.repeat import RepeatInAzimuth
from fieldviz.filters.trees import fill_tree
from fieldviz.filters.wind_streamlines import WindStreamlines
from fieldviz.vtk_data.block_parts import leaves
from fieldviz.vtk_data.names import GHOSTS
from fieldviz.vtk_data.snapshot_from_vtk import keep_meaning_of_tree, snapshot_from_vtk
from fieldviz.vtk_data.snapshot_to_vtk import to_vtk

SAMPLE = Path(__file__).parents[2] / "sample_wedge"
SERIES = [SAMPLE / f"saltmarsh_00{n}.h5" for n in range(3)]
FILTERS = [
    FieldLineSeeds, FieldLines, WindStreamlines, CurrentDensity, FluxSheetSurfaces,
    OutflowSurfaces, WindSymmetry,
]  # fmt: skip


@pytest.fixture
def messages():
    """What VTK's output window is told."""
    shown, window = vtkOutputWindow.GetInstance(), vtkStringOutputWindow()
    vtkOutputWindow.SetInstance(window)
    yield window
    vtkOutputWindow.SetInstance(shown)


def reader_of(*paths, **settings):
    reader = SnapshotReader()
    for path in paths:
        reader.AddFileName(str(path))
    for name, value in settings.items():
        getattr(reader, f"Set{name}")(value)
    return reader


def failed(algorithm, messages, *words):
    """Update; the failure is one line that has these words, and every output is empty."""
    algorithm.Update()
    line = algorithm.GetLastError()
    assert line.startswith("Cannot "), line
    assert "\n" not in line
    for word in words:
        assert word in line, line
    assert messages.GetOutput().count(f"{algorithm.TITLE}: {line}\n") == 1
    for port, kind in enumerate(algorithm.OUTPUTS):
        output = algorithm.GetOutputDataObject(port)
        assert output.GetClassName() == kind
        assert (output.GetNumberOfRows() if kind == "vtkTable" else output.GetNumberOfCells()) == 0


def test_times_come_sorted_and_the_wanted_one_is_read():
    reader = reader_of(SERIES[2], SERIES[0], SERIES[1])
    reader.UpdateInformation()
    assert reader.GetTimestepValues() == [0.0, 6.0, 12.0]
    for wanted, time in ((0.0, 0.0), (6.0, 6.0), (11.9, 6.0), (12.0, 12.0), (99.0, 12.0)):
        reader.UpdateTimeStep(wanted)
        tree = reader.GetOutputDataObject(0)
        assert snapshot_from_vtk(tree).time == time
        assert tree.GetInformation().Get(tree.DATA_TIME_STEP()) == time


def test_a_filter_follows_the_time():
    reader, sheets = reader_of(*SERIES), FluxSheetSurfaces()
    sheets.SetInputConnection(reader.GetOutputPort())
    for path, time in zip(SERIES, (0.0, 6.0, 12.0), strict=True):
        sheets.UpdateTimeStep(time)
        found = vtk_to_numpy(sheets.GetOutputDataObject(1).GetColumnByName("radius"))
        np.testing.assert_array_equal(
            found, [s.radius for s in fv.find_flux_sheets(fv.read_snapshot(path))]
        )


def test_fields_are_chosen_and_what_needs_the_others_says_so(messages):
    reader = reader_of(SERIES[0])
    reader.UpdateInformation()
    reader.GetCellArrays().DisableAllArrays()
    reader.GetCellArrays().EnableArray("density")
    reader.Update()
    snapshot = snapshot_from_vtk(reader.GetOutputDataObject(0))
    assert snapshot.cell_names == ("density",)
    current = CurrentDensity()
    current.SetInputConnection(reader.GetOutputPort())
    failed(current, messages, "magnetic_r", "density")
    reader.GetCellArrays().EnableAllArrays()
    current.Update()
    assert current.GetLastError() == ""
    assert current.GetOutputDataObject(0).GetNumberOfCells() == 49152


def test_settings_are_checked_and_count_as_changes():
    lines = FieldLines()
    before = lines.GetMTime()
    lines.SetCount(100)  # the default
    assert lines.GetMTime() == before
    lines.SetCount(7)
    assert lines.GetMTime() > before
    assert lines.GetCount() == 7
    with pytest.raises(fv.FieldvizError, match="expected one of equal flux, even area"):
        lines.SetSeeding("equal")


def test_files_are_known_by_their_content(tmp_path):
    reader = SnapshotReader()
    other = tmp_path / "odd.suffix"
    other.write_bytes(SERIES[0].read_bytes())
    text = tmp_path / "text.h5"
    text.write_text("not HDF5")
    assert reader.CanReadFile(str(other)) == 1
    assert [reader.CanReadFile(str(p)) for p in (text, tmp_path, tmp_path / "none.h5")] == [0, 0, 0]


@pytest.mark.parametrize("content", [b"", b"text", None, SERIES[0].read_bytes()[:20_000]])
def test_a_bad_file_gives_one_line(content, tmp_path, messages):
    path = tmp_path / "bad.h5"
    if content is not None:
        path.write_bytes(content)
    failed(reader_of(path), messages, "bad.h5")


def test_the_reader_recovers_when_the_file_is_mended(tmp_path, messages):
    path = tmp_path / "bad.h5"
    path.write_text("not yet")
    reader = reader_of(path)
    failed(reader, messages)
    path.write_bytes(SERIES[0].read_bytes())
    reader.Modified()
    reader.Update()
    assert reader.GetLastError() == ""
    assert reader.GetOutputDataObject(0).GetNumberOfCells() == 49152


def test_no_file_at_all(messages):
    failed(reader_of(), messages, "at least one file")


def test_a_described_file_is_read_by_its_layout(tmp_path, messages):
    import h5py

    disc = fv.demo_disc(shape=(2, 24, 12))
    path, layout = tmp_path / "other.h5", tmp_path / "layout.toml"
    with h5py.File(path, "w") as file:
        for name, edges in zip("abc", disc.grid.edges(0), strict=True):
            file[name] = edges
        file["rho"] = disc.cell("density")[0]
    layout.write_text(
        "fieldviz_layout_description = 1\n"
        '[grid]\nr = { edges = "a" }\ntheta = { edges = "b" }\nphi = { edges = "c" }\n'
        '[axes]\norder = ["phi", "theta", "r"]\n[cells]\ndensity = { dataset = "rho" }\n'
        "[time]\nvalue = 0.5\n"
    )
    failed(reader_of(path), messages, "own layout")
    reader = reader_of(path, Layout=str(layout))
    reader.Update()
    assert reader.GetLastError() == ""
    found = snapshot_from_vtk(reader.GetOutputDataObject(0))
    np.testing.assert_array_equal(found.cell("density"), disc.cell("density"))


def test_a_part_of_the_wedge_is_for_looking_only(messages):
    reader = reader_of(SERIES[0], Radii=(1.5, 2.5), Angles=(0.0, 20.0))
    reader.Update()
    r = np.concatenate([
        np.linalg.norm(vtk_to_numpy(leaf.GetPoints().GetData()), axis=1)
        for leaf in leaves(reader.GetOutputDataObject(0))
    ])  # fmt: skip
    edges = fv.read_snapshot(SERIES[0]).grid.r_edges[0]
    width = np.diff(edges).max()
    assert 1.5 - width < r.min() < 1.5 + width
    assert 2.5 - width < r.max() < 2.5 + width
    lines = FieldLines()
    lines.SetInputConnection(reader.GetOutputPort())
    failed(lines, messages, "cut to a part", "region")


def test_a_limit_on_levels_leaves_blocks_out_and_filters_say_so(messages):
    reader = reader_of(SAMPLE / "two_levels.h5", FinestLevel=0, Halo=0)
    reader.Update()
    assert len(list(leaves(reader.GetOutputDataObject(0)))) == 8
    lines = FieldLines()
    lines.SetInputConnection(reader.GetOutputPort())
    failed(lines, messages, "all 72 blocks", "got 8")


def test_a_halo_only_where_blocks_meet():
    reader = reader_of(SAMPLE / "two_levels.h5")
    reader.Update()
    grid = fv.read_snapshot(SAMPLE / "two_levels.h5").grid
    own = ghosts = 0
    for leaf in leaves(reader.GetOutputDataObject(0)):
        marks = vtk_to_numpy(leaf.GetCellData().GetArray(GHOSTS))
        assert set(marks) <= {0, 1}
        own += np.count_nonzero(marks == 0)
        ghosts += np.count_nonzero(marks)
        r = np.linalg.norm(vtk_to_numpy(leaf.GetPoints().GetData()), axis=1)
        assert grid.r_range[0] - 1e-12 <= r.min()
        assert r.max() <= grid.r_range[1] + 1e-12
    assert own == grid.n_cells
    assert ghosts > 0
    whole = reader_of(SERIES[0])
    whole.Update()
    (leaf,) = leaves(whole.GetOutputDataObject(0))
    assert not leaf.GetCellData().HasArray(GHOSTS)


def test_a_block_without_halo_is_not_copied_back():
    disc = fv.demo_disc(shape=(2, 16, 12))
    tree = keep_meaning_of_tree(to_vtk(disc), disc)
    found = snapshot_from_vtk(tree)
    assert np.shares_memory(found.cell("density"), disc.cell("density"))
    assert np.shares_memory(found.faces["magnetic_theta"], disc.faces["magnetic_theta"])


def test_seeds_outside_give_no_lines_and_no_error():
    points, seeds = vtkPoints(), vtkPolyData()
    for place in ((20.0, 0.0, 0.0), (0.1, 0.0, 0.0), (2.0, 0.5, 0.0)):
        points.InsertNextPoint(*place)
    seeds.SetPoints(points)
    reader, lines = reader_of(SERIES[0]), FieldLines()
    lines.SetInputConnection(0, reader.GetOutputPort())
    lines.SetInputDataObject(1, seeds)
    lines.Update()
    assert lines.GetLastError() == ""
    data = lines.GetOutputDataObject(0)
    assert list(vtk_to_numpy(data.GetCellData().GetArray("line"))) == [2]
    snapshot = fv.read_snapshot(SERIES[0])
    place = fv.given_seeds([[np.hypot(2.0, 0.5), 0.5 * np.pi, np.arctan2(0.5, 2.0)]])
    wanted = fv.trace_lines(snapshot, "magnetic", place, interpolation="flux")
    assert data.GetNumberOfPoints() == len(wanted.points)


@pytest.mark.parametrize("kind", FILTERS)
def test_what_is_no_snapshot_is_refused(kind, messages):
    tree, grid = vtkMultiBlockDataSet(), vtkStructuredGrid()
    grid.SetDimensions(2, 2, 2)
    for data, words in ((vtkMultiBlockDataSet(), "empty object"), (tree, "vtkStructuredGrid")):
        tree.SetBlock(0, grid)
        algorithm = kind()
        algorithm.SetInputDataObject(0, data)
        failed(algorithm, messages, words)


def test_a_repeated_wedge_is_no_snapshot(messages):
    reader, repeat, lines = reader_of(SERIES[0]), RepeatInAzimuth(), FieldLines()
    repeat.SetInputConnection(reader.GetOutputPort())
    lines.SetInputConnection(repeat.GetOutputPort())
    failed(lines, messages, "every block once", "repeat in azimuth last")


def test_repeat_needs_an_angle_or_data_that_know_it(messages):
    plain = vtkPolyData()
    plain.SetPoints(vtkPoints())
    plain.GetPoints().InsertNextPoint(1.0, 0.0, 0.0)
    repeat = RepeatInAzimuth()
    repeat.SetInputDataObject(0, plain)
    failed(repeat, messages, "name the angle")
    repeat.SetAngle(90.0)
    repeat.Update()
    assert repeat.GetLastError() == ""
    assert repeat.GetOutputDataObject(0).GetNumberOfBlocks() == 4
    (third,) = leaves(repeat.GetOutputDataObject(0).GetBlock(2))
    np.testing.assert_allclose(third.GetPoint(0), (-1.0, 0.0, 0.0), atol=1e-15)


def test_a_fault_is_one_line_too(messages):
    class Broken(FieldvizAlgorithm):
        TITLE = "Fieldviz Broken"
        INPUTS = ()
        OUTPUTS = ("vtkPolyData",)

        def work(self, inputs, outputs):
            outputs[0].SetPoints(vtkPoints())
            raise ZeroDivisionError("of\nno use")

    failed(Broken(), messages, "a fault in fieldviz", "ZeroDivisionError", "of no use")


def test_physical_units_are_used_throughout(tmp_path, messages):
    disc = fv.demo_disc(shape=(4, 32, 24))
    failed(reader_of(SERIES[0], Units="physical"), messages, "length, mass, time")
    units = fv.UnitScales(fv.Unit(5.0, "au"), fv.Unit(1e30, "g"), fv.Unit(2.0, "yr"))
    scaled = fv.Snapshot.from_grid(
        disc.grid, cells=dict(disc.cells), faces=dict(disc.faces), time=1.5, units=units
    )
    fv.write_snapshot(tmp_path / "a.h5", scaled)
    reader = reader_of(tmp_path / "a.h5", Units="physical")
    reader.UpdateInformation()
    assert reader.GetTimestepValues() == [3.0]
    reader.Update()
    found = snapshot_from_vtk(reader.GetOutputDataObject(0))
    assert found.grid.r_range == (5.0 * disc.grid.r_range[0], 5.0 * disc.grid.r_range[1])
    # A mass loss in the file's units is the same whether it is scaled before or after.
    wanted = fv.outflow(disc).total * 1e30 / 2.0
    assert fv.outflow(found).total == pytest.approx(wanted, rel=1e-5)
    # beta has no unit.
    beta, plain = fv.plasma(found).beta_total, fv.plasma(disc).beta_total
    np.testing.assert_allclose(beta, plain, rtol=1e-4)


def test_filters_import_neither_pyvista_nor_a_host():
    import subprocess
    import sys

    names = ", ".join(f"{kind.__module__}" for kind in (*FILTERS, SnapshotReader, RepeatInAzimuth))
    unwanted = ("pyvista", "paraview", "vtk", "matplotlib", "numba")
    code = f"import sys, {names}; print([m for m in {unwanted} if m in sys.modules])"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


@pytest.mark.parametrize("kind", [*FILTERS, RepeatInAzimuth])
@pytest.mark.parametrize(
    "disc",
    [{"shape": (1, 32, 32)}, {"shape": (2, 16, 24), "levels": 2, "reversed_field": True}],
    ids=["one azimuth", "two levels, reversed"],
)
def test_every_filter_takes_every_kind_of_snapshot(kind, disc, small_disc):
    snapshot, tree = small_disc(**disc), vtkMultiBlockDataSet()
    fill_tree(tree, snapshot)
    algorithm = kind()
    algorithm.SetInputDataObject(0, tree)
    algorithm.Update()
    assert algorithm.GetLastError() == ""
    assert algorithm.GetOutputDataObject(0).GetNumberOfCells() > 0


def test_outputs_are_at_home_in_pyvista():
    import pyvista as pv

    reader, lines = reader_of(SAMPLE / "two_levels.h5"), FieldLines()
    lines.SetInputConnection(reader.GetOutputPort())
    lines.SetCount(4)
    lines.Update()
    blocks, traced = (pv.wrap(one.GetOutputDataObject(0)) for one in (reader, lines))
    assert blocks.keys() == ["level 0", "level 1"]
    assert blocks["level 1"].n_blocks == 64
    assert traced.n_lines == 4
    notes = list(traced.field_data["notes"])
    assert notes[0].startswith("amount is unsigned magnetic flux")
