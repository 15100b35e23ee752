"""Beta, Alfven speed and unstable wavelengths by PlasmaPy, Astropy and the dispersion relation."""

import warnings

import astropy.constants as const
import astropy.units as u
import numpy as np
import pytest
from scipy.constants import Boltzmann, m_p, mu_0
from scipy.optimize import minimize_scalar

import fieldviz as fv
from fieldviz.derived.plasma import alfven_speed, plasma, plasma_beta
from fieldviz.derived.resolution import resolution


def test_beta_and_alfven_speed_of_plasmapy():
    """Protons of 1e20 per m^3 at 1e6 K in 0.1 T, in SI units: 0.34699494 and 218120.345 m/s."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from plasmapy.formulary import Alfven_speed, beta

        n, temperature, B = 1e20, 1e6, 0.1
        density = n * m_p
        expected_beta = float(beta(temperature * u.K, n / u.m**3, B * u.T))
        expected_speed = Alfven_speed(B * u.T, density * u.kg / u.m**3).to_value(u.m / u.s)
    found = plasma_beta(n * Boltzmann * temperature, B**2, mu_0)
    assert found == pytest.approx(expected_beta, rel=1e-6)
    assert found == pytest.approx(0.34699494, rel=1e-6)
    speed = alfven_speed(B**2, density, mu_0)
    assert speed == pytest.approx(expected_speed, rel=1e-6)
    assert speed == pytest.approx(218120.345, rel=1e-6)


def disc_at_1_au():
    """280 K, 2.34 proton masses, 1700 g/cm^2 (Hayashi 1981, from memory), beta_z = 1e4; CGS.

    32 cells per H at the midplane, whose middles lie half a cell away from it.
    """
    gas = (const.k_B * 280 * u.K / (2.34 * const.m_p)).to_value(u.cm**2 / u.s**2)
    gm, au = (const.G * const.M_sun).cgs.value, const.au.cgs.value
    sound, rotation = np.sqrt(gas), np.sqrt(gm / au**3)
    scale = sound / rotation
    density = 1700 / (np.sqrt(2 * np.pi) * scale)
    field = np.sqrt(8 * np.pi * density * gas / 1e4)
    theta = np.pi / 2 + scale / au / 32 * np.arange(-64, 65)
    shape = (2, 128, 1)
    r_edges = au * np.array([0.9999, 1.0001])
    cells = {
        "density": np.full(shape, density),
        "pressure": np.full(shape, density * gas),
        "magnetic_theta": np.full(shape, -field),
        "magnetic_r": np.zeros(shape),
        "magnetic_phi": np.zeros(shape),
    }
    disc = fv.Snapshot.from_arrays(
        r_edges, theta, [0, 0.01, 0.02], cells=cells, mu0=4 * np.pi, gm=gm
    )
    return disc, scale / au, field, sound


def test_the_disc_at_1_au():
    """In CGS: h 0.033367, B_z 0.18365 G, v_A/c_s = sqrt(2/beta), Q = 2.8434 with 32 cells per H."""
    disc, h, field, sound = disc_at_1_au()
    assert h == pytest.approx(0.0333672737635793, rel=1e-6)
    assert field == pytest.approx(0.18364968623108643, rel=1e-6)
    found = plasma(disc)
    np.testing.assert_allclose(found.beta_z, 1e4, rtol=1e-9)
    np.testing.assert_allclose(found.net_field, field, rtol=1e-12)
    np.testing.assert_allclose(found.alfven / sound, np.sqrt(2 / 1e4), rtol=1e-9)
    np.testing.assert_allclose(found.alfven, 1405.4934738, rtol=1e-6)
    q = resolution(disc).q_theta
    np.testing.assert_allclose(q.net, 2.8434450804213545, rtol=1e-7)
    assert resolution(disc).levels[0].median["theta"] == pytest.approx(32, rel=1e-7)


def growth(k):
    """Fastest growth over Omega of axisymmetric modes of a Keplerian disc, k in Omega/v_A.

    w^4 - w^2 [kappa^2 + 2 k^2] + k^2 (k^2 - 3) = 0 with kappa = 1 (Balbus & Hawley 1991).
    """
    squares = np.roots([1, -(1 + 2 * k * k), k * k * (k * k - 3)])
    return float(np.sqrt(max(0.0, -squares.real.min())))


def test_q_is_cells_per_unstable_wavelength():
    """The fastest mode, from the dispersion relation, is sqrt(16/15) times Q cells long."""
    fastest = minimize_scalar(lambda k: -growth(k), bounds=(0.3, 1.7), method="bounded").x
    assert growth(fastest) == pytest.approx(0.75, rel=1e-6)
    assert fastest == pytest.approx(np.sqrt(15 / 16), rel=1e-4)
    assert growth(np.sqrt(3) * 0.999) > 0 == growth(np.sqrt(3) * 1.001)
    disc, h, _, sound = disc_at_1_au()
    au = const.au.cgs.value
    rotation = sound / (h * au)
    speed = float(plasma(disc).alfven[64, 0])
    wavelength = 2 * np.pi * speed / (fastest * rotation)
    assert wavelength / (h * au) == pytest.approx(0.09177179535272761, rel=1e-4)
    cells = wavelength / (h * au / 32)
    assert cells == pytest.approx(2.9366974512872837, rel=1e-4)
    q = float(resolution(disc).q_theta.net[0])
    assert cells / q == pytest.approx(np.sqrt(16 / 15), rel=1e-4)
