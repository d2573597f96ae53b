"""The page that every picture stands on: title, room for the drawing, cautions at the foot.

Paper of 1600 x 1200 pixels, made to be read at half an A4 page: there 184 mm wide, so that
capitals of the smallest letters are 2 mm high (1.8 to 2.5 mm are common practice for drawings).
The cautions take what room they need up to a limit; what is cut is named by its code.
"""

from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from PIL import Image, PngImagePlugin

from workers.cautions import SEVERITIES, STANDING, Caution
from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.palette import FAINT, HAIRLINE, INK, PAPER, SEVERITY_COLOURS
from workers.outputs.drawing.view import Box
from workers.outputs.vtu import caution_line

WIDTH, HEIGHT = 1600, 1200
MARGIN = 44
TITLES = ((40, 1), (36, 1), (36, 2), (30, 2), (26, 3))  # size and lines, best first
SUBTITLE_SIZE = 32
LABEL_SIZE = 30
SMALL_SIZE = 24  # of the footer and of what is only good to know
FOOTER_LINE = 31
FOOTER_LINES = 10  # a quarter of the page
TAG_WIDTH = 104
AIR = 14  # below what is drawn, in the window
WINDOW = "Window"  # key of the file's text with the first and last row between title and cautions

Pixels = NDArray[np.uint8]


class FooterRow(NamedTuple):
    """A caution as it is set: the lines of its message, the first one behind its code."""

    severity: str
    code: str
    lines: tuple[str, ...]


class Page:
    """A page with its title and footer drawn.

    canvas : the sheet for everything that is drawn over the painted plate
    drawing : Box, the room between title and footer
    """

    def __init__(self, title: str, subtitle: str, cautions: Sequence[Caution]) -> None:
        self.title, self.cautions = title, tuple(cautions)
        self.canvas = Canvas(WIDTH, HEIGHT)
        self.paper: Pixels = np.full((HEIGHT, WIDTH, 3), 255, np.uint8)
        foot, top = self._draw_title(title, subtitle)
        bottom = self._draw_footer(footer_rows(self.canvas, cautions))
        self._between = round(HEIGHT - foot), round(HEIGHT - bottom)
        self.drawing = Box(MARGIN, bottom, WIDTH - MARGIN, top)

    def _draw_title(self, title: str, subtitle: str) -> tuple[float, float]:
        """Where the title ends and where the subtitle below it does."""
        room = WIDTH - 2 * MARGIN
        for size, count in TITLES:
            lines = self.canvas.wrap(title, size, room, count, bold=True)
            if " ".join(lines) == " ".join(title.split()):
                break
        y = HEIGHT - 26.0
        for line in lines:
            y -= 0.6 * size
            self.canvas.text((MARGIN, y), line, size, colour=INK, bold=True)
            y -= 0.6 * size
        foot = y
        y -= 0.75 * SUBTITLE_SIZE
        shown = self.canvas.fit(subtitle, SUBTITLE_SIZE, room)
        self.canvas.text((MARGIN, y), shown, SUBTITLE_SIZE, colour=FAINT)
        return foot, y - SUBTITLE_SIZE

    def _draw_footer(self, rows: Sequence[FooterRow]) -> float:
        count = sum(len(row.lines) for row in rows)
        top = 22.0 + count * FOOTER_LINE
        self.canvas.line([(MARGIN, top + 12), (WIDTH - MARGIN, top + 12)], HAIRLINE, 1.5)
        y = top - FOOTER_LINE / 2
        for row in rows:
            self._draw_tag(row.severity, y)
            x = MARGIN + TAG_WIDTH + 14.0
            if row.code:
                self.canvas.text((x, y), row.code, SMALL_SIZE, colour=INK, bold=True)
            indent = code_width(self.canvas, row.code)
            for line in row.lines:
                self.canvas.text((x + indent, y), line, SMALL_SIZE, colour=INK)
                indent, y = 0.0, y - FOOTER_LINE
        return top + 20

    def _draw_tag(self, severity: str, y: float) -> None:
        if not severity:
            return
        colour = SEVERITY_COLOURS[severity]
        low, high = (MARGIN, y - 12.5), (MARGIN + TAG_WIDTH, y + 12.5)
        self.canvas.box(low, high, colour)
        middle = (MARGIN + TAG_WIDTH / 2, y)
        self.canvas.text(middle, severity.upper(), 21, colour=PAPER, bold=True, align="centre")

    # --- the finished picture ------------------------------------------------------------------

    def pixels(self) -> Pixels:
        """Paper and canvas together, (height, width, 3), top row first."""
        return over(self.paper, self.canvas.pixels())

    def save(self, path: Path, facts: Mapping[str, str]) -> None:
        """Write the picture as PNG with its title, facts and cautions as text in the file."""
        text = PngImagePlugin.PngInfo()
        lines = "\n".join(map(caution_line, self.cautions))
        pixels = self.pixels()
        told = {"Title": self.title, **facts, WINDOW: self._window(pixels), "Cautions": lines}
        for key, value in told.items():
            text.add_itxt(key, value) if not _is_latin(value) else text.add_text(key, value)
        image = Image.fromarray(pixels)
        image.save(path, format="PNG", pnginfo=text, compress_level=3)

    def _window(self, pixels: Pixels) -> str:
        """The rows between title and cautions, without blank ones at their end."""
        first, last = self._between
        used = np.flatnonzero((pixels[first:last] < 250).any(axis=(1, 2)))
        end = min(last, first + int(used.max(initial=0)) + AIR)
        return f"{first} {end}"


def over(paper: Pixels, sheet: Pixels) -> Pixels:
    """A transparent sheet (height, width, 4) laid over opaque paper (height, width, 3)."""
    mixed = Image.fromarray(paper).convert("RGBA")
    mixed.alpha_composite(Image.fromarray(sheet))
    return np.asarray(mixed.convert("RGB"))


def _is_latin(text: str) -> bool:
    return all(ord(c) < 256 for c in text)


# --- the footer --------------------------------------------------------------------------------


def footer_rows(canvas: Canvas, cautions: Iterable[Caution]) -> list[FooterRow]:
    """The cautions as they are set: stop, check, note; the standing notes last and in full.

    Where room runs short messages are cut to one line, then the least severe are only named.
    """
    standing = [_row(canvas, caution, 2) for caution in STANDING]
    codes = {caution.code for caution in STANDING}
    order = list(SEVERITIES)
    raised = sorted(
        (c for c in cautions if c.code not in codes), key=lambda c: order.index(c.severity)
    )
    room = FOOTER_LINES - _height(standing)
    rows = [_row(canvas, caution, 2) for caution in raised]
    for number in reversed(range(len(raised))):
        if _height(rows) <= room:
            break
        rows[number] = _row(canvas, raised[number], 1)
    if _height(rows) > room:
        left = raised[room - 1 :]
        named = f"and {len(left)} more: {', '.join(dict.fromkeys(c.code for c in left))}"
        width = WIDTH - 2 * MARGIN - TAG_WIDTH - 14
        rows = [*rows[: room - 1], FooterRow("", "", (canvas.fit(named, SMALL_SIZE, width),))]
    return [*rows, *standing]


def code_width(canvas: Canvas, code: str) -> float:
    return canvas.measure(code, SMALL_SIZE, bold=True)[0] + 14 if code else 0.0


def _row(canvas: Canvas, caution: Caution, lines: int) -> FooterRow:
    width = WIDTH - 2 * MARGIN - TAG_WIDTH - 14
    indent = code_width(canvas, caution.code)
    wrapped = canvas.wrap(caution.message, SMALL_SIZE, width, lines, indent=indent)
    return FooterRow(caution.severity, caution.code, tuple(wrapped))


def _height(rows: Sequence[FooterRow]) -> int:
    return sum(len(row.lines) for row in rows)
