"""The outflow of the demo disc and of a steady flow against their closed forms."""

import numpy as np
import pytest
from flow_changes import as_cells, changed, cut_up, merged, mirrored, rotated, without
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad
from steady_flow import chi, momentum, psi, steady_flow, steady_levels

import fieldviz as fv
from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.wedge.halo import halo_array
from fieldviz.wind.cone_flux import cone_integral
from fieldviz.wind.outflow import outflow

# Radii whose field lines, followed down from 5 H, start between flux sheets.
QUIET = (1.5, 4.0)
PARTS = ("mass", "kinetic_torque", "magnetic_torque", "energy")


@pytest.fixture(scope="module")
def stirred():
    disc = fv.demo_disc(
        shape=(8, 48, 32), magnetic_turbulence=2.0, velocity_turbulence=0.1, wind_scatter=0.3,
        side_ratio=0.5,
    )  # fmt: skip
    return as_cells(disc, gamma=1.4)


def nets(found):
    return np.array([side.net for name in PARTS for side in getattr(found, name).sides])


@pytest.mark.parametrize("ratio", [1.0, 0.4, -1.0])
def test_mass_loss_is_that_of_the_stream_function(ratio):
    """Mdot_u = Delta phi W [K(r2 g) - K(r1 g)] and the lower side is p times that."""
    disc, errors = fv.SaltmarshDisc(side_ratio=ratio), []
    for n in (32, 64, 128):
        found = outflow(fv.demo_disc(shape=(1, n, n * 5 // 4), side_ratio=ratio), 5.0, radii=QUIET)
        exact = disc.mass_loss(np.pi / 2 - 0.5, *QUIET)
        errors.append(abs(found.upper / exact - 1))
        assert found.lower / found.upper == pytest.approx(ratio, rel=1e-9)
        assert found.total == pytest.approx(found.upper + found.lower)
    assert errors[-1] < 1e-3
    assert np.log2(errors[0] / errors[-1]) / 2 > 1.7


def test_cones_give_what_the_cone_integral_gives(stirred):
    found = outflow(stirred, 4.0, thickness=0.1)
    southward = stirred.cell("density") * stirred.cell("velocity_theta")
    exact = -cone_integral(
        stirred.grid, halo_array(stirred.grid, southward), np.pi / 2 - 0.4, found.mass.upper.radii
    )
    np.testing.assert_allclose(found.mass.upper.bins, exact, rtol=1e-9, atol=1e-18)


def test_torque_of_the_demo_is_the_integral_of_l():
    """Above the wind's base l is constant on lines: Jdot = Delta phi int l K' dR_f."""
    disc = fv.SaltmarshDisc()
    found = outflow(fv.demo_disc(shape=(1, 256, 256)), 5.0, radii=QUIET)

    def carried(foot):
        loss, flux = disc.loss_density(foot), disc.radial_flux_density(foot)
        base = loss / (disc.base_speed * np.sqrt(foot))
        lever = 1 + disc.acceleration * (np.sqrt(base) * flux / loss - 1)
        return lever * np.sqrt(foot) * loss

    g = disc.footpoint_factor(np.pi / 2 - 0.5)
    exact = disc.period * quad(carried, QUIET[0] * g, QUIET[1] * g, limit=200)[0]
    for side in found.torque.sides:
        assert side.net == pytest.approx(exact, rel=0.01)
    assert found.magnetic_torque.total > found.kinetic_torque.total > 0


@pytest.mark.parametrize("sheared", [False, True])
def test_steady_flow_converges_on_cones_and_on_a_slanted_surface(sheared):
    errors = []
    for n in (16, 32, 64):
        flow = steady_flow((1, 2 * n, n))
        r, theta, _ = flow.grid.cell_centres(0)
        wall = np.abs(np.pi / 2 - theta)[:, None] / (0.2 + 0.1 * np.log(r))
        flow = flow.with_cells(wall=np.broadcast_to(wall, (1, 1, 2 * n, n)))
        found = outflow(flow, ("wall", 1.0) if sheared else 3.5, thickness=0.1)
        inner, outer = found.surface.upper.on_edges[[0, -1]]
        mass = 0.5 * (chi(3.0, outer) - chi(1.0, inner))
        torque = 0.5 * (momentum(psi(3.0, outer)) - momentum(psi(1.0, inner)))
        edge = found.edges["mass"]
        errors.append(
            [
                abs(found.upper / mass - 1),
                abs(found.torque.upper.net / torque - 1),
                abs(edge.total / edge.outer),
            ]
        )
    errors = np.array(errors)
    # Measured at 64: mass 3.3e-5 and 3.7e-5, torque 5.6e-5 and 6.1e-5, edges 1.3e-4.
    assert (errors[-1] < 2e-4).all()
    assert (np.log2(errors[:-1] / errors[1:]) > 1.8).all(), errors


def test_edges_and_spheres_are_the_stream_function():
    flow = steady_flow((1, 128, 64))
    found = outflow(flow, 4.0, thickness=0.1)
    up, down = np.pi / 2 - 0.6, np.pi / 2 + 0.6
    edge = found.edges["mass"]
    exact = {
        "outer": 0.5 * (chi(3.0, down) - chi(3.0, up)),
        "inner": -0.5 * (chi(1.0, down) - chi(1.0, up)),
        "north": 0.5 * (chi(3.0, up) - chi(1.0, up)),
        "south": -0.5 * (chi(3.0, down) - chi(1.0, down)),
    }
    for name, value in exact.items():
        assert getattr(edge, name) == pytest.approx(value, rel=5e-4), name
    sphere = found.spheres["mass"]
    cone = np.pi / 2 - 0.4
    np.testing.assert_allclose(
        sphere.upper, 0.5 * (chi(sphere.r, cone) - chi(sphere.r, up)), rtol=1e-3
    )
    carried = found.spheres["torque"].upper
    exact_torque = 0.5 * (momentum(psi(sphere.r, cone)) - momentum(psi(sphere.r, up)))
    np.testing.assert_allclose(carried, exact_torque, rtol=2e-3)


@pytest.mark.parametrize(
    "refine",
    [lambda k, j, i: i == 0, lambda k, j, i: j == 0, lambda k, j, i: k == 0 and i == j],
    ids=["inner", "upper", "checkered"],
)
def test_levels_converge(refine):
    errors = []
    for n in (8, 16, 32):
        found = outflow(steady_levels(n, refine), 3.7, thickness=0.1)
        theta = np.pi / 2 - 0.37
        exact = 0.5 * (chi(3.0, theta) - chi(1.0, theta))
        errors.append(
            [
                abs(found.upper / exact - 1),
                found.mass_budget.share,
                found.angular_momentum_budget.share,
            ]
        )
    errors = np.array(errors)
    assert (errors[-1] < 1e-3).all(), errors
    assert (np.log2(errors[0, 1:] / errors[-1, 1:]) / 2 > 1.6).all(), errors
    # Where in a cell the cone lies changes the error of the loss too much for a slope.
    assert (errors[:, 0] * np.array([8, 16, 32]) ** 2 < 0.15).all(), errors


def test_demo_on_two_levels():
    disc = fv.SaltmarshDisc()
    found = outflow(fv.demo_disc(shape=(2, 64, 80), levels=2), 5.0, radii=QUIET)
    exact = disc.mass_loss(np.pi / 2 - 0.5, *QUIET)
    assert found.upper == pytest.approx(exact, rel=5e-3)
    assert found.lower == pytest.approx(found.upper, rel=1e-9)


@settings(max_examples=5)
@given(st.floats(0.01, 100))
def test_rescaling(factor):
    """rho times a and B times sqrt(a): all losses times a, ratios as they were."""
    flow = steady_flow((1, 16, 12))
    denser = changed(flow, density=factor, pressure=factor, magnetic=np.sqrt(factor))
    one, two = (outflow(f, 4.0, thickness=0.1) for f in (flow, denser))
    np.testing.assert_allclose(nets(two), factor * nets(one), rtol=1e-11)
    np.testing.assert_allclose(two.accretion.rate, factor * one.accretion.rate, rtol=1e-11)
    assert two.lever_arm.upper == pytest.approx(one.lever_arm.upper, rel=1e-11)
    assert two.inclination.upper.mean == pytest.approx(one.inclination.upper.mean, rel=1e-11)


def test_mirror_swaps_the_sides(stirred):
    one, two = outflow(stirred, 4.0), outflow(mirrored(stirred), 4.0)
    pairs = nets(one).reshape(-1, 2)
    assert abs(pairs[0, 0] / pairs[0, 1] - 1) > 0.5
    np.testing.assert_allclose(nets(two).reshape(-1, 2), pairs[:, ::-1], rtol=1e-9)
    np.testing.assert_allclose(two.accretion.rate, one.accretion.rate, rtol=1e-8)
    assert two.inclination.lower.share_steep == pytest.approx(one.inclination.upper.share_steep)
    assert two.lever_arm.lower == pytest.approx(one.lever_arm.upper, rel=1e-9)


def test_rotation_reversal_and_cutting_change_nothing(stirred):
    here = outflow(stirred, 4.0)
    np.testing.assert_allclose(nets(outflow(rotated(stirred, 3), 4.0)), nets(here), rtol=1e-13)
    back = outflow(changed(stirred, magnetic=-1.0), 4.0)
    np.testing.assert_array_equal(nets(back), nets(here))
    assert back.inclination.upper == here.inclination.upper
    plain = as_cells(stirred)
    cut = outflow(cut_up(plain, (2, 4, 4)), 4.0)
    np.testing.assert_allclose(nets(cut), nets(outflow(plain, 4.0)), rtol=1e-12)
    np.testing.assert_allclose(cut.accretion.rate, here.accretion.rate, rtol=1e-10)


def test_merged_cells_carry_the_same_mass(stirred):
    one, two = outflow(stirred, 4.5), outflow(merged(stirred), 4.5, thickness=0.1)
    one = outflow(stirred, 4.5, thickness=0.1, radii=two.mass.upper.radii)
    for a, b in zip(one.mass.sides, two.mass.sides, strict=True):
        np.testing.assert_allclose(b.bins, a.bins, rtol=1e-12, atol=1e-13 * abs(a.net))


def test_parts_and_bins_add_up(stirred):
    found = outflow(stirred, 3.5)
    for side in found.mass.sides:
        assert side.positive + side.negative == pytest.approx(side.net, rel=1e-12)
        assert side.positive >= 0 >= side.negative
        assert side.cumulative[-1] == pytest.approx(side.net)
        width = np.diff(np.log(side.radii))
        np.testing.assert_allclose((side.per_ln_r * width).sum(), side.net)
    assert found.mass.upper.negative < -1e-3 * found.mass.upper.positive
    assert found.torque.total == pytest.approx(
        found.kinetic_torque.total + found.magnetic_torque.total
    )
    assert found.energy.total == pytest.approx(sum(p.total for p in found.energy_parts.values()))
    coarse = outflow(stirred, 3.5, radii=[1.0, 1.7, 2.9, 5.0])
    assert coarse.upper == pytest.approx(found.upper, rel=1e-12)
    within = outflow(stirred, 3.5, radii=(1.7, 2.9))
    assert within.upper == pytest.approx(coarse.mass.upper.bins[1], rel=1e-12)


def test_energy_of_uniform_gas_is_the_formula():
    """rho v_theta (v^2/2 - GM/r + gamma P/((gamma - 1) rho)) + (B^2 v_theta - v.B B_theta)/mu0."""
    r, theta = np.geomspace(1, 1.001, 2), np.linspace(np.pi / 2 - 0.5, np.pi / 2 + 0.5, 21)
    values = {
        "density": 2.0, "pressure": 0.3, "velocity_r": 0.2, "velocity_theta": -0.5,
        "velocity_phi": 0.7, "magnetic_r": 0.11, "magnetic_theta": 0.23, "magnetic_phi": -0.4,
    }  # fmt: skip
    cells = {name: np.full((1, 20, 1), value) for name, value in values.items()}
    gas = fv.Snapshot.from_arrays(r, theta, [0, 0.5], cells=cells, gamma=1.4, mu0=4 * np.pi)
    found = outflow(gas, 4.0, thickness=0.1)
    middle = r.mean()
    area = np.sin(np.pi / 2 - 0.4) * 0.5 * (r[1] ** 2 - r[0] ** 2) / 2
    v2, b2 = 0.2**2 + 0.5**2 + 0.7**2, 0.11**2 + 0.23**2 + 0.4**2
    along = 0.2 * 0.11 - 0.5 * 0.23 - 0.7 * 0.4
    exact = {
        "kinetic_energy": 2.0 * 0.5 * v2 / 2,
        "gravity": -2.0 * 0.5 / middle,
        "enthalpy": 1.4 / 0.4 * 0.3 * 0.5,
        "poynting": -(b2 * -0.5 - along * 0.23) / (4 * np.pi),
    }
    for name, value in exact.items():
        assert found.energy_parts[name].upper.net == pytest.approx(value * area, rel=1e-12), name
    assert found.energy.upper.net == pytest.approx(sum(exact.values()) * area, rel=1e-12)
    assert found.energy.lower.net == pytest.approx(-found.energy.upper.net, rel=1e-12)
    cold = outflow(as_cells(gas), 4.0, thickness=0.1)
    assert "enthalpy" not in cold.energy_parts
    assert any("enthalpy is left out" in note for note in cold.notes)


def test_spread_and_both_sums_are_said():
    disc = fv.demo_disc(shape=(1, 64, 48))
    found = outflow(disc, 5.0)
    three = [outflow(disc, n).total for n in (4.0, 5.0, 6.0)]
    assert found.spread["mass"] == pytest.approx((min(three), max(three)))
    assert [r.moved for r in found.repeats] == [-1.0, 1.0]
    assert found.full_disc_factor == pytest.approx(8)
    assert f"{8 * found.total:.4g} for the full disc" in found.sentence
    assert "45 degrees" in found.sentence
    low = outflow(disc, 0.9)
    assert "not repeated" in " ".join(low.notes)
    high = outflow(disc, 9.0)
    assert high.surface.clipped
    assert any("clipped" in note for note in high.notes)


def test_a_dead_side_has_no_lever_arm():
    found = outflow(fv.demo_disc(shape=(1, 64, 48), wind="one-sided"), 5.0)
    assert found.upper > 0 == found.lower
    assert np.isnan(found.lever_arm.lower)
    assert np.isnan(found.ejection.lower)
    assert found.lever_arm.upper == found.lever_arm.total > 1
    assert found.ejection.upper > 0
    assert found.inclination.lower.reason == "no mass leaves"


def test_through_flow_has_opposite_signs():
    found = outflow(fv.demo_disc(shape=(1, 64, 48), wind="through-flow"), 5.0)
    assert found.upper > 0 > found.lower
    assert abs(found.total) < 1e-10 * found.upper
    assert found.mass.lower.positive < 1e-12 * found.upper
    assert np.isnan(found.ejection.value)
    assert found.ejection.reason
    assert np.isnan(found.lever_arm.total)


def test_what_is_missing_is_said_and_not_zero(stirred):
    bare = outflow(without(stirred, "magnetic"), 4.0)
    assert bare.upper == outflow(stirred, 4.0).upper
    assert np.isnan(bare.torque.total)
    assert "magnetic_r" in bare.torque.reason
    assert np.isnan(bare.energy.total)
    assert bare.inclination is None
    assert "not closed" in bare.angular_momentum_budget.sentence
    still = outflow(without(stirred, "velocity"), 4.0)
    assert np.isnan(still.total)
    assert np.isnan(still.accretion.rate).all()
    assert np.isfinite(still.magnetic_torque.total)
    assert "velocity_r" in still.sentence
    with pytest.raises(MissingFieldError, match="measure the outflow"):
        outflow(without(without(stirred, "magnetic"), "velocity"), 4.0)
    no_heat = outflow(without(stirred, "pressure"), 4.0, thickness=0.1)
    assert np.isnan(no_heat.energy.total)
    assert no_heat.energy.reason.startswith("no pressure")


def test_numbers_that_are_none(stirred):
    density = stirred.cell("density").copy()
    density[0, 1, 8, 5] = np.nan
    some = outflow(stirred.with_cells(density=density), 4.0, thickness=0.1)
    assert np.isfinite(some.total)
    assert any("1 cells" in note for note in some.notes)
    density[0, :, :, 5] = np.nan
    none = outflow(stirred.with_cells(density=density), 4.0, thickness=0.1)
    assert np.isnan(none.total)
    assert np.flatnonzero(np.isnan(none.mass.upper.bins)).tolist() == [5]
    assert none.mass.reason
    assert np.isfinite(none.magnetic_torque.total)


@pytest.mark.parametrize("radii", [(0.5, 2.0), (2.0, 1.0), [3.0], (1.0, np.nan)])
def test_bad_radii(stirred, radii):
    with pytest.raises(FieldvizError, match="expected increasing radii"):
        outflow(stirred, 4.0, radii=radii)


def test_single_precision():
    one, two = (
        outflow(fv.demo_disc(shape=(2, 48, 32), precision=p), 5.0) for p in ("single", "double")
    )
    np.testing.assert_allclose(nets(one), nets(two), rtol=1e-5)
