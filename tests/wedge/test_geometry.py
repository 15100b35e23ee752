"""Areas and volumes against the analytic wedge and against numerical integrals."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate
from wedge_builders import PHI, THETA, R, block_grid

from fieldviz.wedge import geometry

SIXTH = 2 * np.pi / 6.5  # does not fit the ring a whole number of times
DOMAINS = {
    "plain": (R, THETA, PHI),
    "full ring": (R, THETA, np.linspace(0, 2 * np.pi, 9)),
    "ring from -pi": (R, THETA, np.linspace(-np.pi, np.pi, 9)),
    "does not fit the ring": (R, THETA, np.linspace(0.1, 0.1 + SIXTH, 9)),
    "one azimuth cell": (R, THETA, np.array([0.2, 0.9])),
    "axis in the domain": (R, np.linspace(0, np.pi, 17), PHI),
    "from the origin": (np.linspace(0, 2, 17), THETA, PHI),
    "uneven": (
        1 + np.linspace(0, 2, 17) ** 3 + R / 50,
        1 + np.linspace(0, 1, 17) ** 2 + THETA / 50,
        PHI,
    ),
}
LEVELS = {
    1: [],
    2: [((1.7, 1.6, 0.3), 1)],
    3: [((1.7, 1.6, 0.3), 2), ((1.2, 1.2, 0.3), 1)],
}


def analytic_volume(r, theta, phi):
    # Written as differences of powers and cosines: not how the code writes it.
    return (
        (r[-1] ** 3 - r[0] ** 3) / 3 * (np.cos(theta[0]) - np.cos(theta[-1])) * (phi[-1] - phi[0])
    )


@pytest.mark.parametrize("levels", LEVELS)
@pytest.mark.parametrize("name", DOMAINS)
def test_cell_volumes_add_up_to_the_wedge(name, levels):
    r, theta, phi = DOMAINS[name]
    blocks = (1 if len(phi) == 2 else 2, 2, 4)
    grid = block_grid(r, theta, phi, blocks, LEVELS[levels])
    assert len(grid.levels) == levels
    total = sum(grid.volumes(block).sum() for block in range(grid.n_blocks))
    assert total == pytest.approx(analytic_volume(r, theta, phi), rel=1e-12)
    assert grid.wedge_volume == pytest.approx(analytic_volume(r, theta, phi), rel=1e-12)


def test_a_cell_volume_is_the_integral_of_the_volume_element():
    r, theta, phi = R[3:6], THETA[7:11], PHI[2:4]
    volumes = geometry.cell_volumes(r, theta, phi)
    assert volumes.shape == (1, 3, 2)
    for k, j, i in np.ndindex(volumes.shape):
        expected, _ = integrate.tplquad(
            lambda r, theta, phi: r**2 * np.sin(theta),
            phi[k], phi[k + 1], theta[j], theta[j + 1], r[i], r[i + 1],
        )  # fmt: skip
        assert volumes[k, j, i] == pytest.approx(expected, rel=1e-12)


def test_face_areas_are_integrals_of_the_area_elements():
    r, theta, phi = R[3:6], THETA[7:11], PHI[2:5]
    across_r = geometry.area_r(r, theta, phi)
    across_theta = geometry.area_theta(r, theta, phi)
    across_phi = geometry.area_phi(r, theta, phi)
    assert across_r.shape == (2, 3, 3)
    assert across_theta.shape == (2, 4, 2)
    assert across_phi.shape == (3, 3, 2)
    for k, j, i in np.ndindex(2, 3, 2):
        expected, _ = integrate.dblquad(
            lambda phi, theta, r: r**2 * np.sin(theta),
            theta[j], theta[j + 1], phi[k], phi[k + 1], args=(r[i],),
        )  # fmt: skip
        assert across_r[k, j, i] == pytest.approx(expected, rel=1e-12)
        expected, _ = integrate.dblquad(
            lambda r, phi, theta: r * np.sin(theta),
            phi[k], phi[k + 1], r[i], r[i + 1], args=(theta[j],),
        )  # fmt: skip
        assert across_theta[k, j, i] == pytest.approx(expected, rel=1e-12)
        expected, _ = integrate.dblquad(
            lambda r, theta: r, theta[j], theta[j + 1], r[i], r[i + 1]
        )  # fmt: skip
        assert across_phi[k, j, i] == pytest.approx(expected, rel=1e-12)


def test_a_full_sphere_has_the_area_and_volume_of_a_sphere():
    r, theta, phi = (
        np.array([0.0, 1.0, 3.0]),
        np.linspace(0, np.pi, 8),
        np.linspace(0, 2 * np.pi, 6),
    )
    assert geometry.area_r(r, theta, phi)[:, :, -1].sum() == pytest.approx(36 * np.pi, rel=1e-13)
    assert geometry.cell_volumes(r, theta, phi).sum() == pytest.approx(36 * np.pi, rel=1e-13)


def test_faces_on_the_axis_have_no_area():
    area = geometry.area_theta(R, np.linspace(0, np.pi, 5), PHI)
    assert (area[:, [0, -1]] == 0).all()
    assert (area[:, 1:-1] > 0).all()


@pytest.mark.parametrize("axis", ["r", "theta", "phi"])
def test_fine_faces_add_up_to_coarse_ones(axis):
    grid = block_grid(R, THETA, PHI, (2, 2, 2), [((1.0, 1.0, -0.3), 1)])
    coarse = block_grid(R, THETA, PHI, (2, 2, 2))
    area = getattr(geometry, f"area_{axis}")
    parts = [block for block in range(grid.n_blocks) if grid.level[block] == 1]
    assert len(parts) == 8
    ends = {name: getattr(coarse, f"{name}_edges")[0] for name in ("r", "theta", "phi")}
    # The whole outer side of the coarse block, high and low, from the fine blocks that touch it.
    face = {"r": 2, "theta": 1, "phi": 0}[axis]
    for end in (0, -1):
        fine = 0.0
        for block in parts:
            if getattr(grid, f"{axis}_edges")[block, end] == ends[axis][end]:
                fine += np.take(area(*grid.edges(block)), end, axis=face).sum()
        whole = np.take(area(*coarse.edges(0)), end, axis=face).sum()
        assert fine == pytest.approx(whole, rel=1e-13)


def test_each_coarse_face_is_the_sum_of_its_fine_faces():
    from wedge_builders import subdivided

    fine = [subdivided(edges) for edges in (R, THETA, PHI)]
    a_r = geometry.area_r(*fine)[:, :, ::2]
    a_r = a_r.reshape(8, 2, 16, 2, 17).sum((1, 3))
    np.testing.assert_allclose(a_r, geometry.area_r(R, THETA, PHI), rtol=1e-13)
    a_t = geometry.area_theta(*fine)[:, ::2].reshape(8, 2, 17, 16, 2).sum((1, 4))
    np.testing.assert_allclose(a_t, geometry.area_theta(R, THETA, PHI), rtol=1e-13)
    a_p = geometry.area_phi(*fine)[::2].reshape(9, 16, 2, 16, 2).sum((2, 4))
    np.testing.assert_allclose(a_p, geometry.area_phi(R, THETA, PHI), rtol=1e-13)


def test_thin_cells_keep_full_precision():
    # 1e-9 rad at the midplane: cos(a) - cos(b) would lose eight digits.
    theta = np.pi / 2 + np.array([0.3e-9, 1.3e-9])
    step = float(theta[1] - theta[0])
    assert geometry.cosine_steps(theta)[0] == pytest.approx(step, rel=1e-14)
    r = np.array([1.0, 1.0 + 2.0**-30])
    volume = geometry.cell_volumes(r, np.array([0.0, np.pi]), np.array([0.0, 2 * np.pi])).item()
    assert volume == pytest.approx(4 * np.pi * 2.0**-30 * (1 + 2.0**-30), rel=1e-14)
