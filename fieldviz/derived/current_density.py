"""The electric current density J = curl B / mu0, and what of it flows along the field."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from fieldviz.derived.edge_current import WALLS, cell_current, edge_current
from fieldviz.derived.stencils import stencils
from fieldviz.derived.vector_calculus import curl_arrays
from fieldviz.errors import FieldvizError
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["CurrentDensity", "current_density"]

_OF_EDGES = "mean of the current on the four edges around each cell"
_FORMS = ("auto", "edges", "cells")


@dataclass(frozen=True, eq=False)
class CurrentDensity:
    """Current density at cell centres; arrays (n_blocks, n_phi, n_theta, n_r).

    Attributes
    ----------
    r, theta, phi : arrays
        Components of J, field over length and mu0, in the precision of the field.
    snapshot : Snapshot
        What it was worked out from.
    form : str
        "edges" or "cells": which form it is in.
    notes : tuple of str
        What the numbers rest on.
    """

    r: Array
    theta: Array
    phi: Array
    snapshot: Snapshot
    form: str
    notes: tuple[str, ...]

    @cached_property
    def one_sided(self) -> Array:
        """Cells at a wall in r or theta, whose derivatives reach inward only; bool."""
        known = stencils(self.snapshot.grid)
        sides = known.theta.one_sided[:, None, :, None] | known.r.one_sided[:, None, None, :]
        return np.broadcast_to(sides, self.r.shape)

    @cached_property
    def magnitude(self) -> Array:
        """|J|."""
        return np.sqrt(self.r**2 + self.theta**2 + self.phi**2)

    @cached_property
    def parallel(self) -> Array:
        """J.B/|B|, positive along the field; NaN where there is no field."""
        along, strength = self._along()
        with np.errstate(divide="ignore", invalid="ignore"):
            return along / np.sqrt(strength)

    @cached_property
    def alpha(self) -> Array:
        """mu0 J.B/B^2 in 1/length: of a force-free field, curl B = alpha B; NaN without field."""
        along, strength = self._along()
        mu0 = along.dtype.type(self.snapshot.mu0)
        with np.errstate(divide="ignore", invalid="ignore"):
            return mu0 * along / strength

    def _along(self) -> tuple[Array, Array]:
        """J.B and B^2."""
        b_r, b_theta, b_phi = (self.snapshot.cell(name) for name in MAGNETIC)
        along = self.r * b_r + self.theta * b_theta + self.phi * b_phi
        return along, b_r * b_r + b_theta * b_theta + b_phi * b_phi


def current_density(snapshot: Snapshot, *, form: str = "auto") -> CurrentDensity:
    """Work out J = curl B / mu0 at cell centres.

    Parameters
    ----------
    snapshot : Snapshot
        With all three magnetic components. `mu0` is 1, or 4 pi for Gaussian fields (c = 1).
    form : str
        "edges": the mean of the four edges around a cell, from faces (`edge_current`). "cells":
        slopes of cell values. "auto": edges where the field is known on faces alone and the wedge
        has neither axis nor origin, else cells.

    Returns
    -------
    CurrentDensity
        Second order at every cell, walls included; at level jumps, "cells" of a field made from
        faces is first order. A NaN in B spoils only the cells whose derivatives reach it.

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    Ampere's law without the displacement current. Within one level both forms err alike. A cell
    value made from faces is their mean, off by the square of the cell size; at a level jump this
    leaps, and slopes of cells keep an error of first order there. Edges do not, and so are
    preferred. Cell values that are stored beside faces are used as they stand.

    Examples
    --------
    >>> import fieldviz as fv
    >>> current = fv.current_density(fv.demo_disc(shape=(4, 32, 24)))
    >>> current.magnitude.shape
    (1, 4, 32, 24)
    """
    if form not in _FORMS:
        raise FieldvizError(
            f"Cannot work out the current density: expected form to be one of {', '.join(_FORMS)}, "
            f"got '{form}'; leave it out and the better one is taken."
        )
    snapshot.require("work out the current density", *MAGNETIC)
    if form != "cells" and _edges_serve(snapshot):
        made = cell_current(snapshot)
        return CurrentDensity(*made, snapshot, "edges", (_OF_EDGES, WALLS, *_holes(made)))
    if form == "edges":
        edges = edge_current(snapshot)
        notes = (_OF_EDGES, *edges.notes)
        return CurrentDensity(*edges.cell_means(), snapshot, "edges", notes)
    found = curl_arrays(snapshot, MAGNETIC, 1.0 / snapshot.mu0)
    note = "slopes of cell values; one-sided in cells at a wall"
    return CurrentDensity(*found, snapshot, "cells", (note,))


def _holes(components: tuple[Array, ...]) -> tuple[str, ...]:
    without = sum(int(np.count_nonzero(~np.isfinite(component))) for component in components)
    return (f"{without} values of the components have no number",) if without else ()


def _edges_serve(snapshot: Snapshot) -> bool:
    """Whether the field is on faces alone, and every edge has a loop within the wedge."""
    grid = snapshot.grid
    on_faces = all(name in snapshot.faces and name not in snapshot.cells for name in MAGNETIC)
    off_axis = grid.theta_range[0] > 0 and grid.theta_range[1] < np.pi
    return on_faces and off_axis and grid.r_range[0] > 0
