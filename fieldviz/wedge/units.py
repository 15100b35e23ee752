"""Unit scales: what one code unit of length, mass and time is outside the code."""

from __future__ import annotations

from dataclasses import dataclass

from fieldviz.errors import FieldvizError

__all__ = ["Unit", "UnitScales"]


@dataclass(frozen=True)
class Unit:
    """One code unit, expressed in a labelled unit.

    Attributes
    ----------
    value : float
        How many `label` one code unit is, > 0.
    label : str
        For example "au", "g", "s".
    """

    value: float
    label: str

    def __post_init__(self) -> None:
        if not 0.0 < self.value < float("inf"):
            raise FieldvizError(
                f"Cannot use this unit scale: expected a positive number of '{self.label}', "
                f"got {self.value}."
            )


@dataclass(frozen=True)
class UnitScales:
    """The three base scales; those not given stay in code units.

    Attributes
    ----------
    length, mass, time : Unit or None
    """

    length: Unit | None = None
    mass: Unit | None = None
    time: Unit | None = None

    def __bool__(self) -> bool:
        return any((self.length, self.mass, self.time))

    def conversion(
        self, *, length: int = 0, mass: int = 0, time: int = 0
    ) -> tuple[float, str] | None:
        """Factor and label that turn a code quantity into these units.

        Parameters
        ----------
        length, mass, time : int
            Powers of the base quantities; density is length=-3, mass=1.

        Returns
        -------
        (float, str) or None
            None where a scale that is needed was not given.
        """
        factor, labels = 1.0, []
        parts = ((self.mass, mass), (self.length, length), (self.time, time))
        for unit, power in parts:
            if power == 0:
                continue
            if unit is None:
                return None
            factor *= unit.value**power
            labels.append(unit.label if power == 1 else f"{unit.label}^{power}")
        return factor, " ".join(labels)
