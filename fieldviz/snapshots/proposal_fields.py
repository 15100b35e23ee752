"""Guess which datasets are fields, how variables are stacked, and what each one is."""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

from fieldviz.snapshots.file_listing import DatasetEntry
from fieldviz.snapshots.layout_tables import AXES, FieldTable, StackTable
from fieldviz.snapshots.proposal_axes import Roles
from fieldviz.snapshots.proposal_words import Meaning, meaning_of_name, own_name

__all__ = ["FieldGuess", "NameList", "guess_fields", "longer_axis", "turn_latitude_signs"]

_VECTORS = ("velocity", "magnetic")


@dataclass(frozen=True)
class NameList:
    """A list of texts in the file that may name the variables of a stack.

    Attributes
    ----------
    reference : str
    owner : str
        Dataset whose attribute it is, else empty.
    names : tuple of str
    """

    reference: str
    owner: str
    names: tuple[str, ...]


@dataclass
class FieldGuess:
    """Tables of fields as they are found.

    Attributes
    ----------
    stacks, cells, faces : dict of str to table
    notes : dict of str to str
        What is unsure, by dotted name.
    left_out : list of str
        Datasets of two axes or more that no field was made of.
    """

    stacks: dict[str, StackTable] = field(default_factory=dict)
    cells: dict[str, FieldTable] = field(default_factory=dict)
    faces: dict[str, FieldTable] = field(default_factory=dict)
    notes: dict[str, str] = field(default_factory=dict)
    left_out: list[str] = field(default_factory=list)

    def add(self, kind: str, wanted: Meaning, table: FieldTable) -> None:
        """Add a field; a second one of a name gets a number."""
        tables = self.cells if kind == "cells" else self.faces
        name = wanted.name
        if kind == "faces" and name in tables:
            return
        for number in itertools.count(2):
            if name not in tables:
                break
            name = f"{wanted.name}_{number}"
        tables[name] = table
        if wanted.doubt:
            entry = "variable" if table.stack else "dataset"
            self.notes[f"{kind}.{name}.{entry}"] = wanted.doubt


def longer_axis(shape: Sequence[int], main: Sequence[int]) -> int | None:
    """Say along which single axis `shape` is longer by one than `main`, or give None."""
    if len(shape) != len(main):
        return None
    longer = [n for n, (a, b) in enumerate(zip(shape, main, strict=True)) if a != b]
    if len(longer) == 1 and shape[longer[0]] == main[longer[0]] + 1:
        return longer[0]
    return None


def guess_fields(
    entries: Sequence[tuple[str, DatasetEntry]],
    main: DatasetEntry,
    roles: Roles,
    name_lists: Sequence[NameList],
) -> FieldGuess:
    """Go through all datasets.

    Parameters
    ----------
    entries : sequence of (reference, DatasetEntry)
        Coordinates left out.
    main : DatasetEntry
        The one whose axes are known.
    roles : Roles
        Those axes.
    name_lists : sequence of NameList

    Returns
    -------
    FieldGuess
    """
    guess = FieldGuess()
    stacked: list[tuple[str, DatasetEntry, tuple[str, ...]]] = []
    sizes = {
        role: length for role, length in zip(roles.order, main.shape, strict=True) if role != "one"
    }
    for reference, entry in entries:
        if not entry.is_numeric:
            continue
        order, face = _match(entry.shape, roles, sizes)
        if order is None:
            guess.left_out += [reference] if len(entry.shape) > 1 else []
            continue
        if "variable" in order:
            stacked.append((reference, entry, order))
            continue
        _plain_field(guess, reference, entry, face)
    lists = _lists_for([(entry, order) for _, entry, order in stacked], name_lists)
    for (reference, entry, order), names in zip(stacked, lists, strict=True):
        _stack(guess, reference, entry, order, roles, names)
    return guess


def _match(
    shape: Sequence[int], roles: Roles, sizes: Mapping[str, int]
) -> tuple[tuple[str, ...] | None, str]:
    """Order of a dataset's axes and the axis it is face-centred along, or (None, "")."""
    plain = tuple(role for role in roles.order if role != "variable")
    orders = [roles.order, plain]
    if "variable" not in roles.order:
        orders += [(*plain[:n], "variable", *plain[n:]) for n in range(len(plain) + 1)]
    for order in orders:
        if len(order) != len(shape):
            continue
        surplus = {
            role: length - sizes.get(role, 1)
            for role, length in zip(order, shape, strict=True)
            if role != "variable"
        }
        odd = {role: more for role, more in surplus.items() if more}
        if not odd:
            return order, ""
        if len(odd) == 1 and "variable" not in order:
            role, more = next(iter(odd.items()))
            if role in AXES and more == 1:
                return order, role
    return None, ""


def _plain_field(guess: FieldGuess, reference: str, entry: DatasetEntry, face: str) -> None:
    meaning = meaning_of_name(entry.name)
    table = FieldTable(dataset=reference)
    if face:
        # Longer by one along an axis; the name must say that it is a magnetic field.
        if meaning is not None and meaning.name == f"magnetic_{face}":
            guess.add("faces", meaning, table)
        else:
            guess.left_out.append(reference)
        return
    if meaning is None:
        meaning = Meaning(own_name(entry.name))
    if meaning.name in guess.cells:
        meaning = Meaning(own_name(reference), f"another dataset is {meaning.name} already")
    guess.add("cells", meaning, table)


def _lists_for(
    stacked: Sequence[tuple[DatasetEntry, tuple[str, ...]]], name_lists: Sequence[NameList]
) -> list[tuple[NameList | None, str]]:
    """For each stack the list that names its variables, and a doubt."""
    counts = [entry.shape[order.index("variable")] for entry, order in stacked]
    found: list[tuple[NameList | None, str]] = []
    for (entry, _), count in zip(stacked, counts, strict=True):
        fitting = [names for names in name_lists if len(names.names) == count]
        own = [names for names in fitting if names.owner == entry.path]
        rest = [names for names in fitting if names.owner in ("", entry.path)]
        chosen = next(iter(own or rest), None)
        doubt = ""
        if chosen is not None and not own and len(rest) > 1:
            doubt = f"{rest[1].reference} has as many names"
        found.append((chosen, doubt))
    if len(stacked) > 1 and any(names is None for names, _ in found):
        return _shared_list(counts, name_lists) or found
    return found


def _shared_list(
    counts: Sequence[int], name_lists: Sequence[NameList]
) -> list[tuple[NameList | None, str]] | None:
    """One list that names the variables of all stacks, one stack after the other."""
    for names in name_lists:
        if len(names.names) != sum(counts):
            continue
        starts = [0, *itertools.accumulate(counts)]
        doubt = f"taken from {names.reference}, which lists all stacks one after the other"
        return [
            (replace(names, reference="", names=names.names[start:stop]), doubt)
            for start, stop in itertools.pairwise(starts)
        ]
    return None


def _stack(
    guess: FieldGuess,
    reference: str,
    entry: DatasetEntry,
    order: tuple[str, ...],
    roles: Roles,
    chosen: tuple[NameList | None, str],
) -> None:
    names, doubt = chosen
    key = own_name(entry.name)
    while key in guess.stacks:
        key += "_2"
    own_order = () if order == roles.order else order
    count = entry.shape[order.index("variable")]
    if names is None:
        listed, doubt = _unnamed(entry, count)
        table = StackTable(dataset=reference, names=listed, order=own_order)
    elif names.reference:
        listed = names.names
        table = StackTable(dataset=reference, names_from=names.reference, order=own_order)
    else:
        listed = names.names
        table = StackTable(dataset=reference, names=listed, order=own_order)
    guess.stacks[key] = table
    if doubt:
        guess.notes[f"stacks.{key}.{'names_from' if table.names_from else 'names'}"] = doubt
    for name in listed:
        meaning = meaning_of_name(name) or Meaning(own_name(name))
        guess.add("cells", meaning, FieldTable(stack=key, variable=name))


def _unnamed(entry: DatasetEntry, count: int) -> tuple[tuple[str, ...], str]:
    meaning = meaning_of_name(f"{entry.name}_r")
    if count == len(AXES) and meaning is not None and meaning.name.startswith(_VECTORS):
        word = meaning.name.rpartition("_")[0]
        return tuple(f"{word}_{axis}" for axis in ("r", "theta", "phi")), (
            "three variables without names, taken for the components r, theta, phi"
        )
    return tuple(f"{own_name(entry.name)}_{n}" for n in range(count)), (
        "the file names no variables; put the right names here and below"
    )


def turn_latitude_signs(guess: FieldGuess) -> None:
    """Turn theta components round where theta is a latitude, and note that it is a guess."""
    reason = "theta is a latitude, so a component along it points north; ours points south"
    for kind, tables in (("cells", guess.cells), ("faces", guess.faces)):
        for name, table in tables.items():
            if name in ("velocity_theta", "magnetic_theta"):
                tables[name] = replace(table, sign=-1)
                guess.notes[f"{kind}.{name}.sign"] = reason
