"""A description says what it means, and nothing unknown passes unseen."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fieldviz.errors import LayoutError
from fieldviz.snapshots.layout_description import (
    LayoutDescription,
    layout_from_toml,
    layout_to_toml,
    read_layout,
    write_layout,
)
from fieldviz.snapshots.layout_tables import (
    AXES,
    AxesTable,
    BlocksTable,
    ConstantsTable,
    CoordinateTable,
    FieldTable,
    StackTable,
    TimeTable,
    UnitTable,
)

MARK = "fieldviz_layout_description = 1\n"

words = st.text(min_size=1, max_size=12)
names = words.filter(lambda text: "/" not in text)
numbers = st.floats(allow_nan=False, allow_infinity=False)
factors = numbers.filter(lambda number: number != 0)
maybe = st.one_of(st.just(""), words)
orders = st.permutations(["variable", "block", "one", "one", *AXES]).map(tuple)
some_orders = st.one_of(st.just(()), orders)
coordinates = st.builds(
    CoordinateTable,
    edges=maybe,
    centres=maybe,
    bounds=st.one_of(st.none(), words, st.tuples(numbers, numbers)),
    spacing=st.sampled_from(["", "uniform", "log"]),
    transform=st.sampled_from(["none", "ln", "log10"]),
    scale=factors,
    unit=st.sampled_from(["radian", "degree"]),
    measured_from=st.sampled_from(["", "pole", "midplane"]),
)
field_tables = st.builds(
    FieldTable,
    dataset=maybe,
    stack=maybe,
    variable=st.one_of(st.none(), words, st.integers(0, 1 << 40)),
    scale=factors,
    sign=st.sampled_from([1, -1]),
    order=some_orders,
    optional=st.booleans(),
)
stack_tables = st.builds(
    StackTable,
    dataset=maybe,
    names=st.lists(words, max_size=3).map(tuple),
    names_from=maybe,
    order=some_orders,
)
descriptions = st.builds(
    LayoutDescription,
    blocks=st.builds(
        BlocksTable,
        stored=st.sampled_from(["single", "axis", "groups"]),
        groups=maybe,
        level=maybe,
    ),
    axes=st.builds(
        AxesTable,
        order=orders,
        ghost_cells=st.dictionaries(st.sampled_from(AXES), st.integers(0, 9)),
    ),
    grid=st.dictionaries(st.sampled_from(AXES), coordinates),
    stacks=st.dictionaries(names, stack_tables, max_size=2),
    cells=st.dictionaries(names, field_tables, max_size=3),
    faces=st.dictionaries(
        st.sampled_from([f"magnetic_{axis}" for axis in AXES]), field_tables, max_size=2
    ),
    time=st.builds(
        TimeTable,
        attribute=maybe,
        dataset=maybe,
        file_name=maybe,
        value=st.one_of(st.none(), numbers),
        scale=factors,
    ),
    constants=st.builds(
        ConstantsTable,
        mu0=st.one_of(numbers, words),
        gm=st.one_of(numbers, words),
        gamma=st.one_of(st.none(), numbers, words),
        title=maybe,
    ),
    units=st.dictionaries(
        st.sampled_from(["length", "mass", "time"]),
        st.builds(UnitTable, value=st.one_of(numbers, words), label=words),
    ),
)


@given(descriptions, st.dictionaries(st.sampled_from(["", "grid.r", "time.scale"]), st.text()))
@settings(max_examples=50, deadline=None)
def test_a_description_survives_its_text(description, unsure):
    text = layout_to_toml(description, unsure=unsure)
    again = layout_from_toml(text)
    assert again == description
    assert layout_to_toml(again, unsure=unsure) == text


def test_what_one_is_unsure_of_stands_beside_it():
    description = LayoutDescription(grid={"theta": CoordinateTable(edges="th", unit="degree")})
    text = layout_to_toml(
        description,
        unsure={
            "": "on top",
            "grid.theta": "of all of it",
            "grid.theta.unit": "of the unit\nof the angle",
            "constants.gm": "not stored",
        },
    )
    lines = text.splitlines()
    assert lines[1] == "# unsure: on top"
    assert lines[lines.index("[grid.theta]") + 1] == "# unsure: of all of it"
    assert 'unit = "degree" # unsure: of the unit?of the angle' in lines
    assert lines[lines.index("[constants]") + 1] == "# unsure: gm: not stored"


def test_written_and_read(tmp_path):
    description = LayoutDescription(cells={"density": FieldTable(dataset="rho")})
    write_layout(tmp_path / "layout.toml", description)
    assert read_layout(tmp_path / "layout.toml") == description
    assert read_layout(str(tmp_path / "layout.toml")).source.endswith("layout.toml")
    assert read_layout(description) is description


def test_whole_numbers_serve_as_real_ones():
    layout = layout_from_toml(MARK + "[grid.r]\nbounds = [1, 4]\nscale = 2\n[time]\nvalue = 3")
    assert layout.grid["r"] == CoordinateTable(bounds=(1.0, 4.0), scale=2.0)
    assert layout.time.value == 3.0


BAD_TEXTS = {
    "no TOML": ("a = = 2", "expected TOML, got an error"),
    "no mark": ("[blocks]\nstored = 'axis'", "at the top, got none"),
    "mark misspelt": ("fieldviz_layout_descripton = 1", "got 'fieldviz_layout_descripton'"),
    "another version": ("fieldviz_layout_description = 2", "got 2; update"),
    "true as version": ("fieldviz_layout_description = true", "got True"),
    "unknown table": (MARK + "[gird.r]", "got 'gird'.*did you mean 'grid'"),
    "unknown axis": (MARK + "[grid.thet]", "got 'thet'.*did you mean 'theta'"),
    "unknown key": (MARK + "[grid.r]\nedge = 'x'", "got 'edge'.*did you mean 'edges'"),
    "unknown face": (MARK + "[faces.magnetic_x]", "magnetic_r, magnetic_theta, magnetic_phi"),
    "unknown word": (MARK + "[grid.r]\ntransform = 'log'", "'log10'"),
    "unknown order": (MARK + "[axes]\norder = ['phi', 'thta', 'r']", "did you mean 'theta'"),
    "twice": (MARK + "[axes]\norder = ['r', 'theta', 'r']", "each axis once"),
    "no r": (MARK + "[axes]\norder = ['phi', 'theta']", "each axis once"),
    "no list": (MARK + "[axes]\norder = 'phi'", "a list of texts"),
    "ghost axis": (MARK + "[axes]\nghost_cells = {x = 2}", "axes out of phi, theta, r"),
    "ghost number": (MARK + "[axes]\nghost_cells = {r = -2}", "whole numbers of layers"),
    "ghosts": (MARK + "[axes]\nghost_cells = 2", "a table such as"),
    "NaN": (MARK + "[time]\nvalue = nan", "a finite number, got nan"),
    "text for number": (MARK + "[cells.density]\nscale = 'x'", "a finite number, got 'x'"),
    "zero": (MARK + "[cells.density]\nscale = 0", "other than 0"),
    "sign": (MARK + "[cells.density]\nsign = 2", "1 or -1, got 2"),
    "flag": (MARK + "[cells.density]\noptional = 1", "true or false"),
    "variable": (MARK + "[cells.density]\nvariable = -1", "counted from 0"),
    "bounds": (MARK + "[grid.r]\nbounds = [1, 2, 3]", "two numbers"),
    "empty text": (MARK + "[cells.density]\ndataset = ''", "a text, got ''"),
    "number for table": (MARK + "blocks = 3", r"\[blocks\] to be a table, got 3"),
    "number for tables": (MARK + "cells = 3", "its own table"),
    "number for one table": (MARK + "[cells]\ndensity = 3", r"\[cells.density\] to be a table"),
    "slash": (MARK + "[cells.'a/b']\ndataset = 'x'", "without '/'"),
    "unit": (MARK + "[units.lenght]\nvalue = 2", "did you mean 'length'"),
    "date": (MARK + "[time]\nvalue = 2020-01-01", "a finite number"),
}


@pytest.mark.parametrize("case", BAD_TEXTS)
def test_a_wrong_entry_is_one_clear_line(case):
    text, words = BAD_TEXTS[case]
    with pytest.raises(LayoutError, match=words) as caught:
        layout_from_toml(text, source="bog.toml")
    message = str(caught.value)
    assert "bog.toml" in message
    assert "expected" in message
    assert "got" in message
    assert "\n" not in message


def test_files_that_cannot_be_read(tmp_path):
    with pytest.raises(LayoutError, match="got a folder"):
        read_layout(tmp_path)
    with pytest.raises(LayoutError, match="no such file"):
        read_layout(tmp_path / "none.toml")
    (tmp_path / "bytes.toml").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(LayoutError, match="no text"):
        read_layout(tmp_path / "bytes.toml")
    with (tmp_path / "big.toml").open("wb") as file:
        file.truncate(5_000_000)
    with pytest.raises(LayoutError, match="5000000 bytes"):
        read_layout(tmp_path / "big.toml")
