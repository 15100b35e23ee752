"""Poloidal lines against the closed form of the demo disc's flux function."""

from __future__ import annotations

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.scenes.field_lines import (
    equal_flux_levels,
    in_plane,
    poloidal_lines,
    tubes,
)


@pytest.mark.parametrize("options", [{}, {"wind": "odd"}, {"levels": 2, "shape": (4, 64, 80)}])
def test_lines_keep_their_flux(options):
    options = {"shape": (4, 64, 160)} | options
    snapshot = fv.demo_disc(**options)
    disc = fv.SaltmarshDisc(wind=options.get("wind", "even"))
    lines = poloidal_lines(snapshot, None, 12)
    assert len(lines) >= 12
    whole = np.ptp(disc.flux_function(*np.meshgrid(np.linspace(1, 5, 60), [0.88, 1.57, 2.26])))
    drift = [np.ptp(disc.flux_function(*line.T)) / whole for line in lines]
    # The step between neighbours is 1/12 of the whole.
    assert max(drift) < 0.06
    assert np.median(drift) < 0.012


def test_levels_have_equal_steps_and_stay_inside():
    levels = equal_flux_levels(np.array([[-1.0, 3.0]]), 4)
    np.testing.assert_allclose(levels, [-0.5, 0.5, 1.5, 2.5])


def test_tubes_stand_in_their_plane():
    line = np.column_stack([np.linspace(1, 2, 9), np.full(9, 1.2)])
    mesh = tubes(in_plane([line], 0.7), 0.01)
    x, y, _ = np.asarray(mesh.points).T
    across = -x * np.sin(0.7) + y * np.cos(0.7)
    assert 0.004 < np.abs(across).max() <= 0.0101
    assert tubes([], 0.01).n_points == 0
