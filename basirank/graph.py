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

Arm = tuple[int, int]
"""A neighbour and the order code of the bond to it."""

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
    neighbours : list of list of Arm
        (atom, bond order code) pairs, hydrogen atoms left out.
    kind : list of str
        Token of the kind of atom.
    rings : tuple of tuple of int
        Smallest rings, as RDKit's symmetrised set gives them.
    atom_rings : list of tuple of int
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
    neighbours: list[list[Arm]]
    kind: list[str]
    rings: tuple[tuple[int, ...], ...]
    atom_rings: list[tuple[int, ...]]
    ring_size: list[int]
    star: list[Star]

    def ring_bond(self, first: int, second: int) -> bool:
        """Whether two bonded atoms share a ring."""
        rings = self.atom_rings[second]
        return any(ring in rings for ring in self.atom_rings[first])

    def smallest_ring(self, atom: int) -> int:
        """Size of the smallest ring that holds the atom, 0 for a chain atom."""
        return self.ring_size[atom]


def _token(number: int, aromatic: bool, unsaturation: int, charge: int) -> str:
    """Kind of an atom: element, aromatic or number of pi bonds (3 none, 2 one, 1 two), sign of its charge."""
    symbol = _SYMBOL(number)
    token = symbol.lower() if aromatic else f"{symbol}{max(3 - unsaturation, 0)}"
    return token + "+" * max(charge, 0) + "-" * max(-charge, 0)


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
_TYPE_NUMBERS: dict[AtomType, int] = {}

_Seen = tuple[int, bool, int, int, int, int]
"""Element, aromatic, charge, pi bonds, hydrogens and neighbours of an atom."""
_KNOWN: dict[_Seen, tuple[int, str]] = {}
"""Type number and kind by what is seen of an atom."""

_STARS: dict[Star, Star] = {}
"""One object for equal stars: a chunk of molecules then holds, and frees, far fewer of them."""
_MOST_STARS = 50_000

_ARMS: list[list[Arm]] = [[] for _ in range(AROMATIC + 1)]
"""One object for equal arms, by order code and atom; grown to the largest molecule met."""


def _look_up(seen: _Seen) -> tuple[int, str]:
    """Type number and kind of an atom that is seen for the first time."""
    element, aromatic, charge, unsaturation, hydrogens, degree = seen
    kind = _token(element, aromatic, unsaturation, charge)
    own = AtomType(element, aromatic, charge, kind, hydrogens, degree)
    number = _TYPE_NUMBERS.setdefault(own, len(_TYPES))
    if number == len(_TYPES):
        _TYPES.append(own)
    _KNOWN[seen] = number, kind
    return number, kind


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
    atoms = list(map(mol.GetAtomWithIdx, range(number)))
    element = list(map(Chem.Atom.GetAtomicNum, atoms))
    charge = list(map(Chem.Atom.GetFormalCharge, atoms))
    aromatic = list(map(Chem.Atom.GetIsAromatic, atoms))
    total_degree = list(map(Chem.Atom.GetTotalDegree, atoms))
    neighbours, unsaturation, isotopic = _bonds(mol, element)
    degree = list(map(len, neighbours))
    hydrogens = [total - bonds for total, bonds in zip(total_degree, degree, strict=True)]
    for atom in isotopic:
        hydrogens[atom] -= sum(other.GetAtomicNum() != 1 for other in atoms[atom].GetNeighbors())
    types, kind = [], []
    for seen in zip(element, aromatic, charge, unsaturation, hydrogens, degree, strict=True):
        own, name = _KNOWN.get(seen) or _look_up(seen)
        types.append(own)
        kind.append(name)
    return Graph(
        element,
        charge,
        hydrogens,
        aromatic,
        neighbours,
        kind,
        *_rings(mol, number),
        _stars(types, neighbours),
    )


def _bonds(mol: Chem.Mol, element: list[int]) -> tuple[list[list[Arm]], list[int], list[int]]:
    """Neighbours and pi bonds of each atom, and the isotopic hydrogen atoms, whose bonds are left out."""
    number = len(element)
    while len(_ARMS[AROMATIC]) < number:
        for order, arms in enumerate(_ARMS):
            arms.append((len(arms), order))
    neighbours: list[list[Arm]] = [[] for _ in element]
    unsaturation = [0] * number
    isotopic = [atom for atom, one in enumerate(element) if one == 1] if 1 in element else []
    bonds = list(map(mol.GetBondWithIdx, range(mol.GetNumBonds())))
    for first, second, kind in zip(
        map(Chem.Bond.GetBeginAtomIdx, bonds),
        map(Chem.Bond.GetEndAtomIdx, bonds),
        map(Chem.Bond.GetBondTypeAsDouble, bonds),
        strict=True,
    ):
        if isotopic and (element[first] == 1 or element[second] == 1):
            continue
        order = _ORDER.get(kind, 1)
        arms = _ARMS[order]
        neighbours[first].append(arms[second])
        neighbours[second].append(arms[first])
        if order == 2 or order == 3:
            unsaturation[first] += order - 1
            unsaturation[second] += order - 1
    return neighbours, unsaturation, isotopic


def _rings(
    mol: Chem.Mol, number: int
) -> tuple[tuple[tuple[int, ...], ...], list[tuple[int, ...]], list[int]]:
    """Rings, those that hold each atom, and the size of the smallest of them."""
    rings = mol.GetRingInfo().AtomRings()
    atom_rings: list[tuple[int, ...]] = [()] * number
    ring_size = [0] * number
    for position, ring in enumerate(rings):
        size, alone = len(ring), (position,)
        for atom in ring:
            if ring_size[atom]:
                atom_rings[atom] += alone
                ring_size[atom] = min(ring_size[atom], size)
            else:
                atom_rings[atom] = alone
                ring_size[atom] = size
    return rings, atom_rings, ring_size


def _stars(types: list[int], neighbours: list[list[Arm]]) -> list[Star]:
    """Type of each atom with those of its neighbours."""
    if len(_STARS) > _MOST_STARS:
        _STARS.clear()
    beside = [own << 3 for own in types]
    found = []
    for own, around in zip(types, neighbours, strict=True):
        arms = [beside[other] | order for other, order in around]
        arms.sort()
        star = (own, *arms)
        found.append(_STARS.setdefault(star, star))
    return found
