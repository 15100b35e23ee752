"""The summary of a snapshot's numbers: one row for each scalar, and for each that is absent."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import TYPE_CHECKING, Any

import numpy as np

from fieldviz.derived.mach import MachNumbers, mach_surface
from fieldviz.diagnostics.absence import Absent, why_absent
from fieldviz.diagnostics.dimensions import (
    DENSITY,
    FLUX,
    LENGTH,
    MASS,
    PRESSURE,
    VELOCITY,
    Dimension,
    physical_factor,
)
from fieldviz.diagnostics.tables import NO_UNIT, Column, Table
from fieldviz.wedge.typing import Array

if TYPE_CHECKING:
    from fieldviz.diagnostics.snapshot_numbers import PartResult, SnapshotNumbers

__all__ = ["median", "summary_table"]

Value = float | int | str | None
Row = tuple[str, Value | Absent, Dimension | str]
_COLUMNS = (
    "part",
    "quantity",
    "value",
    "unit",
    "physical value",
    "physical unit",
    "absent because",
)


def summary_table(numbers: SnapshotNumbers) -> Table:
    """All scalars of all parts; what is absent stands there with its reason."""
    rows = [row for part in numbers.parts.values() for row in _rows_of(part, numbers)]
    return Table("summary", "All scalars", tuple(Column(name) for name in _COLUMNS), tuple(rows))


def _rows_of(part: PartResult, numbers: SnapshotNumbers) -> Iterator[tuple[Value, ...]]:
    if part.result is None:
        yield (part.name, part.title, None, "", None, "", part.reason)
        return
    for quantity, value, unit in _SCALARS[part.name](part.result):
        label = unit if isinstance(unit, str) else "" if unit == NO_UNIT else unit.code_label
        factor, physical_label = None, ""
        if isinstance(unit, Dimension) and unit != NO_UNIT:
            known = physical_factor(unit, numbers.units, numbers.mu0)
            factor, physical_label = known or (None, "")
        reason = ""
        if isinstance(value, Absent):
            reason, value = value.reason, None
        elif value is None or (isinstance(value, float) and np.isnan(value)):
            reason = why_absent(quantity, part.notes)
        physical = None
        if factor is not None and isinstance(value, float | int) and not reason:
            physical = value * factor
        yield (part.name, quantity, value, label, physical, physical_label, reason)


def median(values: Array | None) -> float | None:
    """Median of the finite values; None without."""
    if values is None:
        return None
    finite = np.asarray(values)[np.isfinite(values)]
    return float(np.median(finite)) if finite.size else None


def _thickness(found: Any) -> Iterator[Row]:
    yield "H/R, median over ln r", found.h, ""
    yield "H/R, 16 percent", found.spread[0], ""
    yield "H/R, 84 percent", found.spread[1], ""


def _structure(found: Any) -> Iterator[Row]:
    yield "mass of the wedge", found.mass, MASS
    yield "H/R from the sound speed, median", median(found.h_sound), ""
    yield "H/R from the spread of the density, median", median(found.h_spread), ""
    yield "rings", len(found.rings), ""
    yield "gaps", len(found.gaps), ""
    yield "contrast of the surface density over its background", found.contrast, ""
    deepest = max(found.gaps, key=lambda gap: gap.depth, default=None)
    if deepest is not None:
        yield "radius of the deepest gap", deepest.radius, LENGTH
        yield "its depth", deepest.depth, ""
    if found.pressure_maxima is not None:
        yield "pressure maxima", len(found.pressure_maxima), ""


def _plasma(found: Any) -> Iterator[Row]:
    yield "beta of the net vertical field, median over the midplane", median(found.beta_z), ""
    for name, table in (("total", found.beta_total), ("mean", found.beta_mean)):
        yield f"beta of the {name} field, median of the wedge", median(table), ""
    yield "Alfven speed, median of the wedge", median(found.alfven), VELOCITY
    yield "ambipolar Elsasser number, median of the wedge", median(found.ambipolar), ""
    yield "ohmic Elsasser number, median of the wedge", median(found.ohmic), ""


def _stresses(found: Any) -> Iterator[Row]:
    yield "alpha", found.alpha, ""
    yield "alpha, Maxwell", found.alpha_maxwell, ""
    yield "alpha, Reynolds", found.alpha_reynolds, ""
    for cone, share in zip(found.wind, found.alpha_wind, strict=True):
        yield f"alpha of the wind, {cone.side} cone, median", median(share), ""
        yield f"share of the {cone.side} cone where the field extracts", cone.extracting, ""
        yield f"wind stress, {cone.side} cone, median", median(cone.total), PRESSURE


def _turbulence(found: Any) -> Iterator[Row]:
    near = np.abs(found.heights) == np.abs(found.heights).min()
    for name in ("r", "theta", "phi"):
        profile = getattr(found, f"profile_{name}")
        value = None if profile is None else float(np.sqrt(np.mean(profile[near] ** 2)))
        yield f"turbulent speed along {name} at the midplane over the sound speed", value, ""


def _mach(found: MachNumbers) -> Iterator[Row]:
    yield "largest poloidal speed", float(np.nanmax(found.speed, initial=0.0)), VELOCITY
    for kind in ("sonic", "alfven", "fast", "slow"):
        table = getattr(found, kind)
        if table is None:
            yield f"{kind} surface", None, ""
            continue
        for surface in mach_surface(found, kind):
            crossed = surface.count > 0
            angle = np.abs(surface.outermost_theta - 0.5 * np.pi)
            yield f"{kind} surface, {surface.side}: share of columns", float(crossed.mean()), ""
            if crossed.any():
                words = f"{kind} surface, {surface.side}: angle from the midplane, median"
                yield words, median(angle), "rad"


def _flux_function(found: Any) -> Iterator[Row]:
    yield "span of the flux function", float(np.ptp(found.psi)), FLUX
    yield "largest difference between two paths over the largest value", found.path_mismatch, ""


def _flux_sheets(found: Any) -> Iterator[Row]:
    yield "flux sheets", len(found.sheets), ""
    yield "patches", len(found.patches), ""
    yield "net flux of the range", found.total_flux, FLUX
    yield "flux without sign of the azimuth mean", found.unsigned_flux, FLUX
    relation = found.relation
    names = ("pearson", "pearson_chance", "spearman", "spearman_chance", "n_effective", "best_lag")
    for name in names:
        unit = "H" if name == "best_lag" else ""
        words = f"B_z and surface density: {name.replace('_', ' ')}"
        yield words, None if relation is None else getattr(relation, name), unit


def _magnetic_midplane(found: Any) -> Iterator[Row]:
    yield "turn of B_phi", found.word, ""
    yield "share of columns in which B_phi turns", found.share, ""
    yield "height of the magnetic midplane, median", found.median, "H"
    yield "its 16 percent", found.spread[0], "H"
    yield "its 84 percent", found.spread[1], "H"
    yield "height of the ridge of |J_r|, median", found.ridge_median, "H"


def _current_sheets(found: Any) -> Iterator[Row]:
    yield "share of the volume within current sheets", found.share_of_volume, ""
    yield "share of |J|", found.share_of_current, ""
    yield "share of |J|^2", found.share_of_square, ""
    yield "height of the ridge of |J|, median", found.ridge.median, "H"
    yield "full width at half maximum, median", found.ridge.width_median, "H"
    yield "cells across it, median", found.ridge.cells_per_width, ""
    yield "width of current sheets", found.ridge.word, ""


def _wind_lines(found: Any) -> Iterator[Row]:
    points = found.points
    sides = np.array(points.side)
    for side in ("upper", "lower"):
        here = sides == side
        yield f"lines, {side}", int(here.sum()), ""
        if not here.any():
            continue
        crossed = np.isfinite(points.alfven.arc[here])
        yield f"share that passes the Alfven point, {side}", float(crossed.mean()), ""
        for name in ("lambda_A", "lambda_l", "kappa"):
            yield f"{name}, {side}, median", median(getattr(points, name)[here]), ""
        limits = points.lambda_A_is_limit[here]
        yield f"share of lambda_A that are lower limits, {side}", float(limits.mean()), ""
        for name in ("exit_speed", "energy_speed", "cold_speed"):
            words = f"{name.replace('_', ' ')}, {side}, median"
            yield words, median(getattr(points, name)[here]), VELOCITY
        for name, one in points.invariants.statistics.items():
            drift = median(one.drift[here])
            why = next((reason for reason in np.array(one.reason)[here] if reason), "")
            words = f"drift of {name}, {side}, median"
            yield words, Absent(str(why)) if drift is None and why else drift, ""


def _symmetry(found: Any) -> Iterator[Row]:
    yield "verdict", found.word, ""
    for pair in found.pairs:
        for side in ("upper", "lower"):
            yield f"{pair.name}, {side}", getattr(pair, side), pair.unit
        yield f"{pair.name}: score", pair.score, ""
        yield f"{pair.name}: angle", pair.angle, "degrees"
        error = Absent(pair.error_source) if pair.angle_error is None else pair.angle_error
        yield f"{pair.name}: error of the angle", error, "degrees"
        yield f"{pair.name}: word", pair.word, ""
    if found.lean is not None:
        yield "lean of the field, upper", found.lean.upper, found.lean.unit
        yield "lean of the field, lower", found.lean.lower, found.lean.unit
    for one in () if found.field_scores is None else found.field_scores.scores:
        yield f"score of {one.name}, azimuth mean", one.score, ""
        yield f"score of {one.name}, full field", one.full_score, ""


def _resolution(found: Any) -> Iterator[Row]:
    yield "verdict", found.word, ""
    for q, name in ((found.q_theta, "theta"), (found.q_phi, "phi")):
        yield f"Q along {name}, median", None if q is None else q.median, ""
        words = f"share of the band with Q along {name} above its threshold"
        yield words, None if q is None else q.share_resolved, ""
    at = [level for level in found.levels if level.n_midplane]
    for axis in ("r", "theta", "phi") if at else ():
        yield f"cells per H along {axis} at the midplane, median", at[-1].median[axis], ""
    for floor, unit in ((found.density_floor, DENSITY), (found.pressure_floor, PRESSURE)):
        if floor is not None and floor.value is not None:
            yield f"floor of the {floor.name}", floor.value, unit
            yield f"share of the volume at the floor of the {floor.name}", floor.share_of_volume, ""
    for name, share in found.nan_shares.items():
        if share:
            yield f"share of cells of {name} without a number", share, ""


def _divergence(found: Any) -> Iterator[Row]:
    yield "largest |sum of fluxes| over the sum of |fluxes| of a cell", found.face, ""
    yield "rms |div B| dx/|B| of cell values, a truncation error", found.cell, ""


def _outflow(found: Any) -> Iterator[Row]:
    from fieldviz.diagnostics.outflow_rows import outflow_scalars

    return outflow_scalars(found)


_SCALARS: dict[str, Callable[[Any], Iterator[Row]]] = {
    "thickness": _thickness,
    "structure": _structure,
    "plasma": _plasma,
    "stresses": _stresses,
    "turbulence": _turbulence,
    "mach": _mach,
    "flux_function": _flux_function,
    "flux_sheets": _flux_sheets,
    "magnetic_midplane": _magnetic_midplane,
    "current_sheets": _current_sheets,
    "outflow": _outflow,
    "wind_lines": _wind_lines,
    "symmetry": _symmetry,
    "resolution": _resolution,
    "divergence": _divergence,
}
