"""Interactions: the second constant of a diamine, the zwitterion of an amino acid, and what is one unit."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from basirank.interactions import Paths, coupling_matrix, find_paths, law, prior_law
from basirank.prediction import Lines, Prediction, predict, site_lines
from basirank.structures import read_parent

PERRIN = "Perrin 1965 (memory)"

DIAMINES = [
    # (compound, SMILES, first, second, source)
    ("1,2-diaminoethane", "NCCN", 9.93, 6.85, PERRIN),
    ("1,3-diaminopropane", "NCCCN", 10.55, 8.88, PERRIN),
    ("1,4-diaminobutane", "NCCCCN", 10.80, 9.35, "Perrin 1965, entry 251"),
    ("1,5-diaminopentane", "NCCCCCN", 10.93, 10.05, "Perrin 1972, entry 4182"),
    ("1,6-diaminohexane", "NCCCCCCN", 10.93, 9.83, PERRIN),
    ("piperazine", "C1CNCCN1", 9.73, 5.35, "Perrin, Dempsey and Serjeant 1981 (memory)"),
    ("N,N'-dimethylpiperazine", "CN1CCN(C)CC1", 8.38, 3.81, "Perrin, Dempsey and Serjeant 1981 (memory)"),
    ("N,N,N',N'-tetramethylethylenediamine", "CN(C)CCN(C)C", 9.14, 5.85, "Perrin 1965 (memory)"),
]

AMINO_ACIDS = [
    # (compound, SMILES, its ethyl or methyl ester, amine, acid)
    ("glycine", "NCC(=O)O", "NCC(=O)OCC", 9.78, 2.35),
    ("alanine", "CC(N)C(=O)O", "CC(N)C(=O)OC", 9.87, 2.35),
    ("beta-alanine", "NCCC(=O)O", "NCCC(=O)OCC", 10.24, 3.55),
    ("4-aminobutanoic acid", "NCCCC(=O)O", "NCCCC(=O)OCC", 10.56, 4.03),
    ("proline", "OC(=O)C1CCCN1", "COC(=O)C1CCCN1", 10.64, 1.95),
]


@pytest.fixture(scope="module")
def predicted() -> dict[str, Prediction]:
    """All compounds of the tables above, predicted in one batch."""
    smiles = [row[1] for row in DIAMINES] + [text for row in AMINO_ACIDS for text in row[1:3]]
    smiles += ["C1CN2CCN1CC2", *(f"N{'C' * n}N" for n in range(2, 15))]
    return dict(zip(smiles, predict(smiles), strict=True))


def constants(prediction: Prediction, kind: str = "base") -> list[float]:
    return [step.value for step in prediction.equilibrium.steps if step.kind == kind]


@pytest.mark.parametrize(("compound", "smiles", "first", "second", "source"), DIAMINES)
def test_both_constants_of(predicted, compound, smiles, first, second, source):
    found = constants(predicted[smiles])
    assert found[0] == pytest.approx(first, abs=0.5), source
    # the ionic strength of most second constants isn't printed; 0.1 mol/L raises them by 0.2
    assert found[1] == pytest.approx(second, abs=0.6), source


def test_the_second_constant_of_dabco_lies_between_the_published_ones():
    """2.97 (CRC Handbook) and 4.18 (Perrin 1965, entry 2344); both from memory."""
    found = constants(predict(["C1CN2CCN1CC2"])[0])
    assert 2.97 - 0.3 <= found[1] <= 4.18 + 0.3


def test_the_two_constants_of_a_diamine_come_together_as_the_chain_grows(predicted):
    """Far apart they differ by the statistical 0.60 alone: log 4."""
    gaps = [np.subtract(*constants(predicted[f"N{'C' * n}N"])) for n in range(2, 15)]
    assert all(near > far - 0.05 for near, far in pairwise(gaps))
    assert gaps[0] > 2.5
    assert gaps[-1] == pytest.approx(np.log10(4), abs=0.1)


@pytest.mark.parametrize(("compound", "acid_form", "ester", "amine", "acid"), AMINO_ACIDS)
def test_the_carboxylate_raises_the_amine_of_an_amino_acid(
    predicted, compound, acid_form, ester, amine, acid
):
    """Constants: Perrin 1965 (memory)."""
    whole = predicted[acid_form]
    assert constants(whole)[0] == pytest.approx(amine, abs=0.4)
    assert constants(whole, "acid")[0] == pytest.approx(acid, abs=0.4)
    assert constants(whole)[0] > constants(predicted[ester])[0]


def test_the_closer_the_carboxylate_the_more_it_raises_the_amine(predicted):
    raised = [
        constants(predicted[acid_form])[0] - constants(predicted[ester])[0]
        for _, acid_form, ester, *_ in (AMINO_ACIDS[0], AMINO_ACIDS[2], AMINO_ACIDS[3])
    ]
    assert raised == sorted(raised, reverse=True)
    assert raised[0] > 1.2


def test_the_zwitterion_of_glycine_is_its_dominant_form_at_every_ph_between_its_constants():
    (glycine,) = predict(["NCC(=O)O"], ph=(3.5, 5.0, 6.0, 7.4, 9.0))
    assert set(glycine.forms) == {"[NH3+]CC(=O)[O-]"}


# the law


@pytest.mark.parametrize("rule", [prior_law(), law()], ids=["published", "in use"])
def test_the_interaction_falls_with_the_number_of_bonds(rule):
    for values in (rule.saturated, rule.conjugated):
        assert np.all(values > 0)
        assert np.all(np.diff(values) < 0.03)
    assert rule.saturated[2] == pytest.approx(2.5, abs=0.3)  # 1,2-diaminoethane 9.93 and 6.85


def test_a_conjugated_path_carries_farther_than_a_saturated_one():
    rule = law()
    assert np.all(rule.conjugated >= rule.saturated)


def matrix(bonds: int, conjugated: int = 0, count: int = 1, acids: int = 0) -> float:
    def pair(value: int) -> np.ndarray:
        return np.array([[0, value], [value, 0]])

    return float(
        coupling_matrix(Paths(pair(bonds), pair(conjugated), pair(count), pair(acids), pair(0)), law())[0, 1]
    )


def test_past_the_listed_distances_the_interaction_goes_on_falling():
    far = [matrix(bonds) for bonds in (12, 13, 16, 24, 60)]
    assert far == sorted(far, reverse=True)
    assert 0 < far[-1] < 0.01


def test_each_further_path_adds_the_same_share():
    """Piperazine has two shortest paths between its nitrogens, diazabicyclooctane three."""
    one, two, three = (matrix(3, count=count) for count in (1, 2, 3))
    assert three - two == pytest.approx(two - one)
    assert two / one == pytest.approx(1 + law().parallel_paths)


def test_a_shared_anion_acts_more_weakly_than_a_charge_on_one_atom():
    assert matrix(3, acids=2) < matrix(3, acids=1) < matrix(3)


def lines_of(smiles: str) -> Lines:
    return site_lines(read_parent(smiles))


def paths_of(smiles: str) -> tuple[Lines, Paths, np.ndarray | None]:
    lines = lines_of(smiles)
    return lines, *find_paths(lines.graph, lines.sites)


@pytest.mark.parametrize(
    ("compound", "smiles", "bonds", "count"),
    [
        ("1,2-diaminoethane", "NCCN", 3, 1),
        ("1,6-diaminohexane", "NCCCCCCN", 7, 1),
        ("piperazine", "C1CNCCN1", 3, 2),
        ("1,4-diazabicyclo[2.2.2]octane", "C1CN2CCN1CC2", 3, 3),
        ("pyrazine", "c1cnccn1", 3, 2),
    ],
)
def test_the_path_between_the_nitrogens_of(compound, smiles, bonds, count):
    _, paths, _ = paths_of(smiles)
    assert (paths.bonds[0, 1], paths.count[0, 1]) == (bonds, count)
    assert (paths.bonds == paths.bonds.T).all()


def test_the_matrix_is_symmetric_with_nothing_on_its_diagonal():
    for smiles in ("NCCNCCNCCN", "NCC(=O)NCC(=O)O", "NC(=N)NCCCC(N)C(=O)O", "c1ccc2c(c1)[nH]cn2"):
        _, paths, _ = paths_of(smiles)
        coupling = coupling_matrix(paths, law())
        assert (coupling == coupling.T).all()
        assert (np.diag(coupling) == 0).all()
        assert (coupling >= 0).all()


def test_two_ends_of_a_conjugated_path_feel_each_other_more_than_across_a_chain():
    _, conjugated, _ = paths_of("c1cc(ccn1)-c1ccncc1")  # 4,4'-bipyridyl: 4.82 and 3.17, Perrin 1965 (memory)
    _, saturated, _ = paths_of("NCCCCCCN")
    assert conjugated.bonds[0, 1] == saturated.bonds[0, 1] == 7
    assert coupling_matrix(conjugated, law())[0, 1] > coupling_matrix(saturated, law())[0, 1]


# pairs that are one tautomeric unit


@pytest.mark.parametrize(
    ("compound", "smiles"),
    [
        ("imidazole", "c1c[nH]cn1"),
        ("benzimidazole", "c1ccc2[nH]cnc2c1"),
        ("pyrazole", "c1cc[nH]n1"),
        ("tetrazole", "c1nnn[nH]1"),
        ("2-pyridone", "O=c1cccc[nH]1"),
        ("4-pyridone", "O=c1cc[nH]cc1"),
        ("4-hydroxypyridine", "Oc1ccncc1"),
        ("2-thiopyridone", "S=c1cccc[nH]1"),
        ("N-tosylacetamidine", "CC(N)=NS(=O)(=O)c1ccc(C)cc1"),
        ("sulfaguanidine", "Nc1ccc(cc1)S(=O)(=O)N=C(N)N"),
    ],
)
def test_base_and_acid_are_one_unit_in(compound, smiles):
    lines, _, exclusive = paths_of(smiles)
    assert exclusive is not None
    kinds = [site.kind for site in lines.sites]
    for i, j in np.argwhere(exclusive):
        assert {kinds[i], kinds[j]} == {"base", "acid"}
    assert (exclusive == exclusive.T).all()


@pytest.mark.parametrize(
    ("compound", "smiles"),
    [
        ("3-hydroxypyridine, which has a zwitterion", "Oc1cccnc1"),
        ("nicotinic acid, which has a zwitterion", "OC(=O)c1cccnc1"),
        ("isonicotinic acid", "OC(=O)c1ccncc1"),
        ("glycine", "NCC(=O)O"),
        ("4-aminophenol", "Nc1ccc(O)cc1"),
        ("4-aminobenzoic acid", "Nc1ccc(cc1)C(=O)O"),
        ("tyramine", "Oc1ccc(cc1)CCN"),
        ("piperazine", "C1CNCCN1"),
    ],
)
def test_base_and_acid_are_two_sites_in(compound, smiles):
    assert paths_of(smiles)[2] is None


def test_the_amine_of_histamine_is_no_tautomer_of_its_imidazole():
    lines, _, exclusive = paths_of("NCCc1c[nH]cn1")
    (amine,) = [k for k, site in enumerate(lines.sites) if site.site_class == "primary aliphatic amine"]
    assert exclusive is not None
    assert not exclusive[amine].any()


def test_3_hydroxypyridine_is_partly_a_zwitterion_and_4_pyridone_is_not():
    """Neutral 3-hydroxypyridine is about half zwitterion in water: Metzler and Snell 1955 (memory)."""
    three, four = predict(["Oc1cccnc1", "O=c1cc[nH]cc1"], ph=(7.0,))
    assert three.equilibrium.states[0].protonated_fraction > 0.05
    assert four.equilibrium.states[0].protonated_fraction < 0.01
