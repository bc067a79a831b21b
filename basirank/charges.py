"""From the charge state that was drawn to the neutral parent.

Cations with hydrogen lose it, anions gain it; a charge that no proton can quench (quaternary nitrogen,
N-oxide, nitro) stays. A fixed cation in conjugation with an N-H, O-H, S-H or an anion is quenched through the
conjugated system: an N-alkyl-aminoazinium becomes the imine, an N-alkyl-hydroxyazinium the pyridone.
"""

from functools import cache

from rdkit import Chem

from basirank.conjugation import (
    alternating_path,
    apply_edit,
    finish,
    flip,
    kekulised,
    release_hydrogens,
    skeleton_ranks,
)
from basirank.tables import read_table

# Elements whose cation with hydrogen gives it up, and whose anion takes one up.
_PROTON_CARRIERS = frozenset({6, 7, 8, 15, 16, 33, 34})
_UNSATURATED = frozenset({Chem.BondType.DOUBLE, Chem.BondType.AROMATIC})


def neutralise(mol: Chem.Mol, index: list[int]) -> tuple[Chem.Mol, list[int]]:
    """Neutral parent of one component.

    Parameters
    ----------
    mol : Mol
        Sanitised molecule, never changed.
    index : list of int
        Input number of each atom.

    Returns
    -------
    tuple of Mol and list of int
        The same two objects where nothing was to be done.
    """
    charged = _charged_atoms(mol)
    if not charged or _all_paired(charged):
        return mol, index
    edited, index = _apply_rows(Chem.RWMol(mol), list(index))
    _exchange_protons(edited)
    edited, index = _apply_rows(edited, index)
    return _quench(edited), index


@cache
def _charged_pattern() -> Chem.Mol:
    return Chem.MolFromSmarts("[!+0]")


@cache
def _separated_pattern() -> Chem.Mol:
    """Opposite charges side by side, or a borate: without them no row of the table fits."""
    return Chem.MolFromSmarts("[$([+,+2]~[-]),$([B-])]")


def _charged_atoms(mol: Chem.Mol) -> list[Chem.Atom]:
    return [mol.GetAtomWithIdx(match[0]) for match in mol.GetSubstructMatches(_charged_pattern())]


def _all_paired(charged: list[Chem.Atom]) -> bool:
    """Whether the only charges are those of nitro groups and N-oxides of saturated or aromatic nitrogen."""
    for atom in charged:
        charge = atom.GetFormalCharge()
        if atom.GetAtomicNum() == 7 and charge == 1 and not atom.GetTotalNumHs():
            oxides = [n for n in atom.GetNeighbors() if n.GetFormalCharge() == -1]
            if len(oxides) != 1 or oxides[0].GetAtomicNum() != 8:
                return False
            if atom.GetIsAromatic() and any(_may_be_rewritten(n) for n in atom.GetNeighbors()):
                return False
            if any(
                n.GetAtomicNum() == 8 and n.GetDegree() == 1 and n.GetTotalNumHs()
                for n in atom.GetNeighbors()
            ):
                return False
        elif atom.GetAtomicNum() == 8 and charge == -1:
            partner = atom.GetNeighbors()
            if len(partner) != 1 or partner[0].GetAtomicNum() != 7 or partner[0].GetFormalCharge() != 1:
                return False
        else:
            return False
    return True


def _may_be_rewritten(atom: Chem.Atom) -> bool:
    """Whether a ring atom beside an aromatic N-oxide carries a hydroxy or mercapto group."""
    return any(n.GetAtomicNum() in (8, 16) and n.GetTotalNumHs() for n in atom.GetNeighbors())


def _exchange_protons(mol: Chem.RWMol) -> None:
    """Take hydrogen off cations and put it on anions, in place; anions held by a neighbouring fixed cation
    stay.
    """
    atoms = _charged_atoms(mol)
    for atom in atoms:
        if atom.GetFormalCharge() > 0 and atom.GetAtomicNum() in _PROTON_CARRIERS - {6}:
            if any(n.GetAtomicNum() == 5 and n.GetFormalCharge() < 0 for n in atom.GetNeighbors()):
                continue
            hydrogens = atom.GetNumExplicitHs() + atom.GetNumImplicitHs()
            if hydrogens:
                _add_hydrogens(atom, -min(atom.GetFormalCharge(), hydrogens))
    held = _held_anions(atoms)
    for atom in atoms:
        if (
            atom.GetFormalCharge() < 0
            and atom.GetIdx() not in held
            and atom.GetAtomicNum() in _PROTON_CARRIERS
        ) and not _is_complex_anion(atom):
            _add_hydrogens(atom, -atom.GetFormalCharge())
    finish(mol)


def _add_hydrogens(atom: Chem.Atom, number: int) -> None:
    """Add protons to an atom, or take them off where `number` is negative, in place."""
    hydrogens = atom.GetNumExplicitHs() + atom.GetNumImplicitHs()
    atom.SetFormalCharge(atom.GetFormalCharge() + number)
    if atom.GetIsAromatic() or atom.GetFormalCharge():
        atom.SetNumExplicitHs(hydrogens + number)
        atom.SetNoImplicit(True)
    else:
        release_hydrogens(atom)


def _held_anions(atoms: list[Chem.Atom]) -> set[int]:
    """Anions held by a neighbouring cation without hydrogen, one for each of its charges."""
    held: set[int] = set()
    for atom in atoms:
        if atom.GetFormalCharge() > 0:
            partners = [n for n in atom.GetNeighbors() if n.GetFormalCharge() < 0 and n.GetIdx() not in held]
            partners.sort(key=lambda n: (n.GetAtomicNum() != 8, n.GetAtomicNum() != 7, n.GetTotalNumHs()))
            held.update(n.GetIdx() for n in partners[: atom.GetFormalCharge()])
    return held


def _is_complex_anion(atom: Chem.Atom) -> bool:
    """Whether the charge is that of a saturated complex (hexafluorophosphate), which takes no proton."""
    return atom.GetAtomicNum() in (15, 33) and atom.GetDegree() > 4


def _quench(mol: Chem.RWMol) -> Chem.RWMol:
    """Neutralise fixed cations through the conjugated system by a donor N-H, O-H, S-H or an anion."""
    for _ in range(mol.GetNumAtoms()):
        cations = [
            atom.GetIdx()
            for atom in _charged_atoms(mol)
            if atom.GetFormalCharge() == 1
            and atom.GetAtomicNum() in (7, 8, 16)
            and any(bond.GetBondType() in _UNSATURATED for bond in atom.GetBonds())
            and not any(n.GetFormalCharge() < 0 for n in atom.GetNeighbors())
        ]
        if not cations:
            return mol
        ranks = skeleton_ranks(mol)
        for cation in sorted(cations, key=lambda i: (ranks[i], i)):
            quenched = _quench_one(mol, cation, ranks)
            if quenched is not None:
                mol = quenched
                break
        else:
            return mol
    return mol


def _quench_one(mol: Chem.RWMol, cation: int, ranks: list[int]) -> Chem.RWMol | None:
    localised = kekulised(mol)
    for donor in _donors(mol, ranks):
        path = alternating_path(localised, cation, {donor}, first=Chem.BondType.DOUBLE)
        if path is None:
            continue
        edited = Chem.RWMol(localised)
        flip(edited, path)
        edited.GetAtomWithIdx(cation).SetFormalCharge(0)
        edited.GetAtomWithIdx(donor).SetFormalCharge(0)
        try:
            finish(edited)
        except Chem.MolSanitizeException:
            continue
        return edited
    return None


def _is_enolic(atom: Chem.Atom) -> bool:
    """Whether an atom is an unsaturated carbon other than a carbonyl carbon."""
    return (
        atom.GetAtomicNum() == 6
        and atom.GetTotalDegree() == 3
        and not any(
            bond.GetBondType() == Chem.BondType.DOUBLE and bond.GetOtherAtom(atom).GetAtomicNum() == 8
            for bond in atom.GetBonds()
        )
    )


def _donors(mol: Chem.Mol, ranks: list[int]) -> list[int]:
    """Atoms that can quench a cation: anions first, then O-H and S-H, then N-H, most acidic (least hydrogens)
    first.
    """
    found = []
    for atom in mol.GetAtoms():
        element, charge = atom.GetAtomicNum(), atom.GetFormalCharge()
        if element not in (7, 8, 16, 34) or charge > 0:
            continue
        hydrogens = atom.GetNumExplicitHs() + atom.GetNumImplicitHs()
        if charge == -1 and any(n.GetFormalCharge() > 0 for n in atom.GetNeighbors()):
            continue
        if charge == 0 and not hydrogens:
            continue
        if element != 7 and not all(_is_enolic(n) for n in atom.GetNeighbors()):
            continue  # an oxime keeps its hydrogen (pralidoxime); acids and alcohols aren't conjugated
        found.append((charge, element == 7, hydrogens, ranks[atom.GetIdx()], atom.GetIdx()))
    return [entry[-1] for entry in sorted(found)]


@cache
def _charge_rows() -> tuple[tuple[Chem.Mol, tuple[str, ...]], ...]:
    rows = [row for row in read_table("rewrites.csv") if row["stage"] == "drawn charge"]
    return tuple((Chem.MolFromSmarts(row["smarts"]), tuple(row["edit"].split())) for row in rows)


def _apply_rows(mol: Chem.RWMol, index: list[int]) -> tuple[Chem.RWMol, list[int]]:
    """Bring drawn-charge variants of neutral groups to one form, by the table."""
    if not mol.HasSubstructMatch(_separated_pattern()):
        return mol, index
    for pattern, edits in _charge_rows():
        for _ in range(mol.GetNumAtoms()):
            match = mol.GetSubstructMatch(pattern)
            if not match:
                break
            place = {
                atom.GetAtomMapNum(): match[atom.GetIdx()]
                for atom in pattern.GetAtoms()
                if atom.GetAtomMapNum()
            }
            try:
                edited = kekulised(mol)
                gone = apply_edit(edited, edits, place)
                finish(edited)
            except (Chem.MolSanitizeException, ValueError):
                break
            mol = edited
            if gone is not None:
                index = index[:gone] + index[gone + 1 :]
    return mol, index
