"""The page of a report: one file of HTML that asks nothing of any other host and runs no script."""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Callable
from importlib.resources import files

from fieldviz._version import __version__
from fieldviz.diagnostics.tables import Column, Table
from fieldviz.report.contents import Contents, Figure, Picture, ShownTable
from fieldviz.report.dials import pair_card
from fieldviz.report.markup import Html, element, joined
from fieldviz.report.paper import COLOURS
from fieldviz.report.texts import degrees_number, plain_number, readable, sentence_case, unit_text
from fieldviz.scenes.theme import THEMES

__all__ = ["page"]

_LEGEND = (
    "Dials: up both sides alike, the marked arc counts as even; left above only, right below only. "
    "Bars: upper and lower side, hollow where the number is negative."
)
_LONG = 12  # letters, from which a cell of words is given room
# Of a row these say what it is about, the first one found.
_ROW_HEADS = ("quantity", "file", "pair", "field", "track", "event", "kind", "time", "level")


def page(contents: Contents) -> str:
    """Write a page.

    Parameters
    ----------
    contents : Contents

    Returns
    -------
    str
        A whole document. Every text in it is escaped in `markup`.
    """
    body = element(
        "body",
        _header(contents),
        element(
            "main",
            _pictures(contents),
            _tables(contents),
            _basis(contents),
            _again(contents),
        ),
        element("footer", element("p", f"Made with fieldviz {__version__}.")),
    )
    return f"<!DOCTYPE html>\n{element('html', _head(contents.title), body, lang='en')}\n"


def _head(title: str) -> Html:
    style = Html(_style())
    digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()
    policy = (
        f"default-src 'none'; img-src data:; style-src 'sha256-{digest}'; base-uri 'none'; "
        "form-action 'none'"
    )
    return element(
        "head",
        element("meta", charset="utf-8"),
        element("meta", http_equiv="Content-Security-Policy", content=policy),
        element("meta", name="viewport", content="width=device-width, initial-scale=1"),
        element("meta", name="referrer", content="no-referrer"),
        element("meta", name="color-scheme", content="light dark"),
        element("meta", name="generator", content=f"fieldviz {__version__}"),
        element("link", rel="icon", href="data:,"),
        element("title", title),
        element("style", style),
    )


def _style() -> str:
    """The style sheet, in the colours of the pictures' themes."""
    colours = []
    for name, theme in THEMES.items():
        known = {
            "ground": theme.ground,
            "ink": theme.ink,
            "faint": theme.faint,
            "rule": "#dde1e7" if name == "light" else "#2a3444",
            "accent": theme.line,
            "upper": COLOURS[name]["upper"],
            "lower": COLOURS[name]["lower"],
        }
        colours += [f"--{name}-{role}: {colour};" for role, colour in known.items()]
    sheet = files("fieldviz.report").joinpath("page.css").read_text(encoding="utf-8")
    return f":root {{ {' '.join(colours)} }}\n{sheet}"


def _header(contents: Contents) -> Html:
    aside = element("span", contents.aside, class_="aside") if contents.aside else None
    return element(
        "header",
        element("p", element("b", element("bdi", contents.title)), " · ", contents.kicker,
                class_="kicker"),
        element("h1", contents.sentence, aside),
        element("ul", *(element("li", readable(lead)) for lead in contents.leads), class_="leads")
        if contents.leads else None,
        element("div", *map(pair_card, contents.pairs), class_="pairs")
        if contents.pairs else None,
        element("p", _LEGEND, class_="legend note") if contents.pairs else None,
        _figures(contents.figures, contents.figures_of),
    )  # fmt: skip


def _figures(figures: tuple[Figure, ...], of: str) -> Html | None:
    if not figures:
        return None
    cells = (
        element(
            "div",
            element("dt", one.name),
            element("dd", one.value, element("span", unit_text(one.unit), class_="unit")),
        )
        for one in figures
    )
    return joined((
        element("p", f"At {of}", class_="figures-of note"),
        element("dl", *cells, class_="figures"),
    ))  # fmt: skip


def _pictures(contents: Contents) -> Html:
    missing = contents.missing
    if not (missing or contents.scenes or contents.diagrams):
        missing = ("There are no numbers of which a diagram could be drawn.",)
    return element(
        "section",
        element("h2", "Pictures"),
        element("div", *map(_scene, contents.scenes), class_="scenes") if contents.scenes else None,
        *(element("p", reason, class_="note") for reason in missing),
        *(
            piece
            for heading, some in contents.diagrams
            for piece in (
                element("h3", heading, class_="group"),
                element("div", *map(_diagram, some), class_="diagrams"),
            )
        ),
    )


def _scene(picture: Picture) -> Html:
    image = _image(picture)
    return element(
        "figure",
        element("a", image, href=picture.link) if picture.link else image,
        element("figcaption", element("b", f"{picture.title}. "), picture.caption),
    )


def _diagram(picture: Picture) -> Html:
    return element(
        "figure",
        element("h3", picture.title),
        _image(picture),
        element("figcaption", picture.caption),
    )


def _image(picture: Picture) -> Html:
    # On paper the light one, whatever the screen has.
    dark = element("source", srcset=picture.dark, media="screen and (prefers-color-scheme: dark)")
    width, height = picture.size or (None, None)
    shown = element("img", src=picture.light, alt=picture.alt, width=width, height=height)
    return element("picture", dark, shown)


def _tables(contents: Contents) -> Html:
    long = [
        element("tr", element("th", table.title, scope="row"),
                element("td", plain_number(len(table.rows)), class_="number"),
                element("td", element("a", file, href=file)))
        for file, table in contents.files
    ]  # fmt: skip
    heads = element(
        "tr",
        element("th", "Table", scope="col"),
        element("th", "Rows", scope="col", class_="number"),
        element("th", "File", scope="col"),
    )
    return element(
        "section",
        element("h2", "Tables"),
        element("p", "Numbers are in code units where no other unit stands at the head; those of "
                "fluxes and masses are for the wedge. All of them, and more, are in ",
                element("a", "numbers.json", href="numbers.json"), "."),
        *map(_table, contents.tables),
        _framed("in_files", "Tables in files only", heads, long) if long else None,
    )  # fmt: skip


def _table(shown: ShownTable) -> Html:
    table = shown.table
    names = [column.name for column in table.columns]
    head_at = next((names.index(name) for name in _ROW_HEADS if name in names), 0)
    numeric = [_is_numeric(table, place) for place in range(len(names))]
    writers = [degrees_number if c.unit == "degrees" else plain_number for c in table.columns]
    units = [name in ("unit", "physical unit") for name in names]
    head = element("tr", *(_column(*pair) for pair in zip(table.columns, numeric, strict=True)))
    rows = [
        element(
            "tr",
            *(
                _cell(
                    unit_text(cell) if units[place] and isinstance(cell, str) else cell,
                    writers[place],
                    numeric[place],
                    place == head_at,
                    names[place] == "quantity",
                )
                for place, cell in enumerate(row)
            ),
        )
        for row in table.rows
    ]
    link = element("a", shown.file, href=shown.file)
    rest = f": {shown.note}" if shown.note else ""
    return element(
        "div",
        _framed(table.name, table.title, head, rows),
        element("p", link, rest, class_="note"),
        class_="table",
    )  # fmt: skip


def _framed(name: str, title: str, head: Html, rows: list[Html]) -> Html:
    """A table that can be moved sideways, also with the keyboard, where it is too wide."""
    label = f"table-{name}"
    inner = element("table", element("thead", head), element("tbody", *rows),
                    aria_labelledby=label)  # fmt: skip
    frame = element("div", inner, class_="scroll", role="region", aria_labelledby=label, tabindex=0)
    return joined((element("h3", title, id=label), frame))


def _is_numeric(table: Table, place: int) -> bool:
    """Whether most cells are numbers; words among them stand to the right as well."""
    cells = [row[place] for row in table.rows if row[place] not in (None, "")]
    return 2 * sum(isinstance(cell, int | float) for cell in cells) > len(cells)


def _column(column: Column, is_number: bool) -> Html:
    unit = element("span", unit_text(column.unit), class_="unit") if column.unit else None
    name = column.name.replace("_", " ")
    return element("th", name, unit, scope="col", class_="number" if is_number else None)


def _cell(
    cell: float | str | None,
    write: Callable[[float], str],
    is_number: bool,
    is_head: bool,
    is_long: bool,
) -> Html:
    if cell is None:
        return element("td", "\N{EN DASH}", class_="number absent" if is_number else "absent")
    text = cell if isinstance(cell, str) else write(cell)
    kind = "number" if is_number else None
    if is_head:
        kind = "about" if is_long else kind
        return element("th", element("bdi", text), scope="row", class_=kind)
    if len(text) > _LONG and not is_number:
        kind = "long"
    return element("td", text, class_=kind)


def _basis(contents: Contents) -> Html:
    groups = (
        joined((
            element("h3", heading),
            element("ul", *(element("li", sentence_case(readable(note))) for note in notes)),
        ))
        for heading, notes in contents.basis
    )  # fmt: skip
    return element("section", element("h2", "What these numbers rest on"), *groups, class_="basis")


def _again(contents: Contents) -> Html:
    terms = [
        piece
        for name, text in contents.terms
        for piece in (element("dt", name), element("dd", element("bdi", text)))
    ]
    return element(
        "section",
        element("h2", "How to make it again"),
        element("pre", element("code", contents.command)),
        element("dl", *terms, class_="terms"),
    )
