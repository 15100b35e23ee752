"""The real host: skipped with a reason where it is absent, unless FIELDVIZ_REQUIRE_HOST=1.

The host needs Numba and tomlkit for its Python in a folder of their own. FIELDVIZ_HOST_PACKAGES
names that folder; without it the installer fetches them once a session.
"""

from __future__ import annotations

import json
import os
import shutil
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
MARK = "answer: "
# More ranks than cores, perhaps as root in a container; one thread each.
_MPI = {
    "OMPI_MCA_rmaps_base_oversubscribe": "1",
    "OMPI_ALLOW_RUN_AS_ROOT": "1",
    "OMPI_ALLOW_RUN_AS_ROOT_CONFIRM": "1",
    "NUMBA_NUM_THREADS": "1",
}
LIMIT = 600  # seconds; a first run compiles


def _absent(reason: str) -> None:
    if os.environ.get("FIELDVIZ_REQUIRE_HOST") == "1":
        pytest.fail(f"the host is required here: {reason}")
    pytest.skip(f"no host: {reason}")


@pytest.fixture(scope="session")
def pvpython() -> Path:
    found = shutil.which("pvpython")
    if found is None:
        _absent("pvpython is not on PATH (Debian: paraview, python3-paraview)")
    return Path(found)


@pytest.fixture(scope="session")
def packages(pvpython, tmp_path_factory) -> Path:
    """A folder with what the host's Python lacks; fieldviz itself is this checkout."""
    given = os.environ.get("FIELDVIZ_HOST_PACKAGES")
    if given:
        if not Path(given).is_dir():
            _absent(f"FIELDVIZ_HOST_PACKAGES names no folder: {given}")
        return Path(given)
    from fieldviz.errors import FieldvizError
    from fieldviz.host.finding import ask_host
    from fieldviz.host.install import fetch

    folder = tmp_path_factory.mktemp("host") / "packages"
    try:
        fetch(ask_host(pvpython), folder)
    except FieldvizError as error:
        _absent(str(error))
    return folder


@pytest.fixture(scope="session")
def host(pvpython, packages):
    """A function (script, program=..., ranks=...) -> what the script said with `tell`.

    The script runs in the host with the plugin's declaration loaded from this checkout; it has
    `simple`, `SAMPLE` and `tell`. A script that fails or runs too long fails the test.
    """
    environment = {
        **{k: v for k, v in os.environ.items() if not k.startswith(("PYTHON", "PV_"))},
        "PYTHONPATH": os.pathsep.join([str(packages), str(ROOT)]),
        "PYTHONDONTWRITEBYTECODE": "1",
    }

    def run(script: str, *, program: str = "pvpython", ranks: int = 0,
            folder: Path | None = None) -> list:  # fmt: skip
        place = folder or Path(os.environ.get("TMPDIR", "/tmp"))
        path = place / f"fieldviz_in_host_{os.getpid()}.py"
        declaration = ROOT / "fieldviz" / "host" / "plugin" / "fieldviz_plugin.xml"
        path.write_text(
            "import json\nfrom paraview import simple\n"
            f"simple.LoadPlugin({str(declaration)!r}, ns=globals())\n"
            f"SAMPLE = {str(ROOT / 'sample_wedge')!r}\n"
            f"def tell(value):\n    print({MARK!r} + json.dumps(value), flush=True)\n" + script
        )
        command = [str(pvpython.parent / program), str(path)]
        if ranks:
            # Every rank runs the script, so that each can say what it has.
            command[1:1] = ["--sym"]
            command = ["mpiexec", "--timeout", str(LIMIT), "-n", str(ranks), *command]
        try:
            done = subprocess.run(
                command, capture_output=True, text=True, timeout=LIMIT + 30, check=False, cwd=place,
                env=environment | (_MPI if ranks else {}),
            )  # fmt: skip
        finally:
            path.unlink()
        assert done.returncode == 0, done.stdout + done.stderr
        lines = [line for line in done.stdout.splitlines() if line.startswith(MARK)]
        run.messages = done.stdout + done.stderr
        return [json.loads(line.removeprefix(MARK)) for line in lines]

    return run
