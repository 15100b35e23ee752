"""Plasma beta three ways, the Alfven speed and Elsasser numbers."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from fieldviz.derived.azimuth_sums import AzimuthMoments, MeridionalMesh, azimuth_moments
from fieldviz.derived.flux_function import flux_function_at
from fieldviz.derived.shared import once
from fieldviz.wedge.fields import MAGNETIC
from fieldviz.wedge.geometry import annulus_widths
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["Plasma", "alfven_speed", "net_vertical_field", "plasma", "plasma_beta"]

NO_DIFFUSIVITY = "no diffusivity"
_MIDPLANE = 0.5 * np.pi


def plasma_beta(pressure: Array, field_squared: Array, mu0: float = 1.0) -> Array:
    """P/(B^2/2 mu0), cell by cell; infinite without field.

    Parameters
    ----------
    pressure, field_squared : arrays that broadcast
        P and B^2.
    mu0 : float
        1, or 4 pi for Gaussian fields.
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(2.0 * mu0 * np.asarray(pressure) / np.asarray(field_squared))


def alfven_speed(field_squared: Array, density: Array, mu0: float = 1.0) -> Array:
    """|B|/sqrt(mu0 rho), cell by cell (Alfven 1942); B^2 of the poloidal part for v_Ap."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(np.sqrt(np.asarray(field_squared) / (mu0 * np.asarray(density))))


@dataclass(frozen=True, eq=False)
class Plasma:
    """How strong the field is; tables (n_theta, n_r), profiles (n,); None where absent.

    Attributes
    ----------
    r_edges, theta_edges : (n_r + 1,), (n_theta + 1,) arrays
        Mesh of the tables: the finest edges of all blocks.
    profile_edges : (n + 1,) array
        Radial edges of the cells at the midplane, for the profiles.
    beta_total : table or None
        <P>/<B^2/2mu0> along azimuth: every field there is.
    beta_mean : table or None
        The same for the field averaged along azimuth, B = <B>.
    net_field : profile or None
        Net B_z of the midplane, up positive.
    beta_z : profile or None
        2 mu0 P_mid/B_z^2; infinite where there is no net field.
    alfven, alfven_poloidal : tables or None
        sqrt(<B^2>/(mu0 <rho>)), code velocity.
    ambipolar, ohmic : table or None
        Elsasser numbers v_A^2/(eta Omega), Omega = sqrt(GM/R^3); None without diffusivity.
    sentence : str
    notes : tuple of str
        Reasons for what is None among them.
    """

    r_edges: Array
    theta_edges: Array
    profile_edges: Array
    beta_total: Array | None
    beta_mean: Array | None
    net_field: Array | None
    beta_z: Array | None
    alfven: Array | None
    alfven_poloidal: Array | None
    ambipolar: Array | None
    ohmic: Array | None
    sentence: str
    notes: tuple[str, ...]


def plasma(snapshot: Snapshot, *, ambipolar_coefficient: bool = False) -> Plasma:
    """Work out plasma beta, Alfven speeds and Elsasser numbers from azimuth averages.

    Parameters
    ----------
    snapshot : Snapshot
        Whatever it has of `density`, `pressure`, `magnetic_*`, `diffusivity_ambipolar|ohmic`.
    ambipolar_coefficient : bool
        `diffusivity_ambipolar` holds Q of eta = Q B^2 and not eta itself.

    Returns
    -------
    Plasma

    Notes
    -----
    Averages are <P>/<B^2/2mu0>, not the mean of beta. Elsasser numbers: Wardle 1999, 2007 (from
    memory), with eta in length^2/time averaged along azimuth; none is inferred from anything else.
    """
    magnetic = snapshot.has(*MAGNETIC)
    gas = [name for name in ("density", "pressure") if snapshot.has(name)]
    fields = [name for name in MAGNETIC if snapshot.has(name)]
    resistive = [f"diffusivity_{kind}" for kind in ("ambipolar", "ohmic")]
    resistive = [name for name in resistive if snapshot.has(name) and magnetic and "density" in gas]
    formulas: dict[str, Callable[[Snapshot, int], Array]] = {}
    if ambipolar_coefficient and magnetic:
        formulas["diffusivity_ambipolar"] = _from_coefficient
    moments = azimuth_moments(
        snapshot,
        [*gas, *fields, *resistive],
        pairs=[(name, name) for name in fields],
        formulas=formulas if "diffusivity_ambipolar" in resistive else None,
    )
    mesh, means, mu0 = moments.mesh, moments.means, snapshot.mu0
    square = np.sum([moments.mean_square(n) for n in MAGNETIC], axis=0) if magnetic else None
    beta_total = beta_mean = None
    if square is not None and "pressure" in gas:
        beta_total = plasma_beta(means["pressure"], square, mu0)
        mean_square = np.sum([means[name] ** 2 for name in MAGNETIC], axis=0)
        beta_mean = plasma_beta(means["pressure"], mean_square, mu0)
    net = net_vertical_field(snapshot, moments)
    beta_z = None
    if net is not None and "pressure" in gas:
        beta_z = plasma_beta(mesh.at_midplane(means["pressure"]), net**2, mu0)
    speeds = _speeds(moments, square, mu0)
    numbers = {name: _elsasser(snapshot, moments, speeds[0], name) for name in resistive}
    return Plasma(
        mesh.r_edges,
        mesh.theta_edges,
        mesh.profile_edges,
        beta_total,
        beta_mean,
        net,
        beta_z,
        *speeds,
        numbers.get("diffusivity_ambipolar"),
        numbers.get("diffusivity_ohmic"),
        _sentence(mesh, beta_total, beta_mean, beta_z),
        _notes(snapshot, moments, net, ambipolar_coefficient),
    )


def net_vertical_field(snapshot: Snapshot, moments: AzimuthMoments) -> Array | None:
    """Net B_z of the midplane on `MeridionalMesh.profile_edges`, up positive.

    Parameters
    ----------
    snapshot : Snapshot
    moments : AzimuthMoments
        With the mean of `magnetic_theta`.

    Returns
    -------
    (n,) array or None
        From face fluxes exact: the flux of each ring over its area. From cell values
        -<B_theta>, linear between the cells next to theta = pi/2; so too where a face has no
        number. None without the field there.
    """
    mesh = moments.mesh
    if "magnetic_theta" not in moments.means or not mesh.holds_midplane:
        return None
    from_cells: Array = -mesh.at_midplane(moments.means["magnetic_theta"])
    if "magnetic_theta" in snapshot.faces and snapshot.has("magnetic_r"):
        edges = mesh.profile_edges
        middle = np.array([_MIDPLANE])
        psi = once(snapshot, "midplane flux", lambda: flux_function_at(snapshot, edges, middle)[0])
        exact = np.diff(psi) / annulus_widths(edges)
        # A face without a number spoils psi from there outward: cells take over.
        return np.where(np.isfinite(exact), exact, from_cells)
    return from_cells


def _from_coefficient(snapshot: Snapshot, block: int) -> Array:
    """Q B^2."""
    square = sum(np.square(snapshot.cell_block(n, block).astype(np.float64)) for n in MAGNETIC)
    return np.asarray(snapshot.cell_block("diffusivity_ambipolar", block) * square)


def _speeds(
    moments: AzimuthMoments, square: Array | None, mu0: float
) -> tuple[Array | None, Array | None]:
    if "density" not in moments.means:
        return None, None
    density = moments.means["density"]
    total = None if square is None else alfven_speed(square, density, mu0)
    if not {"magnetic_r", "magnetic_theta"} <= set(moments.means):
        return total, None
    poloidal = moments.mean_square("magnetic_r") + moments.mean_square("magnetic_theta")
    return total, alfven_speed(poloidal, density, mu0)


def _elsasser(
    snapshot: Snapshot, moments: AzimuthMoments, speed: Array | None, name: str
) -> Array | None:
    if speed is None:
        return None
    mesh = moments.mesh
    rotation = np.sqrt(snapshot.gm / (mesh.r * np.sin(mesh.theta)[:, None]) ** 3)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(speed**2 / (moments.means[name] * rotation))


def _notes(
    snapshot: Snapshot, moments: AzimuthMoments, net: Array | None, coefficient: bool
) -> tuple[str, ...]:
    notes = [
        f"numbers are for the {snapshot.grid.azimuth_sentence}",
        "beta is <P>/<B^2/2mu0> along azimuth, not the mean of beta",
        *moments.notes,
    ]
    for name in ("density", "pressure", *MAGNETIC):
        if not snapshot.has(name):
            notes.append(f"what needs {name} is absent: no such field")
    if net is not None:
        exact = "magnetic_theta" in snapshot.faces and snapshot.has("magnetic_r")
        way = "fluxes through faces" if exact else "cell values next to the midplane"
        notes.append(f"net B_z is the azimuth mean at theta = pi/2, from {way}")
        if np.any(net == 0):
            notes.append(f"{np.count_nonzero(net == 0)} radii have no net field: beta_z infinite")
    elif not moments.mesh.holds_midplane:
        notes.append("no net field and no beta_z: the wedge does not hold theta = pi/2")
    for kind in ("ambipolar", "ohmic"):
        if not snapshot.has(f"diffusivity_{kind}"):
            notes.append(f"no {kind} Elsasser number: {NO_DIFFUSIVITY}")
    if coefficient and snapshot.has("diffusivity_ambipolar"):
        notes.append("diffusivity_ambipolar was taken as Q of eta = Q B^2")
    return tuple(notes)


def _sentence(
    mesh: MeridionalMesh, total: Array | None, mean: Array | None, net: Array | None
) -> str:
    """Medians over radius at the midplane."""
    profiles: list[tuple[str, Array | None]] = [("net B_z", net)]
    for name, table in (("its azimuthal mean", mean), ("all of the field", total)):
        known = table is not None and mesh.holds_midplane
        profiles.insert(0, (name, mesh.at_midplane(table) if known and table is not None else None))
    words = [
        f"{np.nanmedian(values):.3g} ({name})"
        for name, values in profiles
        if values is not None and not np.isnan(values).all()
    ]
    if not words:
        return "no plasma beta: see the notes"
    return "median plasma beta at the midplane: " + ", ".join(words)
