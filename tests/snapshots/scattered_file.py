"""Scatter a snapshot into a foreign layout and make the layout description along the way."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

import h5py
import numpy as np
import pytest

from fieldviz.snapshots.layout_description import LayoutDescription
from fieldviz.snapshots.layout_tables import (
    AxesTable,
    BlocksTable,
    ConstantsTable,
    CoordinateTable,
    FieldTable,
    StackTable,
    TimeTable,
    UnitTable,
)
from fieldviz.wedge.snapshot import Block, Snapshot

MODEL = ("phi", "theta", "r")


@dataclass
class Choices:
    """How to store."""

    stored: str = "single"
    order: tuple[str, ...] = MODEL
    block_place: int = 0
    variable_place: int = 0
    stacked: bool = False
    names_in_file: bool = False
    reversed_axes: frozenset[str] = frozenset()
    degrees: bool = False
    latitude: bool = False
    log_r: str = "none"
    centres: bool = False
    length_scale: float = 1.0
    endian: str = "="
    compressed: bool = False
    field_type: str = "same"
    scale: float = 1.0
    sign: int = 1
    ghosts: dict[str, int] = field(default_factory=dict)
    ghosts_in_edges: bool = False
    time: str = "attribute"
    shared_edges: bool = False
    level: bool = True


def small_snapshot(
    seed: int,
    *,
    levels: int = 1,
    shape: tuple[int, int, int] = (2, 4, 6),
    dtype: str = "f4",
    faces: bool = True,
    spacing: str = "log",
) -> Snapshot:
    """One to three levels: each further one splits the innermost upper block into eight."""
    random = np.random.default_rng(seed)
    n_phi, n_theta, n_r = shape
    space = np.geomspace if spacing == "log" else np.linspace

    def block(r, theta, phi, level):
        edges = (
            space(*r, n_r + 1),
            np.linspace(*theta, n_theta + 1),
            np.linspace(*phi, n_phi + 1),
        )
        cells = {
            name: random.uniform(0.5, 2.0, shape).astype(dtype)
            for name in ("density", "velocity_theta", "magnetic_r", "dust tracer")
        }
        face = {}
        if faces:
            for n, name in enumerate(("magnetic_phi", "magnetic_theta", "magnetic_r")):
                size = [m + (n == k) for k, m in enumerate(shape)]
                face[name] = random.normal(size=size).astype(dtype)
        return Block(*edges, cells=cells, faces=face, level=level)

    whole = ((1.0, 4.0), (1.1, 2.0), (0.0, np.pi / 4))

    def split(box, level):
        if level == levels - 1:
            return [block(*box, level)]
        cuts = [
            [(a, m), (m, b)]
            for (a, b), m in ((pair, middle(n, pair)) for n, pair in enumerate(box))
        ]
        found = []
        for k in range(2):
            for j in range(2):
                for i in range(2):
                    part = (cuts[0][i], cuts[1][j], cuts[2][k])
                    found += (
                        split(part, level + 1) if i == j == k == 0 else [block(*part, level + 1)]
                    )
        return found

    def middle(axis, pair):
        return np.sqrt(pair[0] * pair[1]) if axis == 0 and spacing == "log" else 0.5 * sum(pair)

    return Snapshot.from_blocks(split(whole, 0), time=12.5, mu0=4 * np.pi, gm=2.0, gamma=1.25)


def scatter(snapshot: Snapshot, path: Path, choices: Choices) -> LayoutDescription:
    """Write `snapshot` to `path` as `choices` say; returns the description."""
    with h5py.File(path, "w") as file:
        bases = ["/"]
        if choices.stored == "groups":
            bases = [f"/mesh/patch_{n + 8}" for n in range(snapshot.grid.n_blocks)]
        for base in bases:
            file.require_group(base)
        tables = _write_fields(file, snapshot, bases, choices)
        grid = {
            axis: _write_axis(file, snapshot, bases, axis, choices)
            for axis in ("r", "theta", "phi")
        }
        level = _write_level(file, snapshot, bases, choices)
        time = _write_time(file, snapshot, path, choices)
        file.attrs["vacuum"] = snapshot.mu0
        file["about/star"] = np.float32(snapshot.gm)
    return LayoutDescription(
        blocks=BlocksTable(
            stored=choices.stored,
            groups="mesh/patch_*" if choices.stored == "groups" else "",
            level=level,
        ),
        axes=AxesTable(order=_order(choices, True, True), ghost_cells=choices.ghosts),
        grid=grid,
        stacks=tables[2],
        cells=tables[0],
        faces=tables[1],
        time=time,
        constants=ConstantsTable(
            mu0="@vacuum", gm="about/star", gamma=snapshot.gamma, title="moss"
        ),
        units={"length": UnitTable(1.5, "au")},
    )


def _order(choices: Choices, block: bool, variable: bool) -> tuple[str, ...]:
    order = list(choices.order)
    if block and choices.stored == "axis":
        order.insert(choices.block_place, "block")
    if variable and choices.stacked:
        order.insert(choices.variable_place, "variable")
    return tuple(order)


def _turned(values, choices, with_ghosts=True):
    """(phi, theta, r) to the stored order of the three axes, ghosts filled with rubbish."""
    for n, axis in enumerate(MODEL):
        if axis in choices.reversed_axes:
            values = np.flip(values, n)
    if with_ghosts:
        width = [(choices.ghosts.get(axis, 0),) * 2 for axis in MODEL]
        values = np.pad(values, width, constant_values=-7)
    return values.transpose([MODEL.index(axis) for axis in choices.order])


def _store(group, name, values, choices):
    options = {"chunks": True, "compression": "gzip"} if choices.compressed else {}
    dtype = values.dtype.newbyteorder(choices.endian)
    group.create_dataset(name, data=values.astype(dtype), **options)


def _as_stored_type(values, choices):
    values = values / values.dtype.type(choices.scale * choices.sign)
    if choices.field_type == "f2":
        return values.astype("f2")
    return values


def _write_fields(file, snapshot, bases, choices):
    cells, faces, stacks = {}, {}, {}
    extra = {"scale": choices.scale, "sign": choices.sign}
    names = list(snapshot.cells)
    per_block = [
        {
            name: _turned(_as_stored_type(snapshot.cells[name][b], choices), choices)
            for name in names
        }
        for b in range(snapshot.grid.n_blocks)
    ]
    if choices.stacked:
        short = [f"q{n}" for n in range(len(names))]
        place = choices.variable_place - (
            choices.stored == "axis" and choices.block_place < choices.variable_place
        )
        blocks = [np.stack([block[name] for name in names], axis=place) for block in per_block]
        _write_blocks(file, bases, "stackful", blocks, choices, stacked=True)
        if choices.names_in_file:
            file["about/words"] = np.array(short, dtype="S4")
            stacks["main"] = StackTable("stackful", names_from="/about/words")
        else:
            stacks["main"] = StackTable("stackful", names=tuple(short))
        for n, name in enumerate(names):
            variable = n if n % 2 and not choices.names_in_file else short[n]
            cells[name] = FieldTable(stack="main", variable=variable, **extra)
    else:
        for n, name in enumerate(names):
            _write_blocks(file, bases, f"data_{n}", [block[name] for block in per_block], choices)
            cells[name] = FieldTable(dataset=f"data_{n}", **extra)
    cells["pressure"] = FieldTable(dataset="not_here", optional=True)
    for name in snapshot.faces:
        blocks = [
            _turned(_as_stored_type(block, choices), choices) for block in snapshot.faces[name]
        ]
        _write_blocks(file, bases, f"side_{name}", blocks, choices)
        faces[name] = FieldTable(dataset=f"side_{name}", **extra)
    return cells, faces, stacks


def _write_blocks(file, bases, name, blocks, choices, stacked=False):
    if choices.stored == "axis":
        place = _order(choices, True, stacked).index("block")
        _store(file, name, np.stack(blocks, axis=place), choices)
        return
    for base, block in zip(bases, blocks, strict=True):
        _store(file[base], name, block, choices)


def _write_axis(file, snapshot, bases, axis, choices):
    edges = getattr(snapshot.grid, f"{axis}_edges").copy()
    ghosts = choices.ghosts.get(axis, 0) if choices.ghosts_in_edges and not choices.centres else 0
    table = {}
    if axis == "r":
        edges /= choices.length_scale
        table["scale"] = choices.length_scale
        if choices.log_r != "none":
            edges = np.log(edges) if choices.log_r == "ln" else np.log10(edges)
            table["transform"] = choices.log_r
    if axis == "theta":
        if choices.latitude:
            edges = np.pi / 2 - edges
        table["measured_from"] = "midplane" if choices.latitude else "pole"
    if axis != "r" and choices.degrees:
        edges = np.degrees(edges)
        table["unit"] = "degree"
    if axis in choices.reversed_axes:
        edges = edges[:, ::-1]
    if choices.centres:
        edges = 0.5 * (edges[:, 1:] + edges[:, :-1])
    for _ in range(ghosts):
        edges = np.column_stack(
            [2 * edges[:, 0] - edges[:, 1], edges, 2 * edges[:, -1] - edges[:, -2]]
        )
    kind = "centres" if choices.centres else "edges"
    if choices.stored == "groups":
        for base, row in zip(bases, edges, strict=True):
            _store(file[base], f"{axis}_line", row, choices)
        table[kind] = f"{axis}_line"
    else:
        shared = choices.shared_edges and len(edges) == 1
        _store(file, f"lines/{axis}", edges[0] if shared else edges, choices)
        table[kind] = f"lines/{axis}"
    return CoordinateTable(**table)


def _write_level(file, snapshot, bases, choices):
    if not choices.level:
        return ""
    if choices.stored == "groups":
        for base, level in zip(bases, snapshot.grid.level, strict=True):
            file[base].attrs["depth"] = np.int16(level)
        return "@depth"
    file["depths"] = snapshot.grid.level.astype(">i4")
    return "depths"


def _write_time(file, snapshot, path, choices):
    if choices.time == "attribute":
        file.require_group("about").attrs["when"] = np.array([snapshot.time * 2])
        return TimeTable(attribute="about@when", scale=0.5)
    if choices.time == "dataset":
        file["about/when"] = snapshot.time
        return TimeTable(dataset="about/when")
    if choices.time == "file_name":
        return TimeTable(file_name=r"_t(\d+)\.h5$", scale=snapshot.time / 42)
    return TimeTable(value=snapshot.time)


def assert_same(read, wanted, *, rtol=0.0, level_stored=True):
    assert read.time == pytest.approx(wanted.time, rel=1e-15)
    assert read.mu0 == wanted.mu0
    assert read.gm == pytest.approx(wanted.gm, rel=1e-7)
    assert read.gamma == wanted.gamma
    # A level that is not stored is counted from the coarsest block there is.
    shift = 0 if level_stored else wanted.grid.level.min()
    np.testing.assert_array_equal(read.grid.level, wanted.grid.level - shift)
    for name in ("r_edges", "theta_edges", "phi_edges"):
        np.testing.assert_allclose(
            getattr(read.grid, name), getattr(wanted.grid, name), rtol=1e-12, atol=1e-14
        )
    for kind in ("cells", "faces"):
        assert set(getattr(read, kind)) == set(getattr(wanted, kind))
        for name, values in getattr(wanted, kind).items():
            found = getattr(read, kind)[name]
            assert found.dtype == values.dtype
            assert found.flags.c_contiguous
            if rtol:
                np.testing.assert_allclose(found, values, rtol=rtol, atol=1e-6 * rtol)
            else:
                np.testing.assert_array_equal(found, values)


def described(tmp_path, snapshot=None, **choices):
    path = tmp_path / "fen_t42.h5"
    layout = scatter(snapshot or small_snapshot(3), path, Choices(**choices))
    return path, layout


def axisymmetric_file(tmp_path, **grid):
    path = tmp_path / "flat.h5"
    density = np.random.default_rng(0).random((5, 7)).astype("f4")
    with h5py.File(path, "w") as file:
        file["rho"] = density
    layout = LayoutDescription(
        axes=AxesTable(order=("theta", "r")),
        grid={
            "r": CoordinateTable(bounds=(1.0, 8.0), spacing="log"),
            "theta": CoordinateTable(bounds=(-20.0, 20.0), unit="degree"),
            **grid,
        },
        cells={"density": FieldTable(dataset="rho")},
        time=TimeTable(value=1.0),
    )
    return path, layout, density


def unlike_blocks(tmp_path, cuts=(8, 4), turned=False):
    """Two groups side by side in r with unlike numbers of cells."""
    path = tmp_path / "unlike.h5"
    r = np.geomspace(1, 3, sum(cuts) + 1)
    theta, phi = np.linspace(1.2, 1.9, 9), np.linspace(0, 0.6, 5)
    whole = np.random.default_rng(1).random((4, 8, sum(cuts)))
    side = np.random.default_rng(2).random((4, 8, sum(cuts) + 1))
    step = -1 if turned else 1
    with h5py.File(path, "w") as file:
        for n, (start, stop) in enumerate(((0, cuts[0]), (cuts[0], sum(cuts)))):
            group = file.create_group(f"part{n}")
            group["r"], group["th"], group["ph"] = r[start : stop + 1][::step], theta, phi
            group["rho"] = whole[..., start:stop][..., ::step]
            group["br"] = side[..., start : stop + 1][..., ::step]
    layout = LayoutDescription(
        blocks=BlocksTable(stored="groups", groups="part?"),
        grid={
            "r": CoordinateTable(edges="r"),
            "theta": CoordinateTable(edges="th"),
            "phi": CoordinateTable(edges="ph"),
        },
        cells={"density": FieldTable(dataset="rho")},
        faces={"magnetic_r": FieldTable(dataset="br")},
        time=TimeTable(value=0.0),
    )
    return path, layout, r, whole, side
