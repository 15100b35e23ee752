"""Check an installation: load the plugin in the host, read a snapshot, run every filter."""

from __future__ import annotations

import json
import subprocess
import tempfile
from dataclasses import dataclass
from pathlib import Path

from fieldviz.errors import FieldvizError
from fieldviz.host import try_in_host
from fieldviz.host.install import default_folder, run_host
from fieldviz.snapshots.writer import write_snapshot
from fieldviz.wedge.demo import demo_disc

__all__ = ["Checked", "Step", "check"]

_LIMIT = 900  # seconds; the first run compiles


@dataclass(frozen=True)
class Step:
    """One step of a check.

    Attributes
    ----------
    name : str
    error : str
        In one line; empty if it works.
    cells, rows : int
        Of all outputs.
    seconds : float
    """

    name: str
    error: str
    cells: int
    rows: int
    seconds: float


@dataclass(frozen=True)
class Checked:
    """All steps of a check."""

    folder: Path
    steps: tuple[Step, ...]

    @property
    def failed(self) -> tuple[str, ...]:
        """Names of the steps that do not work."""
        return tuple(step.name for step in self.steps if step.error)

    @property
    def text(self) -> str:
        """A table of what works."""
        rows = [f"{'step':32s}  works  {'cells':>8s}  {'rows':>4s}  {'s':>6s}"]
        for step in self.steps:
            works = "no" if step.error else "yes"
            rows.append(
                f"{step.name:32s}  {works:5s}  {step.cells:8d}  {step.rows:4d}  {step.seconds:6.2f}"
                + (f"  {step.error}" if step.error else "")
            )
        return "\n".join(rows)


def check(folder: Path | None = None, snapshot: Path | None = None) -> Checked:
    """Try an installation in its host.

    Parameters
    ----------
    folder : Path, optional
        The installation; the default folder if none is named.
    snapshot : Path, optional
        A file in fieldviz's own layout; a small demonstration disc by default.

    Returns
    -------
    Checked

    Raises
    ------
    FieldvizError
        No installation, or the host ended before it had tried everything.
    """
    folder = (folder or default_folder()).expanduser().absolute()
    with tempfile.TemporaryDirectory() as place:
        if snapshot is None:
            snapshot = Path(place) / "disc.h5"
            write_snapshot(snapshot, demo_disc(shape=(8, 48, 64), levels=2, precision="single"))
        xml = folder / "plugin" / "fieldviz_plugin.xml"
        script = folder / "packages" / "fieldviz" / "host" / "try_in_host.py"
        try:
            done = run_host(
                folder, "pvpython", [str(script), str(xml), str(snapshot.absolute())], limit=_LIMIT
            )
        except subprocess.TimeoutExpired as error:
            raise FieldvizError(
                f"Cannot check {folder}: expected the host to end within {_LIMIT} s, got no end."
            ) from error
    mark = try_in_host.MARK
    answers = [line for line in done.stdout.splitlines() if line.startswith(mark)]
    said = [json.loads(line.removeprefix(mark)) for line in answers]
    steps = tuple(
        Step(one["step"], one["error"], one["cells"], one["rows"], one["seconds"]) for one in said
    )
    wanted = sum(len(try_in_host.declared(xml, group)) for group in ("sources", "filters"))
    if len(steps) != wanted:
        last = " ".join(done.stderr.split())[-300:] or "no message"
        raise FieldvizError(
            f"Cannot check {folder}: expected {wanted} steps tried in the host, got {len(steps)}; "
            f"it ended with code {done.returncode}: {last}"
        )
    return Checked(folder, steps)
