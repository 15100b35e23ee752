"""Type names used throughout the numbers."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

__all__ = ["Array", "IntArray"]

Array = npt.NDArray[np.floating[Any]]
IntArray = npt.NDArray[np.integer[Any]]
