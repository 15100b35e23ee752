"""One field of a snapshot, gone through block by block: its range, and what looks wrong."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from fieldviz.derived.divergence import DivergenceError, face_limit
from fieldviz.snapshots.field_in_file import FileFields
from fieldviz.snapshots.file_listing import type_name
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["FieldReport", "report_field", "warnings_of"]

_FLOOR_FACTOR = 1.01
_FLOOR_SHARE = 1e-3
_FLOOR_COLUMNS = 8
_DIMENSIONS = {
    "density": {"mass": 1, "length": -3},
    "pressure": {"mass": 1, "length": -1, "time": -2},
    **{name: {"length": 1, "time": -1} for name in VELOCITY},
    "diffusivity_ambipolar": {"length": 2, "time": -1},
    "diffusivity_ohmic": {"length": 2, "time": -1},
}


@dataclass(frozen=True)
class FieldReport:
    """One field.

    Attributes
    ----------
    name : str
    kind : {"cells", "faces"}
    shape : tuple of int
        (n_blocks, n_phi, n_theta, n_r).
    stored_type : str
        Type in the file.
    unit : str
        As the file states it, else the code unit of a canonical field, else empty.
    minimum, maximum : float or None
        Over finite values; None without any.
    non_finite : int
        NaN and infinite values.
    not_positive : int
        Values <= 0, of density and pressure.
    at_floor : float
        Density only: share of cells within 1 % of the smallest value above 0.
    """

    name: str
    kind: str
    shape: tuple[int, ...]
    stored_type: str
    unit: str
    minimum: float | None
    maximum: float | None
    non_finite: int = 0
    not_positive: int = 0
    at_floor: float = 0.0


def report_field(snapshot: Snapshot, kind: str, name: str, stated_unit: str = "") -> FieldReport:
    """Go through one field, no more than one block in memory.

    Parameters
    ----------
    snapshot : Snapshot
    kind : {"cells", "faces"}
    name : str
    stated_unit : str
        What the file says of its unit.
    """
    low, high, least, non_finite, not_positive = np.inf, -np.inf, np.inf, 0, 0
    shape: tuple[int, ...] = ()
    for values in _blocks(snapshot, kind, name):
        shape = values.shape
        finite = np.isfinite(values)
        positive = finite & (values > 0)
        non_finite += values.size - int(np.count_nonzero(finite))
        not_positive += int(np.count_nonzero(finite) - np.count_nonzero(positive))
        # Reduced with a mask: no second copy of a block.
        low = min(low, float(np.min(values, where=finite, initial=np.inf)))
        high = max(high, float(np.max(values, where=finite, initial=-np.inf)))
        least = min(least, float(np.min(values, where=positive, initial=np.inf)))
    known = low <= high
    stays_positive = kind == "cells" and name in ("density", "pressure")
    floor, most = 0.0, _FLOOR_FACTOR * least
    if kind == "cells" and name == "density" and high > most:
        floor = _share(snapshot, name, lambda block: (block > 0) & (block <= most))
    return FieldReport(
        name=name,
        kind=kind,
        shape=(snapshot.grid.n_blocks, *shape),
        stored_type=_stored_type(snapshot, kind, name),
        unit=stated_unit or _code_unit(snapshot, name),
        minimum=low if known else None,
        maximum=high if known else None,
        non_finite=non_finite,
        not_positive=not_positive if stays_positive else 0,
        at_floor=floor,
    )


def _blocks(snapshot: Snapshot, kind: str, name: str) -> Iterator[Array]:
    fields = snapshot.cells if kind == "cells" else snapshot.faces
    for block in range(snapshot.grid.n_blocks):
        yield fields.block(name, block)


def _share(snapshot: Snapshot, name: str, is_so: Callable[[Array], Array]) -> float:
    count = sum(int(np.count_nonzero(is_so(v))) for v in _blocks(snapshot, "cells", name))
    return count / snapshot.grid.n_cells


def _stored_type(snapshot: Snapshot, kind: str, name: str) -> str:
    fields = snapshot.cells if kind == "cells" else snapshot.faces
    if isinstance(fields, FileFields):
        dtype = fields.stored_dtype(name)
    else:
        dtype = fields.block(name, 0).dtype
    return type_name(dtype)


def _code_unit(snapshot: Snapshot, name: str) -> str:
    if name in MAGNETIC:
        return "code (B^2/2 mu0 is a pressure)"
    if name not in _DIMENSIONS:
        return ""
    conversion = snapshot.units.conversion(**_DIMENSIONS[name])
    if conversion is None:
        return "code"
    return f"code ({conversion[0]:.6g} {conversion[1]})"


def warnings_of(
    snapshot: Snapshot, reports: Sequence[FieldReport], divergence: DivergenceError
) -> list[str]:
    """Say what deserves a look in the fields, a line each."""
    found = []
    for report in reports:
        n_values = int(np.prod(report.shape, dtype=float))
        what = f"{report.kind}/{report.name}"
        if report.non_finite:
            found.append(f"{what}: {report.non_finite} of {n_values} values are NaN or infinite")
        if report.not_positive:
            found.append(f"{what}: {report.not_positive} of {n_values} values are 0 or below")
        # The smallest value of a smooth disc has a few neighbours in r and theta as well.
        few = _FLOOR_COLUMNS * snapshot.grid.block_shape[0]
        if report.at_floor > _FLOOR_SHARE and report.at_floor * n_values > few:
            found.append(
                f"{what}: {100 * report.at_floor:.3g} % of the cells lie within 1 % of the "
                "smallest value, which looks like a floor: results there are not physics"
            )
    return found + _divergence_warnings(snapshot, divergence)


def _divergence_warnings(snapshot: Snapshot, error: DivergenceError) -> list[str]:
    if error.face is None:
        return []
    sizes = [error.face_precision or 8]
    if isinstance(snapshot.faces, FileFields):
        sizes += [snapshot.faces.stored_dtype(name).itemsize for name in MAGNETIC]
    limit = face_limit(min(sizes))
    if error.face <= limit:
        return []
    return [
        f"div B of the face field is {error.face:.2g} of the fluxes of a cell (block "
        f"{error.face_worst_block}), where rounding explains {limit:.0e}: check which faces and "
        "edges belong together"
    ]
