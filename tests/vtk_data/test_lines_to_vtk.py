"""Lines as VTK poly data."""

import numpy as np
import pyvista as pv

import fieldviz as fv
from fieldviz.vtk_data.files import write_poly_data
from fieldviz.vtk_data.lines_to_vtk import lines_to_vtk

SEEDS = [[1.4, np.pi / 2, 0.1], [9.0, 1.0, 0.0], [3.0, np.pi / 2, 0.5]]


def test_poly_data_hold_the_lines(tmp_path):
    disc = fv.demo_disc(shape=(4, 48, 48))
    lines = fv.trace_lines(disc, "magnetic", SEEDS, sample=["density"])
    write_poly_data(tmp_path / "lines.vtp", lines_to_vtk(lines))
    back = pv.read(tmp_path / "lines.vtp")
    # The seed outside gives no line to draw.
    assert list(back.cell_data["line"]) == [0, 2]
    assert back.n_points == len(lines.spherical)
    np.testing.assert_array_equal(np.asarray(back.points), lines.points)
    np.testing.assert_array_equal(back["density"], lines.value("density"))
    np.testing.assert_array_equal(back["r"], lines.spherical[:, 0])
    np.testing.assert_array_equal(back.cell_data["length"], lines.length[[0, 2]])
    reasons = [lines.end_reason[k] for k in (0, 2)]
    assert list(back.cell_data["start_reason"]) == [a for a, _ in reasons]
    assert list(back.cell_data["end_reason"]) == [b for _, b in reasons]
    for cell, k in enumerate((0, 2)):
        assert back.get_cell(cell).n_points == len(lines.line(k))


def test_no_line_at_all_is_an_empty_object():
    disc = fv.demo_disc(shape=(4, 16, 16))
    assert lines_to_vtk(fv.trace_lines(disc, "magnetic", [[9.0, 1.0, 0.0]])).GetNumberOfCells() == 0
