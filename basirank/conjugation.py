"""Moving a hydrogen or a charge through a conjugated system.

In a Kekule structure a proton that leaves one end of a conjugated system and arrives at the other shifts
every double bond of an alternating path between them, and nothing else. All tautomer and charge rewrites rest
on this one move.
"""

import itertools
import re
from collections.abc import Sequence

from rdkit import Chem

# Longest path that is looked for, and the number of steps after which a search is given up (large fused
# dyes).
MAX_PATH_BONDS = 24
MAX_SEARCH_STEPS = 20_000

_BOND = {"-": Chem.BondType.SINGLE, "=": Chem.BondType.DOUBLE, "#": Chem.BondType.TRIPLE}
# Edits of a table row: "1=2" sets a bond order, "q1=+1" a charge, "3x" takes an atom off.
_BOND_EDIT = re.compile(r"(\d)([-=#])(\d)$")
_CHARGE_EDIT = re.compile(r"q(\d)=([+-]?\d)$")
_SINGLE, _DOUBLE = Chem.BondType.SINGLE, Chem.BondType.DOUBLE


def kekulised(mol: Chem.Mol) -> Chem.RWMol:
    """Editable copy of a molecule with localised double bonds and no aromatic marks."""
    copy = Chem.RWMol(mol)
    Chem.Kekulize(copy, clearAromaticFlags=True)
    return copy


def alternating_path(mol: Chem.Mol, start: int, ends: set[int], *, first: Chem.BondType) -> list[int] | None:
    """Shortest path of alternating single and double bonds from an atom to the nearest of some others.

    Parameters
    ----------
    mol : Mol
        Kekulised molecule.
    start : int
        Atom the path leaves.
    ends : set of int
        Atoms it may reach, through a bond of the other order than `first`.
    first : BondType
        Order of the first bond: SINGLE from an atom that gives a hydrogen, DOUBLE from a cation that is
        quenched.

    Returns
    -------
    list of int or None
        Atoms of the path, both ends included. Inner atoms are carbon or nitrogen without charge.
    """
    last = _DOUBLE if first == _SINGLE else _SINGLE
    order = {True: first, False: last}
    steps = 0

    def extend(path: list[int], limit: int) -> list[int] | None:
        nonlocal steps
        steps += 1
        if steps > MAX_SEARCH_STEPS:
            return None
        wanted = order[len(path) % 2 == 1]
        atom = mol.GetAtomWithIdx(path[-1])
        for bond in atom.GetBonds():
            if bond.GetBondType() != wanted:
                continue
            other = bond.GetOtherAtomIdx(path[-1])
            if other in path:
                continue
            if wanted == last and other in ends:
                return [*path, other]
            if len(path) >= limit:
                continue
            inner = mol.GetAtomWithIdx(other)
            if inner.GetAtomicNum() not in (6, 7) or inner.GetFormalCharge():
                continue
            found = extend([*path, other], limit)
            if found:
                return found
        return None

    for limit in range(2, MAX_PATH_BONDS + 1, 2):
        found = extend([start], limit)
        if found or steps > MAX_SEARCH_STEPS:
            return found
    return None


def flip(mol: Chem.RWMol, path: Sequence[int]) -> None:
    """Exchange single and double bonds along a path, in place; E/Z marks on it are dropped."""
    for a, b in itertools.pairwise(path):
        bond = mol.GetBondBetweenAtoms(a, b)
        bond.SetBondType(_DOUBLE if bond.GetBondType() == _SINGLE else _SINGLE)
        drop_bond_stereo(bond)
    for end in (path[0], path[-1]):
        release_hydrogens(mol.GetAtomWithIdx(end))


def drop_bond_stereo(bond: Chem.Bond) -> None:
    """Forget E/Z of a bond, in place, with the slashes beside it that belong to no other double bond."""
    bond.SetStereo(Chem.BondStereo.STEREONONE)
    bond.SetBondDir(Chem.BondDir.NONE)
    for end in (bond.GetBeginAtom(), bond.GetEndAtom()):
        for beside in end.GetBonds():
            if beside.GetBondDir() == Chem.BondDir.NONE or beside.GetIdx() == bond.GetIdx():
                continue
            others = beside.GetOtherAtom(end).GetBonds()
            if not any(other.GetBondType() == _DOUBLE for other in others):
                beside.SetBondDir(Chem.BondDir.NONE)


def release_hydrogens(atom: Chem.Atom) -> None:
    """Let the hydrogen count of an atom follow from its bonds again, in place."""
    atom.SetNoImplicit(False)
    atom.SetNumExplicitHs(0)


def finish(mol: Chem.RWMol) -> None:
    """Sanitise an edited molecule in place and take off stereo marks that no longer mean anything."""
    Chem.SanitizeMol(mol)
    Chem.AssignStereochemistry(mol, cleanIt=True, force=True)


def move_hydrogen(mol: Chem.Mol, donor: int, acceptor: int) -> Chem.RWMol | None:
    """Molecule with one hydrogen moved from `donor` to `acceptor`, or None where no Kekule structure allows
    it.
    """
    atom = mol.GetAtomWithIdx(donor)
    if not atom.GetNumExplicitHs() + atom.GetNumImplicitHs():
        return None  # the hydrogen is an isotope that is written as an atom
    edited = kekulised(mol)
    path = alternating_path(edited, donor, {acceptor}, first=_SINGLE)
    if path is None:
        return None
    flip(edited, path)
    try:
        finish(edited)
    except Chem.MolSanitizeException:
        return None
    return edited


def skeleton_ranks(mol: Chem.Mol) -> list[int]:
    """Rank of each atom in the bare skeleton (elements, charges, connections, isotopes last), equal for
    equivalent atoms.

    Hydrogen counts, bond orders and aromaticity don't enter: all tautomers of a compound give the same ranks,
    whatever the order of atoms.
    """
    bare = Chem.RWMol(mol)
    for bond in bare.GetBonds():
        bond.SetBondType(_SINGLE)
        bond.SetIsAromatic(False)
        bond.SetStereo(Chem.BondStereo.STEREONONE)
    for atom in bare.GetAtoms():
        atom.SetIsAromatic(False)
        atom.SetNoImplicit(True)
        atom.SetNumExplicitHs(0)
        atom.SetChiralTag(Chem.ChiralType.CHI_UNSPECIFIED)
    bare.UpdatePropertyCache(strict=False)
    return isotopes_last(bare, include_chirality=False)


def isotopes_last(mol: Chem.Mol, *, include_chirality: bool = True) -> list[int]:
    """Rank of each atom, in which isotopes only part what is equal without them: a label moves no proton."""
    ranks = list(Chem.CanonicalRankAtoms(mol, breakTies=False, includeChirality=include_chirality))
    if not any(atom.GetIsotope() for atom in mol.GetAtoms()):
        return ranks
    plain = Chem.CanonicalRankAtoms(
        mol, breakTies=False, includeChirality=include_chirality, includeIsotopes=False
    )
    pairs = list(zip(plain, ranks, strict=True))
    place = {pair: rank for rank, pair in enumerate(sorted(set(pairs)))}
    return [place[pair] for pair in pairs]


def apply_edit(mol: Chem.RWMol, edits: Sequence[str], place: dict[int, int]) -> int | None:
    """Carry out the edit cell of a table row, in place.

    Parameters
    ----------
    mol : RWMol
        Kekulised molecule.
    edits : sequence of str
        Words of the cell.
    place : dict
        Atom of the molecule for each map number of the row.

    Returns
    -------
    int or None
        The atom that was taken off, if any; the caller shortens its numbering.

    Raises
    ------
    ValueError
        A word isn't understood.
    """
    gone = None
    for word in edits:
        if bond := _BOND_EDIT.match(word):
            a, b = place[int(bond[1])], place[int(bond[3])]
            changed = mol.GetBondBetweenAtoms(a, b)
            changed.SetBondType(_BOND[bond[2]])
            drop_bond_stereo(changed)
        elif charge := _CHARGE_EDIT.match(word):
            mol.GetAtomWithIdx(place[int(charge[1])]).SetFormalCharge(int(charge[2]))
        elif word.endswith("x"):
            gone = place[int(word[:-1])]
        else:
            raise ValueError(f"rewrites.csv: edit {word!r} isn't understood")
    for atom in place.values():
        release_hydrogens(mol.GetAtomWithIdx(atom))
    if gone is not None:
        mol.RemoveAtom(gone)
    return gone
