"""The molecule as plain arrays: what the walks from a site read, taken out of RDKit in one pass.

Isotopic hydrogen atoms are folded into the hydrogen count of their carrier, so that a deuterated amine is the
amine. Each atom also has a short token for its kind (`C3` saturated carbon, `C2` trigonal, `c` aromatic, `O3`
single-bonded oxygen, `N2+` ...), the alphabet in which substituents are spelled, and a star: itself and its
neighbours as one small tuple, by which other modules remember what they know of such an atom.
"""

from __future__ import annotations

from dataclasses import dataclass

from rdkit import Chem

AROMATIC = 4
"""Bond order code of an aromatic bond (single 1, double 2, triple 3, dative 1)."""

_ORDER = {1.0: 1, 2.0: 2, 3.0: 3, 1.5: AROMATIC}
"""Order code by RDKit's bond type as a number, which is cheaper to ask for than the type."""

Star = tuple[int, ...]
"""An atom's type, then for each neighbour, sorted, type and bond order in one number (see `star_parts`)."""

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
    ring_size : list of int
        Size of the smallest ring that holds the atom, 0 for a chain atom.
    star : list of Star
        Type of each atom with those of its neighbours; equal stars, equal first shells.
    """

    element: list[int]
    charge: list[int]
    hydrogens: list[int]
    aromatic: list[bool]
    neighbours: list[list[tuple[int, int]]]
    kind: list[str]
    rings: tuple[tuple[int, ...], ...]
    atom_rings: list[list[int]]
    ring_size: list[int]
    star: list[Star]

    def ring_bond(self, first: int, second: int) -> bool:
        """Whether two bonded atoms share a ring."""
        rings = self.atom_rings[second]
        return any(ring in rings for ring in self.atom_rings[first])

    def smallest_ring(self, atom: int) -> int:
        """Size of the smallest ring that holds the atom, 0 for a chain atom."""
        return self.ring_size[atom]


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


@dataclass(frozen=True, slots=True)
class AtomType:
    """What an atom is by itself; `degree` counts neighbours without hydrogen."""

    element: int
    aromatic: bool
    charge: int
    kind: str
    hydrogens: int
    degree: int


# Types are numbered as they are met; there are a few hundred in chemistry, so the list stays short. The
# numbers differ from run to run and serve only to compare and to remember.
_TYPES: list[AtomType] = []
_TYPE_NUMBERS: dict[tuple[int, bool, int, str, int, int], int] = {}


_STARS: dict[Star, Star] = {}
"""One object for equal stars: a chunk of molecules then holds, and frees, far fewer of them."""
_MOST_STARS = 50_000


def _type_number(key: tuple[int, bool, int, str, int, int]) -> int:
    number = _TYPE_NUMBERS.get(key)
    if number is None:
        number = _TYPE_NUMBERS[key] = len(_TYPES)
        _TYPES.append(AtomType(*key))
    return number


def type_of(number: int) -> AtomType:
    """Atom type of a number in a star."""
    return _TYPES[number]


def star_parts(star: Star) -> tuple[AtomType, list[tuple[int, AtomType]]]:
    """Type of the atom, and (bond order code, type) of each neighbour."""
    return _TYPES[star[0]], [(arm & 7, _TYPES[arm >> 3]) for arm in star[1:]]


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
    number = mol.GetNumAtoms()
    # by index: RDKit's own iterators cost twice as much
    atoms = [mol.GetAtomWithIdx(index) for index in range(number)]
    element = [atom.GetAtomicNum() for atom in atoms]
    charge = [atom.GetFormalCharge() for atom in atoms]
    aromatic = [atom.GetIsAromatic() for atom in atoms]
    hydrogens = [atom.GetTotalDegree() for atom in atoms]  # less the bonds, below
    neighbours: list[list[tuple[int, int]]] = [[] for _ in atoms]
    unsaturation = [0] * number
    for index in range(mol.GetNumBonds()):
        bond = mol.GetBondWithIdx(index)
        first, second = bond.GetBeginAtomIdx(), bond.GetEndAtomIdx()
        if element[first] != 1:
            hydrogens[second] -= 1
        if element[second] != 1:
            hydrogens[first] -= 1
        if element[first] == 1 or element[second] == 1:
            continue
        order = _ORDER.get(bond.GetBondTypeAsDouble(), 1)
        neighbours[first].append((second, order))
        neighbours[second].append((first, order))
        if order == 2 or order == 3:
            unsaturation[first] += order - 1
            unsaturation[second] += order - 1
    kind = list(map(_token, element, aromatic, unsaturation, charge))
    rings = mol.GetRingInfo().AtomRings()
    atom_rings: list[list[int]] = [[] for _ in atoms]
    ring_size = [0] * number
    for position, ring in enumerate(rings):
        size = len(ring)
        for atom in ring:
            atom_rings[atom].append(position)
            if not 0 < ring_size[atom] <= size:
                ring_size[atom] = size
    degree = map(len, neighbours)
    types = list(map(_type_number, zip(element, aromatic, charge, kind, hydrogens, degree, strict=True)))
    if len(_STARS) > _MOST_STARS:
        _STARS.clear()
    star = []
    for own, around in zip(types, neighbours, strict=True):
        made = (own, *sorted([types[other] << 3 | order for other, order in around]))
        star.append(_STARS.setdefault(made, made))
    return Graph(element, charge, hydrogens, aromatic, neighbours, kind, rings, atom_rings, ring_size, star)
