"""Diagrams: what is drawn is what was measured; the drawings hold themselves and read well."""

from __future__ import annotations

import re
from xml.etree import ElementTree

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fieldviz.diagnostics.space_time import SpaceTime
from fieldviz.report import courses
from fieldviz.report.courses import time_edges
from fieldviz.report.paper import COLOURS, Paper, drawn
from fieldviz.report.profiles import profile_diagrams
from fieldviz.scenes.theme import THEMES

LIGHT = THEMES["light"]


def test_a_series_gives_maps_courses_and_profiles(diagrams):
    of_series, of_last = diagrams
    assert [one.name for one in of_series] == [
        "space_time_vertical_field", "space_time_surface_density", "space_time_outflow_angle",
        "space_time_bend_angle", "space_time_torque_angle", "course_mass", "course_angles",
    ]  # fmt: skip
    assert [one.name for one in of_last] == [
        "vertical_field", "surface_density", "mass", "alpha", "wind_angles", "quality",
    ]  # fmt: skip


def test_drawings_are_whole_and_ask_for_nothing(diagrams):
    for one in (*diagrams[0], *diagrams[1]):
        assert one.light != one.dark
        for svg in (one.light, one.dark):
            assert len(svg) < 150_000, one.name
            for element in ElementTree.fromstring(svg).iter():
                assert not element.tag.endswith(("script", "text")), one.name  # glyphs are paths
                for key, value in element.attrib.items():
                    if key.endswith("href"):
                        assert value.startswith(("#", "data:image/png")), one.name
        assert one.alt.endswith(".")
        assert re.search(r"\d", one.alt), one.name
        assert "nan" not in (one.alt + one.caption).lower().split()


def test_the_same_numbers_give_the_same_bytes(material, diagrams):
    again = next(profile_diagrams(material.records[-1]))
    assert (again.light, again.dark) == (diagrams[1][0].light, diagrams[1][0].dark)


def test_alt_texts_tell_the_sheets_and_what_happened(diagrams):
    # The demo's sheets: 1.4, 1.9 and 2.2 until they merge at t = 6.667, 3 (opening), 4.2.
    field = diagrams[1][0].alt
    radii = [float(text) for text in re.findall(r"\d(?:\.\d+)?", field.partition("at r")[2])]
    assert np.min(np.abs(np.array([[1.4], [2.05], [4.2]]) - radii), axis=1).max() < 0.06
    assert "a merge at t = 8, r = 2" in diagrams[0][0].alt
    assert "merge" in diagrams[0][0].caption


class Kept(Paper):
    """A paper that keeps itself, so that what was drawn can be looked at."""

    papers: list[Paper] = []  # noqa: RUF012

    def __init__(self, theme):
        super().__init__(theme)
        self.maps = []
        Kept.papers.append(self)

    def map(self, x_edges, y_edges, values, label, **how):
        self.maps.append((x_edges, y_edges, values, how))
        return super().map(x_edges, y_edges, values, label, **how)


@pytest.fixture
def papers(monkeypatch):
    Kept.papers = []
    monkeypatch.setattr("fieldviz.report.paper.Paper", Kept)
    return Kept.papers


def test_tracks_are_drawn_where_the_sheets_are(material, papers):
    history = material.course.history
    courses._field_map(material.course)
    paper = papers[0]
    lines = [line.get_xydata() for line in paper.axes.get_lines()]
    for track in history.tracks:
        wanted = np.column_stack([track.times, track.radii])
        assert any(np.array_equal(line, wanted) for line in lines)
    merge = history.events_of("merge")[0]
    assert any(np.array_equal(line, [[merge.time, merge.radius]]) for line in lines)
    # A dotted line leads from the last place of the track that ended to the merged sheet.
    ended = next(one for one in history.tracks if one.number == merge.tracks[0])
    link = [[ended.times[-1], ended.radii[-1]], [merge.time, merge.radius]]
    assert any(np.array_equal(line, link) for line in lines)
    assert paper.axes.get_ylim() == (1.0, 5.0)
    assert paper.axes.get_xlim() == (-2.0, 10.0)


def made_course(field):
    times, edges = np.array([0.0, 1.0]), np.array([1.0, 2.0, 4.0])
    nothing = np.full((2, 2), np.nan)
    angles = dict.fromkeys(("outflow", "bend", "torque"), nothing)
    return SpaceTime(times, edges, np.array(field), nothing, angles, ("", ""), None, ())


def test_a_field_of_both_signs_gets_colours_even_about_zero(papers):
    courses._field_map(made_course([[-1.0, 3.0], [np.nan, 2.0]]))
    how = papers[0].maps[0][3]
    assert (how["vmin"], how["vmax"]) == (-3.0, 3.0)
    assert how["cmap"].name.startswith("vik")
    courses._field_map(made_course([[1.0, 3.0], [np.nan, 2.0]]))
    how = papers[-1].maps[0][3]
    assert (how["vmin"], how["vmax"]) == (1.0, 3.0)


def test_without_numbers_there_is_no_drawing():
    nothing = made_course([[np.nan, np.nan], [np.nan, np.nan]])
    assert courses._field_map(nothing) is None
    assert courses._density_map(nothing) is None


def test_angles_have_colours_that_close(material, papers):
    courses._angle_map(material.course, "bend", material.course.wind_angle["bend"])
    how = papers[0].maps[0][3]
    ends = how["cmap"](np.array([0.0, 1.0]))
    assert np.abs(ends[0] - ends[1]).max() < 0.03
    assert (how["vmin"], how["vmax"]) == (-180, 180)


def test_maps_show_the_measured_numbers(material, papers):
    courses._density_map(material.course)
    x_edges, y_edges, values, _ = papers[0].maps[0]
    assert np.allclose(10**values, material.course.surface_density)
    assert np.array_equal(y_edges, material.course.r_edges)
    assert len(x_edges) == len(material.records) + 1


@given(st.lists(st.floats(0.01, 10), min_size=1, max_size=8))
@settings(max_examples=40)
def test_time_edges_part_the_outputs(steps):
    times = np.cumsum(steps)
    edges = time_edges(times)
    assert len(edges) == len(times) + 1
    assert np.all(edges[:-1] < times)
    assert np.all(times < edges[1:])
    assert np.allclose(edges[1:-1], 0.5 * (times[1:] + times[:-1]))


def test_text_is_legible_on_a_phone(material):
    # At 390 pixels less margins a drawing is 358 wide; common practice, no source: 9 pixels.
    paper = Paper(LIGHT)
    paper.axes.plot([1, 2], [1, 2], label="line")
    paper.radius_axis(1, 2)
    paper.label("radius", "height")
    paper.legend()
    width = paper.figure.get_size_inches()[0] * 72
    for text in paper.figure.findobj(lambda artist: hasattr(artist, "get_fontsize")):
        if text.get_text():
            assert text.get_fontsize() * 358 / width >= 9


def contrast(one, other):
    """Of WCAG 2.1, from memory."""

    def luminance(colour):
        parts = np.array([int(colour[n : n + 2], 16) for n in (1, 3, 5)]) / 255
        linear = np.where(parts <= 0.03928, parts / 12.92, ((parts + 0.055) / 1.055) ** 2.4)
        return float(linear @ [0.2126, 0.7152, 0.0722])

    high, low = sorted((luminance(one), luminance(other)), reverse=True)
    return (high + 0.05) / (low + 0.05)


@pytest.mark.parametrize("theme", THEMES)
def test_lines_stand_out_from_the_ground(theme):
    for colour in COLOURS[theme].values():
        assert contrast(colour, THEMES[theme].ground) > 3


def test_a_drawing_can_be_empty():
    found = drawn("a", "b", "c", "d", lambda paper: paper.legend())
    assert found.light.startswith(b"<?xml")
