"""The electric current density J = curl B / mu0, and what of it flows along the field."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from fieldviz.derived.stencils import stencils
from fieldviz.derived.vector_calculus import curl_arrays
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["CurrentDensity", "current_density"]


@dataclass(frozen=True, eq=False)
class CurrentDensity:
    """Current density at cell centres; arrays (n_blocks, n_phi, n_theta, n_r).

    Attributes
    ----------
    r, theta, phi : arrays
        Components of J, field over length and mu0, in the precision of the field.
    snapshot : Snapshot
        What it was worked out from.
    """

    r: Array
    theta: Array
    phi: Array
    snapshot: Snapshot

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


def current_density(snapshot: Snapshot) -> CurrentDensity:
    """Work out J = curl B / mu0 at cell centres.

    Parameters
    ----------
    snapshot : Snapshot
        With all three magnetic components. `mu0` is 1, or 4 pi for Gaussian fields (c = 1).

    Returns
    -------
    CurrentDensity
        Second order at every cell, walls and level jumps included. A NaN in B spoils only the
        cells whose derivatives reach it.

    Raises
    ------
    MissingFieldError

    Notes
    -----
    Ampere's law without the displacement current. Face-centred fields enter as cell values; see
    `vector_calculus` for the formulas and for why.

    Examples
    --------
    >>> import fieldviz as fv
    >>> current = fv.current_density(fv.demo_disc(shape=(4, 32, 24)))
    >>> current.magnitude.shape
    (1, 4, 32, 24)
    """
    snapshot.require("work out the current density", *MAGNETIC)
    found = curl_arrays(snapshot, MAGNETIC, 1.0 / snapshot.mu0)
    return CurrentDensity(*found, snapshot)
