"""The demo disc's plasma beta, worked out by PlasmaPy in SI units."""

import warnings

import astropy.units as u
import numpy as np
import pytest
from scipy.constants import k, mu_0

import fieldviz as fv


def test_background_beta_of_the_demo_disc():
    """beta = n k T/(B^2/2 mu_0) of the background field and midplane pressure at R = 1."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from plasmapy.formulary import beta

    disc = fv.SaltmarshDisc(beta=3e3, thickness=0.08)
    # Any scale of pressure does, as long as B is scaled with sqrt(mu_0 P): P = h^2 at R = 1.
    pascal = 0.37
    field = disc.background_field * np.sqrt(mu_0 * pascal)
    n = 1e18
    temperature = disc.thickness**2 * pascal / (n * k)
    found = beta(temperature * u.K, n / u.m**3, field * u.T)
    assert float(found) == pytest.approx(3e3, rel=1e-6)
