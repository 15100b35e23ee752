"""Importing the package is cheap: heavy libraries wait until they are needed."""

from __future__ import annotations

import subprocess
import sys

HEAVY = ["vtk", "vtkmodules", "pyvista", "numba", "matplotlib", "paraview", "h5py", "scipy"]


def loaded_after(statement):
    code = (
        f"import sys\n{statement}\nprint(*sorted({{name.split('.')[0] for name in sys.modules}}))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    return set(done.stdout.split())


def test_importing_loads_nothing_heavy():
    loaded = loaded_after("import fieldviz")
    assert "fieldviz" in loaded
    assert loaded.isdisjoint(HEAVY), sorted(loaded.intersection(HEAVY))


def test_listing_the_names_loads_nothing_heavy():
    assert loaded_after("import fieldviz; dir(fieldviz); fieldviz.__version__").isdisjoint(HEAVY)


def test_numbers_need_no_drawing():
    loaded = loaded_after(
        "import fieldviz as fv; fv.demo_disc(shape=(2, 16, 16)); fv.read_snapshot"
    )
    assert loaded.isdisjoint(["vtk", "vtkmodules", "pyvista", "matplotlib", "paraview"])


def test_an_unknown_name_is_an_attribute_error():
    import fieldviz

    assert not hasattr(fieldviz, "no_such_name")
