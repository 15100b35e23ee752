"""Tables of T_rphi and T_thetaphi from azimuth means, each split into its parts."""

from __future__ import annotations

from fieldviz.derived.azimuth_sums import (
    OVER_KEPLER,
    AzimuthMoments,
    MeridionalMesh,
    azimuth_moments,
)
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["stress_absences", "stress_averages", "stress_parts"]


def stress_averages(snapshot: Snapshot, density_floor: float | None) -> AzimuthMoments:
    """Go over the blocks for everything the stresses need and the snapshot has."""
    snapshot.require("work out stresses", "density")
    volume = ["density", *(["pressure"] if snapshot.has("pressure") else [])]
    mass: list[str] = []
    pairs, mass_pairs = [], []
    for component in ("r", "theta"):
        if snapshot.has(f"magnetic_{component}", "magnetic_phi"):
            volume += [f"magnetic_{component}", "magnetic_phi"]
            pairs.append((f"magnetic_{component}", "magnetic_phi"))
        if snapshot.has(f"velocity_{component}", "velocity_phi"):
            mass += [f"velocity_{component}", OVER_KEPLER]
            mass_pairs.append((f"velocity_{component}", OVER_KEPLER))
    return azimuth_moments(
        snapshot,
        dict.fromkeys(volume),
        dict.fromkeys(mass),
        pairs=pairs,
        mass_pairs=mass_pairs,
        density_floor=density_floor,
    )


def stress_parts(
    snapshot: Snapshot, moments: AzimuthMoments, component: str, kepler: bool, turbulent: bool
) -> tuple[Array | None, Array | None, Array | None]:
    """Maxwell of the means, Maxwell of the deviations, Reynolds: tables of T, or None."""
    b, v = f"magnetic_{component}", f"velocity_{component}"
    mean = fluctuating = reynolds = None
    if (b, "magnetic_phi") in moments.covariances:
        mean = -moments.means[b] * moments.means["magnetic_phi"] / snapshot.mu0
        if turbulent:
            fluctuating = -moments.covariances[b, "magnetic_phi"] / snapshot.mu0
    if (v, OVER_KEPLER) in moments.mass_covariances and (turbulent or kepler):
        reynolds = moments.means["density"] * moments.mass_covariances[v, OVER_KEPLER]
        if kepler:
            drift = moments.mass_means[v] * moments.mass_means[OVER_KEPLER]
            reynolds = reynolds + moments.means["density"] * drift
    return mean, fluctuating, reynolds


def stress_absences(
    snapshot: Snapshot, turbulent: bool, rotation: str, mesh: MeridionalMesh
) -> tuple[str, ...]:
    """Say what is absent, and why."""
    notes = []
    missing = [name for name in MAGNETIC if not snapshot.has(name)]
    if missing:
        notes.append(f"Maxwell stresses that need {', '.join(missing)} are absent: no such field")
    missing = [name for name in VELOCITY if not snapshot.has(name)]
    if missing:
        notes.append(f"Reynolds stresses that need {', '.join(missing)} are absent: no such field")
    if not snapshot.has("pressure"):
        notes.append("no alpha: there is no pressure")
    if not turbulent:
        also = " and Reynolds" if rotation == "mean" else ""
        notes.append(
            f"turbulent Maxwell{also} stresses are absent: one cell in azimuth has no deviation "
            "from its mean" + ("; rotation='kepler' gives a Reynolds stress" if also else "")
        )
    if not mesh.holds_midplane:
        notes.append(
            "no wind stress and no midplane pressure: the wedge does not hold theta = pi/2"
        )
    return tuple(notes)
