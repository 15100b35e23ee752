"""Find the host application and ask it what it is made of."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
from dataclasses import dataclass
from pathlib import Path

from fieldviz.errors import FieldvizError

__all__ = ["NEEDED", "Host", "ask_host", "clean_environment", "find_host"]

# What the base of fieldviz needs beside NumPy: distribution and least version.
NEEDED = {"h5py": "3.7", "numba": "0.60", "scipy": "1.10", "tomlkit": "0.12"}
_PLACES = (
    "/opt/ParaView*/bin", "/opt/paraview*/bin", "/usr/local/ParaView*/bin", "/usr/local/bin",
    "~/ParaView*/bin", "/Applications/ParaView*.app/Contents/bin",
)  # fmt: skip
_MARK = "fieldviz asks: "
_QUESTION = f"""
import json, sys
import numpy
from vtkmodules.vtkCommonCore import vtkVersion
have = {{}}
for name in {tuple(NEEDED)!r}:
    try:
        have[name] = str(__import__(name).__version__)
    except Exception:
        pass
try:
    from paraview import __version__ as version
except ImportError:
    version = "unknown"
print({_MARK!r} + json.dumps({{
    "version": str(version), "python": list(sys.version_info[:3]), "numpy": numpy.__version__,
    "vtk": vtkVersion.GetVTKVersion(), "have": have,
}}))
"""
_LONGEST = 180  # seconds that a first start from a slow disk may take


@dataclass(frozen=True)
class Host:
    """The host application as it said itself.

    Attributes
    ----------
    pvpython : Path
        Its Python interpreter.
    version : str
    python : (int, int, int)
    numpy, vtk : str
    have : dict of str to str
        Versions of NEEDED that it brings along.
    """

    pvpython: Path
    version: str
    python: tuple[int, int, int]
    numpy: str
    vtk: str
    have: dict[str, str]

    @property
    def missing(self) -> list[str]:
        """Of NEEDED what it has not, or too old, as requirements.

        What it has is not brought twice: two builds of HDF5 in one process fail.
        """
        return [
            f"{name}>={least}"
            for name, least in NEEDED.items()
            if _numbers(self.have.get(name, "0")) < _numbers(least)
        ]


def find_host(given: Path | None = None) -> Path:
    """Find the host's Python interpreter.

    Parameters
    ----------
    given : Path, optional
        The interpreter, another program of the host beside it, or its folder; by default what is on
        PATH or in the usual places.

    Returns
    -------
    Path

    Raises
    ------
    FieldvizError
    """
    if given is not None:
        given = Path(given).expanduser()
        folder = given if given.is_dir() else given.parent
        for candidate in (folder / "pvpython", folder / "bin" / "pvpython"):
            if candidate.is_file():
                return candidate.absolute()
        raise FieldvizError(
            f"Cannot find the host: expected pvpython in {folder} or its bin, got none; name the "
            "folder in which ParaView lies, or its pvpython."
        )
    on_path = shutil.which("pvpython")
    if on_path:
        return Path(on_path).absolute()
    for pattern in _PLACES:
        place = Path(pattern).expanduser()
        for folder in sorted(Path(place.anchor).glob(str(place.relative_to(place.anchor)))):
            if (folder / "pvpython").is_file():
                return folder / "pvpython"
    raise FieldvizError(
        "Cannot find the host: expected pvpython on PATH or in the usual places, got none; install "
        "ParaView, or name the folder it lies in."
    )


def clean_environment() -> dict[str, str]:
    """The environment without what would lead the host's Python to another one's packages."""
    led_astray = ("PYTHONPATH", "PYTHONHOME", "VIRTUAL_ENV", "PV_PLUGIN_PATH",
                  "PV_PLUGIN_CONFIG_FILE")  # fmt: skip
    return {name: value for name, value in os.environ.items() if name not in led_astray}


def ask_host(pvpython: Path) -> Host:
    """Start the host's Python once and let it say its versions.

    Raises
    ------
    FieldvizError
        If it does not answer.
    """
    try:
        done = subprocess.run(
            [pvpython, "-c", _QUESTION],
            capture_output=True,
            text=True,
            timeout=_LONGEST,
            env=clean_environment(),
            check=False,
        )
    except (OSError, subprocess.TimeoutExpired) as error:
        raise FieldvizError(
            f"Cannot ask {pvpython}: expected an answer within {_LONGEST} s, got {error}."
        ) from error
    answers = [line for line in done.stdout.splitlines() if line.startswith(_MARK)]
    if not answers:
        last = " ".join((done.stderr or done.stdout).split())[-200:] or "nothing"
        raise FieldvizError(
            f"Cannot ask {pvpython}: expected its versions, got '{last}'; see whether it starts."
        )
    said = json.loads(answers[-1].removeprefix(_MARK))
    major, minor, patch = said["python"]
    return Host(pvpython, said["version"], (major, minor, patch), said["numpy"], said["vtk"],
                said["have"])  # fmt: skip


def _numbers(version: str) -> tuple[int, ...]:
    """The leading numbers of a version, to compare."""
    found = []
    for part in version.split(".")[:3]:
        digits = "".join(c for c in part if c.isdigit())
        if not digits:
            break
        found.append(int(digits))
    return tuple(found)
