"""What stands on the page of a report, as plain pieces without markup."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from fieldviz.diagnostics.tables import Table

__all__ = ["Contents", "Figure", "Picture", "ShownTable"]


@dataclass(frozen=True)
class Picture:
    """A picture in both themes.

    Attributes
    ----------
    title, caption, alt : str
    light, dark : str
        Data URIs.
    link : str
        Name of the file of its own, relative to the page; empty without.
    size : (int, int) or None
        Width and height in pixels, where the page should keep its place free.
    """

    title: str
    caption: str
    alt: str
    light: str
    dark: str
    link: str = ""
    size: tuple[int, int] | None = None


@dataclass(frozen=True)
class Figure:
    """A number of first rank."""

    name: str
    value: str
    unit: str


@dataclass(frozen=True)
class ShownTable:
    """A table on the page.

    Attributes
    ----------
    table : Table
        What is shown of it.
    note : str
        What the file has besides; empty if nothing.
    file : str
        Name relative to the page.
    """

    table: Table
    note: str
    file: str


@dataclass(frozen=True)
class Contents:
    """All of a page.

    Attributes
    ----------
    title, kicker : str
        Name of the report, and what the data are.
    sentence, aside : str
        The verdict, and what stands in brackets after it.
    leads : tuple of str
        Further sentences of first rank.
    pairs : tuple of dict
        `Pair` as plain numbers.
    figures_of : str
        Of which time the figures are.
    figures : tuple of Figure
    scenes : tuple of Picture
    missing : tuple of str
        Why some pictures are absent.
    diagrams : tuple of (heading, tuple of Picture)
    tables : tuple of ShownTable
    files : tuple of (file, Table)
        Tables that are too long for the page.
    basis : tuple of (heading, tuple of str)
        What the numbers rest on.
    command : str
        To make the report again.
    terms : tuple of (str, str)
        Version, files, times.
    """

    title: str
    kicker: str
    sentence: str
    aside: str
    leads: tuple[str, ...]
    pairs: tuple[dict[str, Any], ...]
    figures_of: str
    figures: tuple[Figure, ...]
    scenes: tuple[Picture, ...]
    missing: tuple[str, ...]
    diagrams: tuple[tuple[str, tuple[Picture, ...]], ...]
    tables: tuple[ShownTable, ...]
    files: tuple[tuple[str, Table], ...]
    basis: tuple[tuple[str, tuple[str, ...]], ...]
    command: str
    terms: tuple[tuple[str, str], ...]
