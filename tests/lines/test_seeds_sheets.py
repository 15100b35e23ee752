"""Seeds along sheets: the Saltmarsh disc's ridges, widths and fluxes are known in closed form."""

from types import SimpleNamespace

import numpy as np
import pytest
from scipy.special import ndtr

import fieldviz as fv
from fieldviz.lines.seeds_sheets import _maxima

SHAPE = (16, 32, 192)
FWHM = 2 * np.sqrt(2 * np.log(2))


def ridge(disc, radius, phi):
    return radius + disc.sheet_wander * np.cos(2 * np.pi * phi / disc.period)


@pytest.mark.parametrize("wander", [0.0, 0.05])
@pytest.mark.parametrize("turned", [False, True])
def test_seeds_lie_on_the_ridges(wander, turned, small_disc):
    disc = fv.SaltmarshDisc(sheet_wander=wander)
    snapshot = small_disc(shape=SHAPE, sheet_wander=wander, reversed_field=turned)
    plan = fv.sheet_plan(snapshot, disc.sheet_radii(), 400)
    cell = 5 ** (1 / 192) - 1
    for number, law in enumerate(sorted(disc.sheets, key=lambda s: s.radius)[:2]):
        # Sheets 1.4 and 1.85 stand alone well enough for a single bell over its surroundings.
        r, _, phi = plan.points[plan.group == number].T
        offset = r - ridge(disc, law.radius, phi)
        half = 0.5 * FWHM * law.width
        assert abs(offset.mean()) < 0.3 * cell * law.radius
        assert np.abs(offset).max() < 1.2 * half + cell * law.radius
        assert np.ptp(offset) > 1.5 * half
    assert sorted(set(plan.group.tolist())) == [0, 1, 2, 3, 4]


def test_wander_is_followed_and_not_averaged(small_disc):
    """The ridge drawn through seeds: mean R in each half cell of azimuth, against the closed form.

    A ridge that climbs in steps of whole cells would be off by 0.4 of a cell in r.
    """
    disc = fv.SaltmarshDisc(sheet_wander=0.05)
    plan = fv.sheet_plan(small_disc(shape=SHAPE, sheet_wander=0.05), [1.4], 1600)
    r, _, phi = plan.points.T
    cells = np.floor(phi / disc.period * 32).astype(int)
    mean = np.bincount(cells, r) / np.bincount(cells)
    exact = np.bincount(cells, ridge(disc, 1.4, phi)) / np.bincount(cells)
    np.testing.assert_allclose(mean, exact, atol=0.3 * 1.4 * (5 ** (1 / 192) - 1))
    assert np.ptp(exact) > 0.09


@pytest.mark.parametrize("seed", [1, 2])
def test_ridges_in_turbulence(seed):
    """Fluctuations as strong as the background: the seeds still follow the ridge to 0.15 H."""
    disc = fv.SaltmarshDisc(sheet_wander=0.05)
    snapshot = fv.demo_disc(shape=SHAPE, sheet_wander=0.05, magnetic_turbulence=1.0, seed=seed)
    plan = fv.sheet_plan(snapshot, [1.4, 4.2], 600)
    for number, radius in enumerate((1.4, 4.2)):
        r, _, phi = plan.points[plan.group == number].T
        offset = (r - ridge(disc, radius, phi)) / (0.1 * radius)
        assert abs(offset.mean()) < 0.05
        assert np.sqrt(np.mean(offset**2)) < 0.25 * FWHM / 2 + 0.15


def test_lines_are_shared_by_flux(small_disc):
    """Numbers of lines against fluxes within the half widths, by integrals of the closed form."""
    disc = fv.SaltmarshDisc()
    radii = [1.4, 4.2]
    plan = fv.sheet_plan(small_disc(shape=SHAPE), radii, 1000)
    flux = []
    for number in (0, 1):
        r = plan.points[plan.group == number, 0]
        flux.append(disc.flux(r.min(), r.max()))
    counts = np.bincount(plan.group)
    assert counts.sum() == 1000
    assert counts[1] / counts[0] == pytest.approx(flux[1] / flux[0], rel=0.03)
    for number in (0, 1):
        assert plan.amount[plan.group == number] * counts[number] == pytest.approx(
            flux[number], rel=0.03
        )
    assert plan.total == pytest.approx(plan.net, rel=1e-12)


def gaussian(width=0.04, background=0.0, phi=8):
    """One sheet at R = 1.5 with exact face fluxes: R B_z a bell over a uniform R B_z."""
    r, theta = np.linspace(1, 2, 401), np.pi / 2 + np.linspace(-0.5, 0.5, 5)
    psi = ndtr((r - 1.5) / width) + background * r
    face = -np.diff(psi) / (np.diff(r**2) / 2)
    field = {"magnetic_theta": np.broadcast_to(face, (phi, 5, 400))}
    return fv.Snapshot.from_arrays(r, theta, np.linspace(0, 1, phi + 1), faces=field)


@pytest.mark.parametrize("background", [0.0, 1.0])
def test_spread_over_the_full_width_by_flux_quantiles(background):
    """A bell: half maximum at 1.1774 sd; between, quantiles of the normal distribution."""
    plan = fv.sheet_plan(gaussian(background=background), [1.45], 900, thickness=0.2)
    x = np.sort((plan.points[:, 0] - 1.5) / 0.04)
    half = FWHM / 2
    assert x[0] == pytest.approx(-half, abs=0.03)
    assert x[-1] == pytest.approx(half, abs=0.03)
    law = ndtr(x) + background * 0.04 * x
    ends = ndtr([-half, half]) + background * 0.04 * np.array([-half, half])
    share = (law - ends[0]) / (ends[1] - ends[0])
    np.testing.assert_allclose(share, (np.arange(900) + 0.5) / 900, atol=0.02)
    assert plan.total == pytest.approx(ends[1] - ends[0], rel=0.02)


@pytest.mark.parametrize("strong", [0, 1])
def test_a_stronger_neighbour_does_not_take_a_sheet(strong):
    """Two bells 0.67 H apart, one three times the other: each sheet keeps its own lines."""
    r, theta = np.linspace(1, 2, 401), np.pi / 2 + np.linspace(-0.5, 0.5, 5)
    radii, fluxes = [1.5, 1.6], [1.0, 1.0]
    fluxes[strong] = 3.0
    psi = sum(f * ndtr((r - R) / 0.02) for f, R in zip(fluxes, radii, strict=True))
    face = -np.diff(psi) / (np.diff(r**2) / 2)
    field = {"magnetic_theta": np.broadcast_to(face, (3, 5, 400))}
    snapshot = fv.Snapshot.from_arrays(r, theta, np.linspace(0, 1, 4), faces=field)
    plan = fv.sheet_plan(snapshot, radii, 400, thickness=0.1)
    assert np.bincount(plan.group)[strong] == pytest.approx(300, abs=15)
    for number, radius in enumerate(radii):
        assert np.abs(plan.points[plan.group == number, 0] - radius).max() < 0.03


def test_the_parabola_is_exact_for_a_parabola():
    """On uneven radii, for several tops in one call; a flat profile has no maximum to refine."""
    r = 1 + np.linspace(0, 1, 30) ** 1.5
    tops = np.array([1.21, 1.3333, 1.502])
    profile = 2 - (r - tops[:, None]) ** 2
    np.testing.assert_allclose(_maxima(r, profile, 1.1, 1.7), tops, rtol=1e-12)
    falling = np.broadcast_to(3 - r, (1, 30))
    assert np.isnan(_maxima(r, falling, 1.1, 1.7)).all()


def test_objects_with_a_radius_order_and_reproducibility(small_disc):
    snapshot = small_disc(shape=SHAPE)
    as_objects = [SimpleNamespace(radius=R) for R in (4.2, 1.4)]
    plan = fv.sheet_plan(snapshot, as_objects, 101)
    np.testing.assert_array_equal(plan.points, fv.sheet_seeds(snapshot, [4.2, 1.4], 101))
    assert plan.points[plan.group == 0, 0].min() > 3.9
    assert plan.points[plan.group == 1, 0].max() < 1.6
    a, b = (fv.sheet_seeds(snapshot, [1.4], 50, scatter_seed=s) for s in (1, 2))
    assert np.abs(a - b).max() > 1e-3


@pytest.mark.parametrize("parts", [{"blocks": (2, 2, 3)}, {"levels": 2}])
def test_blocks_and_levels(parts, small_disc):
    shape = (8, 32, 96)
    disc = fv.SaltmarshDisc()
    settings = {"shape": shape, "sheet_wander": 0.05}
    one = fv.sheet_plan(small_disc(**settings), disc.sheet_radii(), 300, thickness=0.1)
    other = fv.sheet_plan(small_disc(**settings, **parts), disc.sheet_radii(), 300, thickness=0.1)
    if "blocks" in parts:
        np.testing.assert_allclose(one.points, other.points, rtol=1e-9)
        return
    # A coarse cell is 0.17 H wide, sheets 0.59 H: widths and so numbers change by a few percent.
    counts = [np.bincount(plan.group) / 300 for plan in (one, other)]
    np.testing.assert_allclose(*counts, atol=0.04)
    for number in range(5):
        means = [plan.points[plan.group == number, 0].mean() for plan in (one, other)]
        assert means[0] == pytest.approx(means[1], rel=0.01)


def test_rotation_by_whole_cells(small_disc):
    """Sheets turned with the data: the same number of lines, and the ridge turned."""
    disc = small_disc(shape=SHAPE, sheet_wander=0.05)
    faces = {"magnetic_theta": np.roll(disc.faces["magnetic_theta"], 8, axis=1)}
    turned = fv.Snapshot.from_grid(disc.grid, faces=faces)
    a, b = (fv.sheet_plan(s, [1.4, 4.2], 500, thickness=0.1) for s in (disc, turned))
    np.testing.assert_array_equal(a.group, b.group)
    assert a.total == pytest.approx(b.total, rel=1e-12)
    # Half a turn: what bent outward bends inward.
    r, _, phi = b.points[b.group == 0].T
    law = fv.SaltmarshDisc(sheet_wander=-0.05)
    assert np.abs(r - ridge(law, 1.4, phi)).max() < 0.06


def test_azimuths_without_a_maximum_are_said_and_bridged():
    snapshot = gaussian()
    faces = np.array(snapshot.faces["magnetic_theta"])
    faces[0, 2] = -1.0
    plan = fv.sheet_plan(
        fv.Snapshot.from_grid(snapshot.grid, faces={"magnetic_theta": faces}),
        [1.5],
        200,
        thickness=0.1,
    )
    assert "1 of 8 azimuths have no maximum" in plan.notes[0]
    assert np.abs(plan.points[:, 0] - 1.5).max() < 0.06


def test_one_azimuth_cell():
    seeds = fv.sheet_seeds(gaussian(phi=1), [1.5], 30, thickness=0.1)
    assert np.ptp(seeds[:, 2]) > 0.9
    assert abs(seeds[:, 0].mean() - 1.5) < 2e-3


@pytest.mark.parametrize("sheets", [[], [0.9], [2.0], [float("nan")], ["x"], [1.5, None], 7.0])
def test_bad_sheets(sheets):
    with pytest.raises(fv.FieldvizError, match="expected at least one sheet"):
        fv.sheet_seeds(gaussian(), sheets, 5, thickness=0.1)


def test_other_bad_input():
    with pytest.raises(fv.FieldvizError, match="expected count"):
        fv.sheet_seeds(gaussian(), [1.5], 0, thickness=0.1)
    with pytest.raises(fv.FieldvizError, match="expected a thickness"):
        fv.sheet_seeds(gaussian(), [1.5], 5, thickness=2.0)
    with pytest.raises(fv.FieldvizError, match="without density"):
        fv.sheet_seeds(gaussian(), [1.5], 5)
    grid = gaussian().grid
    dead = fv.Snapshot.from_grid(grid, cells={"magnetic_theta": np.zeros((1, 8, 4, 400))})
    with pytest.raises(fv.FieldvizError, match="expected a magnetic flux"):
        fv.sheet_seeds(dead, [1.5], 5, thickness=0.1)
    upper = fv.demo_disc(shape=(2, 8, 8), theta_reach=(0.7, 0.7))
    half = fv.Snapshot.from_arrays(
        upper.grid.r_edges[0],
        upper.grid.theta_edges[0][:4],
        upper.grid.phi_edges[0],
        cells={"magnetic_theta": np.ones((2, 3, 8))},
    )
    with pytest.raises(fv.FieldvizError, match="expected a colatitude theta within"):
        fv.sheet_seeds(half, [1.5], 5, thickness=0.1)
