"""The history of flux sheets: tracks through time, and what happened to them."""

from __future__ import annotations

from dataclasses import dataclass

from fieldviz.sheets.sheet_records import FluxSheet, FluxSheets
from fieldviz.wedge.typing import Array

__all__ = ["SheetEvent", "SheetHistory", "SheetTrack"]


@dataclass(frozen=True)
class SheetEvent:
    """Something that happened to tracks between two outputs.

    Attributes
    ----------
    kind : str
        "merge", "split", "birth", "death", "entered", "left".
    after, time : float
        Time of the last output before, and of the first one that shows it.
    tracks : tuple of int
        "merge": the track that ends, then the one that goes on; "split": the one that was there,
        then the new one; else one track.
    radius : float
        Where the sheet is that shows it: after a merge, before a death, the new one of a split.
    """

    kind: str
    after: float
    time: float
    tracks: tuple[int, ...]
    radius: float


@dataclass(frozen=True, eq=False)
class SheetTrack:
    """One sheet through time.

    Attributes
    ----------
    number : int
    outputs : tuple of int
        Places in `SheetHistory.times`; one that was missed is left out.
    times, radii, fluxes : arrays
    sheets : tuple of FluxSheet
    begin, end : str
        "birth", "split", "entered" or "first output"; "death", "merge", "left" or "last output".
    lifetime : float
        From the first to the last output at which it was seen, in local orbits 2 pi/Omega(R); short
        of the truth by up to one step at either end.
    censored : bool
        It was there at the first or at the last output: the true lifetime is longer.
    missed : int
        Outputs that were bridged.
    """

    number: int
    outputs: tuple[int, ...]
    times: Array
    radii: Array
    fluxes: Array
    sheets: tuple[FluxSheet, ...]
    begin: str
    end: str
    lifetime: float
    censored: bool
    missed: int

    @property
    def persistent(self) -> bool:
        """Seen at two outputs or more, over at least one local orbit."""
        return len(self.outputs) > 1 and self.lifetime >= 1


@dataclass(frozen=True, eq=False)
class SheetHistory:
    """All sheets of a series.

    Attributes
    ----------
    times : (n,) array
        Of the outputs used.
    found : tuple of FluxSheets
        The sheets of each output.
    tracks : tuple of SheetTrack
    events : tuple of SheetEvent
        In order of time.
    notes : tuple of str
    """

    times: Array
    found: tuple[FluxSheets, ...]
    tracks: tuple[SheetTrack, ...]
    events: tuple[SheetEvent, ...]
    notes: tuple[str, ...]

    def events_of(self, kind: str) -> tuple[SheetEvent, ...]:
        """Events of one kind."""
        return tuple(event for event in self.events if event.kind == kind)
