"""The tables of a report: those of every snapshot under each other, and those of the whole."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import Any

import numpy as np

from fieldviz.diagnostics.dimensions import FLUX, LENGTH
from fieldviz.diagnostics.series_numbers import SnapshotRecord
from fieldviz.diagnostics.tables import Column, Table, column_of
from fieldviz.report.material import Material
from fieldviz.sheets.sheet_history import SheetHistory

__all__ = ["report_tables", "scalar_of"]

Row = tuple[Any, ...]
_TIME = Column("time", "code time")
_PAIRS = ("outflow", "bend", "torque", "lean")
_OF_PAIR = ("upper", "upper_error", "lower", "lower_error", "score", "score_error", "angle",
            "angle_error")  # fmt: skip
# What the table of times shows: heading, part and quantity of the summary.
_WATCHED = (
    ("flux sheets", "flux_sheets", "flux sheets"),
    ("mass loss, upper", "outflow", "mass loss, upper"),
    ("mass loss, lower", "outflow", "mass loss, lower"),
    ("accretion, innermost", "outflow", "accretion at the innermost sphere"),
    ("accretion, outermost", "outflow", "accretion at the outermost sphere"),
    ("alpha", "stresses", "alpha"),
    ("H/R", "thickness", "H/R, median over ln r"),
)


def report_tables(material: Material) -> dict[str, Table]:
    """All tables by name, each fit for a file of comma-separated values.

    Parameters
    ----------
    material : Material

    Returns
    -------
    dict of str to Table
        Of a series every table of its snapshots begins with the code time.
    """
    own: list[Table] = [_files(material)]
    if material.verdict is not None:
        own += [_pairs(material.verdict), _scores(material.verdict), _bands(material.verdict)]
    if material.is_series:
        own += [_times(material), _ranges(material)]
    if material.course is not None and material.course.history is not None:
        own += [*_history(material.course.history)]
    tables = {table.name: table for table in own if table.rows}
    names: dict[str, None] = {}
    for record in material.records:
        names |= dict.fromkeys(_stored(record))
    for name in names:
        tables.setdefault(name, _together(name, material.records))
    return tables


def scalar_of(record: SnapshotRecord, part: str, quantity: str) -> Row | None:
    """Value and unit of a quantity of the summary, physical where that is known; None if absent."""
    table = _stored(record).get("summary")
    for row in table["rows"] if table else ():
        if row[0] == part and row[1] == quantity and row[2] is not None:
            return (row[2], row[3]) if row[4] is None else (row[4], row[5])
    return None


def _stored(record: SnapshotRecord) -> dict[str, dict[str, Any]]:
    return {} if record.numbers is None else record.numbers["tables"]


def _together(name: str, records: Iterable[SnapshotRecord]) -> Table:
    """One table of all snapshots; columns that some of them lack are empty there."""
    found = [(record, _stored(record)[name]) for record in records if name in _stored(record)]
    several = len(found) > 1
    heads = [[(head["name"], head["unit"]) for head in table["columns"]] for _, table in found]
    columns = list(dict.fromkeys(head for some in heads for head in some))
    rows: list[Row] = []
    for (record, table), own in zip(found, heads, strict=True):
        places = [own.index(head) if head in own else None for head in columns]
        for row in table["rows"]:
            cells = (None if place is None else row[place] for place in places)
            rows.append((record.time, *cells) if several else tuple(cells))
    shown = tuple(Column(*head) for head in columns)
    return Table(name, found[0][1]["title"], (_TIME, *shown) if several else shown, tuple(rows))


def _files(material: Material) -> Table:
    series = material.series
    rows: list[Row] = []
    for record in series.records:
        mesh = (record.numbers or {})["mesh"]
        levels = ", ".join(map(str, sorted(set(mesh["levels"]))))
        rows.append((record.path.name, record.time, mesh["n_cells"], levels, "measured"))
    rows += [(path.name, None, None, "", "left out: same time") for path in series.dropped]
    rows += [(one.path.name, one.time, None, "", one.reason) for one in series.failed]
    columns = (Column("file"), _TIME, Column("cells"), Column("levels"), Column("state"))
    return Table("files", "Files", columns, tuple(rows))


def _pairs(verdict: dict[str, Any]) -> Table:
    heads = ("pair", "upper", "error of upper", "lower", "error of lower", "score",
             "error of score")  # fmt: skip
    columns = (
        *map(Column, heads),
        *(Column(name, "degrees") for name in ("angle", "error of angle", "two-sigma interval from",
                                               "to")),
        Column("word"),
        Column("what it is"),
    )  # fmt: skip
    rows = []
    for name in _PAIRS:
        pair = verdict.get(name)
        if pair is not None:
            low, high = pair["interval"] or (None, None)
            numbers = (pair[key] for key in _OF_PAIR)
            rows.append((name, *numbers, low, high, pair["word"], pair["unit"]))
    return Table("wind_pairs", "The three pairs of the wind, and the lean of its field", columns,
                 tuple(rows))  # fmt: skip


def _bands(verdict: dict[str, Any]) -> Table:
    """As the snapshots have it, but for the time mean of a series and with errors."""
    keys = ("r_low", "r_high", "upper", "lower", "score", "angle", "angle_error", "word")
    columns = (
        Column("pair"), column_of("r inner", LENGTH), column_of("r outer", LENGTH),
        Column("upper"), Column("lower"), Column("score"), Column("angle", "degrees"),
        Column("error of angle", "degrees"), Column("word"),
    )  # fmt: skip
    rows = [
        (name, *(band[key] for key in keys))
        for name in _PAIRS
        if verdict.get(name) is not None
        for band in verdict[name]["bands"]
    ]
    return Table("pairs_by_radius", "The pairs by radius", columns, tuple(rows))


def _scores(verdict: dict[str, Any]) -> Table:
    found = verdict.get("field_scores") or {"scores": []}
    columns = (
        Column("field"), Column("score of azimuth mean"), Column("score of full field"),
        Column("word"),
    )  # fmt: skip
    rows = [(s["name"], s["score"], s["full_score"], s["word"]) for s in found["scores"]]
    return Table("field_scores", "Mirror symmetry of the fields", columns, tuple(rows))


def _times(material: Material) -> Table:
    """One row for each snapshot."""
    units = {
        head: next((found[1] for record in material.records
                    if (found := scalar_of(record, part, quantity))), "")
        for head, part, quantity in _WATCHED
    }  # fmt: skip
    rows: list[Row] = []
    for record in material.records:
        judged = record.result("symmetry") or {}
        angles = ((judged.get(name) or {}).get("angle") for name in _PAIRS[:3])
        watched = (scalar_of(record, part, quantity) for _, part, quantity in _WATCHED)
        numbers = (None if one is None else one[0] for one in watched)
        rows.append((record.time, judged.get("word"), *angles, *numbers))
    columns = (
        _TIME,
        Column("verdict"),
        *(Column(f"{name} angle", "degrees") for name in _PAIRS[:3]),
        *(Column(head, unit) for head, unit in units.items()),
    )
    return Table("times", "The series in time", columns, tuple(rows))


def _ranges(material: Material) -> Table:
    """All scalars at the first and the last time, and their range in between."""
    found: dict[tuple[str, str, str], list[Any]] = {}
    for place, record in enumerate(material.records):
        for part, quantity, value, unit, *_ in _stored(record)["summary"]["rows"]:
            row = found.setdefault((part, quantity, unit), [None] * len(material.records))
            row[place] = value
    rows = [(*key, *_range(values)) for key, values in found.items()]
    heads = ("part", "quantity", "unit", "first", "last", "least", "greatest", "times with a value")
    return Table("summary_over_time", "All scalars over the series, code units",
                 tuple(map(Column, heads)), tuple(rows))  # fmt: skip


def _range(values: list[Any]) -> Row:
    known = [value for value in values if value is not None]
    numbers = [value for value in known if isinstance(value, int | float)]
    least, greatest = (min(numbers), max(numbers)) if numbers else (None, None)
    return values[0], values[-1], least, greatest, len(known)


def _history(history: SheetHistory) -> Iterator[Table]:
    code_time = "code time"
    columns: tuple[Column, ...] = (
        Column("track"), Column("begins as"), Column("ends as"), Column("first seen", code_time),
        Column("last seen", code_time), column_of("first radius", LENGTH),
        column_of("last radius", LENGTH), column_of("mean flux", FLUX),
        Column("lifetime", "local orbits"), Column("longer than seen"), Column("outputs missed"),
    )  # fmt: skip
    rows: list[Row] = [
        (
            one.number, one.begin, one.end, float(one.times[0]), float(one.times[-1]),
            float(one.radii[0]), float(one.radii[-1]), float(np.mean(one.fluxes)),
            float(one.lifetime), "yes" if one.censored else "no", one.missed,
        )
        for one in history.tracks
    ]  # fmt: skip
    yield Table("sheet_tracks", "Flux sheets through time", columns, tuple(rows))
    columns = (
        Column("event"), Column("after", code_time), Column("seen at", code_time),
        Column("tracks"), column_of("radius", LENGTH),
    )  # fmt: skip
    rows = [
        (event.kind, event.after, event.time, ", ".join(map(str, event.tracks)), event.radius)
        for event in history.events
    ]
    yield Table("sheet_events", "What happened to the sheets", columns, tuple(rows))
    columns = (
        Column("track"), Column("time", code_time), column_of("radius", LENGTH),
        column_of("flux", FLUX),
    )  # fmt: skip
    rows = [
        (one.number, float(time), float(radius), float(flux))
        for one in history.tracks
        for time, radius, flux in zip(one.times, one.radii, one.fluxes, strict=True)
    ]
    yield Table("sheet_positions", "Every sheet at every time", columns, tuple(rows))
