"""What can be traced, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest
from line_fields import BOTH, NAMES, vertical, winding_disc

import fieldviz as fv
from fieldviz.errors import FieldvizError, MissingFieldError

SEED = np.array([[2.0, 1.5, 0.05]])


def trace(snapshot, seeds, interpolation="linear", **options):
    return fv.trace_lines(snapshot, "magnetic", seeds, interpolation=interpolation, **options)


# ---- what is traced -----------------------------------------------------------------------------


def test_velocity():
    """Lines of v in place of B, and an error where there is none."""
    disc = fv.demo_disc(shape=(4, 32, 32))
    lines = fv.trace_lines(disc, "velocity", [[2.0, 1.1, 0.1]], direction="forward")
    assert lines.name == "velocity"
    # The wind leaves upward, and it turns with the disc.
    assert lines.end_reason[0][1] in ("upper wall", "outer wall")
    assert lines.twist[0] > 0
    swapped = fv.Snapshot.from_grid(
        disc.grid, cells={m: disc.cells[m.replace("magnetic", "velocity")] for m in NAMES}
    )
    same = fv.trace_lines(swapped, "magnetic", [[2.0, 1.1, 0.1]], direction="forward")
    np.testing.assert_array_equal(same.spherical, lines.spherical)
    with pytest.raises(MissingFieldError, match="without velocity_r"):
        fv.trace_lines(swapped, "velocity", SEED)
    with pytest.raises(FieldvizError, match="by fluxes: expected the magnetic field"):
        fv.trace_lines(disc, "velocity", SEED, interpolation="flux")


@BOTH
def test_poloidal_keeps_the_azimuth(interpolation):
    disc = winding_disc(turbulence=0.0)
    seeds = np.array([[2.0, 1.4, 0.1], [3.0, 1.7, 5.0]])
    flat = trace(disc, seeds, interpolation, poloidal=True)
    counts = np.diff(flat.offsets)
    np.testing.assert_allclose(flat.spherical[:, 2], np.repeat(seeds[:, 2], counts), atol=1e-14)
    # An axisymmetric field: the poloidal path is that of the full line.
    full = trace(disc, seeds, interpolation, tolerance=1e-9, longest=1e4)
    for number in range(2):
        for side in (0, -1):
            ends = (flat.line(number)[side, :2], full.line(number)[side, :2])
            np.testing.assert_allclose(*ends, rtol=1e-3)
    assert np.abs(full.twist).min() > 1


# ---- bad input ----------------------------------------------------------------------------------


@pytest.mark.parametrize("seeds", [[1.0, 2.0], [[1, 2, 3, 4]], np.zeros((2, 3, 3)), 3.0, []])
def test_bad_shapes_of_seeds(seeds):
    with pytest.raises(FieldvizError, match=r"expected seeds of shape \(n, 3\)"):
        trace(vertical(), seeds)


@pytest.mark.parametrize(
    ("option", "value"),
    [
        ("direction", "sideways"),
        ("direction", None),
        ("interpolation", "cubic"),
        ("tolerance", 0.0),
        ("tolerance", -1e-6),
        ("tolerance", 1.0),
        ("tolerance", np.nan),
        ("most_cells", 0.0),
        ("most_cells", 2.0),
        ("most_cells", np.nan),
        ("most_steps", 0),
        ("most_steps", -5),
        ("longest", 0.0),
        ("longest", -1.0),
        ("longest", np.nan),
    ],
)
def test_options_out_of_range(option, value):
    options = {"interpolation": "linear", option: value}
    with pytest.raises(FieldvizError, match=f"Cannot trace lines: expected {option}"):
        fv.trace_lines(vertical(), "magnetic", SEED, **options)


@pytest.mark.parametrize("name", ["density", "", "Magnetic"])
def test_unknown_vector(name):
    with pytest.raises(FieldvizError, match="expected one of magnetic, velocity"):
        fv.trace_lines(vertical(), name, SEED)


def test_missing_components_and_fields():
    grid = vertical().grid
    ones = np.ones((1, *grid.block_shape))
    partial = fv.Snapshot.from_grid(grid, cells=dict.fromkeys((*NAMES[:2], "density"), ones))
    with pytest.raises(MissingFieldError, match="without magnetic_phi"):
        trace(partial, SEED)
    with pytest.raises(MissingFieldError, match="without pressure"):
        trace(vertical(), SEED, sample=["pressure"])
