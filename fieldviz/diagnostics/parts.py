"""The diagnostics that make up the numbers of a snapshot."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from importlib import import_module

from fieldviz.errors import FieldvizError
from fieldviz.wedge.snapshot import Snapshot

__all__ = ["PARTS", "Part", "chosen_parts"]


@dataclass(frozen=True)
class Part:
    """One diagnostic.

    Attributes
    ----------
    name : str
    title : str
    home : str
        Module of the function.
    function : str
        Takes the snapshot and gives a result.
    view : str
        How it goes through the snapshot: "blocks" or "whole", as of `Prepared`.
    """

    name: str
    title: str
    home: str
    function: str
    view: str = "blocks"

    def run(self, snapshot: Snapshot) -> object:
        """Work the diagnostic out."""
        work: Callable[[Snapshot], object] = getattr(import_module(self.home), self.function)
        return work(snapshot)


PARTS = (
    Part("thickness", "Thickness", "fieldviz.derived.thickness", "disc_thickness"),
    Part("structure", "Structure", "fieldviz.derived.structure", "disc_structure"),
    Part("plasma", "Strength of the field", "fieldviz.derived.plasma", "plasma"),
    Part("stresses", "Stresses", "fieldviz.derived.stresses", "stresses"),
    Part("turbulence", "Turbulence", "fieldviz.derived.turbulence", "turbulence"),
    Part("mach", "Mach numbers", "fieldviz.derived.mach", "mach_numbers"),
    Part("flux_function", "Flux function", "fieldviz.derived.flux_function",
         "flux_function"),
    Part("flux_sheets", "Flux sheets", "fieldviz.sheets.flux_sheets", "find_flux_sheets"),
    Part("magnetic_midplane", "Magnetic midplane", "fieldviz.sheets.magnetic_midplane",
         "magnetic_midplane", view="whole"),
    Part("current_sheets", "Current sheets", "fieldviz.sheets.current_sheets", "current_sheets",
         view="whole"),
    Part("outflow", "Outflow", "fieldviz.wind.outflow", "outflow"),
    Part("wind_lines", "Lines of the wind", "fieldviz.diagnostics.wind_lines", "wind_lines"),
    Part("symmetry", "Symmetry of the wind", "fieldviz.symmetry.wind_symmetry", "wind_symmetry"),
    Part("resolution", "Resolution", "fieldviz.derived.resolution", "resolution"),
    Part("divergence", "Divergence of the field", "fieldviz.diagnostics.divergence_part",
         "divergence_of_the_field"),
)  # fmt: skip


def chosen_parts(names: Iterable[str] | None) -> tuple[Part, ...]:
    """The parts of these names, in the usual order; all by default.

    Raises
    ------
    FieldvizError
        If there is no part of a name.
    """
    if names is None:
        return PARTS
    wanted = [names] if isinstance(names, str) else list(names)
    unknown = sorted(set(wanted) - {part.name for part in PARTS})
    if unknown or not wanted:
        raise FieldvizError(
            f"Cannot measure the snapshot: expected parts among "
            f"{', '.join(part.name for part in PARTS)}, got {', '.join(unknown) or 'none'}; leave "
            "them out and all are measured."
        )
    return tuple(part for part in PARTS if part.name in wanted)
