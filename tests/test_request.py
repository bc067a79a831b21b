"""Conditions and further columns, from the commands and from Python."""

from __future__ import annotations

import pytest
from conftest import heading, table

import basirank
from basirank.prediction import predict
from basirank.request import Conditions

DIAMINE = "NCCN"


def steps(smiles: str, *conditions: float) -> list[float]:
    equilibrium = predict([smiles], conditions=Conditions(*conditions))[0].equilibrium
    assert equilibrium is not None
    return [step.value for step in equilibrium.steps]


@pytest.mark.parametrize(
    "smiles, charges",
    [("NCCN", (1, 2)), ("NCC(=O)O", (0, 1)), ("C[N+](C)(C)CCN", (2,)), ("OC(=O)CCC(=O)O", (0, -1)),
     ("NC(Cc1c[nH]cn1)C(=O)O", (0, 1, 2))],
)  # fmt: skip
def test_macroscopic_constants_shift_with_the_charge_of_the_acid_form(smiles, charges):
    """(2z - 1) A f, A f = 0.107 at 0.1 mol/L; the charge z of each acid form."""
    shifts = sorted(b - a for a, b in zip(steps(smiles), steps(smiles, 25.0, 0.1), strict=True))
    wanted = sorted((2 * z - 1) * 0.1070 for z in charges)
    for want in wanted:
        assert min(abs(shift - want) for shift in shifts) < 1e-3


def test_temperature_moves_an_amine_and_leaves_a_carboxylic_acid():
    """About -0.03 per degree for ammonium; 1,2-diaminoethane 49.9 and 46.0 kJ/mol (Christensen et al. 1976, memory),
    -0.029 and -0.027 per degree.
    """
    first, second = (warm - cool for cool, warm in zip(steps(DIAMINE), steps(DIAMINE, 35.0), strict=True))
    assert first == pytest.approx(-0.29, abs=0.04)
    assert second == pytest.approx(-0.27, abs=0.06)
    (cool,), (warm,) = steps("CC(=O)O"), steps("CC(=O)O", 35.0)
    assert abs(warm - cool) < 0.02


def test_conditions_are_stated_and_standard_ones_are_not(run):
    plain, warm = (
        run("annotate", "CCN"),
        run("annotate", "CCN", "--temperature", "37", "--ionic-strength", "0.15"),
    )
    assert table(plain.stdout)[0]["message"] == ""
    assert table(warm.stdout)[0]["message"] == "at 37 C, ionic strength 0.15 mol/L"
    assert float(table(warm.stdout)[0]["pkah_1"]) < float(table(plain.stdout)[0]["pkah_1"]) - 0.2
    same = run("annotate", "CCN", "--temperature", "25.0", "--ionic-strength", "0")
    assert same.stdout == plain.stdout
    assert "At 37 C, ionic strength 0 mol/L." in run("rank", "CCN", "--temperature", "37").stdout


@pytest.mark.parametrize(
    "arguments, words",
    [
        (("--temperature", "60.1"), "temperature must lie between 0 and 60 C, not 60.1"),
        (("--temperature", "warm"), "temperature must be a number, not 'warm'"),
        (("--ionic-strength", "-0.1"), "ionic strength must lie between 0 and 0.5 mol/L, not -0.1"),
        (("--ionic-strength", "nan"), "ionic strength must be a number"),
    ],
)
@pytest.mark.parametrize("command", ["rank", "annotate", "explain"])
def test_conditions_out_of_range_are_one_line_and_exit_code_2(run, command, arguments, words):
    result = run(command, "CCN", *arguments)
    assert result.exit_code == 2 and result.stdout == ""
    assert result.stderr.startswith("basirank: ") and result.stderr.count("\n") == 1
    assert words in result.stderr


def test_pkb_stands_beside_pkah(run):
    """pKa + pKb = 14.00 at 25 C; at 37 C and 0.15 mol/L pKw is 13.62 - 0.12."""
    result = run("annotate", "NCCN", "OC(=O)C", "C1CC broken", "--show-pkb")
    names = heading(result.stdout)
    for n in range(1, 5):
        assert names.index(f"pkb_{n}") == names.index(f"pkah_{n}_high") + 1
    diamine, acid, broken = table(result.stdout)
    for n in (1, 2):
        assert float(diamine[f"pkah_{n}"]) + float(diamine[f"pkb_{n}"]) == pytest.approx(14.0, abs=1e-9)
    assert diamine["pkb_3"] == acid["pkb_1"] == broken["pkb_1"] == ""
    warm = basirank.annotate(["NCCN"], show_pkb=True, temperature=37.0, ionic_strength=0.15).iloc[0]
    assert warm.pkah_1 + warm.pkb_1 == pytest.approx(13.50, abs=0.02)
    assert "pKb" in run("rank", "NCCN", "--show-pkb").stdout


def test_forms_at_each_ph(run):
    result = run("annotate", "NCC(=O)O", "CCN", "C[N+](C)(C)CC(=O)O", "--forms", "--ph", "2.3", "--ph", "7.4")
    assert heading(result.stdout)[-2:] == ["neutral_fraction_at_7.4", "zwitterion_fraction_at_7.4"]
    glycine, amine, betaine = table(result.stdout)
    assert (
        float(glycine["zwitterion_fraction_at_7.4"]) > 0.99 > 0.01 > float(glycine["neutral_fraction_at_7.4"])
    )
    assert float(amine["neutral_fraction_at_7.4"]) == pytest.approx(
        1 - float(amine["net_charge_at_7.4"]), abs=1e-4
    )
    assert float(amine["zwitterion_fraction_at_7.4"]) == 0
    assert (
        float(betaine["zwitterion_fraction_at_7.4"]) > 0.99 and float(betaine["neutral_fraction_at_7.4"]) == 0
    )
    ranked = run("rank", "NCC(=O)O", "CCN", "--forms").stdout
    assert "neutral% 7.4" in ranked and "zwitt.% 7.4" in ranked
    frame = basirank.rank(["NCC(=O)O", "CCN"], forms=True)
    assert list(frame.columns[-3:-1]) == ["neutral_fraction", "zwitterion_fraction"]


def test_a_salt_effect_is_the_same_for_the_neutral_form_as_for_the_charge():
    """Shares follow the shifted constants: a mono-base is half protonated where pH equals its pKaH at 0.1 mol/L."""
    (pkah,) = steps("CCN", 25.0, 0.1)
    row = basirank.annotate(["CCN"], ph=round(pkah, 5), ionic_strength=0.1, forms=True).iloc[0]
    assert row.neutral_fraction == pytest.approx(0.5, abs=1e-4)
    assert row.protonated_fraction == pytest.approx(0.5, abs=1e-4)
