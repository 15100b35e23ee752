"""What the numbers of a report rest on, gathered from the notes of every diagnostic."""

from __future__ import annotations

import re
from typing import Any

from fieldviz.report.findings import times_text
from fieldviz.report.material import Material
from fieldviz.report.texts import listed, plain_number

__all__ = ["basis"]

Group = tuple[str, tuple[str, ...]]
_NUMBER = re.compile(r"\d+(\.\d+)?(e[+-]?\d+)?")
_CHOSEN = re.compile(r"our choice|threshold|counts as|rule of thumb")
_LACKING = re.compile(
    r"\bNaN\b|\bfloor|\bmask|left out|absent|clipped|without a number|^no |needs "
)


def basis(material: Material) -> tuple[Group, ...]:
    """Groups of notes under headings; what holds for some times only says for how many.

    Parameters
    ----------
    material : Material

    Returns
    -------
    tuple of (heading, notes)
    """
    notes = _notes(material)
    resolution = [text for part, text in notes if part == "resolution"]
    rest = [(part, text) for part, text in notes if part not in ("resolution", "snapshot")]
    chosen = [_named(material, *one) for one in rest if _CHOSEN.search(one[1])]
    rest = [one for one in rest if not _CHOSEN.search(one[1])]
    lacking = [_named(material, *one) for one in rest if _LACKING.search(one[1])]
    rest = [one for one in rest if not _LACKING.search(one[1])]
    groups: list[tuple[str, list[str]]] = [
        ("The data", [*_data(material), *(text for part, text in notes if part == "snapshot")]),
        ("Resolution", [*_cells(material), *resolution]),
        ("Masks, floors, and what is absent", [*_absent(material), *lacking]),
        ("Thresholds that are our choice", chosen),
    ]
    if material.verdict is not None:
        groups.append(("The words of the verdict", [str(material.verdict["naming"])]))
    for part in dict.fromkeys(part for part, _ in rest):
        own = [text for name, text in rest if name == part]
        groups.append((_title(material, part), own))
    return tuple((head, tuple(dict.fromkeys(some))) for head, some in groups if some)


def _numbers(material: Material) -> dict[str, Any]:
    return material.records[-1].numbers or {}


def _title(material: Material, part: str) -> str:
    return str(_numbers(material)["parts"].get(part, {}).get("title", part))


def _named(material: Material, part: str, text: str) -> str:
    return f"{_title(material, part)}: {text}"


def _notes(material: Material) -> list[tuple[str, str]]:
    """Part and text of all notes; the verdict's are those of the time mean.

    Of notes that differ in time by their numbers only, the last one stands.
    """
    found: dict[tuple[str, str], list[str]] = {}
    for record in material.records:
        table = record.table("notes")
        for part, kind, text in zip(table["part"], table["kind"], table["text"], strict=True):
            mean = material.is_series and part == "symmetry" and material.verdict is not None
            if kind == "note" and not mean:
                found.setdefault((part, _NUMBER.sub("#", text)), []).append(str(text))
    notes = [
        (part, texts[-1] + _how_often(texts, len(material.records)))
        for (part, _), texts in found.items()
    ]
    if material.is_series and material.verdict is not None:
        notes += [("symmetry", str(note)) for note in material.verdict["notes"]]
    return notes


def _how_often(texts: list[str], total: int) -> str:
    said = []
    if len(texts) < total:
        said.append(f"at {len(texts)} of {total} times")
    if len(set(texts)) > 1:
        said.append("with the numbers of the last of them")
    return f" ({', '.join(said)})" if said else ""


def _data(material: Material) -> list[str]:
    numbers, series = _numbers(material), material.series
    mesh, constants = numbers["mesh"], numbers["constants"]
    levels = sorted(set(mesh["levels"]))
    if material.is_series:
        kind = (
            f"A series of {len(material.records)} snapshots, {times_text(material)}. Errors of the "
            "verdict are of azimuth and time; numbers of the last snapshot have no error of time"
        )
    else:
        kind = f"A single snapshot, {times_text(material)}: no error knows what changes in time"
    gamma = constants["gamma"]
    return [
        kind,
        f"{plain_number(mesh['n_cells'])} cells in {mesh['n_blocks']} blocks, refinement levels "
        f"{listed([str(level) for level in levels])}; the {numbers['wedge']}",
        f"Fields: {listed(list(mesh['fields']))}",
        f"mu0 = {constants['mu0']:.6g}, GM = {constants['gm']:.6g}, "
        + (f"gamma = {gamma:.6g}" if gamma is not None else "no gamma: isothermal sound speed"),
        *series.notes,
    ]


def _cells(material: Material) -> list[str]:
    table = material.records[-1].table("notes")
    rows = zip(table["part"], table["kind"], table["text"], strict=True)
    return [str(text) for part, kind, text in rows if (part, kind) == ("resolution", "sentence")]


def _absent(material: Material) -> list[str]:
    """Parts without a result; of a series its own notes say so."""
    found = [] if not material.no_verdict else [f"Verdict: {material.no_verdict}"]
    if material.no_course:
        found.append(f"Maps over time: {material.no_course}")
    if not material.is_series:
        parts = _numbers(material)["parts"]
        found += [f"{p['title']}: {p['reason']}" for p in parts.values() if p["reason"]]
    return found
