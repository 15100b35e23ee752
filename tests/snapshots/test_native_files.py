"""What is written comes back; only what is asked for is read."""

from __future__ import annotations

import math

import h5py
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

import fieldviz as fv
from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.snapshots.field_in_file import FileFields
from fieldviz.wedge.snapshot import Block, face_shape

UNITS = st.none() | st.builds(
    fv.Unit, st.floats(1e-30, 1e30), st.text(st.characters(codec="utf-8", exclude_characters="\0"))
)
NAMES = st.text(
    st.characters(codec="utf-8", exclude_characters="\0/"), min_size=1, max_size=12
).filter(lambda name: name != ".")
DTYPES = ["f4", "f8", "f2", ">f4", ">f8", ">f2", "i1", "i4", ">i8", "u2", "?"]


@st.composite
def snapshots(draw):
    """A snapshot of a few blocks with all sorts of fields, as it was before writing."""
    shape = draw(st.tuples(*[st.integers(1, 4)] * 3))
    count = draw(st.integers(1, 3))
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    names = draw(st.dictionaries(NAMES, st.sampled_from(DTYPES), max_size=4))
    face_names = draw(st.sets(st.sampled_from(["magnetic_r", "magnetic_theta", "magnetic_phi"])))
    n_phi, n_theta, n_r = shape
    r = np.cumsum(rng.uniform(0.1, 1, count * n_r + 1))
    theta = 0.3 + np.cumsum(rng.uniform(0.1, 0.5, n_theta + 1))
    phi = rng.uniform(-3, 3) + np.cumsum(rng.uniform(0.1, 1, n_phi + 1))

    def values(shape, dtype):
        return rng.uniform(0, 100, shape).astype(dtype)

    blocks = [
        Block(
            r[block * n_r : (block + 1) * n_r + 1],
            theta,
            phi,
            {name: values(shape, dtype) for name, dtype in names.items()},
            {name: values(face_shape(name, shape), "f8") for name in face_names},
        )
        for block in range(count)
    ]
    finite = st.floats(allow_nan=False, allow_infinity=False)
    return fv.Snapshot.from_blocks(
        blocks,
        time=draw(finite),
        mu0=draw(st.sampled_from([1.0, 4 * math.pi])),
        gm=draw(st.floats(1e-6, 1e6)),
        gamma=draw(st.none() | st.floats(1, 2)),
        title=draw(st.text(st.characters(codec="utf-8", exclude_characters="\0"), max_size=30)),
        units=fv.UnitScales(draw(UNITS), draw(UNITS), draw(UNITS)),
    )


@settings(max_examples=60, suppress_health_check=[HealthCheck.too_slow])
@given(snapshots(), st.booleans())
def test_what_is_written_comes_back(tmp_path_factory, snapshot, compress):
    path = tmp_path_factory.mktemp("round") / "trip.h5"
    fv.write_snapshot(path, snapshot, compress=compress)
    back = fv.read_snapshot(path)
    for name in ("time", "mu0", "gm", "gamma", "title", "units"):
        assert getattr(back, name) == getattr(snapshot, name), name
    assert back.source == str(path)
    for name in ("r_edges", "theta_edges", "phi_edges", "level"):
        np.testing.assert_array_equal(getattr(back.grid, name), getattr(snapshot.grid, name))
    for kind in ("cells", "faces"):
        before, after = getattr(snapshot, kind), getattr(back, kind)
        assert set(after) == set(before)
        for name in before:
            assert after[name].dtype == before[name].dtype
            assert after[name].dtype.isnative
            np.testing.assert_array_equal(after[name], before[name])


def native_file(path, snapshot, **datasets):
    """A file in the native layout written with h5py alone; `datasets` replace or add some."""
    with h5py.File(path, "w") as file:
        file.attrs.update({"fieldviz_layout": 1, "time": 1.5, "mu0": 1.0, "gm": 1.0})
        for name in ("r_edges", "theta_edges", "phi_edges"):
            file[f"grid/{name}"] = getattr(snapshot.grid, name)
        for name, values in datasets.items():
            options = {}
            if isinstance(values, tuple):
                values, options = values
            file.create_dataset(f"cells/{name}", data=values, **options)
    return path


CHUNKED = {"chunks": (1, 2, 5, 7)}


@pytest.mark.parametrize(
    "options",
    [
        {},
        CHUNKED,
        {**CHUNKED, "compression": "gzip", "shuffle": True},
        {**CHUNKED, "fletcher32": True},
        {"maxshape": (None,) * 4},
    ],
)
@pytest.mark.parametrize(
    "dtype", ["f4", "f8", ">f4", ">f8", "f2", ">f2", "i2", ">i4", "u1", "?", "g"]
)
def test_files_of_other_number_types_and_storage_read_rightly(tmp_path, small_disc, dtype, options):
    disc = small_disc(blocks=(2, 2, 1))
    shape = (4, *disc.grid.block_shape)
    values = (np.arange(np.prod(shape)).reshape(shape) % 120 + 0.5).astype(dtype)
    path = native_file(tmp_path / "other.h5", disc, heat=(values, options))
    expected = "f8" if dtype[-1] in "8ig124u?" and dtype not in ("f2", ">f2", "f4", ">f4") else "f4"
    snapshot = fv.read_snapshot(path)
    for block in (3, 0):
        found = snapshot.cell_block("heat", block)
        assert found.dtype == np.dtype(expected)
        np.testing.assert_array_equal(found, values[block].astype(expected))
    assert snapshot.cell("heat").dtype == np.dtype(expected)
    np.testing.assert_array_equal(snapshot.cell("heat"), values.astype(expected))
    assert snapshot.time == 1.5


def test_edges_and_attributes_of_other_types_read_rightly(tmp_path, small_disc):
    disc = small_disc()
    path = native_file(tmp_path / "types.h5", disc)
    with h5py.File(path, "r+") as file:
        for name in ("r", "theta", "phi"):
            edges = file[f"grid/{name}_edges"][...]
            del file[f"grid/{name}_edges"]
            file[f"grid/{name}_edges"] = edges.astype(">f4")
        file["grid/level"] = np.zeros(1, dtype=">u2")
        file.attrs["fieldviz_layout"] = np.int8([1])
        file.attrs["time"] = np.float32(2.5)
        file.attrs["gm"] = np.array([[2]])
        file.attrs["title"] = np.bytes_(b"caf\xc3\xa9 \xff")
        file.attrs["length_unit"] = 5.2
    snapshot = fv.read_snapshot(path)
    np.testing.assert_allclose(snapshot.grid.r_edges, disc.grid.r_edges, rtol=1e-7)
    assert snapshot.grid.r_edges.dtype == np.float64
    assert (snapshot.time, snapshot.gm, snapshot.title) == (2.5, 2.0, "café \\xff")
    assert snapshot.units.length == fv.Unit(5.2, "length unit")
    assert snapshot.gamma is None


def test_nothing_is_read_before_it_is_used(tmp_path, small_disc):
    path = tmp_path / "lazy.h5"
    disc = small_disc(blocks=(2, 2, 1))
    fv.write_snapshot(path, disc)
    snapshot = fv.read_snapshot(path)
    assert isinstance(snapshot.cells, FileFields)
    snapshot.cell_block("density", 2)
    assert snapshot.cells._kept == {}
    assert snapshot.cell("density") is snapshot.cell("density")
    assert list(snapshot.cells._kept) == ["density"]
    assert snapshot.faces._kept == {}
    # A block of a field that is here already comes from memory.
    path.unlink()
    np.testing.assert_array_equal(snapshot.cell_block("density", 1), disc.cell_block("density", 1))
    with pytest.raises(FieldvizError, match="no such file"):
        snapshot.cell("pressure")


def test_a_block_is_read_without_its_neighbours(tmp_path, small_disc):
    # Chunks of other blocks are damaged: checksums betray any attempt to read them.
    disc = small_disc(blocks=(2, 2, 1))
    values = disc.cell("density")
    shape = (1, *values.shape[1:])
    path = native_file(
        tmp_path / "damaged.h5", disc, density=(values, {"chunks": shape, "fletcher32": True})
    )
    with h5py.File(path) as file:
        places = [file["cells/density"].id.get_chunk_info(n).byte_offset for n in (0, 1, 3)]
    with path.open("r+b") as file:
        for place in places:
            file.seek(place + 100)
            file.write(b"\xa5\x5a\xa5\x5a")
    snapshot = fv.read_snapshot(path)
    np.testing.assert_array_equal(snapshot.cell_block("density", 2), values[2])
    for read in (lambda: snapshot.cell_block("density", 0), lambda: snapshot.cell("density")):
        with pytest.raises(FieldvizError, match="damaged part") as caught:
            read()
        assert "\n" not in str(caught.value)
        assert "damaged.h5" in str(caught.value)


def test_only_the_chosen_fields_are_there(tmp_path, small_disc):
    path = tmp_path / "some.h5"
    fv.write_snapshot(path, small_disc())
    snapshot = fv.read_snapshot(path, fields=["density", "magnetic_r"])
    assert set(snapshot.cell_names) == {"density", "magnetic_r"}
    assert set(snapshot.faces) == {"magnetic_r"}
    with pytest.raises(MissingFieldError, match="density, magnetic_r"):
        snapshot.cell("pressure")
    with pytest.raises(MissingFieldError, match="'heat'"):
        fv.read_snapshot(path, fields=["density", "heat"])


def test_magnetic_cells_are_made_from_faces_of_a_file(tmp_path, small_disc):
    path = tmp_path / "faces.h5"
    disc = small_disc(blocks=(2, 2, 1))
    faces = fv.Snapshot.from_grid(disc.grid, faces={name: disc.faces[name] for name in disc.faces})
    fv.write_snapshot(path, faces)
    snapshot = fv.read_snapshot(path)
    for name in disc.faces:
        assert snapshot.has(name)
        np.testing.assert_allclose(snapshot.cell(name), disc.cell(name), rtol=1e-13)
        np.testing.assert_allclose(
            snapshot.cell_block(name, 3), disc.cell_block(name, 3), rtol=1e-13
        )


def test_a_snapshot_may_be_written_over_its_own_file(tmp_path, small_disc):
    path = tmp_path / "self.h5"
    disc = small_disc(blocks=(2, 2, 1))
    fv.write_snapshot(path, disc)
    fv.write_snapshot(path, fv.read_snapshot(path), compress=True)
    back = fv.read_snapshot(path)
    for name in disc.cells:
        np.testing.assert_array_equal(back.cell(name), disc.cell(name))


def test_compressed_files_are_smaller(tmp_path, small_disc):
    plain, packed = tmp_path / "plain.h5", tmp_path / "packed.h5"
    fv.write_snapshot(plain, small_disc())
    fv.write_snapshot(packed, small_disc(), compress=True)
    assert packed.stat().st_size < 0.7 * plain.stat().st_size


@pytest.mark.parametrize("name", ["", ".", "a/b", "nul\0byte", "/"])
def test_names_that_hdf5_cannot_hold_are_refused(tmp_path, small_disc, name):
    disc = small_disc()
    odd = fv.Snapshot.from_grid(disc.grid, cells={name: disc.cell("density")})
    with pytest.raises(FieldvizError, match="field name") as caught:
        fv.write_snapshot(tmp_path / "name.h5", odd)
    assert "\n" not in str(caught.value)
    assert list(tmp_path.iterdir()) == []


def test_a_file_that_changes_after_it_was_opened_is_noticed(tmp_path, small_disc):
    path = tmp_path / "changing.h5"
    fv.write_snapshot(path, small_disc())
    snapshot = fv.read_snapshot(path)
    fv.write_snapshot(path, small_disc(shape=(4, 16, 12)))
    for read in (lambda: snapshot.cell("density"), lambda: snapshot.cell_block("density", 0)):
        with pytest.raises(FieldvizError, match="changed since it was opened"):
            read()
