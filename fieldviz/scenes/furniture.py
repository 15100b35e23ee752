"""What stands on every page: title, time, legends, caption, scale bar, radius ticks."""

from __future__ import annotations

import re
from collections.abc import Sequence

import numpy as np

from fieldviz.scenes.camera import Camera, PixelBox
from fieldviz.scenes.composition import ColourBar, Composition, RadiusMarks, Swatches
from fieldviz.scenes.page import Page
from fieldviz.scenes.swatches import lit_swatch
from fieldviz.wedge.typing import Array

__all__ = [
    "BAR_WIDTH",
    "MARGIN",
    "caption_top",
    "data_mask",
    "put_bar",
    "put_caption",
    "put_footer",
    "put_header",
    "put_radius_marks",
    "put_scale_bar",
    "rows_of",
]

MARGIN = 64.0
BAR_WIDTH = 360.0
_BAR = (BAR_WIDTH, 14.0)
_SWATCH = (58.0, 26.0)
_GAP = 88.0
_LABEL, _TICK, _CAPTION = 24.0, 22.0, 20.0


# ---- header and footer ------------------------------------------------------------------------


def put_header(page: Page, title: str, subtitle: str, time: str) -> None:
    """Title and subtitle at the upper left, the time at the upper right."""
    s = page.scale
    right = page.size[0] - MARGIN * s
    end = page.text(MARGIN * s, 62 * s, title, 40, bold=True).right
    beside = end + 40 * s + page.extent(time, 30)[0] <= right
    if beside:
        page.text(right, 62 * s, time, 30, align="right")
    y = 114 * s
    for row in rows_of(page, _words(subtitle), " ", 25, page.size[0] - 2 * MARGIN * s):
        page.text(MARGIN * s, y, row, 25, faint=True)
        y += 34 * s
    if not beside:
        page.text(MARGIN * s, y + 14 * s, time, 30)


def put_footer(page: Page, composition: Composition) -> float:
    """Caption and legends at the lower left; returns the top of the footer in pixels."""
    s = page.scale
    room = page.size[0] - 2 * MARGIN * s
    top = put_caption(page, composition.caption)
    for legends in reversed(_legend_rows(page, composition.legends, room)):
        top -= 88 * s
        x = MARGIN * s
        for legend in legends:
            _put_legend(page, legend, x, top, composition)
            x += (_legend_width(page, legend) + _GAP) * s
        top -= 46 * s
    return top


def put_caption(page: Page, phrases: Sequence[str]) -> float:
    """Caption at the lower left; returns the middle of its first row in pixels."""
    s = page.scale
    top = caption_top(page, phrases)
    for number, row in enumerate(_caption_rows(page, phrases)):
        page.text(MARGIN * s, top + 30 * s * number, row, _CAPTION, faint=True)
    return top


def caption_top(page: Page, phrases: Sequence[str]) -> float:
    """Middle of the first row that a caption would have, pixels."""
    rows = _caption_rows(page, phrases)
    return page.size[1] - 40 * page.scale - 30 * page.scale * (len(rows) - 1)


def _caption_rows(page: Page, phrases: Sequence[str]) -> list[str]:
    room = page.size[0] - 2 * MARGIN * page.scale
    return rows_of(page, phrases, "  ·  ", _CAPTION, room)


def rows_of(page: Page, phrases: Sequence[str], joint: str, size: float, room: float) -> list[str]:
    """Join phrases into rows no wider than `room` pixels; a longer phrase is broken."""
    rows: list[str] = []
    for phrase in phrases:
        longer = f"{rows[-1]}{joint}{phrase}" if rows else phrase
        if rows and page.extent(longer, size)[0] <= room:
            rows[-1] = longer
        elif page.extent(phrase, size)[0] > room and joint != " ":
            rows += rows_of(page, _words(phrase), " ", size, room)
        else:
            rows.append(phrase)
    return rows


def _words(phrase: str) -> list[str]:
    """Split at spaces, but not within mathematical notation."""
    return re.split(r" (?=(?:[^$]*\$[^$]*\$)*[^$]*$)", phrase)


# ---- legends ----------------------------------------------------------------------------------


def _legend_width(page: Page, legend: ColourBar | Swatches) -> float:
    """Width in pixels of the design."""
    label = page.extent(legend.label, _LABEL)[0] / page.scale
    if isinstance(legend, ColourBar):
        return max(label, _BAR[0])
    entries = sum(_entry_width(page, text) for *_, text in legend.entries)
    return max(label, entries - 36)


def _entry_width(page: Page, text: str) -> float:
    return _SWATCH[0] + 12 + page.extent(text, _TICK)[0] / page.scale + 36


def _legend_rows(
    page: Page, legends: list[ColourBar | Swatches], room: float
) -> list[list[ColourBar | Swatches]]:
    rows: list[list[ColourBar | Swatches]] = []
    used = 0.0
    for legend in legends:
        width = (_legend_width(page, legend) + _GAP) * page.scale
        if not rows or used + width - _GAP * page.scale > room:
            rows.append([])
            used = 0.0
        rows[-1].append(legend)
        used += width
    return rows


def _put_legend(
    page: Page, legend: ColourBar | Swatches, x: float, y: float, composition: Composition
) -> None:
    if isinstance(legend, ColourBar):
        put_bar(page, legend, x, y)
    else:
        page.text(x, y - 27 * page.scale, legend.label, _LABEL)
        _put_swatches(page, legend, x, y, composition)


def put_bar(page: Page, bar: ColourBar, x: float, y: float) -> None:
    """A colour bar, its upper left corner at x, y, with its label above and ticks below."""
    s = page.scale
    page.text(x, y - 27 * s, bar.label, _LABEL)
    width, height = round(_BAR[0] * s), max(round(_BAR[1] * s), 4)
    shares = (np.arange(width) + 0.5) / width
    row = np.rint(255 * np.asarray(bar.colour_map(shares))[:, :3]).astype(np.uint8)
    box = page.paste(x, y, np.repeat(row[None], height, axis=0))
    page.line(
        [box.left, box.right, box.right, box.left, box.left],
        [box.top, box.top, box.bottom, box.bottom, box.top],
        1.2,
        faint=True,
    )
    low, high = bar.limits
    for value, words in bar.ticks:
        at = box.left + (value - low) / (high - low) * box.width
        page.line([at, at], [box.bottom, box.bottom + 6 * s], 1.5)
        text_width = page.extent(words, _TICK)[0]
        reach = text_width / 2 + 8 * s
        label = PixelBox(at - reach, box.bottom, at + reach, box.bottom + 34 * s)
        if page.is_free(label):
            page.text(at, box.bottom + 21 * s, words, _TICK, align="center")


def _put_swatches(
    page: Page, legend: Swatches, x: float, y: float, composition: Composition
) -> None:
    s = page.scale
    size = (max(round(_SWATCH[0] * s), 8), max(round(_SWATCH[1] * s), 6))
    for name, around, words in legend.entries:
        veil = None if around is None else composition.layer(around).material
        picture = lit_swatch(composition.layer(name).material, page.theme, size, veil)
        page.paste(x, y - 5 * s, picture)
        page.text(x + (_SWATCH[0] + 12) * s, y + 8 * s, words, _TICK)
        x += _entry_width(page, words) * s


# ---- scales in the picture ----------------------------------------------------------------------


def put_scale_bar(page: Page, camera: Camera, middle: Array, y: float) -> None:
    """A bar of round length at the lower right; its length holds at the distance of `middle`.

    It goes up from `y` until it is clear of captions and legends.
    """
    s = page.scale
    per_length = camera.pixels_per_length(middle, page.size)
    longest = 300 * s / per_length
    power = 10.0 ** np.floor(np.log10(longest))
    length = max(m * power for m in (1, 2, 5) if m * power <= longest)
    right = page.size[0] - MARGIN * s
    left = right - length * per_length
    words = rf"${length:g}\,R_0$ at the star"
    width, height = page.extent(words, _LABEL)
    centre = min((left + right) / 2, right - width / 2)
    for _ in range(40):
        box = PixelBox(min(left, centre - width / 2), y - 30 * s - height, right, y + 12 * s)
        if page.is_free(box):
            break
        y -= 10 * s
    else:
        return
    page.line([left, right], [y, y], 2.0)
    for x in (left, right):
        page.line([x, x], [y - 8 * s, y + 8 * s], 2.0)
    page.text(centre, y - 30 * s, words, _LABEL, align="center")


def data_mask(image: np.ndarray, margin: int) -> np.ndarray:
    """Pixels that show data, grown by a margin.

    The background changes with height alone, so the first column, free of data, tells it.
    """
    from scipy.ndimage import maximum_filter

    background = image[:, :1].astype(np.int16)
    differs = np.abs(image.astype(np.int16) - background).max(axis=2) > 5
    return np.asarray(maximum_filter(differs, size=2 * margin + 1))


def put_radius_marks(
    page: Page, camera: Camera, candidates: list[RadiusMarks], occupied: np.ndarray
) -> str | None:
    """Ticks along the edge of the data on which most labels are clear of everything.

    Returns
    -------
    str or None
        The axis label, or None where no edge is free.
    """
    plans = [_plan(page, camera, marks, occupied) for marks in candidates]
    best = max(plans, key=len, default=[])
    if len(best) < 2:
        return None
    marks = candidates[plans.index(best)]
    s = page.scale
    for number, start, way, label in best:
        stop = start + 14 * s * way
        page.line([start[0], stop[0]], [start[1], stop[1]], 2.0)
        page.text(float(label[0]), float(label[1]), marks.texts[number], _TICK, align="center")
    _put_axis_name(page, marks.name, best, occupied)
    return marks.name


_Plan = list[tuple[int, Array, Array, Array]]


def _plan(page: Page, camera: Camera, marks: RadiusMarks, occupied: np.ndarray) -> _Plan:
    """Ticks whose labels are free: (number, start, direction, label position)."""
    s = page.scale
    starts = camera.pixels(marks.points, page.size)
    inside = camera.pixels(marks.beside, page.size)
    plan: _Plan = []
    taken: list[PixelBox] = []
    for number, (start, inner) in enumerate(zip(starts, inside, strict=True)):
        way = start - inner
        way = way / max(float(np.hypot(*way)), 1e-9)
        size = np.array(page.extent(marks.texts[number], _TICK))
        reach = 20 * s + 0.5 * float(np.abs(way) @ size)
        label = start + way * reach
        box = PixelBox(*(label - size / 2), *(label + size / 2)).grown(3 * s)
        if page.is_free(box, occupied) and not any(box.meets(other) for other in taken):
            plan.append((number, start, way, label))
            taken.append(box)
    return plan


def _put_axis_name(page: Page, name: str, plan: _Plan, occupied: np.ndarray) -> None:
    """The axis label beside the ticks, in the first free place."""
    s = page.scale
    size = np.array(page.extent(name, _LABEL))
    along = plan[-1][3] - plan[0][3]
    along = along / max(float(np.hypot(*along)), 1e-9)
    tries = [(plan[-1][3], along), (plan[0][3], -along)]
    middle = plan[len(plan) // 2]
    places = [at + way * (0.5 * float(np.abs(way) @ size) + 40 * s) for at, way in tries]
    places += [
        middle[3] + middle[2] * (far * s + float(np.abs(middle[2]) @ size)) for far in (30, 60)
    ]
    for place in places:
        box = PixelBox(*(place - size / 2), *(place + size / 2)).grown(4 * s)
        if page.is_free(box, occupied):
            page.text(float(place[0]), float(place[1]), name, _LABEL, align="center")
            return
