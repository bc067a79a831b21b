"""SMILES of protonation states: the right hydrogen and charge on the right atom, all else as it was."""

from __future__ import annotations

import csv
from pathlib import Path
from types import SimpleNamespace

import pytest
from rdkit import Chem

from basirank.forms import form_smiles


def parent_of(structure: str | Chem.Mol) -> SimpleNamespace:
    """What form_smiles reads of a parent, straight from RDKit."""
    mol = Chem.MolFromSmiles(structure) if isinstance(structure, str) else structure
    assert mol is not None, structure
    smiles = Chem.MolToSmiles(mol)
    order = tuple(mol.GetPropsAsDict(True, True)["_smilesAtomOutputOrder"])
    return SimpleNamespace(mol=mol, smiles=smiles, output_order=order)


def site(atom: int, kind: str, core: tuple[int, ...] = ()) -> SimpleNamespace:
    return SimpleNamespace(atom=atom, kind=kind, core=core or (atom,))


def form(smiles: str, *sites: SimpleNamespace) -> str:
    """The form with every one of the sites in its charged state."""
    return form_smiles(parent_of(smiles), sites, [one.kind == "base" for one in sites])


def canonical(smiles: str) -> str:
    mol = Chem.MolFromSmiles(smiles)
    assert mol is not None, f"{smiles} does not parse"
    return Chem.MolToSmiles(mol)


def skeleton(mol: Chem.Mol) -> str:
    """Atoms and which is bonded to which, without hydrogen, bond orders or charges."""
    bare = Chem.RWMol()
    for atom in mol.GetAtoms():
        plain = Chem.Atom(atom.GetAtomicNum())
        plain.SetIsotope(atom.GetIsotope())
        plain.SetNoImplicit(True)
        bare.AddAtom(plain)
    for bond in mol.GetBonds():
        bare.AddBond(bond.GetBeginAtomIdx(), bond.GetEndAtomIdx(), Chem.BondType.SINGLE)
    return Chem.MolToSmiles(bare)


def outline(mol: Chem.Mol) -> tuple[list[tuple[int, int, int]], int]:
    """A quick stand-in for the skeleton: elements, isotopes, degrees, and how many stereocentres."""
    atoms = list(mol.GetAtoms())
    centres = sum(a.GetSymbol() == "C" and a.GetChiralTag() != Chem.ChiralType.CHI_UNSPECIFIED for a in atoms)
    return sorted((a.GetAtomicNum(), a.GetIsotope(), a.GetDegree()) for a in atoms), centres


def hydrogens(mol: Chem.Mol) -> int:
    return sum(atom.GetTotalNumHs() for atom in mol.GetAtoms())


@pytest.mark.parametrize(
    ("what", "parent", "atom", "kind", "expected"),
    [
        ("ammonia", "N", 0, "base", "[NH4+]"),
        ("primary amine", "CCN", 2, "base", "CC[NH3+]"),
        ("tertiary amine", "CN(C)C", 1, "base", "C[NH+](C)C"),
        ("ring amine, closure digit beside the atom", "C1CCNCC1", 3, "base", "C1CC[NH2+]CC1"),
        ("aniline", "Nc1ccccc1", 0, "base", "[NH3+]c1ccccc1"),
        ("pyridine", "c1ccncc1", 3, "base", "c1cc[nH+]cc1"),
        ("imidazole", "c1cnc[nH]1", 2, "base", "c1c[nH+]c[nH]1"),
        ("imidazole N-H", "c1cnc[nH]1", 4, "acid", "c1cnc[n-]1"),
        ("imine", "CC(C)=NC", 3, "base", "CC(C)=[NH+]C"),
        ("amidine", "CC(=N)N", 2, "base", "CC(N)=[NH2+]"),
        ("nitrile", "CC#N", 2, "base", "CC#[NH+]"),
        ("amide on oxygen", "CC(N)=O", 3, "base", "CC(N)=[OH+]"),
        ("thioamide on sulfur", "CC(N)=S", 3, "base", "CC(N)=[SH+]"),
        ("pyridone on oxygen", "O=c1cc[nH]cc1", 0, "base", "[OH+]=c1cc[nH]cc1"),
        ("aromatic N-oxide", "[O-][n+]1ccccc1", 0, "base", "O[n+]1ccccc1"),
        ("aliphatic N-oxide", "C[N+](C)(C)[O-]", 4, "base", "C[N+](C)(C)O"),
        ("sulfoximine", "CS(C)(=N)=O", 3, "base", "CS(C)(=[NH2+])=O"),
        ("isonitrile on carbon", "C[N+]#[C-]", 2, "base", "C#[N+]C"),
        ("phosphine", "CP(C)C", 1, "base", "C[PH+](C)C"),
        ("carboxylic acid", "CC(=O)O", 3, "acid", "CC(=O)[O-]"),
        ("thiol", "CCS", 2, "acid", "CC[S-]"),
        ("sulfonamide", "CS(N)(=O)=O", 2, "acid", "CS([NH-])(=O)=O"),
        ("imide", "O=C1CCC(=O)N1", 6, "acid", "O=C1CCC(=O)[N-]1"),
        ("1,3-diketone", "CC(=O)CC(C)=O", 3, "acid", "CC(=O)[CH-]C(C)=O"),
        ("beside a fixed cation", "C[n+]1cccc(O)c1", 6, "acid", "C[n+]1cccc([O-])c1"),
        ("boronic acid takes hydroxide", "OB(O)c1ccccc1", 1, "acid", "O[B-](O)(O)c1ccccc1"),
    ],
)
def test_the_charged_form_of(what, parent, atom, kind, expected):
    assert canonical(form(parent, site(atom, kind))) == canonical(expected), what


@pytest.mark.parametrize(
    ("what", "parent", "atom", "kind", "expected"),
    [
        ("labelled amine", "C[15NH2]", 1, "base", "C[15NH3+]"),
        ("stereocentre beside the amine", "C[C@H](N)C(=O)O", 2, "base", "C[C@H]([NH3+])C(=O)O"),
        ("oxime double bond", "C/C(CC)=N/O", 4, "base", "C/C(CC)=[NH+]/O"),
        ("atom number kept", "C[NH2:3]", 1, "base", "C[NH3+:3]"),
        ("deuterated amine", "[2H]N(C)C", 1, "base", "[2H][NH+](C)C"),
        ("deuteron given up", "[2H]Oc1ccccc1", 1, "acid", "[O-]c1ccccc1"),
        ("one of two deuterons given up", "[2H]C([2H])(C(C)=O)C(C)=O", 1, "acid", "[2H][C-](C(C)=O)C(C)=O"),
        ("carbanion has no stereo", "CC(=O)[C@H](F)C(C)=O", 3, "acid", "CC(=O)[C-](F)C(C)=O"),
    ],
)
def test_isotopes_and_stereo_in(what, parent, atom, kind, expected):
    assert canonical(form(parent, site(atom, kind))) == canonical(expected), what


@pytest.mark.parametrize(
    ("what", "parent", "atom", "core", "expected"),
    [
        ("enamine", "CC=CN(C)C", 1, (1, 2, 3), "CCC=[N+](C)C"),
        ("dienamine", "CC=CC=CN(C)C", 1, (1, 2, 3, 4, 5), "CCC=CC=[N+](C)C"),
        ("indole at C3", "c1ccc2[nH]ccc2c1", 6, (6, 5, 4), "C1=[NH+]c2ccccc2C1"),
        ("pyrrole at C2", "c1cc[nH]c1", 2, (2, 3), "C1=CC[NH+]=C1"),
        ("indolizine at C3", "c1ccn2cccc2c1", 4, (4, 3), "C1=Cc2cccc[n+]2C1"),
        (
            "stereo elsewhere stays",
            "C/C=C/c1ccc2c(c1)c(C)cn2C",
            9,
            (9, 11, 12),
            "C/C=C/c1ccc2c(c1)C(C)C=[N+]2C",
        ),
        ("the nitrogen of the core, not a nearer one", "CNC=CC=CN(C)C", 3, (3, 4, 5, 6), None),
    ],
)
def test_a_proton_on_carbon_makes_an_iminium(what, parent, atom, core, expected):
    found = form(parent, site(atom, "base", core))
    if expected is not None:
        assert canonical(found) == canonical(expected), what
    mol = Chem.MolFromSmiles(found)
    assert Chem.GetFormalCharge(mol) == 1
    assert [a.GetSymbol() for a in mol.GetAtoms() if a.GetFormalCharge()] == ["N"]
    assert skeleton(mol) == skeleton(Chem.MolFromSmiles(parent))


@pytest.mark.parametrize("drawn", ["C[C@@H]1C[N@]1C", "C[C@@H]1C[N@@]1C", "C[N@]1C[C@@H]1C"])
def test_the_proton_takes_the_place_of_the_lone_pair_at_a_nitrogen_stereocentre(drawn):
    # lone pair and H both rank last, so the descriptors stay
    def descriptors(mol):
        found = Chem.FindMolChiralCenters(mol, useLegacyImplementation=False)
        return sorted((mol.GetAtomWithIdx(atom).GetSymbol(), label) for atom, label in found)

    mol = Chem.MolFromSmiles(drawn)
    nitrogen = next(atom.GetIdx() for atom in mol.GetAtoms() if atom.GetSymbol() == "N")
    cation = Chem.MolFromSmiles(form(drawn, site(nitrogen, "base")))
    assert [symbol for symbol, _ in descriptors(mol)] == ["C", "N"]
    assert descriptors(cation) == descriptors(mol)


def test_a_proton_on_a_pyrrole_type_nitrogen_ends_its_aromaticity():
    assert canonical(form("c1ccc2c(c1)[nH]c1ccccc12", site(6, "base"))) == "c1ccc2c(c1)[NH2+]c1ccccc1-2"


def test_nothing_changed_gives_the_parent_string_itself():
    glycine = parent_of("NCC(=O)O")
    sites = (site(0, "base"), site(4, "acid"))
    assert form_smiles(glycine, sites, (False, True)) is glycine.smiles


def test_all_four_states_of_glycine():
    glycine = parent_of("NCC(=O)O")
    sites = (site(0, "base"), site(4, "acid"))
    states = {
        (True, True): "[NH3+]CC(=O)O",
        (True, False): "[NH3+]CC(=O)[O-]",
        (False, True): "NCC(=O)O",
        (False, False): "NCC(=O)[O-]",
    }
    assert {state: form_smiles(glycine, sites, state) for state in states} == states


def test_several_protons_at_once():
    triazine = form("Nc1ncnc(N)n1", site(2, "base"), site(4, "base"))
    assert canonical(triazine) == canonical("Nc1[nH+]c[nH+]c(N)n1")
    edta = "OC(=O)CN(CC(=O)O)CCN(CC(=O)O)CC(=O)O"
    acids = [site(m[0], "acid") for m in parent_of(edta).mol.GetSubstructMatches(Chem.MolFromSmarts("[OH]"))]
    amines = [site(m[0], "base") for m in parent_of(edta).mol.GetSubstructMatches(Chem.MolFromSmarts("N"))]
    mol = Chem.MolFromSmiles(form(edta, *acids, *amines))
    assert Chem.GetFormalCharge(mol) == -2
    # an atom that takes one proton as a base and gives another as an acid is as it was
    assert canonical(form("CC(N)=O", site(2, "base"), site(2, "acid"))) == "CC(N)=O"


def test_a_carbon_site_beside_other_charges():
    tryptamine = "NCCc1c[nH]c2ccccc12"
    found = form(tryptamine, site(0, "base"), site(3, "base", (3, 4, 5)))
    assert canonical(found) == canonical("[NH3+]CCC1C=[NH+]c2ccccc12")


@pytest.mark.parametrize(
    ("parent", "atom", "kind"),
    [("CC(C)=O", 3, "acid"), ("CN(C)C", 1, "acid"), ("CC(C)=O", 1, "base"), ("CC", 0, "base")],
)
def test_a_site_that_cannot_react_is_an_error(parent, atom, kind):
    with pytest.raises(ValueError, match=r"atom|carbon"):
        form(parent, site(atom, kind))


def drug_like() -> list[str]:
    package = pytest.importorskip("B3DB", reason="list of drug-like structures (qc-b3db) not installed")
    table = Path(package.__file__).with_name("B3DB_classification.tsv")
    with table.open(encoding="utf-8") as lines:
        return [row["SMILES"] for row in csv.DictReader(lines, delimiter="\t")]


def test_every_nitrogen_of_a_list_of_drugs_takes_a_proton_and_every_hetero_hydrogen_leaves():
    """7,807 structures of qc-b3db (CC0): each form parses, with the charge, hydrogens and skeleton due."""
    wrong = []
    tried = 0
    for smiles in drug_like():
        mol = Chem.MolFromSmiles(smiles)
        if mol is None:
            continue
        parent = parent_of(mol)
        charge, count, frame = Chem.GetFormalCharge(mol), hydrogens(mol), outline(mol)
        sites = []
        for atom in mol.GetAtoms():
            if atom.GetSymbol() == "N" and atom.GetFormalCharge() == 0 and atom.GetTotalValence() == 3:
                sites.append(site(atom.GetIdx(), "base"))
            if atom.GetSymbol() in "NOS" and atom.GetTotalNumHs():
                sites.append(site(atom.GetIdx(), "acid"))
        for one in sites:
            tried += 1
            change = 1 if one.kind == "base" else -1
            text = form_smiles(parent, (one,), (one.kind == "base",))
            found = Chem.MolFromSmiles(text)
            if (
                found is None
                or Chem.GetFormalCharge(found) != charge + change
                or hydrogens(found) != count + change
                or outline(found) != frame
            ):
                wrong.append((parent.smiles, one.atom, one.kind, text))
    assert tried > 20_000
    assert not wrong
