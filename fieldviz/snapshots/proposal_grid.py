"""Guess the coordinates of a file: which datasets or attributes, in which unit, from where."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import h5py
import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.snapshots.file_listing import AttributeEntry, DatasetEntry
from fieldviz.snapshots.layout_tables import AXES, CoordinateTable
from fieldviz.snapshots.proposal_axes import Candidate, Roles
from fieldviz.snapshots.proposal_words import axis_of_name, edge_or_centre, tokens
from fieldviz.snapshots.references import read_numbers
from fieldviz.wedge.typing import Array

__all__ = ["coordinate_candidates", "coordinate_table"]

_LONGEST = 20_000_000
_SLACK = 1e-3
_BOUND_WORDS = {"range", "limits", "extent", "domain", "bound", "bounds"}


def coordinate_candidates(
    file: h5py.File,
    base: str,
    datasets: Iterable[tuple[str, DatasetEntry]],
    attributes: Iterable[tuple[str, AttributeEntry]],
    main_shape: Sequence[int],
) -> list[Candidate]:
    """Find what may be a coordinate.

    Parameters
    ----------
    file : h5py.File
    base : str
        Group from which references are seen.
    datasets, attributes : iterables of (reference, entry)
    main_shape : sequence of int
        Of the main field: an unnamed coordinate has the length of one of its axes.

    Returns
    -------
    list of Candidate
        At least one for each axis; one without reference where nothing was found.
    """
    entries = list(datasets)
    found = [
        candidate
        for reference, entry in entries
        if (candidate := _named(file, base, reference, entry)) is not None
    ]
    found += _from_attributes(attributes)
    for axis in AXES:
        if not any(candidate.axis == axis for candidate in found):
            found += _by_content(file, base, entries, axis, main_shape, found)
        if not any(candidate.axis == axis for candidate in found):
            found.append(Candidate("", axis, 2, hint="bounds", doubt="nothing like it was found"))
    return found


def _named(file: h5py.File, base: str, reference: str, entry: DatasetEntry) -> Candidate | None:
    if not entry.is_numeric or len(entry.shape) not in (1, 2) or 0 in entry.shape:
        return None
    if np.prod(entry.shape, dtype=float) > _LONGEST:
        return None
    parent = entry.group.rpartition("/")[2]
    name = entry.name if axis_of_name(entry.name) else f"{parent}_{entry.name}"
    axis = axis_of_name(name)
    if not axis or not _is_monotonic(_values(file, base, reference)):
        return None
    hint = edge_or_centre(entry.name) or edge_or_centre(parent)
    rows = entry.shape[0] if len(entry.shape) == 2 else 0
    if set(tokens(name)) & _BOUND_WORDS and entry.shape[-1] == 2:
        hint = "bounds"
    return Candidate(reference, axis, entry.shape[-1], rows, hint, unit=entry.unit)


def _values(file: h5py.File, base: str, reference: str) -> Array | None:
    try:
        return read_numbers(file, base, reference, "a coordinate")
    except (FieldvizError, OSError, RuntimeError):
        return None


def _is_monotonic(values: Array | None) -> bool:
    if values is None or not np.isfinite(values).all():
        return False
    steps = np.diff(values, axis=-1)
    return bool((steps > 0).all() or (steps < 0).all())


def _from_attributes(attributes: Iterable[tuple[str, AttributeEntry]]) -> list[Candidate]:
    found, ends = [], {}
    for reference, entry in attributes:
        axis = axis_of_name(entry.name)
        value = entry.value
        if axis and isinstance(value, list) and len(value) == 2 and _is_numbers(value):
            found.append(Candidate(reference, axis, 2, hint="bounds"))
        words = tokens(entry.name)
        for end in {"min", "max"} & set(words):
            axis = axis_of_name("_".join(word for word in words if word != end))
            if axis and isinstance(value, int | float) and not isinstance(value, bool):
                ends[axis, end] = float(value)
    for axis in AXES:
        if (axis, "min") in ends and (axis, "max") in ends:
            bounds = (ends[axis, "min"], ends[axis, "max"])
            found.append(Candidate("", axis, 2, hint="bounds", bounds=bounds))
    return found


def _is_numbers(values: list[object]) -> bool:
    return all(isinstance(v, int | float) and np.isfinite(v) for v in values)


def _by_content(
    file: h5py.File,
    base: str,
    entries: Sequence[tuple[str, DatasetEntry]],
    axis: str,
    main_shape: Sequence[int],
    taken: Sequence[Candidate],
) -> list[Candidate]:
    """Coordinates without a telling name: monotonic, of a fitting length, in a fitting range."""
    found = []
    lengths = {n + more for n in main_shape for more in (0, 1)}
    for reference, entry in entries:
        if not entry.is_numeric or len(entry.shape) != 1 or entry.shape[0] not in lengths:
            continue
        if entry.shape[0] < 2 or any(candidate.reference == reference for candidate in taken):
            continue
        values = _values(file, base, reference)
        if values is not None and _is_monotonic(values) and _axis_of_range(values) == axis:
            doubt = "taken for it by its range alone"
            found.append(Candidate(reference, axis, entry.shape[0], doubt=doubt, unit=entry.unit))
    return found


def _axis_of_range(values: Array) -> str:
    low, high = float(values.min()), float(values.max())
    if 0.0 <= low < 0.5 * np.pi < high <= np.pi + _SLACK or (low < 0 < high <= 0.5 * np.pi):
        return "theta"
    if abs(low) < 0.1 * (high - low) and high <= 2 * np.pi + _SLACK:
        return "phi"
    return "r" if low > 0 else ""


def coordinate_table(
    file: h5py.File, base: str, axis: str, roles: Roles, notes: dict[str, str]
) -> CoordinateTable | None:
    """Describe one coordinate and note what is unsure.

    Parameters
    ----------
    file : h5py.File
    base : str
    axis : {"r", "theta", "phi"}
    roles : Roles
    notes : dict of str to str
        Added to.

    Returns
    -------
    CoordinateTable or None
        None for an azimuth that the file does not have: a full ring.
    """
    where = f"grid.{axis}"
    absent = axis == "phi" and "phi" not in roles.order
    if axis not in roles.kinds or (absent and not roles.kinds[axis][0].reference):
        notes[where] = "no azimuth in the file; taken for axisymmetric data, a full ring"
        return CoordinateTable(bounds=(0.0, 2.0 * np.pi))
    candidate, kind = roles.kinds[axis]
    entries: dict[str, object] = {kind: candidate.bounds or candidate.reference or None}
    if not candidate.reference and candidate.bounds is None:
        return _not_found(axis, where, notes)
    if candidate.doubt:
        notes[f"{where}.{kind}"] = candidate.doubt
    values = np.asarray(candidate.bounds) if candidate.bounds else None
    if values is None:
        values = _values(file, base, candidate.reference)
    if kind == "bounds":
        notes[f"{where}.spacing"] = "the file gives no spacing; uniform unless said otherwise"
    if values is not None and axis == "r":
        _radius(candidate, kind, values, entries, where, notes)
    elif values is not None:
        _angle(candidate, axis, values, entries, where, notes)
    return CoordinateTable(**entries)  # type: ignore[arg-type]


def _not_found(axis: str, where: str, notes: dict[str, str]) -> CoordinateTable:
    if axis == "phi":
        notes[f"{where}.bounds"] = "no azimuth was found in the file; a full ring is a guess"
        return CoordinateTable(bounds=(0.0, 2.0 * np.pi))
    notes[where] = f"nothing like {axis} was found; give edges, centres or bounds = [first, last]"
    return CoordinateTable()


def _radius(
    candidate: Candidate,
    kind: str,
    values: Array,
    entries: dict[str, object],
    where: str,
    notes: dict[str, str],
) -> None:
    name = candidate.reference.rpartition("/")[2].lower()
    if "log10" in name:
        entries["transform"] = "log10"
    elif name.startswith("ln"):
        entries["transform"] = "ln"
    elif "log" in name:
        entries["transform"] = "ln"
        notes[f"{where}.transform"] = "the name says log; natural or to base 10 is not said"
    elif values.min() < 0:
        entries["transform"] = "ln"
        notes[f"{where}.transform"] = "values below 0 cannot be radii; taken for ln r"
    if kind == "bounds" and values.min() > 0:
        entries["spacing"] = "log"
        notes[f"{where}.spacing"] = "the file gives no spacing; logarithmic is a guess"


def _angle(
    candidate: Candidate,
    axis: str,
    values: Array,
    entries: dict[str, object],
    where: str,
    notes: dict[str, str],
) -> None:
    low, high = float(values.min()), float(values.max())
    most = np.pi if axis == "theta" else 2 * np.pi
    words = set(tokens(candidate.reference)) | set(tokens(candidate.unit or "none"))
    if any(word.startswith("deg") for word in words):
        entries["unit"] = "degree"
    elif max(high - low, high) > most + _SLACK:
        entries["unit"] = "degree"
        notes[f"{where}.unit"] = f"{low:.6g} to {high:.6g} is too much for radians"
    if axis == "phi":
        return
    half_turn = 180.0 if entries.get("unit") == "degree" else np.pi
    named_latitude = bool(words & {"lat", "latitude", "elevation"})
    if low < 0 or named_latitude:
        entries["measured_from"] = "midplane"
    elif low < 0.5 * half_turn < high:
        entries["measured_from"] = "pole"
    else:
        entries["measured_from"] = "pole"
        reason = f"{low:.6g} to {high:.6g} does not cross the midplane; it may be a latitude"
        notes[f"{where}.measured_from"] = reason
