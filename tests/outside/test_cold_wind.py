"""The cold magnetised radial wind (Weber & Davis 1967; Michel 1969; formulae re-derived here,
papers cited from memory).

Derivation. Radial field B_r = Phi/r^2, radial flow u(r), no pressure, no gravity, mu0 = 1. Each
cone theta is a flow of its own: R = r sin(theta), and k = rho u/B_r and Omega are constants.
 1. Induction: v_phi = Omega R + u B_phi/B_r. Angular momentum: R (v_phi - B_phi/k) = L.
 2. M^2 = rho u^2/B_r^2 = k u r^2/Phi. With x = r/r_A and U = u/u_A at the point M = 1, M^2 = U x^2.
    Solving 1 for v_phi, regular at M = 1 only if L = Omega R_A^2:
        v_phi = Omega R_A x (U - 1)/(U x^2 - 1),
        B_phi = B_r (v_phi - Omega R)/u,  v_phi - Omega R = Omega R_A x U (1 - x^2)/(U x^2 - 1).
 3. Energy E = u^2/2 + v_phi^2/2 - Omega R B_phi/k. As -Omega R B_phi/k = Omega (L - R v_phi),
    E' = E - Omega L = u^2/2 + (v_phi - Omega R)^2/2 - (Omega R)^2/2 is constant too. A wind that
    starts from rest, turning with the field, near the axis has E' = 0.
 4. For x to infinity x^2 U^2 (1 - x^2)^2/(U x^2 - 1)^2 - x^2 tends to 2/U - 2, so
    E' = u_A^2 U^2/2 - (Omega R_A)^2 (1 - 1/U). The fast speed there is |B_phi|/rho^(1/2), and the
    fast point is where dE'/dU = 0: U^3 = (Omega R_A/u_A)^2, that is Michel's speed
    u_M^3 = (Omega sin theta)^2 Phi/k.
 5. E' = 0 with 4: U^2/2 + U^2 - U^3 = 0, so U = 3/2 at infinity: **u(R_A) = 2 u_M/3**, and
    (Omega R_A/u_A)^2 = 27/8 = a.
 6. E' = 0 is U^2 (U X - 1)^2 = a X (U - 1)(2 U X - U - 1) in X = x^2, quadratic in X, as
    U^4 - 2 a U (U - 1) = U (U - 3/2)^2 (U + 3):
        X = {2 U^3 - a (U^2 - 1) + (U - 1) [a (a (U + 1)^2 - 4 U^3)]^(1/2)}
            / {2 U (U - 3/2)^2 (U + 3)},
    X(1) = 1; it rises from 0 at U = 0 to infinity at U = 3/2.
So e = Omega L = (27/8) u_A^2 = (3/2) u_M^2 on each cone. Balance across the cones holds at the
equator only; the invariants hold on every cone.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq

import fieldviz as fv
from fieldviz.lines.critical_points import critical_points
from fieldviz.wedge.geometry import centres

MIDPLANE = np.pi / 2
RATIO = 27 / 8
OMEGA, LOAD, FLUX = 0.7, 0.4, 1.3
NO_GRAVITY = 1e-14  # a snapshot's GM must be positive


def square_radius(U):
    """(r/r_A)^2 where u = U u_A."""
    top = 2 * U**3 - RATIO * (U**2 - 1)
    top = top + (U - 1) * np.sqrt(RATIO * (RATIO * (U + 1) ** 2 - 4 * U**3))
    return top / (2 * U * (U - 1.5) ** 2 * (U + 3))


def relative_speed(x):
    """U at x = r/r_A, by inverting `square_radius`."""
    found = [
        brentq(lambda U, s=value**2: square_radius(U) - s, 1e-9, 1.5 - 1e-9, xtol=1e-15, rtol=1e-14)
        for value in np.ravel(x)
    ]
    return np.reshape(found, np.shape(x))


def alfven_point(theta):
    """r_A and u_A on a cone."""
    u_A = 2 / 3 * ((OMEGA * np.sin(theta)) ** 2 * FLUX / LOAD) ** (1 / 3)
    return np.sqrt(FLUX / (LOAD * u_A)), u_A


def wind(r, theta):
    """u, v_phi, rho, B_r, B_phi at points of the upper side."""
    r_A, u_A = alfven_point(theta)
    u = u_A * relative_speed(r / r_A)
    square = LOAD * u * r**2 / FLUX
    R, L = r * np.sin(theta), OMEGA * (r_A * np.sin(theta)) ** 2
    v_phi = OMEGA * R * (square * L / (R**2 * OMEGA) - 1) / (square - 1)
    b_r = FLUX / r**2
    return u, v_phi, LOAD * b_r / u, b_r, b_r * (v_phi - OMEGA * R) / u


def split_monopole(n, *, polarity=1, pressure=None, reach=0.2):
    """The wind on both sides of the equator, the field turning round there; 8 rows of cells."""
    r = np.geomspace(0.5, 12.0, n + 1)
    theta = MIDPLANE + np.linspace(-reach, reach, 9)
    middle, angle = centres(r), centres(theta)[:, None]
    u, v_phi, rho, b_r, b_phi = wind(middle + 0 * angle, angle + 0 * middle)
    side = polarity * np.where(angle < MIDPLANE, 1, -1)
    zero = np.zeros_like(u)
    cells = {
        "density": rho,
        "velocity_r": u,
        "velocity_theta": zero,
        "velocity_phi": v_phi,
        "magnetic_r": side * b_r,
        "magnetic_theta": zero,
        "magnetic_phi": side * b_phi,
    }
    if pressure is not None:
        cells["pressure"] = pressure(rho)
    cells = {name: values[None] for name, values in cells.items()}
    return fv.Snapshot.from_arrays(r, theta, [0.0, 0.5], cells=cells, gm=NO_GRAVITY)


def lines_of(snapshot):
    """Streamlines along the middles of rows of cells, the outermost left out."""
    angles = centres(snapshot.grid.theta_edges[0])[1:-1]
    seeds = [(2.0, angle, 0.2) for angle in angles]
    return fv.trace_lines(snapshot, "velocity", seeds, poloidal=True), angles


OPTIONS = {"from_height": 0, "enthalpy": "none"}


def test_the_closed_form_is_the_wind():
    """The momentum equations along r and phi and the induction, by differences of the formulae."""
    r = np.linspace(0.5, 8.0, 26)[:, None] + 1e-4 * np.arange(-2, 3)
    theta = np.full_like(r, MIDPLANE - 0.1)
    u, v_phi, rho, b_r, b_phi = wind(r, theta)
    sine = np.sin(theta)[:, 2]

    def slope(values):
        return (values[:, 0] - 8 * values[:, 1] + 8 * values[:, 3] - values[:, 4]) / 12e-4

    at = (slice(None), 2)
    radial = u[at] * slope(u) - v_phi[at] ** 2 / r[at]
    radial += b_phi[at] / (rho[at] * r[at]) * slope(r * b_phi)
    turning = rho[at] * u[at] * slope(r * v_phi) - b_r[at] * slope(r * b_phi)
    induction = slope(r * (u * b_phi - v_phi * b_r))
    for residual in (radial, turning, induction):
        np.testing.assert_allclose(residual, 0.0, atol=1e-8)
    # Mass and flux.
    np.testing.assert_allclose(rho * u * r**2, LOAD * FLUX, rtol=1e-13)
    # From rest, turning with the field, as r goes to 0.
    u0, v0, *_ = wind(np.array([1e-3]), np.array([MIDPLANE]))
    assert u0[0] < 1e-3
    assert v0[0] == pytest.approx(OMEGA * 1e-3, rel=1e-2)
    assert sine[0] == pytest.approx(np.cos(0.1))


def test_michel_speed_and_two_thirds():
    """u(R_A) = 2/3 of the speed at infinity, where the flow is as fast as the fast wave."""
    r_A, u_A = alfven_point(MIDPLANE)
    far = np.array([1e2, 1e3, 1e4]) * r_A
    u, _, rho, b_r, b_phi = wind(far, np.full(3, MIDPLANE))
    michel = (OMEGA**2 * FLUX / LOAD) ** (1 / 3)
    assert u_A / michel == pytest.approx(2 / 3, rel=1e-14)
    fast = u / np.sqrt((b_r**2 + b_phi**2) / rho)
    assert (np.diff(u) > 0).all()
    assert (np.diff(fast) > 0).all()
    assert (u < michel).all()
    assert (fast < 1).all()
    assert u[-1] == pytest.approx(michel, rel=1e-3)
    assert fast[-1] == pytest.approx(1.0, abs=1e-3)
    near = wind(np.array([r_A * (1 - 1e-7), r_A * (1 + 1e-7)]), np.full(2, MIDPLANE))
    assert near[0] == pytest.approx(u_A, rel=1e-6)


def test_invariants_and_alfven_point_converge():
    errors = []
    for n in (40, 80, 160):
        snapshot = split_monopole(n)
        lines, angles = lines_of(snapshot)
        found = critical_points(snapshot, lines, **OPTIONS)
        r_A, u_A = alfven_point(angles)
        invariants = found.invariants
        sign = np.where(angles < MIDPLANE, 1, -1)
        wanted = {
            "k": LOAD * sign,
            "omega": np.full(6, OMEGA),
            "l": OMEGA * (r_A * np.sin(angles)) ** 2,
            "e": RATIO * u_A**2,
        }
        rows = []
        for name, values in wanted.items():
            statistics = invariants.statistics[name]
            rows.append(np.abs(statistics.median / values - 1).max())
            rows.append(statistics.drift.max())
            if n == 160:
                assert set(statistics.word) == {"conserved"}
        rows.append(np.abs(found.alfven.r / r_A - 1).max())
        errors.append(rows)
    errors = np.array(errors)
    assert (np.log2(errors[0] / errors[-1]) / 2 > 1.7).all()
    assert found.side == ("upper",) * 3 + ("lower",) * 3
    np.testing.assert_allclose(invariants.misalignment_largest, 0.0, atol=1e-12)
    michel = ((OMEGA * np.sin(angles)) ** 2 * FLUX / LOAD) ** (1 / 3)
    at_alfven, _ = fv.sample(
        snapshot,
        np.column_stack([found.alfven.r, found.alfven.theta, np.full(6, 0.2)]),
        ["velocity_r"],
    )
    np.testing.assert_allclose(at_alfven["velocity_r"] / michel, 2 / 3, rtol=1e-3)


def test_without_a_footpoint_and_without_pressure():
    """No line of a monopole comes from the midplane: no lever arm, with the reason."""
    snapshot = split_monopole(60)
    found = critical_points(snapshot, lines_of(snapshot)[0], **OPTIONS)
    assert np.isnan(found.footpoint).all()
    assert "does not reach the midplane" in found.footpoint_reason[0]
    assert np.isnan([found.lambda_A, found.lambda_l, found.kappa, found.cold_speed]).all()
    assert set(found.sonic.reason) == set(found.fast.reason) == {"the snapshot has no pressure"}
    np.testing.assert_allclose(
        found.energy_speed, np.sqrt(2 * RATIO) * alfven_point(lines_of(snapshot)[1])[1], rtol=1e-2
    )


def test_fast_point_is_at_infinity_and_sound_is_passed():
    """A little pressure: the fast point stays outside, the sonic point is where u = c_s."""
    sound = 0.6
    for n, tolerance in ((40, 2e-3), (160, 1.5e-4)):
        snapshot = split_monopole(n, pressure=lambda rho: sound**2 * rho)
        lines, angles = lines_of(snapshot)
        found = critical_points(snapshot, lines, **OPTIONS)
        r_A, u_A = alfven_point(angles)
        wanted = r_A * np.sqrt(square_radius(sound / u_A))
        np.testing.assert_allclose(found.sonic.r, wanted, rtol=tolerance)
    cold = split_monopole(80, pressure=lambda rho: 1e-10 * rho)
    found = critical_points(cold, lines_of(cold)[0], **OPTIONS)
    assert set(found.fast.reason) == {"not crossed inside the grid"}
    assert np.isfinite(found.alfven.r).all()


def test_turning_the_field():
    a, b = (split_monopole(40, polarity=polarity) for polarity in (1, -1))
    one, other = (critical_points(s, lines_of(s)[0], **OPTIONS) for s in (a, b))
    np.testing.assert_array_equal(one.invariants.k, -other.invariants.k)
    for name in ("omega", "l", "e"):
        np.testing.assert_array_equal(
            getattr(one.invariants, name), getattr(other.invariants, name)
        )
    np.testing.assert_array_equal(one.alfven.r, other.alfven.r)
