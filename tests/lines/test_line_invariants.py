"""k, omega, l and e along lines, from azimuthal means, against closed forms."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import lambertw

import fieldviz as fv
from fieldviz.lines.azimuth_mean import azimuth_mean
from fieldviz.lines.line_invariants import line_invariants
from fieldviz.wedge.geometry import centres

MIDPLANE = np.pi / 2
NAMES = ("magnetic_r", "magnetic_theta", "magnetic_phi")
VELOCITIES = ("velocity_r", "velocity_theta", "velocity_phi")
# R_f = 0.66 r of these lines of the even wind lies beside the sheets at 1.40 and 1.85.
START, RADII = 0.45, (1.6, 1.7, 2.4, 2.5)


def wind_seeds(radii=RADII, sides=(1, -1)):
    return np.array([(r, MIDPLANE - s * START, 0.1) for s in sides for r in radii])


def streamlines(snapshot, seeds=None):
    return fv.trace_lines(
        snapshot, "velocity", wind_seeds() if seeds is None else seeds, poloidal=True
    )


def exact(disc, r, theta):
    """k, omega and l of the demo disc at points where its wind is complete."""
    foot = disc.footpoint(r, theta)
    base = disc.loss_density(foot) / (disc.base_speed * np.sqrt(foot))
    k = disc.loss_density(foot) / disc.radial_flux_density(foot)
    k = k * disc.wind_window(np.cos(theta))
    lever = 1 + disc.acceleration * (np.sqrt(base) / np.abs(k) - 1)
    return k, foot**-1.5, lever * np.sqrt(foot)


# ---- the mean -----------------------------------------------------------------------------------


def filled(grid, formula):
    values = np.empty((grid.n_blocks, *grid.block_shape))
    for block in range(grid.n_blocks):
        r, theta, phi = grid.cell_centres(block)
        values[block] = formula(r, theta[:, None], phi[:, None, None])
    return values


@pytest.mark.parametrize("parts", [{}, {"blocks": (2, 4, 3)}, {"levels": 2}, {"levels": 3}])
def test_mean_over_blocks_and_levels(parts, small_disc):
    """Linear in r and theta: every interpolation is exact; modes of the wedge average away."""
    grid = small_disc(shape=(4, 32, 24), **parts).grid
    turn = 2 * np.pi / grid.period
    field = filled(grid, lambda r, t, p: 2 + 0.3 * r - 0.7 * t + np.sin(turn * p + 0.3))
    snapshot = fv.Snapshot.from_grid(grid, cells={"pressure": 10 + field}, gm=2.0, mu0=3.0)
    mean = azimuth_mean(snapshot)
    # Along r fine blocks lie at all radii; in theta coarse rows keep their own edges.
    factor = 2 ** (parts.get("levels", 1) - 1)
    assert mean.grid.block_shape[2] == 24 * factor
    assert mean.grid.block_shape[1] == len(np.unique(grid.theta_edges.round(9))) - 1
    assert (mean.gm, mean.mu0, mean.grid.period) == (2.0, 3.0, grid.period)
    r, theta, _ = mean.grid.cell_centres(0)
    wanted = 12 + 0.3 * r - 0.7 * theta[:, None]
    np.testing.assert_allclose(mean.cell("pressure")[0, 0], wanted, rtol=1e-13)


def test_mean_of_unequal_cells_mass_and_rotation():
    phi = np.cumsum([0.0, 0.1, 0.2, 0.1, 0.4])
    rng = np.random.default_rng(3)
    rho, v = rng.uniform(1, 2, (2, 4, 3, 5))
    edges = np.geomspace(1, 2, 6), np.linspace(1.2, 1.9, 4)
    snapshot = fv.Snapshot.from_arrays(*edges, phi, cells={"density": rho, "velocity_r": v})
    weight = np.diff(phi)[:, None, None] / 0.8
    by_mass = azimuth_mean(snapshot).cell("velocity_r")[0, 0]
    plain = azimuth_mean(snapshot, mass_weighted=False).cell("velocity_r")[0, 0]
    wanted = (rho * v * weight).sum(0) / (rho * weight).sum(0)
    np.testing.assert_allclose(by_mass, wanted, rtol=1e-14)
    np.testing.assert_allclose(plain, (v * weight).sum(0), rtol=1e-14)
    even = np.linspace(0, 0.8, 5)
    turned = [
        azimuth_mean(
            fv.Snapshot.from_arrays(
                *edges, even, cells={"density": np.roll(rho, n, 0), "velocity_r": np.roll(v, n, 0)}
            )
        ).cell("velocity_r")
        for n in range(3)
    ]
    np.testing.assert_allclose(turned[1], turned[0], rtol=1e-13)
    np.testing.assert_allclose(turned[2], turned[0], rtol=1e-13)


def test_mean_keeps_missing_numbers_where_they_are():
    cells = {"pressure": np.ones((4, 6, 5))}
    cells["pressure"][2, 3, 1] = np.nan
    snapshot = fv.Snapshot.from_arrays(
        np.geomspace(1, 2, 6), np.linspace(1, 2, 7), np.linspace(0, 1, 5), cells=cells
    )
    bad = ~np.isfinite(azimuth_mean(snapshot).cell("pressure")[0, 0])
    assert np.argwhere(bad).tolist() == [[3, 1]]


def test_mean_refuses():
    snapshot = fv.Snapshot.from_arrays([1.0, 2.0], [1.0, 2.0], [0.0, 1.0])
    with pytest.raises(fv.FieldvizError, match="expected at least one field"):
        azimuth_mean(snapshot)
    with pytest.raises(fv.FieldvizError, match="without pressure"):
        azimuth_mean(snapshot, ["pressure"])
    only_v = snapshot.with_cells(velocity_r=np.ones((1, 1, 1, 1)))
    with pytest.raises(fv.FieldvizError, match="weight velocities with mass"):
        azimuth_mean(only_v)
    assert azimuth_mean(only_v, mass_weighted=False).cell("velocity_r").tolist() == [[[[1.0]]]]


# ---- the demo disc ------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("wind", "sides", "radii"), [("even", (1, -1), RADII), ("odd", (1,), (1.65, 2.0, 2.1))]
)
def test_invariants_of_the_demo_converge(wind, sides, radii):
    """Between the sheets. The odd demo's invariants hold on its upper side only, as it says."""
    disc, errors = fv.SaltmarshDisc(wind=wind), []
    for n in (64, 192):
        snapshot = fv.demo_disc(shape=(1, n, n * 5 // 4), wind=wind)
        found = line_invariants(
            snapshot, streamlines(snapshot, wind_seeds(radii, sides)), from_height=4.5
        )
        on = found.on_leg
        wanted = exact(disc, found.state.r[on], found.state.theta[on])
        given = (found.k[on], found.omega[on], found.l[on])
        errors.append(
            [np.sqrt(np.mean((a / b - 1) ** 2)) for a, b in zip(given, wanted, strict=True)]
        )
    errors = np.array(errors)
    # Measured at 192: at most 3.6e-3 (k), 1.2e-3 (omega), 2.6e-3 (l).
    assert (errors[-1] < 6e-3).all()
    assert (np.log(errors[0] / errors[-1]) / np.log(3) > 1.9).all()
    assert set(found.statistics["omega"].word) == {"conserved"}
    np.testing.assert_array_less(np.abs(found.statistics["omega"].slope), 0.05)


def test_smooth_lines_are_conserved_and_aligned():
    """R_f = 1.05 and 1.07 lie far inside the innermost sheet at 1.40."""
    snapshot = fv.demo_disc(shape=(1, 128, 160))
    found = line_invariants(
        snapshot, streamlines(snapshot, wind_seeds((1.6, 1.62))), from_height=4.5
    )
    for name in ("k", "omega", "l"):
        statistics = found.statistics[name]
        assert set(statistics.word) == {"conserved"}, name
        assert (statistics.drift < 0.01).all()
        np.testing.assert_allclose(
            statistics.half_range, statistics.drift * np.abs(statistics.median), rtol=1e-12
        )
    assert (found.misalignment_median <= found.misalignment_largest).all()
    assert (found.misalignment_largest < 2e-3).all()
    assert found.side == ("upper", "upper", "lower", "lower")
    assert (found.statistics["k"].median[:2] > 0).all()
    assert (found.statistics["k"].median[2:] < 0).all()
    heights = np.abs(found.launch[:, 1] - MIDPLANE)
    np.testing.assert_allclose(heights, 0.45, rtol=1e-4)  # H/R is measured


def test_below_the_complete_wind_k_is_not_conserved():
    """The demo's mass flux grows over 0.3 < cos(theta) < 0.42: its flow crosses the field there."""
    snapshot = fv.demo_disc(shape=(1, 128, 160))
    lines = fv.trace_lines(snapshot, "magnetic", wind_seeds((1.6, 1.62)), poloidal=True)
    found = line_invariants(snapshot, lines, from_height=3.2)
    assert set(found.statistics["k"].word) == {"not steady or not ideal"}
    assert (found.misalignment_largest > 0.5).all()
    assert (found.statistics["k"].slope > 0).all()


def test_dead_side_has_no_l():
    snapshot = fv.demo_disc(shape=(1, 64, 80), wind="one-sided")
    lines = fv.trace_lines(snapshot, "magnetic", wind_seeds((1.6, 1.7)), poloidal=True)
    found = line_invariants(snapshot, lines, from_height=4.5)
    dead = np.repeat(np.arange(4), np.diff(lines.offsets)) >= 2
    np.testing.assert_allclose(found.k[dead & found.on_leg], 0.0, atol=1e-12)
    assert np.isnan(found.l[dead & found.on_leg]).all()
    assert np.isfinite(found.l[~dead & found.on_leg]).all()
    for name in ("k", "l", "e"):
        assert found.statistics[name].word[2:] == ("not tested", "not tested")
        assert "no flow along the field" in found.statistics[name].reason[2]
    # A dead side corotates: omega is still defined.
    foot = fv.SaltmarshDisc(wind="one-sided").footpoint(*wind_seeds((1.6, 1.7))[2:, :2].T)
    np.testing.assert_allclose(found.statistics["omega"].median[2:], foot**-1.5, rtol=5e-3)


def test_turning_the_field_changes_the_sign_of_k_alone():
    turned, plain = (
        fv.demo_disc(shape=(1, 48, 60), reversed_field=reverse) for reverse in (True, False)
    )
    a, b = (line_invariants(s, streamlines(s), enthalpy="none") for s in (turned, plain))
    np.testing.assert_array_equal(a.k, -b.k)
    for name in ("omega", "l", "e", "misalignment"):
        np.testing.assert_array_equal(getattr(a, name), getattr(b, name))
    assert a.statistics["k"].word == b.statistics["k"].word
    np.testing.assert_array_equal(a.statistics["k"].drift, b.statistics["k"].drift)


def mirrored(snapshot):
    """theta to pi - theta: v polar, B axial. The grid must be symmetric."""
    signs = {"velocity_theta": -1, "magnetic_r": -1, "magnetic_phi": -1}
    cells = {
        name: signs.get(name, 1) * snapshot.cell(name)[:, :, ::-1] for name in snapshot.cell_names
    }
    return fv.Snapshot.from_grid(snapshot.grid, cells=cells, gm=snapshot.gm, mu0=snapshot.mu0)


def test_mirror_swaps_the_sides():
    one = fv.demo_disc(shape=(1, 48, 60), side_ratio=0.5)
    one = fv.Snapshot.from_grid(one.grid, cells={name: one.cell(name) for name in one.cell_names})
    a, b = (line_invariants(s, streamlines(s), enthalpy="none") for s in (one, mirrored(one)))
    swap = np.array([4, 5, 6, 7, 0, 1, 2, 3])
    assert all({x, b.side[n]} == {"upper", "lower"} for x, n in zip(a.side, swap, strict=True))
    for name in ("k", "omega", "l", "e"):
        x, y = a.statistics[name], b.statistics[name]
        sign = -1 if name == "k" else 1
        # Rounding may put the points of a line elsewhere, and medians are over points.
        np.testing.assert_allclose(x.median, sign * y.median[swap], rtol=2e-3)
        np.testing.assert_allclose(x.drift, y.drift[swap], rtol=5e-2)
        assert x.word == tuple(y.word[n] for n in swap)
    assert a.statistics["k"].median[0] != pytest.approx(-a.statistics["k"].median[4], rel=0.1)


def test_scatter_and_blocks_leave_the_means(small_disc):
    """The demo's azimuthal scatter of the mass loss has no mean; blocks change nothing."""
    seeds = wind_seeds((1.6, 2.4))
    plain = small_disc(shape=(16, 64, 80))
    lines = streamlines(plain, seeds)
    a = line_invariants(plain, lines, from_height=4.5)
    b = line_invariants(
        small_disc(shape=(16, 64, 80), blocks=(2, 4, 5), wind_scatter=0.4), lines, from_height=4.5
    )
    for name in ("k", "omega", "l"):
        np.testing.assert_allclose(
            b.statistics[name].median, a.statistics[name].median, rtol=1e-3, err_msg=name
        )
    assert b.notes[0].startswith("fields are means over azimuth")


def test_levels(small_disc):
    fine = small_disc(shape=(1, 128, 160))
    mixed = small_disc(shape=(2, 64, 80), levels=2)
    lines = streamlines(fine, wind_seeds((1.6, 1.62)))
    a, b = (line_invariants(s, lines, from_height=4.5) for s in (fine, mixed))
    # The wind lies on the coarse level: errors of second order in its cells.
    for name in ("k", "omega", "l"):
        np.testing.assert_allclose(
            b.statistics[name].median, a.statistics[name].median, rtol=2e-2, err_msg=name
        )


# ---- enthalpy -----------------------------------------------------------------------------------


def radial_flow(speed, pressure, n, **constants):
    """Monopole field and radial flow rho v r^2 = 1; functions of r alone."""
    r, theta = np.geomspace(1, 6, n + 1), MIDPLANE + np.linspace(-0.3, 0.3, 25)
    middle, shape = centres(r), (1, 24, n)
    v = speed(middle)
    rho = 1 / (v * middle**2)
    zero = np.zeros(shape)
    cells = dict.fromkeys((*VELOCITIES, *NAMES), zero)
    cells |= {"velocity_r": v + zero, "magnetic_r": 1 / middle**2 + zero}
    cells |= {"density": rho + zero, "pressure": pressure(rho) + zero}
    return fv.Snapshot.from_arrays(r, theta, [0.0, 0.1], cells=cells, **constants)


def parker_wind(r, sound=0.5):
    """Isothermal wind from rest through r_c = GM/(2 c^2) (Parker 1958; with Lambert's W, Cranmer
    2004; from memory): v^2/c^2 = -W(-D), D = (r_c/r)^4 exp(4 (1 - r_c/r) - 1).
    """
    critical = 1 / (2 * sound**2)
    D = (critical / r) ** 4 * np.exp(4 * (1 - critical / r) - 1)
    inner, outer = lambertw(-D, 0).real, lambertw(-D, -1).real
    return sound * np.sqrt(-np.where(r < critical, inner, outer))


RADIAL_SEEDS = np.array([(3.0, MIDPLANE - 0.1, 0.05), (3.0, MIDPLANE + 0.2, 0.05)])


def test_isothermal_energy_of_the_parker_wind():
    drifts = []
    for n in (40, 80, 160):
        snapshot = radial_flow(parker_wind, lambda rho: 0.25 * rho, n)
        found = line_invariants(snapshot, streamlines(snapshot, RADIAL_SEEDS), from_height=0)
        drifts.append(found.statistics["e"].half_range[0])
    assert np.log2(drifts[0] / drifts[-1]) / 2 > 1.6
    assert found.statistics["e"].word == ("conserved", "conserved")
    start = found.legs[0].points[found.on_leg[found.legs[0].points]][0]
    v = parker_wind(found.state.r[start])
    # w is counted from the beginning of the leg.
    wanted = v**2 / 2 - 1 / found.state.r[start]
    assert found.statistics["e"].median[0] == pytest.approx(wanted, abs=2e-3)
    # Nothing turns: a drift relative to zero is not given.
    assert found.statistics["omega"].word == ("not tested", "not tested")
    assert found.statistics["omega"].reason[0] == "the median is zero"
    assert found.entropy is None


def test_adiabatic_energy_and_entropy():
    """Bernoulli's law with P = K rho^gamma, solved for the density on the fast branch."""
    gamma, K, energy = 4 / 3, 0.05, 1.0

    def speed(r):
        v = np.full_like(r, 2.0)
        for _ in range(200):
            rho = 1 / (v * r**2)
            v = np.sqrt(2 * (energy + 1 / r - gamma / (gamma - 1) * K * rho ** (gamma - 1)))
        return v

    found = []
    for n in (40, 160):
        snapshot = radial_flow(speed, lambda rho: K * rho**gamma, n, gamma=gamma)
        lines = streamlines(snapshot, RADIAL_SEEDS)
        found.append(line_invariants(snapshot, lines, from_height=0))
    e, entropy = found[1].statistics["e"], found[1].statistics["entropy"]
    assert e.median == pytest.approx(energy, rel=1e-3)
    assert entropy.median == pytest.approx(K, rel=1e-3)
    assert e.word == entropy.word == ("conserved", "conserved")
    assert (e.drift < found[0].statistics["e"].drift / 8).all()
    # The same cells with an isothermal enthalpy: T varies, so e is not tested, with the reason.
    cold = line_invariants(snapshot, lines, from_height=0, enthalpy="isothermal")
    assert cold.statistics["e"].word == ("not tested", "not tested")
    assert "P/rho drifts by" in cold.statistics["e"].reason[0]
    assert np.isnan(cold.e[cold.on_leg]).all()
    # Without enthalpy e is there, and drifts by the heat that is left out.
    bare = line_invariants(snapshot, lines, from_height=0, enthalpy="none")
    assert (bare.statistics["e"].drift > 10 * e.drift).all()


# ---- legs, options, bad input -------------------------------------------------------------------


def test_field_lines_through_the_disc_have_two_halves():
    snapshot = fv.demo_disc(shape=(1, 64, 80))
    lines = fv.trace_lines(snapshot, "magnetic", [[1.1, MIDPLANE, 0.1]], poloidal=True)
    upper = line_invariants(snapshot, lines, from_height=4.5)
    lower = line_invariants(snapshot, lines, from_height=4.5, side="lower")
    assert (upper.side, lower.side) == (("upper",), ("lower",))
    assert any("leave on both sides" in note for note in upper.notes)
    assert not (upper.on_leg & lower.on_leg).any()
    assert upper.statistics["k"].median == pytest.approx(-lower.statistics["k"].median, rel=1e-3)


def test_slow_start_and_lines_without_legs():
    """The Parker wind along B alone: the slow speed is the lesser of c_s and v_A."""
    snapshot = radial_flow(parker_wind, lambda rho: 0.25 * rho, 80)
    lines = streamlines(snapshot, RADIAL_SEEDS)
    found = line_invariants(snapshot, lines, from_height="slow")
    # c_s = 0.5 is reached at r = 2; v_A = 1/(r^2 sqrt(rho)) = sqrt(v)/r is 0.354 there: less.
    r = np.linspace(1.0, 2.0, 100_001)
    wanted = r[np.argmax(parker_wind(r) >= np.minimum(0.5, np.sqrt(parker_wind(r)) / r))]
    assert found.launch[:, 0] == pytest.approx(wanted, rel=1e-3)
    assert (found.state.r[found.on_leg] >= wanted * 0.999).all()
    cold = fv.Snapshot.from_grid(
        snapshot.grid, cells={n: snapshot.cell(n) for n in snapshot.cell_names if n != "pressure"}
    )
    lost = line_invariants(cold, lines, from_height="slow")
    assert lost.statistics["k"].reason[0] == "no slow point: the snapshot has no pressure"
    assert "2 of 2 lines have no leg" in lost.notes
    high = line_invariants(snapshot, lines, from_height=5.0, thickness=0.05)
    assert "does not end beyond" in high.statistics["k"].reason[0]
    assert high.statistics["k"].word == ("not tested", "not tested")
    assert np.isnan(high.launch).all()


def test_height_is_clipped_and_said():
    snapshot = radial_flow(parker_wind, lambda rho: 0.25 * rho, 40)
    lines = streamlines(snapshot, [(3.0, MIDPLANE - 0.28, 0.05)])
    found = line_invariants(snapshot, lines, thickness=0.1)
    assert "clipped to the grid" in found.notes[1]
    assert found.on_leg.any()


def test_lines_without_points_and_no_lines():
    snapshot = radial_flow(parker_wind, lambda rho: 0.25 * rho, 40)
    found = line_invariants(snapshot, streamlines(snapshot, [(9.0, 1.5, 0.0)]), from_height=0)
    assert found.statistics["k"].reason == ("the line has no points",)
    empty = line_invariants(snapshot, streamlines(snapshot, np.empty((0, 3))), from_height=0)
    assert empty.statistics["k"].word == ()
    assert empty.launch.shape == (0, 2)


def test_missing_numbers_are_counted():
    snapshot = radial_flow(parker_wind, lambda rho: 0.25 * rho, 40)
    density = snapshot.cell("density").copy()
    density[..., 20] = np.nan
    lines = streamlines(snapshot, RADIAL_SEEDS)
    found = line_invariants(snapshot.with_cells(density=density), lines, from_height=0)
    left_out = np.count_nonzero(np.isnan(found.k[found.legs[0].points]))
    assert left_out > 0
    assert found.statistics["k"].reason[0].startswith(f"{left_out} of ")
    assert any("no finite mass load" in note for note in found.notes)
    density[:] = np.nan
    gone = line_invariants(snapshot.with_cells(density=density), lines, from_height=0)
    assert gone.statistics["k"].word == ("not tested", "not tested")
    assert np.isnan(gone.statistics["l"].median).all()


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"from_height": -1.0}, "expected from_height"),
        ({"from_height": "fast"}, "expected from_height"),
        ({"from_height": np.nan}, "expected from_height"),
        ({"thickness": 2.0}, "expected a thickness"),
        ({"side": "north"}, "expected side"),
        ({"enthalpy": "warm"}, "expected enthalpy"),
        ({"enthalpy": "adiabatic"}, "gamma above 1"),
        ({"adiabatic_sound": True}, "expected a snapshot with gamma"),
    ],
)
def test_bad_options(options, words):
    snapshot = radial_flow(parker_wind, lambda rho: 0.25 * rho, 10)
    with pytest.raises(fv.FieldvizError, match=words):
        line_invariants(snapshot, streamlines(snapshot, RADIAL_SEEDS), **options)


@pytest.mark.parametrize("missing", ["density", "velocity_phi", "magnetic_theta"])
def test_missing_fields(missing):
    snapshot = radial_flow(parker_wind, lambda rho: 0.25 * rho, 10)
    lines = streamlines(snapshot, RADIAL_SEEDS)
    cells = {n: snapshot.cell(n) for n in snapshot.cell_names if n != missing}
    with pytest.raises(fv.FieldvizError, match=f"without {missing}"):
        line_invariants(fv.Snapshot.from_grid(snapshot.grid, cells=cells), lines)
