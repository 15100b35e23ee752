"""Install the plugin into a folder of its own; the host's own folders are never changed."""

from __future__ import annotations

import json
import shlex
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from xml.sax.saxutils import quoteattr

from fieldviz._version import __version__
from fieldviz.errors import FieldvizError
from fieldviz.host.declaration import declaration
from fieldviz.host.finding import Host, ask_host, clean_environment, find_host
from fieldviz.output import whole_folder

__all__ = [
    "MARK",
    "Installed",
    "default_folder",
    "fetch",
    "host_environment",
    "install",
    "macros_folder",
]

MARK = "fieldviz_host.json"  # by this file an installation is known
# Never beside the host's own: VTK twice in one process crashes, NumPy must be the host's.
_KEPT_OUT = ("numpy", "vtk", "vtkmodules", "pyvista", "bin", "share")
_PIP_LIMIT = 1800  # seconds
_PACKAGE = Path(__file__).resolve().parents[1]
_MACROS = _PACKAGE / "host" / "macros"


@dataclass(frozen=True)
class Installed:
    """What was installed.

    Attributes
    ----------
    folder : Path
        Everything but the macros.
    host : Host
    brought : tuple of str
        Distributions that were fetched.
    macros : tuple of Path
    """

    folder: Path
    host: Host
    brought: tuple[str, ...]
    macros: tuple[Path, ...]

    @property
    def text(self) -> str:
        """What was done, how to use it, how to undo it."""
        host, run = self.host, shlex.quote(str(self.folder / "run"))
        python = ".".join(map(str, host.python))
        rows = [
            f"host      {host.pvpython.parent}: version {host.version}, Python {python}, "
            f"NumPy {host.numpy}, VTK {host.vtk}",
            f"brought   {', '.join(self.brought) or 'nothing, the host has all'}",
            f"folder    {self.folder}",
            *(f"macro     {path}" for path in self.macros),
            "",
            f"use       {run} paraview            (or pvpython, pvbatch, pvserver)",
            f"check     fieldviz host check --folder {shlex.quote(str(self.folder))}",
            "undo      rm -r " + " ".join(
                shlex.quote(str(path)) for path in (self.folder, *self.macros)
            ),
        ]  # fmt: skip
        return "\n".join(rows)


def default_folder() -> Path:
    """Where the plugin goes if no folder is named."""
    return Path.home() / ".local" / "share" / "fieldviz" / "host"


def macros_folder() -> Path:
    """Where the host looks for the user's macros."""
    return Path.home() / ".config" / "ParaView" / "Macros"


def install(
    host: Path | None = None, folder: Path | None = None, *, macros: Path | None = None
) -> Installed:
    """Install the plugin for one host.

    Parameters
    ----------
    host : Path, optional
        The host's folder or one of its programs; searched by default.
    folder : Path, optional
        Where to; an earlier installation there is replaced.
    macros : Path, optional
        Folder for macros, which become buttons of the host; none by default.

    Returns
    -------
    Installed

    Raises
    ------
    FieldvizError
        No host, a folder that holds something else, or no wheels for the host's Python.
    """
    found = ask_host(find_host(host))
    if found.python < (3, 10, 0):
        raise FieldvizError(
            f"Cannot install for this host: expected Python 3.10 or later in it, got "
            f"{'.'.join(map(str, found.python))}; use a host of version 5.11 or later."
        )
    target = (folder or default_folder()).expanduser().absolute()
    if target.exists() and not (target / MARK).is_file():
        raise FieldvizError(
            f"Cannot install into {target}: expected no such folder or an earlier installation, "
            "got something else; name another folder."
        )
    target.parent.mkdir(parents=True, exist_ok=True)
    with whole_folder(target) as temporary:
        packages = temporary / "packages"
        brought = fetch(found, packages)
        shutil.copytree(
            _PACKAGE,
            packages / "fieldviz",
            ignore=shutil.ignore_patterns("__pycache__", "*.nbi", "*.nbc"),
        )
        _write_plugin(temporary, target, found)
    return Installed(target, found, brought, _write_macros(macros))


def fetch(host: Host, packages: Path) -> tuple[str, ...]:
    """Put what the host lacks into a new folder `packages`, built for its Python and NumPy.

    Returns
    -------
    tuple of str
        What was fetched, with versions.

    Raises
    ------
    FieldvizError
        No network, or no wheels that fit.
    """
    packages.mkdir()
    if not host.missing:
        return ()
    with tempfile.TemporaryDirectory() as place:
        constraint = Path(place) / "constraint.txt"
        constraint.write_text(f"numpy=={host.numpy}\n", encoding="utf-8")
        _pip(
            "install", "--quiet", "--disable-pip-version-check", "--no-warn-conflicts",
            "--target", str(packages), "--only-binary=:all:", "--implementation", "cp",
            "--python-version", ".".join(map(str, host.python[:2])),
            "--constraint", str(constraint), *host.missing,
        )  # fmt: skip
    for path in list(packages.iterdir()):
        stem = path.name.split("-")[0].split(".")[0].lower()
        if stem in _KEPT_OUT:
            shutil.rmtree(path) if path.is_dir() else path.unlink()
    return tuple(sorted(p.name.removesuffix(".dist-info") for p in packages.glob("*.dist-info")))


def _pip(*arguments: str) -> None:
    try:
        done = subprocess.run(
            [sys.executable, "-m", "pip", *arguments],
            capture_output=True,
            text=True,
            timeout=_PIP_LIMIT,
            check=False,
        )
    except subprocess.TimeoutExpired as error:
        raise FieldvizError(
            f"Cannot fetch packages: expected pip to finish within {_PIP_LIMIT} s, got no end; "
            "check the network."
        ) from error
    if done.returncode:
        lines = [line for line in done.stderr.splitlines() if line.strip()]
        reason = next((line for line in lines if line.startswith("ERROR")), (lines or ["?"])[-1])
        raise FieldvizError(
            f"Cannot fetch packages for the host: expected wheels that fit its Python and NumPy, "
            f"got '{reason.strip()}'; check the network, and that `{sys.executable} -m pip` works."
        )


def host_environment(folder: Path) -> dict[str, str]:
    """Environment variables with which the host finds an installation."""
    return {
        "PYTHONPATH": str(folder / "packages"),
        "PV_PLUGIN_CONFIG_FILE": str(folder / "plugins.xml"),
        "NUMBA_CACHE_DIR": str(folder / "cache"),
    }


def _write_plugin(temporary: Path, target: Path, host: Host) -> None:
    """Declaration, list of plugins, starter and mark; they name the final folder."""
    (temporary / "plugin").mkdir()
    (temporary / "cache").mkdir()
    icons = target / "packages" / "fieldviz" / "host" / "icons"
    xml = temporary / "plugin" / "fieldviz_plugin.xml"
    xml.write_text(declaration(icons), encoding="utf-8")
    place = quoteattr(str(target / "plugin" / xml.name))
    (temporary / "plugins.xml").write_text(
        "<?xml version='1.0'?>\n<Plugins>\n"
        f'  <Plugin name="fieldviz_plugin" filename={place} auto_load="1"/>\n</Plugins>\n',
        encoding="utf-8",
    )
    _write_starter(temporary / "run", target, host)
    mark = {"fieldviz": __version__, "host": str(host.pvpython), "version": host.version}
    (temporary / MARK).write_text(json.dumps(mark, indent=2) + "\n", encoding="utf-8")


def _write_starter(path: Path, target: Path, host: Host) -> None:
    """Write a shell script that starts a program of the host with the plugin."""
    settings = host_environment(target)
    lines = [
        "#!/bin/sh",
        "# Starts a program of the host with the plugin loaded: run paraview, run pvpython ...",
        *(f"export {name}={shlex.quote(value)}" for name, value in settings.items()),
        "unset PYTHONHOME VIRTUAL_ENV",
        'program="${1:-paraview}"',
        '[ "$#" -gt 0 ] && shift',
        f'exec {shlex.quote(str(host.pvpython.parent))}/"$program" "$@"',
    ]
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    path.chmod(0o755)


def _write_macros(folder: Path | None) -> tuple[Path, ...]:
    if folder is None:
        return ()
    folder = folder.expanduser().absolute()
    folder.mkdir(parents=True, exist_ok=True)
    written = []
    for source in sorted(_MACROS.glob("*.py")):
        shutil.copyfile(source, folder / source.name)
        written.append(folder / source.name)
    return tuple(written)


def run_host(
    folder: Path, program: str, arguments: Sequence[str], *, limit: float
) -> subprocess.CompletedProcess[str]:
    """Run a program of the host with an installation, its output captured."""
    mark = folder / MARK
    if not mark.is_file():
        raise FieldvizError(
            f"Cannot use {folder}: expected an installation of the plugin, got none; run "
            "`fieldviz host install` first."
        )
    host = Path(json.loads(mark.read_text(encoding="utf-8"))["host"])
    return subprocess.run(
        [host.parent / program, *arguments],
        capture_output=True,
        text=True,
        timeout=limit,
        env=clean_environment() | host_environment(folder),
        check=False,
    )
