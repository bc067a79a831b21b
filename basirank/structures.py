"""From text or molecule to the parent structure.

The parent is the compound as it stands uncharged in water: counter-ions and solvents off, protons exchanged
until nothing is charged that needn't be, tautomers in the form that rules. Each atom keeps its number in the
input.
"""

import re
from dataclasses import dataclass
from functools import cache

from rdkit import Chem, rdBase
from rdkit.Chem import rdqueries

from basirank.charges import neutralise
from basirank.salts import choose_component, has_metal, is_metal, is_organic, split_ion_pairs
from basirank.tables import read_table
from basirank.tautomers import rewrite, written_features

MAX_TEXT_LENGTH = 50_000
MAX_HEAVY_ATOMS = 1_000
# Metals whose compounds with a carbanion are still taken for salts: groups 1 and 2.
_IONIC_METALS = frozenset({3, 4, 11, 12, 19, 20, 37, 38, 55, 56})

# A bracket atom other than a stereo carbon and pyrrole N-H: its element, charge, radical or isotope must be
# looked at.
_UNUSUAL_ATOM = re.compile(r"\[(?!C@@?H?\]|nH\])|\*")
_CARBON = re.compile(r"c|C(?!l)")
_DUMMY = rdqueries.AtomNumEqualsQueryAtom(0)
_RADICAL = rdqueries.NumRadicalElectronsGreaterQueryAtom(0)
_ATOM_MAP = re.compile(r":\d+\]")
# Stereo as written, and hydrogen by its number, which RDKit's own reading takes off.
_STEREO_MARK = re.compile(r"[@/\\]|\[#")


class Refusal(ValueError):
    """A structure that can't be computed; its text is the plain reason."""


@dataclass(frozen=True, slots=True)
class Parent:
    """The neutral parent of an input structure.

    Attributes
    ----------
    mol : Mol
        Sanitised parent; ordinary hydrogen implicit, isotopic hydrogen may remain as atoms; not to be
        changed.
    atom_index : tuple of int
        Number of each parent atom among all atoms written in the input ([H] and counter-ions counted), from
        0.
    smiles : str
        Canonical SMILES of `mol`.
    output_order : tuple of int
        Parent atoms in the order in which they stand in `smiles`.
    notes : tuple of str
        Remarks and cautions for the reader.
    """

    mol: Chem.Mol
    atom_index: tuple[int, ...]
    smiles: str
    output_order: tuple[int, ...]
    notes: tuple[str, ...]


def read_parent(structure: str | Chem.Mol) -> Parent:
    """Parent structure of a SMILES text or a molecule.

    Parameters
    ----------
    structure : str or Mol
        SMILES (what follows the first white space is ignored) or molecule (never changed).

    Returns
    -------
    Parent

    Raises
    ------
    Refusal
        The structure can't be computed; the message says why.

    Examples
    --------
    >>> read_parent("[Cl-].C[NH2+]CCc1ccccc1").smiles
    'CNCCc1ccccc1'
    >>> read_parent("Oc1ccncc1").smiles
    'O=c1cc[nH]cc1'
    >>> read_parent("[Cl-].C[NH3+]").atom_index
    (1, 2)
    """
    lock = rdBase.BlockLogs()
    try:
        if isinstance(structure, str):
            return _from_text(structure)
        if isinstance(structure, Chem.Mol):
            return _from_mol(structure)
        raise Refusal("neither a SMILES text nor a molecule")
    except Chem.MolSanitizeException as problem:  # such as a bond to sodium whose ions have no sound valence
        raise Refusal(f"its ions are no sound structure: {str(problem).lower()}") from None
    finally:
        del lock


def _from_text(text: str) -> Parent:
    if len(text) > MAX_TEXT_LENGTH:
        raise Refusal(f"text of more than {MAX_TEXT_LENGTH:,} characters")
    words = text.split(None, 1)
    if not words:
        raise Refusal("empty")
    smiles = words[0]
    if ">" in smiles and ">" in smiles.replace("->", "").replace("<-", ""):
        raise Refusal("a reaction, not one compound")
    index: list[int] | None = None
    if "[H" in smiles or _ATOM_MAP.search(smiles):
        mol, index = _parse_hydrogens(smiles)
    else:
        mol = _parse(smiles)
    if _UNUSUAL_ATOM.search(smiles):
        return _finished(mol, index, smiles, charged="+" in smiles or "-" in smiles, plain=False)
    if not _CARBON.search(smiles) and not is_organic(mol):
        raise Refusal("no organic part")
    return _finished(mol, index, smiles, charged=False, plain=True)


def _from_mol(mol: Chem.Mol) -> Parent:
    if not mol.GetNumAtoms():
        raise Refusal("empty")
    if mol.GetNumAtoms() > MAX_TEXT_LENGTH:
        raise Refusal(f"over {MAX_HEAVY_ATOMS:,} heavy atoms")
    if any(atom.HasQuery() for atom in mol.GetAtoms()) or any(bond.HasQuery() for bond in mol.GetBonds()):
        raise Refusal("query atoms or bonds: not one definite structure")
    copy = Chem.Mol(mol)
    copy.RemoveAllConformers()
    problem = _chemistry_problem(copy)
    if problem:
        raise Refusal(problem)
    Chem.SanitizeMol(copy)
    parsed, index = _without_hydrogens(copy)
    return _finished(parsed, index, None, charged=True, plain=False)


def _finished(
    mol: Chem.Mol, index: list[int] | None, text: str | None, *, charged: bool, plain: bool
) -> Parent:
    """Choose the component, neutralise, rewrite; only where the caller's cheap look at the input says so."""
    notes: tuple[str, ...] = ()
    numbers = list(range(mol.GetNumAtoms())) if index is None else index
    if not plain:
        _refuse_queries(mol)
        mol = split_ion_pairs(mol) if has_metal(mol) else mol
    if (text is None or "." in text or not plain) and len(Chem.GetMolFrags(mol)) > 1:
        _refuse_ionic_sandwich(mol)
        chosen = choose_component(mol, numbers)
        if chosen is None:
            raise Refusal("no organic part")
        mol, numbers, notes = chosen
        charged = False
    if not plain or notes:
        _refuse_component(mol)
    if mol.GetNumAtoms() > MAX_HEAVY_ATOMS and mol.GetNumHeavyAtoms() > MAX_HEAVY_ATOMS:
        raise Refusal(f"over {MAX_HEAVY_ATOMS:,} heavy atoms")
    if charged:
        mol, numbers = neutralise(mol, numbers)
    if (not plain or notes) and not is_organic(mol):
        raise Refusal("no organic part")
    smiles = Chem.MolToSmiles(mol)
    features = written_features(smiles)
    rewritten, numbers = rewrite(mol, numbers, features)
    if rewritten is not mol:
        mol, smiles = rewritten, Chem.MolToSmiles(rewritten)
        features = written_features(smiles)
    notes += _cautions(mol, features)
    return Parent(mol, tuple(numbers), smiles, output_order(mol), notes)


def output_order(mol: Chem.Mol) -> tuple[int, ...]:
    """Atoms in the order in which they stand in the SMILES that was written last."""
    return tuple(map(int, mol.GetProp("_smilesAtomOutputOrder")[1:-1].split(",")))


def _parse(smiles: str) -> Chem.Mol:
    """Sanitised molecule of a text without written hydrogen.

    Where no stereo is written none is to be perceived: that is a quarter of the cost of reading, and a part of that of
    writing the canonical SMILES.
    """
    if _STEREO_MARK.search(smiles):
        mol = Chem.MolFromSmiles(smiles)
    else:
        mol = Chem.MolFromSmiles(smiles, _as_written())
        if mol is not None:
            try:
                Chem.SanitizeMol(mol)
            except (Chem.MolSanitizeException, RuntimeError):  # the latter for 127 bonds and more at an atom
                mol = None
            else:
                mol.SetIntProp("_StereochemDone", 1)
    if mol is None:
        raise Refusal(_parse_failure(smiles))
    return mol


@cache
def _as_written() -> Chem.SmilesParserParams:
    parameters = Chem.SmilesParserParams()
    parameters.sanitize = False  # type: ignore[assignment]
    parameters.removeHs = False  # type: ignore[assignment]
    return parameters


def _parse_hydrogens(smiles: str) -> tuple[Chem.Mol, list[int]]:
    """Parse with every written [H] as an atom, number all atoms, then make ordinary hydrogen implicit."""
    parameters = Chem.SmilesParserParams()
    parameters.removeHs = False  # type: ignore[assignment]
    mol = Chem.MolFromSmiles(smiles, parameters)
    if mol is None:
        raise Refusal(_parse_failure(smiles))
    return _without_hydrogens(mol)


@cache
def _hydrogen_removal() -> Chem.RemoveHsParameters:
    parameters = Chem.RemoveHsParameters()
    parameters.removeDefiningBondStereo = True  # type: ignore[assignment]
    parameters.removeMapped = True  # type: ignore[assignment]
    parameters.removeNonimplicit = True  # type: ignore[assignment]
    parameters.showWarnings = False  # type: ignore[assignment]
    return parameters


def _without_hydrogens(mol: Chem.Mol) -> tuple[Chem.Mol, list[int]]:
    """Molecule with ordinary hydrogen implicit and atom map numbers off, and the input number of each atom
    left.
    """
    numbers = list(range(mol.GetNumAtoms()))
    for atom in mol.GetAtoms():
        if atom.GetAtomMapNum():
            atom.SetAtomMapNum(0)
    if not any(atom.GetAtomicNum() == 1 for atom in mol.GetAtoms()):
        return mol, numbers
    for atom in mol.GetAtoms():
        atom.SetIntProp("_written", atom.GetIdx())
    bare = Chem.RemoveHs(mol, _hydrogen_removal())
    numbers = [atom.GetIntProp("_written") for atom in bare.GetAtoms()]
    for atom in bare.GetAtoms():
        atom.ClearProp("_written")
    return bare, numbers


def _refuse_queries(mol: Chem.Mol) -> None:
    if len(mol.GetAtomsMatchingQuery(_DUMMY)):
        raise Refusal("a dummy atom (*, R group): not one definite structure")


def _refuse_component(mol: Chem.Mol) -> None:
    """Refuse what can't be computed in the component that is kept."""
    if has_metal(mol):
        symbol = next(atom.GetSymbol() for atom in mol.GetAtoms() if is_metal(atom))
        raise Refusal(f"a metal complex or organometallic compound ({symbol})")
    for atom in mol.GetAtomsMatchingQuery(_RADICAL):
        raise Refusal(f"a radical (unpaired electron on {atom.GetSymbol()})")


def _refuse_ionic_sandwich(mol: Chem.Mol) -> None:
    """Refuse a metallocene drawn as ions: an aromatic carbanion beside a transition metal."""
    if not has_metal(mol) or not mol.HasSubstructMatch(Chem.MolFromSmarts("[c-]")):
        return
    if any(is_metal(atom) and atom.GetAtomicNum() not in _IONIC_METALS for atom in mol.GetAtoms()):
        raise Refusal("a metal complex or organometallic compound (carbanion beside a metal ion)")


def _parse_failure(smiles: str) -> str:
    """Plain reason why a text can't be read."""
    mol = Chem.MolFromSmiles(smiles, sanitize=False)
    if mol is None:
        for opening, closing, name in (("(", ")", "parentheses"), ("[", "]", "brackets")):
            if smiles.count(opening) != smiles.count(closing):
                return f"cannot be read as SMILES: {name} do not pair"
        return "cannot be read as SMILES"
    return _chemistry_problem(mol) or "cannot be read as SMILES"


def _chemistry_problem(mol: Chem.Mol) -> str:
    """Plain reason why a molecule isn't a sound structure, empty where it is."""
    try:
        problems = Chem.DetectChemistryProblems(mol)
    except RuntimeError:  # bonds of an atom are counted in a signed byte: [NH127] runs over
        return "valence of an atom is more than it can be"
    for problem in problems:
        if problem.GetType().startswith("AtomValence"):
            atom = mol.GetAtomWithIdx(problem.GetAtomIdx())
            return f"valence of {atom.GetSymbol()} (atom {atom.GetIdx()}) is more than it can be"
        if "Kekul" in problem.GetType():
            return "aromatic ring without a Kekule structure (a missing [nH] or a charge?)"
        return f"not a sound structure: {problem.Message()}"
    return ""


@cache
def _caution_groups() -> tuple[tuple[frozenset[str], Chem.Mol, tuple[tuple[Chem.Mol, str], ...]], ...]:
    """Cautions under their cheap tests: what the text shows, a first pattern, then pattern and remark of each
    row.
    """
    collected: dict[tuple[str, str], list[tuple[Chem.Mol, str]]] = {}
    for row in read_table("cautions.csv"):
        rows = collected.setdefault((row["written_with"], row["cheap_test"]), [])
        rows.append((Chem.MolFromSmarts(row["smarts"]), row["remark"]))
    return tuple(
        (frozenset(written.split()), Chem.MolFromSmarts(smarts), tuple(rows))
        for (written, smarts), rows in collected.items()
    )


def _cautions(mol: Chem.Mol, features: frozenset[str]) -> tuple[str, ...]:
    """Remarks on a structure whose protonation isn't a simple step."""
    remarks: tuple[str, ...] = ()
    for written_with, cheap_test, rows in _caution_groups():
        if written_with & features and mol.HasSubstructMatch(cheap_test):
            remarks += tuple(remark for pattern, remark in rows if mol.HasSubstructMatch(pattern))
    return remarks
