"""`fieldviz lines`: trace lines, write them, and sum up where they end."""

from __future__ import annotations

import json
from collections import Counter
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from pathlib import Path

import numpy as np

from fieldviz.commands.wind_lines import wind_lines, wind_text
from fieldviz.errors import FieldvizError
from fieldviz.lines.line_set import LineSet
from fieldviz.lines.seeds import equal_flux_seeds, even_area_seeds
from fieldviz.lines.seeds_shapes import given_seeds
from fieldviz.lines.seeds_sheets import sheet_seeds
from fieldviz.lines.seeds_wind import wind_seeds
from fieldviz.lines.tracing import trace_lines
from fieldviz.output import whole_file
from fieldviz.sheets.flux_sheets import find_flux_sheets
from fieldviz.snapshots.reader import read_snapshot
from fieldviz.vtk_data.files import write_poly_data
from fieldviz.vtk_data.lines_to_vtk import lines_to_vtk
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["LineRequest", "run"]


@dataclass(frozen=True)
class LineRequest:
    """What to trace.

    Attributes
    ----------
    seeds : str
        "equal-flux", "even-area", "sheets", "wind" or "points".
    count : int
    radii : sequence of float
        Of the sheets, for seeds along sheets; found if empty.
    points : Path or None
        CSV of r, theta, phi, for given points.
    field : str
        "magnetic", "velocity" or "poloidal-velocity".
    interpolation : str
        "flux", "linear", or "auto": flux where the field is on faces.
    direction : str
    tolerance : float
    sample : sequence of str
    height : float
        Where wind seeds lie and the wind is judged from, in H.
    """

    seeds: str
    count: int
    radii: Sequence[float]
    points: Path | None
    field: str
    interpolation: str
    direction: str
    tolerance: float
    sample: Sequence[str]
    height: float = 4.0


def run(
    path: Path, output: Path | None, *, layout: Path | None, request: LineRequest, as_json: bool
) -> str:
    """Trace, write and sum up; return the text for stdout."""
    write = _writer(output) if output else None
    snapshot = read_snapshot(path, layout=layout)
    seeds = _seeds(snapshot, request)
    interpolation = request.interpolation
    if interpolation == "auto":
        on_faces = all(name in snapshot.faces for name in MAGNETIC)
        interpolation = "flux" if on_faces and request.field == "magnetic" else "linear"
    lines = trace_lines(
        snapshot,
        request.field.removeprefix("poloidal-"),
        seeds,
        direction=request.direction,
        interpolation=interpolation,
        tolerance=request.tolerance,
        poloidal=request.field.startswith("poloidal-"),
        sample=request.sample,
    )
    wind = None
    if lines.name == "velocity":
        lines, wind = wind_lines(snapshot, lines, request.height)
    if write and output:
        write(output, lines)
    summary = _summary(lines, request, interpolation)
    if wind:
        summary["wind"] = wind
    if as_json:
        return json.dumps(
            {"file": str(path), "output": output and str(output), **summary},
            indent=2,
            allow_nan=False,
        )
    return _text(path, output, summary)


def _seeds(snapshot: Snapshot, request: LineRequest) -> Array:
    if request.seeds == "points":
        return given_seeds(_read_points(request.points))
    if request.seeds == "sheets":
        sheets = request.radii or find_flux_sheets(snapshot)
        if not sheets:
            raise FieldvizError(
                "Cannot place seeds along sheets: expected at least one flux sheet, found none; "
                "name radii with --radii, or use other seeds."
            )
        return sheet_seeds(snapshot, list(sheets), request.count)
    makers: dict[str, Callable[[Snapshot, int], Array]] = {
        "equal-flux": equal_flux_seeds,
        "even-area": even_area_seeds,
        "wind": partial(wind_seeds, scale_heights=request.height),
    }
    return makers[request.seeds](snapshot, request.count)


def _read_points(path: Path | None) -> Array:
    if path is None:
        raise FieldvizError(
            "Cannot place seeds at points: expected a CSV file of r, theta, phi, got none; name "
            "it with --points."
        )
    try:
        return np.loadtxt(path, delimiter=",", ndmin=2, comments="#")
    except (OSError, ValueError) as error:
        reason = str(error).splitlines()[0]
        raise FieldvizError(
            f"Cannot read the points in {path}: expected lines 'r,theta,phi' (radians, '#' before "
            f"remarks), got '{reason}'; mend the file."
        ) from error


def _writer(output: Path) -> Callable[[Path, LineSet], None]:
    writers = {".vtp": _write_vtp, ".csv": _write_csv, ".npz": _write_npz}
    if output.suffix not in writers:
        raise FieldvizError(
            f"Cannot write lines to {output}: expected a name ending in {', '.join(writers)}, got "
            f"'{output.suffix}'; rename the output."
        )
    return writers[output.suffix]


def _write_vtp(output: Path, lines: LineSet) -> None:
    write_poly_data(output, lines_to_vtk(lines))


def _write_csv(output: Path, lines: LineSet) -> None:
    number = np.repeat(np.arange(len(lines)), np.diff(lines.offsets))
    columns = [number, *lines.spherical.T, *lines.points.T, *lines.fields.values()]
    names = ["line", "r", "theta", "phi", "x", "y", "z", *lines.fields]
    formats = ["%d"] + ["%.17g"] * (len(columns) - 1)
    with whole_file(output) as temporary:
        np.savetxt(
            temporary, np.column_stack(columns), fmt=formats, delimiter=",", header=",".join(names),
            comments="",
        )  # fmt: skip


def _write_npz(output: Path, lines: LineSet) -> None:
    with whole_file(output) as temporary:
        arrays = {
            "points": lines.points,
            "spherical": lines.spherical,
            "offsets": lines.offsets,
            "length": lines.length,
            "end_reason": np.array(lines.end_reason),
        }
        arrays |= {f"field_{name}": values for name, values in lines.fields.items()}
        np.savez_compressed(temporary, allow_pickle=False, **arrays)


def _summary(lines: LineSet, request: LineRequest, interpolation: str) -> dict[str, object]:
    ends = Counter(lines.end_reason)
    shares = [float(v) for v in np.percentile(lines.length, (0, 50, 100))] if len(lines) else []
    crossings = np.bincount(lines.midplane_crossings()[0], minlength=len(lines))
    return {
        "field": request.field,
        "seeds": request.seeds,
        "interpolation": interpolation,
        "lines": len(lines),
        "points": int(lines.offsets[-1]),
        "length_least_median_most": shares,
        "cross_the_midplane": int(np.count_nonzero(crossings)),
        "ends": [{"start": a, "end": b, "lines": n} for (a, b), n in ends.most_common()],
    }


def _text(path: Path, output: Path | None, summary: dict[str, object]) -> str:
    lengths = summary["length_least_median_most"]
    ends = summary["ends"]
    assert isinstance(lengths, list)
    assert isinstance(ends, list)
    rows = [
        f"{summary['lines']} lines of the {summary['field']} field of {path.name}, "
        f"{summary['points']} points ({summary['seeds']} seeds, {summary['interpolation']} "
        "interpolation)",
    ]
    if lengths:
        rows.append("length    " + " / ".join(f"{v:.4g}" for v in lengths) + " (least/median/most)")
    rows.append(f"midplane  {summary['cross_the_midplane']} lines cross it")
    rows += ["", "  lines  start         end"]
    rows += [f"  {end['lines']:5d}  {end['start']:12s}  {end['end']}" for end in ends]
    wind = summary.get("wind")
    if isinstance(wind, dict):
        rows += wind_text(wind)
    return "\n".join([*rows, "", f"written to {output}"] if output else rows)
