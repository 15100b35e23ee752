"""The page: nothing in the data becomes markup, nothing is fetched, everything has its name."""

from __future__ import annotations

import base64
import hashlib
import math
import re
from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from page_reading import ReadPage, assert_harmless

from fieldviz.diagnostics.tables import Column, Table
from fieldviz.report.contents import Contents, Figure, Picture, ShownTable
from fieldviz.report.dials import EVEN_SECTOR, pair_card
from fieldviz.report.markup import Html, clean, element, escaped
from fieldviz.report.page import page
from fieldviz.report.texts import (
    listed,
    plain_number,
    readable,
    sentence_case,
    signed_degrees,
    unit_text,
)
from fieldviz.symmetry.pairs import pair_angle, pair_class

HOSTILE = "</style><script>alert('x')</script><img src=http://evil.example/a onerror=\"b\">&amp;"
MINUS, TIMES = "\N{MINUS SIGN}", "\u00a0\N{MULTIPLICATION SIGN}\u00a010"
PIXEL = "data:image/svg+xml;base64,PHN2Zy8+"


def plain_pair(upper=1.0, lower=1.0, **changes):
    return {
        "name": "outflow", "word": "even", "upper": upper, "lower": lower, "upper_error": None,
        "lower_error": None, "score": 1.0, "score_error": None,
        "angle": pair_angle(upper, lower), "angle_error": None, "interval": None, "unit": "mass",
        **changes,
    }  # fmt: skip


def contents(text="words"):
    picture = Picture(text, text, text, PIXEL, PIXEL, "pictures/a.png", (16, 9))
    rows = ((text, 1.5, None), (text, -2e-7, text))
    columns = (Column("quantity"), Column(text, text), Column("note", "x^-2"))
    table = Table("one", text, columns, rows)
    return Contents(
        text, text, text, text, (text,), (plain_pair(name=text, word=text, unit=text),), text,
        (Figure(text, text, text),), (picture,), (text,), ((text, (picture,)),),
        (ShownTable(table, text, "tables/one.csv"),), (("tables/two.csv", table),),
        ((text, (text,)),), text, ((text, text),),
    )  # fmt: skip


@pytest.fixture(scope="module")
def hostile_page():
    return page(contents(HOSTILE))


def test_hostile_text_in_every_place_stays_text(hostile_page):
    read = assert_harmless(hostile_page)
    harmless = assert_harmless(page(contents()))
    # The very same elements, whatever the words are.
    assert [tag for tag, _ in read.elements] == [tag for tag, _ in harmless.elements]
    assert read.text("title") == HOSTILE
    assert read.text("code") == HOSTILE
    assert read.all("img")[0]["alt"] == HOSTILE
    assert "<script" not in hostile_page


def test_the_policy_allows_our_style_and_no_other(hostile_page):
    read = ReadPage(hostile_page)
    digest = base64.b64encode(hashlib.sha256(read.text("style").encode()).digest()).decode()
    policy = next(m["content"] for m in read.all("meta") if "http-equiv" in m)
    assert f"style-src 'sha256-{digest}'" in policy
    assert "unsafe" not in policy
    assert len(read.all("style")) == 1


def test_every_part_has_its_name():
    read = ReadPage(page(contents()))
    assert read.all("html") == [{"lang": "en"}]
    assert all(image["alt"] for image in read.all("img"))
    assert {head["scope"] for head in read.all("th")} == {"col", "row"}
    known = [attributes["id"] for _, attributes in read.elements if "id" in attributes]
    assert len(set(known)) == len(known) > 0
    assert {table["aria-labelledby"] for table in read.all("table")} <= set(known)
    assert len(read.all("h1")) == 1
    headings = [text for tag, text in read.texts if tag == "h2"]
    assert headings == ["Pictures", "Tables", "What these numbers rest on",
                        "How to make it again"]  # fmt: skip
    order = page(contents())
    assert order.index("<h1") < order.index('class="pairs"') < order.index("<h2")


def test_dark_pictures_are_for_dark_screens_and_not_for_paper():
    sources = ReadPage(page(contents())).all("source")
    assert {one["media"] for one in sources} == {"screen and (prefers-color-scheme: dark)"}


def test_absent_parts_leave_no_holes():
    bare = replace(
        contents(), aside="", leads=(), pairs=(), figures=(), scenes=(), missing=(), diagrams=(),
        tables=(), files=(), basis=(),
    )  # fmt: skip
    read = assert_harmless(page(bare))
    assert not read.all("dl")[:-1]
    assert not read.all("table")
    assert not read.all("article")
    assert "no numbers of which a diagram could be drawn" in read.whole_text


def test_cells_without_a_number_are_dashes_and_numbers_stand_to_the_right():
    found = page(contents())
    assert '<td class="absent">\N{EN DASH}</td>' in found
    assert f'<td class="number">{MINUS}2{TIMES}⁻⁷</td>' in found


@given(st.text(max_size=40))
@settings(max_examples=60)
def test_any_text_comes_back_as_it_was(text):
    read = ReadPage(element("p", text, title=text))
    assert "".join(data for _, data in read.texts) == clean(text)
    assert read.elements == [("p", {"title": clean(text)})]


@pytest.mark.parametrize("odd", ["\x00", "\x1b", "\udce9", "\u202e", "\u2066", "\ufffe"])
def test_what_has_no_place_on_a_page_is_replaced(odd):
    assert clean(f"a{odd}b") == "a\ufffdb"
    escaped(odd).encode("utf-8")


def test_markup_is_not_escaped_twice():
    assert escaped(escaped("<")) == "&lt;"
    assert isinstance(element("br"), Html)
    assert element("p", None) == "<p></p>"
    assert element("svg", view_box="0 0 1 1") == '<svg viewBox="0 0 1 1"></svg>'


def needle(card):
    x1, y1, x2, y2 = (
        float(re.search(rf'{name}="([-\d.]+)"[^>]*class="needle"', card)[1])
        for name in ("x1", "y1", "x2", "y2")
    )
    return math.degrees(math.atan2(x2 - x1, y1 - y2))


@pytest.mark.parametrize(
    ("upper", "lower", "angle"),
    [(1, 1, 0), (1, 0, -45), (0, 1, 45), (1, -1, -90), (-1, 1, 90), (-1, -1, 180)],
)
def test_the_needle_points_where_the_angle_says(upper, lower, angle):
    turned = needle(pair_card(plain_pair(float(upper), float(lower))))
    assert math.cos(math.radians(turned - angle)) == pytest.approx(1, abs=1e-4)


@given(st.floats(-180, 180))
def test_the_marked_arc_is_where_a_pair_counts_as_even(angle):
    turn = math.radians(angle + 45)
    is_even = pair_class(math.cos(turn), math.sin(turn)) == "even"
    if abs(abs(angle) - EVEN_SECTOR) > 1e-6:
        assert is_even == (abs(angle) < EVEN_SECTOR)


def heights(card):
    return {
        kind: float(height)
        for height, kind in re.findall(r'<rect[^>]*height="([\d.]+)" class="([^"]+)"', card)
    }


def test_bars_are_in_proportion_and_hollow_below_zero():
    assert heights(pair_card(plain_pair(2.0, 1.0))) == {"upper": 52.0, "lower": 26.0}
    assert heights(pair_card(plain_pair(-1.0, 4.0))) == {"upper negative": 13.0, "lower": 52.0}
    assert heights(pair_card(plain_pair(0.0, 0.0, angle=None, score=None))) == {}


def test_numbers_that_are_not_there_are_called_undefined():
    card = pair_card(plain_pair(upper=None, angle=None, score=None))
    assert ReadPage(card).whole_text.count("undefined") >= 3
    assert "needle" not in card


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.0, "0"), (-0.0, "0"), (1.0, "1"), (12345.678, "12346"), (-0.25, f"{MINUS}0.25"),
        (3.2e-6, f"3.2{TIMES}⁻⁶"), (-1e12, f"{MINUS}1{TIMES}¹²"), (0.00999999, "0.01"),
        (65536, "65\u202f536"), (float("nan"), "not a number"), (99999.0, "99999"),
    ],
)  # fmt: skip
def test_numbers_as_they_stand(value, text):
    assert plain_number(value) == text


def test_words_as_they_stand():
    assert signed_degrees(-0.04) == "+0.0°"
    assert signed_degrees(-45.0) == f"{MINUS}45.0°"
    assert unit_text("code mass length^-2 2^x a^2") == "code mass length⁻² 2^x a²"
    assert readable("from 2.5e-06 to -1e+3, run_1e5") == (
        f"from 2.5{TIMES}⁻⁶ to {MINUS}1{TIMES}³, run_1e5"
    )
    assert sentence_case("so it is") == "So it is."
    assert sentence_case("") == ""
    assert sentence_case("a sheet, r.") == "A sheet, r."
    # Symbols and file names keep their letters.
    assert sentence_case("r <B_z> is up") == "r <B_z> is up."
    assert sentence_case("disc.h5 has none") == "disc.h5 has none."
    assert listed(["a", "b", "c"]) == "a, b and c"
    assert listed([]) == ""
