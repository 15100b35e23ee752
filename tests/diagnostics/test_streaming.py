"""Snapshots that are read in pieces."""

from __future__ import annotations

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.diagnostics import streaming
from fieldviz.diagnostics.snapshot_numbers import measure
from fieldviz.snapshots.field_in_file import BlockPiece, FieldInFile, FileFields
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.tiles import azimuth_window, tiled


@pytest.fixture(scope="module")
def disc(small_disc):
    return small_disc(shape=(8, 48, 48))


@pytest.mark.parametrize(
    ("most", "shape"),
    [(1e9, (8, 48, 48)), (48 * 48 * 4, (8, 24, 48)), (48 * 8, (8, 1, 48)), (48 * 5, (4, 1, 48)),
     (20, (1, 1, 16)), (0, (1, 1, 1))],
)  # fmt: skip
def test_tiles_are_as_large_as_they_may_be(disc, most, shape):
    found = tiled(disc, most) if most else tiled(fv.demo_disc(shape=(1, 8, 8)), 0)
    assert found.grid.block_shape == shape
    if most >= 1e9:
        assert found is disc


@pytest.mark.parametrize("levels", [1, 2])
def test_tiles_hold_the_same_cells_and_faces(small_disc, levels):
    whole = small_disc(shape=(8, 48, 48), levels=levels)
    found = tiled(whole, 800)
    assert found.grid.n_cells == whole.grid.n_cells
    assert found.grid.levels == whole.grid.levels
    rng = np.random.default_rng(1)
    r = rng.uniform(*whole.grid.r_range, 50)
    theta = rng.uniform(*whole.grid.theta_range, 50)
    points = np.column_stack([r, theta, rng.uniform(*whole.grid.phi_range, 50)])
    for name in ("density", "magnetic_theta"):
        np.testing.assert_array_equal(
            fv.sample(found, points, [name])[0][name], fv.sample(whole, points, [name])[0][name]
        )
    volume = sum(found.grid.volumes(block).sum() for block in range(found.grid.n_blocks))
    assert volume == pytest.approx(whole.grid.wedge_volume, rel=1e-12)
    for name in MAGNETIC:
        assert found.faces.block(name, 3).shape == found.faces[name].shape[1:]


def test_numbers_in_pieces_are_those_of_the_whole(disc, tmp_path, monkeypatch):
    fv.write_snapshot(tmp_path / "disc.h5", disc)
    whole = measure(disc)
    monkeypatch.setattr(streaming, "MOST_KEPT", 0.0)
    monkeypatch.setattr(streaming, "PIECE_CELLS", 8 * 48 * 8)
    snapshot = fv.read_snapshot(tmp_path / "disc.h5")
    pieces = measure(snapshot)
    assert pieces.reasons == {}
    assert any("read in pieces" in note for note in pieces.notes)
    assert any("1 blocks were cut into 6 pieces" in note for note in pieces.notes)
    # The window takes everything here, and is the only one to keep fields.
    assert set(snapshot.cells._kept) == set()
    levels = pieces.tables()["levels"]
    assert levels.column("blocks") == [6]
    before, after = whole.tables()["summary"].rows, pieces.tables()["summary"].rows
    for one, other in zip(before, after, strict=True):
        if "truncation error" in one[1]:  # Of the inner cells of each piece.
            assert other[2] == pytest.approx(one[2], rel=0.2)
            continue
        if isinstance(one[2], float) and abs(one[2]) > 1e-9:
            assert other[2] == pytest.approx(one[2], rel=1e-6), one
        elif isinstance(one[2], str | int):
            assert other[2] == one[2], one


def test_a_window_of_azimuths_where_whole_fields_are_needed(disc, monkeypatch):
    monkeypatch.setattr(streaming, "MOST_KEPT", 0.0)
    monkeypatch.setattr(streaming, "WINDOW_CELLS", 48 * 48 * 4)
    numbers = measure(disc, parts=["structure", "current_sheets", "magnetic_midplane"])
    assert any("50 % of the azimuth" in note for note in numbers.notes)
    assert numbers["current_sheets"].result.chi.shape == (4, 48, 48)
    # The demo disc is axisymmetric: half of it says the same.
    monkeypatch.undo()
    whole = measure(disc, parts=["current_sheets"])["current_sheets"].result
    half = numbers["current_sheets"].result
    assert half.share_of_volume == pytest.approx(whole.share_of_volume, rel=1e-9)
    assert half.ridge.width_median == pytest.approx(whole.ridge.width_median, rel=1e-9)


@pytest.mark.parametrize("levels", [1, 2])
def test_a_window_holds_all_levels(small_disc, levels):
    whole = small_disc(shape=(8, 48, 48), levels=levels)
    window = azimuth_window(whole, whole.grid.n_cells / 3)
    assert window.grid.levels == whole.grid.levels
    assert window.grid.r_range == whole.grid.r_range
    assert window.grid.theta_range == whole.grid.theta_range
    assert window.grid.period == pytest.approx(whole.grid.period / 4, rel=1e-12)
    assert window.grid.n_cells * 4 == whole.grid.n_cells
    assert azimuth_window(whole, 1e9) is whole


@pytest.mark.parametrize("reversed_axes", [(), ("theta",), ("r", "phi")])
@pytest.mark.parametrize("order", [("phi", "theta", "r"), ("r", "phi", "theta"), ("theta", "r")])
def test_a_part_of_a_block_is_that_part_of_the_block(tmp_path, order, reversed_axes):
    h5py = pytest.importorskip("h5py")
    lengths = {"phi": 4, "theta": 5, "r": 6}
    stored = np.random.default_rng(2).normal(size=(2, *(lengths[name] + 2 for name in order)))
    with h5py.File(tmp_path / "f.h5", "w") as file:
        file["a"] = stored
    selection = (1, *(slice(1, 1 + lengths[name]) for name in order))
    shape = tuple(lengths[name] if name in order else 1 for name in ("phi", "theta", "r"))
    plan = FieldInFile(
        (BlockPiece("a", selection),), shape, stored.dtype, order,
        frozenset(name for name in reversed_axes if name in order), factor=2.0,
    )  # fmt: skip
    fields = FileFields(tmp_path / "f.h5", {"x": plan})
    where = (slice(0, 3), slice(1, 4), slice(2, None))
    np.testing.assert_array_equal(fields.part("x", 0, where), fields.block("x", 0)[where])
    kept = fields["x"]
    np.testing.assert_array_equal(fields.part("x", 0, where), kept[0][where])
