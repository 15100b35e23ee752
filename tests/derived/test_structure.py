"""Surface density, thickness, rings, gaps and pressure maxima against closed forms."""

import numpy as np
import pytest
from disc_changes import (
    assert_same,
    cut_up,
    mirrored,
    only,
    rescaled,
    rotated,
    stirred,
    with_field_times,
)
from scipy.integrate import fixed_quad
from scipy.optimize import brentq

import fieldviz as fv
from fieldviz.derived.structure import disc_structure
from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.wedge.demo.state import disc_state

DISC = fv.SaltmarshDisc()


def exact_surface_density(edges, reach=0.7):
    """Mass between two radii over the annulus, by quadrature."""

    def per_sphere(r):
        points, weights = np.polynomial.legendre.leggauss(160)
        x = reach * points
        density = disc_state(DISC, r, np.pi / 2 + x[:, None]).density
        return r * r * ((weights * reach * np.cos(x)) @ density)

    mass = np.array([fixed_quad(per_sphere, *pair, n=5)[0] for pair in edges])
    return mass / np.array([(b * b - a * a) / 2 for a, b in edges])


def test_surface_density_converges_to_the_closed_form():
    errors = []
    for n in (32, 64, 128):
        found = disc_structure(fv.demo_disc(shape=(1, 2 * n, n)))
        places = [n // 8, n // 3, n // 2, 7 * n // 8]
        exact = exact_surface_density([found.r_edges[[i, i + 1]] for i in places])
        errors.append(np.max(np.abs(found.surface_density[places] / exact - 1)))
    assert errors[-1] < 5e-3
    assert np.log2(errors[0] / errors[-1]) / 2 > 1.8


def test_mass_is_that_of_the_cells_on_any_levels():
    for disc in (stirred(shape=(4, 32, 32)), fv.demo_disc(shape=(4, 32, 32), levels=3)):
        found = disc_structure(disc)
        cells = sum(
            float((disc.cell("density")[n] * disc.grid.volumes(n)).sum())
            for n in range(disc.grid.n_blocks)
        )
        area = np.diff(found.r_edges**2) / 2 * disc.grid.period
        assert found.mass == pytest.approx(cells, rel=1e-13)
        assert (found.surface_density * area).sum() == pytest.approx(cells, rel=1e-13)


def test_arc_form_differs_as_the_notes_say():
    """int rho r dtheta against mass over area: 0.4 % at H/R = 0.1 without gaps."""
    theta = np.linspace(np.pi / 2 - 0.6, np.pi / 2 + 0.6, 401)
    r = np.geomspace(1, 1.001, 2)
    t = 0.5 * (theta[1:] + theta[:-1])[:, None]
    density = np.broadcast_to(np.exp((np.sin(t) - 1) / 0.1**2), (1, 400, 1))
    found = disc_structure(fv.Snapshot.from_arrays(r, theta, [0, 1], cells={"density": density}))
    arc = density.sum() * (theta[1] - theta[0]) * 0.5 * (r[0] + r[1])
    assert 1 - found.surface_density[0] / arc == pytest.approx(0.005, abs=0.0015)


@pytest.mark.parametrize("h", [0.05, 0.1])
def test_both_ways_to_the_thickness_agree_on_a_hydrostatic_disc(h):
    found = disc_structure(fv.demo_disc(shape=(2, 160, 48), thickness=h))
    np.testing.assert_allclose(found.h_sound, h, rtol=1e-3)
    assert np.median(found.h_spread) == pytest.approx(h, rel=0.03)
    assert not found.disagrees.any()


def test_a_disc_thinner_than_its_pressure_is_flagged():
    disc = stirred(shape=(2, 64, 32))
    hot = disc.with_cells(pressure=2 * disc.cell("pressure"))
    found = disc_structure(hot)
    np.testing.assert_allclose(found.h_sound, 0.1 * np.sqrt(2), rtol=1e-3)
    assert found.disagrees.all()
    assert any("differ by more than 20 %" in note for note in found.notes)
    barely = disc.with_cells(pressure=1.15 * disc.cell("pressure"))
    assert disc_structure(barely).disagrees.mean() < 0.5


def ringed(bumps, n=200):
    """Sigma ~ 1/r times bumps, H/R = 0.05, P ~ rho/r; mass spread over theta."""
    r_edges, theta = np.geomspace(1, 6, n + 1), np.linspace(np.pi / 2 - 0.2, np.pi / 2 + 0.2, 33)
    r = 0.5 * (r_edges[1:] + r_edges[:-1])
    t = 0.5 * (theta[1:] + theta[:-1])[:, None]
    profile = r**-2.0
    for radius, height, width in bumps:
        profile = profile * (1 + height * np.exp(-0.5 * ((r - radius) / width) ** 2))
    density = (profile * np.exp(-0.5 * ((t - np.pi / 2) / 0.05) ** 2))[None]
    cells = {"density": density, "pressure": density * 0.05**2 / r}
    return fv.Snapshot.from_arrays(r_edges, theta, [0, 0.5], cells=cells)


def test_rings_and_gaps_of_known_depth():
    found = disc_structure(ringed([(2.0, -0.6, 0.05), (4.0, 0.5, 0.1)]))
    (gap,), (ring,) = found.gaps, found.rings
    assert gap.radius == pytest.approx(2.0, abs=0.02)
    assert gap.depth == pytest.approx(0.6, abs=0.01)
    assert ring.radius == pytest.approx(4.0, abs=0.04)
    assert ring.ratio == pytest.approx(1.5, abs=0.015)
    # The highest ratio beside the gap is the ring's: (1.5 - 0.4)/(1.5 + 0.4).
    assert gap.contrast == pytest.approx(1.1 / 1.9, abs=0.01)
    assert found.contrast == pytest.approx(1.1 / 1.9, abs=0.01)
    assert not gap.at_edge
    away = np.abs(np.log(found.r[:, None] / [2.0, 4.0])).min(1) > 0.15
    inner = (found.r > 1.3) & (found.r < 5)
    np.testing.assert_allclose(found.ratio[away & inner], 1, atol=0.01)


def test_a_smooth_disc_has_neither():
    found = disc_structure(ringed([]))
    assert found.rings == found.gaps == ()
    assert len(found.pressure_maxima) == 0
    assert "0 rings and 0 gaps" in found.sentence


def test_pressure_maxima_are_where_the_closed_form_has_them():
    def slope(r):
        e = 1e-5
        sides = disc_state(DISC, np.array([r - e, r + e]), np.full(2, np.pi / 2)).pressure
        return np.log(sides[1] / sides[0])

    radii = np.geomspace(1.05, 4.75, 800)
    slopes = np.array([slope(r) for r in radii])
    falls = np.flatnonzero((slopes[:-1] > 0) & (slopes[1:] <= 0))
    exact = [brentq(slope, radii[i], radii[i + 1]) for i in falls]
    assert len(exact) == 4
    errors = []
    for n in (96, 192):
        found = disc_structure(fv.demo_disc(shape=(1, 64, n))).pressure_maxima
        found = found[found < 4.75]
        assert len(found) == 4
        errors.append(np.max(np.abs(found / exact - 1)))
    assert errors[1] < 5e-4
    assert errors[0] / errors[1] > 2.5


def test_coarse_blocks_away_from_the_midplane_make_no_false_rings():
    levels = disc_structure(fv.demo_disc(shape=(2, 48, 64), levels=2))
    one = disc_structure(fv.demo_disc(shape=(4, 96, 128)))
    assert [g.radius for g in levels.gaps] == [g.radius for g in one.gaps]
    np.testing.assert_allclose(levels.surface_density, one.surface_density, rtol=2e-3)
    np.testing.assert_allclose(levels.pressure_maxima, one.pressure_maxima, rtol=1e-4)


def test_what_must_change_nothing():
    disc = stirred()
    here = disc_structure(disc)
    assert_same(here, disc_structure(mirrored(disc)), rtol=1e-11)
    assert_same(here, disc_structure(rotated(disc, 3)), rtol=1e-13)
    assert_same(here, disc_structure(cut_up(disc, (2, 4, 4))))
    assert_same(here, disc_structure(with_field_times(disc, -1)), rtol=0)
    scaled = {
        name: lambda x: 5 * x
        for name in (
            "surface_density", "mass", "background", "midplane_density", "midplane_pressure"
        )
    }  # fmt: skip
    assert_same(here, disc_structure(rescaled(disc, 5.0)), but=scaled, rtol=1e-11)


def test_what_is_missing_is_said_and_not_zero():
    disc = stirred(shape=(1, 64, 48))
    found = disc_structure(only(disc, "density"))
    assert found.h_sound is found.disagrees is found.pressure_maxima is None
    assert found.midplane_pressure is None
    assert any("no pressure" in note for note in found.notes)
    assert found.mass == disc_structure(disc).mass
    with pytest.raises(MissingFieldError, match="density"):
        disc_structure(only(disc, "pressure"))


def test_a_ring_without_numbers_is_nan_and_a_cell_takes_its_rings_mean():
    disc = stirred(shape=(4, 32, 24))
    density = disc.cell("density").copy()
    density[0, 1, 16, 5] = np.nan
    found = disc_structure(disc.with_cells(density=density))
    np.testing.assert_allclose(
        found.surface_density, disc_structure(disc).surface_density, rtol=1e-12
    )
    assert any(note.startswith("1 cells") for note in found.notes)
    density[0, :, 16, 5] = np.nan
    found = disc_structure(disc.with_cells(density=density))
    assert np.flatnonzero(np.isnan(found.surface_density)).tolist() == [5]
    assert any("surface density is NaN" in note for note in found.notes)
    assert np.isfinite(found.mass)


def test_a_pressure_without_numbers_costs_no_mass():
    disc = stirred(shape=(2, 48, 32))
    bad = disc.with_cells(pressure=np.full_like(disc.cell("pressure"), np.nan))
    with pytest.raises(FieldvizError, match="give the thickness H/R yourself"):
        disc_structure(bad)
    found = disc_structure(bad, thickness=0.1)
    assert found.mass == disc_structure(disc).mass
    assert np.isnan(found.h_sound).all()
    assert any("the midplane and H: 3072 cells" in note for note in found.notes)


def test_a_wedge_above_the_midplane_has_a_surface_density_only():
    cells = {name: np.ones((2, 8, 16)) for name in ("density", "pressure")}
    disc = fv.Snapshot.from_arrays(
        np.geomspace(1, 2, 17), np.linspace(0.8, 1.2, 9), [0, 0.1, 0.2], cells=cells
    )
    found = disc_structure(disc, thickness=0.1)
    assert found.h_sound is found.pressure_maxima is None
    assert np.isnan(found.midplane_density).all()
    assert found.mass == pytest.approx(disc.grid.wedge_volume)
    assert any("no midplane" in note for note in found.notes)


def test_poles_and_the_origin_in_the_domain():
    cells = {name: np.ones((8, 16, 8)) for name in ("density", "pressure")}
    disc = fv.Snapshot.from_arrays(
        np.linspace(0, 2, 9), np.linspace(0, np.pi, 17), np.linspace(0, 2 * np.pi, 9), cells=cells
    )
    found = disc_structure(disc)
    assert found.mass == pytest.approx(4 / 3 * np.pi * 8)
    assert np.isfinite(found.surface_density).all()


def test_single_precision_is_summed_in_double():
    single = disc_structure(fv.demo_disc(shape=(4, 48, 48), precision="single"))
    double = disc_structure(fv.demo_disc(shape=(4, 48, 48)))
    assert single.mass == pytest.approx(double.mass, rel=1e-7)
    np.testing.assert_allclose(single.surface_density, double.surface_density, rtol=1e-6)
