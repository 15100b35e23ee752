"""Random solenoidal fluctuations: a vector potential of a few modes, integrated along edges.

Fluxes through faces are differences of edge integrals, so their divergence vanishes to rounding;
azimuthal wave numbers are multiples of 2 pi/period, so azimuthal means are untouched.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fieldviz.wedge.demo.disc import SaltmarshDisc
from fieldviz.wedge.typing import Array

__all__ = ["Modes", "make_modes", "scatter_integral"]

_N_MODES = 24
_N_SCATTER = 16


@dataclass(frozen=True)
class Modes:
    """Wave numbers, phases and amplitudes of the three potential components."""

    radial: Array
    polar: Array
    azimuthal: Array
    phase: Array
    amplitude: Array

    def potential(
        self, component: int, phi: Array, theta: Array, r: Array, phi_width: float = 0.0
    ) -> Array:
        """One component without its envelope, (len(phi), len(theta), len(r)).

        With `phi_width` it is the exact mean over that width of azimuth: few azimuth cells then
        bring no mean field about by aliasing.
        """
        angle = (
            self.radial[:, None, None] * np.log(r)
            + self.polar[:, None, None] * theta[:, None]
            + self.phase[:, None, None]
        )
        # sin(x)/x of half the phase that a cell spans.
        damping = np.sinc(self.azimuthal * phi_width / (2 * np.pi))
        weight = (self.amplitude[component] * damping)[:, None]
        turn = self.azimuthal[:, None] * phi
        even = np.tensordot((weight * np.cos(turn)).T, np.cos(angle), axes=1)
        return even - np.tensordot((weight * np.sin(turn)).T, np.sin(angle), axes=1)


def make_modes(disc: SaltmarshDisc, stream: int) -> Modes:
    """Modes of the field (stream 0) or of the velocity (stream 1), fixed by the disc's seed."""
    rng = np.random.default_rng([disc.seed, 11 + stream])
    n, h = _N_MODES, disc.thickness
    return Modes(
        radial=np.pi * rng.uniform(0.5, 2.0, n) / (2 * h) * rng.choice([-1, 1], n),
        polar=2 * np.pi * rng.uniform(0.3, 1.0, n) / (2 * h),
        azimuthal=2 * np.pi / disc.period * rng.integers(1, 5, n),
        phase=rng.uniform(0, 2 * np.pi, n),
        amplitude=rng.normal(size=(3, n)),
    )


def scatter_integral(disc: SaltmarshDisc, side: int, phi: Array) -> Array:
    """Integral from 0 to phi of a random function of zero mean and unit rms over the period.

    Parameters
    ----------
    disc : SaltmarshDisc
    side : int
        0 above, 1 below: independent of each other.
    phi : array
        Azimuths, radians.
    """
    rng = np.random.default_rng([disc.seed, 23 + side, round(1e3 * disc.time)])
    wave = 2 * np.pi / disc.period * np.arange(1, _N_SCATTER + 1)
    amplitude = rng.normal(size=_N_SCATTER)
    amplitude *= np.sqrt(2 / np.sum(amplitude**2))
    phase = rng.uniform(0, 2 * np.pi, _N_SCATTER)
    angle = wave * np.asarray(phi)[..., None] + phase
    return np.sum(amplitude / wave * (np.sin(angle) - np.sin(phase)), axis=-1)
