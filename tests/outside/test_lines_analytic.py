"""Lines on grids against lines known in closed form, or followed by DOP853 on the formula.

Values marked "check-values" were worked out for this project from the closed forms named beside
them. Each law is put on grids twice as fine in turn: the error falls with the square of the cell.
Fluxes through faces are exact: differences of the flux function, or line integrals of a vector
potential along edges.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import fieldviz as fv
from fieldviz.derived.flux_function import flux_function_at
from fieldviz.wedge import geometry
from fieldviz.wedge.geometry import centres

NAMES = ("magnetic_r", "magnetic_theta", "magnetic_phi")
BOTH = pytest.mark.parametrize("interpolation", ["linear", "flux"])
LEAST_ORDER = 1.8


def order(errors):
    """Order of convergence over all doublings: between two of them places in cells count too."""
    return np.log2(errors[0] / errors[-1]) / (len(errors) - 1)


def snapshot_of(edges, cells, fluxes, interpolation):
    """Cell values of formulas (r, theta, phi), or fluxes through faces over their areas."""
    r, theta, phi = edges
    if interpolation == "linear":
        at = (
            centres(r)[None, None, :],
            centres(theta)[None, :, None],
            centres(phi)[:, None, None],
        )
        shape = np.broadcast_shapes(*(a.shape for a in at))
        values = {
            name: np.broadcast_to(formula(*at), shape)
            for name, formula in zip(NAMES, cells, strict=True)
        }
        return fv.Snapshot.from_arrays(r, theta, phi, cells=values)
    areas = (geometry.area_r, geometry.area_theta, geometry.area_phi)
    faces = {
        name: flux / area(r, theta, phi)
        for name, flux, area in zip(NAMES, fluxes, areas, strict=True)
    }
    return fv.Snapshot.from_arrays(r, theta, phi, faces=faces)


def fluxes_of_psi(edges, psi, toroidal=None):
    """Exact fluxes of an axisymmetric field: differences of psi; `toroidal` through (r, theta)."""
    r, theta, phi = edges
    step, nodes = np.diff(phi)[:, None, None], psi(r, theta[:, None])
    across = np.zeros((len(theta) - 1, len(r) - 1)) if toroidal is None else toroidal
    return (
        np.diff(nodes, axis=0) * step,
        -np.diff(nodes, axis=1) * step,
        np.broadcast_to(across, (len(phi), *across.shape)),
    )


# ---- dipole -------------------------------------------------------------------------------------

# r = L sin^2(theta) (Chapman & Bartels 1940, from memory); check-values for L = 3.
FOOT, SHELL_LENGTH = 0.6154797086703873, 6.227944749399239


def shell_length(L):
    """Arc length above r = 1, integrated by hand: ds = L cos(lat) sqrt(1 + 3 sin^2(lat)) dlat."""
    x = np.sqrt(1 - 1 / L)
    return L * (x * np.sqrt(1 + 3 * x**2) + np.arcsinh(np.sqrt(3) * x) / np.sqrt(3))


def dipole(n, n_phi, interpolation):
    edges = (
        np.geomspace(1.0, 3.5, n + 1),
        np.linspace(0.45, np.pi - 0.45, n + 1),
        np.linspace(0, 0.6, n_phi + 1),
    )
    cells = (
        lambda r, theta, phi: 2 * np.cos(theta) / r**3,
        lambda r, theta, phi: np.sin(theta) / r**3,
        lambda r, theta, phi: 0.0,
    )
    fluxes = fluxes_of_psi(edges, lambda r, theta: np.sin(theta) ** 2 / r)
    return snapshot_of(edges, cells, fluxes, interpolation)


@BOTH
def test_dipole(interpolation):
    """Azimuth plays no part: 64^3, then 8 x 128 x 128. Tolerance 1e-3 on the latter (physics 7)."""
    shells = np.append(3.0, np.linspace(1.9, 3.3, 30))
    assert shell_length(3.0) == pytest.approx(SHELL_LENGTH, rel=1e-12)
    seeds = np.column_stack([shells, np.full(31, np.pi / 2), np.full(31, 0.3)])
    found = []
    for n, n_phi in ((32, 8), (64, 64), (128, 8)):
        snapshot = dipole(n, n_phi, interpolation)
        lines = fv.trace_lines(snapshot, "magnetic", seeds, interpolation=interpolation)
        assert lines.end_reason == [("inner wall", "inner wall")] * 31
        r, theta, phi = lines.spherical.T
        np.testing.assert_allclose(phi, 0.3, atol=1e-14)
        feet = np.abs(np.cos(lines.footpoints.position[:, :, 1]))
        feet = np.arccos(feet) - np.arcsin(np.sqrt(1 / shells))[:, None]
        assert (lines.footpoints.position[:, :, 0] == 1).all()
        lengths = lines.length / shell_length(shells) - 1
        psi = np.sin(theta) ** 2 / r * np.repeat(shells, np.diff(lines.offsets)) - 1
        found.append([np.sqrt(np.mean(error**2)) for error in (feet, lengths, psi)])
    assert np.arcsin(np.sqrt(1 / 3)) == pytest.approx(FOOT, rel=1e-12)
    assert abs(feet[0]).max() < 1e-4
    assert np.max(found[-1]) < 2e-4
    assert min(order(column) for column in np.transpose(found)) > LEAST_ORDER


# ---- Parker's spiral ----------------------------------------------------------------------------

TURN, WIND = 0.8, 1.3


def parker(n, from_source, interpolation):
    """B_r = r^-2, B_phi = -B_r TURN (r - r0) sin(theta)/WIND (Parker 1958), r0 = 1 or 0."""
    r0 = 1.0 if from_source else 0.0
    edges = (
        np.geomspace(1.0, 6.0, n + 1),
        np.linspace(0.9, 1.3, n // 4 + 1),
        np.linspace(0.0, 0.9, n // 4 + 1),
    )
    r, theta, _ = edges
    cells = (
        lambda r, theta, phi: r**-2,
        lambda r, theta, phi: 0.0,
        lambda r, theta, phi: -TURN * (r - r0) * np.sin(theta) / (WIND * r**2),
    )
    toroidal = geometry.cosine_steps(theta)[:, None] * (np.diff(r) - r0 * np.diff(np.log(r)))
    psi = lambda r, theta: -np.cos(theta) + 0 * r  # noqa: E731
    fluxes = fluxes_of_psi(edges, psi, -TURN / WIND * toroidal)
    return snapshot_of(edges, cells, fluxes, interpolation)


@BOTH
@pytest.mark.parametrize(
    ("from_source", "turn"),
    [
        # -(TURN/WIND) [(r - r0) - r0 ln(r/r0)], and -(TURN/WIND) (r - r0); check-values.
        (True, -1.9743018650904278),
        (False, -3.0769230769230766),
    ],
)
def test_parker_spiral(interpolation, from_source, turn):
    found = []
    for n in (32, 64, 128):
        lines = fv.trace_lines(
            parker(n, from_source, interpolation),
            "magnetic",
            [[1.0, 1.1, 0.2]],
            interpolation=interpolation,
        )
        assert lines.end_reason == [("inner wall", "outer wall")]
        assert lines.footpoints.wraps[0, 1] == np.floor((0.2 + turn) / 0.9)
        np.testing.assert_allclose(lines.spherical[:, 1], 1.1, atol=1e-13)
        found.append(abs(lines.twist[0] - turn))
    if interpolation == "flux":
        # Each cell is crossed exactly, and the turn over r is the fluxes' exact ratio.
        assert max(found) < 1e-12
        return
    assert found[-1] < 1e-3
    assert order(found) > LEAST_ORDER


# ---- uniform vertical field ---------------------------------------------------------------------


@BOTH
def test_uniform_vertical_field(interpolation):
    """Straight lines of R = const from wall to wall, 2 R/tan(theta) long."""
    found = []
    radii = np.array([1.4, 1.93, 2.6])
    for n in (16, 32, 64):
        edges = (
            np.geomspace(1, 4, n + 1),
            np.pi / 2 + np.linspace(-0.5, 0.5, n + 1),
            np.linspace(0, 0.4, 5),
        )
        cells = (
            lambda r, theta, phi: np.cos(theta),
            lambda r, theta, phi: -np.sin(theta),
            lambda r, theta, phi: 0.0,
        )
        psi = lambda r, theta: 0.5 * (r * np.sin(theta)) ** 2  # noqa: E731
        snapshot = snapshot_of(edges, cells, fluxes_of_psi(edges, psi), interpolation)
        seeds = np.column_stack([radii, np.full(3, np.pi / 2), np.full(3, 0.1)])
        lines = fv.trace_lines(snapshot, "magnetic", seeds, interpolation=interpolation)
        assert lines.end_reason == [("lower wall", "upper wall")] * 3
        R = lines.points[:, :2] @ [np.cos(0.1), np.sin(0.1)]
        wanted = np.repeat(radii, np.diff(lines.offsets))
        length = 2 * radii * np.tan(0.5)
        found.append([np.abs(R / wanted - 1).max(), np.abs(lines.length / length - 1).max()])
    found = np.array(found)
    assert (found[-1] < 1e-4).all()
    assert min(order(column) for column in found.T) > LEAST_ORDER


# ---- ABC field ----------------------------------------------------------------------------------

A, B, C = 1.0, np.sqrt(2 / 3), np.sqrt(1 / 3)
# check-values: ends after an arc length of 2 (SciPy DOP853, rtol 1e-13); Dombre et al. 1986.
ABC_SEEDS = np.array([[1.5, 0.2, 0.1], [2.0, 0.5, -0.3], [1.0, 1.0, 0.0], [2.5, 1.0, 0.4]])
ABC_ENDS = np.array(
    [
        [1.9768739513376263, 2.10999218016846, 0.399811613082425],
        [1.7978043068690175, 2.4610240524333045, -0.11070255213542193],
        [1.3144580665971857, 2.7653215172444554, 0.8767944501134572],
        [2.5976987533482783, 2.883674754144959, 0.009703775838171697],
    ]
)


def abc(x, y, z):
    return np.stack(
        [
            A * np.sin(z) + C * np.cos(y),
            B * np.sin(x) + A * np.cos(z),
            C * np.sin(y) + B * np.cos(x),
        ]
    )


def abc_spherical(r, theta, phi):
    """The same field in spherical components."""
    r, theta, phi = np.broadcast_arrays(r, theta, phi)
    sine, cosine = np.sin(theta), np.cos(theta)
    x, y, z = abc(r * sine * np.cos(phi), r * sine * np.sin(phi), r * cosine)
    flat = x * np.cos(phi) + y * np.sin(phi)
    return (
        flat * sine + z * cosine,
        flat * cosine - z * sine,
        y * np.cos(phi) - x * np.sin(phi),
    )


def abc_fluxes(r, theta, phi):
    """curl B = B: fluxes are line integrals of B itself, by three-point Gauss quadrature."""
    nodes = [np.array(edges) for edges in (r, theta, phi)]
    share, weight = np.polynomial.legendre.leggauss(3)
    along = []
    for axis in range(3):
        low, step = nodes[axis][:-1], np.diff(nodes[axis])
        total = 0.0
        for x, w in zip(share, weight, strict=True):
            at = list(nodes)
            at[axis] = low + 0.5 * (1 + x) * step
            R, T, P = at[0][None, None, :], at[1][None, :, None], at[2][:, None, None]
            scale = (np.ones_like(R), R, R * np.sin(T))[axis]
            total = total + 0.5 * w * abc_spherical(R, T, P)[axis] * scale
        shape = [1, 1, 1]
        shape[2 - axis] = -1
        along.append(total * step.reshape(shape))
    a_r, a_t, a_p = along
    return (
        np.diff(a_p, axis=1) - np.diff(a_t, axis=0),
        np.diff(a_r, axis=0) - np.diff(a_p, axis=2),
        np.diff(a_t, axis=2) - np.diff(a_r, axis=1),
    )


def spherical(points):
    r = np.linalg.norm(points, axis=1)
    return np.column_stack([r, np.arccos(points[:, 2] / r), np.arctan2(points[:, 1], points[:, 0])])


def test_reference_ends_of_the_abc_field():
    """DOP853 of SciPy on the formula gives the stored ends."""
    for seed, end in zip(ABC_SEEDS, ABC_ENDS, strict=True):
        path = solve_ivp(
            lambda s, x: abc(*x) / np.linalg.norm(abc(*x)),
            (0, 2),
            seed,
            method="DOP853",
            rtol=1e-12,
            atol=1e-12,
        )
        np.testing.assert_allclose(path.y[:, -1], end, atol=1e-9)


@BOTH
def test_abc_field(interpolation):
    found = []
    for n in (24, 48, 96):
        edges = (
            np.geomspace(0.95, 4.2, n + 1),
            np.pi / 2 + np.linspace(-0.55, 0.5, n + 1),
            np.linspace(-0.35, 1.45, n + 1),
        )
        cells = [lambda *at, axis=axis: abc_spherical(*at)[axis] for axis in range(3)]
        fluxes = abc_fluxes(*edges) if interpolation == "flux" else None
        snapshot = snapshot_of(edges, cells, fluxes, interpolation)
        lines = fv.trace_lines(
            snapshot,
            "magnetic",
            spherical(ABC_SEEDS),
            direction="forward",
            interpolation=interpolation,
            longest=2.0,
        )
        assert lines.end_reason == [("not traced", "length")] * 4
        np.testing.assert_allclose(lines.length, 2.0, rtol=1e-12)
        found.append(np.abs(lines.points[lines.offsets[1:] - 1] - ABC_ENDS).max())
    # Fluxes linear between opposite faces are constant across: first order in three dimensions.
    # Only where a flux function keeps lines in place (above) are they of second order.
    least, bound = (LEAST_ORDER, 5e-4) if interpolation == "linear" else (0.9, 2e-3)
    assert found[-1] < bound
    assert order(found) > least


# ---- the demo disc ------------------------------------------------------------------------------


@BOTH
@pytest.mark.parametrize("wind", ["even", "odd"])
def test_footpoints_of_the_demo_disc(interpolation, wind):
    """Lines seeded in the wind cross the midplane at R_f = `SaltmarshDisc.footpoint`."""
    disc = fv.SaltmarshDisc(wind=wind)
    seeds = np.array(
        [[r, theta, 0.3] for theta in (1.0, 1.2, 1.9, 2.1) for r in (1.9, 2.7, 3.4, 3.9)]
    )
    wanted = disc.footpoint(seeds[:, 0], seeds[:, 1])
    inside = (wanted > 1.05) & (wanted < 4.9)
    seeds, wanted = seeds[inside], wanted[inside]
    found = []
    for n in (128, 256, 512):
        lines = fv.trace_lines(
            fv.demo_disc(shape=(2, n, n), wind=wind),
            "magnetic",
            seeds,
            interpolation=interpolation,
        )
        line, crossing = lines.midplane_crossings()
        np.testing.assert_array_equal(line, np.arange(len(seeds)))
        found.append(np.sqrt(np.mean((crossing[:, 0] - wanted) ** 2)))
    assert found[-1] < 2e-3
    assert order(found) > LEAST_ORDER


def psi_range(snapshot):
    return np.ptp(
        flux_function_at(snapshot, snapshot.grid.r_edges[0], snapshot.grid.theta_edges[0])
    )


def midplane_seeds(count):
    return np.column_stack(
        [np.linspace(1.1, 4.7, count), np.full(count, np.pi / 2), np.full(count, 0.2)]
    )


@pytest.mark.parametrize("blocks", [(1, 1, 1), (2, 4, 3)])
@pytest.mark.parametrize("stretch", [0.0, 0.6])
def test_flux_function_stays_along_flux_lines(blocks, stretch):
    """To rounding on one level: the bound of 1e-10 of the range of psi leaves room for it."""
    disc = fv.demo_disc(shape=(2, 64, 48), blocks=blocks, midplane_stretch=stretch)
    lines = fv.trace_lines(disc, "magnetic", midplane_seeds(12), interpolation="flux")
    for number in range(len(lines)):
        r, theta, _ = lines.line(number).T
        psi = np.diagonal(flux_function_at(disc, r, theta))
        assert len(psi) > 40
        assert np.ptp(psi) < 1e-10 * psi_range(disc)


def test_flux_function_across_a_level_jump():
    """Second order: coarse and fine interpolation of psi differ by that much at the jump."""
    found = []
    for n in (64, 128, 256):
        disc = fv.demo_disc(shape=(2, n, n), levels=2, blocks=(1, 4, 4))
        lines = fv.trace_lines(disc, "magnetic", midplane_seeds(100), interpolation="flux")
        r, theta, _ = lines.footpoints.position.reshape(-1, 3).T
        ends = np.diagonal(flux_function_at(disc, r, theta)).reshape(-1, 2)
        seed = flux_function_at(disc, midplane_seeds(100)[:, 0], np.array([np.pi / 2]))[0]
        drift = np.abs(ends - seed[:, None]) / psi_range(fv.demo_disc(shape=(2, n, n)))
        found.append(np.sqrt(np.mean(drift**2)))
    assert found[-1] < 1e-3
    assert order(found) > LEAST_ORDER


def test_points_are_cartesian():
    """x = R cos(phi), y = R sin(phi), z = r cos(theta) of the dipole's line; elementary."""
    lines = fv.trace_lines(dipole(32, 4, "flux"), "magnetic", [[2.0, 1.3, 0.1]])
    r, theta, phi = lines.spherical.T
    xyz = np.column_stack([r * np.sin(theta) * f for f in (np.cos(phi), np.sin(phi))])
    np.testing.assert_allclose(lines.points[:, :2], xyz, rtol=1e-14)
    np.testing.assert_allclose(lines.points[:, 2], r * np.cos(theta), atol=1e-15)
