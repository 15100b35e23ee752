"""What must not change lines: blocks, order, direction, rotation, mirror, field reversal."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from line_fields import (
    BOTH,
    NAMES,
    PERIOD,
    assert_same_lines,
    cut,
    formula_snapshot,
    random_seeds,
    winding_disc,
    with_faces,
)

import fieldviz as fv
from fieldviz.lines import half, tracing

LINEAR_OR_FLUX = st.sampled_from(["linear", "flux"])


def trace(snapshot, seeds, interpolation, **options):
    return fv.trace_lines(snapshot, "magnetic", seeds, interpolation=interpolation, **options)


@pytest.fixture(scope="module")
def disc():
    return winding_disc()


# ---- blocks -------------------------------------------------------------------------------------


@given(
    st.sampled_from([1, 2, 3, 4, 6, 12]),
    st.sampled_from([1, 2, 3, 4, 6, 8, 12]),
    st.sampled_from([1, 2, 3, 4, 6, 8, 12]),
    LINEAR_OR_FLUX,
    st.integers(0, 99),
)
@settings(max_examples=15)
def test_cutting_into_blocks_changes_no_bit(n_phi, n_theta, n_r, interpolation, seed):
    """Down to blocks of 1 x 2 x 2 cells; lines wind many times round the wedge."""
    whole = winding_disc(seed=seed % 3)
    seeds = random_seeds(whole, 8, seed)
    lines = [
        trace(snapshot, seeds, interpolation, longest=15.0)
        for snapshot in (whole, cut(whole, (n_phi, n_theta, n_r)))
    ]
    assert_same_lines(*lines)
    assert np.abs(lines[0].twist).max() > 2 * PERIOD


@BOTH
def test_refined_region_keeps_second_order(interpolation):
    """Lines from the wind cross the midplane, two levels on, at the disc's closed form."""
    truth = fv.SaltmarshDisc(thickness=0.25)  # broad sheets: resolved by coarse cells too
    seeds = np.array([[r, t, 0.3] for t in (1.0, 1.15, 2.0, 2.15) for r in np.linspace(2, 4, 9)])
    wanted = truth.footpoint(seeds[:, 0], seeds[:, 1])
    inside = (wanted > 1.05) & (wanted < 4.9)
    seeds, wanted = seeds[inside], wanted[inside]
    found = []
    for n in (64, 128, 256):
        disc = fv.demo_disc(shape=(2, n, n), levels=2, blocks=(1, 4, 4), thickness=0.25)
        line, crossing = trace(disc, seeds, interpolation).midplane_crossings()
        np.testing.assert_array_equal(line, np.arange(len(seeds)))
        found.append(np.sqrt(np.mean((crossing[:, 0] - wanted) ** 2)))
    assert np.log2(found[0] / found[-1]) / 2 > 1.8
    assert found[-1] < 2e-3


# ---- seeds and direction ------------------------------------------------------------------------


@BOTH
@given(order=st.permutations(range(9)), keep=st.integers(1, 9))
@settings(max_examples=10)
def test_order_and_number_of_seeds_do_not_matter(interpolation, order, keep):
    disc = winding_disc()
    seeds = random_seeds(disc, 9)
    seeds[4, 0] = 99.0  # outside
    every = trace(disc, seeds, interpolation)
    some = trace(disc, seeds[order[:keep]], interpolation)
    for number, original in enumerate(order[:keep]):
        np.testing.assert_array_equal(some.line(number), every.line(original))
        np.testing.assert_array_equal(some.end_code[number], every.end_code[original])
        assert some.length[number] == every.length[original]


@BOTH
def test_the_buffer_does_not_show(disc, interpolation, monkeypatch):
    """Lines longer than a buffer of points are gone on with where they stopped."""
    seeds = random_seeds(disc, 5, 3)
    plain = trace(disc, seeds, interpolation)
    monkeypatch.setattr(half, "_BUFFER_POINTS", 1)
    monkeypatch.setattr(tracing, "_LINES_AT_ONCE", 2)
    small = trace(disc, seeds, interpolation)
    assert np.diff(plain.offsets).max() > 600
    assert_same_lines(plain, small)


@BOTH
def test_directions_are_parts_of_both(disc, interpolation):
    seeds = random_seeds(disc, 12, 5)
    both, ahead, behind = (
        trace(disc, seeds, interpolation, direction=d) for d in ("both", "forward", "backward")
    )
    for number in range(12):
        line, at = both.line(number), both.seed_index[number]
        np.testing.assert_array_equal(line[at], seeds[number])
        np.testing.assert_array_equal(line[at:], ahead.line(number))
        np.testing.assert_array_equal(line[: at + 1], behind.line(number))
    np.testing.assert_array_equal(both.length, ahead.length + behind.length)
    assert [e[1] for e in both.end_reason] == [e[1] for e in ahead.end_reason]
    assert {e[0] for e in ahead.end_reason} == {e[1] for e in behind.end_reason} == {"not traced"}


@given(seed=st.integers(0, 9999), interpolation=LINEAR_OR_FLUX)
@settings(max_examples=15)
def test_reversed_field_swaps_the_ends_and_nothing_else(seed, interpolation):
    disc = winding_disc(seed % 3)
    turned = with_faces(disc, lambda name, values: -values)
    seeds = random_seeds(disc, 6, seed)
    a, b = (trace(s, seeds, interpolation, longest=20.0) for s in (disc, turned))
    np.testing.assert_array_equal(a.end_code, b.end_code[:, ::-1])
    np.testing.assert_array_equal(a.length, b.length)
    np.testing.assert_array_equal(a.twist, -b.twist)
    for number in range(6):
        np.testing.assert_array_equal(a.line(number), b.line(number)[::-1])


@given(power=st.integers(-80, 80), interpolation=LINEAR_OR_FLUX)
@settings(max_examples=10)
def test_strength_does_not_matter(power, interpolation):
    """Powers of two change no digit of the components."""
    disc = winding_disc()
    scaled = with_faces(disc, lambda name, values: values * 2.0**power)
    seeds = random_seeds(disc, 3)
    a, b = (trace(s, seeds, interpolation, longest=5.0) for s in (disc, scaled))
    np.testing.assert_array_equal(a.end_code, b.end_code)
    np.testing.assert_allclose(a.spherical, b.spherical, rtol=0, atol=1e-9)


@BOTH
def test_there_and_back(disc, interpolation):
    """Back at the seed after the same length, within 1e-3 of a cell."""
    seeds = random_seeds(disc, 60, 7)
    there = trace(disc, seeds, interpolation, direction="forward", longest=0.7)
    inside = np.array([end == "length" for _, end in there.end_reason])
    assert inside.sum() > 20
    ends = there.spherical[there.offsets[1:] - 1]
    back = trace(disc, ends, interpolation, direction="backward", longest=0.7)
    gap = (back.spherical[back.offsets[:-1]] - seeds)[inside]
    gap[:, 2] -= PERIOD * np.round(gap[:, 2] / PERIOD)
    cell = np.array([4 / 24, 1.4 / 24, PERIOD / 12])
    assert (np.abs(gap) / cell).max() < 1e-3


# ---- symmetries ---------------------------------------------------------------------------------


@BOTH
@pytest.mark.parametrize("cells", [1, 5, 12])
def test_rotation_by_whole_cells(disc, interpolation, cells):
    def roll(name, values):
        if name != "magnetic_phi":
            return np.roll(values, cells, axis=1)
        rolled = np.roll(values[:, :-1], cells, axis=1)
        return np.concatenate([rolled, rolled[:, :1]], axis=1)

    turn = np.array([0, 0, cells * PERIOD / 12])
    seeds = random_seeds(disc, 10, 2)
    options = {"longest": 5.0, "tolerance": 1e-10}  # rounding decides about steps near kinks
    a = trace(disc, seeds, interpolation, **options)
    b = trace(with_faces(disc, roll), seeds + turn, interpolation, **options)
    assert a.end_reason == b.end_reason
    np.testing.assert_allclose(a.length, b.length, rtol=1e-7)
    ends = [lines.spherical[lines.offsets[1:] - 1] for lines in (a, b)]
    np.testing.assert_allclose(ends[0] + turn, ends[1], rtol=0, atol=1e-6)


@BOTH
def test_mirror(disc, interpolation):
    """theta to pi - theta with v_theta to -v_theta: the lines of the mirrored field."""

    def flip(name, values):
        return values[:, :, ::-1] * (-1.0 if name == "magnetic_theta" else 1.0)

    seeds = random_seeds(disc, 10, 4)
    mirrored = np.column_stack([seeds[:, 0], np.pi - seeds[:, 1], seeds[:, 2]])
    options = {"longest": 5.0, "tolerance": 1e-10}
    a = trace(disc, seeds, interpolation, **options)
    b = trace(with_faces(disc, flip), mirrored, interpolation, **options)
    swap = {"upper wall": "lower wall", "lower wall": "upper wall"}
    assert a.end_reason == [tuple(swap.get(w, w) for w in ends) for ends in b.end_reason]
    np.testing.assert_allclose(a.length, b.length, rtol=1e-7)
    ends = [lines.spherical[lines.offsets[1:] - 1] for lines in (a, b)]
    ends[1][:, 1] = np.pi - ends[1][:, 1]
    np.testing.assert_allclose(ends[0], ends[1], rtol=0, atol=1e-6)


# ---- accuracy asked for -------------------------------------------------------------------------


def test_smaller_tolerance_is_nearer():
    """Ends come nearer to the limit; the longest steps at a loose one move none by 2e-2 of a cell.

    Interpolation has kinks between cells, which an estimate may miss: that, not the tolerance,
    is what is left at the default.
    """
    snapshot = formula_snapshot(
        lambda r, t, p: np.cos(3 * t) / r + 0 * p,
        lambda r, t, p: 0.5 * np.sin(2 * r) + 0 * t + 0 * p,
        lambda r, t, p: 1 + 0.5 * np.cos(2 * np.pi * p / 0.8) + 0 * r + 0 * t,
    )
    seeds = np.column_stack([np.linspace(1.5, 3.5, 20), np.full(20, 1.5), np.linspace(0, 2, 20)])

    def ends(**options):
        lines = trace(snapshot, seeds, "linear", longest=3.0, most_steps=1_000_000, **options)
        r, theta, phi = lines.spherical[lines.offsets[1:] - 1].T
        return np.column_stack([np.log(r) / np.log(4) * 16, theta / 1.3 * 16, phi / 0.8 * 8])

    best = ends(tolerance=1e-12)
    loose, default, tight, tighter = (
        np.abs(ends(most_cells=0.5, tolerance=t) - best).max() for t in (1e-3, 1e-6, 1e-9, 1e-11)
    )
    assert default > 10 * tight > 30 * tighter > 0
    assert default < 5e-4
    assert loose < 2e-2
    assert np.abs(ends(tolerance=1e-6) - ends(tolerance=5e-7)).max() < 2e-3


@BOTH
def test_single_precision(interpolation):
    """Rounding of the field to 2^-24 moves ends by about that times the lines' length."""
    disc = winding_disc(turbulence=0.0, toroidal=0.0)
    single = with_faces(disc, lambda name, values: values.astype(np.float32))
    seeds = random_seeds(disc, 10, 1)
    a, b = (trace(s, seeds, interpolation, tolerance=1e-9) for s in (disc, single))
    assert b.spherical.dtype == np.float64
    assert a.end_reason == b.end_reason
    np.testing.assert_allclose(a.footpoints.position, b.footpoints.position, atol=1e-4)
    assert single.faces[NAMES[0]].dtype == np.float32
