"""Snapshots made in memory: shapes, precision, what is missing, what is made from faces."""

from __future__ import annotations

import numpy as np
import pytest
from wedge_builders import GRIDS, PHI, THETA, R

import fieldviz as fv
from fieldviz.errors import FieldvizError, GridError, MissingFieldError
from fieldviz.wedge.fields import usable_dtype
from fieldviz.wedge.snapshot import Block, Snapshot, face_shape
from fieldviz.wedge.units import Unit, UnitScales

SHAPE = (8, 16, 16)
ONES = np.ones(SHAPE)


def snapshot_of(cells=None, faces=None, **constants):
    return Snapshot.from_arrays(R, THETA, PHI, cells=cells or {}, faces=faces or {}, **constants)


def test_constants_and_fields_are_kept():
    units = UnitScales(length=Unit(1.0, "au"))
    snapshot = snapshot_of(
        {"density": ONES}, time=3.0, mu0=4 * np.pi, gm=2.0, gamma=1.4, title="x", units=units
    )
    assert (snapshot.time, snapshot.mu0, snapshot.gm) == (3.0, 4 * np.pi, 2.0)
    assert (snapshot.gamma, snapshot.title, snapshot.units) == (1.4, "x", units)
    assert snapshot.cell_names == ("density",)
    assert "density" in repr(snapshot)


@pytest.mark.parametrize(
    ("given", "held"),
    [
        ("f4", "f4"), ("f8", "f8"), (">f4", "f4"), (">f8", "f8"), ("f2", "f4"), ("i4", "f8"),
        (">i2", "f8"), ("u1", "f8"), ("?", "f8"), ("g", "f8"),
    ],
)  # fmt: skip
def test_number_types_become_usable_ones(given, held):
    values = (np.arange(ONES.size).reshape(SHAPE) % 2).astype(given)
    cell = snapshot_of({"density": values}).cell("density")
    assert cell.dtype == np.dtype(held)
    assert cell.dtype.isnative
    np.testing.assert_array_equal(cell[0], values.astype("f8"))
    assert usable_dtype(np.dtype(given)) == np.dtype(held)


@pytest.mark.parametrize("bad", [ONES * 1j, ONES.astype(str), ONES.astype(object)])
def test_fields_that_are_not_real_numbers_are_refused(bad):
    with pytest.raises(FieldvizError, match="expected real numbers"):
        snapshot_of({"density": bad})


def test_usable_arrays_are_not_copied():
    values = np.ones((1, *SHAPE), dtype=np.float32)
    grid = snapshot_of().grid
    assert np.shares_memory(Snapshot.from_grid(grid, cells={"x": values}).cell("x"), values)


def test_arrays_in_another_memory_order_keep_their_meaning():
    values = np.arange(ONES.size, dtype=float).reshape(SHAPE)
    snapshot = snapshot_of({"density": np.asfortranarray(values)})
    np.testing.assert_array_equal(snapshot.cell("density")[0], values)
    assert snapshot.cell("density").flags.c_contiguous


@pytest.mark.parametrize("shape", [(16, 16, 8), (8, 16, 17), (8, 16), (1, 1, 8, 16, 16), ()])
def test_wrong_shapes_are_refused(shape):
    with pytest.raises(FieldvizError, match="order of axes") as caught:
        Snapshot.from_grid(snapshot_of().grid, cells={"density": np.ones(shape)})
    assert "'density'" in str(caught.value)


def test_face_shapes():
    assert face_shape("magnetic_r", SHAPE) == (8, 16, 17)
    assert face_shape("magnetic_theta", SHAPE) == (8, 17, 16)
    assert face_shape("magnetic_phi", SHAPE) == (9, 16, 16)
    with pytest.raises(FieldvizError, match="face-centred field 'density'"):
        snapshot_of(faces={"density": ONES})


@pytest.mark.parametrize("dtype", [np.float32, np.float64])
@pytest.mark.parametrize(
    ("name", "axis"), [("magnetic_r", 2), ("magnetic_theta", 1), ("magnetic_phi", 0)]
)
def test_cell_values_are_the_mean_of_their_faces(name, axis, dtype):
    faces = np.random.default_rng(0).normal(size=face_shape(name, SHAPE)).astype(dtype)
    snapshot = snapshot_of(faces={name: faces})
    n = SHAPE[axis]
    expected = (np.take(faces, range(n), axis) + np.take(faces, range(1, n + 1), axis)) / dtype(2)
    np.testing.assert_array_equal(snapshot.cell(name)[0], expected)
    np.testing.assert_array_equal(snapshot.cell_block(name, 0), expected)
    assert snapshot.cell(name).dtype == dtype
    assert snapshot.cell_names == (name,)
    assert snapshot.has(name)


def test_stored_cell_values_come_before_those_of_faces():
    faces = np.zeros(face_shape("magnetic_r", SHAPE))
    snapshot = snapshot_of({"magnetic_r": ONES}, {"magnetic_r": faces})
    assert (snapshot.cell("magnetic_r") == 1).all()
    assert snapshot.cell_names == ("magnetic_r",)


def test_missing_fields_are_named_with_those_that_are_there():
    snapshot = snapshot_of({"density": ONES})
    for ask in (
        lambda: snapshot.cell("pressure"),
        lambda: snapshot.cell_block("pressure", 0),
        lambda: snapshot.require("draw", "density", "pressure"),
        lambda: snapshot.cells["pressure"],
    ):
        with pytest.raises(MissingFieldError, match="pressure") as caught:
            ask()
        assert "density" in str(caught.value)
        assert "\n" not in str(caught.value)
    assert not snapshot.has("density", "pressure")
    snapshot.require("draw", "density")


def test_with_cells_shares_the_rest():
    first = snapshot_of({"density": ONES}, time=2.0)
    second = first.with_cells(heat=2 * first.cell("density"))
    assert second.cell("density") is first.cell("density")
    assert (second.cell("heat") == 2).all()
    assert not first.has("heat")
    assert second.time == 2.0
    with pytest.raises(FieldvizError, match="order of axes"):
        first.with_cells(heat=ONES)


def test_blocks_of_unlike_shape_or_fields_are_refused():
    one = Block(R, THETA, PHI, {"density": ONES})
    with pytest.raises(GridError, match="at least one block"):
        Snapshot.from_blocks([])
    with pytest.raises(GridError, match="blocks of one shape"):
        Snapshot.from_blocks([one, Block(R[:-1] + 3, THETA, PHI, {"density": ONES[:, :, :-1]})])
    with pytest.raises(FieldvizError, match="same cells in every block"):
        Snapshot.from_blocks([one, Block(R + 3, THETA, PHI, {"pressure": ONES})])


def test_blocks_keep_their_order_and_values():
    grid = GRIDS["two levels"]()
    blocks = [
        Block(*grid.edges(n), {"number": np.full(grid.block_shape, n)}, level=int(grid.level[n]))
        for n in range(grid.n_blocks)
    ]
    snapshot = Snapshot.from_blocks(blocks)
    for n in range(grid.n_blocks):
        assert (snapshot.cell_block("number", n) == n).all()
    np.testing.assert_array_equal(snapshot.grid.level, grid.level)


@pytest.mark.parametrize(
    "constants",
    [{"time": np.nan}, {"time": np.inf}, {"mu0": 0.0}, {"mu0": -1.0}, {"gm": np.nan}, {"gm": 0.0}],
)
def test_constants_that_mean_nothing_are_refused(constants):
    (name,) = constants
    with pytest.raises(FieldvizError, match=f"expected {name} to be"):
        snapshot_of(**constants)


def test_negative_times_are_fine():
    assert snapshot_of(time=-2.5).time == -2.5


def test_levels_of_blocks_are_named_by_all_or_by_none():
    disc = fv.demo_disc(shape=(4, 16, 16), levels=2)
    grid = disc.grid
    blocks = [fv.Block(*grid.edges(b)) for b in range(grid.n_blocks)]
    np.testing.assert_array_equal(fv.Snapshot.from_blocks(blocks).grid.level, grid.level)
    blocks[3] = fv.Block(*grid.edges(3), level=1)
    with pytest.raises(GridError, match="block 0"):
        fv.Snapshot.from_blocks(blocks)
