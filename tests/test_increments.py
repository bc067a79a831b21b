"""Increments: the value of a site is the sum of its terms, tied to atoms; the published lines are in it."""

from __future__ import annotations

import csv
import math
import random
from pathlib import Path

import pytest
from rdkit import Chem

from basirank import increments
from basirank.graph import build_graph
from basirank.increments import SORTS, TERMS, Estimate, SiteWalks, Term, coefficients, line_of, site_terms
from basirank.prediction import CORRECTION, Prediction, predict, site_lines
from basirank.sites import find_sites, site_classes
from basirank.structures import Refusal, read_parent
from basirank.substituents import Substituents
from basirank.tables import read_model_table, read_table

DATA = Path(__file__).resolve().parent.parent / "data"


def line(smiles: str, site_class: str) -> tuple[Term, ...]:
    """Terms of the line of the first site of that class."""
    parent = read_parent(smiles)
    graph = build_graph(parent.mol)
    sites = find_sites(parent.mol, graph, parent.output_order)
    site = next(site for site in sites if site.site_class == site_class)
    return site_terms(Substituents(graph), site)


def prior_of(key: tuple[str, str, str]) -> float:
    """Published or remembered value of one coefficient, before any refinement."""
    owner, anchors, term = key
    if term == "parent":
        return next(row.parent for row in site_classes() if row.name == owner and row.kind != "none")
    return next(c.prior for c in coefficients()[owner] if (c.anchors, c.term) == (anchors, term))


def published(smiles: str, site_class: str) -> float:
    """Value of the line with its published coefficients."""
    return sum(term.descriptor * prior_of(term.key) for term in line(smiles, site_class))


@pytest.fixture(scope="module")
def predictions() -> list[Prediction]:
    """A hundred compounds over all classes."""
    with (DATA / "class_examples.csv").open(encoding="utf-8", newline="") as handle:
        smiles = [row["smiles"] for row in csv.DictReader(handle)]
    return [p for p in predict(smiles[::3]) if p.equilibrium is not None]


# the sum


def test_the_terms_of_every_site_add_up_to_its_value(predictions):
    estimates = [estimate for prediction in predictions for estimate in prediction.estimates]
    assert len(estimates) > 100
    for estimate in estimates:
        assert estimate.value == pytest.approx(
            sum(term.descriptor * term.coefficient for term in estimate.terms)
        )
        assert math.isfinite(estimate.value)


def test_the_parent_comes_first_the_correction_last_and_each_once(predictions):
    for prediction in predictions:
        for estimate in prediction.estimates:
            names = [term.name for term in estimate.terms]
            assert names[0] == f"parent: {estimate.site.site_class}"
            assert names[-1] == CORRECTION
            assert sum(name.startswith("parent") for name in names) == 1
            assert names.count(CORRECTION) == 1


def test_each_increment_is_tied_to_atoms_of_the_molecule_and_has_a_source(predictions):
    for prediction in predictions:
        size = prediction.parent.mol.GetNumAtoms()
        for estimate in prediction.estimates:
            for term in estimate.terms:
                assert term.source, term.name
                assert all(0 <= atom < size for atom in term.atoms)
                assert term.atoms or term.name == CORRECTION
                assert term.descriptor != 0.0 or term.name == CORRECTION


def test_the_lines_of_a_prediction_are_the_terms_of_its_estimates(predictions):
    for prediction in predictions[::5]:
        lines = site_lines(prediction.parent)
        for value, estimate in zip(lines.values, prediction.estimates, strict=True):
            assert value == pytest.approx(sum(term.value for term in estimate.terms[:-1]))


@pytest.mark.parametrize(
    ("compound", "smiles", "site_class", "term", "atom"),
    [
        ("2-chloroethylamine", "ClCCN", "primary aliphatic amine", "sigma* of chloro, 3 out", 0),
        ("2-methoxyethylamine", "COCCN", "primary aliphatic amine", "sigma* of methoxy, 3 out", 1),
        ("3-nitropyridine", "O=[N+]([O-])c1cccnc1", "pyridine", "sigma_m of nitro (meta)", 1),
        ("4-cyanopyridine", "N#Cc1ccncc1", "pyridine", "sigma_p of cyano (para)", 1),
        ("4-nitroaniline", "Nc1ccc(cc1)[N+](=O)[O-]", "primary arylamine", "sigma- of nitro (para)", 7),
        ("4-methoxyphenol", "COc1ccc(O)cc1", "naphthol or phenol", "sigma- of methoxy (para)", 1),
    ],
)
def test_the_group_that_a_term_names_stands_at_its_atom(compound, smiles, site_class, term, atom):
    found = {one.name: one for one in line(smiles, site_class)}
    assert term in found
    parent = read_parent(smiles)
    assert [parent.atom_index[a] for a in found[term].atoms] == [atom]


def test_the_oxygen_of_morpholine_counts_twice_in_its_line():
    terms = [t for t in line("C1COCCN1", "cyclic secondary amine") if t.name.startswith("sigma*")]
    assert len(terms) == 2
    assert terms[0].value == terms[1].value < 0


def test_terms_that_come_to_nothing_are_left_out():
    assert [t.name for t in line("c1ccncc1", "pyridine")] == ["parent: pyridine"]
    assert [t.name for t in line("CN", "primary aliphatic amine")] == ["parent: primary aliphatic amine"]


def lines_by_class(smiles: str) -> list[tuple[str, float]]:
    lines = site_lines(read_parent(smiles))
    return sorted((site.site_class, round(v, 6)) for site, v in zip(lines.sites, lines.values, strict=True))


def respelled(smiles: str, seed: int) -> str:
    """The same compound with its atoms written in another order."""
    mol = Chem.MolFromSmiles(smiles)
    order = list(range(mol.GetNumAtoms()))
    random.Random(seed).shuffle(order)
    return Chem.MolToSmiles(Chem.RenumberAtoms(mol, order), canonical=False)


AMBIGUOUS = {"diarylamine", "nitroenamine", "uracil N-H"}
"""Classes whose pattern fits one site in several ways that differ in their anchors."""


def test_the_lines_do_not_depend_on_the_spelling():
    for table in ("class_examples.csv", "check_values.csv", "first_site.csv"):
        with (DATA / table).open(encoding="utf-8", newline="") as handle:
            structures = [row["smiles"] for row in csv.DictReader(handle)]
        for seed, smiles in enumerate(structures[::2]):
            try:
                expected = lines_by_class(smiles)
            except Refusal:
                continue
            if AMBIGUOUS.isdisjoint(name for name, _ in expected):
                found = lines_by_class(respelled(smiles, seed))
                assert [name for name, _ in found] == [name for name, _ in expected], smiles
                assert [v for _, v in found] == pytest.approx([v for _, v in expected], abs=1e-5), smiles


@pytest.mark.parametrize(
    ("compound", "smiles"),
    [
        ("diclofenac", "OC(=O)Cc1ccccc1Nc1c(Cl)cccc1Cl"),
        ("olanzapine", "CN1CCN(CC1)C1=Nc2ccccc2Nc2sc(C)cc12"),
        ("thymine", "Cc1c[nH]c(=O)[nH]c1=O"),
        ("nizatidine", "CNC(=C[N+](=O)[O-])NCCSCc1csc(CN(C)C)n1"),
    ],
)
def test_the_line_of_a_site_with_two_sides_does_not_depend_on_the_spelling(compound, smiles):
    expected = lines_by_class(smiles)
    for seed in range(12):
        assert lines_by_class(respelled(smiles, seed)) == expected


# the published lines, with their published coefficients

PYRIDINES = [
    # measured: Perrin 1965 (memory); line 5.25 - 5.90 sigma: Fischer, Galloway and Vaughan 1964 (memory)
    ("pyridine", "c1ccncc1", 0.0, 5.20),
    ("3-methylpyridine", "Cc1cccnc1", -0.07, 5.67),
    ("4-methylpyridine", "Cc1ccncc1", -0.17, 6.02),
    ("3-chloropyridine", "Clc1cccnc1", 0.37, 2.84),
    ("3-bromopyridine", "Brc1cccnc1", 0.39, 2.84),
    ("3-cyanopyridine", "N#Cc1cccnc1", 0.56, 1.39),
    ("4-cyanopyridine", "N#Cc1ccncc1", 0.66, 1.86),
    ("3-nitropyridine", "O=[N+]([O-])c1cccnc1", 0.71, 0.81),
    ("3-acetylpyridine", "CC(=O)c1cccnc1", 0.38, 3.26),
    ("4-methoxypyridine", "COc1ccncc1", -0.27, 6.62),
    ("4-aminopyridine", "Nc1ccncc1", -0.66, 9.11),
    ("4-(dimethylamino)pyridine", "CN(C)c1ccncc1", -0.83, 9.70),
]


@pytest.mark.parametrize(("compound", "smiles", "sigma", "measured"), PYRIDINES)
def test_pyridines_follow_5_25_less_5_90_sigma(compound, smiles, sigma, measured):
    value = published(smiles, "pyridine")
    assert value == pytest.approx(5.25 - 5.90 * sigma, abs=0.15)
    assert value == pytest.approx(measured, abs=0.6)


ANILINES = [
    # measured: Perrin 1965 (memory); line 4.58 - 2.89 sigma-: Hammett 1940; Biggs and Robinson 1961 (memory)
    ("aniline", "Nc1ccccc1", 0.0, 4.60),
    ("3-methylaniline", "Cc1cccc(N)c1", -0.07, 4.71),
    ("4-methylaniline", "Cc1ccc(N)cc1", -0.17, 5.08),
    ("3-chloroaniline", "Nc1cccc(Cl)c1", 0.37, 3.52),
    ("4-chloroaniline", "Nc1ccc(Cl)cc1", 0.19, 3.98),
    ("4-bromoaniline", "Nc1ccc(Br)cc1", 0.25, 3.86),
    ("4-methoxyaniline", "COc1ccc(N)cc1", -0.26, 5.36),
    ("3-nitroaniline", "Nc1cccc([N+](=O)[O-])c1", 0.71, 2.46),
    ("4-nitroaniline", "Nc1ccc([N+](=O)[O-])cc1", 1.27, 1.00),
    ("4-cyanoaniline", "N#Cc1ccc(N)cc1", 1.00, 1.74),
    ("3-(trifluoromethyl)aniline", "Nc1cccc(C(F)(F)F)c1", 0.43, 3.49),
]


@pytest.mark.parametrize(("compound", "smiles", "sigma", "measured"), ANILINES)
def test_anilines_follow_4_58_less_2_89_sigma_minus(compound, smiles, sigma, measured):
    value = published(smiles, "primary arylamine")
    assert value == pytest.approx(4.58 - 2.89 * sigma, abs=0.1)
    assert value == pytest.approx(measured, abs=0.3)


BENZOIC_ACIDS = [
    # measured: Serjeant and Dempsey 1979 (memory); by definition 4.20 - 1.00 sigma, Hammett 1940
    ("benzoic acid", "OC(=O)c1ccccc1", 0.0, 4.20),
    ("4-nitrobenzoic acid", "OC(=O)c1ccc([N+](=O)[O-])cc1", 0.78, 3.44),
    ("3-nitrobenzoic acid", "OC(=O)c1cccc([N+](=O)[O-])c1", 0.71, 3.46),
    ("4-methoxybenzoic acid", "COc1ccc(C(=O)O)cc1", -0.27, 4.47),
    ("4-methylbenzoic acid", "Cc1ccc(C(=O)O)cc1", -0.17, 4.37),
    ("3-chlorobenzoic acid", "OC(=O)c1cccc(Cl)c1", 0.37, 3.83),
    ("4-chlorobenzoic acid", "OC(=O)c1ccc(Cl)cc1", 0.23, 3.98),
    ("4-hydroxybenzoic acid", "OC(=O)c1ccc(O)cc1", -0.37, 4.58),
]


@pytest.mark.parametrize(("compound", "smiles", "sigma", "measured"), BENZOIC_ACIDS)
def test_benzoic_acids_follow_4_20_less_sigma(compound, smiles, sigma, measured):
    value = published(smiles, "benzoic acid")
    assert value == pytest.approx(4.20 - sigma, abs=0.03)
    assert value == pytest.approx(measured, abs=0.1)


PHENOLS = [
    # measured: Serjeant and Dempsey 1979 (memory); line 9.92 - 2.23 sigma-: Biggs and Robinson 1961 (memory)
    ("phenol", "Oc1ccccc1", 0.0, 9.99),
    ("3-methylphenol", "Cc1cccc(O)c1", -0.07, 10.09),
    ("4-methylphenol", "Cc1ccc(O)cc1", -0.17, 10.26),
    ("3-chlorophenol", "Oc1cccc(Cl)c1", 0.37, 9.12),
    ("4-chlorophenol", "Oc1ccc(Cl)cc1", 0.19, 9.41),
    ("3-nitrophenol", "Oc1cccc([N+](=O)[O-])c1", 0.71, 8.36),
    ("4-nitrophenol", "Oc1ccc([N+](=O)[O-])cc1", 1.27, 7.15),
    ("4-cyanophenol", "N#Cc1ccc(O)cc1", 1.00, 7.97),
    ("4-hydroxyacetophenone", "CC(=O)c1ccc(O)cc1", 0.84, 8.05),
]


@pytest.mark.parametrize(("compound", "smiles", "sigma", "measured"), PHENOLS)
def test_phenols_follow_9_92_less_2_23_sigma_minus(compound, smiles, sigma, measured):
    value = published(smiles, "naphthol or phenol")
    assert value == pytest.approx(9.92 - 2.23 * sigma, abs=0.15)
    assert value == pytest.approx(measured, abs=0.3)


AMINES = [
    # measured: Perrin 1965 and 1972 (memory); Taft's line along the chain, Hall 1957 (memory)
    ("methylamine", "CN", "primary aliphatic amine", 10.66),
    ("2-methoxyethylamine", "COCCN", "primary aliphatic amine", 9.44),
    ("ethanolamine", "OCCN", "primary aliphatic amine", 9.50),
    ("benzylamine", "NCc1ccccc1", "primary aliphatic amine", 9.34),
    ("2-phenylethylamine", "NCCc1ccccc1", "primary aliphatic amine", 9.84),
    ("allylamine", "C=CCN", "primary aliphatic amine", 9.69),
    ("aminoacetonitrile", "NCC#N", "primary aliphatic amine", 5.34),
    ("3-aminopropionitrile", "NCCC#N", "primary aliphatic amine", 7.8),
    ("glycine ethyl ester", "CCOC(=O)CN", "primary aliphatic amine", 7.73),
    ("dimethylamine", "CNC", "secondary aliphatic amine", 10.77),
    ("diethylamine", "CCNCC", "secondary aliphatic amine", 11.0),
    ("diethanolamine", "OCCNCCO", "secondary aliphatic amine", 8.88),
    ("diallylamine", "C=CCNCC=C", "secondary aliphatic amine", 9.29),
    ("piperidine", "C1CCNCC1", "cyclic secondary amine", 11.12),
    ("morpholine", "C1COCCN1", "cyclic secondary amine", 8.49),
    ("trimethylamine", "CN(C)C", "tertiary aliphatic amine", 9.80),
    ("N-methyldiethanolamine", "CN(CCO)CCO", "tertiary aliphatic amine", 8.52),
    ("dimethylaminoacetonitrile", "CN(C)CC#N", "tertiary aliphatic amine", 4.2),
    ("N-methylmorpholine", "CN1CCOCC1", "cyclic tertiary amine", 7.38),
]


@pytest.mark.parametrize(("compound", "smiles", "site_class", "measured"), AMINES)
def test_amines_follow_their_polar_substituents(compound, smiles, site_class, measured):
    assert published(smiles, site_class) == pytest.approx(measured, abs=0.8)


def test_three_hydroxyethyl_groups_add_up_to_more_than_is_measured_and_one_trifluoromethyl_to_less():
    """Where Taft's line bends: triethanolamine 7.76, trifluoroethylamine 5.7, Perrin 1965 (memory)."""
    assert 6.5 < published("OCCN(CCO)CCO", "tertiary aliphatic amine") < 7.76
    assert 5.7 < published("NCC(F)(F)F", "primary aliphatic amine") < 7.3


def test_the_amines_of_the_line_lie_close_to_it_on_average():
    errors = [abs(published(smiles, name) - measured) for _, smiles, name, measured in AMINES]
    assert sum(errors) / len(errors) < 0.35


# the table of coefficients


def test_the_published_value_stays_beside_the_refined_one():
    rows = [row for rows in coefficients().values() for row in rows]
    refined = {
        (r["owner"], r["anchors"], r["term"]): float(r["value"]) for r in read_model_table("coefficients.csv")
    }
    assert len(rows) > 200
    assert sum(row.key in refined for row in rows) > 100
    for row in rows:
        assert math.isfinite(row.prior)
        assert row.sd > 0, row.key
        assert row.source, row.key
        assert row.value == refined.get(row.key, row.prior), row.key
        if row.key in refined:
            assert row.source.startswith(f"refined on measured rows from {row.prior:g}"), row.key


def test_every_refined_value_belongs_to_a_row_of_the_tables():
    known = {row.key for rows in coefficients().values() for row in rows}
    parents = {row.name for row in site_classes() if row.kind != "none"}
    for row in read_model_table("coefficients.csv"):
        if row["term"] == "parent":
            assert row["owner"] in parents
        else:
            assert (row["owner"], row["anchors"], row["term"]) in known


def test_every_coefficient_belongs_to_a_class_or_a_family():
    owners = {row.name for row in site_classes()} | {row["family"] for row in read_table("families.csv")}
    assert set(coefficients()) - owners == set()
    for rows in coefficients().values():
        for row in rows:
            assert row.term in TERMS
            assert all(anchor in "12345678" for anchor in row.anchors.split()), row.key


def test_the_parent_of_a_class_is_its_own_refined_value_or_the_published_one():
    refined = {
        r["owner"]: float(r["value"]) for r in read_model_table("coefficients.csv") if r["term"] == "parent"
    }
    for row in site_classes():
        if row.kind != "none":
            assert line_of(row).parent == refined.get(row.name, row.parent)


def test_a_coefficient_of_the_class_stands_before_that_of_its_family():
    for row in site_classes():
        if row.kind == "none":
            continue
        steps = [(c.anchors, c.term) for _, (*_, c) in line_of(row).steps]
        assert len(steps) == len(set(steps)), row.name


def test_a_term_that_is_passed_over_for_want_of_its_sort_comes_to_nothing(predictions):
    asked = 0
    for prediction in predictions:
        substituents = Substituents(prediction.lines.graph)
        for site in prediction.lines.sites:
            walks = SiteWalks(substituents, site)
            for anchor in {atom for _, atom in site.anchors}:
                for term, sort in SORTS.items():
                    if sort not in walks.around(anchor):
                        asked += 1
                        assert not list(TERMS[term](walks, anchor)), (term, prediction.parent.smiles)
    assert asked > 1000


def test_an_unknown_term_in_the_table_is_an_error_that_names_the_row(monkeypatch):
    wrong = {
        "owner": "azine",
        "anchors": "1",
        "term": "hamett",
        "coefficient": "-5.9",
        "sd": "1",
        "source": "x",
    }
    monkeypatch.setattr(increments, "read_table", lambda name: (wrong,))
    coefficients.cache_clear()
    try:
        with pytest.raises(ValueError, match=r"coefficients.csv.*'hamett'.*'azine'"):
            coefficients()
    finally:
        monkeypatch.undo()
        coefficients.cache_clear()


def test_an_estimate_is_what_its_terms_say():
    site = site_lines(read_parent("CN")).sites[0]
    terms = (Term("parent", (1,), 1.0, 10.6, "x"), Term("half", (0,), 0.5, -2.0, "x"))
    assert Estimate(site, terms, 0.5).value == pytest.approx(9.6)
