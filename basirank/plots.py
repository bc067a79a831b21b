"""Line plots as SVG: stacked panels over one axis, each curve labelled beside itself where there is room.

Made for a slide: large type, ticks at round numbers, a frame of two axes, colours that stay apart for readers who
do not see red or green. No plotting library is needed; a PNG is drawn from the SVG by the optional package resvg-py.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from importlib.util import find_spec
from xml.sax.saxutils import escape

import numpy as np
from numpy.typing import NDArray

from .writers import OutputError

Floats = NDArray[np.float64]

COLOURS = ("#12439b", "#d97000", "#158f7d", "#8f0f4d", "#5d9fe0", "#5f4a00", "#222222", "#d678b4")
"""Eight colours that differ in lightness as well as in hue."""

WIDTH = 960.0
LEFT, RIGHT = 92.0, 30.0
TITLE, BOTTOM, GAP = 46.0, 62.0, 34.0
MARK_ROW = 21.0  # height of a row of labels over a panel
FONT = 17.0
LETTER = 0.57  # mean width of a letter, as a share of the size
INK, FAINT, RULE = "#222222", "#5c5c5c", "#d9d9d9"
_SAMPLE = 4.0  # distance of the points by which a curve is kept clear of labels [px]
_ROOM = 0.5  # a label that would lie on more of a curve than this goes to the legend [labels' heights]


@dataclass(frozen=True, slots=True, eq=False)
class Line:
    """One curve; gaps where y is not a number."""

    label: str
    x: Floats
    y: Floats
    colour: int


@dataclass(frozen=True, slots=True)
class Mark:
    """A thin upright line across a panel, its text above; or, with a y, a dot with its text beside it."""

    x: float
    label: str
    y: float | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Panel:
    """One plot of the stack.

    Attributes
    ----------
    title, y_label : str
    lines : sequence of Line
    y_range : tuple of float
    marks : sequence of Mark
    height : float
        Of the plot itself [px].
    """

    title: str
    y_label: str
    lines: Sequence[Line]
    y_range: tuple[float, float]
    marks: Sequence[Mark] = ()
    height: float = 300.0


Box = tuple[float, float, float, float]  # left, top, right, bottom


@dataclass(frozen=True, slots=True)
class _Frame:
    """From numbers to places on the page."""

    x_range: tuple[float, float]
    y_range: tuple[float, float]
    top: float
    height: float

    def x(self, value: Floats | float) -> Floats:
        low, high = self.x_range
        return np.asarray(LEFT + (np.asarray(value) - low) / (high - low) * (WIDTH - LEFT - RIGHT))

    def y(self, value: Floats | float) -> Floats:
        low, high = self.y_range
        return np.asarray(self.top + self.height - (np.asarray(value) - low) / (high - low) * self.height)

    @property
    def box(self) -> Box:
        return LEFT, self.top, WIDTH - RIGHT, self.top + self.height


def ticks(low: float, high: float, most: int) -> list[float]:
    """Round numbers between two ends, at most so many.

    Examples
    --------
    >>> ticks(0.0, 14.0, 8)
    [0.0, 2.0, 4.0, 6.0, 8.0, 10.0, 12.0, 14.0]
    >>> ticks(-1.0, 1.0, 5)
    [-1.0, -0.5, 0.0, 0.5, 1.0]
    """
    power = 10.0 ** math.floor(math.log10((high - low) / most))
    step = next(power * m for m in (1, 2, 5, 10, 20) if (high - low) / (power * m) <= most - 1 + 1e-9)
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    return [round(n * step, 10) + 0.0 for n in range(first, last + 1)]


def svg(panels: Sequence[Panel], *, x_label: str, x_range: tuple[float, float], title: str = "") -> str:
    """The panels, one below the other, over one axis.

    Parameters
    ----------
    panels : sequence of Panel
    x_label : str
        Name of the common axis.
    x_range : tuple of float
        Its ends.
    title : str
        Over the whole.

    Returns
    -------
    str
        An SVG document.
    """
    parts: list[str] = []
    top = TITLE if title else 14.0
    if title:
        parts.append(_text(LEFT, 30.0, title, size=FONT + 3, weight="bold"))
    for n, panel in enumerate(panels):
        labels = _mark_rows(panel, x_range)
        head = MARK_ROW * max((row + 1 for _, row in labels), default=0)
        if panel.title:
            parts.append(_text(LEFT, top + 20.0, panel.title, size=FONT, weight="bold"))
            top += 30.0
        frame = _Frame(x_range, panel.y_range, top + head + 6.0, panel.height)
        drawn, legend = _panel(panel, frame, labels, axis=n == len(panels) - 1, x_label=x_label)
        parts += drawn
        top = frame.top + frame.height + GAP
        if legend and n == len(panels) - 1:
            top += BOTTOM - GAP
        drawn, top = _legend(legend, top)
        parts += drawn
        if n == len(panels) - 1 and not legend:
            top += BOTTOM - GAP
    height = f"{top + 8:.0f}"
    return (
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{WIDTH:.0f}" height="{height}" '
        f'viewBox="0 0 {WIDTH:.0f} {height}" '
        "font-family=\"Helvetica, Arial, 'Liberation Sans', 'DejaVu Sans', sans-serif\">\n"
        f'<rect width="100%" height="100%" fill="#ffffff"/>\n' + "\n".join(parts) + "\n</svg>\n"
    )


def png_ready() -> None:
    """Look for the package that draws a PNG.

    Raises
    ------
    OutputError
        It is not there.
    """
    if find_spec("resvg_py") is None:
        raise OutputError(
            "a PNG needs the package resvg-py (pip install 'basirank[png]'); an .svg needs nothing"
        )


def png(document: str) -> bytes:
    """A PNG of an SVG document, at twice its size; `png_ready` says whether it can be drawn."""
    from resvg_py import svg_to_bytes

    return bytes(svg_to_bytes(svg_string=document, zoom=2))


def _panel(
    panel: Panel, frame: _Frame, labels: list[tuple[Mark, int]], *, axis: bool, x_label: str
) -> tuple[list[str], list[Line]]:
    """Grid, axes, marks, curves and labels of a panel; and the lines that found no room for a label."""
    left, top, right, bottom = frame.box
    parts = []
    for value in ticks(*frame.y_range, most=max(3, int(panel.height / 38))):
        y = float(frame.y(value))
        parts.append(_stroke(left, y, right, y, RULE, 1.0))
        parts.append(_text(left - 10, y + 6, _number(value), anchor="end", fill=FAINT, size=FONT - 2))
    for value in ticks(*frame.x_range, most=15):
        x = float(frame.x(value))
        parts.append(_stroke(x, bottom, x, bottom + 6, INK, 1.2))
        if axis:
            parts.append(_text(x, bottom + 24, _number(value), anchor="middle", fill=FAINT, size=FONT - 2))
    parts += [_stroke(left, top, left, bottom, INK, 1.4), _stroke(left, bottom, right, bottom, INK, 1.4)]
    middle = (top + bottom) / 2
    parts.append(
        _text(26.0, middle, panel.y_label, anchor="middle", extra=f' transform="rotate(-90 26 {middle:.1f})"')
    )
    if axis:
        parts.append(_text((left + right) / 2, bottom + 52, x_label, anchor="middle"))
    rows = max((row for _, row in labels), default=0)
    for mark, row in labels:
        x = float(frame.x(mark.x))
        level = top - 6 - MARK_ROW * (rows - row)
        parts.append(_stroke(x, level + 4, x, bottom, FAINT, 1.2, dash="3 4"))
    for mark, row in labels:
        x, level = float(frame.x(mark.x)), top - 6 - MARK_ROW * (rows - row)
        anchor = _anchor(x, mark.label)
        parts.append(_text(x, level, mark.label, anchor=anchor, fill=FAINT, size=FONT - 2, halo=True))
    paths = [_pixels(line, frame) for line in panel.lines]
    for line, pieces in zip(panel.lines, paths, strict=True):
        colour = COLOURS[line.colour % len(COLOURS)]
        for piece in pieces:
            points = " ".join(f"{x:.1f},{y:.1f}" for x, y in piece)
            parts.append(
                f'<polyline points="{points}" fill="none" stroke="{colour}" stroke-width="3" '
                'stroke-linejoin="round" stroke-linecap="round"/>'
            )
    occupied = [_dense(pieces) for pieces in paths]
    taken: list[Box] = []
    for mark in panel.marks:
        if mark.y is not None:
            parts += _dot(mark, frame, occupied, taken)
    legend = []
    for n, line in enumerate(panel.lines):
        place = _label_place(line.label, n, occupied, taken, frame)
        if place is None:
            legend.append(line)
            continue
        taken.append(place)
        colour = COLOURS[line.colour % len(COLOURS)]
        parts.append(_text(place[0] + 3, place[3] - 6, line.label, fill=colour, weight="bold", halo=True))
    return parts, legend


def _pixels(line: Line, frame: _Frame) -> list[Floats]:
    """The pieces of a curve within the frame, as points on the page."""
    x, y = frame.x(line.x), frame.y(np.clip(line.y, *frame.y_range))
    shown = np.isfinite(line.y) & (line.x >= frame.x_range[0] - 1e-9) & (line.x <= frame.x_range[1] + 1e-9)
    edges = np.flatnonzero(np.diff(np.concatenate([[False], shown, [False]]).astype(int)))
    return [
        np.column_stack([x[a:b], y[a:b]]) for a, b in zip(edges[::2], edges[1::2], strict=True) if b - a > 1
    ]


def _dense(pieces: list[Floats]) -> Floats:
    """Points along a curve, a few pixels apart."""
    points = [np.zeros((0, 2))]
    for piece in pieces:
        along = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(piece, axis=0).T))])
        at = np.arange(0.0, along[-1] + _SAMPLE, _SAMPLE)
        points.append(np.column_stack([np.interp(at, along, piece[:, k]) for k in (0, 1)]))
    return np.concatenate(points)


def _size(label: str) -> tuple[float, float]:
    return len(label) * FONT * LETTER * 1.06 + 6, FONT + 7


def _label_place(label: str, own: int, occupied: list[Floats], taken: list[Box], frame: _Frame) -> Box | None:
    """Where a label stands close to its own curve, clear of all curves, labels and the frame; None for no room."""
    points = occupied[own]
    if not len(points):
        return None
    width, height = _size(label)
    left, top, right, bottom = frame.box
    others = np.concatenate(occupied)
    best, best_cost = None, _ROOM
    highest = points[:, 1].min()
    own_height = max(points[:, 1].max() - highest, 1.0)
    for x, y in points[:: max(1, len(points) // 120)]:
        for dx, dy in (
            (-width / 2, -height - 5), (8, -height - 2), (-width - 8, -height - 2), (10, -height / 2),
            (-width - 10, -height / 2), (-width / 2, 6), (8, 4), (-width - 8, 4),
        ):  # fmt: skip
            box = (x + dx, y + dy, x + dx + width, y + dy + height)
            if box[0] < left + 4 or box[2] > right or box[1] < top - 3 or box[3] > bottom - 3:
                continue
            if any(_overlap(box, other) for other in taken):
                continue
            inside = (
                (others[:, 0] > box[0] - 2) & (others[:, 0] < box[2] + 2)
                & (others[:, 1] > box[1] - 2) & (others[:, 1] < box[3] + 2)
            )  # fmt: skip
            middle = ((box[0] + box[2]) / 2, (box[1] + box[3]) / 2)
            # a label is read as that of the curve next to it: the other curves must be farther away
            apart = min(
                (
                    float(np.hypot(*(other - middle).T).min())
                    for n, other in enumerate(occupied)
                    if n != own and len(other)
                ),
                default=1e3,
            )
            near = float(np.hypot(*(points - middle).T).min())
            cost = inside.sum() * 1.0 + (0.3 if apart < 1.4 * near else 0.0)
            cost += 0.25 * (y - highest) / own_height - 0.05 * min(apart, 120.0) / 120.0
            if cost < best_cost:
                best, best_cost = box, cost
    return best


def _dot(mark: Mark, frame: _Frame, occupied: list[Floats], taken: list[Box]) -> list[str]:
    """A dot on the curve with its text where there is most room."""
    assert mark.y is not None
    x, y = float(frame.x(mark.x)), float(frame.y(mark.y))
    width, height = _size(mark.label)
    left, top, right, bottom = frame.box
    others = np.concatenate(occupied)
    choices: list[tuple[float, int, Box]] = []
    for reach in (14.0, 40.0):
        for dx, dy in ((reach, -height / 2), (-reach - width, -height / 2), (reach, -height - 6), (reach, 6),
                       (-reach - width, -height - 6), (-reach - width, 6)):  # fmt: skip
            box = (x + dx, y + dy, x + dx + width, y + dy + height)
            inside = (others[:, 0] > box[0]) & (others[:, 0] < box[2]) & (others[:, 1] > box[1])
            cost = float((inside & (others[:, 1] < box[3])).sum()) + 100.0 * sum(
                _overlap(box, other) for other in taken
            )
            cost += 1000.0 * (box[0] < left or box[2] > right or box[1] < top or box[3] > bottom)
            choices.append((cost, len(choices), box))
    box = min(choices)[2]
    taken += [box, (x - 6, y - 6, x + 6, y + 6)]
    return [
        f'<circle cx="{x:.1f}" cy="{y:.1f}" r="5.5" fill="#ffffff" stroke="{INK}" stroke-width="2.2"/>',
        _text(box[0] + 3, box[3] - 6, mark.label, halo=True),
    ]


def _overlap(one: Box, other: Box) -> bool:
    return one[0] < other[2] and other[0] < one[2] and one[1] < other[3] and other[1] < one[3]


def _mark_rows(panel: Panel, x_range: tuple[float, float]) -> list[tuple[Mark, int]]:
    """The upright marks within the axis, each with the row (counted from above) where its label fits."""
    frame = _Frame(x_range, panel.y_range, 0.0, panel.height)
    placed: list[tuple[Mark, int]] = []
    ends: list[float] = []
    for mark in sorted(panel.marks, key=lambda mark: mark.x):
        if mark.y is not None or not x_range[0] <= mark.x <= x_range[1]:
            continue
        x, width = float(frame.x(mark.x)), _size(mark.label)[0]
        start = {"start": x, "middle": x - width / 2, "end": x - width}[_anchor(x, mark.label)]
        row = next((n for n, end in enumerate(ends) if start > end + 6), len(ends))
        ends[row:] = [start + width, *ends[row + 1 :]]
        placed.append((mark, row))
    return placed


def _anchor(x: float, label: str) -> str:
    half = _size(label)[0] / 2
    return "start" if x - half < LEFT - 20 else "end" if x + half > WIDTH - 6 else "middle"


def _legend(lines: Sequence[Line], top: float) -> tuple[list[str], float]:
    """Lines that have no label beside them, named below the panel; and where it ends."""
    parts, x = [], LEFT
    for line in lines:
        width = 44 + _size(line.label)[0] + 18
        if x > LEFT and x + width > WIDTH - RIGHT:
            x, top = LEFT, top + FONT + 10
        colour = COLOURS[line.colour % len(COLOURS)]
        parts.append(_stroke(x, top, x + 34, top, colour, 3.0))
        parts.append(_text(x + 42, top + 6, line.label, fill=colour, weight="bold"))
        x += width
    return parts, top + (FONT + 12 if lines else 0.0)


def _number(value: float) -> str:
    return f"{value:g}".replace("-", "\N{MINUS SIGN}")


def _stroke(x1: float, y1: float, x2: float, y2: float, colour: str, width: float, dash: str = "") -> str:
    dashed = f' stroke-dasharray="{dash}"' if dash else ""
    return (
        f'<line x1="{x1:.1f}" y1="{y1:.1f}" x2="{x2:.1f}" y2="{y2:.1f}" stroke="{colour}" '
        f'stroke-width="{width:g}"{dashed}/>'
    )


def _text(
    x: float,
    y: float,
    text: str,
    *,
    anchor: str = "start",
    size: float = FONT,
    fill: str = INK,
    weight: str = "normal",
    halo: bool = False,
    extra: str = "",
) -> str:
    behind = ' stroke="#ffffff" stroke-width="4" paint-order="stroke" stroke-linejoin="round"' if halo else ""
    clean = escape("".join(letter if letter.isprintable() else " " for letter in text))
    return (
        f'<text x="{x:.1f}" y="{y:.1f}" text-anchor="{anchor}" font-size="{size:g}" fill="{fill}" '
        f'font-weight="{weight}"{behind}{extra}>{clean}</text>'
    )
