"""Drawings: a structure as RDKit lays it out, kept as bare geometry.

One drawing serves an SVG file, a notebook and, in few bytes, every row of a report; styles come later.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise
from typing import TYPE_CHECKING, Any
from xml.etree import ElementTree

from .placement import Box, around

if TYPE_CHECKING:
    from rdkit import Chem

GLYPH_WIDTH, GLYPH_HEIGHT = 0.75, 0.75  # of an atom's letter, in font sizes

_NUMBER = re.compile(r"-?\d+(?:\.\d+)?")
_ATOM = re.compile(r"atom-(\d+)")


@dataclass(frozen=True, slots=True)
class Letter:
    """One letter of an atom: left end of its base line, the letter, its font size, the atom."""

    x: float
    y: float
    text: str
    size: float
    atom: int

    @property
    def box(self) -> Box:
        """What it covers."""
        return Box(self.x, self.y - GLYPH_HEIGHT * self.size, self.x + GLYPH_WIDTH * self.size, self.y)


@dataclass(frozen=True, slots=True)
class Drawing:
    """A structure as geometry [picture units, y downwards].

    Attributes
    ----------
    lines, wedges : str
        Path data of strokes and of filled shapes.
    letters : tuple of Letter
        Atom labels, letter by letter.
    atoms : tuple of (float, float)
        Where each atom lies.
    segments : tuple of (x1, y1, x2, y2)
        The strokes one by one.
    """

    lines: str
    wedges: str
    letters: tuple[Letter, ...]
    atoms: tuple[tuple[float, float], ...]
    segments: tuple[tuple[float, float, float, float], ...]

    @property
    def box(self) -> Box:
        """What the structure covers."""
        points = [Box(x, y, x, y) for x, y in self.atoms]
        return around([*points, *(letter.box for letter in self.letters)], 2.0)


@lru_cache(maxsize=64)
def draw(smiles: str) -> Drawing | None:
    """A structure laid out and drawn by RDKit; None where it cannot be.

    Examples
    --------
    >>> drawing = draw("CCN")
    >>> len(drawing.atoms), "".join(letter.text for letter in drawing.letters)
    (3, 'NH2')
    """
    from rdkit import Chem, rdBase

    with rdBase.BlockLogs():
        mol = Chem.MolFromSmiles(smiles) if smiles.strip() else None
        if mol is None or not mol.GetNumAtoms():
            return None
        for atom in mol.GetAtoms():
            atom.SetAtomMapNum(0)
        return _drawn(mol)


def draw_like(smiles: str, model: str, pairs: tuple[tuple[int, int], ...]) -> Drawing | None:
    """A structure turned so that it lies as another is drawn, as well as turning alone can do it.

    Parameters
    ----------
    smiles, model : str
        The structure, and the one that `draw` shows.
    pairs : tuple of (int, int)
        Atoms of the two that are the same.
    """
    from rdkit import Chem, rdBase
    from rdkit.Chem import rdMolAlign

    with rdBase.BlockLogs():
        mols = [Chem.MolFromSmiles(text) for text in (smiles, model)]
        if any(mol is None or not mol.GetNumAtoms() for mol in mols):
            return None
        mol, other = (_laid_out(one) for one in mols)
        if len(pairs) > 1:
            rdMolAlign.AlignMol(mol, other, atomMap=list(pairs))
        return _drawing_of(mol, mols[0].GetNumAtoms())


def _drawn(mol: Chem.Mol) -> Drawing:
    return _drawing_of(_laid_out(mol), mol.GetNumAtoms())


def _laid_out(mol: Chem.Mol) -> Chem.Mol:
    """A copy with coordinates, ready to be drawn."""
    from rdkit.Chem import rdDepictor
    from rdkit.Chem.Draw import rdMolDraw2D

    prepared = rdMolDraw2D.PrepareMolForDrawing(mol, addChiralHs=False)
    rdDepictor.StraightenDepiction(prepared)
    return prepared


def _drawing_of(prepared: Chem.Mol, atoms: int) -> Drawing:
    from rdkit.Chem.Draw import rdMolDraw2D

    drawer = rdMolDraw2D.MolDraw2DSVG(-1, -1, -1, -1, True)
    options: Any = drawer.drawOptions()
    options.useBWAtomPalette()
    options.clearBackground = False
    options.prepareMolsBeforeDrawing = False
    drawer.DrawMolecule(prepared)
    places = [drawer.GetDrawCoords(n) for n in range(atoms)]
    drawer.FinishDrawing()
    return _geometry(drawer.GetDrawingText(), tuple((round(p.x, 1), round(p.y, 1)) for p in places))


def _geometry(svg: str, atoms: tuple[tuple[float, float], ...]) -> Drawing:
    """Strokes, filled shapes and letters of an RDKit drawing, without its styles."""
    lines, wedges, letters, segments = [], [], [], []
    for element in ElementTree.fromstring(svg):
        tag, style = element.tag.rpartition("}")[2], element.get("style", "")
        owner = _ATOM.search(element.get("class", ""))
        if tag == "text" and element.text and owner:
            size = re.search(r"font-size:([\d.]+)", style)
            x, y = float(element.get("x", 0)), float(element.get("y", 0))
            letters.append(Letter(x, y, element.text, float(size[1]) if size else 11.0, int(owner[1])))
        elif tag == "path" and owner:
            numbers = [float(text) for text in _NUMBER.findall(element.get("d", ""))]
            points = list(zip(numbers[::2], numbers[1::2], strict=True))
            path = "M" + "L".join(f"{x:g} {y:g}" for x, y in points)
            if "fill:none" in style:
                lines.append(path)
            else:
                wedges.append(path + "Z")
            segments += [(*start, *end) for start, end in pairwise(points)]
    return Drawing("".join(lines), "".join(wedges), tuple(letters), atoms, tuple(segments))
