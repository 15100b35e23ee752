"""Lines of the Earth's field, IGRF-13 of 2015 (Alken et al. 2021, from memory), ends on r = 1.

The field is that of the package ppigrf, put on a full ring of cells. Lines on that grid are held
against two others on the formula: DOP853 of SciPy on ppigrf's field, and geopack's own field and
tracer. Both packages carry their coefficients with them and need no network.
"""

from __future__ import annotations

from datetime import datetime
from functools import lru_cache

import numpy as np
import pytest
from geopack import geopack
from ppigrf import ppigrf
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

import fieldviz as fv
from fieldviz.wedge.geometry import centres

DATE, EARTH = datetime(2015, 1, 1), 6371.2
HARMONICS = 13
SEEDS = np.array(
    [[1.6, 1.5, 0.4], [2.2, 1.6, 1.9], [2.7, 1.4, 3.0], [2.9, 1.65, 4.4], [2.0, 1.3, 5.6]]
)


def ppigrf_field(r, theta, phi, **degrees):
    """B_r, B_theta, B_phi in nT."""
    parts = ppigrf.igrf_gc(
        np.asarray(r) * EARTH,
        np.degrees(theta),
        np.degrees(phi),
        DATE,
        coeff_fn=ppigrf.shc_fn_igrf13,
        **degrees,
    )
    return np.array([part[0] for part in parts])


def on_grid(n):
    """The same field at cell centres: each degree once at r = 1, times r^-(degree + 2).

    32 azimuths determine all 13 orders; a Fourier sum gives the others, to rounding.
    """
    edges = (
        np.geomspace(1.0, 4.0, n + 1),
        np.linspace(0.3, np.pi - 0.3, n + 1),
        np.linspace(0, 2 * np.pi, n + 1),
    )
    r, theta, phi = (centres(line) for line in edges)
    few = np.arange(32) * (2 * np.pi / 32)
    waves = np.exp(1j * np.outer(phi, np.arange(17)))
    total = np.zeros((3, n, n, n))
    for degree in range(1, HARMONICS + 1):
        shell = ppigrf_field(
            np.ones(1), theta[None, :], few[:, None], min_degree=degree, max_degree=degree
        )
        parts = np.fft.rfft(shell, axis=1) / 32
        parts[:, 1:] *= 2
        values = np.einsum("pm,cmt->cpt", waves, parts).real
        total += values[..., None] * r ** -(degree + 2.0)
    names = ("magnetic_r", "magnetic_theta", "magnetic_phi")
    return fv.Snapshot.from_arrays(*edges, cells=dict(zip(names, total, strict=True)))


def spherical(points):
    r = np.linalg.norm(points, axis=-1)
    phi = np.arctan2(points[..., 1], points[..., 0])
    return np.stack([r, np.arccos(points[..., 2] / r), phi], axis=-1)


def cartesian(points):
    r, theta, phi = np.moveaxis(np.asarray(points), -1, 0)
    R = r * np.sin(theta)
    return np.stack([R * np.cos(phi), R * np.sin(phi), r * np.cos(theta)], axis=-1)


def degrees_between(a, b):
    """Angle between directions of points."""
    a, b = (x / np.linalg.norm(x, axis=-1, keepdims=True) for x in (a, b))
    return np.degrees(2 * np.arcsin(np.clip(np.linalg.norm(a - b, axis=-1) / 2, 0, 1)))


def slopes(r, theta, phi, B):
    """Unit vectors d(x, y, z)/ds of a field in spherical components."""
    sine, cosine = np.sin(theta), np.cos(theta)
    flat = B[0] * sine + B[1] * cosine
    way = np.stack(
        [
            flat * np.cos(phi) - B[2] * np.sin(phi),
            flat * np.sin(phi) + B[2] * np.cos(phi),
            B[0] * cosine - B[1] * sine,
        ],
        axis=-1,
    )
    return way / np.linalg.norm(way, axis=-1, keepdims=True)


def dop853_ends():
    """Ends (backward, forward) on r = 1 by DOP853 on ppigrf's field, (2, n, 3).

    All lines at once; they come to rest at r = 0.95.
    """
    starts = np.concatenate([cartesian(SEEDS)] * 2)
    signs = np.repeat([-1.0, 1.0], len(SEEDS))[:, None]

    def right_hand_side(s, flat):
        r, theta, phi = spherical(flat.reshape(-1, 3)).T
        way = signs * slopes(r, theta, phi, ppigrf_field(r, theta, phi))
        return (way * np.tanh(8 * (r - 0.95))[:, None]).ravel()

    path = solve_ivp(
        right_hand_side, (0, 8), starts.ravel(), method="DOP853", rtol=1e-8, atol=1e-8,
        dense_output=True,
    )  # fmt: skip
    ends = []
    for line in range(len(starts)):
        at = lambda s, line=line: path.sol(s)[3 * line : 3 * line + 3]  # noqa: E731
        radii = np.linalg.norm(path.y.reshape(len(starts), 3, -1)[line], axis=0)
        first = np.flatnonzero(radii < 1)[0]
        span = path.t[first - 1], path.t[first]
        ends.append(at(brentq(lambda s, at=at: np.linalg.norm(at(s)) - 1, *span, xtol=1e-12)))
    return np.reshape(ends, (2, len(SEEDS), 3))


@pytest.fixture(scope="module")
def reference():
    """`dop853_ends` with the coefficients read once."""
    read = ppigrf.read_shc
    ppigrf.read_shc = lru_cache(read)
    try:
        return dop853_ends()
    finally:
        ppigrf.read_shc = read


def geopack_end(seed, sign):
    """End on r = 1 by geopack's tracer, linear between its last two points."""
    start = geopack.geogsm(*cartesian(seed), 1)
    x, y, z = geopack.trace(*start, -sign, rlim=8, r0=1)[3:]
    points = np.array([geopack.geogsm(*point, -1) for point in zip(x, y, z, strict=True)])
    radii = np.linalg.norm(points, axis=1)
    last = np.flatnonzero(radii < 1)[0]
    share = (radii[last - 1] - 1) / (radii[last - 1] - radii[last])
    return points[last - 1] + share * (points[last] - points[last - 1])


@pytest.fixture
def internal_geopack(monkeypatch):
    """Geopack at the date, without any field from outside the Earth."""
    geopack.recalc((DATE - datetime(1970, 1, 1)).total_seconds())
    monkeypatch.setattr(geopack, "call_external_model", lambda *given: (0.0, 0.0, 0.0))


def test_both_packages_have_the_same_field(internal_geopack):
    """Within r < 2; beyond, geopack leaves out high degrees."""
    rng = np.random.default_rng(0)
    points = np.column_stack(
        [rng.uniform(1, 1.99, 40), rng.uniform(0.3, 2.8, 40), rng.uniform(0, 6.28, 40)]
    )
    ours = ppigrf_field(*points.T).T
    theirs = np.array([geopack.igrf_geo(*point) for point in points])
    strength = np.linalg.norm(ours, axis=1, keepdims=True)
    assert (np.abs(ours - theirs) / strength).max() < 1e-5


def test_geopack_and_dop853_agree(reference, internal_geopack):
    """Within 1e-3 degrees (physics 7)."""
    found = np.array([[geopack_end(seed, sign) for seed in SEEDS] for sign in (-1, 1)])
    gap = degrees_between(found, reference)
    assert gap.max() < 1e-3


def test_lines_on_the_grid(reference):
    """Second order in the cell; within a hundredth of a cell at n = 96."""
    found = []
    for n in (24, 48, 96):
        snapshot = on_grid(n)
        lines = fv.trace_lines(snapshot, "magnetic", SEEDS)
        assert lines.end_reason == [("inner wall", "inner wall")] * len(SEEDS)
        ends = np.stack([lines.spherical[at] for at in (lines.offsets[:-1], lines.offsets[1:] - 1)])
        np.testing.assert_allclose(ends[..., 0], 1.0, rtol=1e-12)
        found.append(degrees_between(cartesian(ends), reference))
    rms = [np.sqrt(np.mean(gap**2)) for gap in found]
    assert np.log2(rms[0] / rms[-1]) / 2 > 1.8
    assert found[-1].max() < 0.02


def test_values_on_the_grid():
    """The sum over degrees is ppigrf's field at cell centres."""
    snapshot = on_grid(8)
    r, theta, phi = snapshot.grid.cell_centres(0)
    at = np.meshgrid(phi, theta, r, indexing="ij")
    wanted = ppigrf_field(*(axis.ravel() for axis in reversed(at)))
    for axis, name in enumerate(("magnetic_r", "magnetic_theta", "magnetic_phi")):
        np.testing.assert_allclose(snapshot.cells[name].ravel(), wanted[axis], atol=1e-6)
