"""A steady flow of a closed form that conserves mass and angular momentum exactly.

psi = r^0.4 g(cos theta) is the flux function of the field, chi = psi^2 that of mass. With
l = 1 + psi and any R B_phi = f, R v_phi = l + f/(mu0 k), k = dchi/dpsi, both are conserved: the
flux of angular momentum is l rho v_p.
"""

import numpy as np

import fieldviz as fv
from fieldviz.wedge.geometry import centres

POWER = 0.4


def psi(r, theta):
    c = np.cos(theta)
    return r**POWER * (1 + c + 0.5 * c**2 + 0.3 * c**3)


def chi(r, theta):
    return psi(r, theta) ** 2


def momentum(psi_values):
    """Angular momentum within psi: integral of l dchi = (1 + psi) 2 psi dpsi."""
    return psi_values**2 + 2 / 3 * psi_values**3


def steady_flow(shape=(2, 32, 24), r=(1.0, 3.0), reach=0.6, growth=0.0, time=0.0, levels=None):
    n_phi, n_theta, n_r = shape
    edges = (
        np.linspace(0, 0.5, n_phi + 1),
        np.linspace(np.pi / 2 - reach, np.pi / 2 + reach, n_theta + 1),
        np.geomspace(*r, n_r + 1),
    )
    phi, theta, r_c = (centres(e) for e in edges)
    cells = fields(r_c, theta[:, None], phi[:, None, None], growth, time)
    full = {name: np.broadcast_to(values, shape).copy() for name, values in cells.items()}
    return fv.Snapshot.from_arrays(edges[2], edges[1], edges[0], cells=full, time=time)


def fields(r, theta, phi, growth=0.0, time=0.0):
    """Cells; `growth` adds a density that grows in time and does not move in the meridian."""
    c, s = np.cos(theta), np.sin(theta)
    p = psi(r, theta)
    dr = POWER * p / r
    dtheta = -s * r**POWER * (1 + c + 0.9 * c**2)
    b_r, b_theta = dtheta / (r * r * s), -dr / (r * s)
    k = 2 * p
    density = (1 + 0.3 * c) / r + 0 * phi
    rb_phi = 0.4 * c + 0.1 * r
    heavier = density * (1 + growth * time)
    v_phi = (1 + p + rb_phi / k) / (r * s)
    return {
        "density": heavier,
        "velocity_r": k * b_r / heavier,
        "velocity_theta": k * b_theta / heavier,
        "velocity_phi": v_phi + 0 * phi,
        "magnetic_r": b_r + 0 * phi,
        "magnetic_theta": b_theta + 0 * phi,
        "magnetic_phi": rb_phi / (r * s) + 0 * phi,
        "pressure": 0.01 * density / r,
    }


def steady_levels(n, refine, reach=0.6):
    """2 x 2 x 2 blocks of n cells each way, of which those with refine(phi, theta, r) are split."""
    axes = [
        np.linspace(0, 0.5, 5),
        np.linspace(np.pi / 2 - reach, np.pi / 2 + reach, 2 * n + 1),
        np.geomspace(1.0, 3.0, 2 * n + 1),
    ]
    leaves = []
    for place in np.ndindex(2, 2, 2):
        sizes = [(len(e) - 1) // 2 for e in axes]
        own = [e[p * m : (p + 1) * m + 1] for e, p, m in zip(axes, place, sizes, strict=True)]
        if not refine(*place):
            leaves.append((own, 0))
            continue
        fine = [np.sort(np.concatenate([e, centres(e)])) for e in own]
        for part in np.ndindex(2, 2, 2):
            cut = [e[p * m : (p + 1) * m + 1] for e, p, m in zip(fine, part, sizes, strict=True)]
            leaves.append((cut, 1))
    blocks = []
    for (phi, theta, r), level in leaves:
        cells = fields(centres(r), centres(theta)[:, None], centres(phi)[:, None, None])
        shape = (len(phi) - 1, len(theta) - 1, len(r) - 1)
        full = {name: np.broadcast_to(values, shape).copy() for name, values in cells.items()}
        blocks.append(fv.Block(r, theta, phi, full, level=level))
    return fv.Snapshot.from_blocks(blocks)
