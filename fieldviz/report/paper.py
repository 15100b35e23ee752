"""The paper diagrams are drawn on: one look in both themes, legible on a phone, without pyplot."""

from __future__ import annotations

import io
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Literal

import matplotlib as mpl
import numpy as np
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure
from matplotlib.ticker import FixedFormatter, FixedLocator, NullLocator

from fieldviz.scenes.theme import THEMES, Theme
from fieldviz.scenes.wording import decade_ticks, radius_ticks
from fieldviz.wedge.typing import Array

__all__ = ["ANGLES_IN_WORDS", "COLOURS", "Diagram", "Paper", "drawn"]

_WIDTH, _HEIGHT = 4.7, 3.4  # inches; a phone shows them at three quarters of this
ANGLES_IN_WORDS = (
    "0: both sides alike; \N{MINUS SIGN}45: above only; 45: below only; ±90: opposite; 180: both "
    "reversed."
)
_TYPE, _SMALL_TYPE = 10.0, 9.0  # points
_DPI = 200.0  # of maps within a drawing
# Upper and lower side, a third and a fourth line: apart in lightness and for colour-blind eyes.
COLOURS = {
    "light": {"upper": "#1565b0", "lower": "#c2570c", "third": "#15181d", "fourth": "#7a8594"},
    "dark": {"upper": "#6fb4f5", "lower": "#f5a25a", "third": "#e9edf2", "fourth": "#93a0b2"},
}


@dataclass(frozen=True)
class Diagram:
    """A drawing in both themes.

    Attributes
    ----------
    name : str
        Fit for a file name.
    title, caption, alt : str
        `alt` says in words what is to be seen.
    light, dark : bytes
        SVG.
    """

    name: str
    title: str
    caption: str
    alt: str
    light: bytes
    dark: bytes


class Paper:
    """One drawing in one theme.

    Attributes
    ----------
    theme : Theme
    figure, axes
        Of matplotlib.
    """

    def __init__(self, theme: Theme) -> None:
        self.theme = theme
        self.figure = Figure(figsize=(_WIDTH, _HEIGHT), layout="constrained")
        self.figure.patch.set_alpha(0.0)
        self.axes: Any = self.figure.add_subplot()
        self._dress(self.axes)

    def _dress(self, axes: Any) -> None:
        axes.set_facecolor("none")
        for side, spine in axes.spines.items():
            spine.set_color(self.theme.outline)
            spine.set_visible(side in ("left", "bottom"))
        axes.tick_params(
            colors=self.theme.faint, labelsize=_SMALL_TYPE, labelcolor=self.theme.ink, which="both"
        )

    def colour(self, role: str) -> str:
        """Colour of "upper", "lower", "third" or "fourth"."""
        return COLOURS[self.theme.name][role]

    def label(self, x: str, y: str) -> None:
        """Write what the axes are."""
        for text, write in ((x, self.axes.set_xlabel), (y, self.axes.set_ylabel)):
            write(text, color=self.theme.ink, fontsize=_TYPE)

    def radius_axis(self, low: float, high: float, which: Literal["x", "y"] = "x") -> None:
        """Radius on a logarithmic axis with plain numbers, or linear from r = 0."""
        axes, ticks = self.axes, radius_ticks(low, high)
        axis = axes.xaxis if which == "x" else axes.yaxis
        if low > 0:
            (axes.set_xscale if which == "x" else axes.set_yscale)("log")
        (axes.set_xlim if which == "x" else axes.set_ylim)(low, high)
        axis.set_major_locator(FixedLocator(ticks.tolist()))
        axis.set_major_formatter(FixedFormatter([f"{tick:g}" for tick in ticks]))
        axis.set_minor_locator(NullLocator())

    def logarithmic(self, *values: Array) -> None:
        """A logarithmic axis upward for all positive numbers among these, with few plain ticks."""
        known = np.concatenate([one[np.isfinite(one) & (one > 0)] for one in values])
        low, high = np.log10(known.min()) - 0.05, np.log10(known.max()) + 0.05
        ticks = decade_ticks(low, high, 5)
        self.axes.set_yscale("log")
        self.axes.set_ylim(10.0**low, 10.0**high)
        self.axes.yaxis.set_major_locator(FixedLocator([10.0**at for at, _ in ticks]))
        self.axes.yaxis.set_major_formatter(FixedFormatter([text for _, text in ticks]))
        self.axes.yaxis.set_minor_locator(NullLocator())

    def zero(self) -> None:
        """A faint line at zero, if zero is in sight."""
        low, high = self.axes.get_ylim()
        if low < 0 < high:
            self.axes.axhline(0, color=self.theme.outline, linewidth=0.8, zorder=0)

    def legend(self) -> None:
        """Names of the lines above the drawing, where nothing can be covered."""
        handles, labels = self.axes.get_legend_handles_labels()
        if handles:
            self.figure.legend(
                handles, labels, loc="outside upper center", ncols=min(len(labels), 3),
                frameon=False, fontsize=_SMALL_TYPE, labelcolor=self.theme.ink, handlelength=1.8,
                columnspacing=1.2,
            )  # fmt: skip

    def map(
        self, x_edges: Array, y_edges: Array, values: Array, label: str, **how: Any
    ) -> tuple[Any, Any]:
        """Draw (n_x, n_y) values as coloured cells, what has none left blank; mesh and bar."""
        mesh = self.axes.pcolormesh(
            x_edges, y_edges, np.ma.masked_invalid(values.T), rasterized=True, **how
        )
        bar = self.figure.colorbar(mesh, ax=self.axes, pad=0.02, aspect=24)
        bar.outline.set_visible(False)
        bar.ax.tick_params(
            colors=self.theme.faint, labelsize=_SMALL_TYPE, labelcolor=self.theme.ink
        )
        bar.set_label(label, color=self.theme.ink, fontsize=_TYPE)
        return mesh, bar

    def svg(self) -> bytes:
        """The drawing, the same bytes every time."""
        kept = io.BytesIO()
        FigureCanvasSVG(self.figure)
        settings = {"svg.hashsalt": "fieldviz", "svg.fonttype": "path"}
        nothing = dict.fromkeys(("Date", "Creator", "Format", "Type"))
        with mpl.rc_context(settings):
            self.figure.savefig(kept, format="svg", dpi=_DPI, transparent=True, metadata=nothing)
        return kept.getvalue()


def drawn(name: str, title: str, caption: str, alt: str, draw: Callable[[Paper], None]) -> Diagram:
    """Draw in both themes."""
    found = {}
    for theme in THEMES.values():
        paper = Paper(theme)
        draw(paper)
        found[theme.name] = paper.svg()
    return Diagram(name, title, caption, alt, found["light"], found["dark"])
