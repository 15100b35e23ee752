"""Diagrams of a series: maps over time and radius with the tracks of flux sheets, and courses."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import Any

import numpy as np
from cmcrameri import cm as _maps
from matplotlib.patheffects import Normal, Stroke

from fieldviz.diagnostics.series_numbers import SnapshotRecord
from fieldviz.diagnostics.space_time import WIND_PAIRS, SpaceTime
from fieldviz.diagnostics.stored_sheets import number
from fieldviz.report.material import Material
from fieldviz.report.paper import ANGLES_IN_WORDS, Diagram, Paper, drawn
from fieldviz.report.tables import scalar_of
from fieldviz.report.texts import listed, plain_number, signed_degrees
from fieldviz.scenes.wording import scaled
from fieldviz.sheets.sheet_history import SheetHistory
from fieldviz.wedge.typing import Array

__all__ = ["course_diagrams", "time_edges"]

_RADIUS, _TIME = "radius (code units)", "time (code units)"
_EVENTS = {"merge": "v", "split": "^", "birth": "o", "death": "X", "entered": ">", "left": "<"}
_MEANING = {
    "outflow": "mass leaving",
    "bend": "radial velocity of the leaving gas",
    "torque": "angular momentum taken by the field",
}
_LEAST_SHARE = 0.02  # of the range, below which values of the other sign do not split the colours


def course_diagrams(material: Material) -> Iterator[Diagram]:
    """Those diagrams for which the series has numbers.

    Parameters
    ----------
    material : Material
        Of a series.

    Yields
    ------
    Diagram
    """
    course = material.course
    if course is not None:
        for found in (_field_map(course), _density_map(course)):
            if found is not None:
                yield found
        for name in WIND_PAIRS:
            angles = course.wind_angle[name]
            if np.isfinite(angles).any():
                yield _angle_map(course, name, angles)
    for made in (_mass_course(material.records), _angle_course(material.records)):
        if made is not None:
            yield made


def time_edges(times: Array) -> Array:
    """Edges between outputs, (n + 1,): half way, and as far beyond the first and the last."""
    times = np.asarray(times, dtype=np.float64)
    if len(times) == 1:
        return np.array([times[0] - 0.5, times[0] + 0.5])
    middle = 0.5 * (times[1:] + times[:-1])
    first, last = 2 * times[0] - middle[0], 2 * times[-1] - middle[-1]
    return np.concatenate([[first], middle, [last]])


def _field_map(course: SpaceTime) -> Diagram | None:
    values = course.vertical_field
    known = values[np.isfinite(values)]
    if not known.size:
        return None
    factor, unit = scaled(float(np.abs(known).max()))
    low, high = float(known.min()) / factor, float(known.max()) / factor
    mixed = low < -_LEAST_SHARE * high and high > -_LEAST_SHARE * low

    def draw(paper: Paper) -> None:
        if mixed:
            reach = max(-low, high)
            how: dict[str, Any] = {"cmap": _maps.vik, "vmin": -reach, "vmax": reach}
        else:
            name = "lajolla" if (paper.theme.name == "dark") == (high > -low) else "lajolla_r"
            how = {"cmap": getattr(_maps, name), "vmin": low, "vmax": high}
        label = rf"$r\,\langle B_z\rangle$ ({unit})"
        _draw_map(paper, course, values / factor, label, **how)

    return drawn(
        "space_time_vertical_field",
        "Net vertical field in time",
        f"r <B_z> near the midplane, mean over azimuth.{_tracks_in_words(course.history)}",
        f"Map of r times the net vertical field over time and radius, "
        f"{plain_number(low * factor, 3)} to {plain_number(high * factor, 3)} in code units; "
        f"{_history_in_words(course.history)}.",
        draw,
    )


def _density_map(course: SpaceTime) -> Diagram | None:
    good = course.surface_density > 0
    if not good.any():
        return None
    values = np.log10(course.surface_density, out=np.full(good.shape, np.nan), where=good)
    low, high = float(np.nanmin(values)), float(np.nanmax(values))

    def draw(paper: Paper) -> None:
        cmap = _maps.oslo if paper.theme.name == "dark" else _maps.oslo_r
        label = r"$\log_{10}\,\Sigma$ (code units)"
        _draw_map(paper, course, values, label, cmap=cmap, vmin=low, vmax=high)

    return drawn(
        "space_time_surface_density",
        "Surface density in time",
        f"Mass over area, mean over azimuth.{_tracks_in_words(course.history)}",
        f"Map of the surface density over time and radius, {plain_number(10**low, 3)} to "
        f"{plain_number(10**high, 3)} in code units; {_history_in_words(course.history)}.",
        draw,
    )


def _angle_map(course: SpaceTime, name: str, angles: Array) -> Diagram:
    def draw(paper: Paper) -> None:
        # A cyclic map, as 180 and -180 are the same: light where both sides are alike.
        bar = _draw_map(paper, course, angles, "", cmap=_maps.vikO, vmin=-180, vmax=180)
        bar.set_ticks([-180, -90, -45, 0, 45, 90, 180])
        bar.set_ticklabels(["both in", "odd", "upper", "even", "lower", "odd", "both in"])

    known = angles[np.isfinite(angles)]
    return drawn(
        f"space_time_{name}_angle",
        f"Angle of the {name} in time",
        f"Upper against lower {_MEANING[name]}, in bands of radius. {ANGLES_IN_WORDS}"
        f"{_tracks_in_words(course.history)}",
        f"Map of the angle of the {name} over time and radius, {signed_degrees(known.min())} to "
        f"{signed_degrees(known.max())}; {_history_in_words(course.history)}.",
        draw,
    )


def _draw_map(paper: Paper, course: SpaceTime, values: Array, label: str, **how: Any) -> Any:
    edges = time_edges(course.times)
    _, bar = paper.map(edges, course.r_edges, values, label, **how)
    paper.radius_axis(float(course.r_edges[0]), float(course.r_edges[-1]), "y")
    paper.axes.set_xlim(edges[0], edges[-1])
    paper.label(_TIME, _RADIUS)
    if course.history is not None:
        _draw_tracks(paper, course.history)
    return bar


def _draw_tracks(paper: Paper, history: SheetHistory) -> None:
    ink, ground = paper.theme.ink, paper.theme.ground
    halo = [Stroke(linewidth=3.4, foreground=ground), Normal()]
    for track in history.tracks:
        up = track.sheets[0].polarity > 0
        paper.axes.plot(track.times, track.radii, color=ink, linewidth=1.4, path_effects=halo,
                        linestyle="-" if up else (0, (3, 2)), marker="." if len(track.times) < 2
                        else None, solid_capstyle="round")  # fmt: skip
    tracks = {track.number: track for track in history.tracks}
    for event in history.events:
        if event.kind in ("merge", "split"):
            # The track that ends goes to where it merges, the new one comes from where it split.
            one = tracks[event.tracks[0]]
            last = int(np.flatnonzero(one.times <= event.after)[-1])
            paper.axes.plot([one.times[last], event.time], [one.radii[last], event.radius],
                            color=ink, linewidth=1.0, linestyle=":", path_effects=halo)  # fmt: skip
        paper.axes.plot([event.time], [event.radius], _EVENTS.get(event.kind, "o"), color=ink,
                        markersize=7, markeredgecolor=ground, markeredgewidth=1.0)  # fmt: skip


def _tracks_in_words(history: SheetHistory | None) -> str:
    if history is None or not history.tracks:
        return ""
    dashed = any(track.sheets[0].polarity < 0 for track in history.tracks)
    signs = {"v": "▼", "^": "▲", "o": "●", "X": "✖", ">": "▶", "<": "◀"}
    kinds = dict.fromkeys(event.kind for event in history.events)
    marks = [f"{signs[_EVENTS[kind]]} {kind}" for kind in kinds if kind in _EVENTS]
    words = " Lines: tracks of flux sheets" + (", dashed with B_z down" if dashed else "")
    return f"{words}{'; ' if marks else ''}{', '.join(marks)}."


def _history_in_words(history: SheetHistory | None) -> str:
    if history is None:
        return "no tracks are drawn"
    events = [
        f"a {event.kind} at t = {plain_number(event.time, 3)}, r = {plain_number(event.radius, 3)}"
        for event in history.events
    ]
    told = f": {listed(events)}" if events else ""
    return f"tracks of flux sheets drawn over it: {len(history.tracks)}{told}"


def _scalars(records: tuple[SnapshotRecord, ...], part: str, quantity: str) -> Array:
    found = (scalar_of(record, part, quantity) for record in records)
    return np.array([number(None if one is None else one[0]) for one in found])


def _mass_course(records: tuple[SnapshotRecord, ...]) -> Diagram | None:
    lines = (
        ("accretion, innermost", "accretion at the innermost sphere", "third", "-"),
        ("loss, upper", "mass loss, upper", "upper", "-"),
        ("loss, lower", "mass loss, lower", "lower", (0, (4, 2))),
    )
    values = {words: _scalars(records, "outflow", what) for words, what, *_ in lines}
    known = np.concatenate(list(values.values()))
    if not np.isfinite(known).any():
        return None
    unit_of = next(one for record in records for _, what, *_ in lines
                   if (one := scalar_of(record, "outflow", what)))  # fmt: skip
    factor, label = scaled(float(np.nanmax(np.abs(known))))
    label = label.replace("code units", unit_of[1].replace("^-1", "$^{-1}$"))

    def draw(paper: Paper) -> None:
        for words, _, role, dashes in lines:
            paper.axes.plot([record.time for record in records], values[words] / factor, marker="o",
                            markersize=3.5, color=paper.colour(role), linewidth=1.6,
                            linestyle=dashes, label=words)  # fmt: skip
        if np.nanmin(known) >= 0:
            paper.axes.set_ylim(bottom=0)
        _finish_course(paper, rf"$\dot M$ ({label})")

    return drawn(
        "course_mass",
        "Accretion and mass loss in time",
        "Through the launching surfaces and the innermost sphere, for the wedge.",
        f"Line diagram over {len(records)} times: {_spans(values)}.",
        draw,
    )


def _angle_course(records: tuple[SnapshotRecord, ...]) -> Diagram | None:
    roles = zip(WIND_PAIRS, ("upper", "lower", "third"), ("-", (0, (4, 2)), ":"), strict=True)
    lines = [(name, role, dashes, *_angles(records, name)) for name, role, dashes in roles]
    lines = [one for one in lines if np.isfinite(one[3]).any()]
    if not lines:
        return None

    def draw(paper: Paper) -> None:
        for name, role, dashes, angles, errors in lines:
            paper.axes.errorbar([record.time for record in records], angles, yerr=errors,
                                marker="o", markersize=3.5, color=paper.colour(role), capsize=2,
                                linewidth=1.6, linestyle=dashes, label=name)  # fmt: skip
        paper.axes.set_ylim(-185, 185)
        paper.axes.set_yticks([-180, -90, -45, 0, 45, 90, 180])
        _finish_course(paper, "angle (degrees)")

    return drawn(
        "course_angles",
        "Angles of the wind in time",
        f"{ANGLES_IN_WORDS} Bars: one standard error where there is one.",
        f"Line diagram over {len(records)} times: "
        f"{_spans({one[0]: one[3] for one in lines}, signed_degrees)}.",
        draw,
    )


def _angles(records: tuple[SnapshotRecord, ...], name: str) -> tuple[Array, Array]:
    found = [(record.result("symmetry") or {}).get(name) or {} for record in records]
    return (
        np.array([number(one.get("angle")) for one in found]),
        np.array([number(one.get("angle_error") or 0.0) for one in found]),
    )


def _finish_course(paper: Paper, words: str) -> None:
    paper.label(_TIME, words)
    paper.zero()
    paper.legend()


def _spans(values: dict[str, Array], write: Callable[[float], str] = plain_number) -> str:
    spans: list[str] = []
    for name, one in values.items():
        known = one[np.isfinite(one)]
        if known.size:
            spans.append(f"{name} {write(float(known.min()))} to {write(float(known.max()))}")
    return listed(spans)
