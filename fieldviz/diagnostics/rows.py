"""The tables of a snapshot's numbers beside the summary: profiles, sheets, bands, lines, notes."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import numpy as np

from fieldviz.diagnostics.dimensions import (
    DENSITY,
    FIELD,
    FLUX,
    LENGTH,
    PRESSURE,
    RATE,
    SURFACE_DENSITY,
    VELOCITY,
    Dimension,
)
from fieldviz.diagnostics.summary import summary_table
from fieldviz.diagnostics.tables import Table, column_of, profile_table
from fieldviz.wedge.typing import Array

if TYPE_CHECKING:
    from fieldviz.diagnostics.snapshot_numbers import SnapshotNumbers

__all__ = ["all_tables"]

Profiles = dict[str, tuple[Dimension | str, Array | None]]


def all_tables(numbers: SnapshotNumbers) -> tuple[Table, ...]:
    """The summary, and every table whose part gave a result."""
    tables = [summary_table(numbers), _radial(numbers)]
    for name, make in _TABLES:
        result = numbers.result(name)
        if result is not None:
            tables.append(make(result))
    tables.append(_notes(numbers))
    return tuple(table for table in tables if table.columns)


def _radial(numbers: SnapshotNumbers) -> Table:
    """Profiles on the cells at the midplane, which all parts share."""
    found: Profiles = {}
    structure: Any = numbers.result("structure")
    plasma: Any = numbers.result("plasma")
    stresses: Any = numbers.result("stresses")
    resolution: Any = numbers.result("resolution")
    edges = _first_edges(
        (structure, "r_edges"), (plasma, "profile_edges"), (stresses, "r_edges"),
        (resolution, "r_edges"),
    )  # fmt: skip
    if edges is None:
        return Table("radial", "Profiles at the midplane", (), ())
    found["r inner"], found["r outer"] = (LENGTH, edges[:-1]), (LENGTH, edges[1:])
    if structure is not None:
        found["surface density"] = SURFACE_DENSITY, structure.surface_density
        found["surface density over its background"] = "", structure.ratio
        found["H/R from the sound speed"] = "", structure.h_sound
        found["H/R from the spread of the density"] = "", structure.h_spread
        found["midplane density"] = DENSITY, structure.midplane_density
        found["midplane pressure"] = PRESSURE, structure.midplane_pressure
    if plasma is not None:
        found["net B_z"], found["beta_z"] = (FIELD, plasma.net_field), ("", plasma.beta_z)
    if stresses is not None:
        band = stresses.band
        found["Maxwell stress of the mean field"] = PRESSURE, band.maxwell_mean
        found["Maxwell stress, turbulent"] = PRESSURE, band.maxwell_turbulent
        found["Reynolds stress"] = PRESSURE, band.reynolds
        found["alpha, Maxwell"], found["alpha, Reynolds"] = (
            ("", band.alpha_maxwell),
            ("", band.alpha_reynolds),
        )
        for cone, share in zip(stresses.wind, stresses.alpha_wind, strict=True):
            found[f"wind stress, {cone.side}"] = PRESSURE, cone.total
            found[f"alpha of the wind, {cone.side}"] = "", share
    if resolution is not None:
        for name, q in (("theta", resolution.q_theta), ("phi", resolution.q_phi)):
            if q is not None:
                found[f"Q along {name}"], found[f"Q along {name}, net field"] = (
                    ("", q.actual),
                    ("", q.net),
                )
    return profile_table("radial", "Profiles at the midplane", found)


def _first_edges(*sources: tuple[Any, str]) -> Array | None:
    for result, name in sources:
        if result is not None:
            return np.asarray(getattr(result, name))
    return None


def _rings(found: Any) -> Table:
    heads = (("kind", ""), ("radius", LENGTH), ("ratio", ""), ("depth", ""), ("contrast", ""),
             ("cut by the wedge", ""))  # fmt: skip
    rows = [
        (one.kind, one.radius, one.ratio, one.depth, one.contrast, "yes" if one.at_edge else "no")
        for one in sorted((*found.rings, *found.gaps), key=lambda one: one.radius)
    ]
    return _table("rings_and_gaps", "Rings and gaps of the surface density", heads, rows)


_SHEET_COLUMNS: tuple[tuple[str, Dimension | str], ...] = (
    ("radius", LENGTH), ("polarity", ""), ("width", "H"), ("inner", LENGTH), ("outer", LENGTH),
    ("flux", FLUX), ("share", ""), ("unsigned_share", ""), ("contrast", ""), ("field", FIELD),
    ("beta_z", ""), ("depletion", ""), ("separation", "H"), ("flux_between", FLUX),
    ("field_between", FIELD), ("coverage", ""), ("wander", "H"), ("tilt", ""), ("bending", ""),
)  # fmt: skip


def _sheets(found: Any) -> Table:
    heads = (("kind", ""), *_SHEET_COLUMNS, ("flags", ""))
    rows = [
        (kind, *(getattr(one, name) for name, _ in _SHEET_COLUMNS), "; ".join(one.flags))
        for kind, some in (("sheet", found.sheets), ("patch", found.patches))
        for one in some
    ]
    return _table("flux_sheets", "Flux sheets and patches", heads, rows)


def _flux_profile(found: Any) -> Table:
    profile = found.profile
    per_length = Dimension(field=1, length=1)
    found_profiles: Profiles = {
        "r inner": (LENGTH, profile.r_edges[:-1]),
        "r outer": (LENGTH, profile.r_edges[1:]),
        "r <B_z>": (per_length, profile.f),
        "smoothed": (per_length, profile.smooth),
        "background": (per_length, profile.background),
        "spread": (per_length, profile.spread),
    }
    return profile_table("flux_profile", "Vertical flux near the midplane", found_profiles)


def _turbulence(found: Any) -> Table:
    profiles: Profiles = {"z/H": ("", found.heights)}
    for name in ("r", "theta", "phi"):
        profiles[f"sigma_{name}/c_s"] = "", getattr(found, f"profile_{name}")
    return profile_table("turbulence", "Turbulent speeds against height", profiles)


def _bands(found: Any) -> Table:
    heads = (("pair", ""), ("r inner", LENGTH), ("r outer", LENGTH), ("upper", "see pair"),
             ("lower", "see pair"), ("score", ""), ("angle", "degrees"), ("word", ""))  # fmt: skip
    rows = [
        (pair.name, b.r_low, b.r_high, b.upper, b.lower, b.score, b.angle, b.word)
        for pair in found.pairs
        for b in pair.bands
    ]
    return _table("wind_bands", "Pairs of the wind by radius", heads, rows)


def _levels(found: Any) -> Table:
    axes = ("r", "theta", "phi")
    heads = (("level", ""), ("blocks", ""), ("blocks at the midplane", ""),
             *((f"cells per H along {a}, median", "") for a in axes),
             *((f"cells per H along {a}, least", "") for a in axes))  # fmt: skip
    rows = [
        (one.level, one.n_blocks, one.n_midplane, *(one.median[a] for a in axes),
         *(one.least[a] for a in axes))
        for one in found.levels
    ]  # fmt: skip
    return _table("levels", "Cells per scale height at the midplane", heads, rows)


def _lines(found: Any) -> Table:
    points = found.points
    profiles: Profiles = {
        "side": ("", np.array(points.side)),
        "mass loss": (RATE, found.mass_loss),
        "launch r": (LENGTH, found.launch_radius),
        "launch theta": ("rad", found.launch_theta),
        "footpoint R_0": (LENGTH, points.footpoint),
        "Alfven radius R_A": (LENGTH, points.alfven.R),
        "lambda_A": ("", points.lambda_A),
        "lambda_A is a lower limit": ("", np.where(points.lambda_A_is_limit, "yes", "no")),
        "lambda_l": ("", points.lambda_l),
        "kappa": ("", points.kappa),
        "exit speed": (VELOCITY, points.exit_speed),
        "terminal speed from e": (VELOCITY, points.energy_speed),
        "terminal speed, cold": (VELOCITY, points.cold_speed),
    }
    for name, one in points.invariants.statistics.items():
        profiles[f"drift of {name}"] = "", one.drift
        profiles[f"word on {name}"] = "", np.array(one.word)
    return profile_table("wind_lines", "Streamlines of the mean wind", profiles)


def _outflow(found: Any) -> Table:
    from fieldviz.diagnostics.outflow_rows import outflow_table

    return outflow_table(found)


def _notes(numbers: SnapshotNumbers) -> Table:
    """What every part rests on, or why it is absent."""
    rows = [("snapshot", "note", note) for note in numbers.notes]
    for part in numbers.parts.values():
        if part.sentence and not part.reason:
            rows.append((part.name, "sentence", part.sentence))
        if part.reason:
            rows.append((part.name, "absent", part.reason))
        rows += [(part.name, "note", note) for note in part.notes]
    return _table("notes", "What the numbers rest on", (("part", ""), ("kind", ""), ("text", "")),
                  rows)  # fmt: skip


def _table(name: str, title: str, heads: Any, rows: list[Any]) -> Table:
    columns = tuple(column_of(head, unit) for head, unit in heads)
    return Table(name, title, columns, tuple(tuple(row) for row in rows))


_TABLES: tuple[tuple[str, Callable[[Any], Table]], ...] = (
    ("structure", _rings),
    ("flux_sheets", _sheets),
    ("flux_sheets", _flux_profile),
    ("turbulence", _turbulence),
    ("outflow", _outflow),
    ("wind_lines", _lines),
    ("symmetry", _bands),
    ("resolution", _levels),
)
