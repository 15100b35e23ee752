"""The page: text, legends and ticks over a picture, every extent recorded and checked."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.text import Text
from matplotlib.transforms import IdentityTransform
from PIL import Image

from fieldviz.scenes.camera import PixelBox
from fieldviz.scenes.theme import Theme

__all__ = ["Align", "Page", "PlacedText"]

Align = Literal["left", "center", "right"]
_DPI = 72.0  # one point is one pixel
_DESIGN_WIDTH, _DESIGN_HEIGHT = 1920, 1080
_SMALLEST_SCALE = 0.35  # so that the smallest text stays 7 pixels high


@dataclass(frozen=True)
class PlacedText:
    """A text on the page and the pixels it covers."""

    text: str
    box: PixelBox


@dataclass
class Page:
    """A page in pixels, y downward; sizes are given for 1920 by 1080 and scale with it.

    Attributes
    ----------
    size : (int, int)
        Width and height.
    theme : Theme
    texts : list of PlacedText
        Every text so far.
    """

    size: tuple[int, int]
    theme: Theme
    texts: list[PlacedText] = field(default_factory=list)

    def __post_init__(self) -> None:
        # Half a pixel more, as the canvas rounds its size down.
        inches = ((self.size[0] + 0.5) / _DPI, (self.size[1] + 0.5) / _DPI)
        self._figure = Figure(figsize=inches, dpi=_DPI)
        self._figure.patch.set_alpha(0.0)
        self._canvas = FigureCanvasAgg(self._figure)
        self._renderer: Any = self._canvas.get_renderer()
        self._pasted: list[tuple[int, int, np.ndarray]] = []

    @property
    def scale(self) -> float:
        """Pixels of this page along one pixel of the design."""
        fitting = min(self.size[0] / _DESIGN_WIDTH, self.size[1] / _DESIGN_HEIGHT)
        return max(fitting, _SMALLEST_SCALE)

    @property
    def box(self) -> PixelBox:
        """The whole page."""
        return PixelBox(0, 0, *self.size)

    # ---- text ---------------------------------------------------------------------------------

    def text(
        self,
        x: float,
        y: float,
        words: str,
        size: float = 24,
        *,
        faint: bool = False,
        bold: bool = False,
        align: Align = "left",
    ) -> PixelBox:
        """Write a line of text.

        Parameters
        ----------
        x, y : float
            Pixels: the left end, the middle or the right end, and the middle of the height.
        words : str
        size : float
            Height of the type in pixels of the design.
        faint, bold : bool
        align : str
            "left", "center" or "right".

        Returns
        -------
        PixelBox
            What the text covers.
        """
        artist = self._artist(x, y, words, size, faint, bold, align)
        self._figure.add_artist(artist)
        box = self._extent(artist)
        self.texts.append(PlacedText(words, box))
        return box

    def extent(self, words: str, size: float = 24, *, bold: bool = False) -> tuple[float, float]:
        """Width and height that a text would cover."""
        box = self._extent(self._artist(0, 0, words, size, False, bold, "left"))
        return box.width, box.height

    def _artist(
        self, x: float, y: float, words: str, size: float, faint: bool, bold: bool, align: Align
    ) -> Text:
        artist = Text(
            x,
            self.size[1] - y,
            words,
            color=self.theme.faint if faint else self.theme.ink,
            fontsize=size * self.scale,
            fontfamily="DejaVu Sans",
            math_fontfamily="dejavusans",
            fontweight="bold" if bold else "normal",
            horizontalalignment=align,
            verticalalignment="center",
            transform=IdentityTransform(),
        )
        artist.set_figure(self._figure)
        return artist

    def _extent(self, artist: Text) -> PixelBox:
        box = artist.get_window_extent(self._renderer)
        height = self.size[1]
        return PixelBox(
            float(box.x0), height - float(box.y1), float(box.x1), height - float(box.y0)
        )

    # ---- lines and pictures -------------------------------------------------------------------

    def line(
        self, xs: list[float], ys: list[float], width: float = 2.0, *, faint: bool = False
    ) -> None:
        """Draw a line through pixel positions."""
        height = self.size[1]
        self._figure.add_artist(
            Line2D(
                xs,
                [height - y for y in ys],
                linewidth=max(width * self.scale, 0.7),
                color=self.theme.faint if faint else self.theme.ink,
                solid_capstyle="butt",
                transform=IdentityTransform(),
            )
        )

    def paste(self, x: float, y: float, picture: np.ndarray) -> PixelBox:
        """Put a small picture on the page, its upper left corner at x, y."""
        left, top = round(x), round(y)
        self._pasted.append((left, top, picture))
        return PixelBox(left, top, left + picture.shape[1], top + picture.shape[0])

    # ---- what is free -------------------------------------------------------------------------

    def is_free(self, box: PixelBox, occupied: np.ndarray | None = None) -> bool:
        """Whether a box is on the page, clear of texts, small pictures and `occupied` pixels."""
        if box.left < 0 or box.top < 0 or box.right > self.size[0] or box.bottom > self.size[1]:
            return False
        pictures = (
            PixelBox(left, top, left + patch.shape[1], top + patch.shape[0])
            for left, top, patch in self._pasted
        )
        if any(box.meets(other) for other in (*(t.box for t in self.texts), *pictures)):
            return False
        if occupied is None:
            return True
        rows = slice(int(box.top), int(np.ceil(box.bottom)))
        columns = slice(int(box.left), int(np.ceil(box.right)))
        return not occupied[rows, columns].any()

    def faults(self) -> list[str]:
        """Texts that overlap or leave the page, in words; empty if all is well."""
        found = []
        for number, placed in enumerate(self.texts):
            box = placed.box
            if min(box.left, box.top) < 0 or box.right > self.size[0] or box.bottom > self.size[1]:
                found.append(f"'{placed.text}' leaves the page")
            found += [
                f"'{placed.text}' meets '{other.text}'"
                for other in self.texts[number + 1 :]
                if box.meets(other.box)
            ]
        return found

    # ---- the result ---------------------------------------------------------------------------

    def over(self, image: np.ndarray) -> np.ndarray:
        """The page laid over a picture of its size, (h, w, 3) uint8."""
        picture = image.copy()
        for left, top, patch in self._pasted:
            height, width = (
                n - max(k, 0) for n, k in zip(picture.shape, (top, left), strict=False)
            )
            part = patch[: max(height, 0), : max(width, 0)]
            picture[top : top + part.shape[0], left : left + part.shape[1]] = part
        self._canvas.draw()
        drawn = np.asarray(self._canvas.buffer_rgba())[: image.shape[0], : image.shape[1]]
        ink = Image.fromarray(np.ascontiguousarray(drawn))
        whole = Image.fromarray(picture).convert("RGBA")
        return np.asarray(Image.alpha_composite(whole, ink))[..., :3].copy()
