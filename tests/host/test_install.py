"""The installer: a folder of its own, nothing of NumPy or VTK in it, and a check that tells."""

import json
import shutil
import subprocess
from pathlib import Path
from xml.etree import ElementTree

import pytest

import fieldviz as fv
from fieldviz.commands import host as command
from fieldviz.host import finding
from fieldviz.host import install as installing
from fieldviz.host.finding import NEEDED, Host, ask_host, find_host

HOST = Host(Path("/opt/host/bin/pvpython"), "5.13.2", (3, 10, 13), "1.26.0", "9.3.1",
            {"h5py": "3.7.0", "scipy": "1.9.3"})  # fmt: skip


def test_what_is_needed_is_what_the_package_says():
    import tomllib

    project = tomllib.loads((Path(__file__).parents[2] / "pyproject.toml").read_text())["project"]
    said = dict(line.split(">=") for line in project["dependencies"])
    assert said.pop("numpy")
    assert said == NEEDED


def test_what_the_host_has_is_not_brought_twice():
    assert HOST.missing == ["numba>=0.60", "scipy>=1.10", "tomlkit>=0.12"]


def test_a_host_that_is_not_there(tmp_path, monkeypatch):
    with pytest.raises(fv.FieldvizError, match="expected pvpython in"):
        find_host(tmp_path)
    monkeypatch.setenv("PATH", str(tmp_path))
    monkeypatch.setattr(finding, "_PLACES", (str(tmp_path / "Host*/bin"),))
    with pytest.raises(fv.FieldvizError, match="on PATH or in the usual places"):
        find_host()
    (tmp_path / "Host 1" / "bin").mkdir(parents=True)
    program = tmp_path / "Host 1" / "bin" / "pvpython"
    program.write_text("#!/bin/sh\necho broken >&2\nexit 3\n")
    program.chmod(0o755)
    assert find_host() == find_host(program.parents[1]) == find_host(program) == program
    with pytest.raises(fv.FieldvizError, match="got 'broken'"):
        ask_host(program)


def fake_pip(*arguments):
    folder = Path(arguments[arguments.index("--target") + 1])
    for name in ("numba", "numba-0.68.1.dist-info", "numpy", "numpy-1.26.0.dist-info",
                 "numpy.libs", "vtk.py", "vtkmodules", "bin"):  # fmt: skip
        path = folder / name
        path.write_text("") if name.endswith(".py") else path.mkdir()
    fake_pip.said = arguments
    fake_pip.constraint = Path(arguments[arguments.index("--constraint") + 1]).read_text()


def test_the_folder_is_whole_and_keeps_numpy_and_vtk_out(tmp_path, monkeypatch):
    monkeypatch.setattr(installing, "_pip", fake_pip)
    monkeypatch.setattr(installing, "find_host", lambda given: HOST.pvpython)
    monkeypatch.setattr(installing, "ask_host", lambda pvpython: HOST)
    target = tmp_path / "my & folder"
    done = installing.install(folder=target, macros=tmp_path / "Macros")
    assert sorted(p.name for p in (target / "packages").iterdir()) == [
        "fieldviz", "numba", "numba-0.68.1.dist-info",
    ]  # fmt: skip
    assert fake_pip.constraint == "numpy==1.26.0\n"
    assert "3.10" in fake_pip.said
    assert "--only-binary=:all:" in fake_pip.said
    (plugin,) = ElementTree.parse(target / "plugins.xml").getroot()
    declared = ElementTree.parse(plugin.get("filename")).getroot()
    icons = [one.get("icon") for one in declared.iter() if one.get("icon")]
    assert icons
    assert all(Path(icon).is_file() for icon in icons)
    assert not list(target.rglob("*.pyc"))
    starter = (target / "run").read_text()
    subprocess.run(["/bin/sh", "-n", str(target / "run")], check=True)
    assert "/opt/host/bin" in starter
    assert json.loads((target / installing.MARK).read_text())["host"] == str(HOST.pvpython)
    assert len(done.macros) == 2
    assert all(path.is_file() for path in done.macros)
    for words in ("undo      rm -r '", *(str(path) for path in done.macros)):
        assert words in done.text
    # Again over the first; not over anything else.
    installing.install(folder=target)
    (tmp_path / "other").mkdir()
    (tmp_path / "other" / "thesis.tex").write_text("years of work")
    with pytest.raises(fv.FieldvizError, match="got something else"):
        installing.install(folder=tmp_path / "other")
    assert (tmp_path / "other" / "thesis.tex").is_file()


def test_no_wheels_leaves_nothing_behind(tmp_path, monkeypatch):
    def no_pip(*arguments):
        raise fv.FieldvizError("Cannot fetch packages: none.")

    monkeypatch.setattr(installing, "_pip", no_pip)
    monkeypatch.setattr(installing, "find_host", lambda given: HOST.pvpython)
    monkeypatch.setattr(installing, "ask_host", lambda pvpython: HOST)
    with pytest.raises(fv.FieldvizError, match="none"):
        installing.install(folder=tmp_path / "folder")
    assert not list(tmp_path.iterdir())


def test_no_installation(tmp_path):
    with pytest.raises(fv.FieldvizError, match="fieldviz host install"):
        command.check(tmp_path, Path("sample_wedge/saltmarsh_000.h5"))


def test_install_and_check_in_the_real_host(pvpython, packages, tmp_path, monkeypatch):
    """The kernels run uncompiled here: in a new folder they would be compiled anew."""
    monkeypatch.setattr(
        installing, "fetch", lambda host, folder: shutil.copytree(packages, folder) and ("copied",)
    )
    monkeypatch.setenv("NUMBA_DISABLE_JIT", "1")
    monkeypatch.setenv("PYTHONPATH", "/nowhere")  # what is set outside must not matter
    before = sorted(p.name for p in pvpython.resolve().parent.iterdir())
    text = command.install(pvpython, tmp_path / "plugin", macros=False)
    assert f"host      {pvpython.parent}" in text
    fv.write_snapshot(tmp_path / "tiny.h5", fv.demo_disc(shape=(2, 24, 16)))
    table = command.check(tmp_path / "plugin", tmp_path / "tiny.h5")
    assert table.count("  yes  ") == len(table.splitlines()) - 1 == 10
    (tmp_path / "bad.h5").write_text("no")
    with pytest.raises(fv.FieldvizError, match="failures in FieldvizSnapshotReader"):
        command.check(tmp_path / "plugin", tmp_path / "bad.h5")
    # The starter sets what the plugin needs; the plugin is there without being asked for.
    script = tmp_path / "s.py"
    script.write_text("from paraview import simple\nprint(hasattr(simple, 'FieldvizFieldLines'))\n")
    done = subprocess.run(
        [tmp_path / "plugin" / "run", "pvpython", script], capture_output=True, text=True,
        check=True, timeout=300,
    )  # fmt: skip
    assert done.stdout.split() == ["True"]
    assert sorted(p.name for p in pvpython.resolve().parent.iterdir()) == before
