"""Budgets of mass and angular momentum of flows that conserve both."""

import numpy as np
import pytest
from flow_changes import without
from steady_flow import steady_flow

import fieldviz as fv
from fieldviz.errors import FieldvizError
from fieldviz.wind.outflow import outflow


def budgets(found):
    return found.mass_budget, found.angular_momentum_budget


def test_steady_budgets_close_at_second_order():
    errors, local = [], []
    for n in (16, 32, 64):
        found = outflow(steady_flow((1, 2 * n, n)), 3.7, thickness=0.1)
        errors.append([b.share for b in budgets(found)])
        largest = [max(np.abs(t).max() for t in b.terms.values()) for b in budgets(found)]
        local.append(
            [
                np.abs(b.residual_bins).max() / x
                for b, x in zip(budgets(found), largest, strict=True)
            ]
        )
    # Measured at 64: 2.6e-5 and 6.4e-5 of the largest term.
    assert (np.array(errors[-1]) < 2e-4).all(), errors
    assert (np.log2(np.divide(errors[0], errors[-1])) / 2 > 1.7).all(), errors
    # Between neighbouring faces the one-sided continuation at the walls shows: first order.
    assert (np.array(local[-1]) < 6e-3).all(), local
    assert np.isfinite([b.residual for b in budgets(found)]).all()


def test_terms_are_large_beside_the_residual():
    found = outflow(steady_flow((1, 128, 64)), 3.7, thickness=0.1)
    for budget in budgets(found):
        sizes = sorted(abs(value) for value in budget.totals.values())
        assert sizes[-3] > 100 * abs(budget.residual)
        assert f"{100 * budget.share:.3g} % of the largest term" in budget.sentence
    names = set(found.angular_momentum_budget.terms)
    assert {"accretion", "upper wind, field", "radial stress of gas"} <= names


def test_demo_mass_budget_closes():
    """Its flow is steady in mass; its angular momentum is prescribed, and the budget says so."""
    shares = [
        outflow(fv.demo_disc(shape=(1, n, n)), 4.3, radii=(1.2, 4.5)).mass_budget.share
        for n in (48, 192)
    ]
    assert shares[1] < 5e-3
    assert shares[0] / shares[1] > 5
    found = outflow(fv.demo_disc(shape=(1, 48, 48)), 4.3)
    assert found.angular_momentum_budget.share > 0.3


def filling(time, n=32):
    """rho = 1 + 3 t and rho v_r r^2 = 1 - r^3: continuity holds; R v_phi is Kepler's."""
    r = np.geomspace(1, 2, n + 1)
    theta = np.linspace(np.pi / 2 - 0.5, np.pi / 2 + 0.5, 2 * n + 1)
    made = fv.Snapshot.from_arrays(r, theta, [0, 0.4], time=time)
    r_c, theta_c, _ = made.grid.cell_centres(0)
    shape = (1, 1, 2 * n, n)
    density = 1 + 3 * time
    cells = {
        "density": density,
        "velocity_r": (1 - r_c**3) / r_c**2 / density,
        "velocity_theta": 0.0,
        "velocity_phi": np.sqrt(r_c) / (r_c * np.sin(theta_c)[:, None]),
        "magnetic_r": 0.0,
        "magnetic_theta": 0.0,
        "magnetic_phi": 0.0,
    }
    return made.with_cells(**{k: np.broadcast_to(v, shape).copy() for k, v in cells.items()})


def test_change_in_time_closes_the_budget_of_a_filling_disc():
    now, later = filling(1.0), filling(2.0)
    steady = outflow(now, 4.0, thickness=0.1)
    assert steady.mass_budget.share == pytest.approx(1.0)
    assert any("taken as zero" in note for note in steady.notes)
    for given in (
        {"after": later},
        {"before": filling(0.0)},
        {"before": filling(0), "after": later},
    ):
        found = outflow(now, 4.0, thickness=0.1, **given)
        volume = 0.4 * 2 * np.sin(0.4) * 7 / 3
        assert found.mass_budget.totals["change in time"] == pytest.approx(3 * volume, rel=1e-3)
        assert found.mass_budget.share < 2e-3
        assert not any("taken as zero" in note for note in found.notes)
    binned = outflow(now, 4.0, thickness=0.1, radii=[1.1, 1.4, 1.9], after=later).mass_budget
    np.testing.assert_allclose(binned.residual_bins / binned.terms["change in time"], 0, atol=5e-3)


def test_neighbours_must_fit():
    now = filling(1.0)
    with pytest.raises(FieldvizError, match="times that increase"):
        outflow(now, 4.0, thickness=0.1, after=filling(1.0))
    with pytest.raises(FieldvizError, match="neighbour with density"):
        outflow(now, 4.0, thickness=0.1, after=fv.demo_disc(shape=(1, 16, 8), time=3.0,
                                                            r_range=(1.5, 5.0)))  # fmt: skip


def test_a_missing_field_leaves_the_budget_open():
    flow = without(steady_flow((1, 32, 16)), "magnetic")
    found = outflow(flow, 4.0, thickness=0.1)
    assert found.mass_budget.share < 1e-2
    assert np.isnan(found.angular_momentum_budget.residual)
    assert "no magnetic_r" in found.angular_momentum_budget.sentence
