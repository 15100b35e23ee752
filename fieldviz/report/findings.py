"""What a report says first: the verdict, further sentences, and the numbers of first rank."""

from __future__ import annotations

from typing import Any

from fieldviz.diagnostics.series_numbers import SnapshotRecord
from fieldviz.report.contents import Figure
from fieldviz.report.material import Material
from fieldviz.report.tables import scalar_of
from fieldviz.report.texts import listed, plain_number, sentence_case

__all__ = ["figures", "kicker", "leads", "times_text", "verdict"]

_FIGURES = (
    ("Flux sheets", "flux_sheets", "flux sheets"),
    ("Mass loss above", "outflow", "mass loss, upper"),
    ("Mass loss below", "outflow", "mass loss, lower"),
    ("Accretion, innermost sphere", "outflow", "accretion at the innermost sphere"),
    ("Lever arm", "outflow", "lever arm, total"),
    ("\N{GREEK SMALL LETTER ALPHA}, stress over pressure", "stresses", "alpha"),
    ("H/R", "thickness", "H/R, median over ln r"),
    ("Resolution", "resolution", "verdict"),
)


def times_text(material: Material) -> str:
    """The time, or the times, of the data."""
    times = material.series.times
    if len(times) == 1:
        return f"t = {plain_number(float(times[0]), 6)}"
    return f"t = {plain_number(float(times[0]), 6)} to {plain_number(float(times[-1]), 6)}"


def kicker(material: Material) -> str:
    """What the data are, in a few words."""
    count = len(material.records)
    kind = f"series of {count} snapshots" if count > 1 else "single snapshot"
    return f"{kind}, {times_text(material)}"


def verdict(material: Material) -> tuple[str, str]:
    """The verdict in a sentence, and what stands in brackets after it."""
    if material.verdict is None:
        return "No verdict on the wind.", sentence_case(material.no_verdict)
    sentence, _, rest = str(material.verdict["sentence"]).partition(" (")
    aside = rest[:-1] if rest.endswith(")") else rest
    if material.is_series:
        n = len(material.verdict["times"])
        aside = "; ".join(filter(None, (f"time mean of {n} snapshots", aside)))
    return sentence_case(sentence), sentence_case(aside)


def leads(material: Material) -> tuple[str, ...]:
    """Sentences on the sheets, the outflow and their history."""
    record = material.records[-1]
    said = [_sheets(record), _sentence_of(record, "outflow"), _history(material)]
    when = f"At t = {plain_number(record.time or 0.0, 6)}: " if material.is_series else ""
    found = [f"{when}{text}" if place < 2 else text for place, text in enumerate(said) if text]
    return tuple(map(sentence_case, found))


def figures(material: Material) -> tuple[Figure, ...]:
    """Numbers of first rank, those that are there."""
    found = []
    for name, part, quantity in _FIGURES:
        known = scalar_of(material.records[-1], part, quantity)
        if known is not None:
            value, unit = known
            text = value if isinstance(value, str) else plain_number(value, 3)
            found.append(Figure(name, text, unit))
    return tuple(found)


def _sheets(record: SnapshotRecord) -> str:
    found: dict[str, Any] | None = record.result("flux_sheets")
    if found is None:
        return ""
    sheets = found["sheets"]
    if not sheets:
        return "no flux sheet was found"
    radii = listed([plain_number(float(one["radius"]), 3) for one in sheets])
    shares = [one["share"] for one in sheets if one["share"] is not None]
    share = f", with {100 * sum(shares):.0f} % of the net flux" if shares else ""
    word = "sheet" if len(sheets) == 1 else "sheets"
    return f"{len(sheets)} flux {word} at r = {radii}{share}"


def _sentence_of(record: SnapshotRecord, part: str) -> str:
    table = record.table("notes")
    rows = zip(table.get("part", ()), table.get("kind", ()), table.get("text", ()), strict=True)
    return next((str(text) for name, kind, text in rows if (name, kind) == (part, "sentence")), "")


def _history(material: Material) -> str:
    if material.course is None or material.course.history is None:
        return ""
    history = material.course.history
    if not history.tracks:
        return ""
    told = [f"a {event.kind} seen at t = {plain_number(event.time, 4)}" for event in history.events]
    return f"{len(history.tracks)} tracks of flux sheets" + (f": {listed(told)}" if told else "")
