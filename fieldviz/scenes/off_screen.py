"""Rendering without a display: find out what works before VTK tries, and say what is missing.

VTK opens an X display, EGL or OSMesa at run time. Where none of them works it prints pages of
warnings or ends the process. So the libraries are tried here first, gently.
"""

from __future__ import annotations

import ctypes
import os
import sys
from functools import lru_cache

from fieldviz.errors import RenderError

__all__ = ["choose_window_system", "prepare_off_screen"]

_VTK_CHOICE = "VTK_DEFAULT_OPENGL_WINDOW"
_WINDOW_CLASSES = {"egl": "vtkEGLRenderWindow", "osmesa": "vtkOSOpenGLRenderWindow"}
_OSMESA_NAMES = ("libOSMesa.so.8", "libOSMesa.so.6", "libOSMesa.so")


def prepare_off_screen() -> None:
    """Make VTK render into memory with what this machine has.

    Raises
    ------
    RenderError
        If there is neither a display, nor EGL with a driver, nor OSMesa; it says what to install.
    """
    if not sys.platform.startswith("linux") or os.environ.get(_VTK_CHOICE):
        return
    choice = choose_window_system()
    if choice in _WINDOW_CLASSES:
        os.environ[_VTK_CHOICE] = _WINDOW_CLASSES[choice]


@lru_cache(maxsize=1)
def choose_window_system() -> str:
    """Which of "x", "egl" and "osmesa" works here, in this order.

    Raises
    ------
    RenderError
        If none does.
    """
    if os.environ.get("DISPLAY") and _x_display_opens():
        return "x"
    if _egl_has_device():
        return "egl"
    if any(_load(name) for name in _OSMESA_NAMES):
        return "osmesa"
    raise RenderError(
        "Cannot render: expected a display, EGL with a driver or OSMesa, got none of them on this "
        "machine; install Mesa's software renderer (Debian, Ubuntu: apt-get install libegl1 "
        "libgl1-mesa-dri; Fedora: dnf install mesa-libEGL mesa-dri-drivers)."
    )


def _load(name: str) -> ctypes.CDLL | None:
    try:
        return ctypes.CDLL(name)
    except OSError:
        return None


def _x_display_opens() -> bool:
    library = _load("libX11.so.6")
    if library is None:
        return False
    library.XOpenDisplay.restype = ctypes.c_void_p
    library.XOpenDisplay.argtypes = [ctypes.c_char_p]
    library.XCloseDisplay.argtypes = [ctypes.c_void_p]
    display = library.XOpenDisplay(None)
    if not display:
        return False
    library.XCloseDisplay(display)
    return True


def _egl_has_device() -> bool:
    """Whether EGL is there and has at least one device, a software one included."""
    library = _load("libEGL.so.1")
    if library is None:
        return False
    library.eglGetProcAddress.restype = ctypes.c_void_p
    library.eglGetProcAddress.argtypes = [ctypes.c_char_p]
    address = library.eglGetProcAddress(b"eglQueryDevicesEXT")
    if not address:
        return False
    query = ctypes.CFUNCTYPE(
        ctypes.c_uint, ctypes.c_int, ctypes.c_void_p, ctypes.POINTER(ctypes.c_int)
    )(address)
    count = ctypes.c_int(0)
    return bool(query(0, None, ctypes.byref(count))) and count.value > 0
