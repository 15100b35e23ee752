"""`fieldviz symmetry`: the verdict on the wind with a small table, or JSON."""

from __future__ import annotations

import json
import textwrap
from pathlib import Path

from fieldviz.snapshots.reader import read_snapshot
from fieldviz.symmetry.pairs import Pair
from fieldviz.symmetry.wind_symmetry import Symmetry, wind_symmetry

__all__ = ["run"]


def run(
    path: Path,
    *,
    layout: Path | None,
    scale_heights: float,
    thickness: float | None,
    r_range: tuple[float, float] | None,
    as_json: bool,
) -> str:
    """Judge one snapshot; return the text for stdout."""
    result = wind_symmetry(
        read_snapshot(path, layout=layout),
        scale_heights=scale_heights,
        thickness=thickness,
        r_range=r_range,
    )
    if as_json:
        return json.dumps({"file": str(path), **result.as_dict()}, indent=2, allow_nan=False)
    return _text(path, result)


def _text(path: Path, result: Symmetry) -> str:
    rows: list[tuple[str, ...]] = [("pair", "upper", "lower", "score", "angle (degrees)", "word")]
    rows += [_row(pair.name, pair) for pair in result.pairs]
    lines = [result.sentence, "", f"{path.name}, t = {result.time:.6g}", *_aligned(rows), ""]
    lines += ["by radius", *_aligned(_band_rows(result)), ""]
    remarks = [f"{pair.name}: {pair.unit}" for pair in result.pairs]
    remarks += [f"{pair.name}: {note}" for pair in result.pairs for note in pair.notes]
    remarks += result.notes
    lines += ["what the numbers rest on", *map(_wrapped, remarks)]
    return "\n".join(lines)


def _wrapped(remark: str) -> str:
    return textwrap.fill(remark, 96, initial_indent="  - ", subsequent_indent="    ")


def _row(name: str, pair: Pair) -> tuple[str, ...]:
    angle = f"{round(pair.angle, 1) + 0.0:+.1f}"
    if pair.angle_error is not None:
        angle += f" ± {pair.angle_error:.1f}"
    return (
        name, f"{pair.upper:.4g}", f"{pair.lower:.4g}", f"{pair.score:+.3f}", angle, pair.word,
    )  # fmt: skip


def _band_rows(result: Symmetry) -> list[tuple[str, ...]]:
    rows = [("radii", *(f"{pair.name} angle, word" for pair in result.pairs))]
    for parts in zip(*(pair.bands for pair in result.pairs), strict=True):
        words = (f"{round(band.angle, 1) + 0.0:+.1f} {band.word}" for band in parts)
        rows.append((f"{parts[0].r_low:.3g} to {parts[0].r_high:.3g}", *words))
    return rows


def _aligned(rows: list[tuple[str, ...]]) -> list[str]:
    widths = [max(len(row[n]) for row in rows) for n in range(len(rows[0]))]
    return [
        "  " + "  ".join(c.ljust(w) for c, w in zip(r, widths, strict=True)).rstrip() for r in rows
    ]
