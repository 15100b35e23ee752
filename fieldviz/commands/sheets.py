"""`fieldviz sheets`: the flux sheets of a snapshot, or their tracks through a series."""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from fieldviz.commands.given_files import opened, series_name
from fieldviz.commands.plain_text import aligned, number, wrapped
from fieldviz.commands.progress import tracked
from fieldviz.diagnostics.plain import plain
from fieldviz.sheets.flux_sheets import find_flux_sheets
from fieldviz.sheets.sheet_history import SheetHistory
from fieldviz.sheets.sheet_records import FluxSheet, FluxSheets
from fieldviz.sheets.tracking import track_flux_sheets

__all__ = ["run"]


def run(
    files: Sequence[Path],
    *,
    layout: Path | None,
    thickness: float | None,
    r_range: tuple[float, float] | None,
    as_json: bool,
) -> str:
    """Find the sheets, and follow them where there are several files; return the text."""
    series = opened(files, layout)
    search: dict[str, Any] = {"thickness": thickness, "r_range": r_range}
    if len(series) == 1:
        sheets = find_flux_sheets(series[0], **search)
        head: dict[str, object] = {"file": str(series.paths[0])}
        found: FluxSheets | SheetHistory = sheets
        lines = _sheets_text(sheets)
    else:
        snapshots = tracked(series, "finding sheets", len(series))
        found = track_flux_sheets(snapshots, **search)
        head = {"files": [str(path) for path in series.paths]}
        lines = _history_text(found)
    if as_json:
        numbers: dict[str, object] = plain(found)  # type: ignore[assignment]
        return json.dumps({**head, **numbers}, indent=2, allow_nan=False)
    remarks = list(found.notes)
    if series.dropped:
        count = len(series.dropped)
        remarks.append(f"{count} files of a time that was there already were dropped")
    first, *rest = lines
    rests_on = ["", "what the numbers rest on", *map(wrapped, remarks)]
    return "\n".join([first, "", series_name(series), *rest, *rests_on])


def _sheets_text(found: FluxSheets) -> list[str]:
    lines = [_counted(len(found), "flux sheet"), *aligned(_rows(found.sheets))]
    if found.patches:
        lines += [
            "",
            "patches: they cover too little of the azimuth",
            *aligned(_rows(found.patches)),
        ]
    relation = found.relation
    if relation is not None:
        lines += [
            "",
            f"B_z and surface density: Pearson {relation.pearson:+.3f} (chance "
            f"{relation.pearson_chance:.2g}), Spearman {relation.spearman:+.3f} (chance "
            f"{relation.spearman_chance:.2g})",
        ]
    return lines


def _counted(count: int, word: str) -> str:
    return f"{count} {word}{'' if count == 1 else 's'}"


def _rows(sheets: Sequence[FluxSheet]) -> list[tuple[str, ...]]:
    heads = ("radius", "polarity", "width (H)", "flux", "share", "peak/background", "beta_z",
             "Sigma/background", "to next (H)", "coverage", "flags")  # fmt: skip
    rows = [
        (
            number(one.radius), "up" if one.polarity > 0 else "down", number(one.width, 3),
            number(one.flux), number(one.share, 3), number(one.contrast, 3), number(one.beta_z, 3),
            number(one.depletion, 3), number(one.separation, 3), number(one.coverage, 3),
            ", ".join(one.flags) or "-",
        )
        for one in sheets
    ]  # fmt: skip
    return [heads, *rows]


def _history_text(found: SheetHistory) -> list[str]:
    kinds = dict.fromkeys(event.kind for event in found.events)
    events = [f"{event.kind}: {len(found.events_of(event.kind))}" for event in found.events]
    said = ", ".join(dict.fromkeys(events)) if kinds else "no events"
    heads = ("track", "begins as", "ends as", "seen at t", "radius", "mean flux",
             "lifetime (local orbits)")  # fmt: skip
    rows = [
        (
            str(one.number), one.begin, one.end, f"{one.times[0]:.4g} to {one.times[-1]:.4g}",
            f"{one.radii[0]:.4g} to {one.radii[-1]:.4g}", number(float(one.fluxes.mean())),
            ("longer than " if one.censored else "") + number(one.lifetime, 3),
        )
        for one in found.tracks
    ]  # fmt: skip
    lines = [f"{_counted(len(found.tracks), 'track')} of flux sheets; {said}"]
    if rows:
        lines += aligned([heads, *rows])
    if found.events:
        happened = [
            (one.kind, f"{one.after:.4g} to {one.time:.4g}", ", ".join(map(str, one.tracks)),
             number(one.radius))
            for one in found.events
        ]  # fmt: skip
        lines += ["", "events", *aligned([("event", "between t", "tracks", "radius"), *happened])]
    return lines
