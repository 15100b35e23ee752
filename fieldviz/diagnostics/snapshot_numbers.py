"""All numbers of one snapshot: every diagnostic once, each a result or the reason it is absent."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property
from time import perf_counter

from fieldviz._version import __version__
from fieldviz.derived.shared import sharing
from fieldviz.diagnostics.dimensions import Dimension, physical_factor
from fieldviz.diagnostics.parts import Part, chosen_parts
from fieldviz.diagnostics.plain import plain
from fieldviz.diagnostics.streaming import prepared
from fieldviz.diagnostics.tables import Table
from fieldviz.errors import FieldvizError
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.units import UnitScales

__all__ = ["PartResult", "SnapshotNumbers", "measure"]

FORM = "fieldviz snapshot numbers, form 1"


@dataclass(frozen=True, eq=False)
class PartResult:
    """What one diagnostic gave.

    Attributes
    ----------
    name, title : str
    result : object or None
        The result object of the diagnostic.
    reason : str
        Why there is none; else empty.
    seconds : float
        Wall-clock time. What several parts share counts for the first of them.
    """

    name: str
    title: str
    result: object | None
    reason: str
    seconds: float

    @property
    def notes(self) -> tuple[str, ...]:
        """What the result rests on."""
        return tuple(getattr(self.result, "notes", ()))

    @property
    def sentence(self) -> str:
        """The result in a sentence where it has one, or the reason why there is none."""
        return self.reason or str(getattr(self.result, "sentence", ""))


@dataclass(frozen=True, eq=False)
class SnapshotNumbers:
    """The numbers of one snapshot.

    Attributes
    ----------
    source : str
        File, or empty.
    title : str
    time : float
        Code time.
    mu0, gm : float
    gamma : float or None
    units : UnitScales
    wedge : str
        What the azimuth covers: extensive numbers are for the wedge.
    n_cells, n_blocks : int
    levels : tuple of int
    fields : tuple of str
        Cell fields there were.
    parts : mapping of str to PartResult
    notes : tuple of str
        On the reading of the snapshot.
    """

    source: str
    title: str
    time: float
    mu0: float
    gm: float
    gamma: float | None
    units: UnitScales
    wedge: str
    n_cells: int
    n_blocks: int
    levels: tuple[int, ...]
    fields: tuple[str, ...]
    parts: dict[str, PartResult]
    notes: tuple[str, ...] = ()

    def __getitem__(self, name: str) -> PartResult:
        return self.parts[name]

    def result(self, name: str) -> object | None:
        """Result of a part; None where it is absent or was not asked for."""
        part = self.parts.get(name)
        return None if part is None else part.result

    @property
    def reasons(self) -> dict[str, str]:
        """Parts that are absent, and why."""
        return {name: part.reason for name, part in self.parts.items() if part.reason}

    @property
    def seconds(self) -> dict[str, float]:
        """Wall-clock time of each part."""
        return {name: part.seconds for name, part in self.parts.items()}

    @cached_property
    def _tables(self) -> tuple[Table, ...]:
        from fieldviz.diagnostics.rows import all_tables

        return all_tables(self)

    def tables(self, *, physical: bool = True) -> dict[str, Table]:
        """Tables by name.

        Parameters
        ----------
        physical : bool
            With a column in physical units after every one that the snapshot's scales can convert.
        """
        tables = self._tables
        if physical and self.units:
            tables = tuple(table.in_units(self.units, self.mu0) for table in tables)
        return {table.name: table for table in tables}

    def to_dict(self) -> dict[str, object]:
        """Everything as plain numbers and words for JSON; NaN and infinity become None."""
        time = physical_factor(Dimension(time=1), self.units, self.mu0)
        found = {
            "form": FORM,
            "version": __version__,
            "source": self.source,
            "title": self.title,
            "time": self.time,
            "physical_time": None if time is None else [self.time * time[0], time[1]],
            "constants": {"mu0": self.mu0, "gm": self.gm, "gamma": self.gamma},
            "units": self.units,
            "wedge": self.wedge,
            "mesh": {
                "n_cells": self.n_cells,
                "n_blocks": self.n_blocks,
                "levels": self.levels,
                "fields": self.fields,
            },
            "notes": self.notes,
            "parts": {
                name: {
                    "title": part.title,
                    "reason": part.reason or None,
                    "seconds": part.seconds,
                    "result": part.result,
                }
                for name, part in self.parts.items()
            },
            "tables": self.tables(),
        }
        return plain(found)  # type: ignore[return-value]


def measure(snapshot: Snapshot, *, parts: Iterable[str] | None = None) -> SnapshotNumbers:
    """Work out every diagnostic of a snapshot, once.

    Parameters
    ----------
    snapshot : Snapshot
        Whatever it has; what needs a field it lacks is absent, with the reason.
    parts : iterable of str, optional
        Names from `PARTS`; all by default.

    Returns
    -------
    SnapshotNumbers

    Raises
    ------
    FieldvizError
        If there is no part of a name. What a part raises of the kind becomes its reason; other
        errors are faults of the program and pass.

    Notes
    -----
    The thickness and the azimuthal averages are worked out once and shared. A snapshot larger than
    `streaming.MOST_KEPT` is read in pieces and never held as a whole; `notes` says so.

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.diagnostics.snapshot_numbers import measure
    >>> numbers = measure(fv.demo_disc(shape=(4, 48, 64)), parts=["structure", "symmetry"])
    >>> numbers["symmetry"].result.word
    'even'
    """
    chosen = chosen_parts(parts)
    found: dict[str, PartResult] = {}
    ready = prepared(snapshot)
    with sharing(ready.blocks), sharing(ready.whole):
        for part in chosen:
            found[part.name] = _run(part, ready.view(part.view))
    grid = snapshot.grid
    return SnapshotNumbers(
        snapshot.source,
        snapshot.title,
        snapshot.time,
        snapshot.mu0,
        snapshot.gm,
        snapshot.gamma,
        snapshot.units,
        grid.azimuth_sentence,
        grid.n_cells,
        grid.n_blocks,
        tuple(grid.levels),
        snapshot.cell_names,
        found,
        ready.notes,
    )


def _run(part: Part, snapshot: Snapshot) -> PartResult:
    begun = perf_counter()
    result, reason = None, ""
    try:
        result = part.run(snapshot)
    except FieldvizError as error:
        reason = str(error)
    return PartResult(part.name, part.title, result, reason, perf_counter() - begun)
