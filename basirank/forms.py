"""SMILES of protonation states, written from the canonical SMILES of the neutral parent.

Nearly every form differs from the parent in the hydrogen count and the charge of a few atoms, so their tokens
are edited in the string and all else (stereo, isotopes, ring closures) stays as it was. A proton on carbon
(enamines, indoles, pyrroles) moves double bonds, one on a pyrrole-type nitrogen ends the aromaticity, and the
loss of a deuteron takes an atom away, boron takes up hydroxide: these are edited in the molecule.
"""

from __future__ import annotations

import re
from collections import deque
from collections.abc import Mapping, Sequence
from itertools import pairwise
from typing import TYPE_CHECKING

from rdkit import Chem

from .graph import ATOM_TOKEN

if TYPE_CHECKING:  # names of value objects only
    from .sites import Site
    from .structures import Parent

_BRACKET = re.compile(
    r"\[(?P<isotope>\d*)(?P<symbol>[A-Z][a-z]?|[a-z]{1,2}|\*)(?P<chirality>@(?:@|[A-Z]{2}\d+)?)?"
    r"(?:H\d*)?(?:[+-]+\d*)?(?P<label>:\d+)?\]"
)
_VALENCE_UNBRACKETED = {"C": 4, "N": 3, "O": 2, "S": 2}  # neutral, saturated: may stand without brackets

# an atom and what happens to it: +1 it gains a proton, -1 it loses one
Change = tuple[int, int]


def form_smiles(parent: Parent, sites: Sequence[Site], protonated: Sequence[bool]) -> str:
    """SMILES of one microstate.

    Parameters
    ----------
    parent : Parent
        The neutral parent (molecule, canonical SMILES and order of its atoms there).
    sites : sequence of Site
    protonated : sequence of bool
        Whether each site holds its proton. A base site that does gains H and a positive charge; an acid site
        that doesn't loses H and gains a negative charge; the others are as in the parent.

    Returns
    -------
    str
        `parent.smiles` itself if nothing changes. Otherwise the same string with the tokens of the sites
        changed; a fresh canonical SMILES where bonds had to move.

    Raises
    ------
    ValueError
        An acid site that has no hydrogen to give.
    """
    changes = [
        (site.atom, 1 if held else -1)
        for site, held in zip(sites, protonated, strict=True)
        if held == (site.kind == "base")
    ]
    if not changes:
        return parent.smiles
    if all(_stays_in_place(parent.mol.GetAtomWithIdx(atom), change) for atom, change in changes):
        return _edit_string(parent, changes)
    cores = {site.atom: site.core for site in sites}
    return _edit_molecule(parent.mol, changes, cores)


def _stays_in_place(atom: Chem.Atom, change: int) -> bool:
    """Whether the change is one of H count and charge on this atom alone, to be made in its token."""
    if atom.GetAtomicNum() != 6 and atom.GetChiralTag() != Chem.ChiralType.CHI_UNSPECIFIED:
        return False  # beside a ring closure @ is read differently with a lone pair and with H
    if change < 0:
        return bool(atom.GetTotalNumHs() > 0)
    if atom.GetFormalCharge() < 0:
        return True
    if atom.GetAtomicNum() == 6:
        return False
    return not atom.GetIsAromatic() or bool(atom.GetAtomicNum() == 7 and atom.GetTotalDegree() == 2)


def _edit_string(parent: Parent, changes: Sequence[Change]) -> str:
    """The parent's string with the tokens of the changed atoms replaced."""
    net: dict[int, int] = {}
    for atom, change in changes:
        net[atom] = net.get(atom, 0) + change
    due = {parent.output_order.index(atom): atom for atom in net}
    text = parent.smiles
    pieces, copied = [], 0
    for position, match in enumerate(ATOM_TOKEN.finditer(text)):
        if position not in due:
            continue
        atom = due.pop(position)
        token = _changed_token(match[0], parent.mol.GetAtomWithIdx(atom), net[atom])
        pieces += [text[copied : match.start()], token]
        copied = match.end()
        if not due:
            break
    return "".join(pieces) + text[copied:]


def _changed_token(token: str, atom: Chem.Atom, change: int) -> str:
    """Token of the atom with `change` protons more; a carbanion has no stereo left."""
    hydrogens = atom.GetTotalNumHs() + change
    charge = atom.GetFormalCharge() + change
    isotope, symbol, chirality, label = "", token, "", ""
    if token[0] == "[":
        match = _BRACKET.fullmatch(token)
        if match is None:
            raise ValueError(f"cannot read the atom {token}")
        isotope, symbol, chirality, label = (match[name] or "" for name in match.groupdict())
    if atom.GetAtomicNum() == 6 and change < 0:
        chirality = ""
    if not (charge or isotope or chirality or label) and _needs_no_bracket(atom, symbol, hydrogens):
        return symbol
    count = "" if hydrogens == 0 else "H" if hydrogens == 1 else f"H{hydrogens}"
    sign = "" if charge == 0 else "+" if charge > 0 else "-"
    size = str(abs(charge)) if abs(charge) > 1 else ""
    return f"[{isotope}{symbol}{chirality}{count}{sign}{size}{label}]"


def _needs_no_bracket(atom: Chem.Atom, symbol: str, hydrogens: int) -> bool:
    """Whether the neutral atom, written bare, would be read with this number of hydrogens."""
    bonds = sum(bond.GetBondTypeAsDouble() for bond in atom.GetBonds())
    return _VALENCE_UNBRACKETED.get(symbol) == bonds + hydrogens


def _edit_molecule(mol: Chem.Mol, changes: Sequence[Change], cores: Mapping[int, Sequence[int]]) -> str:
    """The form by way of its Kekule structure, protons on carbon first."""
    for flip in (True, False):
        edited = Chem.RWMol(mol)
        Chem.Kekulize(edited, clearAromaticFlags=True)
        deuterons: list[int] = []
        for atom, change in sorted(changes, key=lambda item: mol.GetAtomWithIdx(item[0]).GetAtomicNum() != 6):
            _apply(edited, atom, change, cores.get(atom, ()), deuterons, flip)
        for atom in sorted(deuterons, reverse=True):
            edited.RemoveAtom(atom)
        try:
            Chem.SanitizeMol(edited)
        except Chem.MolSanitizeException:
            if flip:
                continue  # two protons on one conjugated unit: leave the charge beside the carbon
            raise ValueError("no valence structure for this protonation state") from None
        return str(Chem.MolToSmiles(edited))
    raise AssertionError("unreachable")


def _apply(
    mol: Chem.RWMol, index: int, change: int, core: Sequence[int], deuterons: list[int], flip: bool
) -> None:
    """Put a proton on an atom or take one off, in a Kekule structure."""
    atom = mol.GetAtomWithIdx(index)
    hydrogens = atom.GetTotalNumHs() + change
    if hydrogens < 0 and atom.GetAtomicNum() == 5:  # a boronic acid takes up hydroxide
        hydroxy = mol.AddAtom(Chem.Atom(8))
        mol.AddBond(index, hydroxy, Chem.BondType.SINGLE)
        atom, hydrogens = mol.GetAtomWithIdx(index), 0
    elif hydrogens < 0:
        isotopic = [h.GetIdx() for h in atom.GetNeighbors() if h.GetAtomicNum() == 1]
        isotopic = [h for h in isotopic if h not in deuterons]
        if not isotopic:
            raise ValueError(f"atom {index} ({atom.GetSymbol()}) has no hydrogen to give")
        deuterons.append(isotopic[0])
        hydrogens = 0
    if atom.GetAtomicNum() == 6:
        atom.SetChiralTag(Chem.ChiralType.CHI_UNSPECIFIED)
    atom.SetNoImplicit(True)
    atom.SetNumExplicitHs(hydrogens)
    charged = atom
    if change > 0 and atom.GetAtomicNum() == 6 and atom.GetFormalCharge() == 0:
        charged = mol.GetAtomWithIdx(_move_bonds(mol, index, core, flip))
        hydrogens = charged.GetTotalNumHs()
        charged.SetNoImplicit(True)
        charged.SetNumExplicitHs(hydrogens)
    charged.SetFormalCharge(charged.GetFormalCharge() + change)


def _move_bonds(mol: Chem.RWMol, carbon: int, core: Sequence[int], flip: bool) -> int:
    """Turn C=C-N into C-C=N (or longer, by alternate bonds); return the atom that is then positive.

    The nearest nitrogen of the unit is taken, else the nearest anywhere, else the charge stays on the
    neighbour.
    """
    paths = _alternating_paths(mol, carbon) if flip else {}
    reached = [end for end in paths if end in core] or list(paths)
    if reached:
        path = paths[reached[0]]
        for step, (a, b) in enumerate(pairwise(path)):
            _set_bond(mol, a, b, Chem.BondType.SINGLE if step % 2 == 0 else Chem.BondType.DOUBLE)
        return path[-1]
    for bond in mol.GetAtomWithIdx(carbon).GetBonds():
        other = int(bond.GetOtherAtomIdx(carbon))
        if bond.GetBondType() == Chem.BondType.DOUBLE and mol.GetAtomWithIdx(other).GetAtomicNum() == 6:
            _set_bond(mol, carbon, other, Chem.BondType.SINGLE)
            return other
    raise ValueError(f"carbon {carbon} has no C=C bond to take a proton")


def _set_bond(mol: Chem.RWMol, a: int, b: int, kind: Chem.BondType) -> None:
    bond = mol.GetBondBetweenAtoms(a, b)
    bond.SetStereo(Chem.BondStereo.STEREONONE)
    bond.SetBondType(kind)


def _alternating_paths(mol: Chem.Mol, carbon: int) -> dict[int, tuple[int, ...]]:
    """Shortest paths double, single, ..., single from a carbon to neutral nitrogens, nearest first."""
    found: dict[int, tuple[int, ...]] = {}
    queue: deque[tuple[int, ...]] = deque([(carbon,)])
    seen = {(carbon, 0)}
    while queue:
        path = queue.popleft()
        parity = len(path) % 2  # 1: the next bond is to be double
        wanted = Chem.BondType.DOUBLE if parity else Chem.BondType.SINGLE
        for bond in mol.GetAtomWithIdx(path[-1]).GetBonds():
            if bond.GetBondType() != wanted:
                continue
            other = mol.GetAtomWithIdx(bond.GetOtherAtomIdx(path[-1]))
            index = int(other.GetIdx())
            if index in path or (index, 1 - parity) in seen:
                continue
            seen.add((index, 1 - parity))
            if parity == 0 and other.GetAtomicNum() == 7 and other.GetFormalCharge() == 0:
                if _single_bonds_only(other):
                    found.setdefault(index, (*path, index))
                continue
            if other.GetAtomicNum() == 6:
                queue.append((*path, index))
    return found


def _single_bonds_only(atom: Chem.Atom) -> bool:
    return all(bond.GetBondType() == Chem.BondType.SINGLE for bond in atom.GetBonds())
