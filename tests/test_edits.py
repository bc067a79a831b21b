"""The table of edits: each makes what it says, near the nitrogen, follows its atoms and leaves the protected ones."""

from __future__ import annotations

import random

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from rdkit import Chem

from basirank.edits import (
    NEW,
    Edit,
    Product,
    Workbench,
    chosen_edits,
    combined,
    edits,
    marked_smiles,
    refused_groups,
)
from basirank.structures import read_parent
from basirank.tables import read_table

ROWS = {row["name"]: row for row in read_table("edits.csv")}

STRUCTURES = {
    "propranolol": ("CC(C)NCC(O)COc1cccc2ccccc12", 3),
    "1-(4-fluorobenzyl)piperazine": ("Fc1ccc(CN2CCNCC2)cc1", 9),
    "gefitinib": ("COc1cc2ncnc(Nc3ccc(F)c(Cl)c3)c2cc1OCCCN1CCOCC1", 25),
    "ethylguanidine": ("CCNC(N)=N", 5),
    "2-aminopyridine": ("Nc1ccccn1", 6),
    "histamine": ("NCCc1c[nH]cn1", 0),
    "amphetamine": ("C[C@H](N)Cc1ccccc1", 2),
    "N-acetylethylenediamine": ("CC(=O)NCCN", 6),
    "3-aminobenzonitrile": ("N#Cc1cccc(N)c1", 7),
}


def edit(name: str) -> Edit:
    return next(one for one in edits() if one.name == name)


def example(name: str) -> tuple[Chem.Mol, int]:
    mol = Chem.MolFromSmiles(ROWS[name]["example"])
    site = next(atom.GetIdx() for atom in mol.GetAtoms() if atom.GetAtomMapNum() == 1)
    mol.GetAtomWithIdx(site).SetAtomMapNum(0)
    return mol, site


def marked(smiles: str) -> str:
    return Chem.MolToSmiles(Chem.MolFromSmiles(smiles))


def all_products(bench: Workbench) -> list[Product]:
    return [product for one in edits() for product in bench.apply(one)]


@pytest.mark.parametrize("name", ROWS)
def test_each_edit_makes_its_product_of_its_example_at_its_cost(name):
    row, (mol, site) = ROWS[name], example(name)
    made = {marked_smiles(one.mol, one.site): one for one in Workbench(mol, site, reach=6).apply(edit(name))}
    assert marked(row["product"]) in made
    one = made[marked(row["product"])]
    came = [source for source in one.origin if source != NEW]
    exchanged = sum(
        atom.GetAtomicNum() != mol.GetAtomWithIdx(source).GetAtomicNum()
        for atom, source in zip(one.mol.GetAtoms(), one.origin, strict=True)
        if source != NEW
    )
    change = one.origin.count(NEW) + exchanged + mol.GetNumAtoms() - len(came)
    assert int(row["cost"]) == max(change, 1)
    assert row["source"] and row["label"] and row["family"] and row["example_name"]


def test_the_table_is_wide_and_its_names_are_different():
    assert len(ROWS) == len(read_table("edits.csv")) >= 200
    assert len({(row["smarts"]) for row in ROWS.values()}) == len(ROWS)
    assert len({row["family"] for row in ROWS.values()}) >= 15


@pytest.mark.parametrize("row", read_table("edit_refusals.csv"), ids=lambda row: row["name"])
def test_each_refused_group_is_known_by_its_pattern(row):
    found = dict(
        zip(
            (other["name"] for other in read_table("edit_refusals.csv")),
            refused_groups(Chem.MolFromSmiles(row["example"])),
            strict=True,
        )
    )
    assert found[row["name"]] > 0 and row["reason"] and row["source"]


@pytest.mark.parametrize(
    ("smiles", "site", "name", "group"),
    [
        ("C1CNCCN1C", 6, "beta-fluoro", "a fluorine beside the other nitrogen of a piperazine"),
        ("CN1CCCC1", 1, "methylene-to-NH", "an aminal or a hydrazine"),
        ("C1CCNC1", 3, "methylene-to-oxygen", "a hemiaminal or a hydroxylamine"),
        ("NCCCNC(C)=O", 0, "methylene-to-oxygen", "a hemiaminal of either nitrogen"),
        ("OCCN", 3, "beta-fluoro-more", "a fluorohydrin"),
        ("OCCN", 3, "beta-hydroxy", "a gem-diol"),
    ],
)
def test_what_would_fall_apart_is_refused(smiles, site, name, group):
    made = {
        Chem.MolToSmiles(one.mol) for one in Workbench(Chem.MolFromSmiles(smiles), site).apply(edit(name))
    }
    assert not made, group


def test_what_holds_is_not_refused():
    mol = Chem.MolFromSmiles("OCC(O)CN")
    made = {Chem.MolToSmiles(one.mol) for one in Workbench(mol, 5).apply(edit("hydroxy-off"))}
    assert made == {Chem.CanonSmiles("OCCCN"), Chem.CanonSmiles("CC(O)CN")}


@pytest.mark.parametrize("name", STRUCTURES)
def test_no_product_has_more_of_a_refused_group_than_the_structure(name):
    smiles, site = STRUCTURES[name]
    mol = Chem.MolFromSmiles(smiles)
    before = refused_groups(mol)
    for product in all_products(Workbench(mol, site)):
        after = refused_groups(product.mol)
        assert all(more <= less for more, less in zip(after, before, strict=True)), product.edits[0].name


@pytest.mark.parametrize("name", STRUCTURES)
def test_the_nitrogen_is_followed_and_every_product_is_one_sound_molecule(name):
    smiles, site = STRUCTURES[name]
    mol = Chem.MolFromSmiles(smiles)
    products = all_products(Workbench(mol, site))
    assert len(products) > 10
    for product in products:
        assert product.origin[product.site] == site
        assert product.mol.GetAtomWithIdx(product.site).GetAtomicNum() == 7
        text = Chem.MolToSmiles(product.mol)
        again = Chem.MolFromSmiles(text)
        assert again is not None and "." not in text
        assert Chem.MolToSmiles(again) == text, product.edits[0].name


def surroundings(mol: Chem.Mol, atom: int, number: list[int]) -> tuple[object, ...]:
    """What protection promises of an atom: element, charge, hydrogens, neighbours with their elements, bonds."""
    one = mol.GetAtomWithIdx(atom)
    around = sorted(
        (
            number[bond.GetOtherAtomIdx(atom)],
            bond.GetOtherAtom(one).GetSymbol(),
            str(bond.GetBondType()),
        )
        for bond in one.GetBonds()
    )
    return one.GetSymbol(), one.GetFormalCharge(), one.GetTotalNumHs(), around


@settings(max_examples=40, deadline=None)
@given(name=st.sampled_from(sorted(STRUCTURES)), data=st.data())
def test_protected_atoms_are_the_same_in_every_product(name, data):
    smiles, site = STRUCTURES[name]
    mol = Chem.MolFromSmiles(smiles)
    count = mol.GetNumAtoms()
    keep = data.draw(st.sets(st.integers(0, count - 1), min_size=1, max_size=count))
    own = list(range(count))
    for product in all_products(Workbench(mol, site, keep)):
        numbers = list(product.origin)
        for atom in keep:
            assert atom in numbers, product.edits[0].name
            place = numbers.index(atom)
            assert surroundings(product.mol, place, numbers) == surroundings(mol, atom, own)


@settings(max_examples=25, deadline=None)
@given(name=st.sampled_from(sorted(STRUCTURES)), reach=st.integers(0, 6))
def test_no_edit_reaches_further_than_it_may(name, reach):
    smiles, site = STRUCTURES[name]
    mol = Chem.MolFromSmiles(smiles)
    distance = Chem.GetDistanceMatrix(mol)[site]
    for product in all_products(Workbench(mol, site, reach=reach)):
        staying = [atom for atom in product.touched if atom in product.origin]
        assert max(distance[atom] for atom in staying) <= reach


@settings(max_examples=30, deadline=None)
@given(name=st.sampled_from(sorted(STRUCTURES)), seed=st.integers(0, 10_000))
def test_the_products_do_not_depend_on_the_order_of_the_atoms(name, seed):
    smiles, site = STRUCTURES[name]
    mol = Chem.MolFromSmiles(smiles)
    order = list(range(mol.GetNumAtoms()))
    random.Random(seed).shuffle(order)
    other = Chem.RenumberAtoms(mol, order)
    found = [
        {(one.edits[0].name, marked_smiles(one.mol, one.site)) for one in all_products(Workbench(here, at))}
        for here, at in ((mol, site), (other, order.index(site)))
    ]
    assert found[0] == found[1]


def test_a_stereocentre_away_from_the_edit_stays_and_one_at_it_is_left_open():
    # (S)-amphetamine: a fluorine on the ring leaves its centre, a methyl on the carbon itself has none left
    mol = Chem.MolFromSmiles("C[C@H](N)Cc1ccccc1")
    centre = dict(Chem.FindMolChiralCenters(mol))[1]
    bench = Workbench(mol, 2)
    for product in bench.apply(edit("aryl-fluoro")):
        place = product.origin.index(1)
        assert dict(Chem.FindMolChiralCenters(product.mol)) == {place: centre}
    (opened,) = {Chem.MolToSmiles(one.mol) for one in bench.apply(edit("alpha-methyl-more"))}
    assert "@" not in opened
    ring = Workbench(Chem.MolFromSmiles("F/C=C/CN[C@@H]1CCC[C@H]1O"), 4)
    for product in ring.apply(edit("N-methyl")):
        assert Chem.MolToSmiles(product.mol) == Chem.CanonSmiles("F/C=C/CN(C)[C@@H]1CCC[C@H]1O")


def test_a_kept_neighbour_bars_the_exchange_of_the_atom_beside_it():
    # with C3 of piperidine kept, C4 may neither become oxygen nor leave; it may take a fluorine
    mol, names = Chem.MolFromSmiles("C1CCCCN1"), ("piperidine-to-morpholine", "piperidine-to-pyrrolidine")
    bench = Workbench(mol, 5, keep=[1])
    assert not any(bench.apply(edit(name)) for name in names)
    assert bench.apply(edit("4-fluoropiperidine"))


def test_two_edits_keep_the_way_back_to_the_first_structure():
    mol = Chem.MolFromSmiles("NCCc1ccccc1")
    (first,) = Workbench(mol, 0).apply(edit("N-methyl"))
    second = next(iter(Workbench(first.mol, first.site).apply(edit("beta-difluoro"))))
    both = combined(first, second)
    assert Chem.MolToSmiles(both.mol) == Chem.CanonSmiles("CNCC(F)(F)c1ccccc1")
    assert both.cost == 3 and both.origin.count(NEW) == 3 and both.origin[both.site] == 0
    assert both.touched == {0, 2}
    new = {both.mol.GetAtomWithIdx(atom).GetSymbol() for atom in both.changed}
    assert new == {"C", "F"} and len(both.changed) == 3


def test_edits_are_chosen_by_name_by_family_or_by_a_part_of_either():
    assert [one.name for one in chosen_edits("beta-fluoro")] == ["beta-fluoro"]
    assert {one.family for one in chosen_edits("Oxetane")} == {"oxetane"}
    assert len(chosen_edits("all")) == len(edits())
    assert {"aryl-fluoro", "beta-fluoro", "4-fluoropiperidine"} <= {
        one.name for one in chosen_edits("fluoro")
    }
    with pytest.raises(ValueError, match="no edit is called 'unobtainium'; the families are: six-membered"):
        chosen_edits("unobtainium")


def test_the_parents_of_the_examples_are_as_they_stand():
    # an example whose parent is another tautomer would be edited in a form that the command never meets
    for name in ROWS:
        mol, _ = example(name)
        assert read_parent(Chem.MolToSmiles(mol)).smiles == Chem.MolToSmiles(mol), name
