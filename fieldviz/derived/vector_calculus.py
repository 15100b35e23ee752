"""Gradient, divergence and curl on the native mesh of spherical-polar cells.

With s = sin(theta), and each derivative the slope of a parabola (see `stencils`):

    grad f = (df/dr, 1/r df/dtheta, 1/(r s) df/dphi)
    div f  = 1/r^2 d(r^2 f_r)/dr + 1/(r s) d(s f_theta)/dtheta + 1/(r s) df_phi/dphi
    curl f = (1/(r s) (d(s f_phi)/dtheta - df_theta/dphi),
              1/(r s) df_r/dphi - 1/r d(r f_phi)/dr,
              1/r (d(r f_theta)/dr - df_r/dtheta))

The metric factors stand inside the derivatives, as they do in the theorems of Gauss and Stokes.
Within one level the slopes along different axes commute, so div(curl f) and curl(grad f) are zero
to rounding, but next to the axis, where s f = 0 is used. Next to the axis a component that does not
vanish there costs one order.

Between blocks of one level a cell sees its neighbour's cells, and in azimuth the wedge repeats:
cutting a grid into blocks of three or more cells changes nothing. At a level jump it sees a ghost
cell, from a parabola along each axis through the other level's cells: also second order there. At
the walls in r and theta derivatives are one-sided, second order.

Face-centred fields enter the curl and the gradient as cell values, the mean of two faces; the dual
loops through the faces themselves are in `edge_current`. The divergence of a face-centred field is
the exact flux out of each cell over its volume.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from fieldviz.derived.stencils import Stencils, stencils
from fieldviz.errors import FieldvizError
from fieldviz.wedge.fields import MAGNETIC, VELOCITY
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["SphericalVector", "curl", "curl_arrays", "divergence", "gradient"]

_VECTORS = {"magnetic": MAGNETIC, "velocity": VELOCITY}


class SphericalVector(NamedTuple):
    """Three components at cell centres, each (n_blocks, n_phi, n_theta, n_r).

    Attributes
    ----------
    r, theta, phi : arrays
        Along r-hat, theta-hat (southward) and phi-hat.
    """

    r: Array
    theta: Array
    phi: Array


def gradient(snapshot: Snapshot, name: str) -> SphericalVector:
    """Gradient of a cell field.

    Parameters
    ----------
    snapshot : Snapshot
    name : str
        Cell field.

    Returns
    -------
    SphericalVector
        In the field's unit over length, and in its precision.

    Raises
    ------
    MissingFieldError

    Examples
    --------
    >>> import fieldviz as fv
    >>> disc = fv.demo_disc(shape=(4, 32, 24))
    >>> fv.gradient(disc, "pressure").r.shape
    (1, 4, 32, 24)
    """
    from fieldviz.derived._kernels import gradient_blocks

    snapshot.require("work out the gradient", name)
    grid = snapshot.grid
    known = stencils(grid)
    (field,), dtype = _fields(snapshot, known, (name,))
    found = _empty_vector(grid, dtype)
    per_r, per_sine = _metric(grid)
    weights = (known.r.weights, per_r, known.theta.weights, known.phi.weights, per_sine)
    gradient_blocks(field, *_places(known), *_as_type(dtype, weights), *found)
    return found


def divergence(snapshot: Snapshot, vector: str | Sequence[str]) -> Array:
    """Divergence of a vector field at cell centres.

    Parameters
    ----------
    snapshot : Snapshot
    vector : "magnetic", "velocity" or three names
        Three names are the r, theta and phi component, cell fields.

    Returns
    -------
    (n_blocks, n_phi, n_theta, n_r) array
        In the field's unit over length, and in its precision. Of a magnetic field on faces, the
        flux out of each cell over its volume, both exact; of one that is free of divergence,
        rounding is left. From cell values, second order.

    Raises
    ------
    MissingFieldError, FieldvizError

    Examples
    --------
    >>> import fieldviz as fv
    >>> disc = fv.demo_disc(shape=(4, 32, 24))
    >>> bool(abs(fv.divergence(disc, "magnetic")).max() < 1e-9)
    True
    """
    names = _components(vector, "divergence")
    if names == MAGNETIC and all(name in snapshot.faces for name in names):
        return _divergence_of_faces(snapshot)
    from fieldviz.derived._kernels import divergence_blocks

    snapshot.require("work out the divergence", *names)
    grid = snapshot.grid
    known = stencils(grid)
    fields, dtype = _fields(snapshot, known, names)
    found = np.empty((grid.n_blocks, *grid.block_shape), dtype)
    per_r, per_sine = _metric(grid)
    by_r = known.r.of_product(np.square) * per_r[:, None] ** 2
    by_sine = known.theta.of_product(np.sin) * per_sine[:, None]
    weights = (by_r, per_r, by_sine, known.phi.weights, per_sine)
    divergence_blocks(*fields, *_places(known), *_as_type(dtype, weights), found)
    return found


def curl(snapshot: Snapshot, vector: str | Sequence[str]) -> SphericalVector:
    """Curl of a vector field at cell centres.

    Parameters
    ----------
    snapshot : Snapshot
    vector : "magnetic", "velocity" or three names
        Three names are the r, theta and phi component, cell fields.

    Returns
    -------
    SphericalVector
        In the field's unit over length, and in its precision.

    Raises
    ------
    MissingFieldError, FieldvizError

    Examples
    --------
    >>> import fieldviz as fv
    >>> disc = fv.demo_disc(shape=(4, 32, 24))
    >>> fv.curl(disc, "velocity").theta.shape
    (1, 4, 32, 24)
    """
    names = _components(vector, "curl")
    snapshot.require("work out the curl", *names)
    return curl_arrays(snapshot, names)


def curl_arrays(snapshot: Snapshot, names: Sequence[str], factor: float = 1.0) -> SphericalVector:
    """`factor` times the curl of three cell fields that are known to be there."""
    from fieldviz.derived._kernels import curl_blocks

    grid = snapshot.grid
    known = stencils(grid)
    fields, dtype = _fields(snapshot, known, names)
    found = _empty_vector(grid, dtype)
    per_r, per_sine = _metric(grid)
    by_r = known.r.of_product(lambda r: r) * (factor * per_r[:, None])
    by_sine = known.theta.of_product(np.sin) * per_sine[:, None]
    weights = (by_r, factor * per_r, known.theta.weights, by_sine, known.phi.weights, per_sine)
    curl_blocks(*fields, *_places(known), *_as_type(dtype, weights), *found)
    return found


def _components(vector: str | Sequence[str], work: str) -> tuple[str, ...]:
    if isinstance(vector, str):
        if vector in _VECTORS:
            return _VECTORS[vector]
        given = f"'{vector}'"
    elif len(vector) == 3:
        return tuple(vector)
    else:
        given = f"{len(vector)} names"
    raise FieldvizError(
        f"Cannot work out the {work}: expected 'magnetic', 'velocity' or the names of three cell "
        f"fields (r, theta, phi), got {given}; name the components."
    )


def _fields(
    snapshot: Snapshot, known: Stencils, names: Sequence[str]
) -> tuple[list[Array], np.dtype]:
    """Cell values in one precision, with the ghost cells at level jumps."""
    values = [snapshot.cell(name) for name in names]
    dtype = np.result_type(*values)
    same = [array.astype(dtype, copy=False) for array in values]
    return [known.with_ghosts(snapshot.grid, array) for array in same], dtype


def _empty_vector(grid: WedgeGrid, dtype: np.dtype) -> SphericalVector:
    shape = (grid.n_blocks, *grid.block_shape)
    return SphericalVector(*(np.empty(shape, dtype) for _ in range(3)))


def _places(known: Stencils) -> tuple[Array, Array, Array, Array]:
    return known.beyond, known.r.start, known.theta.start, known.phi.start


def _as_type(dtype: np.dtype, weights: Sequence[Array]) -> list[Array]:
    return [array.astype(dtype) for array in weights]


def _metric(grid: WedgeGrid) -> tuple[Array, Array]:
    """1/r and 1/sin(theta) at cell centres, which are never on the axis."""
    return 1.0 / centres(grid.r_edges), 1.0 / np.sin(centres(grid.theta_edges))


def _divergence_of_faces(snapshot: Snapshot) -> Array:
    grid = snapshot.grid
    dtype = np.result_type(*(snapshot.faces[name] for name in MAGNETIC))
    found = np.empty((grid.n_blocks, *grid.block_shape), dtype)
    for block in range(grid.n_blocks):
        outward = np.zeros(grid.block_shape)
        areas = (grid.area_r(block), grid.area_theta(block), grid.area_phi(block))
        for name, area, axis in zip(MAGNETIC, areas, (2, 1, 0), strict=True):
            outward += np.diff(snapshot.faces.block(name, block) * area, axis=axis)
        found[block] = outward / grid.volumes(block)
    return found
