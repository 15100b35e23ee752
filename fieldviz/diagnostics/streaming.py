"""How a snapshot is gone through: kept in memory where it is small, else read again in pieces."""

from __future__ import annotations

from dataclasses import dataclass

from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.tiles import azimuth_window, tiled

__all__ = [
    "MOST_KEPT",
    "PIECE_CELLS",
    "WINDOW_CELLS",
    "Prepared",
    "field_bytes",
    "prepared",
]

MOST_KEPT = 500e6  # bytes of all fields, cell values made from faces included, kept at once
PIECE_CELLS = 1e6  # cells in memory at once of what is larger
WINDOW_CELLS = 4e6  # cells of the azimuths that are looked at where all must be in memory at once


@dataclass(frozen=True, eq=False)
class Prepared:
    """A snapshot as diagnostics go through it.

    Attributes
    ----------
    blocks : Snapshot
        For what goes block by block.
    whole : Snapshot
        For what needs whole fields: all of it, or some azimuths.
    notes : tuple of str
    """

    blocks: Snapshot
    whole: Snapshot
    notes: tuple[str, ...]

    def view(self, name: str) -> Snapshot:
        """The one of these that a part asks for."""
        found: Snapshot = getattr(self, name)
        return found


def field_bytes(snapshot: Snapshot) -> float:
    """Memory of all fields, and of the cell values that are made from faces."""
    made = [name for name in MAGNETIC if name in snapshot.faces and name not in snapshot.cells]
    count = len(snapshot.cells) + len(snapshot.faces) + len(made)
    return float(count) * snapshot.grid.n_cells * _item_size(snapshot)


def _item_size(snapshot: Snapshot) -> int:
    """Largest size of a number of the snapshot's fields, from one cell of each kind."""
    one = (slice(0, 1), slice(0, 1), slice(0, 1))
    sizes = [
        fields.part(name, 0, one).dtype.itemsize
        for fields in (snapshot.cells, snapshot.faces)
        for name in fields
    ]
    return max(sizes, default=8)


def prepared(snapshot: Snapshot) -> Prepared:
    """Choose how to go through a snapshot.

    Small ones are read once and kept, as every diagnostic asks for the same fields. Larger ones
    are cut into pieces; what must see whole fields gets as many azimuths as fit.
    """
    if field_bytes(snapshot) <= MOST_KEPT:
        for name in snapshot.cell_names:
            snapshot.cell(name)
        for name in snapshot.faces:
            snapshot.faces[name]
        return Prepared(snapshot, snapshot, ())
    window = azimuth_window(snapshot, WINDOW_CELLS)
    pieces = tiled(snapshot, PIECE_CELLS)
    notes: tuple[str, ...] = (
        f"the snapshot is larger than {MOST_KEPT / 1e6:.0f} MB and was read in pieces",
    )
    if pieces is not snapshot:
        notes += (
            f"its {snapshot.grid.n_blocks} blocks were cut into {pieces.grid.n_blocks} pieces, "
            "which block numbers and counts of blocks refer to",
        )
    if window is not snapshot:
        share = window.grid.period / snapshot.grid.period
        notes += (
            "what needs whole fields (magnetic midplane, current sheets) was measured on "
            f"{100 * share:.3g} % of the azimuth, whose first and last cell see each other as "
            "neighbours",
        )
    return Prepared(pieces, window, notes)
