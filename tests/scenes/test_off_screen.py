"""A machine that cannot render is told so in one line, before VTK ends the process."""

from __future__ import annotations

import os
import subprocess
import sys

import pytest

from fieldviz.errors import RenderError
from fieldviz.scenes import off_screen

RENDER = """
import fieldviz as fv
try:
    fv.render(fv.demo_disc(shape=(2, 16, 24)), size=(240, 180), quality="preview")
except fv.FieldvizError as error:
    print(type(error).__name__, error)
"""

needs_linux = pytest.mark.skipif(sys.platform != "linux", reason="the look-up is for Linux")


@pytest.fixture(autouse=True)
def _fresh_choice():
    off_screen.choose_window_system.cache_clear()
    yield
    off_screen.choose_window_system.cache_clear()


@needs_linux
def test_without_any_library_the_message_says_what_to_install(monkeypatch):
    monkeypatch.setattr(off_screen, "_load", lambda name: None)
    monkeypatch.delenv("DISPLAY", raising=False)
    with pytest.raises(RenderError) as caught:
        off_screen.choose_window_system()
    assert "apt-get install libegl1 libgl1-mesa-dri" in str(caught.value)
    assert "\n" not in str(caught.value)


@needs_linux
def test_osmesa_is_used_where_egl_has_no_device(monkeypatch):
    monkeypatch.delenv("DISPLAY", raising=False)
    # Set first, so that what the call below sets is undone at the end.
    monkeypatch.setenv("VTK_DEFAULT_OPENGL_WINDOW", "")
    monkeypatch.setattr(off_screen, "_egl_has_device", lambda: False)
    monkeypatch.setattr(off_screen, "_load", lambda name: object() if "OSMesa" in name else None)
    assert off_screen.choose_window_system() == "osmesa"
    off_screen.prepare_off_screen()
    assert os.environ["VTK_DEFAULT_OPENGL_WINDOW"] == "vtkOSOpenGLRenderWindow"


@needs_linux
def test_a_machine_without_a_driver_gets_one_line_and_no_crash():
    # EGL's loader finds its drivers through this file: without it there is none.
    environment = os.environ | {
        "__EGL_VENDOR_LIBRARY_FILENAMES": "/nonexistent/driver.json",
        "DISPLAY": "",
    }
    environment.pop("VTK_DEFAULT_OPENGL_WINDOW", None)
    done = subprocess.run(
        [sys.executable, "-c", RENDER],
        env=environment,
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )
    assert done.returncode == 0, done.stderr[-2000:]
    if not done.stdout.startswith("RenderError"):
        pytest.skip("this EGL does not look for its drivers in that file, or OSMesa is there")
    assert len(done.stdout.strip().splitlines()) == 1
    assert "libgl1-mesa-dri" in done.stdout
    assert done.stderr == ""
