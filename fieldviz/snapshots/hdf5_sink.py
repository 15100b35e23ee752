"""Writing HDF5 so that a full disk ends in one clear error.

When a write fails inside the HDF5 library, closing the file fails too, and the process may crash
later as the library tries once more. Here the library never learns of the failure: the first one
is kept, further writes go nowhere, the file is closed in order, and then the failure is raised.
"""

from __future__ import annotations

import io
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

import h5py

if TYPE_CHECKING:
    from _typeshed import ReadableBuffer, WriteableBuffer

__all__ = ["HDF5Sink", "new_hdf5"]


class HDF5Sink(io.RawIOBase):
    """A file on disk that never fails in the face of the HDF5 library.

    Parameters
    ----------
    path : Path
        Created, or emptied if it is there.
    """

    def __init__(self, path: Path) -> None:
        super().__init__()
        self._file = path.open("w+b", buffering=0)
        self._failure: BaseException | None = None

    def check(self) -> None:
        """Raise the first failure, if there was one."""
        if self._failure is not None:
            raise self._failure

    def write(self, data: ReadableBuffer, /) -> int:
        """Write all bytes, or keep the reason why not and drop them."""
        view = memoryview(data).cast("B")
        done = 0
        try:
            # A nearly full disk takes a part first and fails on the rest.
            while self._failure is None and done < len(view):
                done += self._file.write(view[done:]) or 0
        except BaseException as error:  # noqa: BLE001 - Ctrl-C, too, must wait until HDF5 closed.
            self._failure = error
        if done < len(view):
            self._file.seek(len(view) - done, io.SEEK_CUR)
        return len(view)

    def readinto(self, buffer: WriteableBuffer, /) -> int:
        """Read; bytes that were dropped come back as zeros."""
        view = memoryview(buffer).cast("B")
        done = self._file.readinto(view) or 0
        view[done:] = bytes(len(view) - done)
        return len(view)

    def seek(self, offset: int, whence: int = io.SEEK_SET, /) -> int:
        """Move to a place."""
        return self._file.seek(offset, whence)

    def tell(self) -> int:
        """Give the place."""
        return self._file.tell()

    def truncate(self, size: int | None = None, /) -> int:
        """Set the length, or keep the reason why not."""
        wanted = self._file.tell() if size is None else size
        try:
            if self._failure is None:
                self._file.truncate(wanted)
        except OSError as error:
            self._failure = error
        return wanted

    def readable(self) -> bool:
        """HDF5 reads back what it wrote."""
        return True

    def writable(self) -> bool:
        """Always."""
        return True

    def seekable(self) -> bool:
        """Always."""
        return True

    def close(self) -> None:
        """Close the file."""
        self._file.close()
        super().close()


@contextmanager
def new_hdf5(path: Path) -> Iterator[tuple[h5py.File, HDF5Sink]]:
    """Create an HDF5 file and give it with its sink.

    Parameters
    ----------
    path : Path

    Yields
    ------
    (h5py.File, HDF5Sink)
        Call the sink's `check` after each piece, so that a full disk ends the work at once.

    Raises
    ------
    OSError
        The file system's own, with its number and reason.
    """
    with HDF5Sink(path) as sink:
        try:
            with h5py.File(sink, "w") as file:
                yield file, sink
        finally:
            # Before any other error: what went wrong later follows from it.
            sink.check()
