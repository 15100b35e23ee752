"""The current density as a filter."""

from __future__ import annotations

from typing import Any

from fieldviz.derived.current_density import current_density
from fieldviz.filters.base import FieldvizAlgorithm, Setting
from fieldviz.filters.cell_arrays import add_cells
from fieldviz.filters.ranks import whole_snapshot

__all__ = ["CurrentDensity"]


class CurrentDensity(FieldvizAlgorithm):
    """Adds J = curl B / mu0 to the cells: components, `current` (Cartesian), strength, J along B.

    Settings
    --------
    Form : str
        "edges": from face-centred fields. "cells": from cell values. "auto": the better one.
    """

    TITLE = "Fieldviz Current Density"
    SETTINGS = {"Form": Setting("auto", ("auto", "edges", "cells"))}  # noqa: RUF012

    def work(self, inputs: Any, outputs: Any) -> None:
        """Work out the current and add it."""
        snapshot = whole_snapshot(inputs[0], "work out the current density")
        found = current_density(snapshot, form=self.GetForm())
        self.UpdateProgress(0.7)
        arrays = {
            "current_r": found.r,
            "current_theta": found.theta,
            "current_phi": found.phi,
            "current_strength": found.magnitude,
            "current_along_B": found.parallel,
            "current_alpha": found.alpha,
        }
        vectors = {"current": ("current_r", "current_theta", "current_phi")}
        add_cells(
            outputs[0], inputs[0], snapshot, arrays, vectors=vectors, notes=found.notes,
            colour="current_strength",
        )  # fmt: skip
