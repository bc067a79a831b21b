"""Depictions: a structure with its sites marked and valued, and the increments of a site on their atoms.

A value stands beside its atom and covers nothing (`placement`). A base site has a round mark and an acid site a
square one; what raises a constant is drawn in full line and what lowers it dashed, so that nothing hangs on colour.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from html import escape
from typing import TYPE_CHECKING, Literal

from .drawing import Drawing, draw
from .placement import Box, Label, around, place_labels
from .records import shown

if TYPE_CHECKING:
    from .explanation import Explanation, SiteLine

MARK = 9.5  # radius of a site's mark [picture units; a bond is about 30]
LABEL_SIZE, LETTER_WIDTH, LABEL_HEIGHT = 11.0, 6.7, 14.0  # of values beside atoms
MARGIN = 6.0  # around a picture
CAPTION_HEIGHT = 18.0
CHARACTER = 6.3  # mean width of a caption's letter
WATER = (0.0, 14.0)  # constants outside it are minor: left out of small pictures

STYLE = """
svg.basirank{background:#fff;color:#1b2430;font:11px system-ui,"Segoe UI",sans-serif}
.b-line{fill:none;stroke:currentColor;stroke-width:1.8;stroke-linecap:round;stroke-linejoin:round}
.b-wedge{fill:currentColor}
.b-letter{font-family:sans-serif}
.b-mark{fill:#0f6b66;fill-opacity:.16;stroke:#0f6b66;stroke-width:1.5}
.b-lead{stroke:#0f6b66;stroke-width:1}
.b-value{fill:#0b5450;font-weight:600;text-anchor:middle}
.b-up,.b-down{stroke-width:1.4;fill-opacity:.28}
.b-up{fill:#2f6fb7;stroke:#2f6fb7}
.b-down{fill:#c4621d;stroke:#c4621d;stroke-dasharray:3 2}
.b-part{fill:#1b2430;text-anchor:middle}
.b-title{font-weight:600}
"""


@dataclass(frozen=True, slots=True)
class Mark:
    """The mark of a site: its atom's place, kind, and the label with what it covers.

    `minor` marks stand for constants that water can't show (outside 0 to 14) and are left out of small pictures.
    """

    x: float
    y: float
    atom: int
    kind: Literal["base", "acid"]
    label: str
    box: Box
    minor: bool


@dataclass(frozen=True, slots=True)
class Picture:
    """A drawing with the marks of its sites; `place` finds an atom by its number in the input."""

    drawing: Drawing
    marks: tuple[Mark, ...]
    place: dict[int, int]

    @property
    def box(self) -> Box:
        """What the whole covers, with a margin."""
        marks = (Box(m.x - MARK, m.y - MARK, m.x + MARK, m.y + MARK) for m in self.marks)
        return around([self.drawing.box, *marks, *(mark.box for mark in self.marks)], MARGIN)


def picture_of(told: Explanation) -> Picture | None:
    """The parent with its sites marked: number in the order of protonation, and the macroscopic constant.

    The first base proton is `1`, the next `2`, ...; acid groups are `a1`, `a2`, ... from the strongest. A structure
    that was refused but can be read is drawn without marks.

    Examples
    --------
    >>> from basirank import explain
    >>> [mark.label.split(":")[0] for mark in picture_of(explain("OC(=O)CN")).marks]
    ['1', 'a1']
    """
    drawing = draw(told.parent_smiles or (told.structure.split() or [""])[0])
    if drawing is None:
        return None
    place = {number: n for n, number in enumerate(told.parent_atoms)}
    found: dict[int, list[tuple[str, str, float]]] = defaultdict(list)
    for step in told.steps:
        if step.value is not None:
            kind, number = step.name.split()
            label = f"{number if kind == 'pKaH' else 'a' + number}: {step.value:.2f}"
            found[step.atom].append((kind, label, step.value))
    spots = []
    for atom, steps in found.items():
        text = ", ".join(label for _, label, _ in steps)
        first = any(kind == "pKaH" and label.startswith("1:") for kind, label, _ in steps)
        minor = not first and not any(WATER[0] <= value <= WATER[1] for *_, value in steps)
        spots.append((atom, steps[0][0], text, minor))
    return _marked(drawing, spots, place)


def measured_picture(smiles: str, kind: str, value: float) -> Picture | None:
    """A measured compound with its value at the site, which atom map 1 marks in its SMILES; None if it has none.

    Examples
    --------
    >>> [mark.label for mark in measured_picture("CC[NH2:1]", "pkah", 10.65).marks]
    ['10.65']
    """
    from rdkit import Chem

    drawing, mol = draw(smiles), Chem.MolFromSmiles(smiles)
    sites = (
        [n for n, atom in enumerate(mol.GetAtoms()) if atom.GetAtomMapNum() == 1] if mol is not None else []
    )
    if drawing is None or not sites:
        return None
    spots = [(sites[0], "pKa" if kind == "pka" else "pKaH", f"{value:.2f}", False)]
    return _marked(drawing, spots, {n: n for n in range(len(drawing.atoms))})


def _marked(drawing: Drawing, spots: Sequence[tuple[int, str, str, bool]], place: dict[int, int]) -> Picture:
    """A drawing with marks: atom, constant, label and whether it is minor, of each."""
    points = [drawing.atoms[place[atom]] for atom, *_ in spots]
    labels = [
        Label(x, y, MARK, LETTER_WIDTH * len(text) + 4, LABEL_HEIGHT)
        for (x, y), (_, _, text, _) in zip(points, spots, strict=True)
    ]
    circles = [Box(x - MARK, y - MARK, x + MARK, y + MARK) for x, y in points]
    boxes = place_labels(labels, drawing.segments, [*(letter.box for letter in drawing.letters), *circles])
    marks = (
        Mark(x, y, atom, "base" if kind == "pKaH" else "acid", text, box, minor)
        for (x, y), (atom, kind, text, minor), box in zip(points, spots, boxes, strict=True)
    )
    return Picture(drawing, tuple(marks), place)


@dataclass(frozen=True, slots=True)
class Share:
    """What one set of atoms adds to a site's constant, to the two decimals that are shown [pK units]."""

    atoms: tuple[int, ...]
    value: float


def shares(site: SiteLine) -> tuple[float, tuple[Share, ...], float]:
    """Parent value, what each set of atoms adds to it, and what belongs to no atom; they sum to the value shown.

    Terms that come from the same atoms are added. What rounding leaves over (hundredths) goes to the parts that
    were rounded most.

    Examples
    --------
    >>> from basirank import explain
    >>> site = explain("CN(C)CCO").sites[0]
    >>> parent, parts, rest = shares(site)
    >>> round(parent + sum(part.value for part in parts) + rest, 2) == round(site.value, 2)
    True
    """
    sums: dict[tuple[int, ...], float] = defaultdict(float)
    for term in site.terms[1:]:
        sums[term.atoms] += term.value
    rest = sums.pop((), 0.0)
    atoms = list(sums)
    exact = [site.terms[0].value if site.terms else 0.0, *(sums[key] for key in atoms), rest]
    parts = _adding_up(exact, shown(site.value, "constant"))
    told = (Share(key, value) for key, value in zip(atoms, parts[1:-1], strict=True))
    return parts[0], tuple(share for share in told if share.value), parts[-1]


def _adding_up(values: Sequence[float], total: float) -> list[float]:
    """Numbers rounded to hundredths so that they add up to a total that is itself in hundredths."""
    hundredths = [round(100 * value) for value in values]
    missing = round(100 * total) - sum(hundredths)
    step = 1 if missing > 0 else -1
    order = sorted(range(len(values)), key=lambda n: step * (hundredths[n] - 100 * values[n]))
    for n in range(abs(missing)):
        hundredths[order[n % len(order)]] += step
    return [count / 100 for count in hundredths]


def explanation_svg(told: Explanation, name: str = "") -> str | None:
    """The pictures of an explanation as one SVG: the structure with its sites, then each site's increments.

    Parameters
    ----------
    told : Explanation
        From `explain`.
    name : str
        Shown as a heading, and the picture's title.

    Returns
    -------
    str or None
        None where the structure cannot be drawn.
    """
    return stacked_svg([(told, name)])


def stacked_svg(explanations: Iterable[tuple[Explanation, str]]) -> str | None:
    """The pictures of several explanations under each other in one SVG; None where none can be drawn."""
    panels: list[tuple[str, Box]] = []
    titles = []
    for told, name in explanations:
        picture = picture_of(told)
        if picture is not None:
            titles.append(name or told.structure)
            panels += _panels(told, name or told.structure, picture)
    if not panels:
        return None
    width = max(box.right - box.left for _, box in panels)
    y, body = 0.0, []
    for content, box in panels:
        body.append(f'<g transform="translate({-box.left:.1f} {y - box.top:.1f})">{content}</g>')
        y += box.bottom - box.top
    title = escape(printable("; ".join(titles)))
    return (
        f'<svg class="basirank" xmlns="http://www.w3.org/2000/svg" role="img" width="{width:.0f}" height="{y:.0f}" '
        f'viewBox="0 0 {width:.1f} {y:.1f}"><title>{title}</title><style>{STYLE}</style>{"".join(body)}</svg>\n'
    )


def picture_svg(told: Explanation, width: float) -> str | None:
    """The structure with its sites alone, no wider than a width [pixels]; None where it cannot be drawn."""
    picture = picture_of(told)
    if picture is None:
        return None
    box = picture.box
    wide, high = box.right - box.left, box.bottom - box.top
    ratio = min(1.0, width / wide)
    return (
        f'<svg class="basirank" xmlns="http://www.w3.org/2000/svg" role="img" width="{wide * ratio:.0f}" '
        f'height="{high * ratio:.0f}" viewBox="{box.left:.1f} {box.top:.1f} {wide:.1f} {high:.1f}">'
        f"<title>{escape(printable(told.structure))}</title><style>{STYLE}</style>"
        f"{_structure(picture)}{_marks(picture.marks)}</svg>"
    )


def _panels(told: Explanation, heading: str, picture: Picture) -> list[tuple[str, Box]]:
    lines = [heading]
    if told.status == "refused":
        lines.append(f"refused: {told.message}")
    elif picture.marks:
        lines.append("n: pKaH of the n-th proton on a base (round); a: pKa of an acid (square)")
    panels = [_captioned(lines, _structure(picture) + _marks(picture.marks), picture.box)]
    steps: dict[int, list[str]] = defaultdict(list)
    for step in told.steps:
        if step.value is not None:
            steps[step.site].append(step.name)
    sites = {site.number: site for site in told.sites}
    panels += [_increments_panel(sites[number], names, picture) for number, names in steps.items()]
    return panels


def _increments_panel(site: SiteLine, steps: Sequence[str], picture: Picture) -> tuple[str, Box]:
    """One site's increments, shaded on the atoms they come from; what the picture shows sums to the value."""
    parent, parts, rest = shares(site)
    at = picture.drawing.atoms
    shades: dict[int, float] = defaultdict(float)
    for part in parts:
        for atom in part.atoms:
            shades[atom] += part.value / len(part.atoms)
    circles = []
    for atom, value in shades.items():
        x, y = at[picture.place[atom]]
        kind = "up" if value > 0 else "down"
        circles.append(f'<circle class="b-{kind}" cx="{x}" cy="{y}" r="{shade_radius(value):.1f}"/>')
    labels = []
    for part in parts:
        spots = [at[picture.place[atom]] for atom in part.atoms]
        x, y = (sum(axis) / len(spots) for axis in zip(*spots, strict=True))
        radius = max(shade_radius(shades[atom]) for atom in part.atoms) if len(spots) == 1 else 5.0
        labels.append(Label(x, y, radius, LETTER_WIDTH * len(f"{part.value:+.2f}") + 2, LABEL_HEIGHT))
    x, y = at[picture.place[site.atom]]
    ring = Box(x - MARK, y - MARK, x + MARK, y + MARK)
    letters = [letter.box for letter in picture.drawing.letters]
    boxes = place_labels(labels, picture.drawing.segments, [*letters, ring])
    texts = [
        _lead(label.x, label.y, box, label.radius) + _text(box, f"{part.value:+.2f}", "b-part")
        for label, part, box in zip(labels, parts, boxes, strict=True)
    ]
    kind = "pKaH" if site.kind == "base" else "pKa"
    added = sum(round(100 * part.value) for part in parts) / 100
    lines = [
        f"{', '.join(steps)}: {site.site_class} (site {site.number}), "
        f"intrinsic {kind} {shown(site.value, 'constant'):.2f}",
        f"= parent {parent:.2f} {_signed(added)} on the atoms {_signed(rest)} from measured neighbours",
    ]
    body = "".join(circles) + _structure(picture) + _shape(site.kind, x, y) + "".join(texts)
    return _captioned(lines, body, around([picture.drawing.box, ring, *boxes], MARGIN))


def shade_radius(value: float) -> float:
    """Radius of an atom's shade [picture units]; its area grows with what the atom adds."""
    return min(4.0 + 7.0 * abs(value) ** 0.5, 22.0)


def _signed(value: float) -> str:
    return f"{'+' if value >= 0 else '-'} {abs(value):.2f}"


def _captioned(lines: Sequence[str], body: str, box: Box) -> tuple[str, Box]:
    lines = [printable(line) for line in lines]
    top = box.top - CAPTION_HEIGHT * len(lines)
    captions = "".join(
        f'<text class="b-title" x="{box.left + MARGIN:.1f}" y="{top + CAPTION_HEIGHT * (n + 0.75):.1f}">'
        f"{escape(line)}</text>"
        if n == 0
        else f'<text x="{box.left + MARGIN:.1f}" y="{top + CAPTION_HEIGHT * (n + 0.75):.1f}">{escape(line)}</text>'
        for n, line in enumerate(lines)
    )
    right = max(box.right, box.left + 2 * MARGIN + CHARACTER * max(map(len, lines)))
    return captions + body, Box(box.left, top, right, box.bottom + MARGIN)


def printable(text: str) -> str:
    """A text without control characters, which XML does not allow."""
    return "".join(letter if letter.isprintable() else " " for letter in text)


def _structure(picture: Picture) -> str:
    return strokes(picture.drawing)


def strokes(drawing: Drawing) -> str:
    """Bonds and letters of a structure as SVG."""
    letters = "".join(
        f'<text class="b-letter" x="{one.x}" y="{one.y}" font-size="{one.size:g}">{escape(one.text)}</text>'
        for one in drawing.letters
    )
    wedges = f'<path class="b-wedge" d="{drawing.wedges}"/>' if drawing.wedges else ""
    return f'<path class="b-line" d="{drawing.lines}"/>{wedges}<g fill="currentColor">{letters}</g>'


def _marks(marks: Iterable[Mark]) -> str:
    return "".join(
        _shape(mark.kind, mark.x, mark.y)
        + _lead(mark.x, mark.y, mark.box, MARK)
        + _text(mark.box, mark.label, "b-value")
        for mark in marks
    )


def _shape(kind: str, x: float, y: float) -> str:
    if kind == "base":
        return f'<circle class="b-mark" cx="{x}" cy="{y}" r="{MARK}"/>'
    side = 2 * MARK - 2
    return (
        f'<rect class="b-mark" x="{x - side / 2:.1f}" y="{y - side / 2:.1f}" width="{side}" height="{side}"/>'
    )


def lead_line(x: float, y: float, box: Box, radius: float) -> tuple[float, float, float, float] | None:
    """Line from the rim of a mark to its label, where they lie more than a label's height apart."""
    end_x, end_y = min(max(x, box.left), box.right), min(max(y, box.top), box.bottom)
    far = ((end_x - x) ** 2 + (end_y - y) ** 2) ** 0.5
    if far <= radius + LABEL_HEIGHT / 2:
        return None
    return (x + (end_x - x) * radius / far, y + (end_y - y) * radius / far, end_x, end_y)


def _lead(x: float, y: float, box: Box, radius: float) -> str:
    line = lead_line(x, y, box, radius)
    if line is None:
        return ""
    x1, y1, x2, y2 = line
    return f'<path class="b-lead" d="M{x1:.1f} {y1:.1f}L{x2:.1f} {y2:.1f}"/>'


def _text(box: Box, text: str, name: str) -> str:
    x, y = (box.left + box.right) / 2, box.bottom - 3.5
    return f'<text class="{name}" x="{x:.1f}" y="{y:.1f}">{escape(text)}</text>'
