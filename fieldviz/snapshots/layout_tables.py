"""The tables of a layout description: what each may say, and the checks on every entry."""

from __future__ import annotations

import difflib
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, fields
from typing import Any, TypeVar

import numpy as np

from fieldviz.errors import LayoutError

__all__ = [
    "AXES",
    "AxesTable",
    "BlocksTable",
    "ConstantsTable",
    "CoordinateTable",
    "FieldTable",
    "StackTable",
    "TimeTable",
    "UnitTable",
    "nearest",
    "read_table",
    "table_entries",
]

AXES = ("phi", "theta", "r")
_ORDER_WORDS = ("variable", "block", *AXES, "one")
_MOST_GHOSTS = 64
Table = TypeVar("Table")


class WrongEntryError(Exception):
    """What was expected of an entry; the reader adds where it stands."""


def _text(value: object) -> str:
    if not isinstance(value, str) or not value:
        raise WrongEntryError("a text")
    return value


def _number(value: object) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float) or not np.isfinite(value):
        raise WrongEntryError("a finite number")
    return float(value)


def _non_zero(value: object) -> float:
    number = _number(value)
    if number == 0.0:
        raise WrongEntryError("a number other than 0")
    return number


def _number_or_text(value: object) -> float | str:
    return value if isinstance(value, str) and value else _number(value)


def _variable(value: object) -> int | str:
    if isinstance(value, int) and not isinstance(value, bool) and value >= 0:
        return value
    if isinstance(value, str) and value:
        return value
    raise WrongEntryError("a name from the stack's list, or a whole number counted from 0")


def _flag(value: object) -> bool:
    if not isinstance(value, bool):
        raise WrongEntryError("true or false")
    return value


def _sign(value: object) -> int:
    if isinstance(value, bool) or value not in (1, -1):
        raise WrongEntryError("1 or -1")
    return 1 if value == 1 else -1


def _names(value: object) -> tuple[str, ...]:
    if not isinstance(value, list) or not all(isinstance(name, str) for name in value):
        raise WrongEntryError("a list of texts")
    return tuple(value)


def _order(value: object) -> tuple[str, ...]:
    names = _names(value)
    for name in names:
        if name not in _ORDER_WORDS:
            raise WrongEntryError(
                f"axis names out of {', '.join(_ORDER_WORDS)}{nearest(name, _ORDER_WORDS)}"
            )
    counted = [name for name in names if name != "one"]
    if len(set(counted)) != len(counted) or not {"theta", "r"} <= set(names):
        raise WrongEntryError('each axis once, slowest first, "theta" and "r" among them')
    return names


def _ghosts(value: object) -> dict[str, int]:
    if not isinstance(value, dict):
        raise WrongEntryError("a table such as {r = 2}")
    for axis, count in value.items():
        if axis not in AXES:
            raise WrongEntryError(f"axes out of {', '.join(AXES)}{nearest(axis, AXES)}")
        if isinstance(count, bool) or not isinstance(count, int) or not 0 <= count <= _MOST_GHOSTS:
            raise WrongEntryError(f"whole numbers of layers, 0 to {_MOST_GHOSTS}")
    return dict(value)


def _bounds(value: object) -> tuple[float, float] | str:
    if isinstance(value, str) and value:
        return value
    if not isinstance(value, list) or len(value) != 2:
        raise WrongEntryError("two numbers, or where in the file they are")
    return _number(value[0]), _number(value[1])


def _choice(*words: str) -> Callable[[object], str]:
    def read(value: object) -> str:
        if value not in words:
            hint = nearest(str(value), words)
            raise WrongEntryError(f"one of {', '.join(repr(word) for word in words)}{hint}")
        return str(value)

    return read


def _entry(default: Any, read: Callable[[object], Any]) -> Any:
    return field(default=default, metadata={"read": read})


@dataclass(frozen=True)
class BlocksTable:
    """How blocks are stored.

    Attributes
    ----------
    stored : {"single", "axis", "groups"}
        One block; one axis of every dataset counts blocks; one group per block.
    groups : str
        Pattern of the groups' paths with * and ?, sorted as people count (2 before 10).
    level : str
        Where the levels are: a dataset, or "path@attribute"; empty: worked out from cell sizes.
    """

    stored: str = _entry("single", _choice("single", "axis", "groups"))
    groups: str = _entry("", _text)
    level: str = _entry("", _text)


@dataclass(frozen=True)
class AxesTable:
    """Order of axes, slowest first, and the ghost layers stored on both sides of each.

    Attributes
    ----------
    order : tuple of str
        Out of "variable", "block", "phi", "theta", "r", and "one" for an axis of length 1.
    ghost_cells : dict of str to int
    """

    order: tuple[str, ...] = _entry(AXES, _order)
    ghost_cells: Mapping[str, int] = field(default_factory=dict, metadata={"read": _ghosts})


@dataclass(frozen=True)
class CoordinateTable:
    """One coordinate: `edges`, `centres` or `bounds`, and what turns it into ours.

    Attributes
    ----------
    edges, centres : str
        Dataset (or "path@attribute") with one row for all blocks, or one row per block.
    bounds : (float, float) or str
        First and last edge in the order stored, or where in the file they are.
    spacing : {"", "uniform", "log"}
        Of the cells; empty: seen from the centres, uniform between bounds.
    transform : {"none", "ln", "log10"}
        What was applied to the radius before it was stored.
    scale : float
        Stored value times scale is the radius in code units, or the angle in `unit`.
    unit : {"radian", "degree"}
    measured_from : {"", "pole", "midplane"}
        Colatitude or latitude (positive north); empty: seen from the range where that is clear.
    """

    edges: str = _entry("", _text)
    centres: str = _entry("", _text)
    bounds: tuple[float, float] | str | None = _entry(None, _bounds)
    spacing: str = _entry("", _choice("uniform", "log"))
    transform: str = _entry("none", _choice("none", "ln", "log10"))
    scale: float = _entry(1.0, _non_zero)
    unit: str = _entry("radian", _choice("radian", "degree"))
    measured_from: str = _entry("", _choice("pole", "midplane"))


@dataclass(frozen=True)
class StackTable:
    """Several variables in one dataset.

    Attributes
    ----------
    dataset : str
    names : tuple of str
        Variables in the order stored.
    names_from : str
        Dataset or "path@attribute" that lists them, instead.
    order : tuple of str
        Where it differs from the order of [axes].
    """

    dataset: str = _entry("", _text)
    names: tuple[str, ...] = _entry((), _names)
    names_from: str = _entry("", _text)
    order: tuple[str, ...] = _entry((), _order)


@dataclass(frozen=True)
class FieldTable:
    """Where one field is: a `dataset`, or a `variable` of a `stack`.

    Attributes
    ----------
    dataset, stack : str
    variable : str or int
        Name in the stack's list, or position from 0.
    scale : float
        Stored value times scale times sign is the value in code units.
    sign : {1, -1}
    order : tuple of str
        Where it differs from the order of [axes].
    optional : bool
        The field may be missing from a file.
    """

    dataset: str = _entry("", _text)
    stack: str = _entry("", _text)
    variable: str | int | None = _entry(None, _variable)
    scale: float = _entry(1.0, _non_zero)
    sign: int = _entry(1, _sign)
    order: tuple[str, ...] = _entry((), _order)
    optional: bool = _entry(False, _flag)


@dataclass(frozen=True)
class TimeTable:
    """Where the time is: one of `attribute`, `dataset`, `file_name`, `value`.

    Attributes
    ----------
    attribute : str
        "path@name"; "@name" is an attribute of the root group.
    dataset : str
    file_name : str
        Regular expression with one group, which holds the number.
    value : float
    scale : float
        Number found times scale is the code time.
    """

    attribute: str = _entry("", _text)
    dataset: str = _entry("", _text)
    file_name: str = _entry("", _text)
    value: float | None = _entry(None, _number)
    scale: float = _entry(1.0, _non_zero)


@dataclass(frozen=True)
class ConstantsTable:
    """Constants, each a number or where in the file it is.

    Attributes
    ----------
    mu0, gm : float or str
    gamma : float, str or None
    title : str
        Plain text; with an @ the attribute that holds it.
    """

    mu0: float | str = _entry(1.0, _number_or_text)
    gm: float | str = _entry(1.0, _number_or_text)
    gamma: float | str | None = _entry(None, _number_or_text)
    title: str = _entry("", _text)


@dataclass(frozen=True)
class UnitTable:
    """One code unit: so many of `label`.

    Attributes
    ----------
    value : float or str
        A number, or where in the file it is.
    label : str
    """

    value: float | str = _entry(1.0, _number_or_text)
    label: str = _entry("code", _text)


def nearest(word: str, known: Iterable[str]) -> str:
    """Suggest the known word most like `word`, as " (did you mean ...?)", or nothing."""
    close = difflib.get_close_matches(word, list(known), n=1, cutoff=0.5)
    return f" (did you mean '{close[0]}'?)" if close else ""


def read_table(kind: type[Table], given: object, where: str, source: str) -> Table:
    """Turn a TOML table into its dataclass.

    Parameters
    ----------
    kind : dataclass type
    given : object
        What the TOML reader found.
    where, source : str
        Name of the table and of the description, for messages.

    Raises
    ------
    LayoutError
        If it is no table, has an unknown entry, or one of a wrong kind.
    """
    if not isinstance(given, dict):
        raise LayoutError(
            f"Cannot use {source}: expected [{where}] to be a table, got {given!r}; "
            f"write a line [{where}] and its entries below it."
        )
    readers = {item.name: item.metadata["read"] for item in fields(kind)}  # type: ignore[arg-type]
    values = {}
    for key, value in given.items():
        if key not in readers:
            raise LayoutError(
                f"Cannot use {source}: expected entries of [{where}] out of "
                f"{', '.join(readers)}, got '{key}'{nearest(key, readers)}; mend or remove it."
            )
        try:
            values[key] = readers[key](value)
        except WrongEntryError as error:
            raise LayoutError(
                f"Cannot use {source}: expected {key} of [{where}] to be {error}, got {value!r}; "
                "mend this entry."
            ) from None
    return kind(**values)


def table_entries(table: object) -> dict[str, Any]:
    """List the entries of a table that differ from their defaults, as TOML values."""
    blank = type(table)()
    entries = {}
    for item in fields(table):  # type: ignore[arg-type]
        value = getattr(table, item.name)
        if value != getattr(blank, item.name):
            entries[item.name] = list(value) if isinstance(value, tuple) else value
    return entries
