"""The signs of the trade, in pixels: arrows, hatched ground, pins, rollers, springs, dimensions."""

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from workers.outputs.drawing.canvas import Canvas
from workers.outputs.drawing.palette import FAINT, PAPER

Array = NDArray[np.floating[Any]]

HEAD = 15.0  # length of an arrow head [pixels]
STROKE = 2.6
HATCH = 12.0  # distance and length of the strokes of hatched ground
PIN_HEIGHT, PIN_HALF_WIDTH = 22.0, 13.0
ROLLER = 4.6  # radius of the wheels under a roller


def unit(v: ArrayLike) -> Array:
    """The direction of a vector, zero for zero."""
    vector = np.asarray(v, float)
    length = np.linalg.norm(vector)
    return vector / length if length > 0 else vector


def left_of(direction: Array) -> Array:
    """The direction turned by 90 degrees counter-clockwise."""
    return np.array([-direction[1], direction[0]])


def arrow(
    canvas: Canvas, tail: ArrayLike, tip: ArrayLike, colour: str, *, width: float = STROKE
) -> None:
    """A line with a filled head; the head shrinks with a short arrow."""
    start, end = np.asarray(tail, float), np.asarray(tip, float)
    direction = unit(end - start)
    head = min(HEAD * width / STROKE, 0.6 * float(np.linalg.norm(end - start)))
    canvas.line([start, end - head * direction], colour, width)
    arrow_head(canvas, end, direction, head, colour)


def arrow_head(canvas: Canvas, tip: Array, direction: Array, size: float, colour: str) -> None:
    neck, across = tip - size * direction, 0.36 * size * left_of(direction)
    canvas.area([tip, neck + across, neck - across], colour)


def block_arrow(canvas: Canvas, tail: ArrayLike, tip: ArrayLike, colour: str) -> None:
    """A hollow arrow, for what acts on every bit of the material."""
    start, end = np.asarray(tail, float), np.asarray(tip, float)
    direction = unit(end - start)
    neck, across = end - 16 * direction, left_of(direction)
    corners = [
        start + 5 * across,
        neck + 5 * across,
        neck + 12 * across,
        end,
        neck - 12 * across,
        neck - 5 * across,
        start - 5 * across,
    ]
    canvas.area(corners, PAPER)
    canvas.line(corners, colour, 2.2, closed=True)


def turning_arrow(
    canvas: Canvas, centre: ArrayLike, radius: float, colour: str, *, clockwise: bool
) -> None:
    """Three quarters of a circle with a head: a moment or a spin."""
    angle = np.radians(np.linspace(200, -60, 40) if clockwise else np.linspace(-20, 240, 40))
    ring = np.asarray(centre) + radius * np.column_stack((np.cos(angle), np.sin(angle)))
    canvas.line(ring, colour, STROKE)
    head = min(HEAD, 0.8 * radius)
    direction = unit(ring[-1] - ring[-2])
    arrow_head(canvas, ring[-1] + 0.8 * head * direction, direction, head, colour)


# --- supports ------------------------------------------------------------------------------------


def ground(canvas: Canvas, line: Array, outward: Array, colour: str, *, scale: float = 1.0) -> None:
    """Hatched ground along a polyline (n, 2); outward (n, 2) points away from the plate."""
    canvas.line(line, colour, 3.2 * min(1.0, scale + 0.2))
    run = np.concatenate(([0.0], np.cumsum(np.linalg.norm(np.diff(line, axis=0), axis=1))))
    step = HATCH * scale
    at = np.arange(step / 2, run[-1], step)
    if not len(at):
        return
    foot = np.column_stack([np.interp(at, run, c) for c in line.T])
    away = np.column_stack([np.interp(at, run, c) for c in outward.T])
    slant = away - 0.8 * np.column_stack((-away[:, 1], away[:, 0]))
    canvas.line(np.stack((foot, foot + step * slant), axis=1), colour, 1.6)


def pin(canvas: Canvas, apex: Array, outward: Array, colour: str, *, scale: float = 1.0) -> None:
    """A triangle on hatched ground: holds both directions at a point."""
    _triangle(canvas, apex, outward, colour, scale)
    base = apex + PIN_HEIGHT * scale * outward
    _ground_under(canvas, base, outward, colour, scale)


def roller(canvas: Canvas, apex: Array, outward: Array, colour: str, *, scale: float = 1.0) -> None:
    """A triangle on wheels: holds the direction `outward` only."""
    _triangle(canvas, apex, outward, colour, scale)
    radius = ROLLER * scale
    middle = apex + (PIN_HEIGHT * scale + radius + 1) * outward
    for side in (-1, 1):
        wheel = middle + side * 0.55 * PIN_HALF_WIDTH * scale * left_of(outward)
        canvas.disc(wheel, radius, fill=PAPER, edge=colour, width=1.8)
    _ground_under(canvas, middle + (radius + 1) * outward, outward, colour, scale)


def held_stub(canvas: Canvas, at: Array, outward: Array, colour: str, *, scale: float) -> Array:
    """A short arm out of a side, at whose end a roller may hold it along the side."""
    end = at + 24.0 * scale * outward
    canvas.line([at, end], colour, 3.0 * scale)
    return end


def spring(canvas: Canvas, apex: Array, outward: Array, colour: str, *, scale: float = 1.0) -> None:
    """A zigzag that ends on hatched ground."""
    across, length, half = left_of(outward), 34.0 * scale, 8.0 * scale
    along = np.array([0, 0.15, 0.22, 0.36, 0.5, 0.64, 0.78, 0.85, 1.0])
    sway = np.array([0, 0, 1, -1, 1, -1, 1, 0, 0])
    canvas.line(
        apex + length * along[:, None] * outward + half * sway[:, None] * across, colour, 2.0
    )
    _ground_under(canvas, apex + length * outward, outward, colour, scale)


def _triangle(canvas: Canvas, apex: Array, outward: Array, colour: str, scale: float) -> None:
    base = apex + PIN_HEIGHT * scale * outward
    across = PIN_HALF_WIDTH * scale * left_of(outward)
    corners = [apex, base + across, base - across]
    canvas.area(corners, PAPER)
    canvas.line(corners, colour, 2.2, closed=True)


def _ground_under(canvas: Canvas, at: Array, outward: Array, colour: str, scale: float) -> None:
    across = 18.0 * scale * left_of(outward)
    line = np.array([at - across, at + across])
    ground(canvas, line, np.array([outward, outward]), colour, scale=0.75 * scale)


# --- dimensions ----------------------------------------------------------------------------------


def dimension(
    canvas: Canvas, start: Array, end: Array, offset: Array, text: str, size: float
) -> None:
    """A dimension line between two points, moved by `offset`, with its extension lines."""
    line = np.array([start + offset, end + offset])
    away, along = unit(offset), unit(end - start)
    for point, moved in ((start, line[0]), (end, line[1])):
        canvas.line([point + 6 * away, moved + 8 * away], FAINT, 1.2)
        slash = 7 * unit(along + left_of(along))
        canvas.line([moved - slash, moved + slash], FAINT, 2.2)
    canvas.line(line, FAINT, 1.4)
    upright = bool(abs(along[1]) > 0.5)
    width, height = canvas.measure(text, size)
    middle = line.mean(axis=0)
    if np.linalg.norm(end - start) > width + 60:
        half = np.array([height, width + 16] if upright else [width + 16, height]) / 2
        canvas.box(tuple(middle - half), tuple(middle + half), PAPER)
        canvas.text(middle, text, size, colour=FAINT, align="centre", upright=upright)
    else:  # too short to break: the text stands beside the line
        beside = (height / 2 + 8) if not upright else (width / 2 + 12)
        canvas.text(middle + beside * away, text, size, colour=FAINT, align="centre")
