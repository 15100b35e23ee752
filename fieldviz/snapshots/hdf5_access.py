"""Opening HDF5 files with care: every failure becomes one clear line.

A file is data from outside. Links that lead to other files are refused, and so is a dataset that
would not fit this machine's memory, before anything is read.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import h5py
import numpy as np

from fieldviz.errors import FieldvizError, SnapshotFileError

__all__ = ["check_fits_memory", "open_hdf5", "safe_dataset", "safe_member", "text"]

_SHARE_OF_MEMORY = 0.9
_MOST_LINKS = 16  # one behind the other; more are a circle
# What h5py raises on damaged bytes: a broken type, for one, is a ValueError.
_DAMAGE = (OSError, RuntimeError, ValueError, TypeError, KeyError, OverflowError)


@contextmanager
def open_hdf5(path: str | Path) -> Iterator[h5py.File]:
    """Open a file for reading and turn what goes wrong into a SnapshotFileError.

    Parameters
    ----------
    path : str or Path

    Yields
    ------
    h5py.File

    Raises
    ------
    SnapshotFileError
        Not there, a folder, no permission, not HDF5, truncated, or damaged inside.
    """
    path = Path(path)
    _check_readable(path)
    try:
        with h5py.File(path, "r") as file:
            yield file
    except FieldvizError:
        raise
    except _DAMAGE as error:
        raise SnapshotFileError(_reason(path, error)) from error


def _check_readable(path: Path) -> None:
    expected = f"Cannot read {path}: expected an HDF5 file, got"
    if not path.exists():
        raise SnapshotFileError(f"{expected} no such file; check the name and the folder.")
    if path.is_dir():
        raise SnapshotFileError(f"{expected} a folder; name a file in it, or a pattern of files.")
    if not os.access(path, os.R_OK):
        raise SnapshotFileError(f"{expected} no permission to read it; ask its owner.")
    if path.stat().st_size == 0:
        raise SnapshotFileError(f"{expected} an empty file; it was never written or lost its data.")


def _reason(path: Path, error: Exception) -> str:
    words = str(error).splitlines()[0] if str(error) else type(error).__name__
    if "signature not found" in words:
        return (
            f"Cannot read {path}: expected an HDF5 file, got another kind of file; "
            "convert it to HDF5 first."
        )
    if "truncated" in words:
        return (
            f"Cannot read {path}: expected a whole HDF5 file, got a truncated one; "
            "copy it again, or take the output before it."
        )
    return (
        f"Cannot read {path}: expected sound HDF5 data, got a damaged part ({words}); "
        "copy the file again, or take another output."
    )


def safe_member(file: h5py.Group, path: str) -> h5py.Group | h5py.Dataset | None:
    """A group or dataset inside `file`, or None; links to other files are refused."""
    return _member(file, path, 0)


def _member(file: h5py.Group, path: str, links: int) -> h5py.Group | h5py.Dataset | None:
    here: h5py.Group | h5py.Dataset | None = file
    for part in path.split("/"):
        if part in ("", "."):
            continue
        if not isinstance(here, h5py.Group):
            return None
        link = here.get(part, getlink=True)
        if link is None:
            return None
        if isinstance(link, h5py.ExternalLink):
            raise SnapshotFileError(
                f"Cannot read {file.file.filename}: expected all data inside the file, got "
                f"'{path}' linked to another file ({link.filename}); copy the data into one file."
            )
        if isinstance(link, h5py.SoftLink):
            # Followed here and not by HDF5, as its target may lie behind an external link.
            if links >= _MOST_LINKS:
                raise SnapshotFileError(
                    f"Cannot read {file.file.filename}: expected '{path}' to lead to data, got "
                    "links that lead in a circle; mend them in the file."
                )
            start = here.file if link.path.startswith("/") else here
            here = _member(start, link.path, links + 1)
            continue
        try:
            here = here[part]
        except KeyError:
            return None
    return here


def safe_dataset(file: h5py.Group, path: str) -> h5py.Dataset:
    """The dataset at `path`.

    Raises
    ------
    SnapshotFileError
        If it is missing, not a dataset, or keeps its data in other files.
    """
    found = safe_member(file, path)
    name = file.file.filename
    if found is None:
        raise SnapshotFileError(
            f"Cannot read {name}: expected a dataset '{path}', got none; "
            "`fieldviz inspect` lists what the file has."
        )
    if not isinstance(found, h5py.Dataset):
        raise SnapshotFileError(
            f"Cannot read {name}: expected '{path}' to be a dataset, got a group; "
            "`fieldviz inspect` lists what the file has."
        )
    if _keeps_data_elsewhere(found, 0):
        raise SnapshotFileError(
            f"Cannot read {name}: expected all data inside the file, got '{path}' stored in other "
            "files; copy the data into one file."
        )
    return found


def _keeps_data_elsewhere(dataset: h5py.Dataset, depth: int) -> bool:
    if dataset.external or depth >= _MOST_LINKS:
        return True
    if not dataset.is_virtual:
        return False
    for source in dataset.virtual_sources():
        if source.file_name != ".":
            return True
        inside = _member(dataset.file, source.dset_name, 0)
        if isinstance(inside, h5py.Dataset) and _keeps_data_elsewhere(inside, depth + 1):
            return True
    return False


def check_fits_memory(what: str, n_values: float, item_size: int) -> None:
    """Refuse what would not fit the memory that is free now.

    Parameters
    ----------
    what : str
        Named in the message.
    n_values : float
        Number of values; a float, as absurd products overflow whole numbers.
    item_size : int
        Bytes of each.

    Raises
    ------
    SnapshotFileError
    """
    wanted = float(n_values) * item_size
    free = _free_memory()
    if wanted > _SHARE_OF_MEMORY * free:
        raise SnapshotFileError(
            f"Cannot read {what}: expected it to fit the free memory of {free / 2**30:.3g} GiB, "
            f"got {wanted / 2**30:.3g} GiB; the size stored in the file may be wrong, else read "
            "it block by block or on a larger machine."
        )


def _free_memory() -> float:
    try:
        for line in Path("/proc/meminfo").read_text().splitlines():
            if line.startswith("MemAvailable:"):
                return float(line.split()[1]) * 1024
    except OSError:
        pass  # Not Linux: the whole memory is the best known bound.
    try:
        return float(os.sysconf("SC_PHYS_PAGES") * os.sysconf("SC_PAGE_SIZE"))
    except (AttributeError, ValueError, OSError):
        return float(np.inf)


def text(value: object) -> str:
    """A string attribute or dataset value as text; undecodable bytes are shown, not lost."""
    if isinstance(value, h5py.Empty):
        return ""
    if isinstance(value, np.ndarray) and value.size == 1:
        value = value.flat[0]
    if isinstance(value, bytes):
        return value.decode("utf-8", "backslashreplace").rstrip("\0")
    return str(value)
