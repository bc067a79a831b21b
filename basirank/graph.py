"""The molecule as plain arrays: what the walks from a site read, taken out of RDKit in one pass.

Isotopic hydrogen atoms are folded into the hydrogen count of their carrier, so that a deuterated amine is the
amine. Each atom also has a short token for its kind (`C3` saturated carbon, `C2` trigonal, `c` aromatic, `O3`
single-bonded oxygen, `N2+` ...), the alphabet in which substituents are spelled, and a star: itself and its
neighbours as one small tuple, by which other modules remember what they know of such an atom.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from rdkit import Chem

from .structures import output_order

ATOM_TOKEN = re.compile(r"\[[^\]]*\]|Br|Cl|[BCNOPSFIbcnops*]")
"""An atom in a SMILES."""

_HYDROGEN = re.compile(r"\[\d*H[+-]*\d*\]")

AROMATIC = 4
"""Bond order code of an aromatic bond (single 1, double 2, triple 3, all others 1)."""

_ORDER = np.ones(16, dtype=np.intp)
"""Order code by twice the bond order as RDKit counts it."""
_ORDER[[3, 4, 6]] = AROMATIC, 2, 3

_ORDER_COUNT = np.array([0.0, 1.0, 2.0**10, 2.0**20, 2.0**30])
"""By order code, what a bond adds to the one number that counts the bonds of an atom."""

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
        (atom, bond order code) pairs in the order of the canonical SMILES, hydrogen atoms left out.
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

_KNOWN: dict[tuple[str, float], tuple[int, AtomType]] = {}
"""Type and its number by token (with an H for each isotopic hydrogen beside it) and bonds; emptied when it grows past
a bound, as isotopes may be written without end."""
_MOST_KNOWN = 50_000

_STARS: dict[Star, Star] = {}
"""One object for equal stars: a chunk of molecules then holds, and frees, far fewer of them."""
_MOST_STARS = 50_000

_ARMS: list[Arm] = []
"""One object for equal arms, at eight times the atom plus the order code; grown to the largest molecule met."""


def _look_up(key: tuple[str, float], atom: Chem.Atom) -> tuple[int, AtomType]:
    """Type of an atom that is seen for the first time, and its number."""
    element, aromatic, charge = atom.GetAtomicNum(), atom.GetIsAromatic(), atom.GetFormalCharge()
    bonds = [bond for bond in atom.GetBonds() if bond.GetOtherAtom(atom).GetAtomicNum() != 1]
    hydrogens = atom.GetTotalDegree() - len(bonds)
    if element == 1:
        bonds = []
    pi_bonds = sum({2.0: 1, 3.0: 2}.get(bond.GetBondTypeAsDouble(), 0) for bond in bonds)
    kind = _token(element, aromatic, pi_bonds, charge)
    own = AtomType(element, aromatic, charge, kind, hydrogens, len(bonds))
    number = _TYPE_NUMBERS.setdefault(own, len(_TYPES))
    if number == len(_TYPES):
        _TYPES.append(own)
    if len(_KNOWN) >= _MOST_KNOWN:
        _KNOWN.clear()
    _KNOWN[key] = number, own
    return number, own


def type_of(number: int) -> AtomType:
    """Atom type of a number in a star."""
    return _TYPES[number]


def star_parts(star: Star) -> tuple[AtomType, list[tuple[int, AtomType]]]:
    """Type of the atom, and (bond order code, type) of each neighbour."""
    return _TYPES[star[0]], [(arm & 7, _TYPES[arm >> 3]) for arm in star[1:]]


def build_graph(mol: Chem.Mol, smiles: str | None = None, order: Sequence[int] | None = None) -> Graph:
    """Take the plain arrays of a sanitised molecule.

    Bonds are taken in one call, as a matrix; neighbours stand in canonical order, so that no walk depends on how
    the structure was written. What an atom is follows from its token in the canonical SMILES and
    from its bonds, so that RDKit is asked about an atom only when such a one is met for the first time.

    Parameters
    ----------
    mol : Chem.Mol
        Sanitised molecule, ordinary hydrogen implicit.
    smiles : str, optional
        Its canonical SMILES where that is at hand, with
    order : sequence of int, optional
        the atoms in the order in which they stand there.

    Returns
    -------
    Graph
        Arrays indexed like the atoms of `mol`.
    """
    if not mol.GetNumAtoms():
        return Graph([], [], [], [], [], [], (), [], [], [])
    if smiles is None or order is None:
        smiles = Chem.MolToSmiles(mol)
        order = output_order(mol)
    number = mol.GetNumAtoms()
    token = [""] * number
    for atom, text in zip(order, ATOM_TOKEN.findall(smiles), strict=True):
        token[atom] = text
    matrix = _bond_matrix(mol)
    if _HYDROGEN.search(smiles):  # isotopic hydrogen is no neighbour, but counted on its carrier
        isotopic = [atom for atom, text in enumerate(token) if _HYDROGEN.match(text)]
        for carrier in matrix[isotopic].nonzero()[1].tolist():
            token[carrier] += "H"
        matrix[isotopic] = matrix[:, isotopic] = 0.0
    neighbours, orders = _bonds(matrix, order)
    known = _KNOWN.get
    types: list[int] = []
    own: list[AtomType] = []
    for key in zip(token, orders, strict=True):
        type_number, one = known(key) or _look_up(key, mol.GetAtomWithIdx(len(own)))
        types.append(type_number)
        own.append(one)
    return Graph(
        [atom.element for atom in own],
        [atom.charge for atom in own],
        [atom.hydrogens for atom in own],
        [atom.aromatic for atom in own],
        neighbours,
        [atom.kind for atom in own],
        *_rings(mol, number),
        _stars(types, neighbours),
    )


def _bond_matrix(mol: Chem.Mol) -> NDArray[np.float64]:
    """Bond orders as RDKit counts them (1.5 for an aromatic bond) between all atoms."""
    matrix: NDArray[np.float64] = Chem.GetAdjacencyMatrix(mol, useBO=True)
    mol.ClearProp("AdjacencyMatrixBO")  # where RDKit keeps it: a megabyte and more for a large molecule
    # dative bonds count at one end, zero-order bonds at none
    if np.count_nonzero(matrix) != 2 * mol.GetNumBonds():
        matrix = np.maximum(np.maximum(matrix, matrix.T), Chem.GetAdjacencyMatrix(mol))
    return matrix


def _bonds(matrix: NDArray[np.float64], order: Sequence[int]) -> tuple[list[list[Arm]], list[float]]:
    """Neighbours of each atom in canonical order, and how many bonds of each order it has, in one number."""
    number = len(matrix)
    while len(_ARMS) < number << 3:
        atom = len(_ARMS) >> 3
        _ARMS.extend([(atom, order) for order in range(8)])
    canonical = np.array(order)
    flat = matrix.take(canonical, axis=1).ravel()
    bonds = flat.nonzero()[0]
    atoms, places = np.divmod(bonds, number)
    code = _ORDER[(2.0 * flat[bonds]).astype(np.intp)]
    arms = list(map(_ARMS.__getitem__, (canonical[places] << 3 | code).tolist()))
    ends = np.searchsorted(atoms, np.arange(1, number + 1)).tolist()
    neighbours = [arms[start:end] for start, end in pairwise([0, *ends])]
    return neighbours, np.bincount(atoms, weights=_ORDER_COUNT[code], minlength=number).tolist()


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
