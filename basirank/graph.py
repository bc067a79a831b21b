"""The molecule as plain arrays: what the walks from a site read, taken out of RDKit in one pass.

Isotopic hydrogen atoms are folded into the hydrogen count of their carrier, so that a deuterated amine is the
amine. Each atom also has a short token for its kind (`C3` saturated carbon, `C2` trigonal, `c` aromatic, `O3`
single-bonded oxygen, `N2+` ...), the alphabet in which substituents are spelled.
"""

from __future__ import annotations

from dataclasses import dataclass

from rdkit import Chem

AROMATIC = 4
"""Bond order code of an aromatic bond (single 1, double 2, triple 3, dative 1)."""

_ORDER = {
    Chem.BondType.SINGLE: 1,
    Chem.BondType.DOUBLE: 2,
    Chem.BondType.TRIPLE: 3,
    Chem.BondType.AROMATIC: AROMATIC,
}
_SYMBOL = Chem.GetPeriodicTable().GetElementSymbol


@dataclass(slots=True)
class Graph:
    """Plain arrays of one molecule, indexed by atom.

    Attributes
    ----------
    element : list of int
        Atomic numbers.
    charge : list of int
        Formal charges.
    hydrogens : list of int
        Hydrogen atoms carried, isotopic ones included.
    aromatic : list of bool
        Aromatic in RDKit's model.
    neighbours : list of list of (int, int)
        (atom, bond order code) pairs, hydrogen atoms left out.
    kind : list of str
        Token of the kind of atom.
    rings : tuple of tuple of int
        Smallest rings, as RDKit's symmetrised set gives them.
    atom_rings : list of list of int
        Positions in `rings` of the rings that hold the atom.
    """

    element: list[int]
    charge: list[int]
    hydrogens: list[int]
    aromatic: list[bool]
    neighbours: list[list[tuple[int, int]]]
    kind: list[str]
    rings: tuple[tuple[int, ...], ...]
    atom_rings: list[list[int]]

    def ring_bond(self, first: int, second: int) -> bool:
        """Whether two bonded atoms share a ring."""
        rings = self.atom_rings[second]
        return any(ring in rings for ring in self.atom_rings[first])

    def smallest_ring(self, atom: int) -> int:
        """Size of the smallest ring that holds the atom, 0 for a chain atom."""
        return min((len(self.rings[ring]) for ring in self.atom_rings[atom]), default=0)


_TOKENS: dict[tuple[int, bool, int, int], str] = {}


def _token(number: int, aromatic: bool, unsaturation: int, charge: int) -> str:
    """Kind of an atom: element, aromatic or number of pi bonds (3 none, 2 one, 1 two), sign of its charge."""
    key = (number, aromatic, unsaturation, charge)
    token = _TOKENS.get(key)
    if token is None:
        symbol = _SYMBOL(number)
        token = symbol.lower() if aromatic else f"{symbol}{max(3 - unsaturation, 0)}"
        token += "+" * max(charge, 0) + "-" * max(-charge, 0)
        _TOKENS[key] = token
    return token


def build_graph(mol: Chem.Mol) -> Graph:
    """Take the plain arrays of a sanitised molecule.

    Parameters
    ----------
    mol : Chem.Mol
        Sanitised molecule, ordinary hydrogen implicit.

    Returns
    -------
    Graph
        Arrays indexed like the atoms of `mol`.
    """
    element, charge, hydrogens, aromatic = [], [], [], []
    for atom in mol.GetAtoms():
        element.append(atom.GetAtomicNum())
        charge.append(atom.GetFormalCharge())
        hydrogens.append(atom.GetTotalNumHs())
        aromatic.append(atom.GetIsAromatic())
    neighbours: list[list[tuple[int, int]]] = [[] for _ in element]
    unsaturation = [0] * len(element)
    for bond in mol.GetBonds():
        first, second = bond.GetBeginAtomIdx(), bond.GetEndAtomIdx()
        if element[first] == 1 or element[second] == 1:
            hydrogens[first] += element[second] == 1
            hydrogens[second] += element[first] == 1
            continue
        order = _ORDER.get(bond.GetBondType(), 1)
        neighbours[first].append((second, order))
        neighbours[second].append((first, order))
        if order in (2, 3):
            unsaturation[first] += order - 1
            unsaturation[second] += order - 1
    kind = [_token(*row) for row in zip(element, aromatic, unsaturation, charge, strict=True)]
    rings = tuple(tuple(ring) for ring in mol.GetRingInfo().AtomRings())
    atom_rings: list[list[int]] = [[] for _ in element]
    for position, ring in enumerate(rings):
        for atom in ring:
            atom_rings[atom].append(position)
    return Graph(element, charge, hydrogens, aromatic, neighbours, kind, rings, atom_rings)
