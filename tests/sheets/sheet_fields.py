"""Vertical fields made to measure: the flux of every patch is a difference of a given function."""

from __future__ import annotations

import numpy as np
from scipy.special import ndtr

import fieldviz as fv
from fieldviz.wedge.geometry import annulus_widths, centres

H = 0.1
FWHM = np.sqrt(8 * np.log(2))
BACKGROUND = 1.0


def bells(r, sheets, slope=1.0):
    """psi(r) of a background f = r <B_z> = 1 and of bells (radius, height, sd in H)."""
    psi = BACKGROUND * slope * r
    for radius, height, sd in sheets:
        width = sd * H * radius
        psi = psi + height * np.sqrt(2 * np.pi) * width * ndtr((r - radius) / width)
    return psi


def vertical(psi, r=None, phi=None, cells=None, theta=None, **constants):
    """A snapshot with upward flux psi(r2, phi) - psi(r1, phi) per radian at all heights."""
    r = np.geomspace(1, 5, 321) if r is None else r
    phi = np.linspace(0, np.pi / 4, 2) if phi is None else phi
    theta = np.pi / 2 + np.linspace(-0.3, 0.3, 25) if theta is None else theta
    values = np.array([psi(r, p) for p in centres(phi)])
    per_area = -np.diff(values, axis=1) / annulus_widths(r)
    face = per_area[:, None, :] / np.sin(theta)[:, None]
    arrays = {}
    for name, formula in (cells or {}).items():
        table = formula(centres(r)[None, None, :], centres(theta)[None, :, None])
        arrays[name] = np.broadcast_to(table, (len(phi) - 1, len(theta) - 1, len(r) - 1)).copy()
    return fv.Snapshot.from_arrays(
        r, theta, phi, cells=arrays, faces={"magnetic_theta": face}, **constants
    )


def of_sheets(sheets, **settings):
    """A snapshot of the same bells at every azimuth."""
    return vertical(lambda r, _: bells(r, sheets), **settings)
