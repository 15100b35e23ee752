"""The second scoring about a magnetic midplane that is not at theta = pi/2."""

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.symmetry.displaced import DISPLACED


def displaced(**parameters):
    return fv.wind_symmetry(fv.demo_disc(shape=(2, 96, 48), **parameters), thickness=0.1)


def phi_scores(result):
    return {s.region: s for s in result.displaced.scores if s.name == "magnetic_phi"}


def test_a_shifted_reversal_is_even_about_itself():
    """The demo's B_phi turns round at cos(theta) = 0.12: 1.203 H for H/R = 0.1."""
    result = displaced(midplane_shift=0.12)
    disc = phi_scores(result)["disc"]
    assert disc.about_midplane < 0.6 <= disc.about_displaced
    assert disc.word == result.displaced.word == DISPLACED
    assert result.displaced.displacement == pytest.approx(1.203, abs=0.01)
    assert result.word == "even"
    assert "B_phi is even about a displaced midplane, 1.2 H above theta = pi/2" in result.sentence


def test_the_mirrored_disc_is_displaced_downwards():
    result = displaced(midplane_shift=-0.12)
    assert result.displaced.displacement == pytest.approx(-1.203, abs=0.01)
    assert "1.2 H below" in result.sentence


def test_a_warp_is_followed_along_radius():
    result = displaced(midplane_shift=0.1, midplane_warp=0.1)
    disc = phi_scores(result)["disc"]
    low, high = result.displaced.spread
    assert low < 0.3 < 1.7 < high
    assert disc.about_midplane < 0.6 <= disc.about_displaced


def test_an_exact_shift_scores_one_about_itself():
    """B_phi = a function of theta - th_B that is odd as a plain function: P = 1 about th_B."""
    disc = fv.demo_disc(shape=(1, 140, 16))
    theta = disc.grid.cell_centres(0)[1]
    field = np.broadcast_to(np.tanh((np.pi / 2 - 0.15 - theta) / 0.1)[:, None], (140, 16))
    result = fv.wind_symmetry(disc.with_cells(magnetic_phi=field[None, None].copy()), thickness=0.1)
    assert result.displaced.displacement == pytest.approx(1.5, abs=0.01)
    for score in phi_scores(result).values():
        assert score.about_displaced == pytest.approx(1, abs=1e-3)
    assert phi_scores(result)["disc"].about_midplane < 0


def test_nothing_is_said_of_a_midplane_in_its_place():
    result = displaced()
    assert result.displaced.word == ""
    assert "displaced" not in result.sentence
    assert phi_scores(result)["disc"].word == "even"


def test_no_reversal_no_second_scoring():
    disc = fv.demo_disc(shape=(2, 64, 24))
    result = fv.wind_symmetry(disc.with_cells(magnetic_phi=np.abs(disc.cell("magnetic_phi"))))
    assert result.displaced.word == "no reversal"
    assert result.displaced.scores == ()
    assert np.isnan(result.displaced.displacement)
    assert any("no second scoring" in note for note in result.notes)
