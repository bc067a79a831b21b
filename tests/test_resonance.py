"""Hueckel energies of the textbook, and what groups add to the binding of a proton."""

from __future__ import annotations

import math

import numpy as np
import pytest
from rdkit import Chem

from basirank.graph import build_graph
from basirank.resonance import pi_energy, resonance_of_groups


def carbons(size: int, bonds: list[tuple[int, int]]) -> float:
    matrix = np.zeros((size, size))
    for first, second in bonds:
        matrix[first, second] = matrix[second, first] = 1.0
    return pi_energy(np.linalg.eigvalsh(matrix), size)


def ring(size: int) -> list[tuple[int, int]]:
    return [(place, (place + 1) % size) for place in range(size)]


@pytest.mark.parametrize(
    ("compound", "size", "bonds", "energy"),
    [
        # Streitwieser 1961, Molecular Orbital Theory for Organic Chemists (memory)
        ("ethylene", 2, [(0, 1)], 2.0),
        ("butadiene", 4, [(0, 1), (1, 2), (2, 3)], 2 * math.sqrt(5)),
        ("cyclobutadiene", 4, ring(4), 4.0),
        ("benzene", 6, ring(6), 8.0),
        ("allyl radical", 3, [(0, 1), (1, 2)], 2 * math.sqrt(2)),
        ("naphthalene", 10, [*ring(10), (0, 5)], 13.683),
    ],
)
def test_the_pi_energy_of(compound, size, bonds, energy):
    assert carbons(size, bonds) == pytest.approx(energy, abs=1e-3), compound


def gain(smiles: str) -> float:
    """Resonance of the groups at the atom with map 1."""
    mol = Chem.MolFromSmiles(smiles)
    (site,) = [atom.GetIdx() for atom in mol.GetAtoms() if atom.GetAtomMapNum() == 1]
    return resonance_of_groups(build_graph(mol), site, ())


def test_an_amino_group_helps_most_where_it_is_conjugated():
    ortho, meta, para = (gain(smiles) for smiles in ("Nc1cccc[n:1]1", "Nc1ccc[n:1]c1", "Nc1cc[n:1]cc1"))
    assert para > 0.03 and ortho > 0.03
    assert abs(meta) < 0.01


def test_the_amino_group_of_3_aminopyridazine_pushes_to_its_second_nitrogen():
    # 3-aminopyridazine 5.19 against pyridazine 2.33: Albert and Serjeant 1984 (memory); N2 carries the proton
    beside, across = gain("Nc1ccc[n:1]n1"), gain("Nc1cccn[n:1]1")
    assert abs(beside - across) > 0.01


def test_amino_pushes_more_than_methoxy_and_methoxy_more_than_chlorine():
    amino, methoxy, chloro = (gain(f"{group}c1cc[n:1]cc1") for group in ("N", "CO", "Cl"))
    assert amino > methoxy > 0
    assert amino > chloro > 0


@pytest.mark.parametrize("smiles", ["Cc1cc[n:1]cc1", "c1cc[n:1]cc1", "CC[NH2:1]", "C1CC[N:1](C)CC1"])
def test_nothing_conjugated_adds_nothing(smiles):
    assert gain(smiles) == 0.0


def test_the_order_of_the_atoms_does_not_show():
    mol = Chem.MolFromSmiles("Nc1n[n:1]c2ccc(N(C)C)cc2n1")
    (site,) = [atom.GetIdx() for atom in mol.GetAtoms() if atom.GetAtomMapNum() == 1]
    here = resonance_of_groups(build_graph(mol), site, ())
    generator = np.random.default_rng(3)
    for _ in range(20):
        order = [int(place) for place in generator.permutation(mol.GetNumAtoms())]
        other = Chem.RenumberAtoms(mol, order)
        assert resonance_of_groups(build_graph(other), order.index(site), ()) == here


def test_a_huge_dye_is_cut_at_a_bound():
    chain = "C=C" * 60
    assert math.isfinite(gain(f"Nc1cc({chain})[n:1]nc1"))
