"""Which component of a salt or solvate is the compound.

Listed counter-ions and solvents are set aside; of the rest the largest component with a basic nitrogen is the
compound. Where everything is listed (lysine hydrochloride, sodium acetate), the listed base is, else the
listed acid.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache

from rdkit import Chem

from basirank.charges import neutralise
from basirank.tables import read_table

# A nitrogen that may take a proton in water: amine, aniline, imine, amidine, azine, azole. Not amide,
# thioamide, sulfonamide, nitro, nitroso, nitrile, azide, quaternary or pyrrole nitrogen.
BASIC_NITROGEN = (
    "[$([NX3;+0;!$(N-[C,S,P]=[O,S]);!$(N-[N+]);!$(N-N=O);!$(N-C#N);!$(N-[C,c]=,:[N,n])]),"
    "$([NX2;+0]=[#6;!$(C=[O,S,N+])]),$([n;X2;+0])]"
)

# Elements that aren't metals, commonest first so that a test on them ends soon (0 is a dummy atom).
_NON_METALS = (6, 7, 8, 16, 17, 9, 1, 35, 15, 53, 5, 14, 34, 0, 2, 10, 18, 32, 33, 36, 51, 52, 54, 84, 85, 86)
# Metals whose bond to O, N, S or a halogen is an ion pair, however drawn.
_ALKALI_METALS = frozenset({3, 11, 19, 37, 55})


@dataclass(frozen=True, slots=True)
class Component:
    """One connected part of the input: neutral form, input numbers, canonical text without stereo, listed
    kind.
    """

    mol: Chem.Mol
    index: list[int]
    key: str
    kind: str
    has_basic_nitrogen: bool
    is_organic: bool


def is_metal(atom: Chem.Atom) -> bool:
    """Whether an atom is a metal (groups 1 to 13, tin, lead, bismuth; not B, Si, Ge, As, Sb, Te)."""
    return atom.GetAtomicNum() not in _NON_METALS


@cache
def _metal_pattern() -> Chem.Mol:
    return Chem.MolFromSmarts("[" + ";".join(f"!#{number}" for number in _NON_METALS) + "]")


def has_metal(mol: Chem.Mol) -> bool:
    """Whether there is a metal atom or ion."""
    return mol.HasSubstructMatch(_metal_pattern())


@cache
def _organic_pattern() -> Chem.Mol:
    return Chem.MolFromSmarts("[#6,$([#7;+0;v3;!$(N=[N+]);!$(N#N)])]")


def split_ion_pairs(mol: Chem.Mol) -> Chem.Mol:
    """Break bonds drawn between an alkali metal and O, N, S or halogen; same object where there are none."""
    pairs = [
        (bond.GetBeginAtomIdx(), bond.GetEndAtomIdx())
        for bond in mol.GetBonds()
        if any(
            a.GetAtomicNum() in _ALKALI_METALS and b.GetAtomicNum() in (7, 8, 9, 16, 17, 35, 53)
            for a, b in (
                (bond.GetBeginAtom(), bond.GetEndAtom()),
                (bond.GetEndAtom(), bond.GetBeginAtom()),
            )
        )
    ]
    if not pairs:
        return mol
    edited = Chem.RWMol(mol)
    for begin, end in pairs:
        edited.RemoveBond(begin, end)
        for number in (begin, end):
            atom = edited.GetAtomWithIdx(number)
            atom.SetNoImplicit(True)
            atom.SetFormalCharge(atom.GetFormalCharge() + (1 if is_metal(atom) else -1))
            atom.SetNumExplicitHs(0 if is_metal(atom) else atom.GetNumExplicitHs())
    Chem.SanitizeMol(edited)
    return edited


def _key(mol: Chem.Mol) -> str:
    """Canonical SMILES without stereo marks and isotopes."""
    bare = Chem.Mol(mol)
    Chem.RemoveStereochemistry(bare)
    isotopes = [atom for atom in bare.GetAtoms() if atom.GetIsotope()]
    for atom in isotopes:
        atom.SetIsotope(0)
    if isotopes:
        bare = Chem.RemoveHs(bare)
    return Chem.MolToSmiles(bare)


@cache
def listed_kinds() -> dict[str, str]:
    """Kind of each listed counter-ion and solvent by its canonical SMILES without stereo marks."""
    kinds = {}
    for row in read_table("counterions.csv"):
        mol = Chem.MolFromSmiles(row["smiles"])
        if mol is None:
            raise ValueError(f"counterions.csv: {row['smiles']} ({row['name']}) cannot be read as SMILES")
        if row["kind"] != "metal":
            kinds[_key(neutralise(mol, list(range(mol.GetNumAtoms())))[0])] = row["kind"]
    return kinds


@cache
def _largest_listed() -> int:
    return max(Chem.MolFromSmiles(row["smiles"]).GetNumAtoms() for row in read_table("counterions.csv"))


@cache
def _basic_nitrogen() -> Chem.Mol:
    return Chem.MolFromSmarts(BASIC_NITROGEN)


def _component(mol: Chem.Mol, index: list[int]) -> Component:
    if all(is_metal(atom) or atom.GetAtomicNum() == 1 for atom in mol.GetAtoms()):
        return Component(mol, index, "", "metal", False, False)
    mol, index = neutralise(mol, index)
    small = mol.GetNumHeavyAtoms() <= _largest_listed()
    key = _key(mol)
    return Component(
        mol,
        index,
        key,
        listed_kinds().get(key, "") if small else "",
        mol.HasSubstructMatch(_basic_nitrogen()),
        is_organic(mol),
    )


def is_organic(mol: Chem.Mol) -> bool:
    """Whether there is a carbon, or a nitrogen that could be a base (ammonia, hydrazine, hydroxylamine)."""
    return mol.HasSubstructMatch(_organic_pattern())


def components_of(mol: Chem.Mol, index: Sequence[int]) -> list[Component]:
    """Every component of a salt or solvate.

    Parameters
    ----------
    mol : Mol
        Sanitised molecule of one or more components.
    index : sequence of int
        Input number of each atom.
    """
    maps: list[list[int]] = []
    parts = Chem.GetMolFrags(mol, asMols=True, fragsMolAtomMapping=maps)
    return [_component(part, [index[i] for i in atoms]) for part, atoms in zip(parts, maps, strict=True)]


def choose_component(
    mol: Chem.Mol, index: Sequence[int]
) -> tuple[Chem.Mol, list[int], tuple[str, ...]] | None:
    """The component that is the compound.

    Parameters
    ----------
    mol : Mol
        Sanitised molecule of one or more components.
    index : sequence of int
        Input number of each atom.

    Returns
    -------
    tuple of Mol, list of int, tuple of str
        Neutral component, its input numbers, remarks on other compounds left out; None where nothing is
        organic.
    """
    components = components_of(mol, index)
    organic = [component for component in components if component.is_organic]
    if not organic:
        return None
    unlisted = [component for component in organic if not component.kind]
    listed = [component for component in organic if component.kind]
    basic = [component for component in listed if component.has_basic_nitrogen]
    choices = (
        [c for c in unlisted if c.has_basic_nitrogen],
        unlisted,
        [c for c in basic if c.kind == "base"],
        [c for c in basic if c.kind == "acid"],
        [c for c in listed if c.kind == "base"],
        [c for c in listed if c.kind == "acid"],
        listed,
    )
    candidates = next(choice for choice in choices if choice)
    kept = min(candidates, key=lambda c: (-c.mol.GetNumHeavyAtoms(), c.key, min(c.index)))
    others = sorted({c.key for c in unlisted} - {kept.key})
    notes = (f"several compounds: kept the one shown, left out {', '.join(others)}",) if others else ()
    return kept.mol, kept.index, notes
