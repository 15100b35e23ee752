"""Files that are broken, hostile or unwritable: one clear line each, and nothing left behind."""

from __future__ import annotations

import os
import resource
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

import h5py
import numpy as np
import pytest

import fieldviz as fv
from fieldviz.errors import FieldvizError, SnapshotFileError
from fieldviz.snapshots import hdf5_access

SHAPE = (4, 16, 12)


@pytest.fixture(scope="module")
def sound(tmp_path_factory):
    """A sound native file of two blocks."""
    path = tmp_path_factory.mktemp("sound") / "sound.h5"
    fv.write_snapshot(path, fv.demo_disc(shape=SHAPE, blocks=(1, 2, 1)))
    return path


@pytest.fixture
def spoiled(sound, tmp_path):
    """A function that copies the sound file and lets one spoil it with h5py."""

    def spoil(change):
        path = tmp_path / "spoiled.h5"
        shutil.copy(sound, path)
        with h5py.File(path, "r+") as file:
            change(file)
        return path

    return spoil


def use_everything(path):
    snapshot = fv.read_snapshot(path)
    for name in snapshot.cell_names:
        snapshot.cell(name)
    for name in snapshot.faces:
        snapshot.faces[name]


def complaint(path, use=use_everything):
    """The one line that using the file ends with."""
    with pytest.raises(FieldvizError) as caught:
        use(path)
    message = str(caught.value)
    assert len(message.splitlines()) == 1, message
    assert "expected" in message, message
    assert "got" in message, message
    # What to do stands after the last semicolon.
    assert len(message.rsplit(";", 1)[1].split()) >= 2, message
    assert Path(path).name in message, message
    return message


# ---- not a file to read at all ----------------------------------------------------------------


def test_nothing_there(tmp_path):
    assert "no such file" in complaint(tmp_path / "absent.h5")


def test_a_folder(tmp_path):
    assert "a folder" in complaint(tmp_path)


def test_an_empty_file(tmp_path):
    path = tmp_path / "empty.h5"
    path.touch()
    assert "an empty file" in complaint(path)


@pytest.mark.parametrize(
    "content", [b"\0", b"r theta phi\n1 2 3\n", b"\x89HDF", b"\x89PNG\r\n\x1a\n" * 99]
)
def test_another_kind_of_file(tmp_path, content):
    path = tmp_path / "other.h5"
    path.write_bytes(content)
    assert "another kind of file" in complaint(path)


def test_an_hdf5_file_of_another_layout(tmp_path):
    path = tmp_path / "foreign.h5"
    with h5py.File(path, "w") as file:
        file["rho"] = np.ones(3)
    message = complaint(path)
    assert "another HDF5 file" in message
    assert "inspect" in message


@pytest.mark.parametrize("share", [0.001, 0.1, 0.5, 0.9, 0.999])
def test_truncated_files(sound, tmp_path, share):
    path = tmp_path / "cut.h5"
    path.write_bytes(sound.read_bytes()[: max(9, int(share * sound.stat().st_size))])
    assert "truncated" in complaint(path)


DAMAGE = """
import sys
from pathlib import Path
import numpy as np
import fieldviz as fv
from fieldviz.errors import FieldvizError

whole, path = Path(sys.argv[1]).read_bytes(), Path(sys.argv[2])
rng = np.random.default_rng(0)
# Structures lie at the beginning and between the datasets.
for place in np.concatenate([rng.integers(8, 4096, 120), rng.integers(8, len(whole), 40)]):
    damaged = bytearray(whole)
    damaged[place] = rng.integers(256)
    path.write_bytes(damaged)
    try:
        snapshot = fv.read_snapshot(path)
        for name in snapshot.cell_names:
            snapshot.cell(name)
        print("numbers")
    except FieldvizError as error:
        print("error" if len(str(error).splitlines()) == 1 else "several lines")
"""


def test_overwritten_bytes_give_an_error_or_numbers_but_no_crash(sound, tmp_path):
    # In a process of its own, so that a crash or a hang inside the HDF5 library shows as such.
    done = subprocess.run(
        [sys.executable, "-c", DAMAGE, str(sound), str(tmp_path / "hit.h5")],
        capture_output=True, text=True, check=False, timeout=120,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    answers = done.stdout.split("\n")[:-1]
    assert len(answers) == 160
    assert set(answers) == {"numbers", "error"}


def test_no_permission(sound):
    """Root may read everything, so the reading is done by a process that is somebody else."""
    with tempfile.TemporaryDirectory(dir="/tmp") as folder:
        path = Path(folder) / "locked.h5"
        shutil.copy(sound, path)
        path.chmod(0o600)
        Path(folder).chmod(0o755)
        drop = os.getuid() == 0
        if not drop:
            path.chmod(0)
        done = subprocess.run(
            [sys.executable, "-c", PERMISSION, str(path), str(int(drop))],
            capture_output=True, text=True, cwd="/tmp", check=False,
        )  # fmt: skip
    assert done.stdout.startswith("SnapshotFileError: Cannot read"), done.stderr
    assert "got no permission to read it" in done.stdout
    assert done.stdout.count("\n") == 1


PERMISSION = """
import os, sys
import fieldviz.snapshots.reader as reader
from fieldviz.errors import FieldvizError
if sys.argv[2] == "1":
    os.setgid(65534)
    os.setuid(65534)
try:
    reader.read_snapshot(sys.argv[1])
except FieldvizError as error:
    print(f"{type(error).__name__}: {error}")
"""


# ---- wrong or missing content -----------------------------------------------------------------


@pytest.mark.parametrize("name", ["time", "mu0", "gm"])
def test_missing_attributes(spoiled, name):
    assert f"attribute '{name}'" in complaint(spoiled(lambda file: file.attrs.__delitem__(name)))


BAD_NUMBERS = {
    "NaN": np.nan,
    "infinite": np.inf,
    "text": "soon",
    "several": [1.0, 2.0],
    "none": np.array([]),
    "complex": 1 + 2j,
    "compound": np.array((1.0, 2), dtype=[("a", "f8"), ("b", "i4")]),
    "null": h5py.Empty("f8"),
    "bytes": np.bytes_(b"x\ny"),
}


@pytest.mark.parametrize("kind", BAD_NUMBERS)
@pytest.mark.parametrize("name", ["time", "gamma", "fieldviz_layout", "mass_unit"])
def test_attributes_that_are_no_number(spoiled, name, kind):
    def change(file):
        file.attrs[name] = BAD_NUMBERS[kind]

    assert f"attribute '{name}'" in complaint(spoiled(change))


@pytest.mark.parametrize(("name", "value"), [("mu0", 0.0), ("gm", -1.0), ("length_unit", 0.0)])
def test_constants_that_mean_nothing(spoiled, name, value):
    def change(file):
        file.attrs[name] = value

    with pytest.raises(FieldvizError, match="expected") as caught:
        fv.read_snapshot(spoiled(change))
    assert "spoiled.h5" in str(caught.value)


@pytest.mark.parametrize("version", [0, 2, 99, -1])
def test_other_layout_versions(spoiled, version):
    def change(file):
        file.attrs["fieldviz_layout"] = version

    assert f"got {version}" in complaint(spoiled(change))


@pytest.mark.parametrize("name", ["r_edges", "theta_edges", "phi_edges"])
def test_missing_edges(spoiled, name):
    assert f"grid/{name}" in complaint(spoiled(lambda file: file.__delitem__(f"grid/{name}")))


def test_no_grid_at_all(spoiled):
    assert "grid/r_edges" in complaint(spoiled(lambda file: file.__delitem__("grid")))


def replaced(where, values):
    def change(file):
        del file[where]
        file[where] = values

    return change


def edges(name, change):
    """A spoiler that changes the edges of an axis."""

    def spoil(file):
        values = file[f"grid/{name}_edges"][...]
        file[f"grid/{name}_edges"][...] = change(values)

    return spoil


def with_value(values, place, value):
    values[place] = value
    return values


SPOILERS = {
    "edges that do not increase": (
        edges("r", lambda e: with_value(e, (0, 3), e[0, 1])),
        "r_edges that increase",
    ),
    "edges that fall": (edges("theta", lambda e: e[:, ::-1]), "theta_edges that increase"),
    "NaN in edges": (edges("phi", lambda e: with_value(e, (0, 2), np.nan)), "finite phi_edges"),
    "infinite edges": (edges("r", lambda e: with_value(e, (1, -1), np.inf)), "finite r_edges"),
    "negative radii": (edges("r", lambda e: e - 10), "radii >= 0"),
    "degrees": (edges("theta", np.degrees), "degrees"),
    "overlapping blocks": (
        edges("theta", lambda e: with_value(e, 1, e[0])),
        "covering the same place",
    ),
    "gappy blocks": (edges("theta", lambda e: with_value(e, 1, e[1] + 0.1)), "a gap at"),
    "edges of one axis only": (replaced("grid/r_edges", np.arange(13.0)), "(n_blocks, n + 1)"),
    "complex edges": (replaced("grid/r_edges", np.ones((2, 13), complex)), "to be numbers"),
    "edges in words": (replaced("grid/r_edges", np.full((2, 13), b"one")), "to be numbers"),
    "scalar edges": (replaced("grid/r_edges", 1.0), "(n_blocks, n + 1)"),
    "null edges": (replaced("grid/r_edges", h5py.Empty("f8")), "(n_blocks, n + 1)"),
    "no edges": (replaced("grid/r_edges", np.ones((2, 0))), "shape"),
    "edges of too few blocks": (
        replaced("grid/r_edges", np.arange(1.0, 14)[None]),
        "number of blocks",
    ),
    "edges as a group": (
        lambda file: (file.__delitem__("grid/r_edges"), file.create_group("grid/r_edges")),
        "a group",
    ),
    "levels of wrong shape": (replaced("grid/level", np.zeros(3, int)), "whole numbers"),
    "fractional levels": (replaced("grid/level", np.zeros(2)), "whole numbers"),
    "levels in words": (replaced("grid/level", np.full(2, b"one")), "whole numbers"),
    "field of another shape": (
        replaced("cells/density", np.ones((2, 4, 8, 11))),
        "grid and fields disagree",
    ),
    "field with swapped axes": (
        replaced("cells/density", np.ones((2, 12, 8, 4))),
        "grid and fields disagree",
    ),
    "field without blocks": (
        replaced("cells/density", np.ones((4, 8, 12))),
        "grid and fields disagree",
    ),
    "scalar field": (replaced("cells/density", 1.0), "grid and fields disagree"),
    "null field": (replaced("cells/density", h5py.Empty("f8")), "grid and fields disagree"),
    "complex field": (replaced("cells/density", np.ones((2, 4, 8, 12), complex)), "real numbers"),
    "field of words": (replaced("cells/density", np.full((2, 4, 8, 12), b"x")), "real numbers"),
    "field of texts": (
        replaced("cells/density", np.full((2, 4, 8, 12), "x", dtype=h5py.string_dtype())),
        "real numbers",
    ),
    "compound field": (
        replaced("cells/density", np.zeros((2, 4, 8, 12), [("re", "f4"), ("w", "i4")])),
        "real numbers",
    ),
    "group in place of a field": (
        lambda file: (file.__delitem__("cells/density"), file.create_group("cells/density")),
        "a group",
    ),
    "dataset in place of the cells": (replaced("cells", np.ones(3)), "a group"),
    "unknown face field": (
        lambda file: file.__setitem__("faces/density", np.ones((2, 4, 8, 12))),
        "face-centred",
    ),
    "face field of cell shape": (
        replaced("faces/magnetic_r", np.ones((2, 4, 8, 12))),
        "grid and fields disagree",
    ),
}


@pytest.mark.parametrize("name", SPOILERS)
def test_spoiled_content(spoiled, name):
    spoil, said = SPOILERS[name]
    assert said in complaint(spoiled(spoil))


# ---- hostile content --------------------------------------------------------------------------


def secret(folder):
    """A file outside the snapshot whose content must not get into it."""
    path = folder / "secret.h5"
    with h5py.File(path, "w") as file:
        file["values"] = np.full((2, 4, 8, 12), 42.0)
        file["edges"] = np.tile(np.arange(1.0, 14), (2, 1))
    return path


def test_external_links_are_refused(spoiled, tmp_path):
    other = secret(tmp_path)

    def change(file):
        del file["cells/density"]
        file["cells/density"] = h5py.ExternalLink(other, "values")

    assert "linked to another file" in complaint(spoiled(change))


def test_external_links_of_groups_and_edges_are_refused(spoiled, tmp_path):
    other = secret(tmp_path)
    for where, target in (("cells", "/"), ("grid/r_edges", "edges"), ("grid/level", "edges")):

        def change(file, where=where, target=target):
            del file[where]
            file[where] = h5py.ExternalLink(other, target)

        assert "linked to another file" in complaint(spoiled(change))


def test_soft_links_that_lead_out_through_another_link_are_refused(spoiled, tmp_path):
    other = secret(tmp_path)

    def change(file):
        file["out"] = h5py.ExternalLink(other, "/")
        del file["cells/density"]
        file["cells/density"] = h5py.SoftLink("/out/values")

    message = complaint(spoiled(change))
    assert "another file" in message


def test_external_storage_is_refused(spoiled, tmp_path):
    raw = tmp_path / "raw.bin"
    raw.write_bytes(np.full((2, 4, 8, 12), 42.0).tobytes())

    def change(file):
        del file["cells/density"]
        file.create_dataset(
            "cells/density", (2, 4, 8, 12), "f8", external=[(str(raw), 0, h5py.h5f.UNLIMITED)]
        )

    assert "stored in other files" in complaint(spoiled(change))


def test_virtual_datasets_of_other_files_are_refused(spoiled, tmp_path):
    other = secret(tmp_path)

    def change(file):
        del file["cells/density"]
        layout = h5py.VirtualLayout((2, 4, 8, 12), "f8")
        layout[...] = h5py.VirtualSource(other, "values", shape=(2, 4, 8, 12))
        file.create_virtual_dataset("cells/density", layout)

    assert "stored in other files" in complaint(spoiled(change))


def test_virtual_datasets_of_data_stored_elsewhere_are_refused(spoiled, tmp_path):
    raw = tmp_path / "raw.bin"
    raw.write_bytes(np.full((2, 4, 8, 12), 42.0).tobytes())

    def change(file):
        outside = file.create_dataset("heat", (2, 4, 8, 12), "f8", external=[(str(raw), 0, 6144)])
        layout = h5py.VirtualLayout((2, 4, 8, 12), "f8")
        layout[...] = h5py.VirtualSource(outside)
        file.create_virtual_dataset("cells/virtual", layout)

    assert "stored in other files" in complaint(spoiled(change))


def test_links_and_virtual_datasets_within_the_file_are_fine(spoiled):
    def change(file):
        file["heat"] = np.arange(2 * 4 * 8 * 12.0).reshape(2, 4, 8, 12)
        file["cells/soft"] = h5py.SoftLink("/heat")
        file["cells/hard"] = file["heat"]
        layout = h5py.VirtualLayout((2, 4, 8, 12), "f8")
        layout[...] = h5py.VirtualSource(file["heat"])
        file.create_virtual_dataset("cells/virtual", layout)

    snapshot = fv.read_snapshot(spoiled(change))
    for name in ("soft", "hard", "virtual"):
        np.testing.assert_array_equal(snapshot.cell(name).ravel(), np.arange(768.0))


def test_links_in_a_circle_are_no_hang(spoiled):
    def change(file):
        file["cells/one"] = h5py.SoftLink("/cells/two")
        file["cells/two"] = h5py.SoftLink("/cells/one")

    assert "links that lead in a circle" in complaint(spoiled(change))


def test_a_link_that_leads_nowhere(spoiled):
    def change(file):
        file["cells/lost"] = h5py.SoftLink("/nowhere")

    assert "'cells/lost'" in complaint(spoiled(change))


def absurd(file, where, shape, dtype="f8"):
    """A dataset that says it is enormous but holds not one chunk."""
    if where in file:
        del file[where]
    file.create_dataset(where, shape, dtype, chunks=tuple(min(n, 16) for n in shape))


@pytest.mark.parametrize("where", ["grid/r_edges", "grid/phi_edges", "grid/level"])
def test_absurd_sizes_of_the_grid_are_refused_before_memory_is_taken(spoiled, where):
    shape = (10**12,) if where == "grid/level" else (2, 5 * 10**11)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    complaint(spoiled(lambda file: absurd(file, where, shape)))
    assert resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before < 200_000  # kB


@pytest.mark.parametrize("use", ["field", "block", "faces", "made from faces"])
def test_absurd_sizes_of_fields_are_refused_before_memory_is_taken(spoiled, use):
    n = 10_000  # 10^12 cells on edges that are small themselves

    def change(file):
        for kind in ("cells", "faces"):
            del file[kind]
        del file["grid"]
        for name, low, high in (("r", 1, 2), ("theta", 1, 2), ("phi", 0, 1)):
            file[f"grid/{name}_edges"] = np.linspace(low, high, n + 1)[None]
        absurd(file, "cells/density", (1, n, n, n), "f4")
        absurd(file, "faces/magnetic_r", (1, n, n, n + 1), "f4")

    snapshot = fv.read_snapshot(spoiled(change))
    assert snapshot.grid.n_cells == n**3
    uses = {
        "field": lambda: snapshot.cell("density"),
        "block": lambda: snapshot.cell_block("density", 0),
        "faces": lambda: snapshot.faces["magnetic_r"],
        "made from faces": lambda: snapshot.cell("magnetic_r"),
    }
    with pytest.raises(SnapshotFileError, match="free memory") as caught:
        uses[use]()
    assert "3.73e+03 GiB" in str(caught.value)  # 4e12 bytes / 2^30
    assert "\n" not in str(caught.value)


def test_the_memory_check_knows_this_machine():
    free = hdf5_access._free_memory()
    assert 2**20 < free < 2**60
    hdf5_access.check_fits_memory("a little", 10, 8)
    with pytest.raises(SnapshotFileError, match="a lot"):
        hdf5_access.check_fits_memory("a lot", 1e300, 8)


# ---- writing ----------------------------------------------------------------------------------

FULL_DISK = """
import resource, signal, sys
import fieldviz as fv
from fieldviz.errors import FieldvizError
disc = fv.demo_disc(shape=(4, 64, 64), blocks=(1, 2, 2))
signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
resource.setrlimit(resource.RLIMIT_FSIZE, (int(sys.argv[2]), int(sys.argv[2])))
try:
    fv.write_snapshot(sys.argv[1], disc, compress=sys.argv[3] == "1")
except FieldvizError as error:
    print(f"{type(error).__name__}: {error}")
    sys.exit(1)
"""


@pytest.mark.parametrize(
    ("limit", "compress"),
    [(0, 0), (100, 0), (3_000, 1), (20_000, 0), (100_000, 1), (300_000, 0)],
)
def test_a_full_disk_leaves_the_older_file_and_nothing_else(tmp_path, limit, compress):
    path = tmp_path / "disc.h5"
    path.write_bytes(b"older")
    done = subprocess.run(
        [sys.executable, "-c", FULL_DISK, str(path), str(limit), str(compress)],
        capture_output=True, text=True, check=False,
        env={**os.environ, "PYTHONDONTWRITEBYTECODE": "1"},
    )  # fmt: skip
    assert done.returncode == 1, done.stderr
    assert done.stdout.startswith(f"SnapshotFileError: Cannot write {path}"), done.stdout
    assert done.stdout.count("\n") == 1
    assert "File too large" in done.stdout
    assert "Free some space" in done.stdout
    assert done.stderr == ""
    assert path.read_bytes() == b"older"
    assert [entry.name for entry in tmp_path.iterdir()] == ["disc.h5"]


@pytest.mark.parametrize("stop", [KeyboardInterrupt, SystemExit, MemoryError])
def test_an_interrupted_writer_leaves_nothing(tmp_path, small_disc, stop):
    class Interrupted(dict):
        def block(self, name, block):
            if block == 2:
                raise stop
            return disc.cells.block(name, block)

    disc = small_disc(blocks=(2, 2, 1))
    import dataclasses

    broken = dataclasses.replace(disc, cells=Interrupted.fromkeys(disc.cells))
    with pytest.raises(stop):
        fv.write_snapshot(tmp_path / "disc.h5", broken)
    assert list(tmp_path.iterdir()) == []
    # The same when an older file is there: it stays as it was.
    fv.write_snapshot(tmp_path / "disc.h5", disc)
    before = (tmp_path / "disc.h5").read_bytes()
    with pytest.raises(stop):
        fv.write_snapshot(tmp_path / "disc.h5", broken)
    assert (tmp_path / "disc.h5").read_bytes() == before
    assert len(list(tmp_path.iterdir())) == 1
