"""Errors of snapshots and series: coverage of the truth, and when there is no estimate."""

import gc
import weakref
from dataclasses import replace

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.errors import FieldvizError
from fieldviz.symmetry.wind_symmetry import wind_symmetry_of_series

SHAPE = (16, 48, 48)
WORDS = {
    "even": "even", "odd": "odd", "one-sided": "one-sided upper", "through-flow": "through-flow",
}  # fmt: skip


def judged(snapshot, **options):
    return fv.wind_symmetry(snapshot, thickness=0.1, fields=False, **options)


def of_series(snapshots, **options):
    return wind_symmetry_of_series(snapshots, thickness=0.1, fields=False, **options)


def cell_fields(snapshot):
    cells = {name: snapshot.cell(name) for name in snapshot.cell_names}
    return fv.Snapshot.from_grid(snapshot.grid, cells=cells, time=snapshot.time)


@pytest.fixture(scope="module")
def still():
    """The disc without noise: its angles are the truth."""
    return cell_fields(fv.demo_disc(shape=SHAPE, side_ratio=0.7))


def scattered(snapshot, factors, **constants):
    """Wind speed and B_phi of each side times factors (4, n_phi or 1), whose mean is not kept."""
    above = (snapshot.grid.cell_centres(0)[1] < np.pi / 2)[:, None]
    a = np.asarray(factors)[:, :, None, None]
    speed, field = np.where(above, a[0], a[1]), np.where(above, a[2], a[3])
    noisy = snapshot.with_cells(
        velocity_r=snapshot.cell("velocity_r") * speed,
        velocity_theta=snapshot.cell("velocity_theta") * speed,
        magnetic_phi=snapshot.cell("magnetic_phi") * field,
    )
    return replace(noisy, **constants)


def hits(result, truth):
    return [
        pair.interval is not None and pair.interval[0] <= expected.angle <= pair.interval[1]
        for pair, expected in zip(result.pairs, truth.pairs, strict=True)
    ]


def test_interval_covers_the_truth_in_90_of_100(still):
    """White noise of 20 % in azimuth, each side for itself, and with it the sides' totals."""
    truth = judged(still)
    covered, words = np.zeros(3, int), set()
    for seed in range(100):
        noise = 1 + 0.2 * np.random.default_rng([seed, 5]).normal(size=(4, 16))
        result = judged(scattered(still, noise))
        covered += hits(result, truth)
        words.add(result.word)
    assert covered.min() >= 90
    # Nor may it be so wide that it says nothing.
    assert covered.sum() < 300
    assert words == {"even"}


def test_stated_errors_are_those_found(still):
    """Mean stated error against the scatter of the angles it is stated for."""
    angles, stated = [], []
    for seed in range(60):
        noise = 1 + 0.1 * np.random.default_rng([seed, 6]).normal(size=(4, 16))
        pairs = judged(scattered(still, noise)).pairs
        angles.append([pair.angle for pair in pairs])
        stated.append([pair.angle_error for pair in pairs])
    ratio = np.sqrt(np.mean(np.square(stated), 0)) / np.std(angles, 0, ddof=1)
    assert ratio == pytest.approx(1, abs=0.3)


def test_scatter_of_the_demo_whose_totals_are_fixed():
    """P of the outflow is 0.8 within its interval whatever the scatter (2 p/(1 + p^2), p = 1/2)."""
    covered = 0
    for seed in range(10):
        outflow = judged(
            fv.demo_disc(shape=SHAPE, side_ratio=0.5, wind_scatter=0.4, seed=seed)
        ).outflow
        low, high = outflow.score_interval
        covered += low <= 0.8 <= high
        assert outflow.angle_error > 0.5
    assert covered >= 9


@pytest.mark.parametrize("wind", WORDS)
def test_winds_keep_their_words_with_turbulence_and_scatter(wind):
    for seed in (1, 2):
        disc = fv.demo_disc(
            shape=(32, 64, 48), wind=wind, magnetic_turbulence=0.5, velocity_turbulence=0.05,
            wind_scatter=0.2, seed=seed,
        )  # fmt: skip
        result = judged(disc)
        assert result.word == WORDS[wind]
        assert result.outflow.angle_error is not None
        assert "single snapshot" not in result.sentence
        assert "±" in result.sentence


def test_long_correlations_merge_blocks_or_give_no_estimate(still):
    x = 2 * np.pi * (np.arange(16) + 0.5) / 16
    for wave, source in ((4, "blocks of azimuth"), (2, "4 blocks"), (1, "no estimate")):
        noise = 1 + 0.2 * np.cos(wave * x + np.arange(4)[:, None])
        outflow = judged(scattered(still, noise)).outflow
        assert source in outflow.error_source
        assert (outflow.interval is None) == (wave == 1)


@pytest.mark.parametrize("phi", [1, 3, 16])
def test_axisymmetric_snapshots_have_no_estimate(phi):
    result = judged(fv.demo_disc(shape=(phi, 48, 48), precision="single"))
    assert result.outflow.angle_error is None
    assert result.outflow.interval is None
    assert result.outflow.error_source.startswith("no estimate")
    assert "(outflow angle +0.0 degrees; single snapshot)" in result.sentence


def test_errors_know_rotation_by_blocks_mirror_and_splitting(still):
    noise = 1 + 0.2 * np.random.default_rng(3).normal(size=(4, 16))
    disc = scattered(still, noise)
    expected = judged(disc)
    turned = disc.with_cells(**{n: np.roll(disc.cell(n), 2, 1) for n in disc.cell_names})
    cut = [
        fv.Block(
            disc.grid.r_edges[0], disc.grid.theta_edges[0], disc.grid.phi_edges[0, a : a + 5],
            {n: disc.cell(n)[0, a : a + 4] for n in disc.cell_names},
        )
        for a in (0, 4, 8, 12)
    ]  # fmt: skip
    for other in (turned, fv.Snapshot.from_blocks(cut)):
        for p, q in zip(expected.pairs, judged(other).pairs, strict=True):
            assert q.angle_error == pytest.approx(p.angle_error, rel=1e-9)
            assert q.upper_error == pytest.approx(p.upper_error, rel=1e-9)


def series_of(snapshot, seed, count=8, step=71.0):
    """One orbit at r = 5 takes 70.25."""
    rng = np.random.default_rng([seed, 9])
    for n in range(count):
        yield scattered(snapshot, 1 + 0.2 * rng.normal(size=(4, 1)), time=n * step)


def test_time_blocks_cover_the_truth_of_an_axisymmetric_series():
    still = cell_fields(fv.demo_disc(shape=(1, 48, 32), side_ratio=0.7))
    truth, covered = judged(still), np.zeros(3, int)
    for seed in range(30):
        result = of_series(series_of(still, seed))
        covered += hits(result, truth)
        assert result.outflow.error_source == "8 blocks of time"
        assert "single snapshot" not in result.sentence
    assert covered.min() >= 26


def test_time_blocks_are_at_least_an_orbit_long():
    still = cell_fields(fv.demo_disc(shape=(1, 48, 32), side_ratio=0.7))
    few = of_series(series_of(still, 1, step=30.0))
    assert few.outflow.interval is None
    assert "fewer than 4 blocks of time of an orbit" in few.outflow.error_source
    merged = of_series(series_of(still, 1, count=12, step=36.0))
    assert merged.outflow.error_source == "6 blocks of time"
    # The inner disc goes round faster.
    inner = of_series(series_of(still, 1, step=30.0), r_range=(1.0, 2.0))
    assert inner.outflow.error_source == "8 blocks of time"


def test_the_larger_error_counts(still):
    rng = np.random.default_rng(2)
    steady = 1 + 0.2 * rng.normal(size=(4, 16))
    same = [scattered(still, steady, time=71.0 * n) for n in range(8)]
    by_azimuth = judged(same[0]).outflow
    outflow = of_series(same).outflow
    assert outflow.angle_error == pytest.approx(by_azimuth.angle_error, rel=1e-9)
    assert outflow.angle == pytest.approx(by_azimuth.angle, abs=1e-9)
    assert "larger one" in outflow.error_source
    shaken = [scattered(s, 1 + 0.5 * rng.normal(size=(4, 1)), time=s.time) for s in same]
    assert of_series(shaken).outflow.angle_error > by_azimuth.angle_error


def test_fluxes_are_averaged_over_time():
    still = cell_fields(fv.demo_disc(shape=(1, 48, 32)))
    base = judged(still)
    pair = [scattered(still, np.full((4, 1), f), time=t) for f, t in ((1.0, 0.0), (3.0, 10.0))]
    result = of_series(pair)
    assert result.outflow.upper == pytest.approx(2 * base.outflow.upper)
    assert result.times == (0.0, 10.0)
    # Weighted by mass flux: (1 + 9)/(1 + 3).
    assert result.bend.upper == pytest.approx(2.5 * base.bend.upper)
    # Unevenly spaced: each stands for the time up to the middles between them.
    third = [*pair, scattered(still, np.full((4, 1), 3.0), time=40.0)]
    assert of_series(third).outflow.upper == pytest.approx(
        base.outflow.upper * (10 * 1 + 20 * 3 + 30 * 3) / 60
    )


def test_one_snapshot_is_in_memory_at_a_time():
    alive = []

    def snapshots():
        for n in range(4):
            gc.collect()
            assert not any(ref() is not None for ref in alive)
            disc = fv.demo_disc(shape=(2, 32, 16), time=float(n))
            alive.append(weakref.ref(disc))
            yield disc
            del disc

    result = wind_symmetry_of_series(snapshots())
    assert len(result.times) == 4
    assert result.field_scores["magnetic_phi"].score == pytest.approx(1, abs=1e-9)


def test_a_series_must_be_one():
    disc = fv.demo_disc(shape=(2, 32, 16))
    with pytest.raises(FieldvizError, match="at least one snapshot"):
        wind_symmetry_of_series([])
    with pytest.raises(FieldvizError, match="times that rise"):
        of_series([replace(disc, time=2.0), disc])
    with pytest.raises(FieldvizError, match="one wedge"):
        of_series([disc, fv.demo_disc(shape=(2, 32, 16), time=1.0, period=1.0)])
    repeated = of_series([disc, disc, replace(disc, time=1.0)])
    assert repeated.times == (0.0, 1.0)
    assert any("1 snapshots of a time" in note for note in repeated.notes)
