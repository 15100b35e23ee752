"""Scenes as TOML: round trip, and what is refused."""

from __future__ import annotations

import pytest
import tomlkit
from hypothesis import given
from hypothesis import strategies as st

from fieldviz.errors import RenderError
from fieldviz.scenes.description import (
    AzimuthCut,
    CurrentSheetView,
    FluxSheets,
    MirrorCheck,
    OutflowView,
    scene_from_toml,
    scene_named,
    scene_names,
    scene_to_toml,
)


def numbers(low: float, high: float) -> st.SearchStrategy[float]:
    return st.floats(low, high, allow_nan=False)


LIMITS = st.none() | st.tuples(numbers(-9, -5), numbers(-4, 3))
CUTS = st.builds(
    AzimuthCut,
    cut_azimuth=st.none() | numbers(-400, 400),
    sector=numbers(5, 180),
    opened_share=numbers(0.1, 0.9),
    line_count=st.integers(1, 400),
    density_limits=LIMITS,
    field_exponent=st.none() | numbers(-3, 3),
)
SHEETS = st.builds(
    FluxSheets,
    shown_azimuth=numbers(20, 360),
    outer_level=st.none() | numbers(1e-9, 1e9),
    inner_level=st.none() | numbers(1e-9, 1e9),
    density_limits=LIMITS,
    outer_radius=st.none() | numbers(0.1, 1e4),
)


WINDS = st.builds(
    OutflowView,
    line_count=st.integers(0, 2000),
    launch_height=st.none() | numbers(0.1, 100),
    critical=st.booleans(),
    opened_azimuth=numbers(0, 340),
)
MIRRORS = st.builds(
    MirrorCheck, scale_heights=numbers(0.1, 100), field_limit=st.none() | numbers(1e-9, 1e9)
)
CURRENTS = st.builds(
    CurrentSheetView,
    shown_azimuth=numbers(20, 360),
    height_limit=st.none() | numbers(0.02, 10),
    current_exponent=st.none() | numbers(-3, 3),
)


@given(CUTS | SHEETS | WINDS | MIRRORS | CURRENTS)
def test_round_trip_through_toml(scene):
    assert scene_from_toml(scene_to_toml(scene)) == scene


def test_every_scene_has_a_default_and_is_found_by_name():
    names = {"flux-sheets", "outflow", "azimuth-cut", "mirror-check", "current-sheet"}
    assert set(scene_names()) == names
    for name in scene_names():
        assert scene_named(name).scene == name


def test_settings_left_out_keep_their_defaults():
    scene = scene_from_toml('scene = "azimuth-cut"\n[settings]\nline_count = 7\n')
    assert scene == AzimuthCut(line_count=7)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ('scene = "flux-sheet"', "flux-sheets"),
        ('scene = "azimuth-cut"\n[settings]\nline_cuont = 3', "line_count"),
        ('scene = "azimuth-cut"\n[setings]\nline_count = 3', "settings"),
        ("[settings]\nline_count = 3", "scene ="),
        ('scene = "azimuth-cut"\n[settings]\nline_count = "many"', "whole number"),
        ('scene = "azimuth-cut"\n[settings]\nline_count = 2.5', "whole number"),
        ('scene = "azimuth-cut"\n[settings]\nsector = true', "a number"),
        ('scene = "azimuth-cut"\n[settings]\nsector = 500', "between 5 and 180"),
        ('scene = "flux-sheets"\n[settings]\ndensity_limits = [1.0]', "two numbers"),
        ('scene = "flux-sheets"\n[settings]\ndensity_limits = [1.0, 0.0]', "increasing"),
        ('scene = "outflow"\n[settings]\nlaunch_height = 0', "between 0.1 and 100"),
        ('scene = "current-sheet"\n[settings]\nheight_limit = 0', "between 0.02 and 10"),
        ('scene = "mirror-chek"', "did you mean 'mirror-check'"),
        ("scene = flux", "TOML"),
    ],
)
def test_what_is_wrong_is_named_with_what_is_right(text, words):
    with pytest.raises(RenderError, match="Cannot") as caught:
        scene_from_toml(text)
    assert words in str(caught.value)


def test_toml_holds_no_setting_that_is_taken_from_the_data():
    table = tomlkit.parse(scene_to_toml(FluxSheets()))
    assert "outer_level" not in table["settings"]
    assert table["settings"]["shown_azimuth"] == 270.0
