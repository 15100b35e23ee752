"""Snapshots as VTK objects: structure, values, no copies, ghosts."""

import numpy as np
import pytest
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkCommonCore import vtkFloatArray
from vtkmodules.vtkCommonDataModel import vtkDataSetAttributes
from vtkmodules.vtkFiltersVerdict import vtkCellSizeFilter

import fieldviz as fv
from fieldviz.errors import MissingFieldError
from fieldviz.vtk_data.snapshot_to_vtk import to_vtk
from fieldviz.wedge.halo import halo

GHOST = vtkDataSetAttributes.DUPLICATECELL
HIDDEN = vtkDataSetAttributes.HIDDENCELL


@pytest.fixture(scope="module")
def two_levels():
    return fv.demo_disc(shape=(4, 16, 16), levels=2, precision="single", magnetic_turbulence=0.3)


def blocks_of(tree):
    return [
        (tree.GetMetaData(i).Get(tree.NAME()), tree.GetBlock(i).GetBlock(j))
        for i in range(tree.GetNumberOfBlocks())
        for j in range(tree.GetBlock(i).GetNumberOfBlocks())
    ]


def cell_array(data, name):
    return vtk_to_numpy(data.GetCellData().GetArray(name))


def test_tree_is_level_then_block(two_levels):
    tree = to_vtk(two_levels)
    names = [name for name, _ in blocks_of(tree)]
    level = two_levels.grid.level
    assert names == [f"level {n}" for n in np.sort(level)]
    for name, data in blocks_of(tree):
        assert data.GetNumberOfCells() == np.prod(two_levels.grid.block_shape)
        assert set(cell_array(data, "level")) == {int(name.split()[1])}


def test_scalars_are_views_of_the_snapshot():
    disc = fv.demo_disc(shape=(2, 8, 8))
    data = to_vtk(disc).GetBlock(0).GetBlock(0)
    seen = cell_array(data, "density")
    assert np.shares_memory(seen, disc.cells["density"])
    disc.cells["density"][0, 1, 2, 3] = 17.0
    assert seen[(1 * 8 + 2) * 8 + 3] == 17.0


def test_single_precision_stays_single():
    data = to_vtk(fv.demo_disc(shape=(2, 8, 8), precision="single")).GetBlock(0).GetBlock(0)
    assert isinstance(data.GetCellData().GetArray("density"), vtkFloatArray)
    assert isinstance(data.GetCellData().GetArray("velocity"), vtkFloatArray)


def test_values_stand_in_the_cells_they_belong_to():
    """A field made of the cell middle's own coordinates must agree with VTK's cell centres."""
    disc = fv.demo_disc(shape=(6, 12, 10), levels=2, blocks=(1, 2, 2))
    grid = disc.grid
    radius = np.stack(
        [np.broadcast_to(grid.cell_centres(b)[0], grid.block_shape) for b in range(grid.n_blocks)]
    )
    tree = to_vtk(disc.with_cells(radius=radius), fields=["radius"])
    for _, data in blocks_of(tree):
        for cell in (0, 7, data.GetNumberOfCells() - 1):
            corners = np.array([data.GetCell(cell).GetPoints().GetPoint(n) for n in range(8)])
            r = np.linalg.norm(corners, axis=1)
            assert r.min() < cell_array(data, "radius")[cell] < r.max()


def test_vtk_finds_the_volume_of_the_wedge():
    """Flat-faced cells inscribe the round ones: VTK's volume comes from below, second order."""
    errors = []
    for n in (8, 16, 32):
        disc = fv.demo_disc(shape=(n, 2 * n, 2 * n), r_range=(1.0, 2.0))
        sizes = vtkCellSizeFilter()
        sizes.SetInputData(to_vtk(disc, vectors=False).GetBlock(0).GetBlock(0))
        sizes.Update()
        total = cell_array(sizes.GetOutput(), "Volume").sum()
        errors.append(1 - total / disc.grid.wedge_volume)
    assert 0 < errors[2] < errors[1] < errors[0]
    assert np.log2(errors[0] / errors[1]) == pytest.approx(2, abs=0.1)
    assert np.log2(errors[1] / errors[2]) == pytest.approx(2, abs=0.1)


def test_vectors_are_cartesian():
    """Rigid rotation about z: v = Omega (-y, x, 0) at every cell middle."""
    disc = fv.demo_disc(shape=(6, 8, 8))
    r, theta, phi = disc.grid.cell_centres(0)
    zero = np.zeros((1, 6, 8, 8))
    v_phi = np.broadcast_to(0.7 * np.sin(theta)[:, None] * r, zero.shape)
    turning = disc.with_cells(velocity_r=zero, velocity_theta=zero, velocity_phi=v_phi)
    vectors = cell_array(to_vtk(turning).GetBlock(0).GetBlock(0), "velocity").reshape(6, 8, 8, 3)
    R = np.sin(theta)[:, None] * r
    x, y = (np.cos(phi)[:, None, None] * R, np.sin(phi)[:, None, None] * R)
    np.testing.assert_allclose(vectors[..., 0], -0.7 * y, atol=1e-14)
    np.testing.assert_allclose(vectors[..., 1], 0.7 * x, atol=1e-14)
    np.testing.assert_allclose(vectors[..., 2], 0, atol=1e-14)


def test_halo_adds_marked_ghosts_with_the_neighbours_values(two_levels):
    haloed = halo(two_levels, "density")
    level = two_levels.grid.level
    order = np.concatenate([np.flatnonzero(level == n) for n in two_levels.grid.levels])
    own = 0
    for block, (_, data) in zip(order, blocks_of(to_vtk(two_levels, halo=True)), strict=True):
        marks = cell_array(data, "vtkGhostType")
        np.testing.assert_array_equal(cell_array(data, "density"), haloed[block].ravel())
        own += np.count_nonzero(marks == 0)
        assert set(marks) <= {0, GHOST, GHOST | HIDDEN}
    assert own == two_levels.grid.n_cells


def test_only_ghosts_past_walls_are_hidden():
    disc = fv.demo_disc(shape=(4, 8, 8))
    data = to_vtk(disc, halo=True).GetBlock(0).GetBlock(0)
    marks = cell_array(data, "vtkGhostType").reshape(6, 10, 10)
    assert (marks[1:-1, 1:-1, 1:-1] == 0).all()
    assert (marks[0, 1:-1, 1:-1] == GHOST).all()  # the wedge repeats in azimuth
    assert (marks[:, :, 0] & HIDDEN).all()
    assert (marks[:, 0] & HIDDEN).all()


def test_field_data_carry_time_and_units():
    units = fv.UnitScales(length=fv.Unit(5.2, "au"))
    disc = fv.Snapshot.from_arrays(
        [1.0, 2.0], [1.0, 2.0], [0.0, 1.0], cells={"density": np.ones((1, 1, 1))}, time=4.5,
        mu0=4 * np.pi, gamma=1.4, units=units, title="a test",
    )  # fmt: skip
    fields = to_vtk(disc).GetFieldData()
    assert fields.GetArray("TimeValue").GetValue(0) == 4.5
    assert fields.GetArray("mu0").GetValue(0) == 4 * np.pi
    assert fields.GetArray("gamma").GetValue(0) == 1.4
    assert fields.GetArray("length unit").GetValue(0) == 5.2
    assert fields.GetAbstractArray("length unit label").GetValue(0) == "au"
    assert fields.GetAbstractArray("title").GetValue(0) == "a test"


def test_unknown_field_is_named():
    with pytest.raises(MissingFieldError, match="temperature"):
        to_vtk(fv.demo_disc(shape=(2, 8, 8)), fields=["temperature"])
