"""Current sheets and the magnetic midplane against closed forms: a tanh layer and the demo disc."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import fieldviz as fv
from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.sheets.columns import full_width, highest, nearest_zero
from fieldviz.sheets.current_sheets import current_sheets
from fieldviz.sheets.magnetic_midplane import magnetic_midplane

H = 0.1
NAMES = ("magnetic_r", "magnetic_theta", "magnetic_phi")
LAYER_HEIGHT, LAYER_WIDTH = 0.05, 0.05  # of the tanh layer, radians
# sech^2 is a half at arcosh(sqrt 2).
LAYER_FWHM = 2 * np.arccosh(np.sqrt(2)) * LAYER_WIDTH / H


def disc(**parameters):
    return fv.demo_disc(**{"shape": (2, 96, 64), **parameters})


def layer(n_theta, strength=None, n_phi=2, **constants):
    """B_phi = tanh(x)/(r sin theta), x across the layer: J_r = -sech^2(x)/(w r^2 sin theta)."""
    r, theta = np.geomspace(1, 3, 49), np.pi / 2 + np.linspace(-0.6, 0.6, n_theta + 1)
    phi = np.linspace(0, 0.4, n_phi + 1)
    t, x = (0.5 * (e[1:] + e[:-1]) for e in (theta, r))
    shape = (n_phi, n_theta, 48)
    across = np.tanh((np.pi / 2 - t - LAYER_HEIGHT) / LAYER_WIDTH)[:, None]
    amplitude = np.ones_like(x) if strength is None else strength(x)
    cells = {name: np.zeros(shape) for name in NAMES}
    cells["magnetic_phi"] = np.broadcast_to(across * amplitude / (x * np.sin(t)[:, None]), shape)
    return fv.Snapshot.from_arrays(r, theta, phi, cells=cells, **constants)


@pytest.mark.parametrize(
    "parameters",
    [
        {},
        {"levels": 2, "shape": (2, 48, 32)},
        {"reversed_field": True},
        {"precision": "single"},
        {"shape": (1, 96, 64)},
        {"blocks": (1, 4, 2)},
    ],
)
def test_a_shifted_reversal_is_found_at_its_height(parameters):
    """B_phi of the demo disc reverses at cos(theta) = 0.12: 1.203 H above for H/R = 0.1."""
    found = magnetic_midplane(disc(midplane_shift=0.12, **parameters))
    assert found.word == "reversal"
    assert found.share == 1
    assert found.thickness.h == pytest.approx(H, rel=1e-3)
    assert found.median == pytest.approx(np.arcsin(0.12) / H, abs=0.005)
    assert found.median == pytest.approx(1.203, abs=0.005)
    assert found.spread == pytest.approx((found.median, found.median), abs=0.01)
    assert found.ridge_median == pytest.approx(1.2, abs=0.05)


def test_a_reversal_below_the_midplane_is_negative():
    found = magnetic_midplane(disc(midplane_shift=-0.05))
    assert found.median == pytest.approx(-np.arcsin(0.05) / H, abs=0.005)


def test_a_warped_reversal_is_followed_in_radius():
    warp = 0.06
    found = magnetic_midplane(disc(shape=(2, 128, 128), midplane_warp=warp))
    truth = np.arcsin(warp * np.sin(2 * np.pi * np.log(found.r) / np.log(5))) / H
    # Smoothing over 1 H leans to where B_phi is stronger (0.04 H here); at the walls it is
    # one-sided.
    inner = slice(8, -8)
    np.testing.assert_allclose(found.height[:, inner], np.tile(truth[inner], (2, 1)), atol=0.05)
    low, high = np.percentile(truth, [16, 84])
    assert found.spread == pytest.approx((low, high), abs=0.03)


@pytest.mark.parametrize("wind", ["odd", "one-sided", "through-flow"])
def test_a_field_of_one_sign_has_no_reversal(wind):
    found = magnetic_midplane(disc(wind=wind))
    assert found.word == "no reversal"
    assert found.share == 0
    assert np.isnan(found.median)
    assert np.isnan(found.spread).all()
    assert np.isnan(found.height).all()
    assert any("changes sign in 0 % of the columns" in note for note in found.notes)


def test_half_of_the_columns_decide():
    """B_phi is made of one sign outside a radius: the share is that of ln r within it."""
    for inside, word in ((0.45, "no reversal"), (0.55, "reversal")):
        snapshot = layer(60)
        r = snapshot.grid.cell_centres(0)[0]
        field = snapshot.cell("magnetic_phi").copy()
        field[..., r > 3**inside] = np.abs(field[..., r > 3**inside])
        found = magnetic_midplane(snapshot.with_cells(magnetic_phi=field), thickness=0.02)
        assert found.share == pytest.approx(inside, abs=0.03)
        assert found.word == word


def test_mirrored_data_mirror_the_heights():
    snapshot = disc(midplane_shift=0.07, magnetic_turbulence=0.3)
    fields = {name: snapshot.cell(name) for name in ("density", "pressure", *NAMES)}
    turned = {name: values[:, :, ::-1] for name, values in fields.items()}
    there = magnetic_midplane(fv.Snapshot.from_grid(snapshot.grid, cells=turned))
    here = magnetic_midplane(fv.Snapshot.from_grid(snapshot.grid, cells=fields))
    np.testing.assert_allclose(there.height, -here.height, rtol=1e-9, atol=1e-12)
    assert there.median == pytest.approx(-here.median, rel=1e-9)


def test_turning_by_whole_cells_turns_the_maps():
    snapshot = disc(shape=(4, 64, 48), midplane_shift=0.05, magnetic_turbulence=0.5)
    fields = {name: snapshot.cell(name) for name in ("density", "pressure", *NAMES)}
    turned = {name: np.roll(values, 1, axis=1) for name, values in fields.items()}
    here, there = (fv.Snapshot.from_grid(snapshot.grid, cells=c) for c in (fields, turned))
    a, b = magnetic_midplane(here), magnetic_midplane(there)
    np.testing.assert_allclose(b.height, np.roll(a.height, 1, axis=0), rtol=1e-12)
    assert b.median == pytest.approx(a.median, rel=1e-13)
    a, b = current_sheets(here), current_sheets(there)
    np.testing.assert_array_equal(b.in_sheet, np.roll(a.in_sheet, 1, axis=0))
    np.testing.assert_allclose(b.ridge.height, np.roll(a.ridge.height, 1, axis=0), rtol=1e-9)
    assert b.share_of_current == pytest.approx(a.share_of_current, rel=1e-12)


def test_ridge_and_width_of_a_tanh_layer():
    """J_r is sech^2 across it: ridge at its middle, and 2 arcosh(sqrt 2) of its width across."""
    errors = []
    for n in (96, 192):
        found = current_sheets(layer(n), thickness=H)
        ridge = found.ridge
        assert ridge.median == pytest.approx(LAYER_HEIGHT / H, abs=5e-3)
        errors.append(abs(ridge.width_median - LAYER_FWHM))
        assert ridge.cells_per_width == pytest.approx(LAYER_FWHM * H / (1.2 / n), rel=0.05)
        assert ridge.word == "width resolved"
    assert errors[1] < 0.012
    assert errors[0] > 2.5 * errors[1]
    for component in ("r", "magnitude"):
        found = current_sheets(layer(48), component=component, thickness=H).ridge
        assert found.word == "width not resolved"
        assert found.component == component
        # The first and last column have no number.
        assert np.isfinite(found.height[:, 1:-1]).all()
        assert np.isnan(found.height[:, [0, -1]]).all()


def test_chi_is_the_change_of_the_field_across_a_cell():
    """The same layer is a current sheet on coarse cells, and none on fine ones."""
    coarse, fine = (current_sheets(layer(n), thickness=H) for n in (24, 192))
    assert coarse.ridge.in_sheet[:, 1:-1].all()
    assert not fine.in_sheet.any()
    assert fine.share_of_volume == fine.share_of_current == 0
    assert 0 < coarse.share_of_volume < coarse.share_of_current < coarse.share_of_square <= 1
    # On the ridge |J| = 1/(w r^2) and dx = r dtheta; |B| is the rms of tanh over 1 H, over r.
    x = np.linspace(-5, 5, 20001) * H
    gauss = np.exp(-4 * np.log(2) * (x / H) ** 2)
    rms = np.sqrt(np.sum(gauss * np.tanh(x / LAYER_WIDTH) ** 2) / gauss.sum())
    expected = 1.2 / 192 / LAYER_WIDTH / rms
    assert np.median(fine.chi[:, 1:-1].max(axis=1)[:, 1:-1]) == pytest.approx(expected, rel=0.03)


def test_current_that_stands_out_in_radius_is_a_sheet():
    def strength(r):
        return 1 + 9 * np.exp(-(((np.log(r) - 0.5) / 0.05) ** 2))

    found = current_sheets(layer(192, strength), thickness=H)
    r = found.r
    at_layer = found.contrast[:, np.argmin(np.abs(np.pi / 2 - found.theta - LAYER_HEIGHT))]
    peak = np.argmin(np.abs(np.log(r) - 0.5))
    along = strength(r) / r**2
    near = np.abs(np.log(r) - np.log(r[peak])) <= 3 * H
    expected = along[peak] / np.median(along[near])
    assert expected > 6
    assert at_layer[0, peak] == pytest.approx(expected, rel=0.03)
    assert found.in_sheet[..., peak].any()
    assert not found.in_sheet[..., np.abs(np.log(r) - 0.5) > 0.2].any()


@pytest.mark.parametrize("factor", [-1.0, 3.0])
def test_sheets_know_neither_sign_nor_unit_of_the_field(factor):
    snapshot = disc(shape=(2, 48, 48), magnetic_turbulence=0.5)
    here = current_sheets(snapshot)
    faces = {name: factor * snapshot.faces[name] for name in NAMES}
    cells = {name: snapshot.cells[name] for name in ("density", "pressure")}
    other = current_sheets(
        fv.Snapshot.from_grid(snapshot.grid, cells=cells, faces=faces, mu0=4 * np.pi)
    )
    np.testing.assert_allclose(other.chi, here.chi, rtol=1e-9)
    np.testing.assert_allclose(other.contrast, here.contrast, rtol=1e-9)
    np.testing.assert_allclose(other.ridge.height, here.ridge.height, rtol=1e-6)
    assert 0 < here.share_of_volume < 1


def test_levels_and_one_azimuth_cell():
    two = current_sheets(disc(shape=(2, 48, 32), levels=2, midplane_shift=0.12))
    one = current_sheets(disc(shape=(1, 96, 64), midplane_shift=0.12))
    # 48 rows of fine cells about the midplane, 12 of coarse ones on each side.
    assert two.chi.shape == (4, 72, 64)
    assert one.chi.shape == (1, 96, 64)
    assert two.ridge.median == pytest.approx(one.ridge.median, abs=0.1)
    np.testing.assert_allclose(two.theta[28:44], one.theta[40:56], rtol=1e-12)
    # Far from the level jump the same cells have the same chi.
    near, alone = two.chi[:, 28:44, 1:-1], one.chi[:, 40:56, 1:-1]
    np.testing.assert_allclose(near, np.repeat(alone, 4, axis=0), rtol=1e-9)


def test_holes_are_counted_and_left_out():
    snapshot = layer(96)
    field = snapshot.cell("magnetic_phi").copy()
    field[0, 0, 40:56, 20] = np.nan
    holed = snapshot.with_cells(magnetic_phi=field)
    midplane = magnetic_midplane(holed, thickness=H)
    assert midplane.median == pytest.approx(LAYER_HEIGHT / H, abs=1e-3)
    assert any("B_phi is no number in 16 of 9216 places" in note for note in midplane.notes)
    sheets = current_sheets(holed, thickness=H)
    assert any("|J| is no number in" in note for note in sheets.notes)
    assert np.isfinite(sheets.ridge.height[1, 1:-1]).all()
    assert np.isfinite(sheets.share_of_current)


@given(st.lists(st.floats(-1, 1), min_size=3, max_size=9))
@settings(max_examples=40)
def test_zeros_of_mirrored_columns_mirror(column):
    values = np.array(column)[None, :, None]
    heights = np.linspace(2.0, -1.3, len(column))
    here = nearest_zero(values, heights)[0, 0]
    there = nearest_zero(-values[:, ::-1], -heights[::-1])[0, 0]
    signs = np.sign([v for v in column if v != 0])
    assert np.isnan(here) == (np.unique(signs).size < 2)
    assert abs(here) == pytest.approx(abs(there), nan_ok=True)


def test_zeros_between_two_signs():
    heights = np.array([3.0, 2.0, 1.0, 0.0, -1.0, -2.0])
    columns = np.array(
        [
            [3, 1, -1, -1, -1, -1],  # linear: half way from 2 to 1
            [1, 1, 0, 0, -1, -1],  # two rows of zeros: their middle
            [1, 1, 0, 0, 0, 0],  # no change of sign
            [1, -1, -1, -3, 1, 1],  # two changes: the one nearer to the midplane
            [1, np.nan, -1, -1, -1, -1],  # not beside a hole
        ]
    ).T[None]
    found = nearest_zero(columns, heights)[0]
    np.testing.assert_allclose(found, [1.5, 0.5, np.nan, -0.75, np.nan])


def test_highest_and_width_of_single_columns():
    heights = np.array([2.0, 1.0, 0.0, -1.0, -2.0, -3.0])
    parabola = 4 - (heights - 0.25) ** 2
    columns = np.array([parabola, np.arange(6.0), np.ones(6), [0, 4, np.nan, 1, 3, 1]]).T[None]
    rows, found = highest(columns, heights)
    np.testing.assert_allclose(found, [[0.25, np.nan, np.nan, np.nan]])
    np.testing.assert_array_equal(rows, [[2, -1, -1, -1]])
    triangle = np.array([[0, 2, 4, 2, 0, 0], [3, 3, 4, 2, 0, 0]], float).T[None]
    width = full_width(triangle, heights, np.array([[2, 2]]))
    np.testing.assert_allclose(width, [[2.0, np.nan]])


def test_what_is_not_there_is_named(small_disc):
    whole = small_disc()
    only = fv.Snapshot.from_grid(whole.grid, cells={"magnetic_phi": whole.cell("magnetic_phi")})
    found = magnetic_midplane(only, thickness=H)
    assert found.ridge is None
    assert np.isnan(found.ridge_median)
    assert any("lacks a component" in note for note in found.notes)
    with pytest.raises(MissingFieldError, match=r"Cannot find current sheets: .*magnetic_r"):
        current_sheets(only)
    with pytest.raises(MissingFieldError, match="density"):
        magnetic_midplane(only)
    with pytest.raises(MissingFieldError, match="Cannot find the magnetic midplane"):
        magnetic_midplane(fv.Snapshot.from_grid(whole.grid), thickness=H)


def test_what_cannot_be_is_refused(small_disc):
    with pytest.raises(FieldvizError, match=r"component to be one of .* got 'z'; name"):
        current_sheets(small_disc(), component="z")
    with pytest.raises(FieldvizError, match="thickness H/R of 0 to 1, got 2"):
        magnetic_midplane(small_disc(), thickness=2)
    above = fv.Snapshot.from_arrays(
        np.geomspace(1, 2, 5),
        np.linspace(0.8, 1.3, 7),
        np.linspace(0, 0.3, 3),
        cells={"magnetic_phi": np.ones((2, 6, 4))},
    )
    with pytest.raises(FieldvizError, match="both sides of the midplane"):
        magnetic_midplane(above, thickness=H)
