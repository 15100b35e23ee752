#!/usr/bin/env python3
"""Ratios measured in one run: machines are noisy, absolute times lie.

Example: .venv/bin/python scripts/benchmark.py --shape 96 256 384 --json benchmark.json
"""

from __future__ import annotations

import argparse
import json
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numba import njit, prange

import fieldviz as fv
from fieldviz.snapshots.native import LAYOUT_MARK, LAYOUT_VERSION
from fieldviz.wedge.coordinates import points_to_cartesian, vectors_to_cartesian
from fieldviz.wedge.demo.build import disc_block, make_mesh
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.halo import halo, halo_grid


@dataclass
class Row:
    what: str
    value: float
    against: float
    unit: str
    goal: float

    @property
    def ratio(self) -> float:
        return self.value / self.against

    @property
    def met(self) -> bool:
        return bool(self.ratio <= self.goal)


def best_times(*works: Callable[[], object], repeats: int = 7) -> list[float]:
    """Best time of each, the works taken in turn so that noise meets all alike."""
    times = [[] for _ in works]
    for _ in range(repeats):
        for work, kept in zip(works, times, strict=True):
            start = time.perf_counter()
            work()
            kept.append(time.perf_counter() - start)
    return [min(kept) for kept in times]


def read_raw(path: Path) -> int:
    # The arrays are kept, as a snapshot keeps them: freed memory used again would flatter this.
    with h5py.File(path) as file:
        kept = [file[kind][name][...] for kind in ("cells", "faces") for name in file[kind]]
    return sum(array.nbytes for array in kept)


def read_package(path: Path) -> int:
    snapshot = fv.read_snapshot(path)
    return sum(
        fields[name].nbytes for fields in (snapshot.cells, snapshot.faces) for name in fields
    )


MEMORY_PROBE = """
import sys
from pathlib import Path
import numpy, h5py
import fieldviz as fv
from fieldviz.vtk_data.snapshot_to_vtk import to_vtk
small = fv.demo_disc(shape=(2, 8, 8), precision="single")
to_vtk(small, vectors=False)
def resident(word):
    lines = Path("/proc/self/status").read_text().splitlines()
    return int(next(line.split()[1] for line in lines if line.startswith(word)))
Path("/proc/self/clear_refs").write_text("5")  # forget the peak of the imports
before = resident("VmRSS")
snapshot = fv.read_snapshot(sys.argv[1])
data = to_vtk(snapshot, fields=list(snapshot.cells), vectors=False)
after = resident("VmHWM")
arrays = sum(snapshot.cells[name].nbytes for name in snapshot.cells)
points = data.GetNumberOfPoints() * 24
print((after - before) * 1024, arrays, points)
"""


def memory_row(path: Path) -> Row:
    """Peak memory above the imports of reading and building, against the arrays handed over."""
    done = subprocess.run(
        [sys.executable, "-c", MEMORY_PROBE, str(path)], capture_output=True, text=True, check=True
    )
    peak, arrays, points = (float(word) for word in done.stdout.split())
    return Row(
        "peak memory of read + VTK object, against its scalars and points",
        peak / 2**20,
        (arrays + points) / 2**20,
        "MiB",
        1.3,
    )


def import_row() -> Row:
    code = "import time; t = time.perf_counter(); import fieldviz; print(time.perf_counter() - t)"
    times = [
        float(
            subprocess.run(
                [sys.executable, "-c", code], capture_output=True, text=True, check=True
            ).stdout
        )
        for _ in range(5)
    ]
    return Row("import fieldviz, against the 0.15 s allowed", min(times), 0.15, "s", 1.0)


@njit(parallel=True, nogil=True)
def copy_three(a, b, c, copied_a, copied_b, copied_c):
    for k in prange(a.shape[0]):
        for j in range(a.shape[1]):
            for i in range(a.shape[2]):
                copied_a[k, j, i] = a[k, j, i]
                copied_b[k, j, i] = b[k, j, i]
                copied_c[k, j, i] = c[k, j, i]


def curl_row(snapshot: fv.Snapshot) -> Row:
    """The whole of fv.curl against copying three arrays of haloed size, both into new memory."""
    haloed = [
        np.pad(snapshot.cell(f"magnetic_{axis}")[0], 1, mode="edge")
        for axis in ("r", "theta", "phi")
    ]

    def copy() -> list[np.ndarray]:
        copies = [np.empty_like(array) for array in haloed]
        copy_three(*haloed, *copies)
        return copies

    def curl() -> object:
        return fv.curl(snapshot, "magnetic")

    copy(), curl()
    curled, copied = best_times(curl, copy, repeats=15)
    return Row("curl, against a copy of six arrays", curled * 1e3, copied * 1e3, "ms", 1.2)


def vtk_curl_row(shape: tuple[int, int, int] = (32, 128, 192)) -> Row:
    """Curl against the vorticity of VTK's gradient filter, on cells of a curvilinear grid."""
    from vtkmodules.vtkCommonDataModel import vtkDataObject
    from vtkmodules.vtkFiltersGeneral import vtkGradientFilter

    disc = fv.demo_disc(shape=shape, precision="single")
    names = [f"magnetic_{axis}" for axis in ("r", "theta", "phi")]
    snapshot = fv.Snapshot.from_grid(disc.grid, cells={name: disc.cell(name) for name in names})
    gradient = vtkGradientFilter()
    gradient.SetInputData(fv.to_vtk(snapshot).GetBlock(0).GetBlock(0))
    gradient.SetInputScalars(vtkDataObject.FIELD_ASSOCIATION_CELLS, "magnetic")
    gradient.ComputeVorticityOn()
    gradient.ComputeGradientOff()

    def in_vtk() -> None:
        gradient.Modified()
        gradient.Update()

    curled, in_filter = best_times(lambda: fv.curl(snapshot, "magnetic"), in_vtk, repeats=5)
    assert gradient.GetOutput().GetCellData().HasArray("Vorticity")
    per_cell = 1e9 / np.prod(shape)
    what = "curl per cell, against VTK's gradient filter"
    return Row(what, curled * per_cell, in_filter * per_cell, "ns", 1 / 50)


FIRST_LINE_PROBE = """
import time
import fieldviz as fv
from fieldviz.lines import _flux_kernels, _kernels, tracing
disc = fv.demo_disc(shape=(8, 64, 48), precision="{precision}")
start = time.perf_counter()
fv.trace_lines(disc, "magnetic", [[2.0, 1.5, 0.1]], interpolation="{interpolation}")
print(time.perf_counter() - start)
"""


def first_line_rows() -> list[Row]:
    """First line of a process whose compiled loops are in the cache, imports not counted."""
    rows = []
    for interpolation in ("linear", "flux"):
        code = FIRST_LINE_PROBE.format(precision="single", interpolation=interpolation)
        command = [sys.executable, "-c", code]
        times = [
            float(subprocess.run(command, capture_output=True, text=True, check=True).stdout)
            for _ in range(4)
        ]
        what = f"first line of a process, {interpolation}, against the 0.5 s allowed"
        rows.append(Row(what, min(times[1:]), 0.5, "s", 1.0))
    return rows


LINE_SPAN = 0.5


def line_seeds(count: int) -> np.ndarray:
    """Seeds well inside the disc: no line leaves it within the span, nor crosses the azimuth."""
    rng = np.random.default_rng(5)
    low, high = (1.8, 1.25, 0.3), (3.8, 1.9, 0.5)
    return rng.uniform(low, high, (count, 3))


def disc_slope(s: float, place: np.ndarray, disc: fv.SaltmarshDisc) -> np.ndarray:
    """d(r, theta, phi)/ds of the disc's field from its closed forms."""
    from fieldviz.wedge.demo.state import disc_state

    r, theta, _ = place.reshape(3, -1)
    tiny = 1e-30  # g'(theta) by a complex step: exact to rounding
    g, slope = disc.footpoint_factor(theta), disc.footpoint_factor(theta + 1j * tiny).imag / tiny
    density = disc.radial_flux_density(r * g)
    b_r = density * slope / (r * np.sin(theta))
    b_theta = -density * g / (r * np.sin(theta))
    b_phi = disc_state(disc, r, theta).magnetic_phi
    size = np.sqrt(b_r**2 + b_theta**2 + b_phi**2)
    way = (b_r / size, b_theta / size / r, b_phi / size / (r * np.sin(theta)))
    return np.concatenate(way)


def true_ends(seeds: np.ndarray) -> np.ndarray:
    """Cartesian ends by DOP853 on the closed forms."""
    from scipy.integrate import solve_ivp

    path = solve_ivp(
        disc_slope, (0, LINE_SPAN), seeds.T.ravel(), method="DOP853", rtol=1e-10, atol=1e-11,
        args=(fv.SaltmarshDisc(),),
    )  # fmt: skip
    return points_to_cartesian(path.y[:, -1].reshape(3, -1).T)


def vtk_grid(snapshot: fv.Snapshot) -> Any:
    """Curvilinear grids of cell centres with Cartesian vectors, one a block.

    More than one block: each with its ghost layer, so that lines need not stop between blocks.
    """
    from vtkmodules.util.numpy_support import numpy_to_vtk
    from vtkmodules.vtkCommonCore import vtkPoints
    from vtkmodules.vtkCommonDataModel import vtkMultiBlockDataSet, vtkStructuredGrid

    whole = vtkMultiBlockDataSet()
    around = halo_grid(snapshot.grid)
    single = snapshot.grid.n_blocks == 1
    fields = [snapshot.cell(part) if single else halo(snapshot, part) for part in MAGNETIC]
    for block in range(snapshot.grid.n_blocks):
        axes = around.r[block], around.theta[block], around.phi[block]
        if single:
            axes = snapshot.grid.cell_centres(0)
        at = np.stack(np.meshgrid(*axes[::-1], indexing="ij")[::-1], axis=-1).reshape(-1, 3)
        grid, held = vtkStructuredGrid(), vtkPoints()
        grid.SetDimensions(*(len(axis) for axis in axes))
        held.SetData(numpy_to_vtk(points_to_cartesian(at), deep=True))
        grid.SetPoints(held)
        parts = np.stack([field[block].ravel() for field in fields], axis=-1)
        vectors = numpy_to_vtk(vectors_to_cartesian(parts, at), deep=True)
        vectors.SetName("B")
        grid.GetPointData().SetVectors(vectors)
        whole.SetBlock(block, grid)
    return whole.GetBlock(0) if single else whole


def vtk_tracer(snapshot: fv.Snapshot, seeds: np.ndarray) -> Any:
    """vtkStreamTracer, RK45, from the same seeds over the same span."""
    from vtkmodules.util.numpy_support import numpy_to_vtk
    from vtkmodules.vtkCommonCore import vtkPoints
    from vtkmodules.vtkCommonDataModel import vtkPolyData
    from vtkmodules.vtkFiltersFlowPaths import vtkStreamTracer

    source, held = vtkPolyData(), vtkPoints()
    held.SetData(numpy_to_vtk(points_to_cartesian(seeds), deep=True))
    source.SetPoints(held)
    tracer = vtkStreamTracer()
    tracer.SetInputData(vtk_grid(snapshot))
    tracer.SetInputArrayToProcess(0, 0, 0, 0, "B")
    tracer.SetSourceData(source)
    tracer.SetIntegratorTypeToRungeKutta45()
    tracer.SetIntegrationDirectionToForward()
    tracer.SetIntegrationStepUnit(2)  # in cells
    tracer.SetInitialIntegrationStep(0.2)
    tracer.SetMinimumIntegrationStep(0.01)
    tracer.SetMaximumIntegrationStep(0.4)
    tracer.SetMaximumError(1e-3)  # smaller ones take longer and end no nearer to the truth
    tracer.SetMaximumNumberOfSteps(20_000)
    tracer.SetMaximumPropagation(LINE_SPAN)
    tracer.SetComputeVorticity(False)
    return tracer


def vtk_ends(tracer: Any) -> tuple[np.ndarray, int]:
    """Ends in the order of the seeds, NaN for a seed without a line, and the number of points."""
    from vtkmodules.util.numpy_support import vtk_to_numpy

    tracer.Modified()
    tracer.Update()
    made = tracer.GetOutput()
    points = vtk_to_numpy(made.GetPoints().GetData())
    offsets = vtk_to_numpy(made.GetLines().GetOffsetsArray())
    last = vtk_to_numpy(made.GetLines().GetConnectivityArray())[offsets[1:] - 1]
    ends = np.full((tracer.GetInputDataObject(1, 0).GetNumberOfPoints(), 3), np.nan)
    ends[vtk_to_numpy(made.GetCellData().GetArray("SeedIds"))] = points[last]
    return ends, len(points)


def line_rows(snapshot: fv.Snapshot, mesh: str, count: int = 5000, repeats: int = 3) -> list[Row]:
    """Lines of random seeds against VTK's; setting up the field or the search is in both times."""
    seeds = line_seeds(count)
    tracer, truth = vtk_tracer(snapshot, seeds), true_ends(seeds)
    ends, points = vtk_ends(tracer)

    def ours(interpolation: str = "linear") -> fv.LineSet:
        return fv.trace_lines(
            snapshot, "magnetic", seeds, direction="forward", longest=LINE_SPAN,
            interpolation=interpolation,
        )  # fmt: skip

    def rms(found: np.ndarray) -> float:
        off = np.linalg.norm(found - truth, axis=1)
        assert np.isfinite(off).mean() > 0.99
        return float(np.sqrt(np.nanmean(off**2)))

    lines, flux = ours(), ours("flux")
    assert all(end == "length" for _, end in lines.end_reason + flux.end_reason)
    times = best_times(ours, lambda: ours("flux"), lambda: vtk_ends(tracer), repeats=repeats)
    per_point = [
        t / n * 1e6
        for t, n in zip(times, (len(lines.points), len(flux.points), points), strict=True)
    ]
    per_line = [t / count * 1e6 for t in times]
    at, flux_at = lines.offsets[1:] - 1, flux.offsets[1:] - 1
    errors = [rms(found) for found in (lines.points[at], flux.points[flux_at], ends)]
    rows = []
    for n, kind in enumerate(("linear", "flux")):
        what = f"{mesh}, {kind}, against vtkStreamTracer"
        rows += [
            Row(f"a point of a line, {what}", per_point[n], per_point[2], "us", 0.01),
            Row(f"a whole line, {what}", per_line[n], per_line[2], "us", 1.0),
            Row(f"rms end error, {what}", errors[n], errors[2], "r0", 1.01),
        ]
    return rows


LINE_MEMORY_PROBE = """
from pathlib import Path
import numpy as np
import fieldviz as fv
from fieldviz.wedge.fields import MAGNETIC
def resident(word):
    lines = Path("/proc/self/status").read_text().splitlines()
    return int(next(line.split()[1] for line in lines if line.startswith(word))) / 1024
snapshot = fv.demo_disc(shape=(48, 128, 192), precision="single")
seeds = fv.cone_seeds(snapshot, np.pi / 2, ({count} // 100, 100))
fv.trace_lines(snapshot, "magnetic", seeds[:4], interpolation="{interpolation}")
for name in MAGNETIC:
    snapshot.cell(name)
Path("/proc/self/clear_refs").write_text("5")  # forget the peak of the preparations
before = resident("VmRSS")
lines = fv.trace_lines(snapshot, "magnetic", seeds, interpolation="{interpolation}")
held = lines.spherical.nbytes + lines.offsets.nbytes
if "{interpolation}" == "linear":
    held += 12 * 50 * 130 * 194  # three components in single precision, ghosts included
print(resident("VmHWM") - before, held / 2**20)
"""


def line_memory_rows(count: int = 10_000) -> list[Row]:
    """Peak above the snapshot against the points of the lines and the field with its ghosts."""
    rows = []
    for interpolation in ("linear", "flux"):
        code = LINE_MEMORY_PROBE.format(count=count, interpolation=interpolation)
        command = [sys.executable, "-c", code]
        done = subprocess.run(command, capture_output=True, text=True, check=True)
        added, lines = (float(word) for word in done.stdout.split())
        what = f"memory added by {count} lines, {interpolation}, against points and field"
        rows.append(Row(what, added, lines, "MB", 1.3))
    return rows


def numbers_row(path: Path) -> Row:
    """Every diagnostic of a snapshot, reading included, against reading all of it."""
    from fieldviz.diagnostics.snapshot_numbers import measure as all_numbers

    def numbers() -> None:
        found = all_numbers(fv.read_snapshot(path))
        assert not found.reasons, found.reasons

    numbers()  # kernels compiled or loaded from the cache
    worked, read = best_times(numbers, lambda: read_package(path), repeats=5)
    return Row("all numbers of a snapshot, against reading it", worked, read, "s", 3.0)


def write_large(path: Path, gigabytes: float) -> None:
    """A snapshot of the demo disc in single precision, written block by block."""
    n_theta, n_r, in_block = 256, 384, 8
    count = max(1, round(gigabytes * 1e9 / (8 * 4 * in_block * n_theta * n_r)))
    disc = fv.SaltmarshDisc(magnetic_turbulence=0.3, velocity_turbulence=0.3)
    shape, pieces = (count * in_block, n_theta, n_r), (count, 1, 1)
    mesh = make_mesh(disc, shape, 1, pieces, 0.0)
    with h5py.File(path, "w") as file:
        file.attrs[LAYOUT_MARK] = LAYOUT_VERSION
        file.attrs.update({"time": 0.0, "mu0": 1.0, "gm": 1.0})
        for number in range(count):
            block = disc_block(disc, mesh, number, np.dtype(np.float32))
            parts = {f"grid/{n}_edges": getattr(block, f"{n}_edges") for n in ("r", "theta", "phi")}
            parts |= {f"cells/{name}": array for name, array in block.cells.items()}
            parts |= {f"faces/{name}": array for name, array in block.faces.items()}
            for where, array in parts.items():
                if not number:
                    file.create_dataset(where, (count, *array.shape), dtype=array.dtype)
                file[where][number] = array


NUMBERS_MEMORY_PROBE = """
import sys
from pathlib import Path
import fieldviz as fv
from fieldviz.diagnostics.snapshot_numbers import measure
measure(fv.demo_disc(shape=(2, 48, 32), precision="single"))
def resident(word):
    lines = Path("/proc/self/status").read_text().splitlines()
    return int(next(line.split()[1] for line in lines if line.startswith(word)))
Path("/proc/self/clear_refs").write_text("5")  # forget the peak of the imports
before = resident("VmRSS")
found = measure(fv.read_snapshot(sys.argv[1]))
assert not found.reasons, found.reasons
print((resident("VmHWM") - before) * 1024)
"""


def numbers_memory_row(folder: Path, gigabytes: float) -> Row:
    """Peak memory above the imports of every diagnostic of a large snapshot."""
    path = folder / "large.h5"
    write_large(path, gigabytes)
    size = path.stat().st_size / 1e9
    try:
        command = [sys.executable, "-c", NUMBERS_MEMORY_PROBE, str(path)]
        done = subprocess.run(command, capture_output=True, text=True, check=True)
    finally:
        path.unlink()
    what = f"memory added by all numbers of a snapshot of {size:.1f} GB, against 1 GB"
    return Row(what, float(done.stdout) / 1e6, 1e3, "MB", 1.0)


def measure(shape: tuple[int, int, int], folder: Path, gigabytes: float) -> list[Row]:
    path = folder / "benchmark.h5"
    fv.write_snapshot(path, fv.demo_disc(shape=shape, precision="single"))
    snapshot = fv.read_snapshot(path)
    loaded = [snapshot.cell(name) for name in snapshot.cell_names]  # read before VTK is timed
    assert all(np.isfinite(values).all() for values in loaded)
    fv.to_vtk(snapshot)  # kernels compiled or loaded from the cache
    raw, package, vtk = best_times(
        lambda: read_raw(path), lambda: read_package(path), lambda: fv.to_vtk(snapshot)
    )
    return [
        Row("read all fields, against raw h5py reads", package, raw, "s", 1.2),
        Row("build the VTK object with vectors, against the read", vtk, package, "s", 1.0),
        curl_row(snapshot),
        vtk_curl_row(),
        memory_row(path),
        import_row(),
        *first_line_rows(),
        *line_rows(snapshot, "one level"),
        *line_rows(fv.demo_disc(shape=(24, 128, 96), levels=2), "two levels"),
        *line_memory_rows(),
        numbers_row(path),
        numbers_memory_row(folder, gigabytes),
    ]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--shape", type=int, nargs=3, default=(96, 256, 384), metavar="N")
    parser.add_argument("--json", type=Path, help="also write the rows to this file")
    parser.add_argument(
        "--large", action="store_true", help="memory of all numbers with 4 GB in place of 1 GB"
    )
    arguments = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        rows = measure(tuple(arguments.shape), Path(folder), 4.0 if arguments.large else 1.0)
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss // 1024
    print(f"{int(np.prod(arguments.shape)):,} cells; peak of this process {peak} MiB")
    for row in rows:
        numbers = f"{row.value:9.4g} / {row.against:9.4g} {row.unit:4s} = {row.ratio:6.3f}"
        print(f"{row.what:66s} {numbers}  goal {row.goal:4.2f}  {'met' if row.met else 'MISSED'}")
    table = [asdict(row) | {"ratio": row.ratio, "met": row.met} for row in rows]
    print(json.dumps(table))
    if arguments.json:
        arguments.json.write_text(json.dumps(table, indent=2) + "\n")


if __name__ == "__main__":
    main()
