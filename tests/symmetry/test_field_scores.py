"""Scores of fields of known parity, and the symmetries they must keep."""

import numpy as np
import pytest
from scipy.integrate import quad

import fieldviz as fv
from fieldviz.errors import FieldvizError
from fieldviz.symmetry.field_scores import field_scores, field_word
from fieldviz.symmetry.mirror import MIRROR_SIGNS

EDGES = np.array([1.0, 2.0, 5.0])
REACH = 0.7
NAMES = ("velocity_r", "velocity_theta", "magnetic_r", "magnetic_theta", "magnetic_phi")


def scored(snapshot, reach=REACH, **options):
    return field_scores(snapshot, h=0.1, reach=reach, band_edges=EDGES, **options)


def numbers(scores):
    return np.array([(s.score, s.full_score) for s in scores.scores])


def cell_fields(snapshot):
    cells = {name: snapshot.cell(name) for name in snapshot.cell_names}
    return fv.Snapshot.from_grid(snapshot.grid, cells=cells)


def made(function, theta, phi=2, r=12, blocks=None):
    """A snapshot whose fields all are function(theta, phi) as plain functions; density 1."""
    base = fv.demo_disc(shape=(phi, theta, r), blocks=blocks)
    arrays = {name: np.empty_like(base.cell("density")) for name in NAMES}
    for block in range(base.grid.n_blocks):
        _, th, ph = base.grid.cell_centres(block)
        values = function(th[:, None], ph[:, None, None])
        for array in arrays.values():
            array[block] = np.broadcast_to(values, array[block].shape)
    ones = np.ones_like(base.cell("density"))
    arrays |= {"density": ones, "velocity_phi": ones}
    return fv.Snapshot.from_grid(base.grid, cells=arrays)


def integral(function):
    return quad(lambda x: function(x) ** 2 * np.sin(x), np.pi / 2, np.pi / 2 + REACH)[0]


@pytest.mark.parametrize("share", [0.0, 0.3, 1.0, 4.0])
def test_score_of_an_even_and_an_odd_part(share):
    """P = s (E_even - E_odd)/(E_even + E_odd) of plain functions, by quadrature; second order."""
    even, odd = (lambda x: np.cos(3 * (x - np.pi / 2))), (lambda x: share * np.sin(2 * np.cos(x)))
    a, b = integral(even), integral(odd)
    errors = []
    for n in (16, 32):
        disc = made(lambda th, _: even(th) + odd(th) + 0 * th, n)
        found = scored(disc, weight="volume", region="all")
        expected = np.array([MIRROR_SIGNS[name] * (a - b) / (a + b) for name in NAMES])
        difference = np.array([found[n].score for n in NAMES]) - expected
        np.testing.assert_allclose([found[n].full_score for n in NAMES], expected + difference)
        errors.append(np.abs(difference).max())
    assert errors[1] < 2e-3
    assert share == 0 or errors[0] / errors[1] > 3.5


def test_fluctuations_draw_the_full_score_towards_zero_only():
    """E+ and E- of a wave on one side are alike: P_full = E_mean/(E_mean + E_wave/2)."""

    def function(th, ph):
        return 1.0 + np.where(th < np.pi / 2, np.sqrt(2) * np.cos(8 * ph), 0.0)

    found = scored(made(function, 16, phi=16), weight="volume", region="all")
    for name in NAMES:
        assert found[name].score == pytest.approx(MIRROR_SIGNS[name], abs=1e-12)
        assert found[name].full_score == pytest.approx(MIRROR_SIGNS[name] * 2 / 3, abs=1e-12)


@pytest.mark.parametrize("theta", [15, 16])
@pytest.mark.parametrize("region", ["wind", "disc", "all"])
def test_winds_of_exact_parity(theta, region):
    even = scored(fv.demo_disc(shape=(2, theta, 12)), weight="volume", region=region)
    through = scored(
        fv.demo_disc(shape=(2, theta, 12), wind="through-flow"), weight="volume", region=region
    )
    for name in MIRROR_SIGNS:
        if name.startswith("current") or (region == "disc" and name in NAMES[:2]):
            continue
        assert even[name].score == pytest.approx(1, abs=1e-9), name
        turned = name in ("velocity_r", "velocity_theta", "magnetic_phi")
        assert through[name].score == pytest.approx(-1 if turned else 1, abs=1e-9), name


def test_one_dead_side_scores_zero():
    found = scored(fv.demo_disc(shape=(2, 48, 24), wind="one-sided"))
    for name in ("velocity_r", "velocity_theta", "magnetic_phi"):
        assert found[name].score == pytest.approx(0, abs=1e-9)
        assert found[name].word == "mixed"


def test_field_and_wind_may_disagree():
    """B_phi of one sign with a wind on both sides: the trap of scoring one of them alone."""
    disc = cell_fields(fv.demo_disc(shape=(2, 64, 24)))
    found = scored(disc.with_cells(magnetic_phi=np.abs(disc.cell("magnetic_phi"))))
    assert found["magnetic_phi"].score == pytest.approx(-1, abs=1e-9)
    assert found["velocity_theta"].word == "even"
    assert found["velocity_r"].word == "even"


def test_the_current_of_an_even_disc_is_even():
    found = scored(fv.demo_disc(shape=(2, 48, 24)), current=True)
    for axis in ("r", "theta", "phi"):
        assert found[f"current_{axis}"].score == pytest.approx(1, abs=1e-6)


def test_blocks_change_no_number():
    parameters = {"wind": "odd", "magnetic_turbulence": 2.0, "velocity_turbulence": 0.2}
    one = scored(fv.demo_disc(shape=(8, 48, 24), **parameters))
    many = scored(fv.demo_disc(shape=(8, 48, 24), blocks=(2, 4, 2), **parameters))
    np.testing.assert_allclose(numbers(many), numbers(one), atol=1e-10)


def one_side_refined(function, n):
    """Two blocks of n rows, the upper one split in eight; fields are function(theta, phi)."""
    r, phi = np.geomspace(1, 5, 9), np.linspace(0, np.pi / 4, 5)
    lower = np.linspace(np.pi / 2, np.pi / 2 + REACH, n + 1)
    fine = [np.sort(np.append(e, 0.5 * (e[1:] + e[:-1]))) for e in (r, np.pi - lower[::-1], phi)]
    edges = [(r, lower, phi)]
    for part in np.ndindex(2, 2, 2):
        halves = [(len(e) - 1) // 2 for e in fine]
        edges.append(
            [e[p * m : (p + 1) * m + 1] for e, p, m in zip(fine, part, halves, strict=True)]
        )
    blocks = []
    for level, (r_e, theta_e, phi_e) in zip([0] + [1] * 8, edges, strict=True):
        th, ph = (0.5 * (e[1:] + e[:-1]) for e in (theta_e, phi_e))
        shape = (len(ph), len(th), len(r_e) - 1)
        values = np.broadcast_to(function(th[:, None], ph[:, None, None]), shape)
        cells = dict.fromkeys(NAMES, values) | {
            name: np.ones(shape) for name in ("density", "velocity_phi")
        }
        blocks.append(fv.Block(r_e, theta_e, phi_e, cells, level=level))
    return fv.Snapshot.from_blocks(blocks)


def test_sides_at_different_levels_are_compared():
    """Closed form as above; the wave along azimuth is even, and first order at the level jump."""
    even, odd = (lambda x: np.cos(3 * (x - np.pi / 2))), (lambda x: np.sin(2 * np.cos(x)))
    a, b = integral(even), integral(odd)
    expected = np.array([MIRROR_SIGNS[name] * (a - b) / (a + b) for name in NAMES])
    errors = []
    for n in (16, 32):
        disc = one_side_refined(lambda th, ph: even(th) + odd(th) + 0 * ph, n)
        found = scored(disc, weight="volume", region="all")
        errors.append([abs(found[k].score - p) for k, p in zip(NAMES, expected, strict=True)])
        full = [abs(found[k].full_score - p) for k, p in zip(NAMES, expected, strict=True)]
        assert max(full) < 5e-3
    assert np.max(errors[1]) < 1.5e-3
    assert np.max(errors[0]) > 3 * np.max(errors[1])
    wave = scored(
        one_side_refined(lambda th, ph: np.cos(8 * ph) + 0 * th, 16), weight="volume", region="all"
    )
    assert wave["velocity_r"].full_score > 0.9


def test_mirror_reversal_and_rotation_change_nothing():
    disc = cell_fields(
        fv.demo_disc(
            shape=(8, 48, 24), side_ratio=0.4, magnetic_turbulence=2, velocity_turbulence=0.2
        )
    )
    expected = numbers(scored(disc))
    mirrored = disc.with_cells(
        **{n: MIRROR_SIGNS[n] * disc.cell(n)[:, :, ::-1] for n in MIRROR_SIGNS if disc.has(n)}
    )
    rotated = disc.with_cells(**{n: np.roll(disc.cell(n), 3, 1) for n in disc.cell_names})
    reversed_field = disc.with_cells(
        **{n: -disc.cell(n) for n in disc.cell_names if n.startswith("magnetic")}
    )
    for changed in (mirrored, rotated, reversed_field):
        np.testing.assert_allclose(numbers(scored(changed)), expected, atol=1e-11)


def test_one_cell_of_azimuth_is_its_own_mean():
    found = numbers(scored(fv.demo_disc(shape=(1, 48, 24), wind="odd")))
    np.testing.assert_allclose(found[:, 0], found[:, 1], atol=1e-10)


@pytest.mark.parametrize("ratio", [1, 0.5, -1])
def test_a_grid_that_is_not_symmetric_is_interpolated(ratio):
    """Against the symmetric grid of the shorter reach."""
    whole = fv.demo_disc(shape=(2, 128, 24), theta_reach=(0.62, 0.62), side_ratio=ratio)
    uneven = fv.demo_disc(shape=(2, 128, 24), theta_reach=(0.7, 0.62), side_ratio=ratio)
    a, b = scored(whole, reach=0.62), scored(uneven, reach=0.62)
    for name in (*NAMES, "density"):
        assert b[name].score == pytest.approx(a[name].score, abs=6e-3), name
        assert b[name].full_score == pytest.approx(b[name].score, abs=1e-8), name


def test_holes_are_left_out_and_counted():
    disc = cell_fields(fv.demo_disc(shape=(4, 48, 24)))
    speed = disc.cell("velocity_theta").copy()
    speed[0, 1, 5:8, 4] = np.nan
    found = scored(disc.with_cells(velocity_theta=speed))
    assert found["velocity_theta"].score == pytest.approx(1, abs=1e-6)
    assert any(note.startswith("3 cells") for note in found.notes)


def test_what_is_not_there_has_no_score():
    disc = cell_fields(fv.demo_disc(shape=(8, 32, 12), velocity_turbulence=0.1))
    names = ("density", "velocity_r", "velocity_theta", "velocity_phi")
    bare = fv.Snapshot.from_grid(disc.grid, cells={n: disc.cell(n) for n in names})
    found = scored(bare, weight="volume", region="disc")
    assert [s.name for s in found.scores] == sorted(names, key=list(MIRROR_SIGNS).index)
    # Within the disc only fluctuations move: their mean is rounding, which has no parity.
    assert found["velocity_r"].word == "none"
    assert np.isfinite(found["velocity_r"].full_score)
    with pytest.raises(KeyError, match="magnetic_phi"):
        found["magnetic_phi"]
    with pytest.raises(FieldvizError, match="a weight of"):
        scored(disc, weight="mass")
    assert [field_word(p) for p in (0.6, 0.59, -0.59, -0.6, np.nan)] == [
        "even", "mixed", "mixed", "odd", "none",
    ]  # fmt: skip
