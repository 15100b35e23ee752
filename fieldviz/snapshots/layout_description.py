"""Layout descriptions: a TOML text that says what is where in somebody else's HDF5 file."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import tomlkit
from tomlkit.exceptions import TOMLKitError
from tomlkit.items import InlineTable, Table

from fieldviz.errors import LayoutError
from fieldviz.output import whole_file
from fieldviz.snapshots.layout_tables import (
    AXES,
    AxesTable,
    BlocksTable,
    ConstantsTable,
    CoordinateTable,
    FieldTable,
    StackTable,
    TimeTable,
    UnitTable,
    nearest,
    read_table,
    table_entries,
)

__all__ = [
    "DESCRIPTION_MARK",
    "DESCRIPTION_VERSION",
    "LayoutDescription",
    "layout_from_toml",
    "layout_to_toml",
    "read_layout",
    "write_layout",
]

DESCRIPTION_MARK = "fieldviz_layout_description"
DESCRIPTION_VERSION = 1
_FACES = ("magnetic_r", "magnetic_theta", "magnetic_phi")
_UNITS = ("length", "mass", "time")
_LARGEST_TEXT = 4_000_000
_NO_NOTES: Mapping[str, str] = {}

_SINGLE_TABLES: dict[str, type] = {
    "blocks": BlocksTable,
    "axes": AxesTable,
    "time": TimeTable,
    "constants": ConstantsTable,
}
_NAMED_TABLES: dict[str, tuple[type, tuple[str, ...]]] = {
    "grid": (CoordinateTable, AXES[::-1]),
    "stacks": (StackTable, ()),
    "cells": (FieldTable, ()),
    "faces": (FieldTable, _FACES),
    "units": (UnitTable, _UNITS),
}
_TABLE_ORDER = ("blocks", "axes", "grid", "stacks", "cells", "faces", "time", "constants", "units")


@dataclass(frozen=True)
class LayoutDescription:
    """What is where in a file that fieldviz did not write.

    Attributes
    ----------
    blocks : BlocksTable
    axes : AxesTable
    grid : dict of "r", "theta", "phi" to CoordinateTable
    stacks : dict of str to StackTable
    cells, faces : dict of str to FieldTable
        By the names the model uses.
    time : TimeTable
    constants : ConstantsTable
    units : dict of "length", "mass", "time" to UnitTable
    source : str
        File it was read from, for messages; not compared.
    """

    blocks: BlocksTable = field(default_factory=BlocksTable)
    axes: AxesTable = field(default_factory=AxesTable)
    grid: Mapping[str, CoordinateTable] = field(default_factory=dict)
    stacks: Mapping[str, StackTable] = field(default_factory=dict)
    cells: Mapping[str, FieldTable] = field(default_factory=dict)
    faces: Mapping[str, FieldTable] = field(default_factory=dict)
    time: TimeTable = field(default_factory=TimeTable)
    constants: ConstantsTable = field(default_factory=ConstantsTable)
    units: Mapping[str, UnitTable] = field(default_factory=dict)
    source: str = field(default="", compare=False)


def read_layout(layout: str | Path | LayoutDescription) -> LayoutDescription:
    """Read a layout description.

    Parameters
    ----------
    layout : str, Path or LayoutDescription
        A TOML file; a description in memory is given back as it is.

    Returns
    -------
    LayoutDescription

    Raises
    ------
    LayoutError
        If the file cannot be read, is not TOML, or says something unknown.
    """
    if isinstance(layout, LayoutDescription):
        return layout
    path = Path(layout)
    expected = f"Cannot read the layout description {path}: expected a TOML file, got"
    if path.is_dir():
        raise LayoutError(f"{expected} a folder; name a file in it.")
    if not path.exists():
        raise LayoutError(f"{expected} no such file; check the name and the folder.")
    try:
        if path.stat().st_size > _LARGEST_TEXT:
            raise LayoutError(
                f"{expected} {path.stat().st_size} bytes; a description is a few lines, "
                "check that it is not the snapshot itself."
            )
        content = path.read_text(encoding="utf-8")
    except UnicodeDecodeError:
        raise LayoutError(f"{expected} bytes that are no text; save it as UTF-8.") from None
    except OSError as error:
        reason = error.strerror or type(error).__name__
        raise LayoutError(f"{expected} '{reason}'; check its permissions.") from error
    return layout_from_toml(content, source=str(path))


def layout_from_toml(content: str, *, source: str = "") -> LayoutDescription:
    """Turn TOML text into a description; `source` names it in messages."""
    called = f"the layout description {source}".rstrip()
    try:
        document: dict[str, Any] = tomlkit.parse(content).unwrap()
    except (TOMLKitError, ValueError, RecursionError) as error:
        reason = (str(error).splitlines() or [type(error).__name__])[0]
        raise LayoutError(
            f"Cannot read {called}: expected TOML, got an error in it ({reason}); mend that line."
        ) from None
    _check_mark(document, called)
    tables: dict[str, Any] = {}
    for key, value in document.items():
        if key == DESCRIPTION_MARK:
            continue
        if key in _SINGLE_TABLES:
            tables[key] = read_table(_SINGLE_TABLES[key], value, key, called)
        elif key in _NAMED_TABLES:
            tables[key] = _named_tables(key, value, called)
        else:
            raise LayoutError(
                f"Cannot use {called}: expected tables out of {', '.join(_TABLE_ORDER)}, "
                f"got '{key}'{nearest(key, _TABLE_ORDER)}; mend or remove it."
            )
    return LayoutDescription(**tables, source=source)


def _check_mark(document: Mapping[str, object], called: str) -> None:
    version = document.get(DESCRIPTION_MARK)
    if version is None:
        close = [key for key in document if nearest(key, [DESCRIPTION_MARK])]
        raise LayoutError(
            f"Cannot use {called}: expected {DESCRIPTION_MARK} = {DESCRIPTION_VERSION} at the "
            f"top, got {repr(close[0]) if close else 'none'}; write that line."
        )
    if isinstance(version, bool) or version != DESCRIPTION_VERSION:
        raise LayoutError(
            f"Cannot use {called}: expected {DESCRIPTION_MARK} = {DESCRIPTION_VERSION}, "
            f"got {version!r}; update fieldviz or mend the number."
        )


def _named_tables(key: str, value: object, called: str) -> dict[str, Any]:
    kind, allowed = _NAMED_TABLES[key]
    if not isinstance(value, dict):
        raise LayoutError(
            f"Cannot use {called}: expected tables such as [{key}.NAME], got {key} = {value!r}; "
            "give each name its own table."
        )
    for name in value:
        if allowed and name not in allowed:
            raise LayoutError(
                f"Cannot use {called}: expected [{key}.NAME] with NAME out of "
                f"{', '.join(allowed)}, got '{name}'{nearest(name, allowed)}; mend or remove it."
            )
        if not name or "/" in name:
            raise LayoutError(
                f"Cannot use {called}: expected a name without '/' in [{key}.NAME], "
                f"got '{name}'; choose another name."
            )
    return {name: read_table(kind, table, f"{key}.{name}", called) for name, table in value.items()}


def layout_to_toml(description: LayoutDescription, *, unsure: Mapping[str, str] = _NO_NOTES) -> str:
    """Write a description as TOML text.

    Parameters
    ----------
    description : LayoutDescription
    unsure : mapping of str to str
        Why an entry is a guess, by its dotted name ("grid.theta.unit", or "grid.theta" for the
        whole table); written as a comment at that place.

    Returns
    -------
    str
        `layout_from_toml` gives an equal description back.
    """
    document = tomlkit.document()
    document.add(DESCRIPTION_MARK, tomlkit.item(DESCRIPTION_VERSION))
    if "" in unsure:
        document.add(tomlkit.comment(_comment(unsure[""])))
    for key in _TABLE_ORDER:
        value = getattr(description, key)
        if key in _SINGLE_TABLES:
            table = _toml_table(value, key, unsure)
            if table is not None:
                document.add(tomlkit.nl())
                document.add(key, table)
        elif value:
            parent = tomlkit.table(is_super_table=True)
            for name, entry in value.items():
                one = _toml_table(entry, f"{key}.{name}", unsure, always=True)
                parent.add(tomlkit.key(name), one)
            document.add(key, parent)
    return tomlkit.dumps(document).rstrip() + "\n"


def _toml_table(
    table: object, where: str, unsure: Mapping[str, str], *, always: bool = False
) -> Table | None:
    entries = table_entries(table)
    noted = any(name == where or name.startswith(f"{where}.") for name in unsure)
    if not (entries or always or noted):
        return None
    result = tomlkit.table()
    if where in unsure:
        result.add(tomlkit.comment(_comment(unsure[where])))
    for key, value in entries.items():
        item = _inline(value) if isinstance(value, dict) else tomlkit.item(value)
        reason = unsure.get(f"{where}.{key}")
        if reason:
            item.comment(_comment(reason))
        result.add(key, item)
    for name, reason in unsure.items():
        if name.rpartition(".")[0] == where and name.rpartition(".")[2] not in entries:
            result.add(tomlkit.comment(_comment(f"{name.rpartition('.')[2]}: {reason}")))
    return result


def _inline(value: Mapping[str, object]) -> InlineTable:
    inline = tomlkit.inline_table()
    for key, entry in value.items():
        inline.add(key, entry)
    return inline


def _comment(reason: str) -> str:
    # Names from files may hold anything; a comment is one line of printable text.
    return "unsure: " + "".join(letter if letter.isprintable() else "?" for letter in reason)


def write_layout(
    path: str | Path, description: LayoutDescription, *, unsure: Mapping[str, str] = _NO_NOTES
) -> None:
    """Write a description to a TOML file; it appears whole or not at all."""
    with whole_file(path) as temporary:
        temporary.write_text(layout_to_toml(description, unsure=unsure), encoding="utf-8")
