"""What all tests share: how hypothesis runs, and small discs."""

from __future__ import annotations

import os

import hypothesis
import pytest

hypothesis.settings.register_profile("local", deadline=None)
hypothesis.settings.register_profile("ci", deadline=None, derandomize=True)
hypothesis.settings.load_profile("ci" if os.environ.get("CI") else "local")


@pytest.fixture(scope="session")
def small_disc():
    """A function (**parameters) -> small demo snapshot, made once for each set of parameters."""
    from fieldviz.wedge.demo import demo_disc

    made = {}

    def make(**parameters):
        parameters = {"shape": (4, 32, 24), **parameters}
        key = repr(sorted(parameters.items()))
        if key not in made:
            made[key] = demo_disc(**parameters)
        return made[key]

    return make
