"""Named cell or face arrays, in memory or read when used."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.wedge.typing import Array

__all__ = ["CANONICAL_CELLS", "MAGNETIC", "VELOCITY", "ArrayFields", "Fields", "usable_dtype"]

VELOCITY = ("velocity_r", "velocity_theta", "velocity_phi")
MAGNETIC = ("magnetic_r", "magnetic_theta", "magnetic_phi")
CANONICAL_CELLS = (
    "density",
    "pressure",
    *VELOCITY,
    *MAGNETIC,
    "diffusivity_ambipolar",
    "diffusivity_ohmic",
)


def usable_dtype(dtype: np.dtype) -> np.dtype:
    """The native type in which numbers stored as `dtype` are held.

    float32 and float64 stay; half precision becomes float32 and whole numbers float64, as neither
    the kernels nor VTK take them.
    """
    if dtype.kind == "f":
        return np.dtype(np.float32 if dtype.itemsize <= 4 else np.float64)
    if dtype.kind in "iub":
        return np.dtype(np.float64)
    raise FieldvizError(
        f"Cannot use this field: expected real numbers, got type {dtype}; choose another dataset."
    )


class Fields(Mapping[str, Array]):
    """Fields by name; each is an array (n_blocks, n_phi, n_theta, n_r), r fastest."""

    def block(self, name: str, block: int) -> Array:
        """One block of one field; lazy sources read no more than that."""
        array: Array = self[name][block]
        return array

    def part(self, name: str, block: int, where: tuple[slice, slice, slice]) -> Array:
        """A part of one block, slices along phi, theta and r; files read no more than that."""
        return self.block(name, block)[where]


class ArrayFields(Fields):
    """Fields held in memory.

    Parameters
    ----------
    arrays : mapping of str to (n_blocks, n_phi, n_theta, n_r) array
        Taken without copying where the type is usable as it is.
    shapes : mapping of str to shape, or one shape
        What each array must look like.
    """

    def __init__(self, arrays: Mapping[str, Array], shapes: Mapping[str, tuple[int, ...]]) -> None:
        self._arrays: dict[str, Array] = {}
        for name, given in arrays.items():
            array = np.asarray(given)
            array = np.ascontiguousarray(array, dtype=usable_dtype(array.dtype))
            if array.shape != shapes[name]:
                raise FieldvizError(
                    f"Cannot use the field '{name}': expected shape {shapes[name]} "
                    f"(block, phi, theta, r), got {array.shape}; check the order of axes."
                )
            self._arrays[name] = array

    def __getitem__(self, name: str) -> Array:
        try:
            return self._arrays[name]
        except KeyError:
            raise MissingFieldError(missing_sentence(name, self._arrays)) from None

    def __iter__(self) -> Iterator[str]:
        return iter(self._arrays)

    def __len__(self) -> int:
        return len(self._arrays)

    def __contains__(self, name: object) -> bool:
        return name in self._arrays


def missing_sentence(name: str, there: Mapping[str, object]) -> str:
    """Say which field is missing and which ones there are."""
    known = ", ".join(sorted(there)) or "none"
    return (
        f"Cannot use the field '{name}': it is not in the snapshot, which has {known}; "
        "name one of these, or map it in a layout description."
    )
