"""Critical points, footpoints and lever arms against the demo disc and the Parker wind."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import fieldviz as fv
from fieldviz.lines.critical_points import critical_points
from fieldviz.wedge.geometry import centres

MIDPLANE, HEIGHT = np.pi / 2, 4.5
# Even wind: footpoints 1.05 to 1.12, between the inner wall and the sheet at 1.40.
RADII = (1.6, 1.65, 1.7)


def seeds_at(radii=RADII, sides=(1, -1)):
    return np.array([(r, MIDPLANE - s * 0.45, 0.1) for s in sides for r in radii])


def wind_points(snapshot, radii=RADII, sides=(1, -1), **options):
    lines = fv.trace_lines(snapshot, "velocity", seeds_at(radii, sides), poloidal=True)
    return critical_points(snapshot, lines, **{"from_height": HEIGHT, **options})


def exact(disc, seeds):
    """R_f, lambda and kappa of the demo's lines through seeds."""
    foot = disc.footpoint(seeds[:, 0], seeds[:, 1])
    loss, flux = disc.loss_density(foot), disc.radial_flux_density(foot)
    base = loss / (disc.base_speed * np.sqrt(foot))
    k = loss / flux
    lever = 1 + disc.acceleration * (np.sqrt(base) / k - 1)
    return foot, lever, k * foot**-0.5 / (flux / foot)


@pytest.mark.parametrize(
    ("wind", "sides", "radii"), [("even", (1, -1), RADII), ("odd", (1,), (1.75, 1.76))]
)
def test_lever_arms_of_the_demo_converge(wind, sides, radii):
    """The Alfven point is at x^2 = lambda, x = R/R_f; lambda_l from l is the same number."""
    disc, errors = fv.SaltmarshDisc(wind=wind), []
    seeds = seeds_at(radii, sides)
    foot, lever, kappa = exact(disc, seeds)
    for n in (64, 192):
        found = wind_points(fv.demo_disc(shape=(1, n, n * 5 // 4), wind=wind), radii, sides)
        pairs = (
            (found.footpoint, foot),
            (found.alfven.R, foot * np.sqrt(lever)),
            (found.lambda_l, lever),
            (found.kappa, kappa),
        )
        errors.append([np.abs(a / b - 1).max() for a, b in pairs])
        assert set(found.footpoint_from) == {"field line"}
        assert not found.lambda_A_is_limit.any()
        np.testing.assert_allclose(found.lambda_A, (found.alfven.R / found.footpoint) ** 2)
    errors = np.array(errors)
    # Measured at 192: R_0 4e-5, R_A 1.5e-4, lambda_l 1.7e-4, kappa 3.3e-4.
    assert (errors[-1] < 1e-3).all(), errors
    # The last crossing is found between cells: its error also depends on where in a cell it is.
    assert (np.log(errors[0] / errors[-1]) / np.log(3) > 1.5).all(), errors
    np.testing.assert_allclose(found.lambda_A, found.lambda_l, rtol=1e-3)
    cold = foot**-0.5 * np.sqrt(2 * lever - 3)
    np.testing.assert_allclose(found.cold_speed, cold, rtol=1e-3)


def test_alfven_point_outside_the_grid_is_a_limit():
    """Heavier lines have their Alfven point beyond the upper wall: (R_exit/R_f)^2 < lambda."""
    disc = fv.SaltmarshDisc(mass_loss_scale=1e-7, base_speed=0.03)
    snapshot = fv.demo_disc(shape=(1, 96, 120), mass_loss_scale=1e-7, base_speed=0.03)
    found = wind_points(snapshot)
    _, lever, _ = exact(disc, seeds_at())
    assert found.lambda_A_is_limit.all()
    assert (found.lambda_A < lever).all()
    np.testing.assert_allclose(found.lambda_A, (found.exit / found.footpoint) ** 2)
    assert set(found.alfven.reason) == {"not crossed inside the grid"}
    assert np.isnan(found.alfven.R).all()
    np.testing.assert_allclose(found.lambda_l, lever, rtol=5e-3)
    assert any("lower limit" in note for note in found.notes)


def test_footpoints_three_ways():
    snapshot = fv.demo_disc(shape=(1, 96, 120))
    foot = exact(fv.SaltmarshDisc(), seeds_at())[0]
    below = wind_points(snapshot, footpoint_surface="surface")
    np.testing.assert_allclose(below.footpoint, seeds_at()[:, 0] * np.cos(0.45), rtol=1e-4)
    assert set(below.footpoint_from) == {"surface"}
    np.testing.assert_allclose(
        below.lambda_l * below.footpoint**0.5, below.invariants.statistics["l"].median, rtol=1e-12
    )
    lines = fv.trace_lines(snapshot, "magnetic", seeds_at(), poloidal=True)
    own = critical_points(snapshot, lines, from_height=HEIGHT)
    assert set(own.footpoint_from) == {"line"}
    field = critical_points(snapshot, lines, from_height=HEIGHT, footpoint_along="field")
    assert set(field.footpoint_from) == {"field line"}
    for found in (own, field):
        np.testing.assert_allclose(found.footpoint, foot, rtol=1e-3)
    np.testing.assert_allclose(own.footpoint, field.footpoint, rtol=1e-5)


def test_dead_side_and_inflow_have_no_lever_arm():
    one = fv.demo_disc(shape=(1, 64, 80), wind="one-sided")
    lines = fv.trace_lines(one, "magnetic", seeds_at((1.6,)), poloidal=True)
    found = critical_points(one, lines, from_height=HEIGHT)
    assert found.side == ("upper", "lower")
    for values in (found.lambda_A, found.lambda_l, found.kappa):
        assert np.isfinite(values[0])
        assert np.isnan(values[1])
    assert not found.lambda_A_is_limit[1]
    through = fv.demo_disc(shape=(1, 64, 80), wind="through-flow")
    found = critical_points(
        through, fv.trace_lines(through, "magnetic", seeds_at((1.6,)), poloidal=True),
        from_height=HEIGHT,
    )  # fmt: skip
    assert np.isfinite(found.lambda_l[0])
    assert np.isnan(found.lambda_l[1])
    assert any("1 lines carry no outflow" in note for note in found.notes)
    # What the gas carries along the field is defined all the same.
    assert np.isfinite(found.invariants.statistics["l"].median[1])


def test_without_pressure_the_rest_works():
    snapshot = fv.demo_disc(shape=(1, 64, 80))
    cells = {n: snapshot.cell(n) for n in snapshot.cell_names if n != "pressure"}
    bare = fv.Snapshot.from_grid(snapshot.grid, cells=cells)
    full, found = wind_points(snapshot, thickness=0.1), wind_points(bare, thickness=0.1)
    for points in (found.slow, found.sonic, found.fast):
        assert set(points.reason) == {"the snapshot has no pressure"}
        assert np.isnan(points.r).all()
    np.testing.assert_allclose(found.lambda_A, full.lambda_A)
    assert "no pressure for the enthalpy" in found.invariants.statistics["e"].reason[0]
    assert (full.fast.arc > full.alfven.arc).all()


def parallel_flow(**constants):
    """v_r = r/4, B_r = 1/r^2, rho = 4/r^3, T uniform; steady mass flux is not asked for."""
    r, theta = np.geomspace(1, 8, 241), MIDPLANE + np.linspace(-0.3, 0.3, 9)
    middle, zero = centres(r), np.zeros((1, 8, 240))
    names = ("velocity_theta", "velocity_phi", "magnetic_theta", "magnetic_phi")
    cells = dict.fromkeys(names, zero)
    cells |= {"velocity_r": middle / 4 + zero, "magnetic_r": middle**-2.0 + zero}
    cells |= {"density": 4 * middle**-3.0 + zero, "pressure": middle**-3.0 + zero}
    snapshot = fv.Snapshot.from_arrays(r, theta, [0.0, 0.1], cells=cells, **constants)
    lines = fv.trace_lines(snapshot, "velocity", [(3.0, MIDPLANE - 0.1, 0.0)], poloidal=True)
    return snapshot, lines


def test_speeds_along_a_radial_field():
    """c_s = 1/2: sonic at r = 2. v_A = r^(-1/2)/2: M_A = 1 at r = 2^(2/3). Slow and fast speed are
    the lesser and the greater of the two where the field is radial.
    """
    snapshot, lines = parallel_flow()
    found = critical_points(snapshot, lines, from_height=0)
    assert found.sonic.r == pytest.approx(2.0, rel=1e-3)
    assert found.alfven.r == pytest.approx(2 ** (2 / 3), rel=1e-3)
    assert found.slow.r == pytest.approx(2 ** (2 / 3), rel=1e-3)
    assert found.fast.r == pytest.approx(2.0, rel=1e-3)
    assert found.sonic.arc == pytest.approx(1.0, rel=2e-3)
    np.testing.assert_allclose(found.sonic.R, 2.0 * np.cos(0.1), rtol=1e-3)
    # Gaussian fields are weaker: v_A = r^(-1/2)/2/sqrt(4 pi) is reached before the grid begins.
    gaussian, lines = parallel_flow(mu0=4 * np.pi)
    assert "already crossed" in critical_points(gaussian, lines, from_height=0).alfven.reason[0]
    # c_s = (gamma/4)^(1/2): at r = 2 gamma^(1/2).
    adiabatic, lines = parallel_flow(gamma=1.44)
    found = critical_points(adiabatic, lines, from_height=0, adiabatic_sound=True)
    assert found.sonic.r == pytest.approx(2.4, rel=1e-3)


def test_turning_the_field_and_mirror():
    plain = fv.demo_disc(shape=(1, 64, 80), side_ratio=0.5)
    turned = fv.demo_disc(shape=(1, 64, 80), side_ratio=0.5, reversed_field=True)
    signs = {"velocity_theta": -1, "magnetic_r": -1, "magnetic_phi": -1}
    flipped = {n: signs.get(n, 1) * plain.cell(n)[:, :, ::-1] for n in plain.cell_names}
    mirror = fv.Snapshot.from_grid(plain.grid, cells=flipped)
    a, b, c = (wind_points(s) for s in (plain, turned, mirror))
    swap = np.array([3, 4, 5, 0, 1, 2])
    for name in ("footpoint", "lambda_A", "lambda_l", "kappa", "exit", "cold_speed"):
        np.testing.assert_allclose(getattr(b, name), getattr(a, name), rtol=1e-12, err_msg=name)
        np.testing.assert_allclose(
            getattr(c, name)[swap], getattr(a, name), rtol=1e-5, err_msg=name
        )
    # The sides differ: half the mass on the same flux has another lever arm.
    assert np.abs(a.lambda_l[:3] / a.lambda_l[3:] - 1).min() > 0.1


@settings(max_examples=4)
@given(factor=st.floats(1e-3, 1e3))
def test_rescaling_density_and_field(factor, small_disc):
    """rho by a, B by sqrt(a): no lever arm changes; k grows by sqrt(a)."""
    plain = small_disc(shape=(1, 48, 60))
    cells = {n: plain.cell(n) for n in plain.cell_names}
    power = {"density": 1, "pressure": 1} | dict.fromkeys(
        ("magnetic_r", "magnetic_theta", "magnetic_phi"), 0.5
    )
    scaled = fv.Snapshot.from_grid(
        plain.grid, cells={n: v * factor ** power.get(n, 0) for n, v in cells.items()}
    )
    a = wind_points(fv.Snapshot.from_grid(plain.grid, cells=cells))
    b = wind_points(scaled)
    for name in ("footpoint", "lambda_A", "lambda_l", "kappa"):
        np.testing.assert_allclose(getattr(b, name), getattr(a, name), rtol=1e-8, err_msg=name)
    np.testing.assert_allclose(b.invariants.k, a.invariants.k * np.sqrt(factor), rtol=1e-8)


def test_a_point_hidden_by_missing_numbers():
    snapshot, lines = parallel_flow()
    density = snapshot.cell("density").copy()
    r = snapshot.grid.cell_centres(0)[0]
    density[..., (r > 1.5) & (r < 1.7)] = np.nan
    found = critical_points(snapshot.with_cells(density=density), lines, from_height=0)
    assert found.alfven.reason == ("crossed where there is no number",)
    density[..., r > 1.5] = np.nan
    found = critical_points(snapshot.with_cells(density=density), lines, from_height=0)
    assert "points without a number" in found.alfven.reason[0]
    assert not found.lambda_A_is_limit.any()


def test_grid_without_midplane_and_no_lines():
    snapshot, _ = parallel_flow()
    grid = snapshot.grid
    upper = fv.Snapshot.from_arrays(
        grid.r_edges[0], np.linspace(1.0, 1.3, 9), [0.0, 0.1],
        cells={n: snapshot.cell(n)[0] for n in snapshot.cell_names},
    )  # fmt: skip
    lines = fv.trace_lines(upper, "velocity", [(3.0, 1.15, 0.0)], poloidal=True)
    found = critical_points(upper, lines, from_height=0)
    assert found.footpoint_reason == ("the grid does not hold the midplane",)
    none = fv.trace_lines(snapshot, "velocity", np.empty((0, 3)), poloidal=True)
    empty = critical_points(snapshot, none, from_height=0)
    assert empty.lambda_A.shape == empty.alfven.r.shape == (0,)
    lost = fv.trace_lines(snapshot, "velocity", [(99.0, 1.5, 0.0)], poloidal=True)
    assert critical_points(snapshot, lost, from_height=0).alfven.reason == (
        "the line has no points",
    )


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"footpoint_surface": "star"}, "expected footpoint_surface"),
        ({"footpoint_along": "gas"}, "expected footpoint_along"),
    ],
)
def test_bad_options(options, words):
    snapshot, lines = parallel_flow()
    with pytest.raises(fv.FieldvizError, match=words):
        critical_points(snapshot, lines, from_height=0, **options)
