"""Parity plot: predicted against measured constants on square axes, as SVG.

Unity line, a band of one unit on either side, thin intervals. Shape tells supported (circle) from extrapolated
(diamond), colour and lightness tell bases, acids, and compounds that stand in the training table; the farthest rows
are named where nothing is covered.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from xml.sax.saxutils import escape

from .depiction import lead_line
from .placement import Box, Label, place_labels
from .plots import COLOURS, FAINT, INK, LETTER, RULE, _number, _stroke, _text, ticks
from .scoring import Score, Scored

SIDE = 640.0  # of the plot [px]
LEFT, TOP, RIGHT, BOTTOM = 92.0, 92.0, 40.0, 128.0
DOT, SMALL = 5.5, 13.0  # radius of a point; size of a label's letters [px]
NAME_LENGTH = 28
MOST_INTERVALS = 600
"""Past so many values their intervals would cover the points."""
Place = Callable[[float, float], tuple[float, float]]
"""From a measured and a predicted value to a place on the page."""
BASE, ACID, TRAINED = COLOURS[0], COLOURS[1], "#8c8c8c"


def parity_svg(score: Score, *, labelled: int = 6, note: str = "") -> str:
    """Predicted against measured constants as an SVG document.

    Parameters
    ----------
    score : Score
    labelled : int
        Farthest rows that are named.
    note : str
        Conditions, in the heading.

    Raises
    ------
    ValueError
        No row that could be used.
    """
    if not score.rows:
        raise ValueError("no row that could be used: nothing to draw")
    low, high = _ends(score.rows)
    scale = SIDE / (high - low)

    def at(measured: float, predicted: float) -> tuple[float, float]:
        return LEFT + (measured - low) * scale, TOP + SIDE - (predicted - low) * scale

    with_intervals = len(score.rows) <= MOST_INTERVALS
    parts = [*_heading(score, note), *_axes(low, high, at, with_intervals)]
    if with_intervals:
        parts += [_interval(row, at, low, high) for row in score.rows]
    ordered = sorted(score.rows, key=lambda row: not row.known)  # what is no test lies underneath
    parts += [_point(*at(row.measured.value, row.predicted), row) for row in ordered]
    parts += _labels(score, labelled, at, with_intervals)
    parts += _key(score)
    width, height = LEFT + SIDE + RIGHT, TOP + SIDE + BOTTOM
    return (
        f'<svg xmlns="http://www.w3.org/2000/svg" role="img" width="{width:.0f}" height="{height:.0f}" '
        f'viewBox="0 0 {width:.0f} {height:.0f}" '
        "font-family=\"Helvetica, Arial, 'Liberation Sans', 'DejaVu Sans', sans-serif\">\n"
        '<title>Predicted against measured</title><rect width="100%" height="100%" fill="#ffffff"/>\n'
        + "\n".join(parts)
        + "\n</svg>\n"
    )


def _ends(rows: Sequence[Scored]) -> tuple[float, float]:
    """Whole numbers around all values, half a unit away at least."""
    values = [value for row in rows for value in (row.measured.value, row.predicted)]
    return math.floor(min(values) - 0.5), math.ceil(max(values) + 0.5)


def _heading(score: Score, note: str) -> list[str]:
    lines = []
    for group in score.groups:
        if group.by == "all":
            told = group.new if group.new.n else group.figures
            which = "not in the training table" if group.new.n else "all in the training table"
            lines.append(f"{group.label}, {which}: n {told.n:,}, MAE {told.mae:.2f}, RMSE {told.rmse:.2f}")
    title = "Predicted against measured" + (f" ({note})" if note else "")
    parts = [_text(LEFT, 28.0, title, size=20, weight="bold")]
    return parts + [
        _text(LEFT, 52.0 + 20.0 * n, line, size=15, fill=FAINT) for n, line in enumerate(lines[:2])
    ]


def _axes(low: float, high: float, at: Place, with_intervals: bool) -> list[str]:
    left, bottom = at(low, low)
    right, top = at(high, high)
    corners = [(low, low), (low, low + 1), (high - 1, high), (high, high), (high, high - 1), (low + 1, low)]
    band = " ".join("{:.1f},{:.1f}".format(*at(*corner)) for corner in corners)
    parts = [f'<polygon class="band" points="{band}" fill="#e9eef6"/>']
    for value in ticks(low, high, most=12):
        x, y = at(value, value)
        parts += [
            _stroke(left, y, right, y, RULE, 0.8),
            _stroke(x, top, x, bottom, RULE, 0.8),
            _text(left - 10, y + 5, _number(value), anchor="end", fill=FAINT, size=15),
            _text(x, bottom + 22, _number(value), anchor="middle", fill=FAINT, size=15),
        ]
    middle = (top + bottom) / 2
    turned = f' transform="rotate(-90 30 {middle:.1f})"'
    return [
        *parts,
        _stroke(left, bottom, right, top, INK, 1.2),
        _stroke(left, top, left, bottom, INK, 1.4),
        _stroke(left, bottom, right, bottom, INK, 1.4),
        _text((left + right) / 2, bottom + 48, "measured", anchor="middle"),
        _text(
            30.0,
            middle,
            "predicted, with 90 % interval" if with_intervals else "predicted",
            anchor="middle",
            extra=turned,
        ),
    ]


def _colour(row: Scored) -> str:
    return TRAINED if row.known else BASE if row.measured.kind == "pkah" else ACID


def _interval(row: Scored, at: Place, low: float, high: float) -> str:
    x, upper = at(row.measured.value, min(row.predicted + row.half_width, high))
    lower = at(row.measured.value, max(row.predicted - row.half_width, low))[1]
    colour = _colour(row)
    return (
        f'<line x1="{x:.1f}" y1="{upper:.1f}" x2="{x:.1f}" y2="{lower:.1f}" stroke="{colour}" '
        'stroke-width="1" stroke-opacity="0.45"/>'
    )


def _point(x: float, y: float, row: Scored) -> str:
    colour = _colour(row)
    title = f"<title>{_clean(_name(row))}: measured {row.measured.value:.2f}, predicted {row.predicted:.2f}</title>"
    return _shape(x, y, colour, row.support == "supported", title)


def _shape(x: float, y: float, colour: str, supported: bool, title: str = "") -> str:
    if supported:
        return (
            f'<circle class="supported" cx="{x:.1f}" cy="{y:.1f}" r="{DOT - 0.5}" fill="{colour}" '
            f'stroke="#ffffff" stroke-width="0.8">{title}</circle>'
        )
    r = DOT + 1
    return (
        f'<path class="extrapolated" d="M{x:.1f} {y - r:.1f}L{x + r:.1f} {y:.1f}L{x:.1f} {y + r:.1f}'
        f'L{x - r:.1f} {y:.1f}Z" fill="#ffffff" stroke="{colour}" stroke-width="1.8">{title}</path>'
    )


def _labels(score: Score, count: int, at: Place, with_intervals: bool) -> list[str]:
    """Names of the farthest rows, clear of points, lines and the frame; one that would cross another stays away."""
    worst = score.worst(count)
    labels = [
        Label(*at(row.measured.value, row.predicted), DOT + 1, LETTER * SMALL * len(_name(row)) * 1.06 + 4, SMALL + 3)
        for row in worst
    ]  # fmt: skip
    points = {at(row.measured.value, row.predicted) for row in score.rows}
    dots = [Box(x - DOT, y - DOT, x + DOT, y + DOT) for x, y in sorted(points)]
    right, bottom = LEFT + SIDE, TOP + SIDE
    outside = [
        Box(LEFT - 260, TOP - 40, LEFT, bottom + 40),
        Box(right, TOP - 40, right + 260, bottom + 40),
        Box(LEFT - 40, TOP - 60, right + 40, TOP),
        Box(LEFT - 40, bottom, right + 40, bottom + 60),
    ]
    lines = [(LEFT, bottom, right, TOP)]
    if with_intervals:
        lines += [
            (*at(of.value, row.predicted - row.half_width), *at(of.value, row.predicted + row.half_width))
            for row in score.rows
            for of in (row.measured,)
        ]
    boxes = place_labels(labels, lines, [*dots, *outside])
    parts = []
    for n, (row, label, box) in enumerate(zip(worst, labels, boxes, strict=True)):
        line = lead_line(label.x, label.y, box, label.radius)
        if line and any(_crosses(line, other) for m, other in enumerate(boxes) if m != n):
            continue
        if line:
            parts.append(_stroke(*line, FAINT, 0.9))
        middle = (box.left + box.right) / 2
        parts.append(_text(middle, box.bottom - 4, _name(row), anchor="middle", size=SMALL, halo=True))
    return parts


def _crosses(line: tuple[float, float, float, float], box: Box) -> bool:
    """Whether a line runs over a rectangle."""
    x1, y1, x2, y2 = line
    steps = int(math.hypot(x2 - x1, y2 - y1) / 2) + 1
    return any(
        box.left < x1 + (x2 - x1) * n / steps < box.right
        and box.top < y1 + (y2 - y1) * n / steps < box.bottom
        for n in range(steps + 1)
    )


def _name(row: Scored) -> str:
    structure = row.measured.structure
    name = row.measured.name or (structure if isinstance(structure, str) else f"row {row.measured.number}")
    return name if len(name) <= NAME_LENGTH else name[: NAME_LENGTH - 1] + "…"


def _clean(text: str) -> str:
    return escape("".join(letter if letter.isprintable() else " " for letter in text))


def _key(score: Score) -> list[str]:
    """What shapes and colours mean, those that occur."""
    kinds = {_colour(row) for row in score.rows}
    words = {BASE: "base", ACID: "acid", TRAINED: "known to the model: no test"}
    y, x = TOP + SIDE + 78, LEFT
    parts = []
    for supported, word in ((True, "supported"), (False, "extrapolated")):
        parts += [_shape(x, y - 5, INK, supported), _text(x + 14, y, word, size=15)]
        x += 130
    parts += [
        f'<rect x="{x:.1f}" y="{y - 13:.1f}" width="22" height="16" fill="#e9eef6"/>',
        _text(x + 30, y, "within 1 unit", size=15),
    ]
    x, y = LEFT, y + 26
    for colour, word in words.items():
        if colour in kinds:
            square = f'<rect x="{x - 5:.1f}" y="{y - 11:.1f}" width="11" height="11" fill="{colour}"/>'
            parts += [square, _text(x + 14, y, word, size=15)]
            x += 14 + 15 * LETTER * len(word) + 34
    return parts
