"""The result of `outflow`: losses, lever arm, budgets, and one sentence."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from fieldviz.wind.accretion import Accretion, EjectionIndex
from fieldviz.wind.budgets import Budget
from fieldviz.wind.domain_fluxes import EdgeFlux, SphereFlux
from fieldviz.wind.inclination import Inclination
from fieldviz.wind.launch_surfaces import LaunchSurface
from fieldviz.wind.side_fluxes import Loss

__all__ = ["LeverArm", "Outflow", "SurfaceRepeat"]


@dataclass(frozen=True)
class LeverArm:
    """lambda_eff = Jdot/(Mdot sqrt(GM r)): angular momentum lost per mass, Kepler's being 1.

    Attributes
    ----------
    upper, lower, total : float
        r is that of the launching surface; NaN on a side that loses no mass.
    notes : tuple of str
    """

    upper: float
    lower: float
    total: float
    notes: tuple[str, ...]


@dataclass(frozen=True)
class SurfaceRepeat:
    """The same losses through a surface one H nearer to or farther from the midplane.

    Attributes
    ----------
    moved : float
        In H.
    label : str
    clipped : bool
    mass, torque, energy : (float, float)
        Upper and lower; NaN with a reason.
    reason : str
        Why there is none at all.
    """

    moved: float
    label: str
    clipped: bool
    mass: tuple[float, float]
    torque: tuple[float, float]
    energy: tuple[float, float]
    reason: str = ""


@dataclass(frozen=True, eq=False)
class Outflow:
    """Losses through launching surfaces; code units, for the wedge unless said otherwise.

    Attributes
    ----------
    time : float
    surface : LaunchSurface
    mass : Loss
    kinetic_torque, magnetic_torque, torque : Loss
        Angular momentum carried by the gas and by the field, and both.
    energy : Loss
        Sum of `energy_parts`.
    energy_parts : mapping of str to Loss
        kinetic_energy, gravity, enthalpy (only with gamma), poynting.
    repeats : tuple of SurfaceRepeat
        One H nearer to and one H farther from the midplane.
    spheres : mapping of str to SphereFlux
        mass, torque, energy beyond the surfaces.
    edges : mapping of str to EdgeFlux
        mass, torque, energy out of the domain.
    accretion : Accretion
    ejection : EjectionIndex
    lever_arm : LeverArm
    mass_budget, angular_momentum_budget : Budget
    inclination : Inclination or None
        None without the fields it needs.
    full_disc_factor : float
        2 pi over the azimuth of the wedge: wedge values times this are for the whole disc.
    wedge : str
        What the azimuth covers.
    notes : tuple of str
        What the numbers rest on, with the reasons for what is NaN.
    """

    time: float
    surface: LaunchSurface
    mass: Loss
    kinetic_torque: Loss
    magnetic_torque: Loss
    torque: Loss
    energy: Loss
    energy_parts: Mapping[str, Loss]
    repeats: tuple[SurfaceRepeat, ...]
    spheres: Mapping[str, SphereFlux]
    edges: Mapping[str, EdgeFlux]
    accretion: Accretion
    ejection: EjectionIndex
    lever_arm: LeverArm
    mass_budget: Budget
    angular_momentum_budget: Budget
    inclination: Inclination | None
    full_disc_factor: float
    wedge: str
    notes: tuple[str, ...]

    @property
    def upper(self) -> float:
        """Mass loss of the upper side."""
        return self.mass.upper.net

    @property
    def lower(self) -> float:
        """Mass loss of the lower side."""
        return self.mass.lower.net

    @property
    def total(self) -> float:
        """Mass loss of both sides."""
        return self.mass.total

    @property
    def spread(self) -> dict[str, tuple[float, float]]:
        """Least and largest total of mass, torque and energy over the three surfaces.

        A repeat without a number is left out; without one of the surface itself there is none.
        """
        found = {}
        for name in ("mass", "torque", "energy"):
            here = getattr(self, name).total
            known = [sum(getattr(r, name)) for r in self.repeats if not r.reason]
            three = np.array([here, *(value for value in known if np.isfinite(value))])
            found[name] = (float(three.min()), float(three.max()))
        return found

    @property
    def sentence(self) -> str:
        """In one sentence."""
        if np.isnan([self.upper, self.lower]).all():
            return f"mass loss: none given, {self.mass.reason}"
        low, high = self.spread["mass"]
        factor = self.full_disc_factor
        return (
            f"mass loss {self.upper:.4g} above and {self.lower:.4g} below through "
            f"{self.surface.label}, together {self.total:.4g} for the {self.wedge} and "
            f"{factor * self.total:.4g} for the full disc (times {factor:.4g}); {low:.4g} to "
            f"{high:.4g} with the surface moved by -1 to +1 H; lever arm {self.lever_arm.total:.3g}"
        )
