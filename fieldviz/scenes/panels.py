"""Flat pictures: fans of one side of the meridional plane, laid out on a page without a camera."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from matplotlib.colors import Colormap
from scipy.ndimage import map_coordinates

from fieldviz.errors import RenderError
from fieldviz.scenes.camera import PixelBox
from fieldviz.scenes.composition import ColourBar
from fieldviz.scenes.furniture import (
    BAR_WIDTH,
    MARGIN,
    caption_top,
    put_bar,
    put_caption,
    put_header,
    rows_of,
)
from fieldviz.scenes.page import Align, Page
from fieldviz.scenes.stage import background
from fieldviz.scenes.theme import Theme
from fieldviz.scenes.wording import radius_ticks
from fieldviz.wedge.typing import Array

__all__ = ["Fan", "FlatComposition", "PanelRow", "paint_panels"]

_OVERSAMPLING = 3
_LABEL, _TICK, _SYMBOL = 22.0, 20.0, 36.0
_LABEL_ROOM, _TICK_ROOM, _BAR_ROOM = 46.0, 40.0, 88.0  # pixels of the design
_LEAST_FAN = 84.0  # pixels of the design: for smaller fans bars, then rows are left out
_GAP, _COLUMN_GAP = 20.0, 76.0
_ZERO_SHADE = 0.55  # how far the zero line goes from the colour of its place to the ink


@dataclass(frozen=True)
class Fan:
    """One side of the meridional plane, the midplane at the bottom.

    Attributes
    ----------
    r : (n,) array
        Radii of the columns.
    angle : (m,) array
        Angles above the midplane, increasing.
    values : (m, n) array
        NaN where nothing is drawn.
    labels : tuple of str
        The first that fits stands above it.
    leftward : bool
        The star is at the right end.
    zero_line : bool
        Mark where the sign changes, for grey print.
    """

    r: Array
    angle: Array
    values: Array
    labels: tuple[str, ...]
    leftward: bool = False
    zero_line: bool = False


@dataclass(frozen=True)
class PanelRow:
    """Two fans back to back, the fan of their difference, and words beside them.

    Attributes
    ----------
    symbol : str
        Of the quantity.
    left, right, difference : Fan
    bar, difference_bar : ColourBar
    words : list of (text, size, bold, faint)
        From top to bottom.
    """

    symbol: str
    left: Fan
    right: Fan
    difference: Fan
    bar: ColourBar
    difference_bar: ColourBar
    words: list[tuple[str, float, bool, bool]]


@dataclass(frozen=True)
class FlatComposition:
    """A page of panels, not yet painted.

    Attributes
    ----------
    title, subtitle : str
    findings : list of str
        Numbers under the subtitle, as important as it.
    rows : list of PanelRow
    caption : list of str
    drawn : dict
        Settings as they were used, those taken from the data included.
    """

    title: str
    subtitle: str
    findings: list[str]
    rows: list[PanelRow]
    caption: list[str]
    drawn: dict[str, Any] = field(default_factory=dict)


def paint_panels(
    composition: FlatComposition, time: str, theme: Theme, size: tuple[int, int]
) -> tuple[np.ndarray, Page]:
    """Draw the panels and write their page.

    Returns
    -------
    (height, width, 3) uint8 array
    Page
        With the extents of all its texts.
    """
    page = Page(size, theme)
    s = page.scale
    put_header(page, composition.title, composition.subtitle, time)
    y = max(placed.box.bottom for placed in page.texts) + 24 * s
    for line in rows_of(page, composition.findings, "   ·   ", 25, size[0] - 2 * MARGIN * s):
        page.text(MARGIN * s, y, line, 25)
        y += 36 * s
    rows, places, caption = _laid_out(page, composition, y)
    put_caption(page, caption)
    image = background(theme, size)
    for row, at in zip(rows, places, strict=True):
        _put_row(page, image, row, at)
    return page.over(image), page


# ---- layout -------------------------------------------------------------------------------------


@dataclass(frozen=True)
class _Places:
    """Where the parts of a row go: in pixels; `bar` is the width of the bars, 0 for none."""

    reach: float
    axis: float
    base: float
    apart: float
    second: float
    words: tuple[float, float]
    words_height: float
    bar: float


def _laid_out(
    page: Page, composition: FlatComposition, top: float
) -> tuple[list[PanelRow], list[_Places], list[str]]:
    """As much as has room below `top`: rows, where their parts go, and the caption."""
    s = page.scale
    for count in range(len(composition.rows), 0, -1):
        rows = composition.rows[:count]
        words = max(_words_width(page, row) for row in rows)
        for bar in (BAR_WIDTH * s, 0.0):
            missing = [row.symbol for row in composition.rows[count:]]
            missing += [] if bar else ["colour bars"]
            caption = composition.caption + [f"no room for {what}" for what in missing]
            height = (caption_top(page, caption) - 26 * s - top) / count
            places = [
                _best_places(page, top + number * height, height, words, row, bar)
                for number, row in enumerate(rows)
            ]
            if min(at.reach for at in places) >= _LEAST_FAN * s:
                return rows, places, caption
    raise RenderError(
        "Cannot draw the panels: expected a page with room for them beside their words, got "
        f"{page.size[0]} x {page.size[1]} pixels; take a larger size."
    )


def _best_places(
    page: Page, top: float, height: float, words: float, row: PanelRow, bar: float
) -> _Places:
    """The layout that shows the larger fans."""
    s = page.scale
    area = PixelBox(MARGIN * s, top, page.size[0] - MARGIN * s, top + height)
    lift = float(np.sin(row.left.angle[-1]))
    room = (_LABEL_ROOM + _TICK_ROOM + (_BAR_ROOM if bar else 0.0)) * s
    found = [
        layout(area, words, bar, (area.height / lines - room) / lift, lift, s)
        for lines, layout in ((1, _beside), (2, _in_two_lines))
    ]
    return max(found, key=lambda at: at.reach)


def _put_row(page: Page, image: np.ndarray, row: PanelRow, at: _Places) -> None:
    """One quantity with its difference, bars and words."""
    s = page.scale
    feet = (at.axis - 0.5 * _GAP * s, at.axis + 0.5 * _GAP * s)
    _put_fan(page, image, row.left, row.bar, (feet[0], at.base), at.reach)
    _put_fan(page, image, row.right, row.bar, (feet[1], at.base), at.reach)
    _put_fan(page, image, row.difference, row.difference_bar, (at.apart, at.second), at.reach)
    _put_labels(page, (row.left, row.right), feet, at.base, at.reach)
    _put_labels(page, (row.difference,), (at.apart,), at.second, at.reach)
    _put_symbol(page, row, at.axis, at.base, at.reach)
    page.text(at.axis, at.base + 25 * s, "$R$", _TICK, faint=True, align="center")
    if at.bar:
        below = (_TICK_ROOM + 42) * s
        put_bar(page, row.bar, at.axis - 0.5 * at.bar, at.base + below)
        put_bar(page, row.difference_bar, at.apart, at.second + below)
    _put_words(page, row.words, at)


def _beside(
    area: PixelBox, words: float, bar: float, tallest: float, lift: float, s: float
) -> _Places:
    gap, column = _GAP * s, _COLUMN_GAP * s
    room = area.width - 2 * column - words - gap
    reach = min(tallest, room / 3)
    if reach < bar:  # the bars are wider than their fans
        reach = min(tallest, 0.5 * (room - bar), bar)
    pair, single = max(2 * reach + gap, bar), max(reach, bar)
    if pair + single + 2 * column + words > area.width + 1:
        reach = 0.0  # no room: the other layout, or fewer rows
    left = area.left + max(0.5 * (area.width - pair - single - 2 * column - words), 0.0)
    base = area.top + _LABEL_ROOM * s + lift * reach
    apart = left + pair + column
    beside = (apart + single + column, base - 0.5 * lift * reach)
    return _Places(reach, left + 0.5 * pair, base, apart, base, beside, area.height, bar)


def _in_two_lines(
    area: PixelBox, words: float, bar: float, tallest: float, lift: float, s: float
) -> _Places:
    gap, column = _GAP * s, _COLUMN_GAP * s
    half = 0.5 * area.height
    reach = min(tallest, 0.5 * (area.width - gap), area.width - column - words)
    if max(reach, bar) + 0.5 * column + words > area.width + 1:
        reach = 0.0
    axis = area.left + 0.5 * max(2 * reach + gap, bar)
    base = area.top + _LABEL_ROOM * s + lift * reach
    beside = (area.left + max(reach, bar) + 0.5 * column, base + half - 0.5 * lift * reach)
    return _Places(reach, axis, base, area.left, base + half, beside, half, bar)


def _words_width(page: Page, row: PanelRow) -> float:
    return max(page.extent(text, size, bold=bold)[0] for text, size, bold, _ in row.words)


def _put_symbol(page: Page, row: PanelRow, axis: float, base: float, reach: float) -> None:
    """The quantity's symbol over the star, where the fans leave room; the bar names it anyway."""
    turn = float(row.left.angle[-1])
    up = 0.72 * reach * np.sin(turn)
    size = np.array(page.extent(row.symbol, _SYMBOL))
    room = (up - 0.5 * size[1]) / np.tan(turn) + 0.5 * _GAP * page.scale
    if 0.5 * size[0] + 8 * page.scale < room:
        page.text(axis, base - up, row.symbol, _SYMBOL, align="center")


def _put_words(page: Page, words: list[tuple[str, float, bool, bool]], at: _Places) -> None:
    """As many of the words as there is height for, about the middle of the fan."""
    s = page.scale
    heights = [1.5 * size * s for _, size, _, _ in words]
    count = max(int(np.searchsorted(np.cumsum(heights), at.words_height, side="right")), 1)
    x, middle = at.words
    y = middle - 0.5 * sum(heights[:count])
    y = max(y, at.second - at.words_height)
    for (text, size, bold, faint), height in zip(words[:count], heights, strict=False):
        page.text(x, y + 0.5 * height, text, size, bold=bold, faint=faint)
        y += height


def _put_fan(
    page: Page,
    image: np.ndarray,
    fan: Fan,
    bar: ColourBar,
    foot: tuple[float, float],
    reach: float,
) -> None:
    """A fan whose star is at `foot` and whose outer radius is `reach` pixels, with ticks."""
    s = page.scale
    scale = reach / float(fan.r[-1])
    _blend(image, fan, bar, page.theme, foot, scale)
    way = -1.0 if fan.leftward else 1.0
    arc = np.linspace(0.0, float(fan.angle[-1]), 49)
    low, high = float(fan.r[0]) * scale, reach
    outline = np.concatenate(
        [
            np.column_stack([radius * np.cos(turn), radius * np.sin(turn)])
            for radius, turn in ((low, arc), (high, arc[::-1]), (low, arc[:1]))
        ]
    )
    xs, ys = foot[0] + way * outline[:, 0], foot[1] - outline[:, 1]
    page.line(list(xs), list(ys), 1.2, faint=True)
    for radius in radius_ticks(float(fan.r[0]), float(fan.r[-1]), 4):
        x = foot[0] + way * radius * scale
        page.line([x, x], [foot[1] + 3 * s, foot[1] + 11 * s], 1.5, faint=True)
        words = f"{radius:g}"
        half = np.array(page.extent(words, _TICK)) / 2
        if page.is_free(
            PixelBox(x - half[0] - 4, foot[1] + 12 * s, x + half[0] + 4, foot[1] + 36 * s)
        ):
            page.text(x, foot[1] + 25 * s, words, _TICK, faint=True, align="center")


def _put_labels(
    page: Page, fans: tuple[Fan, ...], feet: tuple[float, ...], base: float, reach: float
) -> None:
    """The longest labels that fit over neighbouring fans, each reading from its outer end."""
    s = page.scale
    top = base - float(np.sin(fans[0].angle[-1])) * reach - 0.5 * _LABEL_ROOM * s
    room = len(fans) * reach + _GAP * s * (len(fans) - 1) - 24 * s * (len(fans) - 1)
    for labels in zip(*(fan.labels for fan in fans), strict=True):
        if sum(page.extent(label, _LABEL)[0] for label in labels) > room:
            continue
        for label, fan, foot in zip(labels, fans, feet, strict=True):
            outer = foot - reach if fan.leftward else foot + reach
            align: Align = "left" if fan.leftward else "right"
            page.text(outer, top, label, _LABEL, faint=True, align=align)
        return


# ---- pixels -------------------------------------------------------------------------------------


def _blend(
    image: np.ndarray,
    fan: Fan,
    bar: ColourBar,
    theme: Theme,
    foot: tuple[float, float],
    scale: float,
) -> None:
    """Lay the fan's colours over the picture, its edge smoothed over a pixel."""
    reach = scale * float(fan.r[-1])
    left = int(np.floor(foot[0] - (reach if fan.leftward else 0))) - 1
    right = int(np.ceil(foot[0] + (0 if fan.leftward else reach))) + 1
    top, bottom = int(np.floor(foot[1] - reach * np.sin(fan.angle[-1]))) - 1, int(foot[1]) + 2
    left, top = max(left, 0), max(top, 0)
    right, bottom = min(right, image.shape[1]), min(bottom, image.shape[0])
    n = _OVERSAMPLING
    x = left + (np.arange((right - left) * n) + 0.5) / n - foot[0]
    z = foot[1] - (top + (np.arange((bottom - top) * n) + 0.5) / n)
    colours, weight = _fan_colours(fan, bar, theme, x / scale, z / scale)
    boxes = (bottom - top, n, right - left, n)
    share = weight.reshape(boxes).mean(axis=(1, 3))[..., None]
    mean = (colours * weight[..., None]).reshape(*boxes, 3).mean(axis=(1, 3))
    part = image[top:bottom, left:right]
    part[:] = np.rint(255 * mean + part * (1 - share)).astype(np.uint8)


def _fan_colours(fan: Fan, bar: ColourBar, theme: Theme, x: Array, z: Array) -> tuple[Array, Array]:
    """Colour and coverage (0 or 1) at all pairs of z and x, in code lengths."""
    way = -x if fan.leftward else x
    r = np.hypot(way, z[:, None])
    angle = np.arctan2(z[:, None], way)
    inside = (r >= fan.r[0]) & (r <= fan.r[-1]) & (angle >= 0) & (angle <= fan.angle[-1])
    columns = np.interp(np.log(np.maximum(r, 1e-300)), np.log(fan.r), np.arange(len(fan.r)))
    rows = np.interp(angle, fan.angle, np.arange(len(fan.angle)))
    values = map_coordinates(fan.values, [rows, columns], order=1, mode="nearest")
    inside &= np.isfinite(values)
    low, high = bar.limits
    share = np.clip((np.nan_to_num(values) - low) / (high - low), 0.0, 1.0)
    colours = np.asarray(_exact(bar.colour_map, share))
    if fan.zero_line:
        sign = values > 0
        edge = np.zeros(sign.shape, dtype=bool)
        edge[1:] |= sign[1:] != sign[:-1]
        edge[:, 1:] |= sign[:, 1:] != sign[:, :-1]
        colours[edge] += _ZERO_SHADE * (np.array(theme.rgb("ink")) - colours[edge])
    return colours, inside.astype(float)


def _exact(colour_map: Colormap, share: Array) -> Array:
    return np.asarray(colour_map(share))[..., :3].copy()
