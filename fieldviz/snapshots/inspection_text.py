"""An inspection as plain text: aligned, no colours, fit for a terminal, a file or a comment."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence

from fieldviz.snapshots.inspection import DatasetReport, GridReport, Inspection

__all__ = ["format_inspection"]

_KINDS = {
    "native": "in fieldviz's own layout",
    "described": "read by a layout description",
    "unknown": "HDF5 file of a layout that is not known",
}
_LONGEST_VALUE = 60


def format_inspection(inspection: Inspection) -> str:
    """Write an inspection as plain text.

    Parameters
    ----------
    inspection : Inspection

    Returns
    -------
    str
        Lines without trailing blanks; the proposed layout description is not among them.
    """
    parts = [f"{inspection.path}: {_KINDS[inspection.kind]}"]
    facts = _facts(inspection)
    if facts:
        parts.append(_columns(facts))
    if inspection.fields:
        parts.append(_columns(_field_rows(inspection)))
    if inspection.datasets:
        parts.append(_columns(_dataset_rows(inspection.datasets)))
    if inspection.attributes:
        rows = [(name, _short(value)) for name, value in inspection.attributes.items()]
        parts.append(_columns([("attribute", "value"), *rows]))
    if inspection.warnings:
        parts.append("\n".join(f"warning: {line}" for line in inspection.warnings))
    elif inspection.kind != "unknown":
        parts.append("no warnings")
    return _printable("\n\n".join(parts))


def _facts(inspection: Inspection) -> list[tuple[str, str]]:
    facts = []
    if inspection.title:
        facts.append(("title", inspection.title))
    if inspection.time is not None:
        facts.append(("time", f"{inspection.time:.8g}"))
    if inspection.constants:
        named = (f"{name} = {value:.8g}" for name, value in inspection.constants.items())
        facts.append(("constants", ", ".join(named)))
    if inspection.units:
        named = (f"{name} = {words}" for name, words in inspection.units.items())
        facts.append(("code units", ", ".join(named)))
    if inspection.grid is not None:
        facts += _grid_facts(inspection.grid)
    if inspection.divergence:
        facts.append(("div B", _divergence_words(inspection)))
    return facts


def _grid_facts(grid: GridReport) -> list[tuple[str, str]]:
    shape = " x ".join(str(grid.block_shape[axis]) for axis in ("r", "theta", "phi"))
    blocks = "1 block" if grid.n_blocks == 1 else f"{grid.n_blocks} blocks"
    high, low = grid.degrees_from_midplane
    levels = ", ".join(f"{n} at level {level}" for level, n in grid.blocks_of_level.items())
    return [
        ("cells", f"{grid.n_cells} in {blocks} of {shape} (r x theta x phi)"),
        ("blocks", levels),
        ("r", f"{grid.r[0]:.6g} to {grid.r[1]:.6g}"),
        (
            "theta",
            f"{grid.theta[0]:.6g} to {grid.theta[1]:.6g} "
            f"({high:+.4g} to {low:+.4g} degrees from the midplane)",
        ),
        ("phi", f"{grid.phi[0]:.6g} to {grid.phi[1]:.6g}: {grid.azimuth}"),
    ]


def _divergence_words(inspection: Inspection) -> str:
    sizes, words = inspection.divergence, []
    if "face" in sizes:
        words.append(f"faces {sizes['face']:.2g} of a cell's fluxes (rounding, if all is well)")
    if "cell" in sizes:
        words.append(f"cells {sizes['cell']:.2g} of |B|/dx, rms (truncation error)")
    return "; ".join(words)


def _field_rows(inspection: Inspection) -> list[tuple[str, ...]]:
    rows: list[tuple[str, ...]] = [("field", "shape", "type", "minimum", "maximum", "unit")]
    for report in inspection.fields:
        rows.append(
            (
                f"{report.kind}/{report.name}",
                _shape(report.shape),
                report.stored_type,
                _number(report.minimum),
                _number(report.maximum),
                report.unit,
            )
        )
    return rows


def _dataset_rows(datasets: Iterable[DatasetReport]) -> list[tuple[str, ...]]:
    rows: list[tuple[str, ...]] = [("dataset", "shape", "type", "minimum", "maximum", "unit", "")]
    for report in datasets:
        found = report.range
        notes = [found.note] if found.note else []
        if 0 < found.share < 1:
            notes.append(f"range of the first {100 * found.share:.2g} %")
        if found.non_finite:
            notes.append(f"{found.non_finite} NaN or infinite")
        rows.append(
            (
                report.path,
                _shape(report.shape),
                report.stored_type,
                _number(found.minimum),
                _number(found.maximum),
                report.unit,
                "; ".join(notes),
            )
        )
    return rows


def _shape(shape: tuple[int, ...]) -> str:
    return " x ".join(str(n) for n in shape) or "one value"


def _number(value: float | None) -> str:
    return "-" if value is None else f"{value:.6g}"


def _short(value: object) -> str:
    words = str(value)
    return words if len(words) <= _LONGEST_VALUE else f"{words[: _LONGEST_VALUE - 3]}..."


def _columns(rows: Sequence[tuple[str, ...]]) -> str:
    widths = [max(len(row[n]) for row in rows) for n in range(len(rows[0]))]
    return "\n".join(
        "  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip()
        for row in rows
    )


def _printable(text: str) -> str:
    # Names in files may hold control characters, which could steer a terminal.
    return re.sub(r"[^\S\n ]|[^\x20-\U0010ffff\n]|[\x7f-\x9f]", "?", text)
