"""Snapshots changed in ways whose effect on results is known, and results as plain arrays."""

from dataclasses import fields, is_dataclass

import numpy as np

import fieldviz as fv

_ODD_UNDER_MIRROR = ("velocity_theta", "magnetic_r", "magnetic_phi")


def stirred(shape=(8, 48, 48), **parameters):
    """A demo disc with fluctuations of everything, as cell values."""
    parameters = {"magnetic_turbulence": 2.0, "velocity_turbulence": 0.1, **parameters}
    return cell_fields(fv.demo_disc(shape=shape, **parameters))


def cell_fields(snapshot, **constants):
    cells = {name: snapshot.cell(name) for name in snapshot.cell_names}
    return fv.Snapshot.from_grid(snapshot.grid, cells=cells, **constants)


def mirrored(snapshot):
    """theta -> pi - theta; fields that change sign do so."""
    grid = snapshot.grid
    cells = {
        name: np.ascontiguousarray(
            (-1 if name in _ODD_UNDER_MIRROR else 1) * snapshot.cell(name)[:, :, ::-1]
        )
        for name in snapshot.cell_names
    }
    turned = type(grid)(grid.r_edges, np.pi - grid.theta_edges[:, ::-1], grid.phi_edges, grid.level)
    return fv.Snapshot.from_grid(turned, cells=cells)


def rotated(snapshot, count):
    """By whole cells; one block."""
    cells = {name: np.roll(snapshot.cell(name), count, 1) for name in snapshot.cell_names}
    return fv.Snapshot.from_grid(snapshot.grid, cells=cells)


def with_field_times(snapshot, factor):
    return snapshot.with_cells(
        **{n: factor * snapshot.cell(n) for n in snapshot.cell_names if n.startswith("magnetic")}
    )


def rescaled(snapshot, a):
    """rho -> a rho, P -> a P, B -> sqrt(a) B."""
    denser = snapshot.with_cells(**{n: a * snapshot.cell(n) for n in ("density", "pressure")})
    return with_field_times(denser, np.sqrt(a))


def only(snapshot, *names):
    cells = {name: snapshot.cell(name) for name in names}
    return fv.Snapshot.from_grid(snapshot.grid, cells=cells)


def cut_up(snapshot, counts):
    """The same cells in (n_phi, n_theta, n_r) blocks."""
    grid = snapshot.grid
    assert grid.n_blocks == 1
    size = [n // count for n, count in zip(grid.block_shape, counts, strict=True)]
    blocks = []
    for place in np.ndindex(*counts):
        at = tuple(slice(i * n, (i + 1) * n) for i, n in zip(place, size, strict=True))
        edges = [
            axis[0, part.start : part.stop + 1]
            for axis, part in zip((grid.phi_edges, grid.theta_edges, grid.r_edges), at, strict=True)
        ]
        cells = {name: snapshot.cell(name)[0][at] for name in snapshot.cell_names}
        blocks.append(fv.Block(edges[2], edges[1], edges[0], cells))
    return fv.Snapshot.from_blocks(blocks)


def refined_blocks(coarse_edges, formulas, refine):
    """A snapshot of 2 x 2 x 2 blocks, of which those with refine(phi, theta, r) are split once.

    `coarse_edges` are phi, theta, r; formulas(r, theta, phi) -> dict of cells.
    """
    leaves = []
    for place in np.ndindex(2, 2, 2):
        halves = []
        for axis, p in zip(coarse_edges, place, strict=True):
            n = (len(axis) - 1) // 2
            halves.append(axis[p * n : (p + 1) * n + 1])
        if refine(*place):
            fine = [np.sort(np.concatenate([e, 0.5 * (e[1:] + e[:-1])])) for e in halves]
            for part in np.ndindex(2, 2, 2):
                cut = [
                    e[p * ((len(e) - 1) // 2) : (p + 1) * ((len(e) - 1) // 2) + 1]
                    for e, p in zip(fine, part, strict=True)
                ]
                leaves.append((cut, 1))
        else:
            leaves.append((halves, 0))
    blocks = []
    for (phi, theta, r), level in leaves:
        middles = [0.5 * (e[1:] + e[:-1]) for e in (r, theta, phi)]
        found = formulas(middles[0], middles[1][:, None], middles[2][:, None, None])
        shape = (len(phi) - 1, len(theta) - 1, len(r) - 1)
        cells = {name: np.broadcast_to(values, shape) for name, values in found.items()}
        blocks.append(fv.Block(r, theta, phi, cells, level=level))
    return fv.Snapshot.from_blocks(blocks)


def numbers(result, prefix=""):
    """All numbers of a result by name, as arrays; text and None are left out."""
    found = {}
    for item in fields(result):
        if not item.repr or item.name == "mesh":
            continue
        value = getattr(result, item.name)
        _gather(found, prefix + item.name, value)
    return found


def _gather(found, name, value):
    if isinstance(value, dict):
        for key, item in value.items():
            _gather(found, f"{name}.{key}", item)
    elif is_dataclass(value):
        found.update(numbers(value, name + "."))
    elif isinstance(value, tuple) and not all(isinstance(v, int | float) for v in value):
        for i, item in enumerate(value):
            _gather(found, f"{name}.{i}", item)
    elif value is not None and not isinstance(value, str):
        array = np.asarray(value)
        if array.dtype.kind in "fiub" and array.size:
            found[name] = array.astype(float)


def assert_same(a, b, rtol=1e-12, atol=1e-14, leave_out=(), but=None):
    """Two results have the same numbers; `but` maps names to what to do to the first."""
    x, y = numbers(a), numbers(b)
    assert set(x) == set(y)
    for name in x:
        if any(name.startswith(part) for part in leave_out):
            continue
        expected = but[name](x[name]) if but and name in but else x[name]
        scale = np.nanmax(np.abs(expected), initial=0.0, where=np.isfinite(expected))
        np.testing.assert_allclose(
            y[name], expected, rtol=rtol, atol=atol * max(scale, 1e-300) + 1e-300, err_msg=name
        )
