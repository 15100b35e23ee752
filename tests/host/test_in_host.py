"""The plugin in the real host: the same numbers, times, files by content, errors in one line."""

import numpy as np
import pytest

import fieldviz as fv

NUMBERS = """
from vtkmodules.util.numpy_support import vtk_to_numpy
def fetch(proxy, port=0):
    return proxy.SMProxy.GetClientSideObject().GetOutputDataObject(port)
def column(table, name):
    return vtk_to_numpy(table.GetColumnByName(name)).tolist()

reader = simple.OpenDataFile(SAMPLE + "/two_levels.h5")
tell(type(reader).__name__)
lines = FieldvizFieldLines(Input=reader, Count=20)
lines.UpdatePipeline()
data = fetch(lines)
tell(vtk_to_numpy(data.GetCellData().GetArray("length")).tolist())
seeds = FieldvizFieldLineSeeds(Input=reader, Count=20)
given = FieldvizFieldLinesFromSeeds(Input=reader, Seeds=seeds)
given.UpdatePipeline()
tell(vtk_to_numpy(fetch(given).GetCellData().GetArray("length")).tolist())
sheets = FieldvizFluxSheets(Input=reader)
sheets.UpdatePipeline()
tell([column(fetch(sheets, 1), name) for name in ("radius", "flux")])
outflow = FieldvizOutflow(Input=reader)
outflow.UpdatePipeline()
tell(column(fetch(outflow, 1), "total"))
wind = FieldvizWindSymmetry(Input=reader)
wind.UpdatePipeline()
wind.UpdatePropertyInformation()
tell(wind.Verdict)
current = FieldvizCurrentDensity(Input=reader)
current.UpdatePipeline()
tell(current.CellData["current_strength"].GetRange())
ring = FieldvizRepeatInAzimuth(Input=current)
ring.UpdatePipeline()
tell([one.GetDataInformation().GetNumberOfCells() for one in (current, ring)])
streams = FieldvizWindStreamlines(Input=reader, Count=8)
streams.UpdatePipeline()
tell(vtk_to_numpy(fetch(streams).GetCellData().GetArray("length")).tolist())
"""


@pytest.mark.parametrize("program", ["pvpython", "pvbatch"])
def test_the_host_gives_the_same_numbers(host, program):
    """To a few roundings: the host has a NumPy of its own, with other sines."""
    snapshot = fv.read_snapshot("sample_wedge/two_levels.h5")
    (name, own, given, sheets, totals, verdict, strength, cells, streams) = host(
        NUMBERS, program=program
    )
    assert name == "FieldvizSnapshotReader"
    plan = fv.equal_flux_plan(snapshot, 20)
    lines = fv.trace_lines(snapshot, "magnetic", plan.points, interpolation="flux")
    np.testing.assert_allclose(own, lines.length, rtol=1e-6)
    assert given == own
    found = fv.find_flux_sheets(snapshot)
    np.testing.assert_allclose(sheets[0], [s.radius for s in found], rtol=1e-6)
    np.testing.assert_allclose(sheets[1], [s.flux for s in found], rtol=1e-5)
    out = fv.outflow(snapshot)
    np.testing.assert_allclose(totals[:2], [out.total, out.torque.total], rtol=1e-6)
    assert verdict == fv.wind_symmetry(snapshot).sentence
    np.testing.assert_allclose(strength[1], fv.current_density(snapshot).magnitude.max(), rtol=1e-5)
    assert cells[1] == 8 * cells[0]
    wind = fv.wind_plan(snapshot, 8)
    wanted = fv.trace_lines(snapshot, "velocity", wind.points, direction="forward", poloidal=True)
    np.testing.assert_allclose(streams, wanted.length, rtol=1e-4)


BEHAVIOUR = """
import shutil, os
reader = FieldvizSnapshotReader(FileNames=[SAMPLE + f"/saltmarsh_00{n}.h5" for n in (2, 0, 1)])
reader.UpdatePipelineInformation()
tell(list(reader.TimestepValues))
lines = FieldvizFluxSheets(Input=reader)
for time in (0.0, 12.0):
    lines.UpdatePipeline(time)
    tell(lines.GetDataInformation(1).GetNumberOfRows())
reader.CellArrays = ["density"]
lines.UpdatePipeline(12.0)
lines.UpdatePropertyInformation()
tell([lines.LastError, lines.GetDataInformation().GetNumberOfCells()])
reader.CellArrays = ["density", "pressure", "magnetic_r", "magnetic_theta", "magnetic_phi"]
lines.UpdatePipeline(12.0)
lines.UpdatePropertyInformation()
tell([lines.LastError, lines.GetDataInformation().GetNumberOfCells()])
open("bad.h5", "w").write("not HDF5")
bad = FieldvizSnapshotReader(FileNames=["bad.h5"])
bad.UpdatePipeline()
bad.UpdatePropertyInformation()
tell(bad.LastError)
shutil.copy(SAMPLE + "/saltmarsh_000.h5", "by_content.fvh5")
tell(type(simple.OpenDataFile("by_content.fvh5")).__name__)
contour = Contour(Input=CellDatatoPointData(Input=FieldvizSnapshotReader(
    FileNames=[SAMPLE + "/two_levels.h5"])), ContourBy=["POINTS", "density"], Isosurfaces=[0.01])
contour.UpdatePipeline()
tell(contour.GetDataInformation().GetNumberOfCells())
"""


def test_times_fields_errors_and_contours(host, tmp_path):
    times, first, last, failed, mended, bad, name, cells = host(BEHAVIOUR, folder=tmp_path)
    assert times == [0.0, 6.0, 12.0]
    # The pair about R = 2 has merged and the sheet at R = 3 has split by then.
    counts = [
        len(fv.find_flux_sheets(fv.read_snapshot(f"sample_wedge/saltmarsh_00{n}.h5")))
        for n in (0, 2)
    ]
    assert [first, last] == counts
    assert failed[0].startswith("Cannot ")
    assert "magnetic_theta" in failed[0]
    assert failed[1] == 0
    assert mended[0] == ""
    assert mended[1] > 0
    assert bad.startswith("Cannot read bad.h5: expected an HDF5 file")
    assert host.messages.count(f"Fieldviz Snapshot Reader: {bad}") == 1
    assert "Traceback" not in host.messages
    assert name == "FieldvizSnapshotReader"
    assert cells > 0
