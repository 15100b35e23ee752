"""Output files appear under their final name only when they are whole."""

from __future__ import annotations

import os
import re
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from fieldviz.errors import SnapshotFileError

__all__ = ["whole_file", "whole_folder"]


def _check_target(path: Path, folder_wanted: bool) -> None:
    parent = path.parent
    if not parent.is_dir():
        raise SnapshotFileError(
            f"Cannot write {path}: expected an existing folder, got no folder {parent}; "
            "make it first or name another place."
        )
    if path.is_dir() and not folder_wanted:
        raise SnapshotFileError(
            f"Cannot write {path}: expected a file name, got a folder; add a file name."
        )
    if not os.access(parent, os.W_OK):
        raise SnapshotFileError(
            f"Cannot write {path}: expected a folder that may be written, "
            f"got no permission in {parent}; choose another place."
        )


@contextmanager
def whole_file(path: str | Path) -> Iterator[Path]:
    """Give a temporary name beside `path`; rename it to `path` if all went well.

    Parameters
    ----------
    path : str or Path
        Final name. Its folder must exist and be writable.

    Yields
    ------
    Path
        Where to write. It keeps the suffix of `path`, as writers choose by it.

    Raises
    ------
    SnapshotFileError
        If the file cannot be written; nothing is left behind.
    """
    target = Path(path)
    _check_target(target, folder_wanted=False)
    temporary = target.with_name(f".{target.stem}.{os.getpid()}.partial{target.suffix}")
    try:
        yield temporary
        _flush_to_disk(temporary)
        temporary.replace(target)
    except OSError as error:
        temporary.unlink(missing_ok=True)
        if isinstance(error, SnapshotFileError):
            raise
        raise SnapshotFileError(_reason(target, error)) from error
    except BaseException:
        temporary.unlink(missing_ok=True)
        raise


@contextmanager
def whole_folder(path: str | Path) -> Iterator[Path]:
    """Like `whole_file` for a folder; an older folder of that name is replaced."""
    target = Path(path)
    _check_target(target, folder_wanted=True)
    temporary = target.with_name(f".{target.name}.{os.getpid()}.partial")
    shutil.rmtree(temporary, ignore_errors=True)
    try:
        temporary.mkdir()
        yield temporary
        if target.is_dir():
            shutil.rmtree(target)
        temporary.replace(target)
    except OSError as error:
        shutil.rmtree(temporary, ignore_errors=True)
        if isinstance(error, SnapshotFileError):
            raise
        raise SnapshotFileError(_reason(target, error)) from error
    except BaseException:
        shutil.rmtree(temporary, ignore_errors=True)
        raise


def _flush_to_disk(path: Path) -> None:
    # A rename before the data are on disk could leave an empty file after a power cut.
    with path.open("rb+") as file:
        os.fsync(file.fileno())


def _reason(target: Path, error: OSError) -> str:
    # HDF5 wraps the system's own words in many of its own.
    inner = re.search(r"error message = '([^']+)'", str(error))
    text = inner[1] if inner else (error.strerror or str(error) or "no reason").splitlines()[0]
    return (
        f"Cannot write {target}: the file system answered '{text}'; nothing was kept under that "
        "name. Free some space or choose another place."
    )
