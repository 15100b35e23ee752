"""`fieldviz outflow`: what leaves through the launching surfaces, in one snapshot or in time."""

from __future__ import annotations

import json
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

from fieldviz.commands.given_files import opened, series_name
from fieldviz.commands.plain_text import aligned, number, wrapped
from fieldviz.commands.progress import tracked
from fieldviz.diagnostics.plain import plain
from fieldviz.errors import FieldvizError
from fieldviz.snapshots.series import SnapshotSeries
from fieldviz.wind.outflow import Outflow, outflow

__all__ = ["run"]

_CHANGE = "the change in time is that from"
Surface = float | str | tuple[str, float]


def run(
    files: Sequence[Path],
    *,
    layout: Path | None,
    surface: str,
    thickness: float | None,
    r_range: tuple[float, float] | None,
    as_json: bool,
) -> str:
    """Measure the outflow of every file; return the text for stdout."""
    chosen = _surface(surface)
    series = opened(files, layout)
    found = list(_measured(series, chosen, thickness, r_range))
    if as_json:
        return json.dumps(_answer(series, found), indent=2, allow_nan=False)
    lines = _one_text(found[0]) if len(found) == 1 else _series_text(found)
    first, *rest = lines
    notes = [note for one in found for note in _notes(one)]
    if len(found) > 1:
        notes = [note for note in notes if not note.startswith(_CHANGE)]
        notes.append("the change in time is that between the neighbours of each snapshot")
    if series.dropped:
        notes.append(f"{len(series.dropped)} files of a time that was there already were dropped")
    remarks = [wrapped(note) for note in dict.fromkeys(notes)]
    return "\n".join(
        [first, "", series_name(series), *rest, "", "what the numbers rest on", *remarks]
    )


def _answer(series: SnapshotSeries, found: Sequence[Outflow]) -> dict[str, Any]:
    numbers: list[Any] = [plain(one) for one in found]
    told = [{"sentence": one.sentence, **n} for one, n in zip(found, numbers, strict=True)]
    if len(told) == 1:
        return {"file": str(series.paths[0]), **told[0]}
    files = [str(path) for path in series.paths]
    return {"files": files, "times": list(series.times), "snapshots": told}


def _surface(text: str) -> Surface:
    """A height in H, a name, or NAME=VALUE for a contour of a field."""
    name, mark, value = text.partition("=")
    try:
        return (name, float(value)) if mark else float(text)
    except ValueError:
        if not mark:
            return text
        raise FieldvizError(
            f"Cannot measure the outflow: expected a surface such as 4, slow or density=1e-6, got "
            f"'{text}'; give a number after the sign."
        ) from None


def _measured(
    series: SnapshotSeries,
    surface: Surface,
    thickness: float | None,
    r_range: tuple[float, float] | None,
) -> Iterator[Outflow]:
    """Each snapshot, with its neighbours in time for the budgets."""
    last = len(series) - 1
    numbers: Sequence[int] = range(len(series))
    for n in tracked(numbers, "measuring outflow", len(series)) if last else numbers:
        yield outflow(
            series[n],
            surface,
            radii=r_range,
            thickness=thickness,
            before=series[n - 1] if n > 0 else None,
            after=series[n + 1] if n < last else None,
        )


def _one_text(found: Outflow) -> list[str]:
    heads = ("", "upper", "lower", "both")
    losses = {
        "mass": found.mass,
        "angular momentum, gas": found.kinetic_torque,
        "angular momentum, field": found.magnetic_torque,
        "angular momentum": found.torque,
        "energy": found.energy,
    }
    rows = [
        (name, number(loss.upper.net), number(loss.lower.net), number(loss.total))
        for name, loss in losses.items()
    ]
    arm, index = found.lever_arm, found.ejection
    rows += [
        ("lever arm", number(arm.upper), number(arm.lower), number(arm.total)),
        ("ejection index, global", number(index.upper), number(index.lower), number(index.total)),
    ]
    said = [found.accretion.sentence, index.sentence]
    said += [budget.sentence for budget in (found.mass_budget, found.angular_momentum_budget)]
    if found.inclination is not None:
        said.append(found.inclination.sentence)
    moved = [
        (f"moved by {one.moved:+g} H", *(number(value) for value in (*one.mass, sum(one.mass))))
        for one in found.repeats
        if not one.reason
    ]
    table = aligned([heads, *rows, *(("mass, " + row[0], *row[1:]) for row in moved)])
    return [found.sentence, *table, "", *map(wrapped, said)]


def _series_text(found: Sequence[Outflow]) -> list[str]:
    heads = ("time", "mass, upper", "mass, lower", "torque, upper", "torque, lower",
             "accretion, in", "accretion, out", "lever arm", "ejection index",
             "mass budget residual")  # fmt: skip
    rows = [
        (
            f"{one.time:.6g}", number(one.upper), number(one.lower), number(one.torque.upper.net),
            number(one.torque.lower.net), number(float(one.accretion.rate[0])),
            number(float(one.accretion.rate[-1])), number(one.lever_arm.total, 3),
            number(one.ejection.value, 3), number(one.mass_budget.share, 3),
        )
        for one in found
    ]  # fmt: skip
    upper, lower = (_span([getattr(one, side) for one in found]) for side in ("upper", "lower"))
    first = (
        f"mass loss {upper} above and {lower} below through {found[0].surface.label}, "
        f"{len(found)} snapshots"
    )
    return [first, *aligned([heads, *rows])]


def _span(values: Sequence[float]) -> str:
    known = [value for value in values if value == value]
    return f"{min(known):.4g} to {max(known):.4g}" if known else "without a number"


def _notes(found: Outflow) -> Iterator[str]:
    yield from found.notes
    for part in (found.accretion, found.ejection, found.lever_arm, found.mass_budget):
        yield from part.notes
