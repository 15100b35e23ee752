"""Numbers of a series: order, re-use, failures."""

from __future__ import annotations

import json
import os
from concurrent.futures import Executor, Future, ThreadPoolExecutor

import numpy as np
import pytest

import fieldviz as fv
from fieldviz.diagnostics import series_numbers
from fieldviz.diagnostics.series_numbers import measure_series
from fieldviz.diagnostics.series_store import SUFFIX, input_key, read_record, record_path
from fieldviz.errors import FieldvizError, SnapshotFileError
from fieldviz.wedge.demo import demo_disc

PARTS = ["thickness", "structure"]
TIMES = (0.0, 2.0, 4.0, 6.0)


@pytest.fixture
def run(tmp_path):
    """A folder of four snapshots, named against the order of time."""
    for number, time in enumerate(reversed(TIMES)):
        fv.write_snapshot(tmp_path / f"disc_{number}.h5", demo_disc(shape=(2, 32, 24), time=time))
    return tmp_path


class Backwards(Executor):
    """Finishes what it was given in the opposite order."""

    def __init__(self):
        self.waiting = []

    def submit(self, work, /, *args, **kwargs):
        future = Future()
        self.waiting.append((future, work, args, kwargs))
        if len(self.waiting) == len(TIMES):
            for one, task, values, names in reversed(self.waiting):
                one.set_result(task(*values, **names))
        return future


def test_order_of_time_whatever_the_order_of_completion(run):
    seen = []
    found = measure_series(
        str(run / "*.h5"), parts=PARTS, executor=Backwards(),
        progress=lambda done, total, record: seen.append((done, total)),
    )  # fmt: skip
    assert found.times == TIMES
    assert [record.path.name for record in found.records] == [f"disc_{n}.h5" for n in (3, 2, 1, 0)]
    assert seen == [(n, 4) for n in (1, 2, 3, 4)]
    assert found.failed == ()


def test_any_executor_gives_the_same_numbers(run):
    def bare(found):
        return [
            {name: part["result"] for name, part in record.numbers["parts"].items()}
            for record in found.records
        ]

    one = measure_series(fv.read_series(str(run / "*.h5")), parts=PARTS)
    with ThreadPoolExecutor(2) as pool:
        many = measure_series(sorted(run.glob("*.h5")), parts=PARTS, executor=pool)
    assert bare(one) == bare(many)


def test_processes(run):
    paths = sorted(run.glob("*.h5"))[:2]
    found = measure_series(paths, run / "numbers", parts=["thickness"], executor="processes")
    assert found.times == (4.0, 6.0)
    assert len(list((run / "numbers").glob(f"*{SUFFIX}"))) == 2


def test_a_second_run_measures_only_what_changed(run, monkeypatch):
    folder = run / "numbers"
    first = measure_series(str(run / "*.h5"), folder, parts=PARTS)
    assert not any(record.reused for record in first.records)
    measured = []
    work = series_numbers.measure

    def counted(snapshot, **options):
        measured.append(snapshot.source)
        return work(snapshot, **options)

    monkeypatch.setattr(series_numbers, "measure", counted)
    second = measure_series(str(run / "*.h5"), folder, parts=PARTS)
    assert measured == []
    assert all(record.reused for record in second.records)
    assert [r.numbers for r in second.records] == [r.numbers for r in first.records]
    state = (run / "disc_1.h5").stat()
    os.utime(run / "disc_1.h5", ns=(state.st_atime_ns, state.st_mtime_ns + 10**9))
    third = measure_series(str(run / "*.h5"), folder, parts=PARTS)
    assert [name[-9:] for name in measured] == ["disc_1.h5"]
    assert [record.reused for record in third.records] == [True, True, False, True]
    measure_series(str(run / "*.h5"), folder, parts=["thickness"])
    assert len(measured) == 5  # Other parts: all again.


def test_a_run_that_is_killed_is_taken_up_again(run, monkeypatch):
    folder = run / "numbers"
    work, count = series_numbers.measure, []

    def killed(snapshot, **options):
        if len(count) == 2:
            raise KeyboardInterrupt
        count.append(1)
        return work(snapshot, **options)

    monkeypatch.setattr(series_numbers, "measure", killed)
    with pytest.raises(KeyboardInterrupt):
        measure_series(str(run / "*.h5"), folder, parts=PARTS)
    monkeypatch.setattr(series_numbers, "measure", work)
    assert len(list(folder.iterdir())) == 2
    found = measure_series(str(run / "*.h5"), folder, parts=PARTS)
    assert [record.reused for record in found.records] == [True, True, False, False]
    assert found.times == TIMES


def test_half_a_file_does_not_count(run):
    folder = run / "numbers"
    measure_series(str(run / "*.h5"), folder, parts=PARTS)
    path = run / "disc_0.h5"
    target = record_path(folder, path)
    target.write_text(target.read_text()[:100])
    assert read_record(target, input_key(path, PARTS, None)) is None
    found = measure_series(str(run / "*.h5"), folder, parts=PARTS)
    assert [record.reused for record in found.records] == [True, True, True, False]
    assert "numbers" in json.loads(target.read_text())


def test_a_damaged_snapshot_does_not_lose_the_others(run):
    (run / "disc_2.h5").write_bytes(b"no snapshot")
    found = measure_series(str(run / "*.h5"), parts=PARTS)
    assert found.times == (0.0, 4.0, 6.0)
    (bad,) = found.failed
    assert bad.path.name == "disc_2.h5"
    assert "disc_2.h5" in bad.reason
    assert any("disc_2.h5 has no numbers" in note for note in found.notes)


def test_a_snapshot_that_fails_while_it_is_measured(run, monkeypatch):
    work = series_numbers.measure

    def failing(snapshot, **options):
        if snapshot.time == 4.0:
            raise SnapshotFileError("Cannot read it: expected a disk, got none.")
        if snapshot.time == 6.0:
            raise MemoryError
        return work(snapshot, **options)

    monkeypatch.setattr(series_numbers, "measure", failing)
    found = measure_series(str(run / "*.h5"), parts=PARTS)
    assert found.times == (0.0, 2.0)
    assert [record.reason[:14] for record in found.failed] == ["Cannot measure", "Cannot read it"]


def test_equal_times_are_dropped(run):
    fv.write_snapshot(run / "restart.h5", demo_disc(shape=(2, 32, 24), time=2.0))
    found = measure_series(str(run / "*.h5"), parts=PARTS)
    assert found.times == TIMES
    assert [path.name for path in found.dropped] == ["restart.h5"]
    assert any("restart.h5" in note for note in found.notes)


def test_parts_that_are_absent_are_noted_once(run):
    found = measure_series(str(run / "*.h5"), parts=["thickness", "divergence"])
    assert not any("absent" in note for note in found.notes)
    disc = demo_disc(shape=(2, 32, 24), time=9.0)
    bare = fv.Snapshot.from_grid(disc.grid, cells={"density": disc.cells["density"]}, time=9.0)
    fv.write_snapshot(run / "bare.h5", bare)
    found = measure_series(str(run / "*.h5"), parts=["thickness", "divergence"])
    (note,) = [note for note in found.notes if "absent" in note]
    assert note.startswith("divergence is absent in 1 of 5 snapshots: Cannot measure")


def test_wrong_calls(run):
    with pytest.raises(FieldvizError, match="expected an executor or 'processes', got 'threads'"):
        measure_series(str(run / "*.h5"), executor="threads")
    with pytest.raises(SnapshotFileError, match="expected files that match"):
        measure_series(str(run / "*.nothing"))
    (run / "file").write_text("x")
    with pytest.raises(SnapshotFileError, match="expected a folder that can be made"):
        measure_series(str(run / "*.h5"), run / "file")


def test_columns_of_a_record_are_in_code_units(run):
    (record, *_) = measure_series(str(run / "*.h5"), parts=PARTS).records
    radial = record.table("radial")
    edges = [*radial["r inner"], radial["r outer"][-1]]
    np.testing.assert_allclose(edges, demo_disc(shape=(2, 32, 24)).grid.r_edges[0])
    assert record.table("nothing") == {}
    assert record.result("symmetry") is None
