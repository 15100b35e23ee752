"""A series is in order of time, without repeats, and opens files when they are used."""

from __future__ import annotations

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.errors import FieldvizError, SnapshotFileError
from fieldviz.snapshots.field_in_file import FileFields


@pytest.fixture
def written(tmp_path, small_disc):
    """A function that writes one small snapshot of a time under a name."""

    def write(name, time, fill=1.0):
        grid = small_disc(shape=(1, 8, 8)).grid
        cells = {"density": np.full((1, 1, 8, 8), fill)}
        fv.write_snapshot(tmp_path / name, fv.Snapshot.from_grid(grid, cells=cells, time=time))
        return tmp_path / name

    return write


def test_files_come_in_order_of_time_and_not_of_name(tmp_path, written):
    for name, time in (("d_1.h5", 3.0), ("d_10.h5", -1.0), ("d_2.h5", 10.0)):
        written(name, time)
    series = fv.read_series(str(tmp_path / "d_*.h5"))
    assert series.times == (-1.0, 3.0, 10.0)
    assert [path.name for path in series.paths] == ["d_10.h5", "d_1.h5", "d_2.h5"]
    assert [snapshot.time for snapshot in series] == [-1.0, 3.0, 10.0]
    assert len(series) == 3
    assert series[-1].time == 10.0
    assert series.dropped == ()
    assert "3 snapshots" in repr(series)
    with pytest.raises(IndexError):
        series[3]


def test_repeated_times_are_dropped_and_listed(tmp_path, written):
    # As a restart leaves them: the last output before it was written twice.
    written("a.h5", 1.0, fill=1.0)
    written("b.h5", 2.0, fill=2.0)
    written("c.h5", 2.0, fill=3.0)
    written("d.h5", 2.0, fill=4.0)
    series = fv.read_series(tmp_path / "*.h5")
    assert series.times == (1.0, 2.0)
    assert [path.name for path in series.dropped] == ["c.h5", "d.h5"]
    assert (series[1].cell("density") == 2.0).all()


def test_a_list_of_files_in_any_order(tmp_path, written):
    paths = [written("b.h5", 2.0), written("a.h5", 5.0), written("c.h5", 1.0)]
    assert fv.read_series(paths).times == (1.0, 2.0, 5.0)
    assert fv.read_series([str(paths[0]), paths[0]]).times == (2.0,)
    assert fv.read_series(path for path in paths).times == (1.0, 2.0, 5.0)


def test_one_file_is_a_series_of_one(tmp_path, written):
    series = fv.read_series(written("only.h5", 4.0))
    assert series.times == (4.0,)


def test_a_name_with_brackets_is_a_name_too(tmp_path, written):
    assert fv.read_series(written("run[1].h5", 4.0)).times == (4.0,)


def test_slices_are_series(tmp_path, written):
    for number in range(4):
        written(f"{number}.h5", float(number))
    series = fv.read_series(tmp_path / "*.h5")
    assert series[1:3].times == (1.0, 2.0)
    assert series[::-1].times == (3.0, 2.0, 1.0, 0.0)
    assert len(series[4:]) == 0
    assert "0 snapshots" in repr(series[4:])


def test_opening_reads_no_field(tmp_path, written):
    series = fv.read_series([written("a.h5", 1.0), written("b.h5", 2.0)])
    snapshot = series[0]
    assert isinstance(snapshot.cells, FileFields)
    assert snapshot.cells._kept == {}
    assert series[0] is not snapshot  # nothing is kept by the series


@pytest.mark.parametrize("pattern", ["*.h5", "absent.h5", "sub/*.h5"])
def test_nothing_that_matches(tmp_path, pattern):
    with pytest.raises(
        SnapshotFileError, match="got none; check the folder and the pattern"
    ) as caught:
        fv.read_series(tmp_path / pattern)
    assert "\n" not in str(caught.value)


def test_an_empty_list():
    with pytest.raises(SnapshotFileError, match="at least one file"):
        fv.read_series([])


def test_one_bad_file_is_named(tmp_path, written):
    written("a.h5", 1.0)
    whole = written("b.h5", 2.0).read_bytes()
    (tmp_path / "b.h5").write_bytes(whole[: len(whole) // 2])
    written("c.h5", 3.0)
    with pytest.raises(FieldvizError, match=r"b\.h5.*truncated") as caught:
        fv.read_series(tmp_path / "*.h5")
    assert "\n" not in str(caught.value)


def test_a_listed_file_that_is_not_there_is_named(tmp_path, written):
    with pytest.raises(SnapshotFileError, match=r"gone\.h5.*no such file"):
        fv.read_series([written("a.h5", 1.0), tmp_path / "gone.h5"])
