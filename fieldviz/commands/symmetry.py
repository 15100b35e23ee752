"""`fieldviz symmetry`: the verdict on the wind with its tables, or JSON."""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path

from fieldviz.commands.given_files import opened, series_name
from fieldviz.commands.plain_text import aligned, wrapped
from fieldviz.commands.progress import tracked
from fieldviz.snapshots.series import SnapshotSeries
from fieldviz.symmetry.displaced import DisplacedMidplane
from fieldviz.symmetry.field_scores import FieldScores
from fieldviz.symmetry.pairs import Pair
from fieldviz.symmetry.verdict import short_error
from fieldviz.symmetry.wind_symmetry import Symmetry, wind_symmetry, wind_symmetry_of_series

__all__ = ["run"]


def run(
    files: Sequence[Path],
    *,
    layout: Path | None,
    scale_heights: float,
    thickness: float | None,
    r_range: tuple[float, float] | None,
    as_json: bool,
) -> str:
    """Judge a snapshot, or a series of several files or a pattern; return the text for stdout."""
    series = opened(files, layout)
    how = {"scale_heights": scale_heights, "thickness": thickness, "r_range": r_range}
    if len(series) == 1:
        result = wind_symmetry(series[0], **how)  # type: ignore[arg-type]
    else:
        snapshots = tracked(series, "reading snapshots", len(series))
        result = wind_symmetry_of_series(snapshots, **how)  # type: ignore[arg-type]
    if as_json:
        head: dict[str, object] = {"file": str(series.paths[0])}
        if len(series) > 1:
            head = {"files": [str(path) for path in series.paths]}
        return json.dumps({**head, **result.to_dict()}, indent=2, allow_nan=False)
    return _text(series, result)


def _text(series: SnapshotSeries, result: Symmetry) -> str:
    heading = series_name(series)
    if len(series) > 1:
        heading += f", mean of {len(result.times)} snapshots"
    rows: list[tuple[str, ...]] = [
        ("pair", "upper", "lower", "score", "angle (degrees)", "two-sigma interval", "word")
    ]
    shown = [*result.pairs, *([result.lean] if result.lean is not None else [])]
    rows += [_row(pair) for pair in shown]
    lines = [result.sentence, "", heading, *aligned(rows), ""]
    lines += ["by radius", *aligned(_band_rows(result)), ""]
    if result.field_scores is not None:
        lines += ["fields, scores of azimuth mean", *aligned(_score_rows(result.field_scores)), ""]
    if result.displaced is not None and result.displaced.scores:
        lines += ["about the magnetic midplane", *aligned(_displaced_rows(result.displaced)), ""]
    lines += ["naming", wrapped(result.naming), ""]
    remarks = [f"{pair.name}: {pair.unit}" for pair in shown]
    remarks += [f"{pair.name}: {_source(pair)}" for pair in shown]
    remarks += [f"{pair.name}: {note}" for pair in shown for note in pair.notes]
    remarks += result.notes
    remarks += result.field_scores.notes if result.field_scores is not None else ()
    if series.dropped:
        count = len(series.dropped)
        remarks.append(f"{count} files of a time that was there already were dropped")
    lines += ["what the numbers rest on", *map(wrapped, remarks)]
    return "\n".join(lines)


def _source(pair: Pair) -> str:
    known = pair.interval is not None
    return f"errors from {pair.error_source}" if known else pair.error_source


def _row(pair: Pair) -> tuple[str, ...]:
    interval = "no estimate"
    if pair.interval is not None:
        interval = f"{_signed(pair.interval[0])} to {_signed(pair.interval[1])}"
    return (
        pair.name,
        _with_error(f"{pair.upper:.4g}", pair.upper_error),
        _with_error(f"{pair.lower:.4g}", pair.lower_error),
        _with_error(f"{pair.score:+.3f}", pair.score_error),
        _angle(pair.angle, pair.angle_error),
        interval,
        pair.word,
    )


def _with_error(text: str, error: float | None) -> str:
    return text if error is None else f"{text} ± {error:.2g}"


def _signed(angle: float) -> str:
    # Adding zero turns -0.0 into 0.0.
    return f"{round(angle, 1) + 0.0:+.1f}"


def _angle(angle: float, error: float | None) -> str:
    return _signed(angle) if error is None else f"{_signed(angle)} ± {short_error(error)}"


def _band_rows(result: Symmetry) -> list[tuple[str, ...]]:
    rows = [("radii", *(f"{pair.name} score, angle, word" for pair in result.pairs))]
    for parts in zip(*(pair.bands for pair in result.pairs), strict=True):
        words = (
            f"{band.score:+.3f}  {_angle(band.angle, band.angle_error)}  {band.word}"
            for band in parts
        )
        rows.append((f"{parts[0].r_low:.3g} to {parts[0].r_high:.3g}", *words))
    return rows


def _score_rows(scores: FieldScores) -> list[tuple[str, ...]]:
    bands = scores.scores[0].bands
    radii = [f"{band.r_low:.3g} to {band.r_high:.3g}" for band in bands]
    rows = [("field", "score", "full field", "word", *radii)]
    for score in scores.scores:
        parts = (f"{band.score:+.3f}" for band in score.bands)
        total = f"{score.score:+.3f}", f"{score.full_score:+.3f}"
        rows.append((score.name, *total, score.word, *parts))
    return rows


def _displaced_rows(displaced: DisplacedMidplane) -> list[tuple[str, ...]]:
    rows: list[tuple[str, ...]] = [
        ("field", "where", "about pi/2", f"about {displaced.displacement:+.2g} H", "word")
    ]
    rows += [
        (s.name, s.region, f"{s.about_midplane:+.3f}", f"{s.about_displaced:+.3f}", s.word)
        for s in displaced.scores
    ]
    return rows
