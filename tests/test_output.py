"""Files and folders appear whole under their final name, or not at all."""

from __future__ import annotations

import errno
import os
from pathlib import Path

import pytest

from fieldviz.errors import FieldvizError, SnapshotFileError
from fieldviz.output import whole_file, whole_folder


def one_line(caught):
    message = str(caught.value)
    assert len(message.splitlines()) == 1
    assert message.startswith("Cannot write")
    return message


def no_space():
    raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))


def half_a_file(path, error):
    with whole_file(path) as temporary:
        temporary.write_text("half")
        raise error


def half_a_folder(path, error):
    with whole_folder(path) as temporary:
        (temporary / "a.txt").write_text("half")
        raise error


def test_a_file_appears_when_it_is_whole(tmp_path):
    path = tmp_path / "a.txt"
    with whole_file(path) as temporary:
        temporary.write_text("new")
        assert not path.exists()
        assert temporary.suffix == ".txt"
        assert temporary.parent == tmp_path
    assert path.read_text() == "new"
    assert list(tmp_path.iterdir()) == [path]


def test_an_older_file_is_replaced_at_the_end_only(tmp_path):
    path = tmp_path / "a.txt"
    path.write_text("old")
    with whole_file(str(path)) as temporary:
        temporary.write_text("new")
        assert path.read_text() == "old"
    assert path.read_text() == "new"


@pytest.mark.parametrize("error", [KeyboardInterrupt, ValueError, SystemExit])
def test_an_error_leaves_the_older_file(tmp_path, error):
    path = tmp_path / "a.txt"
    path.write_text("old")
    with pytest.raises(error):
        half_a_file(path, error)
    assert path.read_text() == "old"
    assert list(tmp_path.iterdir()) == [path]


def test_a_full_disk_is_one_line(tmp_path):
    full = OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
    with pytest.raises(SnapshotFileError, match="No space left") as caught:
        half_a_file(tmp_path / "a.txt", full)
    assert "Free some space" in one_line(caught)
    assert list(tmp_path.iterdir()) == []


def test_errors_of_several_lines_become_one_line(tmp_path):
    with pytest.raises(SnapshotFileError) as caught, whole_file(tmp_path / "a.txt"):
        raise OSError("first line\nsecond line")
    assert "first line" in one_line(caught)


def test_a_clear_error_passes_unchanged(tmp_path):
    with pytest.raises(SnapshotFileError, match=r"^said already$"), whole_file(tmp_path / "a.txt"):
        raise SnapshotFileError("said already")


def test_a_writer_that_wrote_nothing_is_noticed(tmp_path):
    with pytest.raises(SnapshotFileError) as caught, whole_file(tmp_path / "a.txt"):
        pass
    one_line(caught)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("whole", [whole_file, whole_folder])
def test_the_parent_folder_must_exist(tmp_path, whole):
    with (
        pytest.raises(FieldvizError, match="got no folder") as caught,
        whole(tmp_path / "no" / "a"),
    ):
        pytest.fail("the work must not begin")
    one_line(caught)


@pytest.mark.parametrize("whole", [whole_file, whole_folder])
def test_the_parent_folder_must_be_writable(tmp_path, monkeypatch, whole):
    # Root may write anywhere, so the answer of the system is given by hand.
    monkeypatch.setattr(os, "access", lambda path, mode: Path(path) != tmp_path or mode != os.W_OK)
    with pytest.raises(FieldvizError, match="no permission") as caught, whole(tmp_path / "a"):
        pytest.fail("the work must not begin")
    one_line(caught)


def test_a_folder_is_no_file_name(tmp_path):
    with pytest.raises(FieldvizError, match="got a folder") as caught, whole_file(tmp_path):
        pytest.fail("the work must not begin")
    one_line(caught)


def test_a_folder_appears_when_it_is_whole(tmp_path):
    path = tmp_path / "pages"
    with whole_folder(path) as temporary:
        (temporary / "a.txt").write_text("new")
        assert not path.exists()
    assert [entry.name for entry in path.iterdir()] == ["a.txt"]
    with whole_folder(path) as temporary:
        (temporary / "b.txt").write_text("newer")
        assert [entry.name for entry in path.iterdir()] == ["a.txt"]
    assert [entry.name for entry in path.iterdir()] == ["b.txt"]
    assert list(tmp_path.iterdir()) == [path]


@pytest.mark.parametrize("error", [KeyboardInterrupt, ValueError, OSError])
def test_an_error_leaves_the_older_folder(tmp_path, error):
    path = tmp_path / "pages"
    path.mkdir()
    (path / "a.txt").write_text("old")
    seen = FieldvizError if error is OSError else error
    with pytest.raises(seen):
        half_a_folder(path, error)
    assert (path / "a.txt").read_text() == "old"
    assert list(tmp_path.iterdir()) == [path]


def test_a_folder_does_not_replace_a_file(tmp_path):
    path = tmp_path / "pages"
    path.write_text("a file")
    with pytest.raises(SnapshotFileError) as caught, whole_folder(path) as temporary:
        (temporary / "a.txt").write_text("new")
    one_line(caught)
    assert path.read_text() == "a file"
    assert list(tmp_path.iterdir()) == [path]


def test_a_folder_that_cannot_be_made_is_one_line(tmp_path, monkeypatch):
    monkeypatch.setattr(Path, "mkdir", lambda *_, **__: no_space())
    with (
        pytest.raises(SnapshotFileError, match="No space left") as caught,
        whole_folder(tmp_path / "a"),
    ):
        pytest.fail("the work must not begin")
    one_line(caught)
