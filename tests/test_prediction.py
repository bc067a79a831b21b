"""Prediction end to end: what every chemist knows, salts and fixed charges, and what is said of non-bases."""

from __future__ import annotations

import math

import pytest
from rdkit import Chem

from basirank.annotation import annotate
from basirank.prediction import LOWEST, Prediction, predict
from basirank.structures import read_parent

PKW = 14.00
"""pKa + pKb at 25 C."""


def steps(prediction: Prediction, kind: str = "base") -> list[float]:
    assert prediction.equilibrium is not None
    return [step.value for step in prediction.equilibrium.steps if step.kind == kind]


def first(prediction: Prediction) -> float:
    return steps(prediction)[0]


def carrier(prediction: Prediction) -> str:
    """Class of the site that carries the first proton."""
    assert prediction.equilibrium is not None
    return prediction.estimates[prediction.equilibrium.steps[0].carrier].site.site_class


# facts of the trade (common practice)

PKB = {
    "ammonia": ("N", 4.75),
    "methylamine": ("CN", 3.36),
    "cyclohexylamine": ("NC1CCCCC1", 3.34),
    "aniline": ("Nc1ccccc1", 9.37),
    "ethylamine": ("CCN", 3.35),
    "dimethylamine": ("CNC", 3.27),
    "trimethylamine": ("CN(C)C", 4.20),
    "pyridine": ("c1ccncc1", 8.77),
    "piperidine": ("C1CCNCC1", 2.88),
    "morpholine": ("C1COCCN1", 5.51),
    "hydrazine": ("NN", 5.9),
    "imidazole": ("c1c[nH]cn1", 7.0),
}


@pytest.fixture(scope="module")
def textbook() -> dict[str, Prediction]:
    """The bases of any textbook, predicted in one batch."""
    return dict(zip(PKB, predict([smiles for smiles, _ in PKB.values()]), strict=True))


@pytest.mark.parametrize("compound", PKB)
def test_pkb_from_any_table(textbook, compound):
    assert PKW - first(textbook[compound]) == pytest.approx(PKB[compound][1], abs=0.5)


def test_aliphatic_amines_lie_close_together_and_aromatic_amines_about_six_units_lower():
    aliphatic = [
        first(p) for p in predict(["CCN", "CCCN", "CC(C)N", "CC(C)(C)N", "CCNCC", "NC1CCCCC1", "CCCCCN"])
    ]
    aromatic = [first(p) for p in predict(["Nc1ccccc1", "Cc1ccc(N)cc1", "Cc1cccc(N)c1", "CNc1ccccc1"])]
    assert max(aliphatic) - min(aliphatic) < 0.7
    gap = sum(aliphatic) / len(aliphatic) - sum(aromatic) / len(aromatic)
    assert gap == pytest.approx(6.0, abs=0.5)


def ordered(*structures: str) -> bool:
    values = [first(p) for p in predict(structures)]
    return values == sorted(values, reverse=True)


@pytest.mark.parametrize(
    ("why", "structures"),
    [
        ("fluorine by fluorine an ethylamine weakens", ("CCN", "FCCN", "FC(F)CN", "FC(F)(F)CN")),
        ("guanidine over amidine over amine over aniline", ("NC(N)=N", "CC(N)=N", "CCN", "Nc1ccccc1")),
        ("oxygen or sulfone in the ring", ("C1CCNCC1", "C1COCCN1", "C1CS(=O)(=O)CCN1")),
        ("hybridisation: sp3, imine, pyridine", ("C1CCNCC1", "CC1=NCCC1", "c1ccncc1")),
        ("the nearer the ether the weaker", ("NCCCCOC", "NCCCOC", "NCCOC")),
        ("amino groups on pyridine", ("Nc1ccncc1", "Nc1ccccn1", "Nc1cccnc1", "c1ccncc1")),
        ("azoles", ("c1c[nH]cn1", "c1cc[nH]n1", "c1nc[nH]n1", "c1nnn[nH]1")),
        ("diazines", ("c1ccncc1", "c1ccnnc1", "c1cncnc1", "c1cnccn1")),
        ("benzylamine between an alkylamine and an aniline", ("CCCN", "NCc1ccccc1", "Nc1ccccc1")),
        ("chlorine in aniline", ("Nc1ccccc1", "Nc1ccc(Cl)cc1", "Nc1cccc(Cl)c1", "Nc1ccccc1Cl")),
        ("nitroanilines", ("Nc1cccc(N(=O)=O)c1", "Nc1ccc(N(=O)=O)cc1", "Nc1ccccc1N(=O)=O")),
        ("acyl groups end basicity", ("CCN", "CC(=O)NC")),
        ("hydroxylamine lies between ammonia and its acyl derivative", ("N", "NN", "NO", "CC(=O)NO")),
    ],
)  # fmt: skip
def test_the_order_of(why, structures):
    assert ordered(*structures), why


@pytest.mark.parametrize(
    ("compound", "smiles", "site_class"),
    [
        ("nicotine", "CN1CCCC1c1cccnc1", "cyclic tertiary amine"),
        ("histamine", "NCCc1c[nH]cn1", "primary aliphatic amine"),
        ("procaine", "CCN(CC)CCOC(=O)c1ccc(N)cc1", "tertiary aliphatic amine"),
        ("4-aminopyridine", "Nc1ccncc1", "pyridine"),
        ("chlorhexidine-like biguanide over aniline", "NC(=N)NC(=N)Nc1ccc(N)cc1", "biguanide"),
        ("acetamide takes the proton on oxygen", "CC(N)=O", "amide"),
    ],
)
def test_the_first_proton_goes_to_the_expected_site(compound, smiles, site_class):
    (prediction,) = predict([smiles])
    assert carrier(prediction) == site_class


# what is said


def test_a_base_is_ok_and_says_nothing_more():
    (prediction,) = predict(["CCN"])
    assert (prediction.status, prediction.message) == ("ok", "")
    assert prediction.forms == ("CC[NH3+]",)


@pytest.mark.parametrize(
    ("compound", "smiles"),
    [
        ("benzene", "c1ccccc1"),
        ("nitrobenzene", "O=[N+]([O-])c1ccccc1"),
        ("acetonitrile", "CC#N"),
        ("acetic acid", "CC(=O)O"),
        ("ethanol", "CCO"),
        ("carbazole", "c1ccc2c(c1)[nH]c1ccccc12"),
        ("tetramethylammonium chloride", "C[N+](C)(C)C.[Cl-]"),
    ],
)
def test_without_a_basic_site_the_status_says_so(compound, smiles):
    (prediction,) = predict([smiles])
    assert prediction.status == "no_basic_site"
    assert "no nitrogen takes a proton" in prediction.message
    assert all(value < LOWEST for value in steps(prediction))


@pytest.mark.parametrize(
    "text", ["", "CC(", "C*", "[Fe]", "C[CH2]", "c1ccccc1>>c1ccccc1", "O", "CC(C)(C)(C)C"]
)
def test_what_cannot_be_computed_is_refused_with_a_reason_and_nothing_else(text):
    (prediction,) = predict([text])
    assert prediction.status == "refused"
    assert prediction.message
    assert prediction.parent is prediction.equilibrium is prediction.sites is None
    assert (prediction.estimates, prediction.forms) == ((), ())


def test_one_bad_structure_does_not_disturb_its_neighbours():
    alone = [predict([smiles])[0] for smiles in ("CCN", "c1ccncc1")]
    among = predict(["CCN", "CC(", "c1ccncc1", 7, None])  # type: ignore[list-item]
    assert [p.status for p in among] == ["ok", "refused", "ok", "refused", "refused"]
    assert [first(among[0]), first(among[2])] == [first(p) for p in alone]


def test_covalent_hydration_is_mentioned():
    (pteridine,) = predict(["c1cnc2ncncc2n1"])
    assert pteridine.status == "ok"
    assert "hydrate" in pteridine.message


def test_a_molecule_is_as_good_as_its_text():
    text, mol = predict(["NCCO", Chem.MolFromSmiles("NCCO")])
    assert steps(text) == steps(mol)
    assert text.forms == mol.forms


def test_an_empty_batch_is_an_empty_list():
    assert predict([]) == []


# intervals and support


def test_every_constant_has_a_positive_interval_and_every_estimate_its_support():
    batch = predict(
        ["CCN", "NCCN", "NCC(=O)O", "c1c[nH]cn1", "CC(N)=O", "NC(=N)N", "Nc1ccncc1", "C[Si](C)(C)N"]
    )
    for prediction in batch:
        for step in prediction.equilibrium.steps:
            assert 0.0 < step.half_width < 8.0
        for estimate in prediction.estimates:
            assert estimate.support in ("supported", "extrapolated")
            assert 0.05 < estimate.half_width < 6.0


def test_an_ordinary_amine_is_supported_and_known_closer_than_a_silylamine():
    amine, silylamine = predict(["CCCCN", "C[Si](C)(C)N[Si](C)(C)C"])
    assert amine.estimates[0].support == "supported"
    assert silylamine.estimates[0].support == "extrapolated"
    assert amine.estimates[0].half_width < silylamine.estimates[0].half_width


# salts and fixed charges


@pytest.mark.parametrize(
    ("salt", "base"),
    [
        ("CCN.Cl", "CCN"),
        ("[Cl-].CC[NH3+]", "CCN"),
        ("CN.Cc1ccc(cc1)S(=O)(=O)O", "CN"),
        ("CS(=O)(=O)O.CCN(CC)CC", "CCN(CC)CC"),
        ("OC(C(O)C(=O)O)C(=O)O.CNC", "CNC"),
        ("[Na+].[O-]C(=O)CN", "NCC(=O)O"),
        ("O.O.Cl.Cl.NCCN", "NCCN"),
    ],
)
def test_a_salt_has_the_constants_of_its_base(salt, base):
    one, other = predict([salt, base])
    assert steps(one) == pytest.approx(steps(other), abs=1e-9)
    assert steps(one, "acid") == pytest.approx(steps(other, "acid"), abs=1e-9)
    assert one.forms == other.forms


@pytest.mark.parametrize(
    ("compound", "smiles", "charge"),
    [
        ("tetramethylammonium", "C[N+](C)(C)C", 1.0),
        ("choline", "OCC[N+](C)(C)C", 1.0),
        ("N-methylpyridinium", "C[n+]1ccccc1", 1.0),
        ("paraquat", "C[n+]1ccc(cc1)-c1cc[n+](C)cc1", 2.0),
        ("betaine", "C[N+](C)(C)CC(=O)[O-]", 0.0),
        ("carnitine", "C[N+](C)(C)CC(O)CC(=O)O", 0.0),
        ("trimethylamine N-oxide", "C[N+](C)(C)[O-]", 0.0),
        ("sodium acetate", "CC(=O)[O-].[Na+]", -1.0),
        ("ethylamine", "CCN", 1.0),
        ("aniline", "Nc1ccccc1", 0.0),
        ("glycine", "NCC(=O)O", 0.0),
        ("lysine", "NCCCCC(N)C(=O)O", 1.0),
        ("glutamic acid", "NC(CCC(=O)O)C(=O)O", -1.0),
        ("citric acid", "OC(=O)CC(O)(CC(=O)O)C(=O)O", -3.0),
        ("edetic acid", "OC(=O)CN(CCN(CC(=O)O)CC(=O)O)CC(=O)O", -2.9),
    ],
)
def test_the_net_charge_in_blood(compound, smiles, charge):
    (prediction,) = predict([smiles])
    assert prediction.equilibrium.states[0].net_charge == pytest.approx(charge, abs=0.3)


def test_a_fixed_charge_lowers_an_amine_near_it():
    """An ammonium ion two carbons away draws electrons and repels the proton (common practice)."""
    charged, plain = predict(["C[N+](C)(C)CCN", "CC(C)CN"])
    assert first(charged) < first(plain) - 1.5


def test_the_dominant_form_is_asked_for_at_several_ph():
    (glycine,) = predict(["NCC(=O)O"], ph=(0.5, 6.0, 12.0))
    assert glycine.forms == ("[NH3+]CC(=O)O", "[NH3+]CC(=O)[O-]", "NCC(=O)[O-]")
    assert [round(state.net_charge) for state in glycine.equilibrium.states] == [1, 0, -1]


# large molecules


def test_more_than_sixteen_sites_are_said_to_be_approximate():
    spermine_like = "NCCCN" + "CCCN" * 18 + "C"
    large, small = predict([spermine_like, "NCCCNCCCN"])
    assert large.equilibrium.approximate
    assert "approximate" in large.message
    assert not small.equilibrium.approximate
    found = steps(large)
    assert len(found) == len(large.estimates) == 20
    assert found == sorted(found, reverse=True)
    assert all(math.isfinite(value) for value in found)


RESIDUES = {
    "G": "NCC(=O)",
    "A": "NC(C)C(=O)",
    "K": "NC(CCCCN)C(=O)",
    "R": "NC(CCCNC(=N)N)C(=O)",
    "H": "NC(Cc1c[nH]cn1)C(=O)",
    "D": "NC(CC(=O)O)C(=O)",
    "E": "NC(CCC(=O)O)C(=O)",
    "C": "NC(CS)C(=O)",
    "Y": "NC(Cc1ccc(O)cc1)C(=O)",
    "W": "NC(Cc1c[nH]c2ccccc12)C(=O)",
}


def test_a_peptide_of_sixty_residues_has_a_charge():
    sequence = "GAKDEHRCYW" * 6
    (peptide,) = predict(["".join(RESIDUES[letter] for letter in sequence) + "O"])
    assert peptide.status == "ok"
    assert peptide.equilibrium.approximate
    # six lysines and six arginines against six aspartates and six glutamates; the ends cancel
    assert peptide.equilibrium.states[0].net_charge == pytest.approx(0.0, abs=2.0)
    assert Chem.MolFromSmiles(peptide.forms[0]) is not None


def test_the_charge_of_the_drawn_form_is_that_of_the_most_populated_microstate():
    for prediction in predict(
        ["NCC(=O)O", "NCCN", "NCCCCC(N)C(=O)O", "C[N+](C)(C)CC(=O)O", "CC(=O)O", "CCN"]
    ):
        state = prediction.equilibrium.states[0]
        form = Chem.MolFromSmiles(prediction.forms[0])
        fixed = Chem.GetFormalCharge(read_parent(prediction.forms[0]).mol)
        held = sum(
            has if estimate.site.kind == "base" else has - 1
            for has, estimate in zip(state.dominant, prediction.estimates, strict=True)
        )
        assert Chem.GetFormalCharge(form) == fixed + held


def test_a_ring_whose_ion_cannot_be_drawn_is_refused_and_costs_its_neighbours_nothing():
    strange = "CCN(CN1CC(cccccc1)c1cc(C)#ccc1O)C(C)C"  # a made-up fused ring with a triple bond
    before, refused, after = predict(["CCN", strange, "CCN"])
    assert refused.status == "refused" and "can't be drawn" in refused.message
    assert before.equilibrium == after.equilibrium and before.status == "ok"


@pytest.mark.parametrize(
    ("compound", "smiles", "constant", "value", "within"),
    [
        # Pearson and Dillon 1953 (memory); Serjeant and Dempsey 1979 (memory)
        ("malononitrile, C-H", "N#CCC#N", "pka_1", 11.2, 0.5),
        ("nitromethane, C-H", "C[N+](=O)[O-]", "pka_1", 10.21, 0.5),
    ],
)
def test_a_carbon_acid_counts_each_acceptor_once(compound, smiles, constant, value, within):
    assert annotate([smiles]).loc[0, constant] == pytest.approx(value, abs=within), compound


@pytest.mark.parametrize(
    ("compound", "smiles"),
    [
        ("tofacitinib, no carbanion at pH 7.4", "CC1CCN(CC1N(C)c1ncnc2[nH]ccc12)C(=O)CC#N"),
        ("1-methylnicotinamide, reduced", "CN1C=CCC(C(N)=O)=C1"),
        ("1,2,4-triazole-3-thione", "S=c1[nH]cn[nH]1"),
    ],
)
def test_a_nearly_neutral_compound_is_neutral_in_blood(compound, smiles):
    assert abs(annotate([smiles]).loc[0, "net_charge"]) < 0.2, compound


def test_two_enamine_carbons_of_one_nitrogen_take_one_proton():
    twofold = annotate(["C=CN(C)C=C"]).loc[0]
    assert twofold["net_charge"] <= 1.0
    assert not twofold["pkah_2"] > 3
