"""Open a file that fieldviz did not write, by its layout description."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from pathlib import Path

import h5py
import numpy as np

from fieldviz.errors import FieldvizError, GridError, LayoutError, MissingFieldError
from fieldviz.snapshots.field_in_file import FieldInFile, FileFields
from fieldviz.snapshots.foreign_fields import LocatedField, Tile, field_tables, locate, plan_field
from fieldviz.snapshots.foreign_grid import AxisEdges, read_axis
from fieldviz.snapshots.hdf5_access import check_fits_memory
from fieldviz.snapshots.layout_description import LayoutDescription
from fieldviz.snapshots.layout_tables import AXES
from fieldviz.snapshots.references import (
    matching_groups,
    read_number_at,
    read_numbers,
    read_text_at,
)
from fieldviz.wedge.fields import missing_sentence
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array, IntArray
from fieldviz.wedge.units import Unit, UnitScales

__all__ = ["open_foreign"]

_INFERRED_TOLERANCE = 0.25
_STORED_TOLERANCE = 1e-3
_LEAST_TILE = 4
_BYTES_PER_BLOCK = 2000
Shape = tuple[int, int, int]
Places = dict[tuple[str, str], list[LocatedField]]


def open_foreign(
    file: h5py.File, path: Path, layout: LayoutDescription, fields: Sequence[str] | None = None
) -> Snapshot:
    """Describe a foreign file as a snapshot whose fields are read when used.

    Parameters
    ----------
    file : h5py.File
        Open for reading.
    path : Path
        Its name; fields are read from there later.
    layout : LayoutDescription
    fields : sequence of str, optional
        Only these fields; all that the description names by default.

    Returns
    -------
    Snapshot

    Raises
    ------
    LayoutError, SnapshotFileError, GridError, MissingFieldError
        If description and file disagree.
    """
    try:
        return _open(file, path, layout, fields)
    except FieldvizError as error:
        message = str(error)
        if str(path) in message:
            raise
        raise type(error)(f"In {path}: {message}") from error


def _open(
    file: h5py.File, path: Path, layout: LayoutDescription, fields: Sequence[str] | None
) -> Snapshot:
    bases = _bases(file, layout)
    places = _places(file, layout, bases, fields)
    counts = _block_counts(layout, places, len(bases))
    check_fits_memory(f"the edges of {path}", len(counts) * (3.0 + sum(counts[0])), 24)
    tile_shape, tiles = _tiles(counts)
    axes = [
        read_axis(file, layout, axis, bases, [shape[n] for shape in counts])
        for n, axis in enumerate(AXES)
    ]
    grid = _grid(axes, tiles, tile_shape, _levels(file, layout, bases, len(counts)))
    reversed_axes = frozenset(axis for axis, edges in zip(AXES, axes, strict=True) if edges.falling)
    plans: dict[str, dict[str, FieldInFile]] = {"cells": {}, "faces": {}}
    for (kind, name), located in places.items():
        plans[kind][name] = plan_field(
            layout, kind, name, located, tiles, counts, tile_shape, reversed_axes
        )
    return Snapshot(
        grid,
        FileFields(path, plans["cells"]),
        FileFields(path, plans["faces"]),
        time=_time(file, path, layout),
        mu0=_constant(file, layout.constants.mu0, "mu0"),
        gm=_constant(file, layout.constants.gm, "gm"),
        gamma=None
        if layout.constants.gamma is None
        else _constant(file, layout.constants.gamma, "gamma"),
        title=_title(file, layout),
        units=_units(file, layout),
        source=str(path),
    )


def _bases(file: h5py.File, layout: LayoutDescription) -> list[str]:
    if layout.blocks.stored != "groups":
        return ["/"]
    if not layout.blocks.groups:
        raise LayoutError(
            'Cannot use [blocks]: expected groups = "PATTERN" with stored = "groups", got none; '
            "give the pattern of the groups' paths."
        )
    return matching_groups(file, layout.blocks.groups)


def _places(
    file: h5py.File, layout: LayoutDescription, bases: Sequence[str], fields: Sequence[str] | None
) -> Places:
    described = dict.fromkeys(name for _, name, _ in field_tables(layout))
    if not described:
        raise LayoutError(
            "Cannot use this layout description: expected at least one [cells.NAME] or "
            "[faces.NAME], got none; map a field."
        )
    for name in fields or ():
        if name not in described:
            raise MissingFieldError(missing_sentence(name, described))
    places: Places = {}
    for kind, name, table in field_tables(layout):
        if fields and name not in fields:
            continue
        found = [locate(file, layout, kind, name, table, base) for base in bases]
        there = [place for place in found if place is not None]
        if there and len(there) != len(found):
            raise LayoutError(
                f"Cannot use [{kind}.{name}]: expected the field in all {len(found)} groups, got "
                f"it in {len(there)} of them; a field may be missing from all, not from some."
            )
        if there:
            places[kind, name] = there
    for name in fields or ():
        if not any(name == found for _, found in places):
            raise MissingFieldError(missing_sentence(name, {n: 0 for _, n in places}))
    if not places:
        raise LayoutError(
            f"Cannot read {file.filename}: expected at least one of the fields "
            f"{', '.join(described)}, got none of them; check the datasets' names."
        )
    return places


def _block_counts(layout: LayoutDescription, places: Places, n_bases: int) -> list[Shape]:
    known: list[Shape] | None = None
    first = ""
    for (kind, name), located in places.items():
        counts = [place.cell_counts(layout, kind, name) for place in located]
        if n_bases == 1:
            check_fits_memory("the blocks", located[0].n_blocks, _BYTES_PER_BLOCK)
            counts = counts * located[0].n_blocks
        if not counts:
            raise LayoutError(
                f"Cannot use [{kind}.{name}]: expected at least one block, got "
                f"shape {located[0].shape}; check the order of axes."
            )
        if known is None:
            known, first = counts, f"[{kind}.{name}]"
        if counts != known:
            block = next((n for n, pair in enumerate(zip(counts, known)) if len(set(pair)) > 1), 0)  # noqa: B905
            raise LayoutError(
                f"Cannot use [{kind}.{name}]: expected {len(known)} blocks and {known[block]} "
                f"cells (phi, theta, r) as {first} has, got {len(counts)} blocks and "
                f"{counts[block]} cells; check the order of axes and ghost_cells."
            )
    assert known is not None
    return known


def _tiles(counts: Sequence[Shape]) -> tuple[Shape, list[Tile]]:
    """Find a common shape of blocks, and how stored blocks are cut into it."""
    unlike = sorted(set(counts))
    if len(unlike) == 1:
        return unlike[0], [Tile(number) for number in range(len(counts))]
    n_phi, n_theta, n_r = (math.gcd(*(shape[n] for shape in unlike)) for n in range(3))
    shape = (n_phi, n_theta, n_r)
    for axis, size, lengths in zip(AXES, shape, zip(*unlike, strict=True), strict=True):
        if size < _LEAST_TILE and max(lengths) > size:
            raise LayoutError(
                f"Cannot cut these unlike blocks into one size: expected a common divisor of at "
                f"least {_LEAST_TILE} cells along {axis}, got {size} for blocks of "
                f"{', '.join(str(n) for n in sorted(set(lengths)))} cells; rewrite the file with "
                "blocks of one shape."
            )
    tiles = []
    for number, block in enumerate(counts):
        starts = [range(0, n, size) for n, size in zip(block, shape, strict=True)]
        tiles += [Tile(number, (k, j, i)) for k in starts[0] for j in starts[1] for i in starts[2]]
    return shape, tiles


def _grid(
    axes: Sequence[AxisEdges], tiles: Sequence[Tile], shape: Shape, levels: IntArray | None
) -> WedgeGrid:
    arrays: list[Array] = []
    for n, axis in enumerate(axes):
        arrays.append(
            np.stack(
                [
                    axis.rows[tile.stored_block][tile.start[n] : tile.start[n] + shape[n] + 1]
                    for tile in tiles
                ]
            )
        )
    if levels is not None:
        levels = levels[[tile.stored_block for tile in tiles]]
    inferred = any(axis.inferred for axis in axes)
    tolerance = _INFERRED_TOLERANCE if inferred else _STORED_TOLERANCE
    return WedgeGrid(arrays[2], arrays[1], arrays[0], levels, edge_tolerance=tolerance)


def _levels(
    file: h5py.File, layout: LayoutDescription, bases: Sequence[str], n_blocks: int
) -> IntArray | None:
    reference = layout.blocks.level
    if not reference:
        return None
    what = "level of [blocks]"
    if len(bases) > 1 and not reference.startswith("/"):
        values = np.array([read_number_at(file, base, reference, what) for base in bases])
    else:
        values = read_numbers(file, bases[0], reference, what).reshape(-1)
    if values.size != n_blocks or (values != np.rint(values)).any():
        raise GridError(
            f"Cannot use {what}: expected {n_blocks} whole numbers, one per block, got "
            f"{values.size} numbers in '{reference}'; name another dataset, or leave level out."
        )
    return values.astype(np.int64)


def _time(file: h5py.File, path: Path, layout: LayoutDescription) -> float:
    table = layout.time
    given = {
        "attribute": table.attribute,
        "dataset": table.dataset,
        "file_name": table.file_name,
        "value": table.value is not None,
    }
    used = [name for name, value in given.items() if value]
    if len(used) != 1:
        raise LayoutError(
            f"Cannot use [time]: expected one of {', '.join(given)}, got "
            f"{' and '.join(used) or 'none'}; say where the time is."
        )
    if table.value is not None:
        return table.value * table.scale
    if table.file_name:
        return _time_in_name(path, table.file_name) * table.scale
    if table.attribute and "@" not in table.attribute:
        raise LayoutError(
            f"Cannot use [time]: expected attribute = \"path@name\", got '{table.attribute}'; "
            'write "@name" for an attribute of the root group.'
        )
    return read_number_at(file, "/", table.attribute or table.dataset, "the time") * table.scale


def _time_in_name(path: Path, pattern: str) -> float:
    try:
        expression = re.compile(pattern)
    except (re.error, RecursionError, OverflowError) as error:
        raise LayoutError(
            f"Cannot use file_name of [time]: expected a regular expression, got '{pattern}' "
            f"({error}); mend it."
        ) from None
    if expression.groups != 1:
        raise LayoutError(
            f"Cannot use file_name of [time]: expected one group in brackets, got "
            f"{expression.groups} in '{pattern}'; put brackets round the number."
        )
    found = expression.search(path.name)
    if found is None or found.group(1) is None:
        raise LayoutError(
            f"Cannot find the time: expected a file name that matches '{pattern}', got "
            f"'{path.name}'; mend file_name of [time]."
        )
    try:
        number = float(found.group(1))
    except ValueError:
        number = math.nan
    if not math.isfinite(number):
        raise LayoutError(
            f"Cannot find the time: expected '{pattern}' to find a number in '{path.name}', got "
            f"'{found.group(1)}'; mend file_name of [time]."
        )
    return number


def _constant(file: h5py.File, given: float | str, name: str) -> float:
    if not isinstance(given, str):
        return given
    return read_number_at(file, "/", given, f"{name} of [constants]")


def _title(file: h5py.File, layout: LayoutDescription) -> str:
    title = layout.constants.title
    return read_text_at(file, "/", title, "title of [constants]") if "@" in title else title


def _units(file: h5py.File, layout: LayoutDescription) -> UnitScales:
    scales = {}
    for name, table in layout.units.items():
        value = table.value
        if isinstance(value, str):
            value = read_number_at(file, "/", value, f"value of [units.{name}]")
        scales[name] = Unit(value, table.label)
    return UnitScales(**scales)
