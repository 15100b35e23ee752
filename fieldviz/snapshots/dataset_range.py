"""The range of any dataset, read in pieces of bounded size."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import h5py
import numpy as np

from fieldviz.snapshots.file_listing import DatasetEntry
from fieldviz.snapshots.hdf5_access import safe_dataset, text
from fieldviz.wedge.fields import usable_dtype

__all__ = ["DatasetRange", "range_of_dataset"]

_MOST_BYTES = 64 * 2**20
_PIECE_BYTES = 8 * 2**20
_LONGEST_TEXT = 8


@dataclass(frozen=True)
class DatasetRange:
    """What values a dataset has.

    Attributes
    ----------
    minimum, maximum : float or None
        Over finite values; None without any.
    non_finite : int
        NaN and infinite values among those read.
    share : float
        Part of the dataset that was read, 0 to 1.
    note : str
        In words: the texts it holds, or why it was not read.
    """

    minimum: float | None = None
    maximum: float | None = None
    non_finite: int = 0
    share: float = 1.0
    note: str = ""


def range_of_dataset(file: h5py.File, entry: DatasetEntry) -> DatasetRange:
    """Read at most 64 MiB of a dataset, in pieces of 8 MiB.

    Parameters
    ----------
    file : h5py.File
    entry : DatasetEntry

    Returns
    -------
    DatasetRange
    """
    if entry.problem:
        return DatasetRange(share=0.0, note=entry.problem)
    dataset = safe_dataset(file, entry.path)
    size = float(np.prod(entry.shape, dtype=float))
    if entry.dtype.kind in "SUO":
        return _texts(dataset, size)
    if entry.dtype.kind not in "fiub":
        return DatasetRange(share=0.0, note=f"not numbers: {entry.dtype.kind}-type values")
    chunk = float(np.prod(dataset.chunks, dtype=float)) if dataset.chunks else 0.0
    if chunk * entry.dtype.itemsize > _MOST_BYTES:
        return DatasetRange(share=0.0, note="not read: it is stored in chunks over 64 MiB")
    low, high, non_finite, n_read = np.inf, -np.inf, 0, 0
    for piece in _pieces(dataset):
        values = np.asarray(piece, dtype=usable_dtype(piece.dtype))
        finite = values[np.isfinite(values)]
        n_read += values.size
        non_finite += values.size - finite.size
        if finite.size:
            low, high = min(low, float(finite.min())), max(high, float(finite.max()))
    if low > high:
        return DatasetRange(non_finite=non_finite, share=n_read / size if size else 1.0)
    return DatasetRange(low, high, non_finite, n_read / size if size else 1.0)


def _texts(dataset: h5py.Dataset, size: float) -> DatasetRange:
    if size > 64 * _LONGEST_TEXT or dataset.dtype.itemsize > 4096:
        return DatasetRange(share=0.0, note="not read: a long list of texts")
    values = [text(value) for value in np.asarray(dataset[()]).reshape(-1)]
    more = f" and {len(values) - _LONGEST_TEXT} more" if len(values) > _LONGEST_TEXT else ""
    return DatasetRange(note=", ".join(values[:_LONGEST_TEXT]) + more)


def _pieces(dataset: h5py.Dataset) -> Iterator[np.ndarray]:
    """Go through the leading part of a dataset, no more than the bound in all."""
    if dataset.ndim == 0:
        yield np.asarray(dataset[()])
        return
    item = dataset.dtype.itemsize
    # Leading axes are fixed until what is left is small enough to go through in slabs.
    lead = 0
    while lead < dataset.ndim - 1 and _bytes(dataset.shape[lead + 1 :], item) > _PIECE_BYTES:
        lead += 1
    row = max(_bytes(dataset.shape[lead + 1 :], item), 1.0)
    rows_in_piece = max(int(_PIECE_BYTES // row), 1)
    left = float(_MOST_BYTES)
    for index in np.ndindex(*dataset.shape[:lead]):
        for start in range(0, dataset.shape[lead], rows_in_piece):
            stop = min(start + rows_in_piece, dataset.shape[lead])
            left -= (stop - start) * row
            if left < 0:
                return
            yield np.asarray(dataset[(*index, slice(start, stop))])


def _bytes(shape: tuple[int, ...], item: int) -> float:
    return float(np.prod(shape, dtype=float)) * item
