"""The compiled sums of the wind against plain formulas, whatever the threads and the blocks."""

from __future__ import annotations

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.derived import azimuth_blocks
from fieldviz.derived.azimuth_sums import meridional_mesh
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.tiles import tiled
from fieldviz.wind.inclination import COLD_LAUNCHING, inclination, lean
from fieldviz.wind.meridional_fluxes import QUANTITIES, flux_tables
from fieldviz.wind.outflow import outflow

GAMMA, MU0 = 1.4, 4 * np.pi


def disc(precision: str = "double", **more: object) -> fv.Snapshot:
    made = fv.demo_disc(
        shape=(6, 40, 24), precision=precision, magnetic_turbulence=0.3, velocity_turbulence=0.3
    )
    cells = {name: made.cell(name) for name in made.cell_names}
    return fv.Snapshot.from_grid(made.grid, cells=cells | more, gamma=GAMMA, mu0=MU0)


def fluxes(snapshot: fv.Snapshot, axis: int) -> dict[str, np.ndarray]:
    """Flux densities of every quantity along one axis, from their definitions."""
    rho, pressure = (snapshot.cell(n)[0].astype(np.float64) for n in ("density", "pressure"))
    v, b = (
        np.stack([snapshot.cell(n)[0].astype(np.float64) for n in names])
        for names in (VELOCITY, MAGNETIC)
    )
    r, theta, _ = snapshot.grid.cell_centres(0)
    lever = r * np.sin(theta)[:, None]
    mass = rho * v[axis]
    return {
        "mass": mass,
        "kinetic_torque": lever * v[2] * mass,
        "excess_torque": (lever * v[2] - np.sqrt(snapshot.gm * r)) * mass,
        "kinetic_energy": 0.5 * (v**2).sum(0) * mass,
        "gravity": -snapshot.gm / r * mass,
        "magnetic_torque": -lever * b[2] * b[axis] / MU0,
        "poynting": ((b**2).sum(0) * v[axis] - (v * b).sum(0) * b[axis]) / MU0,
        "enthalpy": GAMMA / (GAMMA - 1) * pressure * v[axis],
    }


@pytest.mark.parametrize("precision", ["single", "double"])
def test_tables_are_means_of_the_formulas(precision: str) -> None:
    snapshot = disc(precision)
    mesh = meridional_mesh(snapshot.grid)
    slope = np.linspace(-0.2, 0.3, len(mesh.r))
    tables = flux_tables(snapshot, mesh, (slope, 2 * slope))
    side = np.where((mesh.theta < np.pi / 2)[:, None], slope, 2 * slope)
    radial, southward = fluxes(snapshot, 0), fluxes(snapshot, 1)
    assert set(tables.radial) == set(QUANTITIES)
    for name in QUANTITIES:
        across = np.abs(southward[name] - side * radial[name])
        for found, wanted in (
            (tables.radial, radial[name]),
            (tables.southward, southward[name]),
            (tables.size, across),
        ):
            size = np.abs(wanted).mean(0).max()
            np.testing.assert_allclose(found[name], wanted.mean(0), rtol=1e-12, atol=1e-14 * size)


def test_a_cell_without_a_number_spoils_its_own_group_only() -> None:
    pressure = disc().cell("pressure").copy()
    pressure[0, 2, 5, 7] = np.nan
    whole, holed = (
        flux_tables(s, meridional_mesh(s.grid)) for s in (disc(), disc(pressure=pressure))
    )
    assert len(holed.notes) == 1
    assert holed.notes[0].startswith("enthalpy: 1 cells")
    for name in QUANTITIES:
        same = whole.radial[name] == holed.radial[name]
        assert np.count_nonzero(~same) == (1 if name == "enthalpy" else 0)


def test_lean_is_that_of_the_plain_function() -> None:
    snapshot = disc()
    found = inclination(snapshot, 3.0)
    r, theta, _ = snapshot.grid.cell_centres(0)
    rho, v_theta, b_r, b_theta = (
        snapshot.cell(n)[0] for n in ("density", "velocity_theta", "magnetic_r", "magnetic_theta")
    )
    degrees, sideways = lean(b_r, b_theta, theta[:, None])
    area = np.diff(snapshot.grid.r_edges[0] ** 2) / 2
    for side, own in (("upper", found.upper), ("lower", found.lower)):
        sign = 1 if side == "upper" else -1
        cone = getattr(found.surface, side).theta[0]
        leaving = np.maximum(-sign * rho * v_theta, 0.0).mean(0)
        parts = [leaving]
        for weight in (degrees > COLD_LAUNCHING, degrees, sideways):
            parts.append((np.maximum(-sign * rho * v_theta, 0.0) * weight).mean(0))
        sums = [
            sum(np.interp(cone, theta, table[:, i]) * area[i] for i in range(len(r)))
            for table in parts
        ]
        ratios = np.array(sums[1:]) / sums[0]
        np.testing.assert_allclose(
            [own.share_steep, own.mean, own.share_sideways], ratios, rtol=1e-11, atol=1e-13
        )


def test_threads_and_pieces_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    snapshot = disc("single")
    monkeypatch.setattr(azimuth_blocks, "_LEAST_PER_THREAD", 1)
    found = []
    for threads in (1, 3):
        monkeypatch.setattr(azimuth_blocks, "_THREADS", threads)
        found += [outflow(snapshot), outflow(tiled(snapshot, 700))]
    for other in found[1:]:
        for name in ("mass", "magnetic_torque", "energy"):
            one, two = (getattr(f, name).upper.bins for f in (found[0], other))
            np.testing.assert_array_equal(one, two)
        for side in ("upper", "lower"):
            one, two = (getattr(f.inclination, side) for f in (found[0], other))
            assert one == two
