"""The HDF5 library never sees a write fail; the caller always does."""

from __future__ import annotations

import errno
import os

import h5py
import numpy as np
import pytest

from fieldviz.snapshots.hdf5_sink import new_hdf5


class FullAfter:
    """A file that takes so many bytes and then fails as a full disk does."""

    def __init__(self, file, room, error):
        self._file, self._room, self._error = file, room, error

    def write(self, data):
        if self._room == 0:
            raise self._error
        taken = min(len(data), self._room)
        self._room -= taken
        return self._file.write(data[:taken])

    def __getattr__(self, name):
        return getattr(self._file, name)


def fill(path, room, error):
    with new_hdf5(path) as (file, sink):
        sink._file = FullAfter(sink._file, room, error)
        file.create_dataset("x", data=np.arange(1000.0), chunks=(100,), compression="gzip")


def test_what_is_written_is_an_hdf5_file(tmp_path):
    with new_hdf5(tmp_path / "a.h5") as (file, sink):
        file["big"] = np.arange(1e5)
        file.create_dataset("packed", data=np.arange(1e5), chunks=(1000,), compression="gzip")
        file.attrs["time"] = 2.0
        sink.check()
    with h5py.File(tmp_path / "a.h5") as file:
        np.testing.assert_array_equal(file["big"], np.arange(1e5))
        np.testing.assert_array_equal(file["packed"], np.arange(1e5))
        assert file.attrs["time"] == 2.0


@pytest.mark.parametrize("room", [0, 1, 100, 1000, 2000])
def test_a_disk_that_fills_up_as_the_file_is_closed(tmp_path, room):
    # Little data: nothing is written before the file is closed.
    with pytest.raises(OSError, match="No space left"):
        fill(tmp_path / "a.h5", room, OSError(errno.ENOSPC, os.strerror(errno.ENOSPC)))


def test_a_keystroke_during_a_write_waits_for_the_file_to_close(tmp_path):
    with pytest.raises(KeyboardInterrupt):
        fill(tmp_path / "a.h5", 0, KeyboardInterrupt())


def test_a_later_error_does_not_hide_the_full_disk(tmp_path):
    def work():
        with new_hdf5(tmp_path / "a.h5") as (file, sink):
            sink._file = FullAfter(sink._file, 0, OSError(errno.ENOSPC, "full"))
            file["big"] = np.arange(1e6)
            raise ValueError("a consequence")

    with pytest.raises(OSError, match="full"):
        work()


def test_errors_of_the_caller_pass(tmp_path):
    def work():
        with new_hdf5(tmp_path / "a.h5"):
            raise ValueError("mine")

    with pytest.raises(ValueError, match="mine"):
        work()
