"""H/R at each radius, with its source in words: what bands of so many scale heights rest on."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import AzimuthMoments
from fieldviz.derived.thickness import disc_thickness
from fieldviz.errors import FieldvizError
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["LocalThickness", "local_thickness", "sound_thickness"]


@dataclass(frozen=True, eq=False)
class LocalThickness:
    """H/R of each cell at the midplane.

    Attributes
    ----------
    h : (n,) array
        H/R on `MeridionalMesh.profile_edges`; H = c_s/Omega_K where it comes from pressure.
    columns : (n_r,) array
        The same for every column of the mesh.
    source : str
    """

    h: Array
    columns: Array
    source: str

    @property
    def median(self) -> float:
        """Median over the radii that have one."""
        return float(np.median(self.h[np.isfinite(self.h)]))


def local_thickness(
    snapshot: Snapshot, moments: AzimuthMoments, given: float | None = None
) -> LocalThickness:
    """H/R at each radius.

    Parameters
    ----------
    snapshot : Snapshot
    moments : AzimuthMoments
        With the means of `density` and, where there is one, `pressure`.
    given : float, optional
        H/R to use everywhere instead.

    Returns
    -------
    LocalThickness

    Raises
    ------
    MissingFieldError, FieldvizError

    Notes
    -----
    sqrt(<P>/<rho> r/GM) at the midplane; without pressure the spread of the density, one number.
    """
    mesh = moments.mesh
    n = len(mesh.columns)
    if given is not None:
        if not 0 < given < 1:
            raise FieldvizError(f"Cannot use this thickness: expected H/R of 0 to 1, got {given}.")
        h, source = np.full(n, float(given)), "given"
    elif (sound := sound_thickness(snapshot, moments)) is not None:
        h, source = sound, "midplane sound speed sqrt(P/rho), H = c_s/Omega_K"
        if not np.isfinite(h).any():
            raise FieldvizError(
                "Cannot work out the disc's thickness: expected positive density and pressure at "
                "the midplane, got none; give the thickness H/R yourself."
            )
    else:
        measured = disc_thickness(snapshot)
        h, source = np.full(n, measured.h), measured.source
    return LocalThickness(h, mesh.spread(h), source)


def sound_thickness(snapshot: Snapshot, moments: AzimuthMoments) -> Array | None:
    """H/R from the midplane sound speed, (n,); NaN where it is not positive.

    None without pressure, or where the wedge does not hold the midplane.
    """
    mesh = moments.mesh
    if not {"pressure", "density"} <= set(moments.means) or not mesh.holds_midplane:
        return None
    r = centres(mesh.profile_edges)
    pressure, density = (mesh.at_midplane(moments.means[f]) for f in ("pressure", "density"))
    with np.errstate(invalid="ignore", divide="ignore"):
        h = np.sqrt(pressure / density * r / snapshot.gm)
        return np.where(h > 0, h, np.nan)
