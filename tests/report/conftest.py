"""Small series and their material, made once."""

from __future__ import annotations

import pytest

import fieldviz as fv
from fieldviz.report.diagrams import report_diagrams
from fieldviz.report.material import gather

SHAPE = (4, 40, 96)


@pytest.fixture(scope="session")
def series_folder(tmp_path_factory):
    """Three snapshots of the demo disc around the merging of two sheets."""
    folder = tmp_path_factory.mktemp("series")
    for number, time in enumerate((0.0, 4.0, 8.0)):
        disc = fv.demo_disc(shape=SHAPE, time=time, magnetic_turbulence=0.0)
        fv.write_snapshot(folder / f"disc_{number}.h5", disc)
    return folder


@pytest.fixture(scope="session")
def kept(tmp_path_factory):
    """Where the numbers of the series are kept, so that they are worked out once."""
    return tmp_path_factory.mktemp("kept")


@pytest.fixture(scope="session")
def material(series_folder, kept):
    """What a report on the series is made from."""
    return gather(str(series_folder / "disc_*.h5"), kept=kept)


@pytest.fixture(scope="session")
def diagrams(material):
    """All its diagrams."""
    return report_diagrams(material)
