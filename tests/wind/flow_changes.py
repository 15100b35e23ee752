"""Snapshots of one block changed in ways whose effect on an outflow is known."""

import numpy as np

import fieldviz as fv
from fieldviz.wedge.geometry import annulus_widths

_ODD = ("velocity_theta", "magnetic_r", "magnetic_phi")


def as_cells(snapshot, **constants):
    cells = {name: snapshot.cell(name) for name in snapshot.cell_names}
    return fv.Snapshot.from_grid(snapshot.grid, cells=cells, **constants)


def mirrored(snapshot):
    grid = snapshot.grid
    cells = {
        name: np.ascontiguousarray((-1 if name in _ODD else 1) * snapshot.cell(name)[:, :, ::-1])
        for name in snapshot.cell_names
    }
    turned = type(grid)(grid.r_edges, np.pi - grid.theta_edges[:, ::-1], grid.phi_edges, grid.level)
    return fv.Snapshot.from_grid(turned, cells=cells, gamma=snapshot.gamma)


def changed(snapshot, **factors):
    """Cells times factors: density, pressure, magnetic."""
    return snapshot.with_cells(
        **{
            name: factor * snapshot.cell(name)
            for key, factor in factors.items()
            for name in snapshot.cell_names
            if name.startswith(key)
        }
    )


def rotated(snapshot, count):
    return snapshot.with_cells(
        **{name: np.roll(snapshot.cell(name), count, 1) for name in snapshot.cell_names}
    )


def without(snapshot, start):
    cells = {n: snapshot.cell(n) for n in snapshot.cell_names if not n.startswith(start)}
    return fv.Snapshot.from_grid(snapshot.grid, cells=cells, gamma=snapshot.gamma)


def cut_up(snapshot, counts):
    grid = snapshot.grid
    size = [n // count for n, count in zip(grid.block_shape, counts, strict=True)]
    blocks = []
    for place in np.ndindex(*counts):
        at = tuple(slice(i * n, (i + 1) * n) for i, n in zip(place, size, strict=True))
        axes = (grid.phi_edges, grid.theta_edges, grid.r_edges)
        edges = [axis[0, s.start : s.stop + 1] for axis, s in zip(axes, at, strict=True)]
        cells = {name: snapshot.cell(name)[0][at] for name in snapshot.cell_names}
        blocks.append(fv.Block(edges[2], edges[1], edges[0], cells))
    return fv.Snapshot.from_blocks(blocks)


def merged(snapshot):
    """Pairs of cells along phi and r become one that carries their southward mass flux."""
    grid = snapshot.grid
    r, phi = grid.r_edges[0], grid.phi_edges[0]
    area = np.diff(phi)[:, None, None] * annulus_widths(r)

    def joined(values):
        n_phi, n_theta, n_r = values.shape
        return values.reshape(n_phi // 2, 2, n_theta, n_r // 2, 2).sum((1, 4))

    flux = snapshot.cell("density")[0] * snapshot.cell("velocity_theta")[0]
    whole = joined(np.broadcast_to(area, flux.shape))
    density = joined(snapshot.cell("density")[0] * area) / whole
    cells = {name: joined(snapshot.cell(name)[0] * area) / whole for name in snapshot.cell_names}
    cells |= {"density": density, "velocity_theta": joined(flux * area) / whole / density}
    return fv.Snapshot.from_arrays(r[::2], grid.theta_edges[0], phi[::2], cells=cells)
