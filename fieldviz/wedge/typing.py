"""Type names used throughout the numbers."""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy.typing as npt

__all__ = ["Array", "IntArray"]

# Shapes and element types are said in docstrings and checked at run time.
Array: TypeAlias = npt.NDArray[Any]
IntArray: TypeAlias = npt.NDArray[Any]
