"""Currents of published fields on the wedge r 1..2, against closed forms and recorded figures.

The recorded figures come from an independent calculation made before this code, on the same meshes
of n^3 cells with B sampled at cell centres; they leave out the outermost cells, as the fields do
not repeat with the wedge's azimuth.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import j0, j1, sph_harm_y

import fieldviz as fv
from fieldviz.derived.edge_current import edge_current

NAMES = ("magnetic_r", "magnetic_theta", "magnetic_phi")
INNER = (0, slice(1, -1), slice(1, -1), slice(1, -1))


def mesh(n):
    """Edges r, theta, phi: r in 1..2 log, theta in pi/2-0.5..pi/2+0.4, phi in 0..pi/4."""
    return (
        np.geomspace(1, 2, n + 1),
        np.linspace(np.pi / 2 - 0.5, np.pi / 2 + 0.4, n + 1),
        np.linspace(0, np.pi / 4, n + 1),
    )


def on_mesh(field, edges):
    r, theta, phi = (0.5 * (e[1:] + e[:-1]) for e in edges)
    phi, theta, r = np.meshgrid(phi, theta, r, indexing="ij")
    components = [np.broadcast_to(b, r.shape) for b in field(r, theta, phi)]
    cells = dict(zip(NAMES, components, strict=True))
    return fv.Snapshot.from_arrays(*edges, cells=cells), components


def inner_errors(snapshot, truth):
    """Root mean square error of each component of J over cells off the outer boundary."""
    found = fv.current_density(snapshot)
    return [
        float(np.sqrt(np.mean((component[INNER] - expected[INNER[1:]]) ** 2)))
        for component, expected in zip((found.r, found.theta, found.phi), truth, strict=True)
    ]


def spherical(field):
    """A field of Cartesian components of (x, y, z) as one of spherical ones of (r, theta, phi)."""

    def components(r, theta, phi):
        st, ct, sp, cp = np.sin(theta), np.cos(theta), np.sin(phi), np.cos(phi)
        b_x, b_y, b_z = field(r * st * cp, r * st * sp, r * ct)
        b_R = b_x * cp + b_y * sp
        return b_R * st + b_z * ct, b_R * ct - b_z * st, b_y * cp - b_x * sp

    return components


def abc(x, y, z):
    """A Beltrami field, curl B = B (Arnold 1965; A, B, C of Dombre et al. 1986, JFM 167, 353)."""
    a, b, c = 1.0, np.sqrt(2 / 3), np.sqrt(1 / 3)
    return (
        a * np.sin(z) + c * np.cos(y),
        b * np.sin(x) + a * np.cos(z),
        c * np.sin(y) + b * np.cos(x),
    )


ABC_ERRORS = {
    16: (0.002489219444328326, 0.0009023653420475085, 0.0019538926534563186),
    32: (0.0006292184801270925, 0.00022283804872329723, 0.0004840202187175255),
    64: (0.00015809157425698486, 5.535708684857028e-05, 0.00012047578494372178),
}


@pytest.mark.parametrize("n", ABC_ERRORS)
def test_abc_field_is_its_own_curl(n):
    """The recorded truncation errors, which fall at orders 1.99 to 2.01, to six digits."""
    errors = inner_errors(*on_mesh(spherical(abc), mesh(n)))
    np.testing.assert_allclose(errors, ABC_ERRORS[n], rtol=1e-6)


def test_abc_field_has_alpha_one():
    snapshot, _ = on_mesh(spherical(abc), mesh(32))
    found = fv.current_density(snapshot)
    strength = np.sqrt(sum(snapshot.cell(name) ** 2 for name in NAMES))
    np.testing.assert_allclose(found.alpha[INNER], 1, atol=5e-3)
    np.testing.assert_allclose(found.parallel[INNER], strength[INNER], atol=5e-3)


UNIFORM_ERRORS = {16: 0.0003740004112273832, 32: 9.359095435374935e-05, 64: 2.3407564074201673e-05}


@pytest.mark.parametrize("n", UNIFORM_ERRORS)
def test_a_uniform_vertical_field_has_a_current_of_truncation_only(n):
    def field(r, theta, phi):
        return np.cos(theta), -np.sin(theta), 0 * r

    snapshot, components = on_mesh(field, mesh(n))
    errors = inner_errors(snapshot, [np.zeros_like(components[0])] * 3)
    assert max(errors[:2]) < 1e-13
    assert errors[2] == pytest.approx(UNIFORM_ERRORS[n], rel=1e-6)


def test_an_axis_in_the_domain_keeps_a_uniform_vertical_field_without_current():
    edges = (np.linspace(1, 2, 33), np.linspace(0, np.pi, 65), np.linspace(0, 2 * np.pi, 9))
    snapshot, _ = on_mesh(lambda r, t, p: (np.cos(t), -np.sin(t), 0 * r), edges)
    found = fv.current_density(snapshot)
    assert max(np.abs(found.r).max(), np.abs(found.theta).max()) < 1e-12
    assert np.abs(found.phi).max() < 2e-3  # (pi/64)^2/6 inside, twice that one-sided


# (l, m): B at r 1.3, theta 1, phi 0.4, and rms |curl B| / rms |B| at 32^3 and 64^3.
MULTIPOLES = {
    (1, 0): ((0.24032140540201435, 0.18713920658650976, 0.0), (1.561e-3, 4.004e-4)),
    (2, 0): ((-0.04115194209303422, 0.30123392604597937, 0.0), (2.513e-3, 6.704e-4)),
    (2, 1): (
        (-0.33981136704338616, -0.10367815945660092, -0.05691221849591848),
        (4.075e-3, 1.0495e-3),
    ),
    (3, 2): (
        (0.2934628010902151, 0.020045159513475297, 0.17954309804958327),
        (7.463e-3, 1.950e-3),
    ),
    (4, 4): (
        (-0.006711005254316161, 0.003447269535434322, 0.2184124811950086),
        (1.3426e-2, 3.4945e-3),
    ),
}


def multipole(degree, order):
    """B = -grad(r^-(l+1) Re Y_lm), Jackson, Classical Electrodynamics, ch. 3-4 (from memory)."""

    def field(r, theta, phi):
        # Values and gradient in theta and phi, from SciPy.
        value, slope = sph_harm_y(degree, order, theta, phi, diff_n=1)
        fall = r ** -(degree + 2.0)
        return (
            (degree + 1) * fall * value.real,
            -fall * slope[..., 0].real,
            -fall * slope[..., 1].real / np.sin(theta),
        )

    return field


@pytest.mark.parametrize("which", MULTIPOLES)
def test_multipoles_are_free_of_current(which):
    at_point, recorded = MULTIPOLES[which]
    field = multipole(*which)
    np.testing.assert_allclose(np.ravel(field(1.3, 1.0, 0.4)), at_point, rtol=1e-9, atol=1e-15)
    found = []
    for n in (32, 64):
        snapshot, components = on_mesh(field, mesh(n))
        size = np.sqrt(np.mean(sum(b[INNER[1:]] ** 2 for b in components)))
        found.append(np.sqrt(np.mean(fv.current_density(snapshot).magnitude[INNER] ** 2)) / size)
    # Recorded without saying over which cells: 20 percent, and the order.
    np.testing.assert_allclose(found, recorded, rtol=0.2)
    assert 3.6 < found[0] / found[1] < 4.2


def test_the_current_of_a_parker_spiral():
    """Parker 1958, ApJ 128, 664: B_phi = -B_r Om (r - r0) sin(theta)/v, B_r = B0 (r0/r)^2."""
    omega, speed = 0.8, 1.3
    expected = (-0.06978401868085805, 0.06855441231241811, 0.0)  # J at r = 2, theta = 1.1

    def field(r, theta, phi):
        radial = r**-2.0
        return radial, 0 * r, -radial * omega * (r - 1) * np.sin(theta) / speed

    errors = []
    for n in (25, 75):  # odd, so that a cell centre lies at the point
        edges = (np.linspace(1, 3, n + 1), np.linspace(0.8, 1.4, n + 1), np.linspace(0, 1, 3))
        snapshot, _ = on_mesh(field, edges)
        found = fv.current_density(snapshot)
        at = (0, 0, n // 2, n // 2)
        errors.append([found.r[at] - expected[0], found.theta[at] - expected[1]])
        assert abs(found.phi[at]) < 1e-14
    np.testing.assert_allclose(np.divide(errors[0], errors[1]), 9, rtol=0.03)
    assert np.abs(errors[1]).max() < 1e-4


def axial(field):
    """A field (B_phi, B_z) of the cylinder radius as one of spherical components."""

    def components(r, theta, phi):
        around, up = field(r * np.sin(theta))
        return up * np.cos(theta), -up * np.sin(theta), around

    return components


# Fields with curl B = alpha B, each with its alpha as a function of the cylinder radius.
FORCE_FREE = {
    "abc": (spherical(abc), lambda s: 1.0),
    # Lundquist 1950, Ark. Fys. 2, 361, from memory.
    "lundquist": (axial(lambda s: (j1(s), j0(s))), lambda s: 1.0),
    # Gold & Hoyle 1960, MNRAS 120, 89, from memory; twist 0.7 per length.
    "gold-hoyle": (
        axial(lambda s: (0.7 * s / (1 + 0.49 * s**2), 1 / (1 + 0.49 * s**2))),
        lambda s: 1.4 / (1 + 0.49 * s**2),
    ),
    "uniform": (axial(lambda s: (0 * s, 1 + 0 * s)), lambda s: 0.0),
}

# Recorded rms errors of J_r, J_theta, J_phi on inner edges, from B sampled at face centres.
EDGE_ERRORS = {
    ("abc", 16): (0.0004901789151307182, 0.0006773918325640239, 0.0005188200876600626),
    ("abc", 32): (0.00012341354531346605, 0.0001691582296075116, 0.00012993588143915584),
    ("abc", 64): (3.0955844732581645e-05, 4.226446860734928e-05, 3.251070057601346e-05),
    ("lundquist", 16): (3.412343679355195e-05, 0.000485536082950835, 0.00042725169431514533),
    ("lundquist", 32): (8.746008006549387e-06, 0.0001215406015258673, 0.0001053350768944439),
    ("lundquist", 64): (2.2124957000278408e-06, 3.0406335957718842e-05, 2.6147193668921018e-05),
    ("gold-hoyle", 16): (2.875182195611461e-05, 0.00033853827268669743, 5.374525538177195e-05),
    ("gold-hoyle", 32): (7.386652052234336e-06, 8.465399810328548e-05, 1.3742851692663364e-05),
    ("gold-hoyle", 64): (1.8706587757378388e-06, 2.116417914294209e-05, 3.4705867041603746e-06),
    ("uniform", 16): (0.0, 0.0, 9.355023781756996e-05),
    ("uniform", 32): (0.0, 0.0, 2.340501504708571e-05),
    ("uniform", 64): (0.0, 0.0, 5.852862955505708e-06),
}


def edge_errors(name, n):
    field, alpha = FORCE_FREE[name]
    edges = mesh(n)

    def at(own, *, faces):
        lines = [
            e if (axis == own) == faces else 0.5 * (e[1:] + e[:-1]) for axis, e in enumerate(edges)
        ]
        phi, theta, r = np.meshgrid(*lines[::-1], indexing="ij")
        return np.broadcast_to(field(r, theta, phi)[own], r.shape), alpha(r * np.sin(theta))

    faces = {label: at(own, faces=True)[0] for own, label in enumerate(NAMES)}
    found = edge_current(fv.Snapshot.from_arrays(*edges, faces=faces))
    errors, inner = [], slice(1, -1)
    for own, values in enumerate((found.r, found.theta, found.phi)):
        strength, factor = at(own, faces=False)
        # Off the outer boundary, as recorded.
        kept = tuple(slice(None) if axis == own else inner for axis in (2, 1, 0))
        errors.append(np.sqrt(np.mean((values[0] - factor * strength)[kept] ** 2)))
    return errors


@pytest.mark.parametrize("name", FORCE_FREE)
def test_currents_on_edges_have_the_recorded_errors_and_second_order(name):
    found = np.array([edge_errors(name, n) for n in (16, 32, 64)])
    recorded = [EDGE_ERRORS[name, n] for n in (16, 32, 64)]
    np.testing.assert_allclose(found, recorded, rtol=1e-6, atol=1e-13)
    large = found[:, found[0] > 1e-12]
    orders = np.log2(large[:-1] / large[1:])
    assert orders.min() > 1.9
    assert orders.max() < 2.1
