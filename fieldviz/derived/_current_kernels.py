"""Compiled loops of the current density: means over the edges around a cell, from face values.

They raise nothing; the public functions around them check what comes in.
"""
# mypy: disable-error-code="no-untyped-def, no-untyped-call"
# Numba infers the types of kernels; the public functions around them are typed.

from __future__ import annotations

from numba import njit, prange


@njit(cache=True, nogil=True, parallel=True)
def cell_currents(
    r_theta, r_phi, theta_r, theta_phi, phi_r, phi_theta,
    r, r_own, dr, rings, sine, sine_own, dtheta, caps, dphi, factor, out_r, out_theta, out_phi,
):  # fmt: skip
    """Mean of the current on the four edges around each cell of one block; see `edge_current`.

    `theta_r` is B_theta on its faces with one layer more at both ends along r, and so on. `r`,
    `sine` are of the centres with ghosts, `r_own`, `sine_own` without; `dr`, `dtheta`, `dphi` lie
    between centres with ghosts, `rings` and `caps` are r dr and the steps in cos(theta) there.
    """
    n_phi, n_theta, n_r = out_r.shape
    for k in prange(n_phi):
        for j in range(n_theta):
            for i in range(n_r):
                total = 0.0
                for b in range(j, j + 2):
                    # Both azimuths have the same length of edge but their own step.
                    for a in range(k, k + 2):
                        up = sine[b + 1] * phi_theta[a, b + 1, i] - sine[b] * phi_theta[a, b, i]
                        across = theta_phi[a + 1, b, i] - theta_phi[a, b, i]
                        total += up / caps[b] - across * (dtheta[b] / (caps[b] * dphi[a]))
                out_r[k, j, i] = 0.25 * factor * total / r_own[i]
            for i in range(n_r):
                total = 0.0
                for c in range(i, i + 2):
                    for a in range(k, k + 2):
                        around = r_phi[a + 1, j, c] - r_phi[a, j, c]
                        out = r[c + 1] * phi_r[a, j, c + 1] - r[c] * phi_r[a, j, c]
                        total += (around * dr[c] / (sine_own[j] * dphi[a]) - out) / rings[c]
                out_theta[k, j, i] = 0.25 * factor * total
            for i in range(n_r):
                total = 0.0
                for c in range(i, i + 2):
                    for b in range(j, j + 2):
                        out = r[c + 1] * theta_r[k, b, c + 1] - r[c] * theta_r[k, b, c]
                        down = r_theta[k, b + 1, c] - r_theta[k, b, c]
                        total += (out - down * dr[c] / dtheta[b]) / rings[c]
                out_phi[k, j, i] = 0.25 * factor * total
