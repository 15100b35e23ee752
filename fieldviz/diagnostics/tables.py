"""Tables of numbers with units, and their text as comma-separated values."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from fieldviz.diagnostics.dimensions import Dimension, physical_factor
from fieldviz.wedge.typing import Array
from fieldviz.wedge.units import UnitScales

__all__ = ["Column", "Table", "profile_table"]

Cell = float | int | str | None
NO_UNIT = Dimension()


@dataclass(frozen=True)
class Column:
    """Head of a column.

    Attributes
    ----------
    name : str
    unit : str
        In words; empty for words and for numbers without unit.
    dimension : Dimension or None
        Of code numbers; None for words and for what is in no code unit.
    """

    name: str
    unit: str = ""
    dimension: Dimension | None = None

    @property
    def head(self) -> str:
        """Name, and unit in brackets."""
        return f"{self.name} [{self.unit}]" if self.unit else self.name


@dataclass(frozen=True, eq=False)
class Table:
    """Rows of numbers and words under named columns.

    Attributes
    ----------
    name : str
        Fit for a file name.
    title : str
    columns : tuple of Column
    rows : tuple of tuple
        Numbers, words, or None where a number is absent.
    """

    name: str
    title: str
    columns: tuple[Column, ...]
    rows: tuple[tuple[Cell, ...], ...]

    def column(self, name: str) -> list[Cell]:
        """All cells under a name.

        Raises
        ------
        KeyError
            If there is no such column.
        """
        for place, column in enumerate(self.columns):
            if column.name == name:
                return [row[place] for row in self.rows]
        raise KeyError(name)

    def in_units(self, units: UnitScales, mu0: float) -> Table:
        """The same with a physical column after every one that the scales can convert."""
        columns: list[Column] = []
        factors: list[float | None] = []
        for column in self.columns:
            columns.append(column)
            known = None
            if column.dimension is not None and column.dimension != NO_UNIT:
                known = physical_factor(column.dimension, units, mu0)
            factors.append(None if known is None else known[0])
            if known is not None:
                columns.append(Column(column.name, known[1]))
        rows = tuple(_with_physical(row, factors) for row in self.rows)
        return replace(self, columns=tuple(columns), rows=rows)

    def csv(self) -> str:
        """Comma-separated text: one head line with units, then the rows; absent cells empty."""
        text = io.StringIO()
        writer = csv.writer(text, lineterminator="\n")
        writer.writerow([column.head for column in self.columns])
        for row in self.rows:
            writer.writerow(["" if _is_absent(cell) else _text(cell) for cell in row])
        return text.getvalue()


def profile_table(
    name: str, title: str, profiles: Mapping[str, tuple[Dimension | str, Array | None]]
) -> Table:
    """A table of profiles of one length.

    Parameters
    ----------
    name, title : str
    profiles : mapping of column name to (dimension or unit in words, array or None)
        Those that are None give no column.

    Returns
    -------
    Table
    """
    there = {
        key: (unit, np.asarray(values))
        for key, (unit, values) in profiles.items()
        if values is not None
    }
    columns = tuple(column_of(key, unit) for key, (unit, _) in there.items())
    rows: Iterable[Sequence[Cell]] = zip(
        *(values.tolist() for _, values in there.values()), strict=True
    )
    return Table(name, title, columns, tuple(tuple(row) for row in rows))


def column_of(name: str, unit: Dimension | str = "") -> Column:
    """A column with a code dimension, or with a unit in words."""
    if isinstance(unit, str):
        return Column(name, unit)
    if unit == NO_UNIT:
        return Column(name)
    return Column(name, unit.code_label, unit)


def _with_physical(row: Sequence[Cell], factors: Sequence[float | None]) -> tuple[Cell, ...]:
    cells: list[Cell] = []
    for cell, factor in zip(row, factors, strict=True):
        cells.append(cell)
        if factor is not None:
            cells.append(cell * factor if isinstance(cell, float | int) else None)
    return tuple(cells)


def _is_absent(cell: Cell) -> bool:
    return cell is None or (isinstance(cell, float) and np.isnan(cell))


def _text(cell: Cell) -> str:
    return f"{cell:.9g}" if isinstance(cell, float) else str(cell)
