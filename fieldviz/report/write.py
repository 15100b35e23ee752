"""Write a report: a folder with the page, its tables as CSV, and all numbers as JSON."""

from __future__ import annotations

import os
import shlex
from collections.abc import Iterable
from concurrent.futures import Executor
from pathlib import Path
from typing import TYPE_CHECKING, Any

from fieldviz._version import __version__
from fieldviz.diagnostics.plain import json_text, plain
from fieldviz.diagnostics.tables import Table
from fieldviz.errors import SnapshotFileError
from fieldviz.output import whole_folder
from fieldviz.report.basis import basis
from fieldviz.report.choice import FOLDER as TABLES
from fieldviz.report.choice import shown_tables
from fieldviz.report.contents import Contents, Picture
from fieldviz.report.diagrams import Diagram, report_diagrams
from fieldviz.report.findings import figures, kicker, leads, times_text, verdict
from fieldviz.report.markup import clean
from fieldviz.report.material import Material, Progress, Source, gather
from fieldviz.report.page import page
from fieldviz.report.pictures import FOLDER as PICTURES
from fieldviz.report.pictures import diagram_picture, scene_names, scene_pictures
from fieldviz.report.tables import report_tables
from fieldviz.report.texts import listed, plain_number
from fieldviz.snapshots.series import SnapshotSeries
from fieldviz.wedge.snapshot import Snapshot

if TYPE_CHECKING:
    from fieldviz.snapshots.layout_description import LayoutDescription

__all__ = ["FORM", "PAGE", "write_report"]

FORM = "fieldviz report, form 1"
PAGE, NUMBERS = "report.html", "numbers.json"
_OURS = frozenset({PAGE, NUMBERS, TABLES, PICTURES})


def write_report(
    series_or_snapshot_or_paths: Source,
    folder: str | Path,
    *,
    title: str | None = None,
    scenes: bool | Iterable[str] = True,
    layout: str | Path | LayoutDescription | None = None,
    kept: str | Path | None = None,
    executor: Executor | str | None = None,
    progress: Progress | None = None,
    command: str | None = None,
) -> Path:
    """Measure a snapshot or a series and write a report on it.

    Parameters
    ----------
    series_or_snapshot_or_paths : Snapshot, SnapshotSeries, or pattern, path or iterable of paths
    folder : str or Path
        Its parent exists. An earlier report of that name is replaced, another folder is not.
    title : str, optional
        By default that of the snapshot, or the names of the files.
    scenes : bool or iterable of str
        Whether to draw scenes of the last snapshot, or which ones.
    layout : str, Path or LayoutDescription, optional
        Layout description for paths; a series has its own.
    kept : str or Path, optional
        Folder for the numbers of every snapshot, so that a report that was stopped goes on.
    executor : concurrent.futures.Executor or "processes", optional
        Where snapshots are measured side by side.
    progress : callable (done, total, what), optional
    command : str, optional
        How to make the report again; by default worked out from the other parameters.

    Returns
    -------
    Path
        The page, report.html. Beside it: numbers.json, tables/*.csv, pictures/*.png.

    Raises
    ------
    FieldvizError
        If nothing can be measured or the folder cannot be written; then nothing is left behind.

    Notes
    -----
    The page holds its pictures, runs no script, and its policy forbids any request to a host.

    Examples
    --------
    >>> import fieldviz as fv
    >>> from fieldviz.report.write import write_report
    >>> disc = fv.demo_disc(shape=(2, 32, 48))
    >>> write_report(disc, "report", scenes=False).name  # doctest: +SKIP
    'report.html'
    """
    target, source, wanted = Path(folder), series_or_snapshot_or_paths, scene_names(scenes)
    if not isinstance(source, Snapshot | SnapshotSeries | str | Path):
        source = list(source)
    _check_folder(target)
    again = command or _command(source, target, title, bool(wanted), layout)
    material = gather(source, layout=layout, kept=kept, executor=executor, progress=progress)
    of_series, of_last = report_diagrams(material)
    if progress is not None:
        progress(1, 1, "drawing diagrams")
    tables = report_tables(material)
    with whole_folder(target) as temporary:
        pictures, missing = scene_pictures(
            material.last, temporary, scenes=wanted, progress=progress
        )
        contents = _contents(
            material, title, pictures, missing, _groups(material, of_series, of_last), tables, again
        )
        _write(temporary, contents, tables, material)
    return target / PAGE


def _check_folder(folder: Path) -> None:
    """Refuse early what would be refused after all the work, and a folder that is not a report."""
    if folder.is_symlink() or (folder.exists() and not folder.is_dir()):
        raise SnapshotFileError(
            f"Cannot write the report {folder}: expected a folder or a new name, got a file or a "
            "link; choose another name."
        )
    if not folder.parent.is_dir() or not os.access(folder.parent, os.W_OK):
        raise SnapshotFileError(
            f"Cannot write the report {folder}: expected a folder {folder.parent} that exists and "
            "may be written, got none; make it first or name another place."
        )
    if folder.is_dir():
        names = {path.name for path in folder.iterdir()}
        if names and not (names <= _OURS and PAGE in names):
            other = sorted(clean(name) for name in names - _OURS) or ["no report.html"]
            raise SnapshotFileError(
                f"Cannot write the report {folder}: expected a new name or an earlier report, got "
                f"a folder with other things in it ({other[0]}); name another folder."
            )


def _command(source: Any, folder: Path, title: str | None, scenes: bool, layout: object) -> str:
    """A command that makes the report again; for a snapshot in memory a call of the library."""
    if isinstance(source, Snapshot):
        words = [repr(str(folder))] + ([f"title={title!r}"] if title is not None else [])
        call = (
            f"write_report(snapshot, {', '.join([*words, *([] if scenes else ['scenes=False'])])})"
        )
        return f"from fieldviz.report.write import write_report\n{call}"
    if isinstance(source, SnapshotSeries):
        names: list[str] = [str(path) for path in (*source.paths, *source.dropped)]
        layout = source.layout
    else:
        names = [str(source)] if isinstance(source, str | Path) else [str(one) for one in source]
    words = ["fieldviz", "report", *names, "-o", str(folder)]
    if title is not None:
        words += ["--title", title]
    if isinstance(layout, str | Path):
        words += ["--layout", str(layout)]
    return shlex.join(words) + ("" if scenes else " --no-scenes")


def _groups(
    material: Material, of_series: tuple[Diagram, ...], of_last: tuple[Diagram, ...]
) -> tuple[tuple[str, tuple[Picture, ...]], ...]:
    last = f"Against radius at t = {plain_number(material.records[-1].time or 0.0, 6)}"
    parts = (("In time", of_series), (last if material.is_series else "Against radius", of_last))
    return tuple((head, tuple(map(diagram_picture, some))) for head, some in parts if some)


def _contents(
    material: Material,
    title: str | None,
    pictures: tuple[Picture, ...],
    missing: tuple[str, ...],
    diagrams: tuple[tuple[str, tuple[Picture, ...]], ...],
    tables: dict[str, Table],
    command: str,
) -> Contents:
    sentence, aside = verdict(material)
    judged = material.verdict or {}
    pairs = tuple(judged[name] for name in ("outflow", "bend", "torque") if judged.get(name))
    shown, files = shown_tables(material, tables)
    return Contents(
        _title(material) if title is None else title,
        kicker(material),
        sentence,
        aside,
        leads(material),
        pairs,
        f"t = {plain_number(material.records[-1].time or 0.0, 6)}",
        figures(material),
        pictures,
        missing,
        diagrams,
        shown,
        files,
        basis(material),
        command,
        _terms(material),
    )


def _title(material: Material) -> str:
    numbers = material.records[-1].numbers or {}
    if numbers["title"]:
        return str(numbers["title"])
    names = [record.path.name for record in material.records]
    return names[0] if len(names) == 1 else f"{names[0]} to {names[-1]}"


def _terms(material: Material) -> tuple[tuple[str, str], ...]:
    names = [record.path.name for record in material.records]
    files = "a snapshot in memory" if material.in_memory else listed(names)
    return (
        ("Version", f"fieldviz {__version__}"),
        ("File" if len(names) == 1 else "Files", files),
        ("Time of the data", f"{times_text(material)} (code units)"),
    )


def _write(folder: Path, contents: Contents, tables: dict[str, Table], material: Material) -> None:
    # Odd file names may hold lone surrogates: escaped in JSON, replaced on the page and in tables.
    (folder / PAGE).write_text(page(contents), encoding="utf-8")
    (folder / TABLES).mkdir()
    for name, table in tables.items():
        (folder / TABLES / f"{name}.csv").write_text(_csv(table), encoding="utf-8")
    (folder / NUMBERS).write_text(
        json_text(plain(_numbers(contents, tables, material))) + "\n",
        encoding="utf-8",
        errors="backslashreplace",
    )


def _csv(table: Table) -> str:
    return "\n".join(clean(line) for line in table.csv().split("\n"))


def _numbers(contents: Contents, tables: dict[str, Table], material: Material) -> dict[str, object]:
    snapshots = [
        {key: value for key, value in (record.numbers or {}).items() if key != "tables"}
        for record in material.records
    ]
    return {
        "form": FORM,
        "version": __version__,
        "title": contents.title,
        "sentence": " ".join(filter(None, (contents.sentence, contents.aside))),
        "command": contents.command,
        "times": material.series.times,
        "verdict": material.verdict,
        "no_verdict": material.no_verdict or None,
        "notes": material.series.notes,
        "tables": tables,
        "snapshots": snapshots,
    }
