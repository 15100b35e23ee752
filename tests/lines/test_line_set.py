"""What a set of lines says about itself: ends, twist, crossings, fields along lines."""

from __future__ import annotations

import numpy as np
import pytest
from line_fields import BOTH, random_seeds, winding_disc

import fieldviz as fv
from fieldviz.errors import MissingFieldError
from fieldviz.lines import reasons
from fieldviz.lines.line_set import LineSet

MIDPLANE = 0.5 * np.pi


def line_set(*lines, period=0.5, first_phi=-0.1):
    """Lines from lists of (r, theta, phi)."""
    counts = [len(line) for line in lines]
    points = [point for line in lines for point in line]
    n = len(lines)
    return LineSet(
        spherical=np.array(points, dtype=float).reshape(-1, 3),
        offsets=np.concatenate([[0], np.cumsum(counts)]).astype(np.int64),
        seed_index=np.where(np.array(counts) > 0, 0, -1),
        end_code=np.zeros((n, 2), dtype=np.int64),
        length=np.zeros(n),
        name="magnetic",
        period=period,
        first_phi=first_phi,
    )


def test_footpoints_and_wraps():
    """phi = first + wraps period + rest, by hand."""
    lines = line_set([[1, 1, 0.0], [2, 1.2, 1.7]], [], [[3, 2, -0.75]])
    ends = lines.footpoints
    np.testing.assert_array_equal(ends.wraps, [[0, 3], [0, 0], [-2, -2]])
    np.testing.assert_allclose(
        ends.position,
        [[[1, 1, 0.0], [2, 1.2, 0.2]], [[np.nan] * 3] * 2, [[3, 2, 0.25]] * 2],
        atol=1e-15,
    )
    np.testing.assert_allclose(lines.twist, [1.7, np.nan, 0.0])
    assert len(lines) == 3
    assert lines.line(1).shape == (0, 3)


def test_midplane_crossings_by_hand():
    """z linear in theta between points: at the share of the way where theta is pi/2."""
    up, down = MIDPLANE - 0.1, MIDPLANE + 0.3
    lines = line_set(
        [[2.0, up, 0.0], [2.4, down, 0.4], [3.0, up, 0.8]],
        [[2.0, up, 0.0], [2.0, up, 0.1]],
        [],
        [[1.0, down, 0.0], [5.0, up, 1.0]],
    )
    line, crossing = lines.midplane_crossings()
    np.testing.assert_array_equal(line, [0, 0, 3])
    R = lines.spherical[:, 0] * np.sin(lines.spherical[:, 1])
    wanted = [0.75 * R[0] + 0.25 * R[1], 0.25 * R[1] + 0.75 * R[2], 0.25 * R[5] + 0.75 * R[6]]
    np.testing.assert_allclose(crossing[:, 0], wanted, rtol=1e-13)
    np.testing.assert_allclose(crossing[:, 1], [0.1, 0.7, 0.75], rtol=1e-13)


@pytest.mark.parametrize("sign", [-1, 1])
def test_lines_that_only_touch_the_midplane(sign):
    """Begin, end, turn or run on it: once each, above as below."""
    off = MIDPLANE + sign * 0.2
    lines = line_set(
        [[2.0, MIDPLANE, 0.1], [2.2, off, 0.2]],
        [[2.2, off, 0.2], [2.0, MIDPLANE, 0.3]],
        [[2.2, off, 0.2], [2.0, MIDPLANE, 0.4], [2.2, off, 0.2]],
        [[2.2, off, 0.2], [2.0, MIDPLANE, 0.5], [2.5, MIDPLANE, 0.6], [2.2, off, 0.2]],
        [[2.0, MIDPLANE, 0.7]],
        [[2.2, off, 0.2], [2.0, MIDPLANE, 0.8], [2.2, MIDPLANE - sign * 0.2, 0.2]],
    )
    line, crossing = lines.midplane_crossings()
    np.testing.assert_array_equal(line, range(6))
    np.testing.assert_allclose(crossing[:, 0], 2.0)
    np.testing.assert_array_equal(crossing[:, 1], [0.1, 0.3, 0.4, 0.5, 0.7, 0.8])


@BOTH
def test_midplane_seeds_count_once(interpolation):
    """Forward from the midplane: one crossing each at the seed, for either sense of the field."""
    for reverse in (False, True):
        disc = fv.demo_disc(shape=(4, 32, 32), reversed_field=reverse)
        seeds = np.column_stack([np.linspace(1.2, 4, 7), np.full(7, MIDPLANE), np.full(7, 0.1)])
        for direction in ("forward", "backward", "both"):
            lines = fv.trace_lines(
                disc, "magnetic", seeds, direction=direction, interpolation=interpolation
            )
            line, crossing = lines.midplane_crossings()
            np.testing.assert_array_equal(line, range(7))
            np.testing.assert_allclose(crossing[:, 0], seeds[:, 0], rtol=1e-14)


@BOTH
def test_length_is_that_of_the_points(interpolation):
    disc = winding_disc(turbulence=0.5)
    lines = fv.trace_lines(
        disc, "magnetic", random_seeds(disc, 10), interpolation=interpolation, most_cells=0.05,
        longest=3.0,
    )  # fmt: skip
    steps = np.linalg.norm(np.diff(lines.points, axis=0), axis=1)
    for number, (a, b) in enumerate(zip(lines.offsets[:-1], lines.offsets[1:], strict=True)):
        assert steps[a : b - 1].sum() == pytest.approx(lines.length[number], rel=5e-4)


@BOTH
def test_fields_along_lines_are_those_of_sample(interpolation):
    disc = winding_disc()
    density = fv.demo_disc(shape=(12, 24, 24), period=0.75).cells["density"]
    disc = disc.with_cells(density=density)
    names = ("density", "magnetic_phi")
    seeds = random_seeds(disc, 6)
    lines = fv.trace_lines(
        disc, "magnetic", seeds, interpolation=interpolation, sample=names, longest=4.0
    )
    wanted, inside = fv.sample(disc, lines.spherical, names)
    assert inside.all()
    for name in names:
        np.testing.assert_array_equal(lines.value(name), wanted[name])
        assert np.isfinite(wanted[name]).all()
    bare = fv.trace_lines(disc, "magnetic", seeds, interpolation=interpolation, longest=4.0)
    assert bare.fields == {}
    with pytest.raises(MissingFieldError, match="got lines with none"):
        bare.value("density")
    with pytest.raises(MissingFieldError, match="lines with density, magnetic_phi"):
        lines.value("pressure")
    more = bare.with_fields(disc, "density")
    np.testing.assert_array_equal(more.value("density"), wanted["density"])
    assert bare.fields == {}


def test_words_match_the_kernels():
    """The compiled constants and the words tell the same story."""
    from fieldviz.lines import _kernels

    pairs = {
        "GOING_ON": "going on", "INNER": "inner wall", "OUTER": "outer wall", "UPPER": "upper wall",
        "LOWER": "lower wall", "AXIS": "axis", "WEAK": "weak field", "NO_DATA": "no data",
        "LENGTH": "length", "CLOSED": "closed", "STEPS": "step limit", "OUTSIDE": "seed outside",
    }  # fmt: skip
    for constant, word in pairs.items():
        assert reasons.WORDS[getattr(_kernels, constant)] == word
    assert reasons.WORDS[reasons.CLOSED] == "closed"
    assert reasons.WORDS[reasons.NOT_TRACED] == "not traced"
