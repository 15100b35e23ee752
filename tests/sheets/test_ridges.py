"""Ridges on the (r, phi) map: sheets that bend with azimuth, patches, and what is told apart."""

import numpy as np
import pytest
from scipy.special import ndtr
from sheet_fields import FWHM, H, bells, of_sheets, vertical

import fieldviz as fv
from fieldviz.sheets.flux_profile import flux_profile
from fieldviz.sheets.flux_sheets import find_flux_sheets
from fieldviz.sheets.ridges import _derivatives, find_ridges
from fieldviz.wedge.geometry import centres

PERIOD = np.pi / 4


def bent(radius, height, sd, course, n_phi=48, n_r=320):
    """One bell whose middle is radius + course(phi)."""

    def psi(r, phi):
        width = sd * H * radius
        bell = ndtr((r - radius - course(phi)) / width)
        return r + height * np.sqrt(2 * np.pi) * width * bell

    edges = np.linspace(0, PERIOD, n_phi + 1)
    return vertical(psi, r=np.geomspace(1, 5, n_r + 1), phi=edges)


def partial(share, n_phi=60, radius=2.0, gaps=()):
    """A bell over the first `share` of the azimuth, away from `gaps` (first, last)."""

    def psi(r, phi):
        there = phi < share * PERIOD and not any(a <= phi / PERIOD < b for a, b in gaps)
        return bells(r, [(radius, 10.0, 0.3)] if there else [])

    return vertical(psi, phi=np.linspace(0, PERIOD, n_phi + 1))


@pytest.mark.parametrize("wander", [0.04, 0.1])
def test_wander_of_the_disc_against_its_closed_form(wander, small_disc):
    """R(phi) = R_k + A cos(2 pi phi/period), rms A/sqrt 2; widths and fluxes as without wander."""
    law = fv.SaltmarshDisc(sheet_wander=wander)
    settings = {"shape": (32, 48, 192), "sheet_wander": wander}
    found = find_flux_sheets(small_disc(**settings), band=0.1)
    plain = find_flux_sheets(small_disc(shape=(1, 48, 192)), band=0.1)
    assert len(found) == len(plain) == 5
    assert not found.patches
    for s, p, R in zip(found, plain, law.sheet_radii(), strict=True):
        course = R + wander * np.cos(2 * np.pi * s.ridge.phi / PERIOD)
        # The smoothing along azimuth takes 2 % off the amplitude.
        np.testing.assert_allclose(s.ridge.radius, course, atol=0.04 * wander + 0.01 * H * R)
        assert s.wander * H * R == pytest.approx(wander / np.sqrt(2), rel=0.04)
        assert s.coverage == 1
        assert np.log(s.radius / R) / H == pytest.approx(0, abs=0.05)
        assert s.width == pytest.approx(p.width, rel=0.06)
        # Bent limits cut the wide return flux, which does not bend, differently.
        assert s.flux == pytest.approx(p.flux, rel=0.03)


def test_the_mean_alone_would_lose_a_bent_sheet():
    """Amplitude 1.2 H, sd 0.25 H: the mean is two low humps, the ridge one sheet of full height."""
    made = bent(2.5, 6.0, 0.25, lambda phi: 0.3 * np.cos(8 * phi))
    (s,) = find_flux_sheets(made, thickness=H)
    assert s.radius == pytest.approx(2.5, rel=0.02)
    assert s.width == pytest.approx(0.25 * FWHM, rel=0.1)
    assert s.wander == pytest.approx(1.2 / np.sqrt(2), rel=0.05)
    assert s.flux == pytest.approx(PERIOD * (6 * np.sqrt(2 * np.pi) + 2 * 2.2) * 0.0625, rel=0.1)
    average = fv.Snapshot.from_arrays(
        made.grid.r_edges[0],
        made.grid.theta_edges[0],
        np.array([0, PERIOD]),
        faces={"magnetic_theta": made.faces["magnetic_theta"][0].mean(0, keepdims=True)},
    )
    assert all(s.width > 0.8 for s in find_flux_sheets(average, thickness=H))


def test_ridges_converge():
    """Error of R(phi) with the mesh: second order towards the course the smoothing leaves.

    A Gaussian of 0.25 H along azimuth takes exp(-k^2/32) off a wave of k radians per H.
    """
    errors = []
    for n in (80, 160, 320):
        made = bent(2.0, 9.0, 0.3, lambda phi: 0.03 * np.sin(8 * phi), n_phi=n // 4, n_r=n)
        profile, of_band = flux_profile(made, thickness=H, smoothing=0)
        (ridge,) = find_ridges(of_band, profile)
        left = 0.03 * np.exp(-((8 * H) ** 2) / 32)
        true = 2.0 + left * np.sin(8 * ridge.phi)
        errors.append(np.sqrt(np.mean((ridge.radius - true) ** 2)))
    assert errors[0] < 1e-3
    assert errors[1] < errors[0] / 3
    assert errors[2] < errors[1] / 3


def test_a_patch_is_no_sheet():
    """40 % of the azimuth: the mean profile has its peak, the ridge says it is a patch."""
    found = find_flux_sheets(partial(0.4), thickness=H)
    assert len(found) == 0
    (patch,) = found.patches
    assert "patch" in patch.flags
    assert patch.coverage == pytest.approx(0.4, abs=0.02)
    assert patch.radius == pytest.approx(2.0, rel=2e-3)
    r1, r2 = patch.limits
    own = patch.coverage * PERIOD * np.diff(bells(np.array([r1, r2]), [(2.0, 10.0, 0.3)]))[0]
    assert patch.flux == pytest.approx(own, rel=0.06)
    # Asked to, it counts.
    (s,) = find_flux_sheets(partial(0.4), thickness=H, coverage=0.3)
    assert s.coverage == patch.coverage
    assert "patch" not in s.flags


def test_a_sheet_of_four_fifths():
    (s,) = find_flux_sheets(partial(0.8), thickness=H)
    assert s.coverage == pytest.approx(0.8, abs=0.02)
    assert np.isnan(s.ridge.radius).mean() == pytest.approx(0.2, abs=0.02)
    assert s.wander < 0.01


def test_short_gaps_are_bridged_and_long_ones_not():
    """A ridge with a gap of 8 % is one; two halves far apart are two patches."""
    (s,) = find_flux_sheets(partial(1.0, gaps=[(0.5, 0.58)]), thickness=H)
    assert 0.85 < s.coverage < 1
    found = find_flux_sheets(partial(1.0, gaps=[(0.3, 0.5), (0.8, 1.0)]), thickness=H)
    assert len(found) == 0
    assert len(found.patches) == 2


def test_ridges_that_rise_and_fall_along_azimuth():
    """Height varies threefold along it: the crest is still where it was put."""

    def psi(r, phi):
        return bells(r, [(2.0, 8 * (1 + 0.5 * np.sin(8 * phi)), 0.3)])

    made = vertical(psi, phi=np.linspace(0, PERIOD, 33))
    (s,) = find_flux_sheets(made, thickness=H)
    np.testing.assert_allclose(s.ridge.radius, 2.0, rtol=1e-3)
    assert s.ridge.strength > 0


def test_a_ridge_of_each_polarity_and_none_in_a_smooth_field():
    made = of_sheets([(1.7, 9, 0.3), (3.0, -9, 0.3)], phi=np.linspace(0, PERIOD, 9))
    profile, of_band = flux_profile(made, thickness=H)
    ridges = find_ridges(of_band, profile)
    assert [ridge.polarity for ridge in ridges] == [1, -1]
    assert [ridge.mean_radius for ridge in ridges] == pytest.approx([1.7, 3.0], rel=2e-3)
    smooth, its_map = flux_profile(of_sheets([], phi=np.linspace(0, PERIOD, 9)), thickness=H)
    assert find_ridges(its_map, smooth) == []


def test_a_spiral_is_said_to_be_one(small_disc):
    """A crest that moves out by 1.5 H a turn never closes: each turn is one ridge, flagged."""

    def psi(r, phi):
        turns = np.arange(-4, 5)[:, None]
        width = 0.25 * H * 2.2
        middle = 2.2 * np.exp(1.5 * H * (phi / PERIOD + turns))
        return r + 12 * np.sqrt(2 * np.pi) * width * ndtr((r - middle) / width).sum(0)

    made = vertical(psi, phi=np.linspace(0, PERIOD, 49))
    found = find_flux_sheets(made, thickness=H, lean=False, contrast=1.5, rise=0)
    whole = [s for s in found if "edge" not in s.flags and 1.4 < s.radius < 4]
    assert len(whole) > 3
    for s in whole:
        assert "spiral" in s.flags
        # Evenly over 1.5 H: rms 1.5/sqrt 12.
        assert s.wander == pytest.approx(1.5 / np.sqrt(12), rel=0.1)
    radii = np.array([s.radius for s in whole])
    assert np.diff(np.log(radii)) / H == pytest.approx(1.5, abs=0.2)
    wandering = find_flux_sheets(small_disc(shape=(16, 32, 128), sheet_wander=0.05), lean=False)
    assert all("spiral" not in s.flags for s in wandering)


def test_uneven_azimuths():
    """Coverage and mean count azimuths by their width."""
    phi = np.cumsum([0.0, *np.linspace(1, 5, 30)])
    phi *= PERIOD / phi[-1]

    def psi(r, at):
        return bells(r, [(2.0, 9.0, 0.3)] if at < 0.7 * PERIOD else [])

    (s,) = find_flux_sheets(vertical(psi, phi=phi), thickness=H)
    widths = np.diff(phi)
    assert s.coverage == pytest.approx(widths[centres(phi) < 0.7 * PERIOD].sum() / PERIOD, abs=0.04)
    assert s.ridge.widths == pytest.approx(widths)


def test_turbulence_leaves_the_sheets(small_disc):
    """Fluctuations as strong as the background move ridges by a hundredth of a scale height."""
    disc = small_disc(shape=(16, 32, 128), magnetic_turbulence=1.0)
    found = find_flux_sheets(disc, lean=False)
    assert len(found) == 5
    assert all(s.coverage > 0.9 and s.wander < 0.05 for s in found)


def test_fewer_than_four_azimuths_have_no_ridge(small_disc):
    one, three = (find_flux_sheets(small_disc(shape=(n, 48, 128)), lean=False) for n in (1, 3))
    assert [s.radius for s in one] == pytest.approx([s.radius for s in three], rel=1e-12)
    assert all((s.ridge.radius == s.radius).all() for s in three)


def test_derivatives_are_exact_for_parabolas():
    x = 1 + np.linspace(0, 1, 20) ** 1.3
    values = np.stack([3 - 2 * x + 5 * x * x, x])
    first, second = _derivatives(values, x)
    np.testing.assert_allclose(first[0, 1:-1], (-2 + 10 * x)[1:-1], rtol=1e-10)
    np.testing.assert_allclose(second[0, 1:-1], 10, rtol=1e-9)
    np.testing.assert_allclose(second[1, 1:-1], 0, atol=1e-10)
