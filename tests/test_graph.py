"""Graph: atoms, hydrogen, bonds and rings of a molecule as plain arrays, and names for kinds of atom."""

from __future__ import annotations

import random
from collections import Counter

import pytest
from rdkit import Chem

from basirank import graph as graph_module
from basirank.graph import AROMATIC, Graph, build_graph, type_of
from basirank.structures import output_order


def graph(smiles: str) -> Graph:
    return build_graph(Chem.MolFromSmiles(smiles))


@pytest.mark.parametrize(
    ("compound", "smiles", "kinds"),
    [
        ("ethylamine", "CCN", ["C3", "C3", "N3"]),
        ("ethanimine", "CC=N", ["C3", "C2", "N2"]),
        ("acetonitrile", "CC#N", ["C3", "C1", "N1"]),
        ("acetamide", "CC(N)=O", ["C3", "C2", "N3", "O2"]),
        ("pyridine", "n1ccccc1", ["n", "c", "c", "c", "c", "c"]),
        ("pyrrole", "[nH]1cccc1", ["n", "c", "c", "c", "c"]),
        ("thiazole", "c1cscn1", ["c", "c", "s", "c", "n"]),
        ("nitromethane", "C[N+](=O)[O-]", ["C3", "N2+", "O2", "O3-"]),
        ("N-methylpyridinium", "C[n+]1ccccc1", ["C3", "n+", "c", "c", "c", "c", "c"]),
        ("trimethylamine N-oxide", "C[N+](C)(C)[O-]", ["C3", "N3+", "C3", "C3", "O3-"]),
        ("dimethyl sulfone", "CS(C)(=O)=O", ["C3", "S1", "C3", "O2", "O2"]),
        ("dimethyl sulfoxide", "CS(C)=O", ["C3", "S2", "C3", "O2"]),
        ("allene carbon of a ketene", "C=C=O", ["C2", "C1", "O2"]),
        ("bromochlorofluoromethane", "FC(Cl)Br", ["F3", "C3", "Cl3", "Br3"]),
        ("hydrazoic acid ester", "CN=[N+]=[N-]", ["C3", "N2", "N1+", "N2-"]),
    ],
)
def test_the_kinds_of_atom_of(compound, smiles, kinds):
    assert graph(smiles).kind == kinds


def test_hydrogen_is_counted_on_its_atom_whether_written_or_not():
    assert graph("CCN").hydrogens == [3, 2, 2]
    assert graph("[CH3][CH2][NH2]").hydrogens == [3, 2, 2]
    assert graph("[NH4+]").hydrogens == [4]
    assert graph("c1cc[nH]c1").hydrogens == [1, 1, 1, 1, 1]


def test_deuterium_is_hydrogen_and_no_neighbour():
    heavy = graph("[2H]N([2H])C")
    assert heavy.hydrogens[1] == 2
    assert [other for other, _ in heavy.neighbours[1]] == [3]
    plain = graph("CN")
    assert (heavy.kind[1], heavy.kind[3]) == (plain.kind[1], plain.kind[0])


def test_each_bond_stands_at_both_its_ends_with_its_order():
    found = graph("C=CC#Cc1ccccc1")
    for atom, bonds in enumerate(found.neighbours):
        for other, order in bonds:
            assert (atom, order) in found.neighbours[other]
    assert (1, 2) in found.neighbours[0]
    assert (2, 1) in found.neighbours[1]
    assert (3, 3) in found.neighbours[2]
    assert {order for other, order in found.neighbours[5] if other != 4} == {AROMATIC}


def test_the_two_drawings_of_benzene_are_one_graph():
    assert graph("C1=CC=CC=C1N").neighbours == graph("c1ccccc1N").neighbours


@pytest.mark.parametrize(
    ("compound", "smiles", "atom", "rings", "smallest"),
    [
        ("piperidine", "N1CCCCC1", 0, 1, 6),
        ("aziridine", "N1CC1", 0, 1, 3),
        ("quinuclidine", "N12CCC(CC1)CC2", 0, 3, 6),
        ("indolizidine", "N12CCCCC1CCC2", 0, 2, 5),
        ("spiro carbon", "C1CC12CCCC2", 2, 2, 3),
        ("chain", "NCC", 0, 0, 0),
        ("azacyclododecane", "N1CCCCCCCCCCC1", 0, 1, 12),
    ],
)
def test_the_rings_of(compound, smiles, atom, rings, smallest):
    found = graph(smiles)
    assert len(found.atom_rings[atom]) == rings
    assert found.smallest_ring(atom) == smallest


def test_a_bond_between_two_rings_is_no_ring_bond():
    biphenyl = graph("c1ccccc1-c1ccccc1")
    assert not biphenyl.ring_bond(5, 6)
    assert biphenyl.ring_bond(0, 1)
    assert not graph("c1ccccc1N").ring_bond(5, 6)


def test_charges_and_elements_are_those_of_the_drawing():
    found = graph("C[N+](C)(C)CC(=O)[O-]")
    assert sum(found.charge) == 0
    assert found.charge[1] == 1
    assert Counter(found.element) == Counter({6: 5, 7: 1, 8: 2})


@pytest.mark.parametrize(
    "smiles", ["CC(C)NCC(O)COc1cccc2ccccc12", "Cn1c(=O)c2[nH]cnc2n(C)c1=O", "C1CN2CCN1CC2"]
)
def test_renumbered_atoms_carry_their_properties_along(smiles):
    mol = Chem.MolFromSmiles(smiles)
    order = list(range(mol.GetNumAtoms()))[::-1]
    plain, turned = build_graph(mol), build_graph(Chem.RenumberAtoms(mol, order))
    place = {old: new for new, old in enumerate(order)}
    for atom in order:
        assert turned.kind[place[atom]] == plain.kind[atom]
        assert turned.hydrogens[place[atom]] == plain.hydrogens[atom]
        assert turned.smallest_ring(place[atom]) == plain.smallest_ring(atom)
        assert sorted(turned.neighbours[place[atom]]) == sorted(
            (place[o], k) for o, k in plain.neighbours[atom]
        )


@pytest.mark.parametrize("seed", range(5))
def test_neighbours_stand_in_the_order_of_the_canonical_smiles_however_atoms_are_numbered(seed):
    mol = Chem.MolFromSmiles("CC(C)NCC(O)COc1cccc2ccccc12")
    order = list(range(mol.GetNumAtoms()))
    random.Random(seed).shuffle(order)
    mixed = Chem.RenumberAtoms(mol, order)
    Chem.MolToSmiles(mixed)
    position = {atom: place for place, atom in enumerate(output_order(mixed))}
    for around in build_graph(mixed).neighbours:
        places = [position[other] for other, _ in around]
        assert places == sorted(places)


def test_dative_and_zero_order_bonds_make_neighbours_at_both_ends():
    adduct = graph("CN(C)(C)->[Cu]")
    assert (4, 1) in adduct.neighbours[1]
    assert (1, 1) in adduct.neighbours[4]
    loose = Chem.RWMol(Chem.MolFromSmiles("CN.CN"))
    loose.AddBond(1, 3, Chem.BondType.ZERO)
    Chem.SanitizeMol(loose)
    found = build_graph(loose)
    assert (3, 1) in found.neighbours[1]
    assert (1, 1) in found.neighbours[3]


def test_an_atom_beside_deuterium_is_not_taken_for_one_with_as_many_carbons():
    """Both carbons are written C with two single bonds."""
    chain, marked = graph("CCC"), graph("[2H]CC")
    assert chain.hydrogens == [3, 2, 3]
    assert marked.hydrogens[1:] == [3, 3]
    assert [type_of(star[0]).degree for star in marked.star[1:]] == [1, 1]


def test_deuterium_beside_deuterium_is_not_taken_for_that_on_carbon():
    graph_module._KNOWN.clear()
    assert graph("[2H][2H]").hydrogens == [1, 1]
    assert graph("[2H]C").hydrogens == [0, 4]


def test_a_large_molecule_keeps_no_matrix_of_its_bonds():
    mol = Chem.MolFromSmiles("N" + "CCO" * 30)
    build_graph(mol)
    assert not any("Adjacency" in name for name in mol.GetPropNames(True, True))


def test_a_molecule_is_not_changed():
    mol = Chem.MolFromSmiles("[2H]C(N)c1ccccc1")
    before = Chem.MolToSmiles(mol)
    build_graph(mol)
    assert Chem.MolToSmiles(mol) == before


def test_an_empty_molecule_has_empty_arrays():
    found = build_graph(Chem.Mol())
    assert found.element == found.kind == found.neighbours == []
    assert found.rings == ()
