"""From text to parent: one compound gives one parent, however it is spelled, drawn, salted or protonated."""

import csv
import random
import re
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from rdkit import Chem

from basirank import structures, tables
from basirank.structures import Refusal, read_parent
from basirank.tables import read_table

DATA = Path(__file__).resolve().parent.parent / "data"


def parent(text: str) -> str:
    return read_parent(text).smiles


def canonical(text: str) -> str:
    return Chem.MolToSmiles(Chem.MolFromSmiles(text))


# (drawing, the same compound drawn otherwise)
TAUTOMER_PAIRS = [
    # azoles
    ("Cc1c[nH]cn1", "Cc1cnc[nH]1"),
    ("Cc1nc[nH]c1C(=O)O", "Cc1[nH]cnc1C(=O)O"),
    ("O=[N+]([O-])c1c[nH]cn1", "O=[N+]([O-])c1cnc[nH]1"),
    ("NCCc1c[nH]cn1", "NCCc1cnc[nH]1"),
    ("Cc1cc[nH]n1", "Cc1ccn[nH]1"),
    ("Cc1n[nH]c(-c2ccccc2)c1C", "Cc1[nH]nc(-c2ccccc2)c1C"),
    ("FC(F)(F)c1cc(C)[nH]n1", "FC(F)(F)c1cc(C)n[nH]1"),
    ("c1ccc2[nH]ncc2c1", "c1ccc2n[nH]cc2c1"),
    ("Clc1ccc2[nH]cnc2c1", "Clc1ccc2nc[nH]c2c1"),
    ("c1ccc2[nH]nnc2c1", "c1ccc2n[nH]nc2c1"),
    ("Cc1ccc2[nH]nnc2c1", "Cc1ccc2nn[nH]c2c1"),
    ("c1cn[nH]n1", "c1c[nH]nn1"),
    ("c1nc[nH]n1", "c1nnc[nH]1"),
    ("Nc1nc[nH]n1", "Nc1ncn[nH]1"),
    ("Nc1nc[nH]n1", "Nc1nnc[nH]1"),
    ("c1nnn[nH]1", "c1nn[nH]n1"),
    ("Cc1nnn[nH]1", "Cc1nn[nH]n1"),
    ("Oc1cc[nH]n1", "Oc1ccn[nH]1"),
    # purines and kin
    ("Nc1ncnc2[nH]cnc12", "Nc1ncnc2nc[nH]c12"),
    ("Cn1c(=O)c2[nH]cnc2n(C)c1=O", "Cn1c(=O)c2nc[nH]c2n(C)c1=O"),
    ("O=c1[nH]cnc2[nH]cnc12", "Oc1ncnc2nc[nH]c12"),
    ("Nc1nc2[nH]cnc2c(=O)[nH]1", "Nc1nc(O)c2nc[nH]c2n1"),
    ("c1ncc2nc[nH]c2n1", "c1ncc2[nH]cnc2n1"),
    ("S=c1[nH]cnc2[nH]cnc12", "Sc1ncnc2[nH]cnc12"),
    ("Nc1nc2nccnc2c(=O)[nH]1", "Nc1nc(O)c2nccnc2n1"),
    # amidines and guanidines
    ("CC(=N)NC", "CC(N)=NC"),
    ("CNC(=N)N", "CN=C(N)N"),
    ("CNC(=N)NC", "CN=C(N)NC"),
    ("NC1=NCCN1", "N=C1NCCN1"),
    ("NC1=NCCS1", "N=C1NCCS1"),
    ("Clc1cccc(Cl)c1N=C1NCCN1", "Clc1cccc(Cl)c1NC1=NCCN1"),
    ("CC(=O)N=C(N)N", "CC(=O)NC(=N)N"),
    ("N#CN=C(NC)NC", "N#CNC(=NC)NC"),
    ("NS(=O)(=O)N=C(N)N", "NS(=O)(=O)NC(=N)N"),
    ("CN(C)C(=N)NC(=N)N", "CN(C)C(N)=NC(=N)N"),
    ("CC(N)=NO", "CC(=N)NO"),
    ("CC(N)=NN", "CC(=N)NN"),
    ("CSC(=N)NC", "CSC(N)=NC"),
    ("CC1=NCC(C)N1", "CC1=NC(C)CN1"),
    ("C[C@H]1CN=C(C)N[C@@H]1C", "C[C@H]1CNC(C)=N[C@@H]1C"),
    ("CC1=CN=C(NC)NC1", "CC1=CNC(NC)=NC1"),
    ("CN1CC(=O)N=C1N", "CN1CC(=O)NC1=N"),
    # pyridones, pyrimidinones, thiones
    ("O=c1cccc[nH]1", "Oc1ccccn1"),
    ("O=c1cc[nH]cc1", "Oc1ccncc1"),
    ("O=c1cc(O)cc[nH]1", "Oc1cc(O)ccn1"),
    ("O=c1cc(O)cc[nH]1", "O=c1cc[nH]c(O)c1"),
    ("O=c1[nH]cnc2ccccc12", "O=c1nc[nH]c2ccccc12"),
    ("O=c1[nH]cnc2ccccc12", "Oc1ncnc2ccccc12"),
    ("O=c1ncc2ccccc2[nH]1", "O=c1[nH]cc2ccccc2n1"),
    ("O=c1cc[nH]c(=O)[nH]1", "Oc1ccnc(O)n1"),
    ("Nc1cc[nH]c(=O)n1", "Nc1ccnc(=O)[nH]1"),
    ("Nc1cc[nH]c(=O)n1", "N=c1cc[nH]c(=O)[nH]1"),
    ("Nc1nccc(=O)[nH]1", "Nc1nc(=O)cc[nH]1"),
    ("Nc1nccc(=O)[nH]1", "N=c1[nH]ccc(=O)[nH]1"),
    ("O=c1ccnc[nH]1", "O=c1cc[nH]cn1"),
    ("O=C1CC(=O)NC(=O)N1", "Oc1cc(O)nc(O)n1"),
    ("S=c1cccc[nH]1", "Sc1ccccn1"),
    ("S=c1[nH]c2ccccc2[nH]1", "Sc1nc2ccccc2[nH]1"),
    ("Cn1cc[nH]c1=S", "Cn1ccnc1S"),
    ("O=c1[nH]c2ccccc2[nH]1", "Oc1nc2ccccc2[nH]1"),
    ("O=c1[nH]ccs1", "Oc1nccs1"),
    ("O=c1ccc(O)n[nH]1", "O=c1ccc(=O)[nH][nH]1"),
    ("Nc1ccncc1", "N=C1C=CNC=C1"),
    ("Nc1nccs1", "N=C1NC=CS1"),
    ("CC(N)=O", "CC(=N)O"),
    ("CC(N)=S", "CC(=N)S"),
    ("NC(N)=O", "N=C(N)O"),
    ("O=C1CCCN1", "OC1=NCCC1"),
    ("C1=NCCC1", "C1=CCCN1"),
    ("CC(C)=NO", "CC(C)N=O"),
    ("CC=O", "C=CO"),
    ("Oc1cc[nH]n1", "O=c1cc[nH][nH]1"),
    ("Cc1cc(O)no1", "Cc1cc(=O)[nH]o1"),
    ("O=C1Cc2ccccc2N1", "Oc1cc2ccccc2[nH]1"),
    ("O=C1CC(=O)NC(=O)N1", "O=c1cc(O)[nH]c(=O)[nH]1"),
    ("CC/C(N)=N/O", "CCC(=N)NO"),
    ("Nc1cccc[n+]1[O-]", "N=c1ccccn1O"),
    ("O=c1ccccn1O", "Oc1cccc[n+]1[O-]"),
]


@pytest.mark.parametrize("text", sorted({text for pair in TAUTOMER_PAIRS for text in pair}))
def test_a_drawing_with_localised_double_bonds_is_the_same_compound(text):
    mol = Chem.MolFromSmiles(text)
    Chem.Kekulize(mol, clearAromaticFlags=True)
    assert parent(Chem.MolToSmiles(mol, kekuleSmiles=True)) == parent(text)


@pytest.mark.parametrize(("one", "other"), TAUTOMER_PAIRS)
def test_both_drawings_of_a_tautomeric_pair_give_one_parent(one, other):
    assert parent(one) == parent(other)


# Each row of rewrites.csv: a drawing, and the form that rules in water.
ROW_EXAMPLES = {
    "sulfoxide drawn with charges": ("C[S+]([O-])CC", "CCS(C)=O"),
    "sulfone drawn with two charges": ("C[S+2]([O-])([O-])C", "CS(C)(=O)=O"),
    "sulfone drawn with one charge pair": ("C[S+](=O)([O-])C", "CS(C)(=O)=O"),
    "selenoxide drawn with charges": ("C[Se+]([O-])C", "C[Se](C)=O"),
    "thiosulfoxide drawn with charges": ("C[S+]([S-])C", "CS(C)=S"),
    "sulfilimine drawn with charges": ("C[S+](C)[N-]C", "CN=S(C)C"),
    "phosphoryl drawn with charges": ("C[P+]([O-])(C)C", "CP(C)(C)=O"),
    "phosphazene drawn with charges": ("C[P+](C)(C)[N-]C", "CN=P(C)(C)C"),
    "arsine oxide drawn with charges": ("C[As+](C)(C)[O-]", "C[As](C)(C)=O"),
    "carbonyl drawn with charges": ("C[C+]([O-])N", "CC(N)=O"),
    "azide drawn with a triple bond": ("C[N-][N+]#N", "CN=[N+]=[N-]"),
    "diazo drawn with a triple bond": ("C[CH-][N+]#N", "CC=[N+]=[N-]"),
    "nitro drawn with two charge pairs": ("C[N+2]([O-])[O-]", "C[N+](=O)[O-]"),
    "aci-nitro compound": ("CC=[N+]([O-])O", "CC[N+](=O)[O-]"),
    "1-hydroxy-2-pyridone drawn as N-oxide": ("[O-][n+]1ccccc1O", "O=c1ccccn1O"),
    "boronate drawn with an extra hydroxide": ("O[B-](O)(O)c1ccccc1.[Na+]", "OB(O)c1ccccc1"),
    "amine borane or borate adduct of water": ("C[B-](O)(O)[OH2+]", "CB(O)O"),
    "2-hydroxyazine or azole": ("Oc1ncccn1", "O=c1nccc[nH]1"),
    "4-hydroxyazine": ("Oc1ccnc2ccccc12", "O=c1cc[nH]c2ccccc12"),
    "2-hydroxy-4-pyridone": ("O=c1cc[nH]c(O)c1", "O=c1cc(O)cc[nH]1"),
    "maleic hydrazide drawn as dione": ("O=c1ccc(=O)[nH][nH]1", "O=c1ccc(O)n[nH]1"),
    "3-hydroxyisoxazole or -pyrazole drawn as oxo form": ("O=c1cc(CN)o[nH]1", "NCc1cc(O)no1"),
    "barbituric acid drawn as enol": ("O=c1cc(O)[nH]c(=O)[nH]1", "O=C1CC(=O)NC(=O)N1"),
    "2-hydroxyindole": ("Oc1cc2ccccc2[nH]1", "O=C1Cc2ccccc2N1"),
    "5-hydroxypyrazole": ("Cc1cc(O)n(-c2ccccc2)n1", "Cc1cc(=O)n(-c2ccccc2)[nH]1"),
    "4-hydroxyazole with O or S": ("Sc1cocn1", None),
    "imidic or thioimidic acid": ("COC(O)=NC", "CNC(=O)OC"),
    "enol of an amide or ester": ("C=C(O)N(C)C", "CC(=O)N(C)C"),
    "dienol": ("OC=CC=C", "CC=CC=O"),
    "simple enol": ("OC1=CCCCC1", "O=C1CCCCC1"),
    "C-nitroso with alpha hydrogen": ("O=NC1CCCCC1", "ON=C1CCCCC1"),
    "ring imine beside N-H away from C=O": ("N=c1[nH]ccc(=O)[nH]1", "Nc1nccc(=O)[nH]1"),
    "ring imine beside N-H": ("CN=c1cccc[nH]1", "CNc1ccccn1"),
    "ring imine across from N-H": ("N=c1cc[nH]c2ccccc12", "Nc1ccnc2ccccc12"),
    "2-amino N-oxide drawn as N-hydroxy imine": (
        "N=c1cc(N2CCCCC2)nc(N)n1O",
        "Nc1cc(N2CCCCC2)nc(N)[n+]1[O-]",
    ),
    "cyclic N-H enamine": ("C1=CNCCC1", "C1=NCCCC1"),
    "azolo-azine with hydrogen on the azine beside the fusion, to the near nitrogen": (
        "c1nc2cnc[nH]c-2n1",
        "c1ncc2nc[nH]c2n1",
    ),
    "azolo-azine with hydrogen on the azine beside the fusion, to the far nitrogen": (
        "c1ncc2cnnc-2[nH]1",
        "c1ncc2cn[nH]c2n1",
    ),
    "azolo-azine with hydrogen on the azine away from the fusion, to the near nitrogen": (
        "c1nc2c[nH]cnc-2n1",
        "c1ncc2nc[nH]c2n1",
    ),
    "azolo-azine with hydrogen on the azine away from the fusion, to the far nitrogen": (
        "c1nc2nncc-2c[nH]1",
        "c1ncc2cn[nH]c2n1",
    ),
    "lactam beside a fused ring": ("O=c1[nH]cc2ccccc2n1", "O=c1ncc2ccccc2[nH]1"),
    "lactam away from an amino carbon": ("Nc1ccnc(=O)[nH]1", "Nc1cc[nH]c(=O)n1"),
    "lactam": ("Nc1nc(=O)cc[nH]1", "Nc1nccc(=O)[nH]1"),
    "indazole and benzotriazole": ("c1ccc2n[nH]cc2c1", "c1ccc2[nH]ncc2c1"),
    "1,2,3-triazole": ("c1c[nH]nn1", "c1cn[nH]n1"),
    "tetrazole": ("Cc1nn[nH]n1", "Cc1nnn[nH]1"),
    "1,2,4-triazole": ("c1nnc[nH]1", "c1nc[nH]n1"),
    "purine 9H": ("Nc1ncnc2nc[nH]c12", "Nc1ncnc2[nH]cnc12"),
    "xanthine 7H": ("Cn1c(=O)c2nc[nH]c2n(C)c1=O", "Cn1c(=O)c2[nH]cnc2n(C)c1=O"),
    "azole beside C-H": ("Cc1cnc[nH]1", "Cc1c[nH]cn1"),
    "azole beside C-H of either kind": ("Cc1cnc(C)[nH]1", "Cc1c[nH]c(C)n1"),
    "nitro": ("CNC(=N)N[N+](=O)[O-]", "CNC(N)=N[N+](=O)[O-]"),
    "cyano": ("CNC(=NC)NC#N", "CNC(=NC#N)NC"),
    "sulfonyl": ("CS(=O)(=O)NC(=N)N", "CS(=O)(=O)N=C(N)N"),
    "acyl": ("CC(=O)NC(=N)N", "CC(=O)N=C(N)N"),
    "N or O on nitrogen": ("CC(=N)NO", "CC(N)=NO"),
    "heteroaryl": ("N=C(N)Nc1ccccn1", "NC(N)=Nc1ccccn1"),
    "aryl": ("CC(=N)Nc1ccccc1", "CC(N)=Nc1ccccc1"),
    "in the ring": ("N=C1NCCN1", "NC1=NCCN1"),
    "unsubstituted": ("CCN=C(N)N", "CCNC(=N)N"),
    "not between two N-C=N units": ("CN(C)C(=NC(=NC)N(C)C)NC", None),
}


def test_every_row_of_the_table_has_an_example():
    assert {row["name"] for row in read_table("rewrites.csv")} == set(ROW_EXAMPLES)


@pytest.mark.parametrize(("drawn", "expected"), [e for e in ROW_EXAMPLES.values() if e[1]])
def test_the_ruling_form_is_the_parent(drawn, expected):
    assert parent(drawn) == canonical(expected)


@pytest.mark.parametrize("drawn", [drawn for drawn, _ in ROW_EXAMPLES.values()])
def test_reading_a_parent_again_changes_nothing(drawn):
    once = parent(drawn)
    assert parent(once) == once


LEFT_ALONE = [
    "N=c1ccn(C)cc1",
    "Cn1ccccc1=O",
    "Cn1ccccc1=N",
    "Oc1cccnc1",
    "Oc1cccc2cccnc12",
    "Oc1ccon1",
    "Oc1ccccc1",
    "O=C1OC(C(O)CO)C(O)=C1O",
    "CC1=C(C(=O)OC)CC(C(=O)OC)=C(C)N1",
    "O=C1C=C(N)CCC1",
    "O=c1cccccc1O",
    "O=c1oc2ccccc2cc1O",
    "CN1C=CCC1",
    "C[N+](C)(C)C",
    "C[N+](C)(C)[O-]",
    "[O-][n+]1ccccc1",
    "CC[N+](=O)[O-]",
    "CN=[N+]=[N-]",
    "[C-]#[N+]C",
    "C[n+]1ccccc1/C=N/O",
    "CN(C)c1ccc(C=O)cc1",
    "F/C=C/CN",
    "C[C@H](N)C(=O)O",
    "[2H]C([2H])([2H])N",
    "[13CH3]N",
]


@pytest.mark.parametrize("text", LEFT_ALONE)
def test_a_sound_drawing_is_left_alone(text):
    assert parent(text) == canonical(text)


CHARGES = [
    ("C[NH3+]", "CN"),
    ("[NH3+]CC(=O)[O-]", "NCC(=O)O"),
    ("c1cc[nH+]cc1", "c1ccncc1"),
    ("C[n+]1ccc(N)cc1", "Cn1ccc(=N)cc1"),
    ("C[n+]1ccccc1N", "Cn1ccccc1=N"),
    ("C[n+]1ccc(O)cc1", "Cn1ccc(=O)cc1"),
    ("C[n+]1ccc([O-])cc1", "Cn1ccc(=O)cc1"),
    ("C[n+]1ccc(S)cc1", "Cn1ccc(=S)cc1"),
    ("C[n+]1c2ccccc2c(N)c2ccccc21", "Cn1c2ccccc2c(=N)c2ccccc21"),
    ("Cn1cc[n+](C)c1N", "Cn1ccn(C)c1=N"),
    ("C[n+]1ccsc1N", "Cn1ccsc1=N"),
    ("CN(C)C(=[N+](C)C)N", "CN(C)C(=N)N(C)C"),
    ("NC(N)=[NH2+]", "N=C(N)N"),
    ("CC(O)=[NH2+]", "CC(N)=O"),
    ("C[N+](C)(C)CC(=O)[O-]", "C[N+](C)(C)CC(=O)O"),
    ("C[n+]1cccc(C(=O)[O-])c1", "C[n+]1cccc(C(=O)O)c1"),
    ("CN(C)c1ccc2nc3ccc(N(C)C)cc3[s+]c2c1", "CN(C)c1ccc2nc3ccc(N(C)C)cc3[s+]c2c1"),
    ("c1nnn[n-]1", "c1nnn[nH]1"),
    ("CS(=O)(=O)[N-]c1ccccn1", "CS(=O)(=O)Nc1ccccn1"),
    ("CC(=O)[CH-]C(C)=O", "CC(=O)CC(C)=O"),
    ("[O-]c1ccccc1", "Oc1ccccc1"),
    ("C[C@H]([NH3+])C(=O)[O-]", "C[C@H](N)C(=O)O"),
    ("C[N+](C)([O-])CC[NH3+]", "C[N+](C)([O-])CCN"),
]


@pytest.mark.parametrize(("drawn", "expected"), CHARGES)
def test_a_charge_that_a_proton_can_quench_is_quenched(drawn, expected):
    assert parent(drawn) == canonical(expected)


SALTS = [
    ("CN.Cc1ccc(S(=O)(=O)O)cc1", "CN"),
    ("CN(C)C(=N)NC(=N)N.O=C(O)c1cc2ccccc2c(Cc2c(O)c(C(=O)O)cc3ccccc23)c1O", "CN(C)C(=N)NC(=N)N"),
    ("O=C(O)Cc1ccccc1Nc1c(Cl)cccc1Cl.CCNCC", "O=C(O)Cc1ccccc1Nc1c(Cl)cccc1Cl"),
    ("CC(C)Cc1ccc(C(C)C(=O)O)cc1.NCCCC[C@H](N)C(=O)O", "CC(C)Cc1ccc(C(C)C(=O)O)cc1"),
    ("NCCCC[C@H](N)C(=O)O.Cl", "NCCCC[C@H](N)C(=O)O"),
    ("OCC([NH3+])(CO)CO.[Cl-]", "NC(CO)(CO)CO"),
    ("CC(=O)[O-].[Na+]", "CC(=O)O"),
    ("CC(=O)O[Na]", "CC(=O)O"),
    ("[NH4+].[Cl-]", "N"),
    ("C1CNCCN1.O=C(O)CC(O)(CC(=O)O)C(=O)O", "C1CNCCN1"),
    ("C[N+](C)(C)CCO.[Cl-]", "C[N+](C)(C)CCO"),
    ("c1ccncc1.Cc1ccc(S(=O)(=O)O)cc1", "c1ccncc1"),
    ("CNC(C)Cc1ccccc1.Cl.O.CO", "CNC(C)Cc1ccccc1"),
    ("CNC(C)Cc1ccccc1.[2H]O[2H]", "CNC(C)Cc1ccccc1"),
    ("OC(=O)[C@H](O)[C@@H](O)C(=O)O.CCN(CC)CCNC(=O)c1ccccc1", "CCN(CC)CCNC(=O)c1ccccc1"),
]


@pytest.mark.parametrize(("salt", "expected"), SALTS)
def test_the_compound_of_a_salt_is_kept(salt, expected):
    found = read_parent(salt)
    assert found.smiles == canonical(expected)
    assert not found.notes
    assert parent(".".join(reversed(salt.split(".")))) == found.smiles


def test_another_compound_left_out_is_said():
    found = read_parent("CN(C)CCOC(c1ccccc1)c1ccccc1.CCOC(=O)CCc1ccccc1")
    assert found.smiles == canonical("CN(C)CCOC(c1ccccc1)c1ccccc1")
    assert any("left out" in note for note in found.notes)


def test_of_two_equal_components_the_first_written_is_kept():
    assert read_parent("Cl.CCCCCN.CCCCCN").atom_index[0] == 1


def test_counterion_table_is_thorough():
    rows = read_table("counterions.csv")
    assert len(rows) >= 150
    assert {row["kind"] for row in rows} == {"acid", "base", "solvent", "metal"}
    assert all(row["source"] for row in rows)


@pytest.mark.parametrize(
    ("text", "atoms"),
    [
        ("CN", (0, 1)),
        ("[Cl-].C[NH3+]", (1, 2)),
        ("[H]N([H])C", (1, 3)),
        ("[H+].[Cl-].CN", (2, 3)),
        ("[2H]N([H])C", (0, 1, 3)),
        ("[H][N+]([H])([H])C.[Cl-]", (1, 4)),
        ("C[CH2:3]N", (0, 1, 2)),
    ],
)
def test_every_written_atom_is_counted(text, atoms):
    assert read_parent(text).atom_index == atoms


def test_the_nitrogen_drawn_without_hydrogen_keeps_its_number():
    # 5-methylimidazole, drawn with N-H on atom 5: atom 3 was drawn as the basic nitrogen.
    found = read_parent("Cc1cnc[nH]1")
    basic = next(a.GetIdx() for a in found.mol.GetAtoms() if a.GetSymbol() == "N" and not a.GetTotalNumHs())
    assert found.atom_index[basic] == 3
    # N-methylacetamidine drawn with the double bond to N-methyl (atom 3).
    found = read_parent("CC(N)=NC")
    basic = next(
        a.GetIdx()
        for a in found.mol.GetAtoms()
        if a.GetSymbol() == "N" and a.GetTotalNumHs() == 1 and a.GetDegree() == 1
    )
    assert found.atom_index[basic] == 3


def test_a_molecule_is_numbered_as_it_is_and_never_changed():
    mol = Chem.AddHs(Chem.MolFromSmiles("Oc1ccncc1"))
    before = mol.ToBinary()
    found = read_parent(mol)
    assert found.smiles == "O=c1cc[nH]cc1"
    assert found.atom_index == tuple(range(7))
    assert mol.ToBinary() == before


def test_output_order_names_the_atoms_of_the_text():
    found = read_parent("[Na+].[O-]C(=O)c1ccc(NC)cc1")
    again = Chem.MolFromSmiles(found.smiles)
    assert [found.mol.GetAtomWithIdx(i).GetSymbol() for i in found.output_order] == [
        atom.GetSymbol() for atom in again.GetAtoms()
    ]


def test_where_no_stereo_is_written_the_parent_is_that_of_the_whole_reading(monkeypatch):
    """Stereo isn't looked for where none is written: nothing is lost, and none is made up."""
    with (DATA / "class_examples.csv").open(encoding="utf-8", newline="") as handle:
        examples = [row["smiles"] for row in csv.DictReader(handle)]
    unmarked = [
        "CC=NO", "CC(O)C(N)C=CC", "C1CCCC=CCCN1", "C[13CH](N)CC", "[2H]C(N)CC", "C[N+](CC)(CCC)CCCC", "CN(=O)=O",
        "C[#1]", "CC(F)(Cl)N", "O=S(C)CCN", "CC1CC(N)C1", "Cc1cccc(N)c1-c1c(C)cccc1O", "NC=C=CC",
    ]  # fmt: skip
    read = [text for text in [*examples, *unmarked] if not set("@/\\") & set(text)]
    assert len(read) > 250
    short = [read_parent(text) for text in read]
    monkeypatch.setattr(structures, "_STEREO_MARK", re.compile(""))  # found in every text
    for text, found in zip(read, short, strict=True):
        whole = read_parent(text)
        assert (found.smiles, found.output_order) == (whole.smiles, whole.output_order), text


def test_only_the_first_word_is_the_structure():
    assert parent("  CN methylamine\n") == "CN"


@pytest.mark.parametrize(
    ("text", "reason"),
    [
        ("", "empty"),
        ("   ", "empty"),
        ("C" * 50_001, "50,000"),
        ("C" * 1_001, "1,000 heavy atoms"),
        ("c1ccccc", "cannot be read as SMILES"),
        ("CC(N", "parentheses"),
        ("C[NH3+", "brackets"),
        ("hello", "cannot be read as SMILES"),
        ("C(C)(C)(C)(C)C", "valence of C (atom 0)"),
        ("CN(C)(C)C", "valence of N (atom 1)"),
        ("c1cccc1", "Kekule"),
        ("[Na+].[Cl-]", "no organic part"),
        ("O", "no organic part"),
        ("[Na+].[O-][N+](=O)[O-]", "no organic part"),
        ("OS(=O)(=O)O", "no organic part"),
        ("CC*", "dummy"),
        ("[1*]CN", "dummy"),
        ("C[CH2]", "radical"),
        ("CC(C)(C)N([O])C", "radical"),
        ("N[Pt](N)(Cl)Cl", "metal"),
        ("C[Sn](C)(C)C", "metal"),
        ("[Fe+2].c1cc[cH-]c1.c1cc[cH-]c1", "metal"),
        ("CN>>CNC", "reaction"),
    ],
)
def test_a_refusal_gives_a_plain_reason(text, reason):
    with pytest.raises(Refusal, match=reason.replace("(", r"\(").replace(")", r"\)")):
        read_parent(text)


@pytest.mark.parametrize("text", ["N", "NN", "NO", "CN"])
def test_small_nitrogen_compounds_are_compounds(text):
    assert parent(text) == text


def test_neither_text_nor_molecule_is_refused():
    with pytest.raises(Refusal):
        read_parent(None)  # type: ignore[arg-type]
    with pytest.raises(Refusal, match="query"):
        read_parent(Chem.MolFromSmarts("[C,N]C"))
    with pytest.raises(Refusal, match="empty"):
        read_parent(Chem.Mol())


@pytest.mark.parametrize(
    ("text", "word"),
    [
        ("c1ncc2nccnc2n1", "pteridine"),
        ("c1ccc2ncncc2c1", "quinazoline"),
        ("CN1CCOC1c1ccccc1", "oxazolidine"),
        ("CN1C(O)C=Cc2ccccc21", "pseudobase"),
        ("CC=NC", "aldimine"),
    ],
)
def test_protonation_that_is_not_simple_carries_a_caution(text, word):
    assert any(word in note for note in read_parent(text).notes)


DRUGS = [
    "CN1CCC[C@H]1c1cccnc1",
    "CC(C)NCC(O)COc1cccc2ccccc12",
    "CNC(=NC#N)NCCSCc1nc[nH]c1C",
    "Clc1cccc(Cl)c1N=C1NCCN1",
    "Nc1nc2c(ncn2COCCO)c(=O)[nH]1",
    "N[C@@H](Cc1c[nH]cn1)C(=O)O",
    "CN(C)C(=N)NC(=N)N",
    "NC(N)=NCCC[C@H](N)C(=O)O",
    "CC1=NCC(O)CN1",
    "Cc1cnc(C)c(O)n1",
    "COc1ccc2[nH]c(S(=O)Cc3ncc(C)c(OC)c3C)nc2c1",
    "CCCCc1nc(Cl)c(CO)n1Cc1ccc(-c2ccccc2-c2nn[nH]n2)cc1",
    "Cc1c2cc[n+](C)cc2cc2c1[nH]c1ccccc12",
    "C[N+](C)(C)CC(O)CC(=O)[O-]",
    "CC[C@H]1OC(=O)[C@H](C)[C@@H]1N=C(N)N",
    "C/C=C/CN1C=NC(=N)C(C)=C1O",
    "OC1=NC(=O)C(CC)(c2ccccc2)C(O)=N1",
]


@settings(max_examples=150, deadline=None)
@given(st.sampled_from(DRUGS), st.integers(0, 2**31 - 1))
def test_spelling_and_atom_order_change_nothing(drug, seed):
    mol = Chem.MolFromSmiles(drug)
    order = list(range(mol.GetNumAtoms()))
    random.Random(seed).shuffle(order)
    shuffled = Chem.RenumberAtoms(mol, order)
    spelled = Chem.MolToSmiles(shuffled, canonical=False)
    expected = read_parent(mol)
    found = read_parent(shuffled)
    assert found.smiles == expected.smiles == parent(spelled) == parent(expected.smiles)
    # The atom that stands at each place of the text is the same atom of the input, or one equivalent to it.
    ranks = list(Chem.CanonicalRankAtoms(mol, breakTies=False))
    parent_ranks = list(Chem.CanonicalRankAtoms(expected.mol, breakTies=False))
    by_rank: dict[int, set[int]] = {}
    for atom, drawn in enumerate(expected.atom_index):
        by_rank.setdefault(parent_ranks[atom], set()).add(ranks[drawn])
    for place, atom in zip(expected.output_order, found.output_order, strict=True):
        assert ranks[order[found.atom_index[atom]]] in by_rank[parent_ranks[place]]


def _protonated(mol: Chem.Mol) -> str:
    """Aliphatic amines as ammonium, carboxylic acids as carboxylate."""
    edited = Chem.RWMol(mol)
    amine = Chem.MolFromSmarts("[NX3;+0;!$(N-[!#6]);!$(N-[#6]=,:*);!$(N-C#*)]")
    for (nitrogen,) in edited.GetSubstructMatches(amine):
        atom = edited.GetAtomWithIdx(nitrogen)
        atom.SetNumExplicitHs(atom.GetTotalNumHs() + 1)
        atom.SetNoImplicit(True)
        atom.SetFormalCharge(1)
    for match in edited.GetSubstructMatches(Chem.MolFromSmarts("[CX3](=O)[OX2H1]")):
        edited.GetAtomWithIdx(match[2]).SetFormalCharge(-1)
    Chem.SanitizeMol(edited)
    return Chem.MolToSmiles(edited)


@pytest.mark.parametrize("drug", DRUGS)
@pytest.mark.parametrize("salt", ["{}", "Cl.{}", "{}.[Na+].[Br-]", "O.{}.O=C(O)C=CC(=O)O"])
def test_salt_form_and_drawn_charge_change_nothing(drug, salt):
    mol = Chem.MolFromSmiles(drug)
    assert parent(salt.format(drug)) == parent(drug)
    assert parent(salt.format(_protonated(mol))) == parent(drug)


@settings(max_examples=60, deadline=None)
@given(st.text(alphabet="CNOcn1()=[]+-H.#", max_size=30))
def test_any_text_is_a_parent_or_a_refusal(text):
    try:
        found = read_parent(text)
    except Refusal as refusal:
        assert str(refusal)
    else:
        assert len(found.atom_index) == found.mol.GetNumAtoms() == len(found.output_order)


def test_a_table_row_of_the_wrong_length_names_file_and_line(monkeypatch):
    monkeypatch.setattr(tables, "_text", lambda name: "# remark\na,b\n1,2\n1,2,3\n")
    with pytest.raises(ValueError, match=r"wrong_length\.csv, line 4: 3 cells where the header has 2"):
        read_table("wrong_length.csv")


@pytest.mark.parametrize("name", ["counterions.csv", "rewrites.csv", "cautions.csv"])
def test_every_pattern_of_the_tables_can_be_read_and_has_a_source(name):
    for row in read_table(name):
        assert row["source"]
        if "smarts" in row:
            assert Chem.MolFromSmarts(row["smarts"]) is not None
            assert not row["cheap_test"] or Chem.MolFromSmarts(row["cheap_test"]) is not None
        else:
            assert Chem.MolFromSmiles(row["smiles"]) is not None


@pytest.mark.parametrize("text", ["[NH4+]", "[NH2-]", "[NH4+].[Cl-]", "[Na][NH2]"])
def test_an_ion_of_ammonia_is_ammonia(text):
    assert read_parent(text).smiles == "N"


@pytest.mark.parametrize("text", ["CC(=O[Na+])C", "CCN1CCCC1=O[Na+]", "[Na+]Clc1ccccc1"])
def test_a_bond_to_sodium_that_leaves_no_sound_ion_is_refused(text):
    with pytest.raises(Refusal, match="no sound structure"):
        read_parent(text)


@pytest.mark.parametrize(
    "smiles", ["N#N", "ClN(Cl)Cl", "O=NO", "FN=NF", "N", "NN", "NO", "NCl", "O", "N#N.N", "S=C=S"]
)
def test_what_holds_no_carbon_gets_one_answer_as_text_and_as_molecule(smiles):
    def answer(structure):
        try:
            return read_parent(structure).smiles
        except Refusal as reason:
            return str(reason)

    assert answer(smiles) == answer(Chem.MolFromSmiles(smiles))
    if smiles in ("N#N", "O"):
        assert answer(smiles) == "no organic part"
    if smiles in ("N", "NN", "NO"):
        assert answer(smiles) == smiles


@pytest.mark.parametrize(
    "structure", ["C[NH127]", "COc1occ2[NH753]c1CCN2", "C[C@H](F)c1c[nH200]cc1", "[H]C[NH130]"]
)
def test_more_hydrogen_than_can_be_counted_is_a_refusal(structure):
    with pytest.raises(Refusal, match="valence of an atom is more than it can be"):
        read_parent(structure)


def test_a_molecule_with_more_hydrogen_than_can_be_counted_is_a_refusal():
    mol = Chem.RWMol(Chem.MolFromSmiles("CN"))
    mol.GetAtomWithIdx(1).SetNumExplicitHs(127)
    with pytest.raises(Refusal, match="valence of an atom is more than it can be"):
        read_parent(mol.GetMol())
