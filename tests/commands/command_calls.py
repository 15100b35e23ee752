"""Calling a command within the test's own process."""

from __future__ import annotations

import pytest

from fieldviz.cli import main


def call(capsys, *arguments):
    """Exit code, stdout and stderr of one call."""
    with pytest.raises(SystemExit) as stop:
        main([str(argument) for argument in arguments])
    out, err = capsys.readouterr()
    return stop.value.code, out, err
