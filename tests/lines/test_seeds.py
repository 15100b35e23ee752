"""Seeds of equal flux against closed forms, and what must not change them."""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import fieldviz as fv

MIDPLANE = np.pi / 2
THETA = MIDPLANE + np.linspace(-0.7, 0.7, 9)
PHI = np.linspace(-0.2, 0.6, 5)
R = np.geomspace(1.0, 2.0, 33)


def vertical(r=R, theta=THETA, phi=PHI, slope=0.0, *, faces=True, share=None, sign=1.0):
    """A snapshot with B_z = r^-slope at the midplane, on faces exact fluxes, on cells values.

    `share` (n_phi,) multiplies it azimuth by azimuth.
    """
    share = np.ones(len(phi) - 1) if share is None else np.asarray(share)
    shape = (len(phi) - 1, len(theta) - 1, len(r) - 1)
    if faces:
        power = 2 - slope
        mean = np.diff(r**power) / power / (np.diff(r**2) / 2)
        values = -sign * np.sin(theta)[:, None] * mean
        field = {"magnetic_theta": share[:, None, None] * values}
        return fv.Snapshot.from_arrays(r, theta, phi, faces=field)
    middle = 0.5 * (r[1:] + r[:-1])
    values = np.broadcast_to(-sign * middle**-slope, shape) * share[:, None, None]
    return fv.Snapshot.from_arrays(r, theta, phi, cells={"magnetic_theta": values})


def strata(count, low, high, slope=0.0):
    """r_i = [r1^(2-b) + (i+1/2)/N (r2^(2-b) - r1^(2-b))]^(1/(2-b)) for B_z ~ r^-b."""
    p, share = 2 - slope, (np.arange(count) + 0.5) / count
    return (low**p + share * (high**p - low**p)) ** (1 / p)


# ---- closed forms: int B_z r dr dphi between radii, elementary calculus -------------------------


@pytest.mark.parametrize("faces", [True, False])
def test_uniform_field(faces):
    """Published nowhere, derived by hand: six lines between radii 1 and 2."""
    seeds = fv.equal_flux_seeds(vertical(faces=faces), 6)
    by_hand = [1.118033988749895, 1.3228756555322954, 1.5]
    by_hand += [1.6583123951777, 1.8027756377319946, 1.9364916731037085]
    np.testing.assert_allclose(seeds[:, 0], by_hand, rtol=1e-13)
    assert seeds.dtype == np.float64
    assert (seeds[:, 1] == MIDPLANE).all()
    assert ((seeds[:, 2] >= PHI[0]) & (seeds[:, 2] <= PHI[-1])).all()


@given(
    count=st.integers(1, 300),
    ends=st.tuples(st.floats(1.0, 1.45), st.floats(1.5, 2.0)),
    faces=st.booleans(),
)
@settings(max_examples=40)
def test_uniform_field_any_count_and_range(count, ends, faces):
    seeds = fv.equal_flux_seeds(vertical(faces=faces), count, r_range=ends)
    np.testing.assert_allclose(seeds[:, 0], strata(count, *ends), rtol=1e-12)


def test_power_law():
    by_hand = [1.0764632579284223, 1.233491803260596, 1.3956920295744248]
    by_hand += [1.5627534239766443, 1.7344082884105883, 1.9104230058832803]
    np.testing.assert_allclose(strata(6, 1, 2, 1.25), by_hand, rtol=1e-14)
    seeds = fv.equal_flux_seeds(vertical(slope=1.25), 6)
    np.testing.assert_allclose(seeds[:, 0], by_hand, rtol=1e-6)


@pytest.mark.parametrize(("faces", "least"), [(True, 2.5), (False, 1.8)])
def test_power_law_converges(faces, least):
    """Order of the error in r as the cells shrink: cells are second order, faces better."""
    errors = []
    for n in (16, 32, 64):
        snapshot = vertical(np.linspace(1, 2, n + 1), slope=1.25, faces=faces)
        found = fv.equal_flux_seeds(snapshot, 500)[:, 0]
        errors.append(np.sqrt(np.mean((found - strata(500, 1, 2, 1.25)) ** 2)))
    assert np.log2(np.array(errors[:-1]) / errors[1:]).min() > least


@pytest.mark.parametrize(("count", "tolerance"), [(50, 0.02), (400, 0.05)])
def test_flux_between_neighbours_in_the_demo_disc(count, tolerance):
    disc = fv.SaltmarshDisc()
    plan = fv.equal_flux_plan(fv.demo_disc(shape=(4, 32, 160)), count)
    r = plan.points[:, 0]
    assert plan.total == pytest.approx(disc.flux(1, 5), rel=1e-12)
    assert plan.net == pytest.approx(disc.flux(1, 5), rel=1e-12)
    assert plan.amount == pytest.approx(disc.flux(1, 5) / count)
    between = np.array([disc.flux(a, b) for a, b in pairwise(r)])
    np.testing.assert_allclose(between, plan.amount[0], rtol=tolerance)
    assert disc.flux(1, r[0]) == pytest.approx(plan.amount[0] / 2, rel=tolerance)
    assert disc.flux(r[-1], 5) == pytest.approx(plan.amount[0] / 2, rel=tolerance)


def test_azimuths_follow_the_flux():
    """Lines in any box of cells are its flux over that of a line, within 3 of 800.

    That golden-ratio points spread this evenly is what the bound tests; the bound is our choice.
    """
    share = np.array([0.0, 1.0, 3.0, 0.25])
    plan = fv.equal_flux_plan(vertical(slope=0.5, share=share), 800)
    r, _, phi = plan.points.T
    for i, j in ((4, 9), (4, 17), (4, 32), (12, 17), (12, 32), (20, 32)):
        flux = (R[j] ** 1.5 - R[i] ** 1.5) / 1.5 * share * np.diff(PHI)
        inside = (r >= R[i]) & (r < R[j])
        found = np.histogram(phi[inside], PHI)[0]
        np.testing.assert_allclose(found, flux / plan.amount[0], atol=3)
    assert not ((phi >= PHI[0]) & (phi < PHI[1])).any()


def test_neighbours_spread_over_the_azimuth():
    """Any 20 neighbours in r leave no gap wider than 3 times the even step (three-gap theorem)."""
    phi = np.mod(fv.equal_flux_seeds(vertical(), 500)[:, 2] - PHI[0], 0.8)
    for start in range(0, 480, 7):
        some = np.sort(phi[start : start + 20])
        assert np.diff(some, append=some[0] + 0.8).max() < 3 * 0.8 / 20


# ---- what must not change the seeds -------------------------------------------------------------


def cut(snapshot, counts):
    """The same cells of a one-block snapshot in `counts` blocks along phi, theta, r."""
    sizes = [n // c for n, c in zip(snapshot.grid.block_shape, counts, strict=True)]
    edges = snapshot.grid.edges(0)
    blocks = []
    for place in np.ndindex(*counts):
        k, j, i = (slice(n * s, (n + 1) * s) for n, s in zip(place, sizes, strict=True))
        kk, jj, ii = (slice(part.start, part.stop + 1) for part in (k, j, i))
        cells = {name: values[0][k, j, i] for name, values in snapshot.cells.items()}
        faces = {name: values[0][k, jj, i] for name, values in snapshot.faces.items()}
        blocks.append(fv.Block(edges[0][ii], edges[1][jj], edges[2][kk], cells, faces))
    return fv.Snapshot.from_blocks(blocks)


@pytest.mark.parametrize("kind", ["faces", "cells"])
def test_cutting_into_blocks_changes_no_bit(kind, small_disc):
    disc = small_disc(shape=(8, 32, 48), magnetic_turbulence=2.0)
    theta = "magnetic_theta"
    fields = {theta: disc.faces[theta] if kind == "faces" else disc.cell(theta)}
    one = fv.Snapshot.from_grid(disc.grid, **{kind: fields})
    many = cut(one, (2, 4, 3))
    for theta in (MIDPLANE, 1.3):
        a, b = (fv.equal_flux_seeds(s, 300, theta=theta) for s in (one, many))
        np.testing.assert_array_equal(a, b)


def test_a_finer_level_moves_seeds_by_less_than_a_coarse_cell():
    disc = fv.SaltmarshDisc()
    coarse = fv.equal_flux_plan(fv.demo_disc(shape=(4, 32, 96)), 60)
    fine = fv.equal_flux_plan(fv.demo_disc(shape=(4, 32, 96), levels=2), 60)
    assert fine.total == pytest.approx(coarse.total, rel=1e-12)
    cell = coarse.points[:, 0] * (5 ** (1 / 96) - 1)
    moved = np.abs(fine.points[:, 0] - coarse.points[:, 0]) / cell
    assert 0 < moved.max() < 0.25

    def error(plan):
        ends = [[1.0, r] for r in plan.points[:, 0]]
        wanted = (np.arange(60) + 0.5) / 60 * disc.flux(1, 5)
        return np.abs([disc.flux(*e) for e in ends] - wanted).max()

    assert error(fine) < 0.5 * error(coarse)


def half_fine(north_fine):
    """One side of the midplane two levels of azimuth and radius finer than the other."""
    fine_r, fine_phi = np.linspace(1, 2, 9), np.linspace(0, 1, 9)

    def block(theta, r, phi, values, level):
        field = np.broadcast_to(values[:, None, :], (4, 5, 4))
        return fv.Block(r, theta, phi, faces={"magnetic_theta": field}, level=level)

    detail = np.random.default_rng(3).uniform(0.2, 2, (8, 8))
    up, down = MIDPLANE + np.linspace(-0.4, 0, 5), MIDPLANE + np.linspace(0, 0.4, 5)
    fine, coarse = (up, down) if north_fine else (down, up)
    blocks = []
    for top in (0, 2):
        for k in (0, 4):
            for i in (0, 4):
                part = detail[k : k + 4, i : i + 4]
                edges = fine[top] + np.linspace(0, 0.2, 5)
                edges[[0, -1]] = fine[[top, top + 2]]
                ends = (fine_r[i : i + 5], fine_phi[k : k + 5])
                blocks.append(block(edges, *ends, part, 1))
    area = np.diff(fine_r**2)
    sums = (detail * area).reshape(4, 2, 4, 2).sum((1, 3))
    mean = sums / (2 * area.reshape(4, 2).sum(1))
    blocks.append(block(coarse, fine_r[::2], fine_phi[::2], mean, 0))
    return fv.Snapshot.from_blocks(blocks), fine_r, fine_phi, detail


@pytest.mark.parametrize("north_fine", [True, False])
def test_fine_faces_stand_at_a_level_jump(north_fine):
    snapshot, r, phi, detail = half_fine(north_fine)
    plan = fv.equal_flux_plan(snapshot, 4000)
    whole = fv.Snapshot.from_arrays(
        r,
        MIDPLANE + np.linspace(-0.4, 0.4, 3),
        phi,
        faces={"magnetic_theta": np.repeat(detail[:, None, :], 3, 1)},
    )
    np.testing.assert_array_equal(plan.points, fv.equal_flux_seeds(whole, 4000))


@pytest.mark.parametrize("turbulence", [0.0, 2.0])
def test_reversed_field_gives_the_same_seeds(turbulence):
    made = [
        fv.equal_flux_plan(
            fv.demo_disc(shape=(8, 32, 48), magnetic_turbulence=turbulence, reversed_field=turned),
            200,
        )
        for turned in (False, True)
    ]
    np.testing.assert_array_equal(made[0].points, made[1].points)
    assert made[0].net == -made[1].net != 0


def test_no_net_flux():
    """Signs that cancel exactly: seeds as for a field of one sign."""
    signs = np.array([1.0, -1.0, -1.0, 1.0])
    plan, plain = (fv.equal_flux_plan(vertical(share=s), 50) for s in (signs, np.abs(signs)))
    np.testing.assert_array_equal(plan.points, plain.points)
    assert plan.net == pytest.approx(0, abs=1e-15)
    assert plan.total == pytest.approx(0.8 * 1.5, rel=1e-13)


@pytest.mark.parametrize("cells", [1, 3])
def test_rotation_by_whole_cells(cells):
    """Radii stay; the azimuth has moved with the data where the data are all in one cell."""
    found = []
    for turn in (0, cells):
        disc = fv.demo_disc(shape=(8, 32, 48), magnetic_turbulence=2.0)
        faces = {"magnetic_theta": np.roll(disc.faces["magnetic_theta"], turn, axis=1)}
        found.append(fv.equal_flux_seeds(fv.Snapshot.from_grid(disc.grid, faces=faces), 200))
    np.testing.assert_allclose(found[0][:, 0], found[1][:, 0], rtol=1e-12)
    a, b = (
        fv.equal_flux_seeds(vertical(share=np.roll([1, 0, 0, 0], turn)), 20) for turn in (0, cells)
    )
    np.testing.assert_allclose(b - a, np.tile([0, 0, 0.2 * cells], (20, 1)), atol=1e-13)


@given(factor=st.floats(1e-12, 1e12))
@settings(max_examples=20)
def test_strength_changes_only_the_amount(factor):
    plain, scaled = (
        fv.equal_flux_plan(vertical(slope=1.0, share=s * np.array([1, 2, 0.5, 1])), 30)
        for s in (1.0, factor)
    )
    np.testing.assert_allclose(scaled.points, plain.points, rtol=1e-12)
    np.testing.assert_allclose(scaled.amount, factor * plain.amount, rtol=1e-12)


def test_single_precision():
    double, single = (
        fv.equal_flux_seeds(fv.demo_disc(shape=(4, 32, 48), precision=p), 100)
        for p in ("double", "single")
    )
    assert single.dtype == np.float64
    np.testing.assert_allclose(single, double, rtol=1e-5)


def test_one_azimuth_cell_and_a_wedge_from_the_origin():
    snapshot = vertical(np.linspace(0, 2, 21), phi=np.array([0.0, 0.3]))
    seeds = fv.equal_flux_seeds(snapshot, 40)
    np.testing.assert_allclose(seeds[:, 0], strata(40, 0, 2), rtol=1e-12)
    assert np.ptp(seeds[:, 2]) > 0.25


# ---- cones that are not faces -------------------------------------------------------------------


def test_interpolation_between_cells_is_linear_in_theta():
    """Uniform in r, flux density linear in theta: amount follows it exactly."""
    grid = vertical().grid
    values = np.broadcast_to(grid.cell_centres(0)[1][:, None], grid.block_shape)
    snapshot = fv.Snapshot.from_arrays(R, THETA, PHI, cells={"magnetic_theta": values})
    for theta in (1.2345, MIDPLANE, THETA[0], THETA[-1]):
        plan = fv.equal_flux_plan(snapshot, 7, theta=theta)
        assert plan.total == pytest.approx(theta * np.sin(theta) * 1.5 * 0.8, rel=1e-12)
        assert (plan.points[:, 1] == theta).all()


def test_faces_are_used_where_the_cone_is_made_of_them():
    faces = np.ones((4, 9, 32))
    faces[:, 4] = 1 + (np.arange(32) >= 16)
    snapshot = fv.Snapshot.from_arrays(R, THETA, PHI, faces={"magnetic_theta": faces})
    on = fv.equal_flux_plan(snapshot, 100)
    off = fv.equal_flux_plan(snapshot, 100, theta=MIDPLANE + 0.01)
    halves = [R[16] ** 2 - 1, 4 - R[16] ** 2]
    outer = 2 * halves[1] / (halves[0] + 2 * halves[1])
    assert np.mean(on.points[:, 0] > R[16]) == pytest.approx(outer, abs=0.01)
    assert on.total == pytest.approx(0.8 * (halves[0] + 2 * halves[1]) / 2, rel=1e-12)
    assert off.total < 0.9 * on.total
    assert "faces" in on.notes[0]
    assert "between cells" in off.notes[0]


# ---- scattered and even-area sets ---------------------------------------------------------------


def test_scattered_seeds_are_reproducible_and_even():
    snapshot = vertical(slope=1.0, share=[1, 2, 0.5, 1])
    a, b, c = (fv.equal_flux_seeds(snapshot, 1000, scatter_seed=s) for s in (5, 5, 6))
    np.testing.assert_array_equal(a, b)
    assert np.abs(a - c).max() > 1e-3
    for seeds in (a, c):
        # Halton points of 1000: a tenth of what independent ones are off, sqrt(1/1000)/10 = 0.003
        # times a few; independent ones would be about 0.03.
        order = np.sort(seeds[:, 0]) - 1
        assert np.abs(order - (np.arange(1000) + 0.5) / 1000).max() < 0.008
        found = np.histogram(seeds[:, 2], PHI)[0] / 1000
        np.testing.assert_allclose(found, np.array([1, 2, 0.5, 1]) / 4.5, atol=0.008)


@pytest.mark.parametrize("scatter_seed", [None, 2])
def test_even_area(scatter_seed):
    """Every box holds its share of the area, elementary geometry, within 3 of 600 lines."""
    snapshot = fv.demo_disc(shape=(4, 32, 24))
    seeds = fv.even_area_seeds(snapshot, 600, theta=1.4, scatter_seed=scatter_seed)
    found = np.histogram2d(seeds[:, 0] ** 2, seeds[:, 2], [np.linspace(1, 25, 5), 5])[0]
    np.testing.assert_allclose(found, 30, atol=3)
    assert (seeds[:, 1] == 1.4).all()


def test_even_area_reaches_where_equal_flux_does_not():
    snapshot = vertical(slope=0.0, share=[1, 0, 0, 1])
    strong, even = fv.equal_flux_seeds(snapshot, 40), fv.even_area_seeds(snapshot, 40)
    inside = [(s[:, 2] > PHI[1]) & (s[:, 2] < PHI[3]) for s in (strong, even)]
    assert inside[0].sum() == 0
    assert 18 <= inside[1].sum() <= 22


def test_even_area_does_not_cover_equal_flux_in_a_uniform_field():
    strong, even = fv.equal_flux_seeds(vertical(), 40), fv.even_area_seeds(vertical(), 40)
    np.testing.assert_allclose(strong[:, 0], even[:, 0], rtol=1e-12)
    np.testing.assert_allclose(np.abs(strong[:, 2] - even[:, 2]), 0.4, rtol=1e-12)


# ---- bad input ----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "count", [0, -3, 1.5, float("nan"), float("inf"), True, None, "7", 10_000_001, 10**400]
)
@pytest.mark.parametrize("make", [fv.equal_flux_seeds, fv.even_area_seeds])
def test_bad_counts(make, count):
    with pytest.raises(fv.FieldvizError, match=r"expected count to be a whole number of 1 to"):
        make(vertical(), count)


@pytest.mark.parametrize("make", [fv.equal_flux_seeds, fv.even_area_seeds])
@pytest.mark.parametrize("theta", [0.5, 2.9, float("nan"), 0.0])
def test_bad_theta(make, theta):
    with pytest.raises(fv.FieldvizError, match="expected a colatitude theta within"):
        make(vertical(), 5, theta=theta)


@pytest.mark.parametrize("make", [fv.equal_flux_seeds, fv.even_area_seeds])
@pytest.mark.parametrize(
    "span", [(0.9, 1.5), (1.2, 2.1), (1.5, 1.2), (1.5, 1.5), (float("nan"), 2)]
)
def test_bad_range(make, span):
    with pytest.raises(fv.FieldvizError, match="expected a range of radii"):
        make(vertical(), 5, r_range=span)


@pytest.mark.parametrize("seed", [-1, 1.5, "a", True])
def test_bad_scatter_seed(seed):
    with pytest.raises(fv.FieldvizError, match="expected scatter_seed to be a whole number"):
        fv.equal_flux_seeds(vertical(), 5, scatter_seed=seed)


def test_missing_field():
    snapshot = fv.Snapshot.from_arrays(R, THETA, PHI, cells={"density": np.ones((4, 8, 32))})
    with pytest.raises(fv.FieldvizError, match="without magnetic_theta"):
        fv.equal_flux_seeds(snapshot, 5)


@pytest.mark.parametrize(
    ("value", "words"), [(0.0, "got zero on every cell"), (np.nan, "got no number on any cell")]
)
def test_nothing_to_divide(value, words):
    snapshot = vertical(share=[value] * 4)
    with pytest.raises(fv.FieldvizError, match=words):
        fv.equal_flux_seeds(snapshot, 5)


def test_cells_without_a_number_get_no_seeds():
    plan = fv.equal_flux_plan(vertical(share=[1, np.nan, 1, np.inf]), 80)
    counts = np.histogram(plan.points[:, 2], PHI)[0]
    assert counts.tolist() == [40, 0, 40, 0]
    assert "64 of 128 patches" in plan.notes[-1]
