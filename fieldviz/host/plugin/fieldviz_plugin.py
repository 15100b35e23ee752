"""The plugin as a file that newer versions of the host load by themselves, without settings."""

from __future__ import annotations

import sys
from pathlib import Path

_packages = str(Path(__file__).resolve().parents[3])
if _packages not in sys.path:
    sys.path.insert(0, _packages)

from fieldviz._version import __version__  # noqa: E402
from fieldviz.host.declaration import declaration  # noqa: E402

paraview_plugin_name = "Fieldviz"
paraview_plugin_version = __version__


class Declaration:
    """What the host looks for in a file: a class that carries XML."""

    _pvsm_proxy_xml = declaration()
