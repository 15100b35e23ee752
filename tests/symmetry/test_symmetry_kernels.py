"""The compiled sums over both sides against plain formulas, whatever the threads."""

from __future__ import annotations

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.derived import azimuth_blocks
from fieldviz.symmetry.field_scores import field_scores
from fieldviz.symmetry.mirror import mirrored_cells
from fieldviz.symmetry.side_sums import azimuth_bins, side_sums
from fieldviz.symmetry.wind_symmetry import wind_symmetry
from fieldviz.wedge.coordinates import cylindrical_components
from fieldviz.wind.surfaces import MatchedCones

BANDS = np.array([1.2, 2.0, 4.0])


def disc(precision: str = "double") -> fv.Snapshot:
    return fv.demo_disc(
        shape=(8, 40, 24), precision=precision, magnetic_turbulence=0.3, velocity_turbulence=0.3
    )


@pytest.mark.parametrize("precision", ["single", "double"])
def test_bend_and_lean_are_weighted_sums(precision: str) -> None:
    snapshot = disc(precision)
    # Cones on faces of the grid: no cell is cut, so that shares are 0 or 1.
    edges = snapshot.grid.theta_edges[0]
    angle, reach = np.pi / 2 - edges[8], np.pi / 2 - edges[2]
    cones = MatchedCones(angle, 4.0, reach, False)
    sums = side_sums(snapshot, cones, BANDS, azimuth_bins(snapshot.grid))
    r, theta, _ = snapshot.grid.cell_centres(0)
    rho, v_r, v_theta, b_r, b_theta = (
        snapshot.cell(name)[0].astype(np.float64)
        for name in ("density", "velocity_r", "velocity_theta", "magnetic_r", "magnetic_theta")
    )
    momentum = rho * np.hypot(v_r, v_theta) * snapshot.grid.volumes(0)
    v_R, v_z = cylindrical_components(v_r, v_theta, theta[:, None])
    b_R, b_z = cylindrical_components(b_r, b_theta, theta[:, None])
    for side, sign in enumerate((1, -1)):
        height = sign * (np.pi / 2 - theta)
        there = ((height > angle) & (height < reach))[:, None] & (sign * v_z > 0)
        leaning = np.degrees(np.arctan2(sign * b_R * np.where(b_z < 0, -1, 1), np.abs(b_z)))
        for name, value in (("bend", v_R), ("lean", leaning)):
            for band in range(2):
                weight = momentum * there * ((r >= BANDS[band]) & (r < BANDS[band + 1]))
                found = (
                    sums.numerators[name][:, side, band].sum(),
                    sums.denominators[name][:, side, band].sum(),
                )
                wanted = ((weight * value).sum(), weight.sum())
                np.testing.assert_allclose(found, wanted, rtol=1e-11)


def test_mirrored_cells_of_an_even_mesh_are_the_cells_turned_over() -> None:
    snapshot = disc()
    rows = np.arange(3, 20)
    formulas = {"density": lambda s, block: s.cell_block("density", block)}
    found = mirrored_cells(snapshot, formulas, 0, rows)["density"]
    np.testing.assert_array_equal(found, snapshot.cell("density")[0][:, ::-1][:, rows])


def test_threads_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    snapshot = disc("single")
    monkeypatch.setattr(azimuth_blocks, "_LEAST_PER_THREAD", 1)
    monkeypatch.setattr("fieldviz.wind.chunks._CHUNK_CELLS", 2000)
    found = []
    for threads in (1, 3):
        monkeypatch.setattr(azimuth_blocks, "_THREADS", threads)
        scores = field_scores(snapshot, h=0.1, reach=0.5, band_edges=BANDS)
        found.append((wind_symmetry(snapshot).to_dict(), scores))
    assert str(found[0]) == str(found[1])
