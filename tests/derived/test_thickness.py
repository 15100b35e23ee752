"""H/R by both ways."""

import astropy.constants as const
import astropy.units as u
import numpy as np
import pytest

import fieldviz as fv
from fieldviz.derived.thickness import disc_thickness
from fieldviz.errors import FieldvizError, MissingFieldError


@pytest.mark.parametrize("h", [0.03, 0.1, 0.15])
def test_pressure_gives_the_thickness_the_disc_was_made_with(h):
    disc = fv.demo_disc(shape=(2, 128, 96), thickness=h)
    measured = disc_thickness(disc)
    assert measured.h == pytest.approx(h, rel=2e-3)
    assert measured.spread[0] <= measured.h <= measured.spread[1]
    assert "sound speed" in measured.source


def test_density_alone_agrees():
    disc = fv.demo_disc(shape=(2, 128, 96))
    bare = fv.Snapshot.from_grid(disc.grid, cells={"density": disc.cell("density")})
    measured = disc_thickness(bare)
    assert measured.h == pytest.approx(0.1, rel=0.05)
    assert "no pressure" in measured.source


def test_two_levels_and_gm():
    disc = fv.demo_disc(shape=(4, 32, 32), levels=2)
    assert disc_thickness(disc).h == pytest.approx(0.1, rel=5e-3)
    heavier = fv.Snapshot.from_grid(
        disc.grid, cells={name: disc.cell(name) for name in ("density", "pressure")}, gm=4.0
    )
    assert disc_thickness(heavier).h == pytest.approx(0.05, rel=5e-3)


def test_the_disc_at_1_au():
    """H/R = 0.0334 at 1 au for 280 K (Hayashi 1981, from memory) and 2.34 proton masses."""
    gas = const.k_B * 280 * u.K / (2.34 * const.m_p)
    kepler = const.G * const.M_sun / const.au
    pressure = float((gas / kepler).to(u.dimensionless_unscaled))
    theta = np.linspace(np.pi / 2 - 0.2, np.pi / 2 + 0.2, 11)
    cells = {"density": np.ones((1, 10, 2)), "pressure": np.full((1, 10, 2), pressure)}
    disc = fv.Snapshot.from_arrays([0.99, 1.0, 1.01], theta, [0, 0.1], cells=cells)
    assert disc_thickness(disc).h == pytest.approx(0.0333672737635793, rel=6e-3)


def test_what_is_missing_is_said():
    disc = fv.demo_disc(shape=(2, 32, 16))
    with pytest.raises(MissingFieldError, match="density"):
        disc_thickness(fv.Snapshot.from_grid(disc.grid))
    dead = disc.with_cells(density=0 * disc.cell("density"))
    with pytest.raises(FieldvizError, match="got none"):
        disc_thickness(dead)


def test_wedge_without_midplane_is_refused():
    cells = {name: np.ones((1, 4, 2)) for name in ("density", "pressure")}
    above = fv.Snapshot.from_arrays([1, 2, 3], np.linspace(0.5, 1.2, 5), [0, 0.1], cells=cells)
    with pytest.raises(FieldvizError, match="holds the midplane"):
        disc_thickness(above)
