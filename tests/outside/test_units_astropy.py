"""Unit scales of a disc around the Sun, recomputed with Astropy's constants.

The constants are those of CODATA and of the IAU, whichever the installed Astropy carries.
The example: M = 1 Msun, r0 = 1 au, GM = r0 = 1 in code units, density unit Sigma0/r0 with
Sigma0 = 1700 g/cm2, the surface density at 1 au of the minimum-mass nebula (Hayashi 1981).
"""

from __future__ import annotations

import numpy as np
import pytest

from fieldviz.wedge.units import Unit, UnitScales

constants = pytest.importorskip("astropy.constants")
units = pytest.importorskip("astropy.units")

# M_sun, r0 in au, density unit in g/cm3 (None: 1700 g/cm2 / r0), then recorded figures, from an
# independent calculation made before this code: time in yr, velocity in km/s, mass rate in Msun/yr.
EXAMPLES = {
    "Hayashi disc at 1 au": (
        1.0,
        1.0,
        None,
        0.15915794901090866,
        29.784691829676934,
        0.001202168934644585,
    ),
    "5.2 au": (1.0, 5.2, 1e-11, 1.8872670145827648, 13.061451410903352, 0.0012544316623839136),
    "half a Sun, 30 au": (
        0.5,
        30.0,
        1e-13,
        36.9849651561467,
        3.8451871809419624,
        0.00012291612942298265,
    ),
}


def base_scales(stellar_mass, radius, density):
    """Length, mass and time unit as Astropy quantities."""
    length = radius * units.au
    rho = (
        1700 * units.g / units.cm**2 / length
        if density is None
        else density * units.g / units.cm**3
    )
    time = np.sqrt(length**3 / (constants.G * stellar_mass * constants.M_sun))
    return length.to("au"), (rho * length**3).to("Msun"), time.to("yr")


@pytest.mark.parametrize("name", EXAMPLES)
def test_conversions_are_those_of_astropy(name):
    stellar_mass, radius, density, time_yr, velocity, mass_rate = EXAMPLES[name]
    length, mass, time = base_scales(stellar_mass, radius, density)
    scales = UnitScales(Unit(length.value, "au"), Unit(mass.value, "Msun"), Unit(time.value, "yr"))
    assert time.value == pytest.approx(time_yr, rel=1e-6)

    factor, label = scales.conversion(mass=1, time=-1)
    assert factor == pytest.approx((mass / time).to_value("Msun/yr"), rel=1e-14)
    assert factor == pytest.approx(mass_rate, rel=1e-6)
    assert units.Unit(label.replace("Msun", "M_sun").replace(" ", " * ")) == units.Unit("Msun / yr")

    factor, label = scales.conversion(length=1, time=-1)
    assert (factor * units.au / units.yr).to_value("km/s") == pytest.approx(velocity, rel=1e-6)
    # Kepler speed at r0: what GM = r0 = 1 means.
    kepler = np.sqrt(constants.G * stellar_mass * constants.M_sun / (radius * units.au))
    assert factor == pytest.approx(kepler.to_value("au/yr"), rel=1e-12)

    factor, _ = scales.conversion(length=-3, mass=1)
    expected = (1700 / (radius * units.au).to_value("cm")) if density is None else density
    assert (factor * units.Msun / units.au**3).to_value("g/cm3") == pytest.approx(
        expected, rel=1e-12
    )


def test_the_textbook_figures():
    # As printed in the physics notes: 1.2022e-3 Msun/yr and 29.7847 km/s.
    length, mass, time = base_scales(1.0, 1.0, None)
    in_cgs = UnitScales(
        Unit(length.to_value("cm"), "cm"),
        Unit(mass.to_value("g"), "g"),
        Unit(time.to_value("s"), "s"),
    )
    rate, label = in_cgs.conversion(mass=1, time=-1)
    assert label == "g s^-1"
    assert rate / 6.3008906592961785e25 == pytest.approx(1.2022e-3, rel=5e-5)  # g/s in Msun/yr
    speed, label = in_cgs.conversion(length=1, time=-1)
    assert label == "cm s^-1"
    assert speed / 1e5 == pytest.approx(29.7847, rel=1e-6)
