"""Acid-base extraction: distribution against pH, washes, separations as the textbooks do them, and their limits."""

from __future__ import annotations

import json
from itertools import product
from pathlib import Path

import numpy as np
import pytest
from conftest import table
from hypothesis import given, settings
from hypothesis import strategies as st
from rdkit import Chem

import basirank
from basirank.extraction import Compound, Setting, reach
from basirank.hazards import hazards_of
from basirank.mixtures import plan_of
from basirank.partition import Partition, Steps, comes_out_of_water, remaining, stays_in_organic, steps_of
from basirank.prediction import predict
from basirank.separation import SEPARATED, Mixture, best_scheme, scores, shares
from basirank.tables import read_table

# pKa or pKaH, CRC Handbook (memory), and log P in octanol, Hansch, Leo and Hoekman 1995 (memory)
BENZOIC = Partition(Steps.exact([4.20], -1), 1.87)
PHENOL = Partition(Steps.exact([9.99], -1), 1.46)
ANILINE = Partition(Steps.exact([4.60], 0), 0.90)
BENZYLAMINE = Partition(Steps.exact([9.33], 0), 1.09)
NAPHTHALENE = Partition(Steps.exact([], 0), 3.30)


def test_the_distribution_of_an_amine_falls_below_its_pkah():
    """K = 3.0, Ka = 1.0e-9, 50 mL of water and 100 mL of solvent: 15 % stays at pH 10.00, 65 % at pH 8.00 (Harris,
    Quantitative Chemical Analysis, section on the effect of pH on extraction, memory)."""
    amine = Partition(Steps.exact([9.0], 0), np.log10(3.0), (20.0, 20.0))
    d = amine.coefficients([10.0, 8.0])[0]
    assert d == pytest.approx([3.0 / 1.1, 3.0 / 11.0], rel=1e-6)
    out = comes_out_of_water(d, aqueous=50.0, organic=100.0, times=1)
    assert 1.0 - out == pytest.approx([0.15, 0.65], abs=0.005)


def test_several_small_portions_do_more_than_a_large_one():
    """D = 3, 100 mL of water: 6.2 % stays after one portion of 500 mL, 0.098 % after five of 100 mL (Harris,
    Quantitative Chemical Analysis, example on extraction efficiency, memory)."""
    assert float(remaining(3 * 500 / 100, 1)) == pytest.approx(0.062, abs=0.001)
    assert float(remaining(3 * 100 / 100, 5)) == pytest.approx(0.00098, abs=0.00001)


@pytest.mark.parametrize(
    "compound, log_p, ph",
    [(ANILINE, 0.90, 3.0), (BENZOIC, 1.87, 6.0)],
)
def test_d_is_p_over_one_plus_the_ratio_of_ions(compound, log_p, ph):
    """D = P / (1 + 10^(pKaH - pH)) for a base, P / (1 + 10^(pH - pKa)) for an acid (any textbook)."""
    constant = compound.steps.ladder.constants[0]
    sign = 1 if compound is ANILINE else -1
    bare = Partition(compound.steps, log_p, (20.0, 20.0))
    expected = 10**log_p / (1 + 10 ** (sign * (constant - ph)))
    assert bare.coefficients([ph])[0, 0] == pytest.approx(expected, rel=1e-6)


def test_the_zwitterion_of_an_amino_acid_stays_in_water_at_every_ph():
    """Phenylalanine: D in octanol is about 0.04 (Hansch, Leo and Hoekman 1995: log D -1.38, memory), so that two
    portions bring back some 4 %; no pH helps."""
    (found,) = basirank.workup(["NC(Cc1ccccc1)C(=O)O"]).compounds
    assert found.kind == "amphoteric" and any("zwitterion" in text for text in found.cautions)
    assert found.back.ph is None and found.back.best < 0.2
    assert found.into_water.ranges == ((1.0, 13.0),)


partitions = st.builds(
    lambda constants, acids, log_p, part, width: Partition(
        Steps(
            Steps.exact(sorted(constants, reverse=True), -min(acids, len(constants))).ladder,
            np.full(len(constants), width),
            np.arange(len(constants)) < acids,
            part,
        ),
        log_p,
    ),
    st.lists(st.floats(-1, 15), max_size=4),
    st.integers(0, 2),
    st.floats(-3, 7),
    st.floats(0, 1),
    st.floats(0, 2),
)


@settings(deadline=None)
@given(partition=partitions, times=st.integers(1, 6), aqueous=st.floats(1, 500), organic=st.floats(1, 500))
def test_what_goes_and_what_stays_is_all_there_was(partition, times, aqueous, organic):
    d = partition.coefficients(np.linspace(0, 14, 57))
    stays = stays_in_organic(d, aqueous=aqueous, organic=organic, times=times)
    out = comes_out_of_water(d, aqueous=aqueous, organic=organic, times=times)
    assert ((stays >= 0) & (stays <= 1) & (out >= 0) & (out <= 1)).all()
    more = stays_in_organic(d, aqueous=aqueous, organic=organic, times=times + 1)
    assert (more <= stays + 1e-12).all()
    once = stays_in_organic(d, aqueous=aqueous, organic=organic, times=1)
    back = comes_out_of_water(d, aqueous=aqueous, organic=organic, times=1)
    assert once == pytest.approx(back, abs=1e-9)  # one equilibrium, from either side


@settings(deadline=None, max_examples=50)
@given(partition=partitions, aim=st.floats(0.5, 0.999))
def test_a_ph_with_margin_is_also_one_without(partition, aim):
    setting = Setting(aim=aim)
    found = reach(partition, setting, setting.returns)
    for low, high in found.sure:
        assert any(first <= low and high <= last for first, last in found.ranges)
    if found.ph is not None:
        share = setting.returns(partition.coefficients([found.ph]))[0]
        assert share[0] >= aim - 1e-9
    else:
        assert found.best < aim


def test_the_ladder_of_a_prediction_brings_its_intervals_along():
    (found,) = predict(["NCCCCC(N)C(=O)O"])
    steps = steps_of(found.sites, found.equilibrium)
    assert sorted(steps.half_width) == pytest.approx(
        sorted(step.half_width for step in found.equilibrium.steps)
    )
    assert steps.is_acid.sum() == 1 and steps.is_acid[np.argmin(steps.ladder.constants)]
    assert len(steps.ladders()) == 5  # as they are, and base and acid steps low or high
    assert steps.shifted(1.0, -1.0).constants == pytest.approx(
        steps.ladder.constants + np.where(steps.is_acid, -1, 1) * steps.half_width
    )


def plan(*parts: Partition, amounts=None, **setting):
    """Plan for a mixture of compounds with measured constants."""
    amounts = amounts or [1.0] * len(parts)
    compounds = [
        Compound(f"compound {n}", "", "", kind="neutral" if not len(one.steps.ladder.constants) else "ion",
                 partition=one, amount=amount)
        for n, (one, amount) in enumerate(zip(parts, amounts, strict=True))
    ]  # fmt: skip
    return plan_of(compounds, Setting(**setting))


def test_benzoic_acid_aniline_and_naphthalene_come_apart_in_two_washes():
    """The standard separation of organic laboratory work: acid takes aniline, base takes benzoic acid, naphthalene
    stays (Pavia, Lampman, Kriz and Engel, Introduction to Organic Laboratory Techniques, memory)."""
    found = plan(BENZOIC, ANILINE, NAPHTHALENE)
    acid, base, neutral = found.places
    assert len(found.washes) == 2 and found.worst > 0.9
    assert base.ph <= 3.5 and base.back_ph >= 6.0
    assert acid.ph >= 6.5 and acid.back_ph <= 4.5
    assert neutral.wash is None and neutral.purity > 0.98


def test_mild_base_takes_a_carboxylic_acid_and_leaves_a_phenol():
    """Bicarbonate, pH about 8.3, takes benzoic acid but not phenol; sodium hydroxide takes both (any textbook)."""
    d = [one.coefficients([8.3, 13.5])[0] for one in (BENZOIC, PHENOL)]
    benzoic, phenol = (stays_in_organic(one, aqueous=50, organic=50, times=2) for one in d)
    assert benzoic[0] < 0.01 and phenol[0] > 0.9
    assert phenol[1] < 0.01
    found = plan(BENZOIC, PHENOL)
    assert not any(one.why for one in found.places)
    assert found.places[0].ph < 9 and found.places[1].wash is None


def test_bases_of_different_strength_come_apart():
    """Aniline, 4.6, and benzylamine, 9.3: a buffer between takes the stronger one."""
    found = plan(ANILINE, BENZYLAMINE, NAPHTHALENE, washes=3, organic=100)
    assert found.separated == 3
    aniline, benzylamine, _ = found.places
    assert (aniline.wash, aniline.back_ph) != (benzylamine.wash, benzylamine.back_ph)


def test_five_classes_come_apart():
    found = plan(BENZOIC, PHENOL, ANILINE, BENZYLAMINE, NAPHTHALENE)
    assert found.separated == 5 and found.worst >= SEPARATED
    assert len({(one.wash, one.back_ph) for one in found.places}) == 5
    assert all(
        one.least_recovery == pytest.approx(one.recovery) for one in found.places
    )  # constants are exact


def test_intervals_lower_the_recovery_that_is_sure():
    """Two bases a unit apart: the wash between them lies within the intervals of both."""
    found = basirank.workup(["CCCc1ccncc1", "Nc1ccccc1Cl"]).plan
    assert all(one.least_recovery <= one.recovery + 1e-9 for one in found.places)
    assert any(one.least_recovery < one.recovery - 0.05 for one in found.places)


def test_what_ph_cannot_separate_is_said_with_the_reason():
    """Two neutral compounds; two alike amines."""
    found = basirank.workup(["c1ccc2ccccc2c1", "CCc1ccccc1CC"], names=["naphthalene", "diethylbenzene"])
    assert found.plan.washes == () and "neither it nor diethylbenzene" in found.plan.places[0].why
    assert "No wash separates anything" in str(found)
    found = basirank.workup(["CCCCCCN", "CCCCCCCN"], names=["hexylamine", "heptylamine"])
    assert found.plan.separated == 0
    assert all("differ by no more than" in one.why for one in found.plan.places)


def test_a_small_neutral_ester_is_lost_to_water_at_any_ph():
    """Ethyl acetate, log P 0.73 (Hansch, Leo and Hoekman 1995, memory)."""
    found = basirank.workup(["CCOC(C)=O", "CCCCCCCCN"], log_p=[0.73, None])
    (ester, _) = found.compounds
    assert ester.into_water.ph is None and ester.back.ph is None and ester.back.portions > 2
    assert any("solvent" in text for text in ester.cautions)


def test_amounts_count_in_the_purity():
    """A hundredfold excess of a compound of which 1 % goes along makes the other no purer than half."""
    even, excess = plan(BENZOIC, PHENOL), plan(BENZOIC, PHENOL, amounts=[1.0, 100.0])
    assert excess.places[0].purity < even.places[0].purity


@settings(deadline=None, max_examples=40)
@given(
    stays=st.lists(st.lists(st.floats(0, 1), min_size=4, max_size=4), min_size=2, max_size=3),
    amounts=st.lists(st.floats(0.1, 10), min_size=3, max_size=3),
    data=st.data(),
)
def test_no_sequence_of_washes_separates_more_than_the_chosen_one(stays, amounts, data):
    """Every sequence of up to two washes, each followed by hand."""
    n = len(stays)
    ph, yes = np.array([2.0, 5.0, 8.0, 11.0]), np.ones(n, dtype=bool)
    mixture = Mixture(
        ph, [np.array([one]) for one in stays], np.array(amounts[:n]), np.zeros((n, 4), dtype=bool), yes, yes
    )
    found = best_scheme(mixture, 2)

    def by_hand(sequence):
        left, layers = np.ones(n), []
        for place in sequence:
            kept = left * np.array([one[place] for one in stays])
            layers.append(left - kept)
            left = kept
        layers.append(left)
        held = np.array(layers) * mixture.amounts
        return (np.array(layers) * held / np.maximum(held.sum(axis=1, keepdims=True), 1e-300)).max(axis=0)

    everything = [by_hand(sequence) for length in range(3) for sequence in product(range(4), repeat=length)]
    most = max((values >= SEPARATED).sum() for values in everything)
    got = by_hand([int(np.flatnonzero(ph == value)[0]) for value in found.ph])
    assert found.recovery * found.purity == pytest.approx(got, abs=1e-9)
    assert (got >= SEPARATED - 0.005).sum() >= most  # pH values alike to 0.001 are one to the search
    order = data.draw(st.permutations(range(n)))
    turned = Mixture(
        ph, [np.array([stays[k]]) for k in order], mixture.amounts[list(order)], mixture.hazards, yes, yes
    )
    assert best_scheme(turned, 2).ph == found.ph


def test_shares_of_all_layers_add_up_to_one():
    stay = np.random.default_rng(0).random((5, 7))
    found = shares(stay, np.array([[0, 1, 2], [6, 6, 0]]))
    assert found.shape == (5, 2, 4) and found.sum(axis=-1) == pytest.approx(1.0)
    one = Mixture(np.arange(7.0), [row[None] for row in stay], np.ones(5), np.zeros((5, 7), dtype=bool),
                  np.ones(5, dtype=bool), np.arange(5) > 0)  # fmt: skip
    assert scores(found, one)[0, :, -1].tolist() == [0.0, 0.0]  # may not be looked for in what is left


@pytest.mark.parametrize("row", read_table("workup_hazards.csv"), ids=lambda row: row["name"])
def test_each_hazard_is_found_in_its_example_and_not_in_its_neighbour(row):
    def names(smiles):
        return {one.name for one in hazards_of(Chem.MolFromSmiles(smiles), 0.0, 14.0)}

    assert row["name"] in names(row["example"])
    assert row["name"] not in names(row["without"])
    assert row["below"] or row["above"]
    assert row["source"]


@pytest.mark.parametrize(
    "smiles",
    ["CN1CCN(CC1)C(c1ccccc1)c1ccccc1", "COc1ccccc1", "c1ccc2c(c1)OCO2", "OC1CCCCC1", "COC1OC(CO)C(O)C(O)C1O",
     "OC(=O)CN"],
    ids=["cyclizine", "anisole", "benzodioxole", "cyclohexanol", "methyl glucoside", "glycine"],
)  # fmt: skip
def test_what_stands_acid_and_base_has_no_hazard(smiles):
    assert hazards_of(Chem.MolFromSmiles(smiles), 1.0, 13.0) == ()


def test_a_milder_ph_is_taken_where_a_group_would_react():
    """Phenyl acetate with a phenol: as little above pH 10 as the separation allows, and it is said."""
    done = basirank.workup(
        ["CC(=O)Oc1ccc(C(C)(C)C)cc1", "Oc1ccc([N+](=O)[O-])cc1"], names=["aryl acetate", "4-nitrophenol"]
    )
    assert all(ph < 10 for ph in done.plan.washes) and "Mind:" not in str(done)
    assert "ester of a phenol" in str(done)
    done = basirank.workup(["CC(=O)Oc1ccc(C(C)(C)C)cc1", "Oc1ccc(CCCC)cc1"], names=["aryl acetate", "phenol"])
    assert "Mind: aryl acetate meets pH" in str(done)


def test_ions_of_a_fat_amine_stay_in_octanol_as_pairs_unless_told_otherwise():
    """Amitriptyline, log P 4.9: its ion pair, three units lower, still prefers octanol (Avdeef 2003, memory)."""
    amine = "CN(C)CCC=C1c2ccccc2CCc2ccccc12"
    pairs, none = (basirank.workup([amine], log_p=[4.92], ion_pairs=both) for both in ((3, 4), (20, 20)))
    assert pairs.compounds[0].into_water.ph is None and pairs.compounds[0].into_water.portions is None
    assert none.compounds[0].into_water.ph < 5
    assert any("ion pairs hold it" in text for text in pairs.compounds[0].cautions)
    assert not any("ion pairs hold it" in text for text in none.compounds[0].cautions)


def test_a_permanent_charge_stays_in_water():
    (found,) = basirank.workup(["C[N+](C)(C)Cc1ccccc1"]).compounds
    assert found.kind == "permanent ion" and found.partition.log_p is None
    assert found.into_water.ranges == ((1.0, 13.0),) and found.back.best == 0.0


def test_own_measurements_move_the_ph():
    """Where a user's measured constant of a like compound lies lower, the wash must be more acid."""
    local = basirank.condition([("CCCCc1ccc(CN)cc1", 8.3)])
    plain, moved = (
        basirank.workup(["CCCc1ccc(CN)cc1"], local=given, ion_pairs=(20, 20)) for given in (None, local)
    )
    assert moved.compounds[0].into_water.ranges[0][1] < plain.compounds[0].into_water.ranges[0][1] - 0.3


LIST = """smiles,name,logp,amount,status
OC(=O)c1ccccc1,benzoic acid,1.87,1,a
Nc1ccccc1,aniline,0.90,1,b
C1CC,broken,1,1,c
c1ccc2ccccc2c1,naphthalene,3.30,2,d
CCO,ethanol,high,1,e
"""


def test_workup_writes_every_row_of_a_list(run, folder):
    Path("mix.csv").write_text(LIST)
    options = ("--logp-column", "logp", "--amount-column", "amount")
    result = run("workup", "mix.csv", *options, "-o", "plan.csv")
    assert result.exit_code == 0, result.stderr
    rows = table(Path("plan.csv").read_text())
    assert [row["status"] for row in rows] == ["ok", "ok", "refused", "ok", "refused"]
    assert [row["input_status"] for row in rows] == list("abcde")
    assert "logp must be a number, not 'high'" in rows[4]["message"]
    assert [row["wash"] for row in rows] == ["2", "1", "", "", ""]
    assert float(rows[3]["recovery"]) > 0.99 and rows[0]["log_p_source"] == "given"
    assert "broken: refused" in result.stderr
    result = run("workup", "mix.csv", *options, "-o", "plan.json")
    told = json.loads(Path("plan.json").read_text())
    assert [one["return_ph"] for one in told["plan"]["washes"]] == [
        [float(row["return_ph"])] for row in (rows[1], rows[0])
    ]
    assert told["compounds"][2]["status"] == "refused" and "no basis for dosing" in told["note"]
    result = run("workup", "mix.csv", *options, "-o", "plan.svg")
    picture = Path("plan.svg").read_text()
    for word in ("benzoic acid", "wash 1, pH", "water 2, pH", "share / %", "2 x 50 mL of water"):
        assert word in picture


def test_the_text_of_workup_has_each_compound_its_ph_and_the_caution(run, folder):
    Path("mix.csv").write_text(LIST)
    text = run("workup", "mix.csv", "--logp-column", "logp", "--temperature", "35").stdout
    assert "At 35 C" in text and "3 of 3 compounds separated" in text
    assert text.count("no basis for dosing") == 1
    assert "broken: refused: cannot be read as SMILES" in text
    alone = run("workup", "mix.csv", "--alone").stdout
    assert "Separation" not in alone and "aniline" in alone


def test_workup_and_salts_write_a_table_to_standard_output(run, folder):
    Path("one.sdf").write_text(Chem.MolToMolBlock(Chem.MolFromSmiles("NCc1ccccc1")) + "$$$$\n")
    for command in ("workup", "salts"):
        (row, *_) = table(run(command, "one.sdf", "-o", "-").stdout)
        assert row["status"] == "ok", command


def test_a_long_list_is_no_mixture(run):
    result = run("workup", *(f"{'C' * n}N amine-{n}" for n in range(1, 15)))
    assert result.exit_code == 0 and "up to 12 compounds" in result.stderr
    assert "Separation" not in result.stdout and "amine-14" in result.stdout


@pytest.mark.parametrize(
    "arguments, words",
    [
        (("CCN", "--aim", "1"), "aim must lie between"),
        (("CCN", "--washes", "0"), "number of washes must lie between"),
        (("CCN", "--aqueous", "x"), "volume of water must be a number"),
        (("CCN", "--from", "9", "--to", "3"), "must ascend"),
        (("CCN", "--to", "15"), "highest pH must lie between 0 and 14"),
        (("CCN", "--logp-column", "logp"), "no column 'logp'"),
        (("CCN", "-o", "plan.pdf"), "unknown ending"),
        (("CCN", "--ion-pairs", "3", "-1"), "ion pair must lie between"),
        (("C", "CN", "CCN", "CCCN", "CCCCN", "CNC", "CCNC", "-o", "x.svg"), "1 to 6 compounds, not 7"),
    ],
)
def test_a_wrong_call_of_workup_is_one_line(run, folder, arguments, words):
    result = run("workup", *arguments)
    assert result.exit_code == 2 and result.stdout == ""
    assert result.stderr.count("\n") == 1 and words in result.stderr
    assert list(folder.iterdir()) == []


def test_lists_of_different_lengths_are_an_error():
    with pytest.raises(ValueError, match="1 log P values for 2 structures"):
        basirank.workup(["CCN", "CNC"], log_p=[1.0])
