"""Vector drawing on a transparent sheet: smooth lines, filled shapes and measured text.

Coordinates are pixels from the lower left corner, y upward, as in the renderer. The rasteriser
and the fonts are matplotlib's Agg backend and its DejaVu, used bare.
"""

from collections.abc import Sequence
from functools import cache, lru_cache
from pathlib import Path as FilePath
from typing import Literal

import matplotlib
import numpy as np
from matplotlib.backends.backend_agg import RendererAgg
from matplotlib.colors import to_rgba
from matplotlib.font_manager import FontProperties, get_font
from matplotlib.path import Path
from matplotlib.transforms import IdentityTransform
from numpy.typing import ArrayLike, NDArray

Align = Literal["left", "centre", "right"]
Size = tuple[float, float]

POINTS_PER_INCH = 72  # one point of a font or a line width is one pixel
MISSING = "\N{WHITE SQUARE}"  # stands for a character that the font does not have
ELLIPSIS = "\N{HORIZONTAL ELLIPSIS}"


@cache
def _font_file(bold: bool) -> str:
    name = "DejaVuSans-Bold.ttf" if bold else "DejaVuSans.ttf"
    return str(FilePath(matplotlib.get_data_path()) / "fonts" / "ttf" / name)


@cache
def _font(size: float, bold: bool) -> FontProperties:
    return FontProperties(fname=_font_file(bold), size=size)


@cache
def _characters(bold: bool) -> frozenset[int]:
    return frozenset(get_font(_font_file(bold)).get_charmap())


def printable(text: str, bold: bool = False) -> str:
    """The text with blanks for control characters and a box for what the font lacks."""
    known = _characters(bold)
    plain = (" " if ord(c) < 32 or c.isspace() else c for c in text)
    return "".join(c if ord(c) in known else MISSING for c in plain)


@lru_cache(maxsize=4096)
def _text_width(text: str, size: float, bold: bool) -> float:
    """Titles and cautions are the same on many pictures, and measuring takes milliseconds."""
    ruler = RendererAgg(1, 1, POINTS_PER_INCH)
    shown = printable(text, bold)
    return float(ruler.get_text_width_height_descent(shown, _font(size, bold), False)[0])


class Canvas:
    """A transparent sheet of width x height pixels."""

    def __init__(self, width: int, height: int) -> None:
        self.width, self.height = width, height
        self._agg = RendererAgg(width, height, POINTS_PER_INCH)

    # --- lines and shapes --------------------------------------------------------------------

    def line(
        self,
        points: ArrayLike,
        colour: str,
        width: float,
        *,
        dash: Sequence[float] | None = None,
        closed: bool = False,
        alpha: float = 1.0,
    ) -> None:
        """A polyline through (n, 2) pixels, or n such lines at once for (m, n, 2)."""
        self._stroke(_path(points, closed), colour, width, dash, alpha)

    def area(self, points: ArrayLike, colour: str, *, alpha: float = 1.0) -> None:
        """A filled polygon (n, 2), or m of them (m, n, 2)."""
        gc = self._pen(colour, 0.0, alpha)
        face = to_rgba(colour, alpha)
        self._agg.draw_path(gc, _path(points, closed=True), IdentityTransform(), face)

    def disc(
        self, centre: ArrayLike, radius: float, *, fill: str | None, edge: str, width: float
    ) -> None:
        angle = np.linspace(0.0, 2 * np.pi, 49)[:-1]
        ring = np.asarray(centre) + radius * np.column_stack((np.cos(angle), np.sin(angle)))
        if fill is not None:
            self.area(ring, fill)
        self.line(ring, edge, width, closed=True)

    def box(self, low: Size, high: Size, colour: str, *, alpha: float = 1.0) -> None:
        (x0, y0), (x1, y1) = low, high
        self.area([(x0, y0), (x1, y0), (x1, y1), (x0, y1)], colour, alpha=alpha)

    def _pen(self, colour: str, width: float, alpha: float):  # type: ignore[no-untyped-def]
        gc = self._agg.new_gc()
        gc.set_foreground(to_rgba(colour, alpha), isRGBA=True)
        gc.set_linewidth(width)
        gc.set_capstyle("round")
        gc.set_joinstyle("round")
        return gc

    def _stroke(
        self, path: Path, colour: str, width: float, dash: Sequence[float] | None, alpha: float
    ) -> None:
        gc = self._pen(colour, width, alpha)
        if dash is not None:
            gc.set_capstyle("butt")
            gc.set_dashes(0, list(dash))
        self._agg.draw_path(gc, path, IdentityTransform())

    def image(self, corner: Size, pixels: NDArray[np.uint8]) -> None:
        """Opaque pixels (height, width, 3), top row first, with their lower left at `corner`."""
        opaque = np.dstack((pixels, np.full(pixels.shape[:2], 255, np.uint8)))
        gc = self._pen("black", 0.0, 1.0)
        self._agg.draw_image(gc, round(corner[0]), round(corner[1]), opaque[::-1])

    # --- text --------------------------------------------------------------------------------

    def measure(self, text: str, size: float, *, bold: bool = False) -> Size:
        """Width of the text and height of its line; the same height for every text of a size."""
        return _text_width(text, size, bold), 1.2 * size

    def text(
        self,
        at: ArrayLike,
        text: str,
        size: float,
        *,
        colour: str,
        bold: bool = False,
        align: Align = "left",
        upright: bool = False,
    ) -> None:
        """One line of text, centred vertically on `at`; `upright` reads from the bottom up."""
        if not text:
            return
        x, y = np.asarray(at, float)
        shown = printable(text, bold)
        width, _ = self.measure(text, size, bold=bold)
        along = {"left": 0.0, "centre": -width / 2, "right": -width}[align]
        down = 0.36 * size  # half the height of a capital of this font
        dx, dy, angle = (down, along, 90.0) if upright else (along, -down, 0.0)
        gc = self._pen(colour, 1.0, 1.0)
        self._agg.draw_text(
            gc, x + dx, self.height - (y + dy), shown, _font(size, bold), angle, False
        )

    def fit(self, text: str, size: float, width: float, *, bold: bool = False) -> str:
        """The text, cut with an ellipsis where it is wider than `width`."""
        if self.measure(text, size, bold=bold)[0] <= width:
            return text
        low, high = 0, len(text)
        while low < high:
            middle = (low + high + 1) // 2
            cut = text[:middle].rstrip() + ELLIPSIS
            if self.measure(cut, size, bold=bold)[0] <= width:
                low = middle
            else:
                high = middle - 1
        return text[:low].rstrip() + ELLIPSIS

    def wrap(
        self,
        text: str,
        size: float,
        width: float,
        lines: int,
        *,
        bold: bool = False,
        indent: float = 0.0,
    ) -> list[str]:
        """The text in at most so many lines, broken between words, the last one cut to fit.

        The first line begins `indent` further in.
        """
        found: list[str] = []
        words = text.split()
        while words and len(found) < lines - 1:
            room = width - indent
            count = len(words)
            while count > 1 and self.measure(" ".join(words[:count]), size, bold=bold)[0] > room:
                count -= 1
            found.append(self.fit(" ".join(words[:count]), size, room, bold=bold))
            words, indent = words[count:], 0.0
        if words:
            found.append(self.fit(" ".join(words), size, width - indent, bold=bold))
        return found

    # --- what has been drawn -------------------------------------------------------------------

    def pixels(self) -> NDArray[np.uint8]:
        """(height, width, 4) colours and opacity, top row first."""
        return np.asarray(self._agg.buffer_rgba())


def _path(points: ArrayLike, closed: bool) -> Path:
    lines = np.asarray(points, float)
    if lines.ndim == 2:
        lines = lines[None]
    count, length, _ = lines.shape
    codes = np.full((count, length), Path.LINETO, np.uint8)
    codes[:, 0] = Path.MOVETO
    if closed:
        lines = np.concatenate((lines, lines[:, :1]), axis=1)
        codes = np.column_stack((codes, np.full(count, Path.CLOSEPOLY, np.uint8)))
    return Path(lines.reshape(-1, 2), codes.ravel())
