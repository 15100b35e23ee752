"""Put the Saltmarsh disc on a mesh: exact face fluxes, cell values, one or more levels.

Every edge integral is summed over the edges of the finest level, so the fluxes of fine faces add
up to those of coarse ones exactly.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np

from fieldviz.errors import FieldvizError
from fieldviz.wedge import geometry
from fieldviz.wedge.demo.disc import SaltmarshDisc
from fieldviz.wedge.demo.fluctuations import Modes, make_modes, scatter_integral
from fieldviz.wedge.demo.state import disc_state
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.snapshot import Block, Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["DemoMesh", "demo_disc", "disc_block"]

Triple = tuple[Array, Array, Array]
_FINE_REACH = 3.0  # scale heights from the midplane that the first refined level covers


@dataclass(frozen=True)
class DemoMesh:
    """Finest edges, and the blocks that take every n-th of them.

    Attributes
    ----------
    finest : (phi, theta, r) edges of the finest level over the whole wedge
    levels : int
    block_shape : (n_phi, n_theta, n_r)
    blocks : tuple of (level, (phi, theta, r) offsets in finest cells)
    """

    finest: Triple
    levels: int
    block_shape: tuple[int, int, int]
    blocks: tuple[tuple[int, tuple[int, int, int]], ...]

    def stride(self, level: int) -> int:
        """Finest cells along one cell of a level."""
        return int(2 ** (self.levels - 1 - level))

    def finest_edges(self, number: int) -> Triple:
        """All finest edges within one block, (phi, theta, r)."""
        level, offsets = self.blocks[number]
        step = self.stride(level)
        phi, theta, r = (
            axis[start : start + n * step + 1]
            for axis, start, n in zip(self.finest, offsets, self.block_shape, strict=True)
        )
        return phi, theta, r


def demo_disc(
    *,
    shape: tuple[int, int, int] = (48, 128, 160),
    time: float = 0.0,
    wind: str = "even",
    levels: int = 1,
    seed: int = 1,
    blocks: tuple[int, int, int] | None = None,
    midplane_stretch: float = 0.0,
    precision: str = "double",
    **parameters: object,
) -> Snapshot:
    """Make a snapshot of the Saltmarsh disc, an invented one.

    Parameters
    ----------
    shape : (n_phi, n_theta, n_r)
        Cells of the coarsest level over the whole wedge.
    time : float
        0 to 14; sheets merge and split in time.
    wind : str
        "even", "odd", "one-sided" or "through-flow".
    levels : int
        1 for one level; each further one halves the cells nearer the midplane.
    seed : int
        Of all random numbers.
    blocks : (int, int, int), optional
        Coarsest blocks along phi, theta and r; (1, 1, 1) for one level, else (1, 4, 4).
    midplane_stretch : float
        0 for equal steps in theta, towards 1 for finer cells at the midplane.
    precision : str
        "double" or "single".
    **parameters
        Further attributes of `SaltmarshDisc`.

    Returns
    -------
    Snapshot
        With a face-centred magnetic field; cell values of it are made when asked for.

    Raises
    ------
    FieldvizError

    Examples
    --------
    >>> import fieldviz as fv
    >>> fv.demo_disc(shape=(4, 32, 24), wind="odd").grid.n_cells
    3072
    """
    disc = SaltmarshDisc(wind=wind, time=time, seed=seed, **parameters)  # type: ignore[arg-type]
    dtype = _dtype(precision)
    mesh = make_mesh(disc, shape, levels, blocks, midplane_stretch)
    return Snapshot.from_blocks(
        [disc_block(disc, mesh, number, dtype) for number in range(len(mesh.blocks))],
        time=time,
        title=f"Saltmarsh disc, {wind} wind (invented)",
    )


def _dtype(precision: str) -> np.dtype:
    if precision not in ("single", "double"):
        raise FieldvizError(
            "Cannot make the demo disc: expected precision 'single' or 'double', "
            f"got '{precision}'."
        )
    return np.dtype(np.float32 if precision == "single" else np.float64)


def make_mesh(
    disc: SaltmarshDisc,
    shape: tuple[int, int, int],
    levels: int,
    blocks: tuple[int, int, int] | None,
    midplane_stretch: float,
) -> DemoMesh:
    """Mesh of the disc: log-spaced r, theta perhaps finer at the midplane, even phi."""
    blocks = blocks or ((1, 1, 1) if levels == 1 else (1, 4, 4))
    if levels < 1 or min(shape) < 1 or any(n % b for n, b in zip(shape, blocks, strict=True)):
        raise FieldvizError(
            f"Cannot make the demo disc: expected levels >= 1 and a shape that {blocks} blocks "
            f"divide, got levels {levels} and shape {shape} (phi, theta, r)."
        )
    if not 0 <= midplane_stretch < 1:
        raise FieldvizError(
            f"Cannot make the demo disc: expected a stretch of 0 to 1, got {midplane_stretch}."
        )
    factor = 2 ** (levels - 1)
    n_phi, n_theta, n_r = (n * factor for n in shape)
    up, down = disc.theta_reach
    x = np.linspace(-1, 1, n_theta + 1)
    x = (1 - midplane_stretch) * x + midplane_stretch * x**3
    theta = (
        np.pi / 2 + np.where(x < 0, up, down) * x
        if up == down
        else np.linspace(np.pi / 2 - up, np.pi / 2 + down, n_theta + 1)
    )
    finest = (np.linspace(0, disc.period, n_phi + 1), theta, np.geomspace(*disc.r_range, n_r + 1))
    size = (shape[0] // blocks[0], shape[1] // blocks[1], shape[2] // blocks[2])
    leaves = tuple(_leaves(disc, theta, size, blocks, levels))
    return DemoMesh(finest, levels, size, leaves)


def _leaves(
    disc: SaltmarshDisc,
    theta: Array,
    size: tuple[int, int, int],
    blocks: tuple[int, int, int],
    levels: int,
) -> Iterator[tuple[int, tuple[int, int, int]]]:
    """Leaf blocks; one is split where it comes near the midplane."""

    def split(
        level: int, corner: tuple[int, int, int]
    ) -> Iterator[tuple[int, tuple[int, int, int]]]:
        span = [n * 2 ** (levels - 1 - level) for n in size]
        edges = theta[[corner[1], corner[1] + span[1]]] - np.pi / 2
        reach = _FINE_REACH * disc.thickness / 2**level
        if level == levels - 1 or edges[0] > reach or edges[1] < -reach:
            yield level, corner
            return
        for k, j, i in np.ndindex(2, 2, 2):
            half = [n // 2 for n in span]
            yield from split(
                level + 1,
                (corner[0] + k * half[0], corner[1] + j * half[1], corner[2] + i * half[2]),
            )

    for k, j, i in np.ndindex(*blocks):
        factor = 2 ** (levels - 1)
        yield from split(0, (k * size[0] * factor, j * size[1] * factor, i * size[2] * factor))


def disc_block(disc: SaltmarshDisc, mesh: DemoMesh, number: int, dtype: np.dtype) -> Block:
    """One block of the disc with all its fields."""
    step = mesh.stride(mesh.blocks[number][0])
    fine = mesh.finest_edges(number)
    edges: Triple = (fine[0][::step], fine[1][::step], fine[2][::step])
    phi, theta, r = edges
    areas = tuple(
        f(r, theta, phi) for f in (geometry.area_r, geometry.area_theta, geometry.area_phi)
    )
    state = disc_state(disc, centres(r), centres(theta)[:, None])
    B = _divided(_magnetic_fluxes(disc, fine, step, areas, state.magnetic_phi), areas)
    M = _divided(_mass_fluxes(disc, fine, step, areas, state.density * state.velocity_phi), areas)
    n_phi = len(phi) - 1
    cells = {
        "density": np.repeat(state.density[None], n_phi, 0),
        "pressure": np.repeat(state.pressure[None], n_phi, 0),
    }
    cells |= dict(zip(VELOCITY, (m / state.density for m in _to_cells(M)), strict=True))
    faces = dict(zip(MAGNETIC, B, strict=True))
    return Block(
        r,
        theta,
        phi,
        {name: values.astype(dtype) for name, values in cells.items()},
        {name: values.astype(dtype) for name, values in faces.items()},
        mesh.blocks[number][0],
    )


def _divided(fluxes: Triple, areas: tuple[Array, ...]) -> Triple:
    f_r, f_theta, f_phi = (flux / area for flux, area in zip(fluxes, areas, strict=True))
    return f_r, f_theta, f_phi


def _to_cells(faces: Triple) -> Triple:
    f_r, f_theta, f_phi = faces
    return (
        0.5 * (f_r[:, :, 1:] + f_r[:, :, :-1]),
        0.5 * (f_theta[:, 1:] + f_theta[:, :-1]),
        0.5 * (f_phi[1:] + f_phi[:-1]),
    )


def _circulation(along_phi: Array, along_theta: Array | float, along_r: Array | float) -> Triple:
    """Fluxes through faces from line integrals along their edges (Stokes)."""
    f_r, f_theta = np.diff(along_phi, axis=1), -np.diff(along_phi, axis=2)
    if isinstance(along_theta, float) or isinstance(along_r, float):
        n_phi, n_theta, n_r = along_phi.shape
        return f_r, f_theta, np.zeros((n_phi + 1, n_theta - 1, n_r - 1))
    return (
        f_r - np.diff(along_theta, axis=0),
        f_theta + np.diff(along_r, axis=0),
        np.diff(along_theta, axis=2) - np.diff(along_r, axis=1),
    )


def _summed(values: Array, step: int, axis: int) -> Array:
    """Sum groups of `step` finest entries along an axis."""
    if step == 1:
        return values
    shape = list(values.shape)
    shape[axis : axis + 1] = [shape[axis] // step, step]
    return values.reshape(shape).sum(axis + 1)


def _magnetic_fluxes(
    disc: SaltmarshDisc, fine: Triple, step: int, areas: tuple[Array, ...], B_phi: Array
) -> Triple:
    phi, theta, r = fine[0], fine[1][::step], fine[2][::step]
    sign = -1.0 if disc.reversed_field else 1.0
    foot = disc.footpoint(r, theta[:, None])
    if disc.sheet_wander:
        shift = disc.sheet_wander * np.cos(2 * np.pi * centres(phi) / disc.period)
        psi = disc.midplane_flux_function(foot, shift[:, None, None])
    else:
        psi = disc.midplane_flux_function(foot)[None]
    fluxes = _circulation(_summed(sign * psi * np.diff(phi)[:, None, None], step, 0), 0.0, 0.0)
    fluxes = (fluxes[0], fluxes[1], fluxes[2] + B_phi * areas[2])
    if disc.magnetic_turbulence:
        strength = sign * disc.magnetic_turbulence
        fluxes = _added(fluxes, _fluctuating_fluxes(disc, 0, fine, step), strength)
    return fluxes


def _mass_fluxes(
    disc: SaltmarshDisc, fine: Triple, step: int, areas: tuple[Array, ...], M_phi: Array
) -> Triple:
    phi, theta, r = fine[0][::step], fine[1][::step], fine[2][::step]
    chi = disc.stream_function(r, theta[:, None])
    width = np.broadcast_to(np.diff(phi)[:, None], (len(phi) - 1, len(theta)))
    if disc.wind_scatter:
        sides = [np.diff(scatter_integral(disc, side, phi)) for side in (0, 1)]
        scatter = np.where(theta < np.pi / 2, sides[0][:, None], sides[1][:, None])
        width = width + disc.wind_scatter * scatter
    fluxes = _circulation(chi * width[:, :, None], 0.0, 0.0)
    fluxes = (fluxes[0], fluxes[1], fluxes[2] + M_phi * areas[2])
    if disc.velocity_turbulence:
        fluxes = _added(fluxes, _fluctuating_fluxes(disc, 1, fine, step), disc.velocity_turbulence)
    return fluxes


def _added(fluxes: Triple, more: Triple, factor: float) -> Triple:
    f_r, f_theta, f_phi = (a + factor * b for a, b in zip(fluxes, more, strict=True))
    return f_r, f_theta, f_phi


def _fluctuating_fluxes(disc: SaltmarshDisc, stream: int, fine: Triple, step: int) -> Triple:
    scale = _unit_scale(_steady(disc), stream)
    f_r, f_theta, f_phi = _raw_fluxes(disc, stream, fine, step)
    return scale * f_r, scale * f_theta, scale * f_phi


def _raw_fluxes(disc: SaltmarshDisc, stream: int, fine: Triple, step: int) -> Triple:
    modes: Modes = make_modes(disc, stream)
    envelope = _field_envelope if stream == 0 else _mass_envelope
    edges = tuple(axis[::step] for axis in fine)
    middles = tuple(centres(axis) for axis in fine)
    # The last azimuth is the first one again, to the bit.
    turn = np.where(np.isclose(edges[0], disc.period, rtol=1e-13, atol=0), 0.0, edges[0])

    def integral(component: int, phi: Array, theta: Array, r: Array, width: float = 0.0) -> Array:
        value = modes.potential(component, phi, theta, r, width) * envelope(disc, theta[:, None], r)
        return np.asarray(value)

    along_r = integral(0, turn, edges[1], middles[2]) * np.diff(fine[2])
    along_theta = integral(1, turn, middles[1], edges[2]) * edges[2] * np.diff(fine[1])[:, None]
    R = edges[2] * np.sin(edges[1])[:, None]
    steps = np.diff(fine[0])[:, None, None]
    along_phi = integral(2, middles[0], edges[1], edges[2], float(steps.mean())) * R * steps
    return _circulation(
        _summed(along_phi, step, 0), _summed(along_theta, step, 1), _summed(along_r, step, 2)
    )


def _field_envelope(disc: SaltmarshDisc, theta: Array, r: Array) -> Array:
    h = disc.thickness
    strength = disc.background_field * r**-disc.field_slope
    return np.asarray(strength * h * r * np.exp(-((np.cos(theta) / (2 * h)) ** 2)))


def _mass_envelope(disc: SaltmarshDisc, theta: Array, r: Array) -> Array:
    h, cosine = disc.thickness, np.cos(theta)
    body = np.exp((np.sin(theta) - 1) / h**2) * r**-disc.density_slope
    inside = 1 - disc.wind_share(cosine) - disc.wind_share(-cosine)
    return np.asarray(body * h * r**-0.5 * h * r * inside)


def _steady(disc: SaltmarshDisc) -> SaltmarshDisc:
    """The disc whose fluctuations have the same scale, so that it is worked out once a series."""
    return replace(disc, time=0.0, wind="even", side_ratio=None, reversed_field=False)


@lru_cache(maxsize=32)
def _unit_scale(disc: SaltmarshDisc, stream: int) -> float:
    """Factor that makes the rms within 2 H equal 1 on a fixed reference mesh."""
    mesh = make_mesh(disc, (32, 96, 96), 1, None, 0.0)
    phi, theta, r = mesh.finest
    areas = tuple(
        f(r, theta, phi) for f in (geometry.area_r, geometry.area_theta, geometry.area_phi)
    )
    cells = _to_cells(_divided(_raw_fluxes(disc, stream, mesh.finest, 1), areas))
    near = np.abs(np.cos(centres(theta))) < 2 * disc.thickness
    r_c = centres(r)
    if stream == 0:
        reference = disc.background_field * r_c**-disc.field_slope
    else:
        density = disc_state(disc, r_c, centres(theta)[:, None]).density
        reference = density * disc.thickness * r_c**-0.5
    square = sum((values / reference) ** 2 for values in cells)
    return float(1 / np.sqrt(np.mean(np.asarray(square)[:, near])))
