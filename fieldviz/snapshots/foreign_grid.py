"""Edges of the blocks of a described file, turned into ours: radii, colatitudes, azimuths."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import h5py
import numpy as np

from fieldviz.errors import LayoutError
from fieldviz.snapshots.hdf5_access import check_fits_memory
from fieldviz.snapshots.layout_description import LayoutDescription
from fieldviz.snapshots.layout_tables import CoordinateTable
from fieldviz.snapshots.references import read_numbers
from fieldviz.wedge.typing import Array

__all__ = ["AxisEdges", "edges_from_centres", "read_axis"]

_UNIFORM_TOLERANCE = 1e-4
_ANGLE_SLACK = 1e-5


@dataclass(frozen=True)
class AxisEdges:
    """Edges along one axis.

    Attributes
    ----------
    rows : list of (n + 1,) arrays
        One per stored block, increasing, in code units or radians.
    falling : bool
        Whether the file stores them in falling order.
    inferred : bool
        Whether they were worked out from cell centres.
    """

    rows: list[Array]
    falling: bool
    inferred: bool


def read_axis(
    file: h5py.File,
    layout: LayoutDescription,
    axis: str,
    bases: Sequence[str],
    counts: Sequence[int],
) -> AxisEdges:
    """Read one coordinate.

    Parameters
    ----------
    file : h5py.File
    layout : LayoutDescription
    axis : {"r", "theta", "phi"}
    bases : sequence of str
        Group of each stored block; one "/" where blocks have no groups.
    counts : sequence of int
        Cells along this axis of each stored block.

    Returns
    -------
    AxisEdges

    Raises
    ------
    LayoutError, SnapshotFileError
        If the values are missing, do not fit the fields, are not monotonic, or their range
        contradicts what the description says of them.
    """
    table = layout.grid.get(axis)
    if table is None and axis == "phi" and set(counts) == {1}:
        table = CoordinateTable(bounds=(0.0, 2.0 * np.pi))  # Axisymmetric data are a full ring.
    if table is None:
        raise LayoutError(
            f"Cannot read {file.filename}: expected a table [grid.{axis}] in the layout "
            "description, got none; say where its edges or centres are."
        )
    kind = _kind(table, axis)
    stored = _stored_rows(file, table, kind, axis, bases, counts, layout)
    latitude = axis == "theta" and _is_latitude(table, [stored[key] for key in stored], axis)
    made: dict[int, Array] = {}
    for key, row in stored.items():
        made[key] = _as_coordinate(row, table, axis, latitude)
    falling = _direction(made, axis)
    rows = {key: row[::-1] if falling else row for key, row in made.items()}
    keys = range(len(counts)) if len(rows) > 1 else [0] * len(counts)
    return AxisEdges([rows[key] for key in keys], falling, kind == "centres")


def _kind(table: CoordinateTable, axis: str) -> str:
    given = [kind for kind in ("edges", "centres", "bounds") if getattr(table, kind)]
    if len(given) != 1:
        raise LayoutError(
            f"Cannot use [grid.{axis}]: expected one of edges, centres and bounds, got "
            f"{' and '.join(given) or 'none'}; keep the one that is stored most exactly."
        )
    if axis != "r" and (table.transform != "none" or table.spacing == "log"):
        raise LayoutError(
            f"Cannot use [grid.{axis}]: expected logarithms for r alone, got "
            f"transform = '{table.transform}', spacing = '{table.spacing}'; remove them."
        )
    if axis != "theta" and table.measured_from:
        raise LayoutError(
            f"Cannot use [grid.{axis}]: expected measured_from for theta alone, got "
            f"'{table.measured_from}'; remove it."
        )
    return given[0]


def _stored_rows(
    file: h5py.File,
    table: CoordinateTable,
    kind: str,
    axis: str,
    bases: Sequence[str],
    counts: Sequence[int],
    layout: LayoutDescription,
) -> dict[int, Array]:
    """Edges in the coordinate as stored, by block number; one row if all blocks share it."""
    given = getattr(table, kind)
    ghosts = layout.axes.ghost_cells.get(axis, 0)
    what = f"{kind} of [grid.{axis}]"
    raw: dict[int, Array] = {}
    if not isinstance(given, str):
        raw[0] = np.asarray(given, dtype=np.float64)
    elif len(bases) > 1 and not given.startswith("/"):
        raw = {n: read_numbers(file, base, given, what) for n, base in enumerate(bases)}
    else:
        raw = _split(read_numbers(file, bases[0], given, what), len(counts), what)
    if len(raw) == 1 and len(set(counts)) > 1:
        if kind != "bounds":
            _refuse_length(what, raw[0].shape, sorted(set(counts)), ghosts, kind)
        raw = dict.fromkeys(range(len(counts)), raw[0])
    return {
        n: _edges_of_row(row.reshape(-1), table, kind, counts[n], ghosts, what)
        for n, row in raw.items()
    }


def _split(values: Array, n_blocks: int, what: str) -> dict[int, Array]:
    if values.ndim == 1:
        return {0: values}
    if values.ndim == 2 and values.shape[0] in (1, n_blocks):
        return dict(enumerate(values))
    raise LayoutError(
        f"Cannot use {what}: expected one row, or one row for each of {n_blocks} blocks, got "
        f"shape {values.shape}; check blocks.stored and the dataset."
    )


def _refuse_length(
    what: str, shape: tuple[int, ...], counts: Sequence[int], ghosts: int, kind: str
) -> None:
    more = 1 if kind == "edges" else 0
    wanted = [str(n + more) for n in counts]
    if ghosts:
        wanted += [str(n + more + 2 * ghosts) for n in counts]
    raise LayoutError(
        f"Cannot use {what}: expected {' or '.join(wanted)} values for fields of "
        f"{' or '.join(str(n) for n in counts)} cells, got shape {shape}; check the order of "
        "axes, ghost_cells, and whether these are edges or centres."
    )


def _edges_of_row(
    row: Array, table: CoordinateTable, kind: str, n: int, ghosts: int, what: str
) -> Array:
    bad = int(np.count_nonzero(~np.isfinite(row)))
    if bad:
        raise LayoutError(
            f"Cannot use {what}: expected finite values, got {bad} NaN or infinite; the file's "
            "grid is damaged, mend it before anything else."
        )
    if kind == "bounds":
        return _between(row, table, n, what)
    more = 1 if kind == "edges" else 0
    if row.size not in (n + more, n + more + 2 * ghosts):
        _refuse_length(what, row.shape, [n], ghosts, kind)
    surplus = (row.size - n - more) // 2
    edges = row if kind == "edges" else edges_from_centres(row, table.spacing, what)
    return edges[surplus : surplus + n + 1]


def _between(bounds: Array, table: CoordinateTable, n: int, what: str) -> Array:
    if bounds.size != 2 or bounds[0] == bounds[1]:
        raise LayoutError(
            f"Cannot use {what}: expected two different numbers, got {bounds.tolist()[:4]}; "
            "give the first and the last edge."
        )
    check_fits_memory(what, n + 1.0, 8)
    first, last = float(bounds[0]), float(bounds[1])
    if table.spacing != "log":
        return np.linspace(first, last, n + 1)
    if first <= 0 or last <= 0:
        raise LayoutError(
            f"Cannot use {what}: expected positive numbers for logarithmic spacing, got "
            f'{first:.6g} and {last:.6g}; mend them, or use spacing = "uniform".'
        )
    return np.geomspace(first, last, n + 1)


def edges_from_centres(centres: Array, spacing: str = "", what: str = "cell centres") -> Array:
    """Edges between and around cell centres, rising or falling.

    Parameters
    ----------
    centres : (n,) array, n >= 2
        Middles of the cells in the coordinate as stored.
    spacing : {"", "uniform", "log"}
        Known spacing; by default seen from the values.
    what : str
        Named in messages.

    Returns
    -------
    (n + 1,) array
        Exact for uniform and logarithmic spacing; else half-way between centres, with error of
        second order in the change of the spacing.
    """
    if centres.size < 2:
        raise LayoutError(
            f"Cannot use {what}: expected at least 2 centres to know the cell size, got "
            f"{centres.size}; give bounds instead."
        )
    steps = np.diff(centres)
    if not ((steps > 0).all() or (steps < 0).all()):
        i = int(np.argmax(np.sign(steps) != np.sign(steps[0]))) if steps[0] else 0
        raise LayoutError(
            f"Cannot use {what}: expected values that only rise or only fall, got "
            f"{centres[i]:.8g} then {centres[i + 1]:.8g}; check that this is the right dataset."
        )
    n = centres.size
    first, last = float(centres[0]), float(centres[-1])
    mean = (last - first) / (n - 1)
    # Stored in single precision, equal steps differ by the rounding of the values.
    slack = _UNIFORM_TOLERANCE * abs(mean) + 2.4e-7 * float(np.abs(centres).max())
    if spacing == "uniform" or (not spacing and np.abs(steps - mean).max() <= slack):
        return first - 0.5 * mean + mean * np.arange(n + 1)
    if spacing == "log" or not spacing:
        edges = _logarithmic(centres, forced=spacing == "log", what=what)
        if edges is not None:
            return edges
    middles = 0.5 * (centres[1:] + centres[:-1])
    ends = (1.5 * first - 0.5 * centres[1], 1.5 * last - 0.5 * centres[-2])
    return np.concatenate([[ends[0]], middles, [ends[1]]])


def _logarithmic(centres: Array, *, forced: bool, what: str) -> Array | None:
    if centres.min() <= 0:
        if forced:
            raise LayoutError(
                f"Cannot use {what}: expected positive values for logarithmic spacing, got "
                f"{centres.min():.6g}; mend spacing."
            )
        return None
    n = centres.size
    ratio = float((centres[-1] / centres[0]) ** (1.0 / (n - 1)))
    ratios = centres[1:] / centres[:-1]
    if not forced and np.abs(ratios - ratio).max() > _UNIFORM_TOLERANCE * abs(ratio - 1) + 4.8e-7:
        return None
    # A centre is the mean of its two edges, whose ratio is that of neighbouring centres.
    first = 2.0 * float(centres[0]) / (1.0 + ratio)
    return np.asarray(first * ratio ** np.arange(n + 1))


def _is_latitude(table: CoordinateTable, rows: Sequence[Array], axis: str) -> bool:
    factor = table.scale * (np.pi / 180.0 if table.unit == "degree" else 1.0)
    low = min(float((row * factor).min()) for row in rows)
    high = max(float((row * factor).max()) for row in rows)
    unit = f" {table.unit}s" if table.scale == 1.0 else f" {table.unit}s after scale"
    shown = f"{low * table.scale / factor:.6g} to {high * table.scale / factor:.6g}{unit}"
    allowed = {
        "midplane": (-np.pi / 2, np.pi / 2, "-90 to 90 degrees (latitude)"),
        "pole": (0.0, np.pi, "0 to 180 degrees (colatitude)"),
    }
    fits = {
        word: low >= least - _ANGLE_SLACK and high <= most + _ANGLE_SLACK
        for word, (least, most, _) in allowed.items()
    }
    if table.measured_from:
        if fits[table.measured_from]:
            return table.measured_from == "midplane"
        raise LayoutError(
            f"Cannot use [grid.{axis}] measured from the {table.measured_from}: expected "
            f"{allowed[table.measured_from][2]}, got {shown}; "
            "check measured_from, unit and scale."
        )
    if fits["midplane"] and low < -_ANGLE_SLACK:
        return True
    if fits["pole"] and low < np.pi / 2 - _ANGLE_SLACK and high > np.pi / 2 + _ANGLE_SLACK:
        return False
    problem = "either of them" if any(fits.values()) else "neither of them"
    raise LayoutError(
        f"Cannot use [grid.{axis}]: expected colatitudes on both sides of 90 degrees, or "
        f"latitudes on both sides of 0, got {shown}, which may be {problem}; "
        'say measured_from = "pole" or "midplane", and the unit.'
    )


def _as_coordinate(stored: Array, table: CoordinateTable, axis: str, latitude: bool) -> Array:
    values = stored
    with np.errstate(over="ignore"):
        if table.transform == "ln":
            values = np.exp(values)
        elif table.transform == "log10":
            values = np.power(10.0, values)
    values = values * table.scale
    if axis != "r" and table.unit == "degree":
        values = np.deg2rad(values)
    if latitude:
        values = 0.5 * np.pi - values
    if not np.isfinite(values).all():
        raise LayoutError(
            f"Cannot use [grid.{axis}]: expected finite coordinates, got infinite ones after "
            f'transform = "{table.transform}"; check the transform.'
        )
    return values


def _direction(rows: dict[int, Array], axis: str) -> bool:
    falling = None
    for number, row in rows.items():
        steps = np.diff(row)
        rises, falls = bool((steps > 0).all()), bool((steps < 0).all())
        if not (rises or falls):
            i = int(np.argmax(steps <= 0)) if steps.sum() > 0 else int(np.argmax(steps >= 0))
            raise LayoutError(
                f"Cannot use [grid.{axis}]: expected values that only rise or only fall, got "
                f"{row[i]:.8g} then {row[i + 1]:.8g} in block {number}; check that this is the "
                "right dataset."
            )
        if falling is not None and falling != falls:
            raise LayoutError(
                f"Cannot use [grid.{axis}]: expected all blocks to run one way, got block "
                f"{number} the other way round; rewrite the file with one direction."
            )
        falling = falls
    return bool(falling)
