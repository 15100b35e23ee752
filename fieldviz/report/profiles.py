"""Diagrams of one snapshot against radius, with its flux sheets marked."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np

from fieldviz.diagnostics.series_numbers import SnapshotRecord
from fieldviz.diagnostics.stored_sheets import numbers
from fieldviz.report.paper import ANGLES_IN_WORDS, Diagram, Paper, drawn
from fieldviz.report.texts import listed, plain_number, signed_degrees
from fieldviz.scenes.wording import scaled
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.typing import Array

__all__ = ["profile_diagrams"]

_RADIUS = "radius (code units)"
_SIDES = (("upper", "-"), ("lower", (0, (4, 2))))  # both may lie on each other: one is dashed
_PAIRS = (("outflow", "upper", "-"), ("bend", "lower", (0, (4, 2))), ("torque", "third", ":"))
Sheets = list[tuple[float, float, float]]


def profile_diagrams(record: SnapshotRecord) -> Iterator[Diagram]:
    """Those diagrams for which the snapshot has numbers.

    Parameters
    ----------
    record : SnapshotRecord

    Yields
    ------
    Diagram
    """
    sheets = _sheets(record)
    for make in (_field, _density, _mass, _alpha, _angles, _resolution):
        found = make(record, sheets)
        if found is not None:
            yield found


def _sheets(record: SnapshotRecord) -> Sheets:
    """Inner edge, peak and outer edge of every sheet."""
    found = record.result("flux_sheets") or {"sheets": ()}
    return [(one["inner"], one["radius"], one["outer"]) for one in found["sheets"]]


def _mark(paper: Paper, sheets: Sheets) -> None:
    for inner, radius, outer in sheets:
        paper.axes.axvspan(inner, outer, color=paper.theme.line, alpha=0.16, linewidth=0, zorder=0)
        paper.axes.axvline(radius, color=paper.theme.line, linewidth=0.9, alpha=0.8, zorder=0)


def _marked(sheets: Sheets) -> str:
    return " Bands: flux sheets, from half height to half height." if sheets else ""


def _where(sheets: Sheets) -> str:
    if not sheets:
        return "no flux sheet is marked"
    return f"flux sheets at r = {listed([plain_number(one[1], 3) for one in sheets])}"


def _finish(paper: Paper, sheets: Sheets, edges: Array, words: str) -> None:
    _mark(paper, sheets)
    paper.radius_axis(float(edges[0]), float(edges[-1]))
    paper.label(_RADIUS, words)
    paper.zero()
    paper.legend()


def _edges(table: dict[str, list[Any]]) -> Array:
    return numbers([*table["r inner"], table["r outer"][-1]])


def _has_numbers(*values: Array) -> bool:
    return any(np.isfinite(one).any() for one in values)


def _range(values: Array) -> str:
    known = values[np.isfinite(values)]
    if not known.size:
        return "without a number"
    return f"{plain_number(float(known.min()), 3)} to {plain_number(float(known.max()), 3)}"


def _field(record: SnapshotRecord, sheets: Sheets) -> Diagram | None:
    table = record.table("flux_profile")
    if not table:
        return None
    edges, f, background = _edges(table), *(numbers(table[n]) for n in ("r <B_z>", "background"))
    factor, unit = scaled(float(np.nanmax(np.abs(f), initial=0.0)))

    def draw(paper: Paper) -> None:
        axes, r = paper.axes, centres(edges)
        axes.plot(r, f / factor, color=paper.colour("third"), linewidth=1.6, label="net field")
        axes.plot(r, background / factor, "--", color=paper.colour("fourth"), linewidth=1.2,
                  label="background")  # fmt: skip
        _finish(paper, sheets, edges, rf"$r\,\langle B_z\rangle$ ({unit})")

    return drawn(
        "vertical_field",
        "Net vertical field",
        f"r <B_z> near the midplane, mean over azimuth.{_marked(sheets)}",
        f"Line diagram of r times the net vertical field, {_range(f)} in code units, against "
        f"radius; {_where(sheets)}.",
        draw,
    )


def _density(record: SnapshotRecord, sheets: Sheets) -> Diagram | None:
    table = record.table("radial")
    name = "surface density"
    if name not in table:
        return None
    edges, sigma = _edges(table), numbers(table[name])
    ratio = numbers(table[f"{name} over its background"])
    good = sigma > 0
    if not good.any():
        return None

    def draw(paper: Paper) -> None:
        axes, r = paper.axes, centres(edges)
        shown = np.where(good, sigma, np.nan)
        axes.plot(r, shown, color=paper.colour("third"), linewidth=1.6, label=r"$\Sigma$")
        with np.errstate(divide="ignore", invalid="ignore"):
            axes.plot(r, shown / ratio, "--", color=paper.colour("fourth"), linewidth=1.2,
                      label="background")  # fmt: skip
        paper.logarithmic(sigma[good], sigma[good] / ratio[good])
        _finish(paper, sheets, edges, r"$\Sigma$ (code units)")

    return drawn(
        "surface_density",
        "Surface density",
        f"Mass over area, mean over azimuth.{_marked(sheets)}",
        f"Line diagram of the surface density, {_range(sigma)} in code units, against radius on "
        f"logarithmic axes; over its background it is {_range(ratio)}; {_where(sheets)}.",
        draw,
    )


def _mass(record: SnapshotRecord, sheets: Sheets) -> Diagram | None:
    found = record.result("outflow")
    if found is None or found["mass"]["reason"]:
        return None
    radii = numbers(found["mass"]["upper"]["radii"])
    losses = {
        side: np.concatenate([[0.0], np.cumsum(numbers(found["mass"][side]["bins"]))])
        for side, _ in _SIDES
    }
    r, rate = numbers(found["accretion"]["r"]), numbers(found["accretion"]["rate"])
    if not _has_numbers(rate, *losses.values()):
        return None
    largest = np.nanmax(np.abs(np.concatenate([rate, *losses.values()])))
    factor, unit = scaled(float(largest))

    def draw(paper: Paper) -> None:
        axes = paper.axes
        axes.plot(r, rate / factor, color=paper.colour("third"), linewidth=1.6, label="accretion")
        for side, dashes in _SIDES:
            axes.plot(radii, losses[side] / factor, color=paper.colour(side), linewidth=1.8,
                      linestyle=dashes, label=f"loss, {side}")  # fmt: skip
        _finish(paper, sheets, radii, rf"$\dot M$ ({unit})")

    ends = {side: plain_number(float(loss[-1]), 3) for side, loss in losses.items()}
    surface = found["surface"]["label"]
    return drawn(
        "mass",
        "Accretion and mass loss",
        f"Accretion between the launching surfaces, and mass loss within each radius through "
        f"{surface}; for the {found['wedge']}.{_marked(sheets)}",
        f"Line diagram against radius: accretion {_range(rate)}; mass loss summed outward reaches "
        f"{ends['upper']} above and {ends['lower']} below, code units.",
        draw,
    )


def _alpha(record: SnapshotRecord, sheets: Sheets) -> Diagram | None:
    table = record.table("radial")
    names = (("alpha, Maxwell", "Maxwell", "upper", "-"),
             ("alpha, Reynolds", "Reynolds", "lower", (0, (4, 2))))  # fmt: skip
    there = [(*one, numbers(table[one[0]])) for one in names if one[0] in table]
    there = [one for one in there if _has_numbers(one[-1])]
    if not there:
        return None
    edges = _edges(table)
    factor, _ = scaled(float(np.nanmax(np.abs([one[-1] for one in there]))))
    power = "" if factor == 1.0 else rf" ($10^{{{round(np.log10(factor))}}}$)"

    def draw(paper: Paper) -> None:
        for _, words, role, dashes, values in there:
            paper.axes.plot(centres(edges), values / factor, color=paper.colour(role),
                            linewidth=1.6, linestyle=dashes, label=words)  # fmt: skip
        _finish(paper, sheets, edges, rf"$\alpha${power}")

    told = listed([f"{words} {_range(values)}" for _, words, _, _, values in there])
    return drawn(
        "alpha",
        "Stress over pressure",
        f"\N{GREEK SMALL LETTER ALPHA} within the band about the midplane.{_marked(sheets)}",
        f"Line diagram of alpha against radius: {told}; {_where(sheets)}.",
        draw,
    )


def _angles(record: SnapshotRecord, sheets: Sheets) -> Diagram | None:
    verdict = record.result("symmetry")
    pairs = [(one, verdict[one[0]]) for one in _PAIRS if verdict and verdict.get(one[0])]
    if not pairs:
        return None

    def draw(paper: Paper) -> None:
        for (name, role, dashes), pair in pairs:
            edges, angles, _ = _steps(pair)
            paper.axes.stairs(angles, edges, baseline=None, color=paper.colour(role),
                              linewidth=1.8, linestyle=dashes, label=name)  # fmt: skip
        paper.axes.set_ylim(-185, 185)
        paper.axes.set_yticks([-180, -90, -45, 0, 45, 90, 180])
        paper.axes.set_yticklabels(
            [
                "both in 180",
                "odd \N{MINUS SIGN}90",
                "upper \N{MINUS SIGN}45",
                "even 0",
                "lower 45",
                "odd 90",
                "both in 180",
            ]
        )
        _finish(paper, [], edges_of_all, "angle (degrees)")

    edges_of_all = _steps(pairs[0][1])[0]
    told = listed([f"{one[0]} {_degrees(_steps(pair)[1])}" for one, pair in pairs])
    return drawn(
        "wind_angles",
        "Angles of the wind by radius",
        ANGLES_IN_WORDS,
        f"Step diagram of the angles of the wind in bands of radius: {told}.",
        draw,
    )


def _degrees(angles: Array) -> str:
    known = angles[np.isfinite(angles)]
    if not known.size:
        return "undefined"
    return f"{signed_degrees(float(known.min()))} to {signed_degrees(float(known.max()))}"


def _steps(pair: dict[str, Any]) -> tuple[Array, Array, list[str]]:
    bands = pair["bands"]
    edges = numbers([*(band["r_low"] for band in bands), bands[-1]["r_high"]])
    return edges, numbers([band["angle"] for band in bands]), [band["word"] for band in bands]


def _resolution(record: SnapshotRecord, sheets: Sheets) -> Diagram | None:
    table, result = record.table("radial"), record.result("resolution")
    names = (("theta", "upper", "-"), ("phi", "lower", (0, (4, 2))))
    there = [
        (axis, role, dashes, numbers(table[f"Q along {axis}"]), result[f"q_{axis}"]["threshold"])
        for axis, role, dashes in names
        if result is not None and f"Q along {axis}" in table
    ]
    there = [one for one in there if np.any(one[3] > 0)]
    if not there:
        return None
    edges = _edges(table)

    def draw(paper: Paper) -> None:
        paper.logarithmic(*(np.append(one[3], one[4]) for one in there))
        for axis, role, dashes, q, threshold in there:
            colour = paper.colour(role)
            paper.axes.plot(centres(edges), np.where(q > 0, q, np.nan), color=colour, linewidth=1.6,
                            linestyle=dashes, label=rf"$Q_\{axis}$")  # fmt: skip
            paper.axes.axhline(threshold, color=colour, linewidth=0.9, alpha=0.7)
        _finish(paper, sheets, edges, "cells per unstable wavelength")

    limits = listed([f"{one[4]:g} along {one[0]}" for one in there])
    told = listed([f"along {one[0]} {_range(one[3])}" for one in there])
    return drawn(
        "quality",
        "What the mesh resolves",
        f"Q with the field there is; thin lines: counted as resolved above {limits}.",
        f"Line diagram of Q against radius: {told}.",
        draw,
    )
