"""The folder of a report: whole or absent, every number in its files, hostile names harmless."""

from __future__ import annotations

import csv
import errno
import json
import os
import re
from dataclasses import replace
from functools import partial
from pathlib import Path

import pytest
from page_reading import ReadPage, assert_harmless

import fieldviz as fv
from fieldviz.diagnostics.snapshot_numbers import measure
from fieldviz.errors import FieldvizError, SnapshotFileError
from fieldviz.report.basis import basis
from fieldviz.report.paper import Diagram
from fieldviz.report.write import write_report
from fieldviz.wedge.units import Unit, UnitScales

HOSTILE = "<script>alert(1)</script><img src=x onerror=alert(2)>&'\""
LARGEST = 5_000_000


@pytest.fixture
def quick(monkeypatch):
    """One small drawing in place of all, and only some of the numbers."""
    one = Diagram("a", "A drawing", "It is small.", "Nothing is drawn.", b"<svg/>", b"<svg/>")
    monkeypatch.setattr("fieldviz.report.write.report_diagrams", lambda material: ((), (one,)))
    some = partial(measure, parts=("structure", "flux_sheets", "outflow", "symmetry"))
    monkeypatch.setattr("fieldviz.report.material.measure", some)


@pytest.fixture(scope="module")
def report(series_folder, kept, diagrams, tmp_path_factory):
    """A report on the series, all diagrams and one scene."""
    folder = tmp_path_factory.mktemp("out") / "report"
    steps = []
    with pytest.MonkeyPatch.context() as patch:  # drawn once for all tests
        patch.setattr("fieldviz.report.write.report_diagrams", lambda material: diagrams)
        page = write_report(
            str(series_folder / "disc_*.h5"),
            folder,
            scenes=["azimuth-cut"],
            kept=kept,
            progress=lambda *step: steps.append(step),
        )
    assert page == folder / "report.html"
    return folder, steps


def snapshot(small_disc, **changes):
    return replace(small_disc(shape=(4, 32, 32)), **changes)


def read_csv(path):
    with path.open(encoding="utf-8", newline="") as file:
        head, *rows = list(csv.reader(file))
    return head, rows


def test_the_page_opens_with_the_verdict_and_holds_everything(report):
    folder, _ = report
    page = (folder / "report.html").read_text(encoding="utf-8")
    assert len(page) < LARGEST
    read = assert_harmless(page)
    assert read.text("h1").startswith("Even wind: gas leaves")
    assert "time mean of 3 snapshots" in page.lower()
    assert len(read.all("img")) == 1 + 7 + 6
    for attributes in (*read.all("img"), *read.all("source")):
        uri = attributes.get("src") or attributes["srcset"]
        assert uri.startswith(("data:image/svg+xml;base64,", "data:image/png;base64,",
                               "data:image/webp;base64,"))  # fmt: skip
    # No address of another host, but for the name space of drawings.
    assert set(re.findall(r"https?://[^\s\"'<]+", page)) == {"http://www.w3.org/2000/svg"}
    assert not re.search(r"[\"'(=]//", page)


def test_every_link_leads_to_a_file_of_the_report(report):
    folder, _ = report
    read = ReadPage((folder / "report.html").read_text(encoding="utf-8"))
    links = {a["href"] for a in read.all("a")}
    found = {str(path.relative_to(folder)) for path in folder.rglob("*") if path.is_file()}
    assert links <= found
    # Every table is linked, whether it is shown or not.
    assert {name for name in found if name.endswith(".csv")} <= links


def test_tables_and_json_hold_the_same_numbers(report):
    folder, _ = report
    numbers = json.loads((folder / "numbers.json").read_text(encoding="utf-8"))
    files = {path.stem for path in (folder / "tables").iterdir()}
    assert files == set(numbers["tables"])
    for name, table in numbers["tables"].items():
        head, rows = read_csv(folder / "tables" / f"{name}.csv")
        assert len(head) == len(table["columns"])
        assert len(rows) == len(table["rows"]) > 0
        for cells, stored in zip(rows, table["rows"], strict=True):
            for cell, value in zip(cells, stored, strict=True):
                if isinstance(value, float):
                    assert float(cell) == pytest.approx(value, rel=1e-8), name
                else:
                    assert cell == ("" if value is None else str(value)), name


def test_the_numbers_are_those_of_the_diagnostics(report, series_folder, material):
    folder, _ = report
    numbers = json.loads((folder / "numbers.json").read_text(encoding="utf-8"))
    last = fv.read_snapshot(series_folder / "disc_2.h5")
    found = numbers["snapshots"][-1]["parts"]["symmetry"]["result"]
    assert found["outflow"]["angle"] == pytest.approx(
        fv.wind_symmetry(last).outflow.angle, abs=1e-9
    )
    assert numbers["times"] == [0.0, 4.0, 8.0]
    assert numbers["verdict"]["times"] == [0.0, 4.0, 8.0]
    head, rows = read_csv(folder / "tables" / "sheet_events.csv")
    assert rows[0][: len(head) - 1] == ["merge", "4", "8", "2, 1"]
    head, rows = read_csv(folder / "tables" / "sheet_positions.csv")
    assert len(rows) == sum(len(track.times) for track in material.course.history.tracks)


def test_notes_that_differ_by_numbers_only_stand_once(material):
    groups = dict(basis(material))
    floors = [note for note in groups["Resolution"] if note.startswith("no floor of the density")]
    assert len(floors) == 1
    assert floors[0].endswith("(with the numbers of the last of them)")
    assert all(len(set(notes)) == len(notes) > 0 for notes in groups.values())
    every = [note for notes in groups.values() for note in notes]
    # Nothing that a diagnostic says of itself is lost.
    table = material.records[-1].table("notes")
    said = " ".join(every)
    for part, kind, text in zip(table["part"], table["kind"], table["text"], strict=True):
        if kind == "note" and part != "symmetry":
            assert text in said, text
    assert all(note in said for note in material.verdict["notes"])


def test_the_scene_carries_its_recipe(report):
    from fieldviz.scenes.recipe import read_recipe

    folder, _ = report
    recipe = read_recipe(folder / "pictures" / "azimuth-cut_light.png")
    assert recipe["snapshot"]["file"] == "disc_2.h5"
    assert (folder / "pictures" / "azimuth-cut_dark.png").exists()


def test_progress_goes_through_all_steps(report):
    _, steps = report
    assert [step for step in steps if step[2] == "measuring snapshots"] == [
        (n, 3, "measuring snapshots") for n in (1, 2, 3)
    ]
    assert {what for *_, what in steps} == {
        "measuring snapshots", "judging the time mean", "drawing diagrams", "drawing scenes",
    }  # fmt: skip


def test_how_to_make_it_again_is_a_command(report, series_folder):
    folder, _ = report
    read = ReadPage((folder / "report.html").read_text(encoding="utf-8"))
    pattern = series_folder / "disc_*.h5"
    assert read.text("code") == f"fieldviz report '{pattern}' -o {folder}"
    assert "disc_0.h5, disc_1.h5 and disc_2.h5" in read.whole_text


@pytest.mark.usefixtures("quick")
def test_hostile_names_and_titles_are_only_words(tmp_path, small_disc):
    path = tmp_path / HOSTILE.replace("/", "")
    fv.write_snapshot(path, snapshot(small_disc, title=HOSTILE))
    page = write_report([path], tmp_path / "own", scenes=False).read_text(encoding="utf-8")
    read = assert_harmless(page)
    assert read.text("title") == HOSTILE
    assert HOSTILE.replace("/", "") in read.text("code").replace("'\"'\"'", "'")
    given = write_report([path], tmp_path / HOSTILE.replace("/", "~"), title="<b>x", scenes=False)
    assert assert_harmless(given.read_text(encoding="utf-8")).text("title") == "<b>x"


@pytest.mark.usefixtures("quick")
def test_names_that_are_no_text_do_not_stop_it(tmp_path, small_disc):
    path = Path(os.fsdecode(bytes(tmp_path) + b"/odd_\xff\xe9.h5"))
    fv.write_snapshot(path, snapshot(small_disc))
    page = write_report([path], tmp_path / "odd", scenes=False)
    assert "odd_\ufffd\ufffd.h5" in page.read_text(encoding="utf-8")
    numbers = json.loads((tmp_path / "odd" / "numbers.json").read_text(encoding="utf-8"))
    assert numbers["tables"]["files"]["rows"][0][0] == path.name


def without(snapshot, *parts):
    cells = {n: snapshot.cells[n] for n in snapshot.cells if not n.startswith(parts)}
    faces = {} if "magnetic" in parts else {n: snapshot.faces[n] for n in snapshot.faces}
    blocks = snapshot.grid
    return fv.Snapshot.from_arrays(
        blocks.r_edges[0], blocks.theta_edges[0], blocks.phi_edges[0],
        cells={name: values[0] for name, values in cells.items()},
        faces={name: values[0] for name, values in faces.items()},
    )  # fmt: skip


def test_a_snapshot_without_field_says_so(tmp_path, small_disc):
    bare = without(small_disc(shape=(4, 32, 32)), "magnetic")
    page = write_report(bare, tmp_path / "bare", scenes=["flux-sheets"]).read_text("utf-8")
    read = assert_harmless(page)
    assert "no magnetic field" in page
    assert len(read.all("article")) == 2
    titles = [text for tag, text in read.texts if tag == "h3"]
    assert "Net vertical field" not in titles
    assert {"Surface density", "Accretion and mass loss", "Angles of the wind by radius"} <= set(
        titles
    )
    assert "No picture of the scene flux-sheets. Cannot" in read.whole_text
    assert "Flux sheets: Cannot" in read.whole_text
    assert not (tmp_path / "bare" / "pictures").exists()
    assert not (tmp_path / "bare" / "tables" / "flux_sheets.csv").exists()


@pytest.mark.usefixtures("quick")
def test_without_velocity_there_is_no_verdict_but_a_reason(tmp_path, small_disc):
    still = without(small_disc(shape=(4, 32, 32)), "velocity")
    page = write_report(still, tmp_path / "still", scenes=False)
    read = assert_harmless(page.read_text("utf-8"))
    assert read.text("h1") == "No verdict on the wind."
    assert "velocity" in read.text("span")
    assert not read.all("article")
    assert "write_report(snapshot, " in read.text("code")


@pytest.mark.usefixtures("quick")
def test_physical_units_stand_beside_code_units(tmp_path, small_disc):
    scales = UnitScales(length=Unit(1.0, "au"), mass=Unit(1e-3, "Msun"), time=Unit(0.159, "yr"))
    write_report(snapshot(small_disc, units=scales), tmp_path / "au", scenes=False)
    head, rows = read_csv(tmp_path / "au" / "tables" / "flux_sheets.csv")
    code, physical = head.index("radius [code length]"), head.index("radius [au]")
    assert [row[code] for row in rows] == [row[physical] for row in rows]
    page = (tmp_path / "au" / "report.html").read_text("utf-8")
    assert "Msun yr⁻¹" in page


@pytest.mark.usefixtures("quick")
def test_bad_files_of_a_series_are_told(tmp_path, series_folder):
    files = [*sorted(series_folder.glob("*.h5"))[:1], tmp_path / "broken.h5"]
    files[1].write_text("no HDF5")
    page = write_report(files, tmp_path / "r", scenes=False).read_text("utf-8")
    assert "broken.h5 has no numbers: Cannot" in page
    with pytest.raises(FieldvizError, match=r"got none of 1\. Cannot"):
        write_report([files[1]], tmp_path / "none", scenes=False)
    assert not (tmp_path / "none").exists()


@pytest.mark.usefixtures("quick")
def test_a_second_run_replaces_a_report_and_nothing_else(tmp_path, small_disc):
    disc, folder = snapshot(small_disc), tmp_path / "report"
    write_report(disc, folder, title="first", scenes=False)
    (folder / "tables" / "old.csv").write_text("old")
    write_report(disc, folder, title="second", scenes=False)
    assert not (folder / "tables" / "old.csv").exists()
    assert "second" in (folder / "report.html").read_text("utf-8")
    (folder / "thesis.tex").write_text("years of work")
    with pytest.raises(SnapshotFileError, match=r"other things in it \(thesis.tex\)"):
        write_report(disc, folder, scenes=False)
    assert (folder / "thesis.tex").read_text() == "years of work"
    empty = tmp_path / "empty"
    empty.mkdir()
    assert write_report(disc, empty, scenes=False).exists()


def refuse_to_measure(*_, **__):
    raise AssertionError("measured before the folder was looked at")


@pytest.mark.parametrize("kind", ["file", "link", "no parent", "other folder"])
def test_a_folder_that_cannot_be_is_refused_before_the_work(
    tmp_path, small_disc, monkeypatch, kind
):
    monkeypatch.setattr("fieldviz.report.material.measure", refuse_to_measure)
    target = tmp_path / "target"
    if kind == "file":
        target.write_text("a")
    elif kind == "link":
        target.symlink_to(tmp_path)
    elif kind == "no parent":
        target = tmp_path / "none" / "target"
    else:
        target.mkdir()
        (target / "report.txt").write_text("mine")
    before = sorted(tmp_path.rglob("*"))
    with pytest.raises(SnapshotFileError, match="Cannot write the report") as caught:
        write_report(snapshot(small_disc), target)
    assert len(str(caught.value).splitlines()) == 1
    assert sorted(tmp_path.rglob("*")) == before


@pytest.mark.usefixtures("quick")
@pytest.mark.parametrize("earlier", [False, True])
def test_a_full_disk_leaves_nothing_new(tmp_path, small_disc, monkeypatch, earlier):
    disc, folder = snapshot(small_disc), tmp_path / "report"
    if earlier:
        write_report(disc, folder, title="earlier", scenes=False)
    before = {path: path.read_bytes() for path in tmp_path.rglob("*") if path.is_file()}
    write_text = Path.write_text

    def full(self, text, *arguments, **settings):
        if self.name == "numbers.json":
            write_text(self, text[:1000], *arguments, **settings)
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        return write_text(self, text, *arguments, **settings)

    monkeypatch.setattr(Path, "write_text", full)
    with pytest.raises(SnapshotFileError, match="No space left"):
        write_report(disc, folder, title="later", scenes=False)
    assert {path: path.read_bytes() for path in tmp_path.rglob("*") if path.is_file()} == before
    assert len(list(tmp_path.iterdir())) == int(earlier)


@pytest.mark.usefixtures("quick")
def test_kept_numbers_are_used_again(tmp_path, series_folder, monkeypatch):
    path, kept = series_folder / "disc_0.h5", tmp_path / "kept"
    write_report(path, tmp_path / "a", scenes=False, kept=kept)
    monkeypatch.setattr("fieldviz.diagnostics.series_numbers.measure", refuse_to_measure)
    write_report(path, tmp_path / "b", scenes=False, kept=kept)
    one, other = ((tmp_path / name / "numbers.json").read_text("utf-8") for name in "ab")
    assert json.loads(one)["tables"] == json.loads(other)["tables"]


def test_an_unknown_scene_is_refused(tmp_path, small_disc):
    with pytest.raises(FieldvizError, match="expected scenes among flux-sheets, outflow"):
        write_report(snapshot(small_disc), tmp_path / "r", scenes=["sunset"])
