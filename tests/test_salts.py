"""Counter-ions by difference of constants, the step that makes the salt, and solubility against pH."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from conftest import table
from hypothesis import given, settings
from hypothesis import strategies as st
from rdkit import Chem

import basirank
from basirank.partition import Steps
from basirank.salt_selection import listed, salt_likelihood, side_of, verdict
from basirank.salts import listed_kinds
from basirank.solubility import Dissolution, concentration, ph_of_maximum
from basirank.tables import read_table


def candidate(structure: str, salt: str, **options):
    """The one counter-ion of a compound whose salt has that name."""
    found = basirank.counter_ions(structure, **options)
    return next(one for side in found.sides for one in side.candidates if one.ion.salt == salt)


@pytest.mark.parametrize(
    "delta, share", [(-1.0, 0.11), (0.0, 0.28), (1.0, 0.45), (2.0, 0.62), (3.0, 0.79), (4.0, 0.96)]
)
def test_the_share_of_salts_rises_by_17_percent_a_unit(delta, share):
    """P = 17 dpKa + 28 in percent, -1 to 4 (Cruz-Cabeza, CrystEngComm 14 (2012) 6362, abstract, memory)."""
    assert salt_likelihood(delta) == pytest.approx(share)


@given(st.floats(-20, 20), st.floats(0, 5))
def test_a_larger_difference_makes_a_salt_no_less_likely(delta, more):
    assert salt_likelihood(delta) <= salt_likelihood(delta + more)
    order = ["cocrystal or mixture", "salt or cocrystal", "salt"]
    assert order.index(verdict(delta)) <= order.index(verdict(delta + more))
    assert 0.10 < salt_likelihood(delta) < 0.97


@pytest.mark.parametrize(
    "structure, salt",
    [
        ("CCOC(=O)C1=C(COCCN)NC(C)=C(C(=O)OC)C1c1ccccc1Cl", "besylate"),
        ("CNC1CCC(c2ccc(Cl)c(Cl)c2)c2ccccc12", "hydrochloride"),
        ("CC(C)NCC(O)COc1ccc(CCOC)cc1", "succinate"),
        ("CC(C)NCC(O)COc1ccc(CCOC)cc1", "tartrate or hydrogentartrate"),
        ("CCC(=C(c1ccccc1)c1ccc(OCCN(C)C)cc1)c1ccccc1", "citrate"),
        ("CNS(=O)(=O)Cc1ccc2[nH]cc(CCN(C)C)c2c1", "succinate"),
        ("CCN(C)C(=O)Oc1cccc(C(C)N(C)C)c1", "tartrate or hydrogentartrate"),
        ("COc1ccc2cc(C(C)C(=O)O)ccc2c1", "sodium"),
        ("CC(C)Cc1ccc(C(C)C(=O)O)cc1", "lysine"),
        ("O=C(c1ccccc1)c1ccc2n1CCC2C(=O)O", "tromethamine"),
        ("O=C(O)Cc1ccccc1Nc1c(Cl)cccc1Cl", "diethylamine"),
    ],
    ids=["amlodipine", "sertraline", "metoprolol", "metoprolol tartrate", "tamoxifen", "sumatriptan", "rivastigmine",
         "naproxen", "ibuprofen", "ketorolac", "diclofenac"],
)  # fmt: skip
def test_salts_on_the_market_keep_the_rule_of_two_to_three(structure, salt):
    """All are marketed as this salt (British Pharmacopoeia; product information, memory)."""
    found = candidate(structure, salt)
    assert found.rule == "yes" and found.likelihood >= 0.75
    assert found.verdict == "salt" or found.high > 4.0


def test_caffeine_makes_cocrystals_with_dicarboxylic_acids_but_a_salt_with_hydrogen_chloride():
    """Cocrystals with malonic, maleic and glutaric acid: Trask, Motherwell and Jones 2005, Cryst. Growth Des. 5, 1013
    (memory); the hydrochloride is a known salt."""
    caffeine = "Cn1cnc2c1c(=O)n(C)c(=O)n2C"
    for salt in ("malonate", "glutarate", "maleate"):
        assert candidate(caffeine, salt).verdict != "salt"
    assert candidate(caffeine, "glutarate").verdict == "cocrystal or mixture"
    assert candidate(caffeine, "hydrochloride").verdict == "salt"


@pytest.mark.parametrize(
    "name, structure, charge, constant",
    [
        ("glycine: the carboxylate takes the proton of the hydrochloride", "NCC(=O)O", 1, 2.35),
        ("glycine: the ammonium gives the proton of the sodium salt", "NCC(=O)O", -1, 9.78),
        ("histidine: the imidazole takes it", "NC(Cc1c[nH]cn1)C(=O)O", 1, 6.04),
        ("lysine: the alpha-ammonium of the dication of its zwitterion", "NCCCCC(N)C(=O)O", 1, 9.06),
        ("aspartic acid: the second carboxyl gives it", "NC(CC(=O)O)C(=O)O", -1, 3.90),
        ("ethylenediamine: its first proton", "NCCN", 1, 9.92),
    ],
)
def test_the_step_that_makes_the_salt_starts_without_net_charge(name, structure, charge, constant):
    """CRC Handbook, table of amino acids and bases (memory)."""
    found = basirank.counter_ions(structure)
    (side,) = [one for one in found.sides if one.charge == charge]
    assert side.constant == pytest.approx(constant, abs=0.6)
    assert side.half_width > 0


def test_a_diamine_takes_two_hydrogen_chlorides_and_only_one_acetic_acid_for_sure():
    """1,2-Diaminoethane 9.92, 6.86 and piperazine 9.73, 5.33 (CRC Handbook, memory): dihydrochlorides are sold."""
    side = side_of(Steps.exact([9.92, 6.86], 0), 1)
    by_salt = {one.ion.salt: one for one in side.candidates}
    assert by_salt["hydrochloride"].second_ion == pytest.approx(6.86 + 6.1)
    assert by_salt["acetate"].delta == pytest.approx(9.92 - 4.756)
    assert by_salt["acetate"].second_ion == pytest.approx(6.86 - 4.756)
    assert by_salt["sulfate or hydrogensulfate"].second_proton == pytest.approx(9.92 - 1.99)
    assert by_salt["hydrochloride"].second_proton is None
    deltas = [one.delta for one in side.candidates]
    assert deltas == sorted(deltas, reverse=True)


def test_the_interval_of_the_constant_goes_through_to_the_share():
    found = candidate("Nc1ccccc1", "fumarate")
    side = basirank.counter_ions("Nc1ccccc1").sides[0]
    assert found.low == pytest.approx(found.delta - side.half_width)
    assert (
        found.least == pytest.approx(salt_likelihood(found.low))
        and found.least < found.likelihood < found.most
    )


def test_a_permanent_charge_and_a_hydrocarbon_have_no_salt_to_choose(run):
    assert basirank.counter_ions("C[N+](C)(C)CCO").sides == ()
    text = run("salts", "C[N+](C)(C)CCO choline", "c1ccccc1C toluene").stdout
    assert "a permanent charge" in text and "neither takes a proton" in text


@pytest.mark.parametrize("kind", ["acid", "base"])
def test_each_counter_ion_of_the_tables_is_also_taken_off_a_salt(kind):
    """What is proposed here must be recognised when it comes back in a structure."""
    kinds = listed_kinds()
    rows = read_table(f"counter_{kind}s.csv")
    assert len(rows) == len(listed(kind)) == len({row["salt"] for row in rows})
    for row in rows:
        mol = Chem.MolFromSmiles(row["smiles"])
        assert mol is not None and row["source"] and row["constants"].split(), row
        if row["class"] != "metal":
            Chem.RemoveStereochemistry(mol)
            assert Chem.MolToSmiles(mol) in kinds, row["name"]
        values = [float(text) for text in row["constants"].split()]
        assert values == sorted(values, reverse=kind == "base"), row["name"]


def test_constants_of_acids_without_carbon_agree_with_those_of_titrations():
    titrated = {
        Chem.CanonSmiles(row["smiles"]): row["constants"].split() for row in read_table("inorganic_acids.csv")
    }
    for row in read_table("counter_acids.csv"):
        for own, other in zip(
            row["constants"].split(), titrated.get(Chem.CanonSmiles(row["smiles"]), ()), strict=False
        ):
            assert float(own) < 0 if other == "strong" else float(own) == float(other), row["name"]


def test_own_constants_lie_near_those_that_the_package_predicts():
    """The tables against the estimate for the same molecules: a slip of a line would show."""
    for kind, side in (("acid", -1), ("base", 1)):
        rows = [
            row
            for row in read_table(f"counter_{kind}s.csv")
            if row["class"] not in ("metal", "quaternary", "mineral", "sulfonic", "enol")
        ]
        near = []
        for row in rows:
            found = basirank.counter_ions(row["smiles"], side="acid" if side < 0 else "base")
            near.append(abs(found.sides[0].constant - float(row["constants"].split()[0])))
        assert np.median(near) < 0.3 and max(near) < 2.0, [row["name"] for row in rows]


def test_phenobarbital_separates_where_the_textbook_says():
    """pKa 7.41, S0 0.0050 mol/L, 0.039 mol/L of the sodium salt: the free acid separates below pH 8.24 (Martin,
    Physical Pharmacy, chapter on solubility, memory)."""
    acid = Dissolution(Steps.exact([7.41], -1), 0.0050, None, -1, 232.2)
    assert acid.at([8.24])[0] == pytest.approx(0.039, abs=0.0005)


def test_two_units_below_its_pkah_a_base_dissolves_a_hundredfold():
    """S = S0 (1 + 10^(pKaH - pH)) (any textbook); a second step adds its own."""
    one = Dissolution(Steps.exact([8.0], 0), 1.0, None, 1, 100.0)
    two = Dissolution(Steps.exact([8.0, 5.0], 0), 1.0, None, 1, 100.0)
    ph = np.array([4.0, 6.0, 8.0, 10.0])
    assert one.at(ph) == pytest.approx(1 + 10 ** (8.0 - ph))
    assert two.at(ph) == pytest.approx(1 + 10 ** (8.0 - ph) + 10 ** (13.0 - 2 * ph))


@settings(deadline=None)
@given(
    constant=st.floats(4, 11),
    intrinsic=st.floats(-7, -3),
    above=st.floats(0.5, 4),
    charge=st.sampled_from([1, -1]),
)
def test_salt_and_free_form_meet_at_the_ph_of_maximum_solubility(constant, intrinsic, above, charge):
    """Bogardus and Blackwood 1979 (memory): there both are solid. Away from it less is dissolved."""
    salt = 10 ** (intrinsic + above)
    steps = Steps.exact([constant], 0 if charge > 0 else -1)
    solution = Dissolution(steps, 10**intrinsic, salt, charge, 300.0)
    found, half = solution.ph_max
    assert half == 0.0 and found == pytest.approx(ph_of_maximum(constant, 10**intrinsic, salt, charge))
    if 4.0 < found < 10.0 and salt > 1e-3:  # where neither H+ nor OH- is anything beside the salt
        top = solution.at([found])[0]
        assert top == pytest.approx(salt + 10**intrinsic, rel=0.2)
        assert solution.at([found + charge])[0] < 0.5 * top
        assert solution.at([found - charge])[0] < 1.05 * top


@settings(deadline=None)
@given(
    constants=st.lists(st.floats(1, 12), min_size=1, max_size=3),
    salt=st.floats(-5, 0),
    ph=st.floats(0, 14),
    charge=st.sampled_from([1, -1]),
)
def test_where_the_salt_is_the_solid_its_ions_keep_their_product(constants, salt, ph, charge):
    """Charge balance with the counter-ion alone beside H+ and OH-: [ion] [counter-ion] = Ksp."""
    bare = 0 if charge > 0 else -len(constants)
    steps = Steps.exact(sorted(constants, reverse=True), bare)
    ksp = 10 ** (2 * salt)
    solution = Dissolution(steps, 1e9, 10**salt, charge, 300.0)  # the free form is no limit
    dissolved = float(solution.at([ph])[0])
    ion = dissolved * float(steps.ladder.shares([ph])[0, -bare + charge])
    counter = charge * (dissolved * float(steps.ladder.charge([ph])[0]) + 10.0**-ph - 10.0 ** (ph - 14))
    if dissolved < 1e6 and ion > 1e-9:
        assert ion * counter == pytest.approx(ksp, rel=1e-4, abs=1e-12)


@pytest.mark.parametrize(
    "text, mol_per_litre",
    [("0.1", 0.0004), ("0.1 mg/mL", 0.0004), ("100 ug/mL", 0.0004), ("100 µg/mL", 0.0004), ("0.1g/L", 0.0004),
     ("4e-4 mol/L", 0.0004), ("0.4mM", 0.0004), (0.1, 0.0004)],
)  # fmt: skip
def test_a_solubility_may_have_its_unit(text, mol_per_litre):
    assert concentration(text, 250.0) == pytest.approx(mol_per_litre)


def test_a_low_ph_of_maximum_solubility_is_a_risk_of_disproportionation(run):
    text = run(
        "salts", "Nc1ccccc1 aniline", "--solubility", "0.1", "--salt-solubility", "50", "--top", "3"
    ).stdout
    assert "disproportionation is a risk" in text
    text = run("salts", "CCN(CC)CC", "--solubility", "10", "--salt-solubility", "50", "--top", "3").stdout
    assert "below it the salt is the stable solid" in text


def test_salts_writes_a_row_for_each_counter_ion(run, folder):
    result = run("salts", "NCC(=O)O glycine", "C1CC bad", "CCC propane", "-o", "s.csv", "--top", "4")
    assert result.exit_code == 0, result.stderr
    rows = table(Path("s.csv").read_text())
    assert [row["status"] for row in rows] == ["ok"] * 8 + ["refused", "no_salt"]
    assert [row["side"] for row in rows[:8]] == ["base"] * 4 + ["acid"] * 4
    assert float(rows[0]["delta_pka"]) == pytest.approx(
        float(rows[0]["step_constant"]) - float(rows[0]["counter_ion_pk"]), abs=0.011
    )
    assert "cannot be read as SMILES" in rows[8]["message"] and "bad: refused" in result.stderr


def test_salts_writes_json_and_a_picture(run, folder):
    options = ("--solubility", "0.1 mg/mL", "--ksp", "1e-3", "--ph", "2", "--ph", "7.4")
    result = run(
        "salts", "CCN(CC)CCOC(=O)c1ccc(N)cc1 procaine", *options, "-o", "s.json", "--class", "sulfonic"
    )
    assert result.exit_code == 0, result.stderr
    (told,) = json.loads(Path("s.json").read_text())["compounds"]
    ions = told["sides"][0]["counter_ions"]
    assert {one["class"] for one in ions} == {"sulfonic"} and all("source" in one for one in ions)
    assert any("alkylate DNA" in one["caution"] for one in ions)
    assert [ph for ph, _ in told["solubility"]["at_ph"]] == [2.0, 7.4]
    assert told["ph_max"]["half_width"] > 0
    run("salts", "CCN(CC)CCOC(=O)c1ccc(N)cc1 procaine", *options, "-o", "s.svg", "--temperature", "37")
    picture = Path("s.svg").read_text()
    assert "pH of maximum solubility" in picture and "37 C" in picture and "mg/mL" in picture


def test_conditions_and_own_measurements_move_the_difference():
    """Ammonium constants fall by 0.03 a degree (Christensen, memory)."""
    cool, warm = (candidate("NCCc1ccccc1", "fumarate", temperature=t).delta for t in (25.0, 37.0))
    assert cool - warm == pytest.approx(0.36, abs=0.1)
    local = basirank.condition([("CCCCc1ccc(CN)cc1", 8.3)])
    moved = candidate("CCCc1ccc(CN)cc1", "fumarate", local=local).delta
    assert moved < candidate("CCCc1ccc(CN)cc1", "fumarate").delta - 0.3


@pytest.mark.parametrize(
    "arguments, words",
    [
        (("CCN", "--solubility", "much"), "solubility must be a number with a unit"),
        (("CCN", "--solubility", "3 bar"), "unknown unit"),
        (("CCN", "--solubility", "-3"), "between 1e-12 and 100 mol/L"),
        (("CCN", "--salt-solubility", "3"), "needs the intrinsic solubility"),
        (("CCN", "--solubility", "1", "--salt-solubility", "3", "--ksp", "1"), "give one of them"),
        (("CCN", "--solubility", "1", "--ksp", "x"), "solubility product must be a number"),
        (("CCN", "CNC", "--solubility", "1"), "for one compound, not for 2"),
        (("CCN", "--ph", "20"), "pH"),
        (("CCN", "-o", "s.pdf"), "unknown ending"),
    ],
)
def test_a_wrong_call_of_salts_is_one_line(run, folder, arguments, words):
    result = run("salts", *arguments)
    assert result.exit_code == 2 and result.stdout == ""
    assert result.stderr.count("\n") == 1 and words in result.stderr
    assert list(folder.iterdir()) == []


def test_a_structure_that_cannot_be_read_is_an_error_in_python():
    with pytest.raises(ValueError, match="cannot be read"):
        basirank.counter_ions("C1CC")
    with pytest.raises(ValueError, match="'base' or 'acid'"):
        basirank.counter_ions("CCN", side="salt")
