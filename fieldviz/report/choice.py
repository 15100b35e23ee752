"""Which tables stand on the page, and which columns and rows of them."""

from __future__ import annotations

from dataclasses import replace

from fieldviz.diagnostics.tables import Table
from fieldviz.report.contents import ShownTable
from fieldviz.report.material import Material

__all__ = ["FOLDER", "shown_tables"]

FOLDER = "tables"
_MOST_ROWS = 200
_ALWAYS = (
    "wind_pairs", "pairs_by_radius", "field_scores", "times", "sheet_tracks", "sheet_events",
    "flux_sheets", "rings_and_gaps", "levels", "summary_over_time", "summary", "files",
)  # fmt: skip
# Of wide tables only these columns are shown.
_COLUMNS = {
    "wind_pairs": ("pair", "upper", "error of upper", "lower", "error of lower", "score", "angle",
                   "error of angle", "two-sigma interval from", "to", "word"),
    "flux_sheets": ("time", "kind", "radius", "polarity", "width", "flux", "share", "contrast",
                    "beta_z", "depletion", "separation", "coverage", "flags"),
    "levels": ("level", "blocks", "blocks at the midplane", "cells per H along r, median",
               "cells per H along theta, median", "cells per H along phi, median"),
}  # fmt: skip
# These are shown for the last time only; a series has its own table of all scalars.
_OF_LAST_TIME = ("flux_sheets", "rings_and_gaps", "levels")


def shown_tables(
    material: Material, tables: dict[str, Table]
) -> tuple[tuple[ShownTable, ...], tuple[tuple[str, Table], ...]]:
    """Part the tables into those on the page and those in files only.

    Parameters
    ----------
    material : Material
    tables : dict
        From `report_tables`.

    Returns
    -------
    tuple of ShownTable, tuple of (file, Table)
    """
    hidden = {"summary"} if material.is_series else set()
    shown = []
    for name in _ALWAYS:
        table = tables.get(name)
        if table is None or not table.rows or name in hidden:
            continue
        some, note = _part(table, last=material.records[-1].time)
        shown.append(ShownTable(some, note, _file(name)))
    on_page = {one.table.name for one in shown}
    rest = [(_file(name), table) for name, table in tables.items() if name not in on_page]
    return tuple(shown), tuple(rest)


def _file(name: str) -> str:
    return f"{FOLDER}/{name}.csv"


def _part(table: Table, last: float | None) -> tuple[Table, str]:
    """The part of a table that is shown, and in words what its file has besides."""
    names = [column.name for column in table.columns]
    notes, rows, title = [], table.rows, table.title
    if table.name in _OF_LAST_TIME and names[0] == "time":
        rows = tuple(row for row in rows if row[0] == last)
        title = f"{title}, t = {last:.6g}"
        notes.append("all times")
    if len(rows) > _MOST_ROWS:
        notes.append(f"all {len(rows)} rows")
        rows = rows[:_MOST_ROWS]
    wanted = _COLUMNS.get(table.name, names)
    places = [
        place
        for place, name in enumerate(names)
        if name in wanted and any(row[place] not in (None, "") for row in rows)
        and not (name == "time" and "all times" in notes)
    ]  # fmt: skip
    if any(name not in wanted for name in names):
        notes.append("all columns")
    part = replace(
        table,
        title=title,
        columns=tuple(table.columns[place] for place in places),
        rows=tuple(tuple(row[place] for place in places) for row in rows),
    )
    return part, " and ".join(notes)
