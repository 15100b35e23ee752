"""B_z against surface density: known correlations, known shifts, and chance."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats
from scipy.signal import lfilter
from sheet_fields import H, of_sheets

import fieldviz as fv
from fieldviz.sheets.flux_profile import flux_profile
from fieldviz.sheets.flux_sheets import find_flux_sheets
from fieldviz.sheets.relation import (
    _correlation_length,
    flux_density_relation,
    surface_density_background,
)

REACH = 3.0


@pytest.fixture(scope="module")
def profile():
    made = of_sheets([(2.0, 5.0, 0.3)], cells={"density": lambda r, theta: r**-1.0 + 0 * theta})
    return flux_profile(made, thickness=H)[0]


def with_series(profile, ln_flux, ln_mass):
    """The profile with ln(B_z/B_bg) and ln(Sigma/Sigma_bg) as given, up to their medians."""
    return replace(profile, f=np.exp(ln_flux), surface_density=profile.r**-1.0 * np.exp(ln_mass))


def waves(x, seed, shift=0.0):
    rng = np.random.default_rng(seed)
    length, phase = rng.uniform(0.7, 2.5, 12), rng.uniform(0, 2 * np.pi, 12)
    return 0.2 * np.sin(2 * np.pi * (x[:, None] - shift) / length + phase).sum(1)


@pytest.mark.parametrize("factor", [-0.5, 0.3])
def test_a_power_law_between_them(profile, factor):
    """Sigma/Sigma_bg = (B_z/B_bg)^factor: a perfect correlation of the factor's sign."""
    series = waves(profile.x, 1)
    found = flux_density_relation(with_series(profile, series, factor * series), reach=REACH)
    # Medians of powers are powers of medians, but for the slope that is taken off.
    assert found.pearson == pytest.approx(np.sign(factor), abs=0.01)
    assert found.spearman == pytest.approx(np.sign(factor), abs=0.01)
    assert found.best_lag == pytest.approx(0, abs=1e-9)
    assert found.pearson_chance < 1e-6
    assert found.share_used == 1


@pytest.mark.parametrize("shift", [-1.2, 0.4, 1.0])
def test_the_lag_is_found(profile, shift):
    """The same series farther out by `shift` scale heights."""
    flux, mass = waves(profile.x, 2), -waves(profile.x, 2, shift)
    found = flux_density_relation(with_series(profile, flux, mass), reach=REACH)
    assert found.best_lag == pytest.approx(shift, abs=0.06)
    assert found.lagged.min() < -0.9
    assert found.lags[[0, -1]] == pytest.approx([-2, 2], abs=0.06)
    i = int(np.argmin(np.abs(found.lags)))
    assert found.lagged[i] == pytest.approx(found.pearson)


def test_coefficients_are_those_of_scipy(profile):
    """On even rings nothing is interpolated."""
    flux, mass = waves(profile.x, 3), waves(profile.x, 4)
    made = with_series(profile, flux, mass)
    found = flux_density_relation(made, reach=REACH)
    from fieldviz.sheets.running import running_median

    dx = np.diff(np.log(made.r_edges)) / H
    a = np.log(made.f / running_median(made.x, dx, made.f, REACH))
    b = np.log(made.surface_density / surface_density_background(made, REACH))
    assert found.pearson == pytest.approx(stats.pearsonr(a, b).statistic, abs=1e-3)
    assert found.spearman == pytest.approx(stats.spearmanr(a, b).statistic, abs=2e-3)


def test_chance_of_unrelated_series(profile):
    """Of 60 pairs of unrelated smooth series about 5 % are as strong as 5 % chance.

    Counting every ring as independent would call most of them significant.
    """
    below, naive = 0, 0
    for seed in range(60):
        flux, mass = waves(profile.x, 2 * seed + 10), waves(profile.x, 2 * seed + 11)
        found = flux_density_relation(with_series(profile, flux, mass), reach=REACH, lag_reach=0.1)
        below += found.pearson_chance < 0.05
        n = len(profile.x)
        t = abs(found.pearson) * np.sqrt((n - 2) / (1 - found.pearson**2))
        naive += 2 * stats.t.sf(t, n - 2) < 0.05
    assert below <= 9
    assert naive > 25


def test_correlation_length_of_a_known_process():
    """An autoregressive series of first order falls to 1/e after -1/ln(a) steps."""
    rng = np.random.default_rng(0)
    values = lfilter([1.0], [1.0, -0.9], rng.normal(size=400_000))
    assert _correlation_length(values, 0.1) == pytest.approx(-0.1 / np.log(0.9), rel=0.04)
    assert _correlation_length(rng.normal(size=1000), 0.1) < 0.1


def test_background_of_a_power_law_is_the_power_law(profile):
    """Exactly, whatever its slope; a gap leaves it nearly alone."""
    for slope in (-1.0, 0.7, -2.2):
        law = profile.r**slope
        np.testing.assert_allclose(
            surface_density_background(replace(profile, surface_density=law), REACH), law, rtol=1e-9
        )
        gap = law * (1 - 0.8 * np.exp(-0.5 * ((profile.x - profile.x[150]) / 0.4) ** 2))
        background = surface_density_background(replace(profile, surface_density=gap), REACH)
        np.testing.assert_allclose(background, law, rtol=0.06)


def test_flux_sits_in_the_gaps_of_the_disc(small_disc):
    relation = find_flux_sheets(small_disc(shape=(2, 48, 128)), lean=False).relation
    assert relation.pearson < -0.7
    assert relation.spearman < -0.7
    assert abs(relation.best_lag) < 0.3
    assert relation.pearson_chance < 0.01
    assert 5 < relation.n_effective < 40


def test_the_surface_density_is_a_mass_over_an_area(small_disc):
    disc = small_disc(shape=(2, 48, 64))
    profile, _ = flux_profile(disc)
    mass = sum(
        float((disc.cell_block("density", b) * disc.grid.volumes(b)).sum())
        for b in range(disc.grid.n_blocks)
    )
    areas = np.diff(profile.r_edges**2) / 2 * profile.period
    assert profile.surface_density @ areas == pytest.approx(mass, rel=1e-12)


def test_what_has_no_logarithm_is_left_out(profile):
    flux = np.exp(waves(profile.x, 5))
    flux[100:120] *= -1
    made = replace(with_series(profile, waves(profile.x, 5), waves(profile.x, 6)), f=flux)
    found = flux_density_relation(made, reach=REACH)
    assert found.share_used == pytest.approx(1 - 20 / len(flux), abs=1e-6)
    assert any("was left out" in note for note in found.notes)


def test_too_little_to_say(profile):
    bare = replace(profile, surface_density=None)
    assert flux_density_relation(bare, reach=REACH) is None
    flat = replace(profile, f=np.ones_like(profile.f))
    assert flux_density_relation(flat, reach=REACH) is None
    empty = replace(profile, surface_density=0 * profile.r)
    assert flux_density_relation(empty, reach=REACH) is None
    slow = np.sin(profile.x / 10)
    found = flux_density_relation(with_series(profile, slow, slow), reach=50.0)
    assert np.isnan(found.pearson_chance)
    assert any("fewer than 3 independent" in note for note in found.notes)


def test_reversal_and_mass_scale_change_nothing(small_disc):
    disc = small_disc(shape=(1, 48, 96))
    other = fv.Snapshot.from_grid(
        disc.grid,
        cells={"density": 7 * disc.cell("density"), "pressure": 7 * disc.cell("pressure")},
        faces={"magnetic_theta": -np.sqrt(7) * disc.faces["magnetic_theta"]},
    )
    one, two = (find_flux_sheets(s, lean=False) for s in (disc, other))
    assert one.relation.pearson == pytest.approx(two.relation.pearson, rel=1e-9)
    assert [s.beta_z for s in one] == pytest.approx([s.beta_z for s in two], rel=1e-9)
    assert [s.depletion for s in one] == pytest.approx([s.depletion for s in two], rel=1e-9)
