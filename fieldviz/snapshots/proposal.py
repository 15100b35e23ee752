"""Propose a layout description for any HDF5 file; what is a guess is marked as one."""

from __future__ import annotations

import re
from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import h5py
import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.snapshots.file_listing import AttributeEntry, DatasetEntry, Listing, list_file
from fieldviz.snapshots.foreign import open_foreign
from fieldviz.snapshots.hdf5_access import open_hdf5
from fieldviz.snapshots.layout_description import LayoutDescription
from fieldviz.snapshots.layout_tables import (
    AxesTable,
    BlocksTable,
    ConstantsTable,
    CoordinateTable,
    TimeTable,
)
from fieldviz.snapshots.proposal_axes import Candidate, FaceVote, Roles, guess_roles
from fieldviz.snapshots.proposal_fields import (
    FieldGuess,
    NameList,
    guess_fields,
    longer_axis,
    turn_latitude_signs,
)
from fieldviz.snapshots.proposal_grid import coordinate_candidates, coordinate_table
from fieldviz.snapshots.proposal_words import axis_of_name, meaning_of_name, tokens
from fieldviz.snapshots.references import natural_key, read_names

__all__ = ["propose_layout"]

Notes = dict[str, str]
_LONGEST_LIST = 4096
_LEVEL_WORDS = ({"level"}, {"levels"}, {"lev"}, {"refinement", "level"}, {"depth"})
_TIME_WORDS = ({"time"}, {"t"}, {"sim", "time"}, {"simulation", "time"}, {"code", "time"})


@dataclass(frozen=True)
class _Scene:
    """What the guesses look at: one group of blocks, or the whole file."""

    file: h5py.File
    listing: Listing
    base: str
    pattern: str
    bases: tuple[str, ...]

    def reference(self, path: str) -> str:
        """Give a path as a description says it: relative inside a block's group."""
        if self.pattern and path.startswith(f"{self.base}/"):
            return path[len(self.base) + 1 :]
        return path if self.pattern else path.strip("/")

    def datasets(self) -> list[tuple[str, DatasetEntry]]:
        """List the datasets of the first block, and those outside all blocks."""
        others = tuple(f"{base}/" for base in self.bases[1:])
        return [
            (self.reference(entry.path), entry)
            for entry in self.listing.datasets
            if not entry.path.startswith(others)
        ]

    def attributes(self) -> list[tuple[str, AttributeEntry]]:
        """List the attributes alike."""
        found = []
        for entry in self.listing.attributes:
            if any(entry.owner == b or entry.owner.startswith(f"{b}/") for b in self.bases[1:]):
                continue
            owner = "" if entry.owner == self.base else self.reference(entry.owner)
            if self.pattern and entry.owner == "/":
                owner = "/"
            found.append((f"{owner}@{entry.name}", entry))
        return found


def propose_layout(source: h5py.File | str | Path) -> tuple[LayoutDescription, Notes]:
    """Guess a layout description.

    Parameters
    ----------
    source : h5py.File, str or Path

    Returns
    -------
    LayoutDescription
        Reads the file at once where its names and lengths are plain; entries that could not be
        guessed are left out, and reading then says which.
    dict of str to str
        Why an entry is a guess, by dotted name; `layout_to_toml` writes them as comments. The
        entry "" tells why the description does not read the file yet.
    """
    if not isinstance(source, h5py.File):
        with open_hdf5(source) as file:
            return propose_layout(file)
    scene = _look(source)
    notes: Notes = {}
    main = _main_field(scene)
    time = _time(scene, notes)
    constants = _constants(scene, notes)
    if main is None:
        notes[""] = "no dataset of real numbers with two axes or more was found"
        return LayoutDescription(time=time, constants=constants), notes
    description = _described(scene, main, notes, time, constants)
    try:
        open_foreign(source, Path(source.filename), description)
    except FieldvizError as error:
        notes[""] = f"this does not read the file yet: {error}"
    return description, notes


def _look(file: h5py.File) -> _Scene:
    listing = list_file(file)
    families: dict[str, dict[str, float]] = defaultdict(lambda: defaultdict(float))
    for entry in listing.datasets:
        if not entry.is_numeric or len(entry.shape) < 2:
            continue
        parts = entry.path.split("/")[1:-1]
        for n in range(len(parts)):
            pattern = "/".join(re.sub(r"\d+", "*", part) for part in parts[: n + 1])
            if "*" in pattern.rpartition("/")[2]:
                group = "/" + "/".join(parts[: n + 1])
                families[pattern][group] += float(np.prod(entry.shape, dtype=float))
    usable = {pattern: groups for pattern, groups in families.items() if len(groups) > 1}
    if not usable:
        return _Scene(file, listing, "/", "", ())
    pattern = max(usable, key=lambda name: (sum(usable[name].values()), len(name)))
    bases = tuple(sorted(usable[pattern], key=natural_key))
    return _Scene(file, listing, bases[0], pattern, bases)


def _main_field(scene: _Scene) -> DatasetEntry | None:
    """Find the dataset whose axes tell those of all others: the largest that is no face field."""
    entries = [
        entry
        for _, entry in scene.datasets()
        if entry.is_numeric and len(entry.shape) >= 2 and 0 not in entry.shape
    ]
    if scene.pattern:
        entries = [entry for entry in entries if entry.path.startswith(f"{scene.base}/")]
    fields = [entry for entry in entries if not _is_coordinate(entry)]
    cells = [
        entry
        for entry in fields
        if not any(longer_axis(entry.shape, other.shape) is not None for other in fields)
        or not _is_magnetic(entry)
    ]
    if not cells:
        return None
    known = [entry for entry in cells if meaning_of_name(entry.name) or len(entry.shape) > 3]
    return max(known or cells, key=lambda entry: np.prod(entry.shape, dtype=float))


def _is_magnetic(entry: DatasetEntry) -> bool:
    meaning = meaning_of_name(entry.name)
    return meaning is not None and meaning.name.startswith("magnetic")


def _is_coordinate(entry: DatasetEntry) -> bool:
    parent = entry.group.rpartition("/")[2]
    named = axis_of_name(entry.name) or axis_of_name(f"{parent}_{entry.name}")
    return bool(named) and len(entry.shape) <= 2


def _described(
    scene: _Scene, main: DatasetEntry, notes: Notes, time: TimeTable, constants: ConstantsTable
) -> LayoutDescription:
    datasets, attributes = scene.datasets(), scene.attributes()
    names = _name_lists(scene, datasets, attributes)
    candidates = coordinate_candidates(
        scene.file, scene.base, [d for d in datasets if d[1] != main], attributes, main.shape
    )
    level, level_length = _level(scene, datasets, attributes)
    roles = _roles(scene, main, candidates, names, level_length)
    if roles is None:
        notes["axes"] = f"no order of axes fits '{main.path}' of shape {main.shape}"
        return LayoutDescription(time=time, constants=constants)
    _note_axes(scene, roles, notes)
    guess = _fields(datasets, main, roles, names, candidates, notes)
    grid = {
        axis: table
        for axis in ("r", "theta", "phi")
        if (table := coordinate_table(scene.file, scene.base, axis, roles, notes)) is not None
    }
    if grid.get("theta", CoordinateTable()).measured_from == "midplane":
        turn_latitude_signs(guess)
    notes.update(guess.notes)
    order = roles.order
    if guess.stacks and "variable" not in order:
        order = next(table.order for table in guess.stacks.values())
    stored = "groups" if scene.pattern else ("axis" if "block" in order else "single")
    use_level = level if stored != "single" else ""
    return LayoutDescription(
        blocks=BlocksTable(stored=stored, groups=scene.pattern, level=use_level),
        axes=AxesTable(order=order, ghost_cells=roles.ghosts),
        grid=grid,
        stacks=guess.stacks,
        cells=guess.cells,
        faces=guess.faces,
        time=time,
        constants=constants,
    )


def _fields(
    datasets: Sequence[tuple[str, DatasetEntry]],
    main: DatasetEntry,
    roles: Roles,
    names: Sequence[NameList],
    candidates: Sequence[Candidate],
    notes: Notes,
) -> FieldGuess:
    used = {candidate.reference for candidate in candidates}
    guess = guess_fields([d for d in datasets if d[0] not in used], main, roles, names)
    if guess.left_out:
        shown = ", ".join(guess.left_out[:8]) + (" and more" if len(guess.left_out) > 8 else "")
        notes["blocks"] = f"no place was found for {shown}"
    return guess


def _roles(
    scene: _Scene,
    main: DatasetEntry,
    candidates: Sequence[Candidate],
    names: Sequence[NameList],
    level_length: int,
) -> Roles | None:
    votes = [
        FaceVote(meaning.name.rpartition("_")[2], longer, left_out)
        for _, entry in scene.datasets()
        if (meaning := meaning_of_name(entry.name)) and meaning.name.startswith("magnetic")
        for longer, left_out in _longer_axes(entry.shape, main.shape)
    ]
    blocks: frozenset[int] = frozenset()
    if not scene.pattern:
        blocks = frozenset({c.rows for c in candidates if c.rows} | {level_length} - {0})
    return guess_roles(
        main.shape,
        candidates,
        block_lengths=blocks,
        variable_lengths=frozenset(len(entry.names) for entry in names),
        face_votes=votes,
    )


def _longer_axes(shape: tuple[int, ...], main: tuple[int, ...]) -> list[tuple[int, int | None]]:
    """Where a face field may be longer than the main one, and which axis of that it lacks."""
    longer = longer_axis(shape, main)
    if longer is not None:
        return [(longer, None)]
    found: list[tuple[int, int | None]] = []
    for left_out in range(len(main)):
        longer = longer_axis(shape, main[:left_out] + main[left_out + 1 :])
        if longer is not None:
            found.append((longer + (longer >= left_out), left_out))
    return found


def _name_lists(
    scene: _Scene,
    datasets: Sequence[tuple[str, DatasetEntry]],
    attributes: Sequence[tuple[str, AttributeEntry]],
) -> list[NameList]:
    found = []
    paths = {entry.path for _, entry in datasets}
    for reference, attribute in attributes:
        value = attribute.value
        texts = value if isinstance(value, list) else str(value).replace(",", " ").split()
        if len(texts) > 1 and all(isinstance(item, str) for item in texts):
            owner = attribute.owner if attribute.owner in paths else ""
            found.append(NameList(reference, owner, tuple(str(t).strip() for t in texts)))
    for reference, entry in datasets:
        size = float(np.prod(entry.shape, dtype=float))
        if entry.dtype.kind not in "SUO" or entry.problem or not 1 <= size <= _LONGEST_LIST:
            continue
        try:
            names = read_names(scene.file, scene.base, reference, "names")
        except (FieldvizError, OSError, RuntimeError, TypeError, ValueError):
            continue
        if len(names) > 1:
            found.append(NameList(reference, "", names))
    return found


def _level(
    scene: _Scene,
    datasets: Sequence[tuple[str, DatasetEntry]],
    attributes: Sequence[tuple[str, AttributeEntry]],
) -> tuple[str, int]:
    """Where the levels are, and how many blocks that tells of."""
    for reference, entry in datasets:
        if set(tokens(entry.name)) in _LEVEL_WORDS and entry.dtype.kind in "iu":
            n = int(np.prod(entry.shape, dtype=float))
            if not scene.pattern or n == len(scene.bases):
                return reference, n
    for reference, attribute in attributes:
        in_block = attribute.owner == scene.base and bool(scene.pattern)
        if in_block and set(tokens(attribute.name)) in _LEVEL_WORDS:
            return reference, 0
    return "", 0


def _note_axes(scene: _Scene, roles: Roles, notes: Notes) -> None:
    if roles.doubt:
        notes["axes.order"] = roles.doubt
    if roles.ghosts:
        notes["axes.ghost_cells"] = "the field is longer than its coordinate; taken for ghosts"
    for reference, attribute in scene.attributes():
        is_ghost = any("ghost" in word or "guard" in word for word in tokens(attribute.name))
        if is_ghost and not roles.ghosts and isinstance(attribute.value, int) and attribute.value:
            notes["axes.ghost_cells"] = (
                f"{reference} says {attribute.value}, but coordinates and fields are of one "
                "length; trim them here if both hold ghosts"
            )


def _in_file(scene: _Scene, wanted: Sequence[set[str]]) -> tuple[str, float] | tuple[None, None]:
    """Find the first attribute, root group first, whose name fits and which is one number."""
    entries = sorted(scene.listing.attributes, key=lambda entry: entry.owner.count("/"))
    for entry in sorted(entries, key=lambda entry: entry.owner != "/"):
        value = (
            entry.value[0]
            if isinstance(entry.value, list) and len(entry.value) == 1
            else (entry.value)
        )
        if isinstance(value, int | float) and not isinstance(value, bool) and np.isfinite(value):
            inside_field = any(entry.owner == d.path for d in scene.listing.datasets)
            if set(tokens(entry.name)) in wanted and not inside_field:
                return entry.reference, float(value)
    return None, None


def _time(scene: _Scene, notes: Notes) -> TimeTable:
    reference, _ = _in_file(scene, _TIME_WORDS)
    if reference is not None:
        return TimeTable(attribute=reference)
    for entry in scene.listing.datasets:
        one = np.prod(entry.shape, dtype=float) == 1
        if one and entry.is_numeric and set(tokens(entry.name)) in _TIME_WORDS:
            return TimeTable(dataset=entry.path.strip("/"))
    if re.search(r"(\d+)\.\w+$", Path(scene.file.filename).name):
        notes["time.file_name"] = (
            "no time in the file; this is the number in its name, give scale = code time per number"
        )
        return TimeTable(file_name=r"(\d+)\.\w+$")
    notes["time.value"] = "no time was found"
    return TimeTable(value=0.0)


def _constants(scene: _Scene, notes: Notes) -> ConstantsTable:
    found: dict[str, str] = {}
    wanted: dict[str, Sequence[set[str]]] = {
        "mu0": ({"mu", "0"}, {"mu0"}),
        "gm": ({"gm"},),
        "gamma": ({"gamma"},),
    }
    for name, words in wanted.items():
        reference, value = _in_file(scene, words)
        if reference is not None and value is not None and value > 0:
            found[name] = reference
        elif name != "gamma":
            notes[f"constants.{name}"] = "not in the file, 1 is taken"
    return ConstantsTable(**found)
