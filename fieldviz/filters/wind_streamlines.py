"""Streamlines of the wind as a filter: equal mass for each, with invariants and critical points."""

from __future__ import annotations

from typing import Any

import numpy as np

from fieldviz.errors import MissingFieldError
from fieldviz.filters.base import FieldvizAlgorithm, Setting, given_range, given_value
from fieldviz.filters.field_lines import TRACING_SETTINGS, drawn_lines, followed
from fieldviz.filters.ranks import Ranks, whole_snapshot
from fieldviz.filters.trees import describe
from fieldviz.lines.critical_points import CriticalPoints, critical_points
from fieldviz.lines.seeds_wind import wind_plan
from fieldviz.wedge.typing import Array

__all__ = ["WindStreamlines"]

_INVARIANTS = ("k", "omega", "l", "e")


class WindStreamlines(FieldvizAlgorithm):
    """Streamlines from the launching surfaces; each stands for the same mass loss of its side.

    Settings
    --------
    Count, Height, Thickness, Radii
        Number on both sides; height of the surfaces in H; H/R (0: worked out); 0, 0 for all radii.
    Poloidal : bool
        Follow the flow without its azimuthal part.
    Invariants : bool
        The four invariants along each line, and where it passes the critical speeds.
    Direction, Tolerance, LongestStep, LongestLine, MostSteps, SampleFields
        As of `FieldLines`.
    """

    TITLE = "Fieldviz Wind Streamlines"
    OUTPUTS = ("vtkPolyData",)
    SETTINGS = {  # noqa: RUF012
        "Count": Setting(60),
        "Height": Setting(4.0),
        "Thickness": Setting(0.0),
        "Radii": Setting((0.0, 0.0)),
        "Poloidal": Setting(1),
        "Invariants": Setting(1),
        **{k: v for k, v in TRACING_SETTINGS.items() if k not in ("Interpolation", "Direction")},
        "Direction": Setting("forward", TRACING_SETTINGS["Direction"].choices),
    }

    def work(self, inputs: Any, outputs: Any) -> None:
        """Place seeds by mass flux, follow the flow, and look at each line."""
        snapshot = whole_snapshot(inputs[0], "draw streamlines of the wind")
        if Ranks().rank:
            return
        plan = wind_plan(
            snapshot,
            self.GetCount(),
            scale_heights=self.GetHeight(),
            thickness=given_value(self.GetThickness()),
            r_range=given_range(self.GetRadii()),
        )
        field = "poloidal velocity" if self.GetPoloidal() else "velocity"
        settings = {**self.settings, "Interpolation": "linear"}
        lines = followed(snapshot, field, plan.points, settings)
        self.UpdateProgress(0.6)
        per_line: dict[str, Array] = {"amount": plan.amount, "side": plan.group}
        notes = [f"amount is {plan.unit}; side 0 is above the midplane, 1 below", *plan.notes]
        if self.GetInvariants():
            try:
                found = critical_points(snapshot, lines, from_height=self.GetHeight())
            except MissingFieldError as error:
                notes.append(f"no invariants: {error}")
            else:
                lines.fields.update(
                    {f"invariant_{n}": getattr(found.invariants, n) for n in _INVARIANTS}
                )
                per_line |= _of_points(found)
                notes += dict.fromkeys((*found.invariants.notes, *found.notes))
        outputs[0].ShallowCopy(drawn_lines(lines, per_line))
        describe(outputs[0], snapshot, notes)


def _of_points(found: CriticalPoints) -> dict[str, Array]:
    """Numbers of each line: foot, critical points, lever arms."""
    numbers = {
        f"{kind}_radius": getattr(found, kind).R for kind in ("slow", "sonic", "alfven", "fast")
    }
    return {
        name: np.asarray(values, dtype=np.float64)
        for name, values in {
            "foot_radius": found.footpoint,
            **numbers,
            "lever_arm_alfven": found.lambda_A,
            "lever_arm_momentum": found.lambda_l,
            "mass_load": found.kappa,
        }.items()
    }
