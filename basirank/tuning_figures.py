"""Pictures of a tuning: a grid of the best candidates with what is new in them shaded, and a map of shifts.

What lowers the constant is orange and drawn dashed, what raises it blue and in full line, and every shift stands in
figures too, so that nothing hangs on colour. The two hues differ to every kind of colour vision.
"""

from __future__ import annotations

import math
import textwrap
from collections import defaultdict
from collections.abc import Iterable, Sequence
from html import escape
from typing import TYPE_CHECKING

from .depiction import (
    CHARACTER,
    LABEL_HEIGHT,
    LETTER_WIDTH,
    MARGIN,
    MARK,
    STYLE,
    lead_line,
    printable,
    strokes,
)
from .drawing import Drawing, draw, draw_like
from .placement import Box, Label, around, place_labels

if TYPE_CHECKING:
    from .candidates import Candidate
    from .scanning import Scan, ScanPoint
    from .tuning import Tuning

CELL = 260.0
"""Width of a candidate in the grid [picture units]."""
TALLEST = 220.0
"""Height of its structure at most [picture units]."""
COLUMNS = 3
MOST_SHOWN = 11
"""Candidates in a picture, beside the structure itself."""
MOST_MAPS = 12
"""Edits in the picture of a scan."""
LINE = 15.0
"""Height of a line of text [picture units]."""
SHADE, SPOT = 9.0, 9.5
"""Radius of the shade on a new atom, and of the spot of a shift [picture units; a bond is about 30]."""
DOWN, MIDDLE, UP = (196, 98, 29), (255, 255, 255), (47, 111, 183)
"""Ends and middle of the scale of shifts: orange, white, blue."""
SCALE_STEP = 0.5
"""The scale of shifts ends at a multiple of this [pK units]."""

_FONT = "Helvetica, Arial, 'Liberation Sans', 'DejaVu Sans', sans-serif"


def tuning_figure(found: Tuning, top: int | None = None) -> str:
    """The structure and its best candidates as one SVG, value and shift under each.

    Parameters
    ----------
    found : Tuning
        From `tune`.
    top : int, optional
        Candidates shown, at most `MOST_SHOWN`; by default those in the window, or the nearest where there are none.

    Raises
    ------
    ValueError
        The structure cannot be drawn, or nothing was found.
    """
    count = MOST_SHOWN if top is None else min(top, MOST_SHOWN)
    shown = found.candidates[:count] if top is not None else (found.hits or found.candidates)[:count]
    if not shown:
        raise ValueError("no edit can be made there, so there is nothing to draw")
    low, high = found.window
    first = [
        f"before: {found.step} {found.value:.2f} ({found.low:.2f} to {found.high:.2f})",
        f"wanted {low:g} to {high:g}",
    ]
    site = found.parent_atoms.index(found.site)
    cells = [_cell(_drawn(found.parent_smiles), [], site, "", first)]
    cells += [_candidate_cell(rank, one, found) for rank, one in enumerate(shown, start=1)]
    legend = (
        "shaded: new or changed atoms, orange and dashed where the pKaH falls, blue and full where it rises; "
        "ring: the nitrogen"
    )
    return _grid(cells, f"Changes that bring {found.step} to {low:g} to {high:g}", legend)


def _candidate_cell(rank: int, one: Candidate, found: Tuning) -> tuple[str, float]:
    place = {number: n for n, number in enumerate(found.parent_atoms)}
    pairs = [(n, place[number]) for n, number in enumerate(one.input_atoms) if number is not None]
    drawing = draw_like(one.smiles, found.parent_smiles, tuple(pairs))
    if drawing is None:
        raise ValueError(f"cannot be drawn: {one.smiles}")
    which = "" if one.step == "pKaH 1" else f"{one.step} "
    chance = "" if one.probability is None else f", {100 * one.probability:.0f} %"
    lines = [
        f"{rank}  {which}{one.value:.2f} ({one.low:.2f} to {one.high:.2f}){chance}",
        f"shift {one.shift:+z.2f} ({one.shift_low:+z.2f} to {one.shift_high:+z.2f})",
        *textwrap.wrap(" + ".join(one.labels), int(CELL / CHARACTER))[:3],
    ]
    kind = "up" if one.shift > 0 else "down"
    return _cell(drawing, one.new_atoms, one.site, kind, lines)


def _drawn(smiles: str) -> Drawing:
    drawing = draw(smiles)
    if drawing is None:
        raise ValueError(f"cannot be drawn: {smiles}")
    return drawing


def _cell(
    drawing: Drawing, shaded: Sequence[int], site: int | None, kind: str, lines: Sequence[str]
) -> tuple[str, float]:
    """One structure with its lines of text, its upper left corner at 0, and its height."""
    marks = "".join(
        f'<circle class="b-{kind}" cx="{drawing.atoms[n][0]}" cy="{drawing.atoms[n][1]}" r="{SHADE}"/>'
        for n in shaded
    )
    rings = [] if site is None else [drawing.atoms[site]]
    marks += "".join(f'<circle class="b-mark" cx="{x}" cy="{y}" r="{MARK}"/>' for x, y in rings)
    rims = [Box(x - SHADE, y - SHADE, x + SHADE, y + SHADE) for x, y in (drawing.atoms[n] for n in shaded)]
    rims += [Box(x - MARK, y - MARK, x + MARK, y + MARK) for x, y in rings]
    box = around([drawing.box, *rims], MARGIN)
    wide, high = box.right - box.left, box.bottom - box.top
    ratio = min(1.0, (CELL - 2 * MARGIN) / wide, TALLEST / high)
    left = (CELL - ratio * wide) / 2 - ratio * box.left
    moved = f"translate({left:.1f} {-ratio * box.top:.1f}) scale({ratio:.3f})"
    body = f'<g transform="{moved}">{marks}{strokes(drawing)}</g>'
    height = ratio * high
    return body + _lines(lines, CELL / 2, height), height + LINE * len(lines) + 2 * MARGIN


def _lines(lines: Sequence[str], x: float, top: float) -> str:
    return "".join(
        f'<text class="{"b-title" if n == 0 else "b-plain"}" text-anchor="middle" x="{x:.1f}" '
        f'y="{top + LINE * (n + 1):.1f}">{escape(printable(line))}</text>'
        for n, line in enumerate(lines)
    )


def _grid(
    cells: Sequence[tuple[str, float]], title: str, legend: str, width: float = CELL, foot: str = ""
) -> str:
    """Cells in rows of `COLUMNS`, a legend above them, something below them."""
    columns = min(COLUMNS, len(cells))
    whole = max(columns * width, 2 * width)
    told = textwrap.wrap(legend, int(whole / CHARACTER))
    y = 2 * MARGIN + LINE * (1 + len(told))
    body = [_left(title, told)]
    for first in range(0, len(cells), columns):
        row = cells[first : first + columns]
        for n, (content, _) in enumerate(row):
            body.append(f'<g transform="translate({n * width:.1f} {y:.1f})">{content}</g>')
        y += max(height for _, height in row) + MARGIN
    if foot:
        body.append(f'<g transform="translate(0 {y:.1f})">{foot}</g>')
        y += 3 * LINE
    return (
        f'<svg class="basirank" xmlns="http://www.w3.org/2000/svg" role="img" width="{whole:.0f}" height="{y:.0f}" '
        f'viewBox="0 0 {whole:.1f} {y:.1f}" font-family="{_FONT}" font-size="11" color="#1b2430" fill="#1b2430">'
        f"<title>{escape(printable(title))}</title><style>{STYLE}svg.basirank{{font-family:{_FONT}}}</style>"
        f'<rect width="100%" height="100%" fill="#ffffff"/>{"".join(body)}</svg>\n'
    )


def _left(title: str, told: Sequence[str]) -> str:
    lines = [title, *told]
    return "".join(
        f'<text class="{"b-title" if n == 0 else "b-plain"}" x="{MARGIN:.1f}" y="{LINE * (n + 1):.1f}">'
        f"{escape(printable(line))}</text>"
        for n, line in enumerate(lines)
    )


def scan_figure(found: Scan) -> str:
    """A map for each edit: the structure with the shift at every atom where the edit can be made, as one SVG.

    Where an edit can be made in several ways at one atom the greatest shift is shown.

    Raises
    ------
    ValueError
        The structure cannot be drawn, no edit can be made, or more than `MOST_MAPS` can.
    """
    by_edit: dict[str, list[ScanPoint]] = defaultdict(list)
    for point in found.points:
        by_edit[point.edit].append(point)
    if not by_edit:
        raise ValueError("the edit can be made nowhere near the nitrogen, so there is nothing to draw")
    if len(by_edit) > MOST_MAPS:
        raise ValueError(
            f"{len(by_edit)} edits can be made here, and a picture shows {MOST_MAPS}: name one edit or family"
        )
    drawing = _drawn(found.parent_smiles)
    limit = scale_limit(abs(point.shift) for point in found.points)
    place = {number: n for n, number in enumerate(found.parent_atoms)}
    maps = [_map(drawing, points, place, found.site, limit) for points in by_edit.values()]
    wide = max(box.right - box.left for _, box, _ in maps)
    width = max(wide, CELL)
    cells = []
    for body, box, label in maps:
        left, high = (width - box.right - box.left) / 2, box.bottom - box.top
        lines = textwrap.wrap(label, int(width / CHARACTER))
        content = f'<g transform="translate({left:.1f} {-box.top:.1f})">{body}</g>'
        cells.append((content + _lines(lines, width / 2, high), high + LINE * len(lines) + 2 * MARGIN))
    title = f"Shift of {found.step} ({found.value:.2f}) of the ringed nitrogen by an edit at each atom"
    return _grid(cells, title, "in pK units", width, _scale(limit))


def scale_limit(sizes: Iterable[float]) -> float:
    """End of the scale of shifts: the greatest, rounded up to a step [pK units].

    Examples
    --------
    >>> scale_limit([0.3, 1.6])
    2.0
    """
    return SCALE_STEP * max(1, math.ceil(round(max(sizes) / SCALE_STEP, 6)))


def colour(shift: float, limit: float) -> str:
    """Colour of a shift on a scale from -limit (orange) over 0 (white) to +limit (blue).

    Examples
    --------
    >>> colour(0.0, 2.0), colour(2.0, 2.0)
    ('#ffffff', '#2f6fb7')
    """
    share = min(abs(shift) / limit, 1.0)
    end = UP if shift > 0 else DOWN
    return "#" + "".join(f"{round(m + share * (e - m)):02x}" for m, e in zip(MIDDLE, end, strict=True))


def _map(
    drawing: Drawing, points: Sequence[ScanPoint], place: dict[int, int], site: int, limit: float
) -> tuple[str, Box, str]:
    """One edit's map: its SVG, what it covers, and what it is called."""
    greatest: dict[int, ScanPoint] = {}
    for point in points:
        if point.atom not in greatest or abs(point.shift) > abs(greatest[point.atom].shift):
            greatest[point.atom] = point
    at = [drawing.atoms[place[atom]] for atom in greatest]
    texts = [f"{point.shift:+z.2f}" for point in greatest.values()]
    labels = [
        Label(x, y, SPOT, LETTER_WIDTH * len(text) + 2, LABEL_HEIGHT)
        for (x, y), text in zip(at, texts, strict=True)
    ]
    spots = [Box(x - SPOT, y - SPOT, x + SPOT, y + SPOT) for x, y in at]
    x, y = drawing.atoms[place[site]]
    ring = Box(x - SPOT - 3, y - SPOT - 3, x + SPOT + 3, y + SPOT + 3)
    letters = [letter.box for letter in drawing.letters]
    boxes = place_labels(labels, drawing.segments, [*letters, *spots, ring])
    body = [f'<circle class="b-mark" style="fill-opacity:0" cx="{x}" cy="{y}" r="{SPOT + 3}"/>']
    for (spot_x, spot_y), point in zip(at, greatest.values(), strict=True):
        dash = ' stroke-dasharray="3 2"' if point.shift < 0 else ""
        rim = "#{:02x}{:02x}{:02x}".format(*(UP if point.shift > 0 else DOWN))
        body.append(
            f'<circle cx="{spot_x}" cy="{spot_y}" r="{SPOT}" fill="{colour(point.shift, limit)}" stroke="{rim}" '
            f'stroke-width="1.2"{dash}/>'
        )
    body.append(strokes(drawing))
    for label, text, box in zip(labels, texts, boxes, strict=True):
        line = lead_line(label.x, label.y, box, label.radius)
        if line is not None:
            body.append('<path class="b-lead" d="M{:.1f} {:.1f}L{:.1f} {:.1f}"/>'.format(*line))
        middle = (box.left + box.right) / 2
        body.append(f'<text class="b-part" x="{middle:.1f}" y="{box.bottom - 3.5:.1f}">{text}</text>')
    return "".join(body), around([drawing.box, *spots, ring, *boxes], MARGIN), points[0].label


def _scale(limit: float) -> str:
    """The scale of shifts as a bar of fields with figures under it."""
    fields, size = 8, 34.0
    parts = []
    for n in range(fields + 1):
        shift = limit * (2 * n / fields - 1)
        x = MARGIN + n * size
        parts.append(
            f'<rect x="{x:.1f}" y="0" width="{size}" height="12" fill="{colour(shift, limit)}" stroke="#1b2430" '
            f'stroke-width="0.5"/><text class="b-part" x="{x + size / 2:.1f}" y="25">{_figure(shift)}</text>'
        )
    return "".join(parts)


def _figure(shift: float) -> str:
    return f"{shift:+.2g}" if shift else "0"
