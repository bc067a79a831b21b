"""Titrations against worked ones of textbooks; charges that add up; salts with their counter-ions."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from conftest import table
from hypothesis import given
from hypothesis import strategies as st

import basirank
from basirank.composition import Composition, compose
from basirank.ladder import Ladder
from basirank.request import Conditions
from basirank.structures import Refusal
from basirank.titration import STRONG_ACID, STRONG_BASE, imbalance, mixture_ph, titration


def ladder(*constants: float, bare: int) -> Ladder:
    return Ladder(np.array(constants), bare)


ACETIC = Composition((ladder(4.757, bare=-1),))

# what, composition, concentration, volume, titrant, its concentration, pH at volumes of titrant, tolerance
WORKED = [
    # Skoog, West and Holler, Fundamentals of Analytical Chemistry: 50.00 mL of 0.1000 M acetic acid (memory)
    ("acetic acid", ACETIC, 0.1, 50.0, "base", 0.1,
     {0: 2.88, 10: 4.16, 25: 4.76, 40: 5.36, 49: 6.45, 50: 8.73, 51: 11.00, 60: 11.96, 75: 12.30}, 0.015),
    # the same: 50.00 mL of 0.0500 M sodium cyanide with 0.1000 M HCl (memory)
    ("sodium cyanide", Composition((ladder(9.21, bare=-1),), 1), 0.05, 50.0, "acid", 0.1,
     {0: 10.95, 10: 9.38, 25: 5.34, 26: 2.88}, 0.02),
    # Harris, Quantitative Chemical Analysis: 50.00 mL of 0.02000 M MES, pKa 6.15, with 0.1000 M NaOH (memory)
    ("MES", Composition((ladder(6.15, bare=-1),)), 0.02, 50.0, "base", 0.1, {0: 3.93, 3: 5.78, 10: 9.18}, 0.015),
    # Harris: 10.0 mL of 0.100 M dibasic base, pKb 4.00 and 9.00, with 0.100 M HCl (memory)
    ("dibasic base", Composition((ladder(10.0, 5.0, bare=0),)), 0.1, 10.0, "acid", 0.1,
     {0: 11.49, 5: 10.00, 10: 7.51, 15: 5.00, 20: 3.25}, 0.03),
]  # fmt: skip


@pytest.mark.parametrize("worked", WORKED, ids=[row[0] for row in WORKED])
def test_worked_titrations(worked):
    _, composition, concentration, volume, kind, strength, points, tolerance = worked
    done = titration(
        composition,
        concentration=concentration,
        volume=volume,
        titrant=STRONG_ACID if kind == "acid" else STRONG_BASE,
        kind=kind,
        titrant_concentration=strength,
        last_volume=80.0,
        points=2001,
    )
    for added, ph in points.items():
        assert np.interp(added, done.volume, done.ph) == pytest.approx(ph, abs=tolerance), added


def test_equivalence_points_of_a_dibasic_base():
    """Harris (memory): 10.0 and 20.0 mL; both are seen, at pH 7.51 and 3.25."""
    done = titration(
        WORKED[-1][1],
        concentration=0.1,
        volume=10.0,
        titrant=STRONG_ACID,
        kind="acid",
        titrant_concentration=0.1,
    )
    assert [round(point.volume, 6) for point in done.equivalences] == [10.0, 20.0]
    assert [point.ph for point in done.equivalences] == pytest.approx([7.51, 3.25], abs=0.03)
    assert all(point.visible for point in done.equivalences)
    assert {point.volume for point in done.equivalences} <= set(done.volume.tolist())


def test_steps_closer_than_a_factor_of_16_have_one_visible_point():
    """Adipic acid, 4.43 and 5.41 (CRC Handbook, memory); succinic acid, 4.21 and 5.64, shows both."""

    def points(*constants: float):
        acid = Composition((ladder(*constants, bare=-2),))
        return titration(
            acid, concentration=0.1, volume=25.0, titrant=STRONG_BASE, kind="base", titrant_concentration=0.1
        ).equivalences

    assert [point.visible for point in points(5.41, 4.43)] == [False, True]
    first, second = points(5.64, 4.21)
    assert first.visible and second.visible and first.jump < 0.1 < 1.5 < second.jump


def test_a_weak_acid_with_a_weak_base_ends_between_their_constants():
    """Ammonium acetate: pH = (4.76 + 9.25) / 2, whatever the concentration (any textbook)."""
    ammonia = Composition((ladder(9.245, bare=0),))
    done = titration(
        ACETIC, concentration=0.1, volume=20.0, titrant=ammonia, kind="base", titrant_concentration=0.2
    )
    assert done.equivalences[0].volume == pytest.approx(10.0)
    assert done.equivalences[0].ph == pytest.approx(7.00, abs=0.01)


compositions = st.builds(
    lambda pk, bare, fixed: Composition((Ladder(np.sort(np.array(pk))[::-1], bare),), fixed),
    st.lists(st.floats(-2, 14), max_size=4),
    st.integers(-3, 1),
    st.integers(-2, 2),
)


@given(
    analyte=compositions,
    amount=st.floats(1e-4, 10),
    added=st.floats(0, 20),
    kind=st.sampled_from([STRONG_ACID, STRONG_BASE, ACETIC]),
    temperature=st.floats(0, 60),
    ionic_strength=st.floats(0, 0.5),
)
def test_charges_add_up_to_none(analyte, amount, added, kind, temperature, ionic_strength):
    conditions = Conditions(temperature, ionic_strength)
    parts = [(analyte, np.array([amount])), (kind, np.array([added]))]
    volume = np.array([100.0])
    ph = mixture_ph(parts, volume, conditions)
    scale = amount + added + float(volume[0]) * (10.0 ** -ph[0] + 10.0 ** (ph[0] - 13))
    assert abs(imbalance(parts, volume, ph, conditions)[0]) < 1e-9 * scale
    assert (
        imbalance(parts, volume, ph - 0.1, conditions)[0]
        > 0
        > imbalance(parts, volume, ph + 0.1, conditions)[0]
    )


@pytest.mark.parametrize("temperature, neutral", [(0.0, 7.47), (25.0, 7.00), (60.0, 6.51)])
def test_pure_water_is_neutral_at_half_of_pkw(temperature, neutral):
    """Half of 14.94, 14.00 and 13.02 (Harned and Owen 1958, memory)."""
    ph = mixture_ph([], np.array([1.0]), Conditions(temperature))
    assert ph[0] == pytest.approx(neutral, abs=0.01)


def test_the_pH_of_a_strong_acid_is_that_of_a_meter():
    """0.1 M HCl reads 1.11 by Davies (1.09 to 1.11 measured, Bates 1973, memory): concentration 0.1, activity less."""
    parts = [(STRONG_ACID, np.array([0.1]))]
    assert mixture_ph(parts, np.array([1.0]), Conditions(25.0, 0.1))[0] == pytest.approx(1.107, abs=0.01)


@pytest.mark.parametrize(
    "salt, same",
    [
        ("CCN.Cl", "CC[NH3+].[Cl-]"),
        ("CC(=O)O.[Na+].[OH-]", "CC(=O)[O-].[Na+]"),
        ("CC(=O)[O-].[Na+]", "CC(=O)O[Na]"),
        ("CC[NH3+]", "CCN.Cl"),
        ("CC(=O)[O-]", "CC(=O)[O-].[Na+]"),
        ("CCN.CCN.OS(=O)(=O)O", "CC[NH3+].CC[NH3+].[O-]S(=O)(=O)[O-]"),
    ],
)
def test_a_salt_is_the_same_however_drawn(salt, same):
    ph = np.linspace(0.0, 14.0, 29)
    one, other = compose(salt), compose(same)
    assert one.charge(ph) == pytest.approx(other.charge(ph), abs=1e-9)


def test_a_hydrochloride_brings_chloride_and_says_so(run):
    """Ethylammonium chloride is slightly acid and takes one equivalent of base; the base itself takes acid."""
    salt, base = basirank.titrate("CCN.Cl"), basirank.titrate("CCN")
    assert (salt.titrant, base.titrant) == ("base", "acid")
    assert salt.ph[0] < 7 < base.ph[0]
    assert base.equivalences[0].ph == pytest.approx(salt.ph[0], abs=0.2)  # diluted once
    assert salt.notes == ("with hydrogen chloride",) and base.notes == ()
    assert "hydrogen chloride" in run("titrate", "CCN.Cl").stderr
    assert "chloride added" in run("titrate", "CC[NH3+]").stderr


def test_a_tartrate_brings_its_acid_groups():
    """Ethylammonium hydrogen tartrate has one proton to give near pH 4."""
    done = basirank.titrate("CCN.OC(C(O)C(=O)O)C(=O)O")
    assert done.titrant == "base" and 2.5 < done.ph[0] < 4.5
    assert done.notes == ("with O=C(O)C(O)C(O)C(=O)O",)
    assert done.equivalences[0].visible and 6.5 < done.equivalences[0].ph < 9


def test_constants_of_a_phosphate_are_said_to_be_those_of_25_degrees():
    assert compose("CCN.OP(=O)(O)O", Conditions(37.0)).notes == (
        "with phosphoric acid (its constants as at 25 C)",
    )
    assert compose("CCN.Cl", Conditions(37.0)).notes == ("with hydrogen chloride",)


def test_a_counter_ion_without_constants_is_refused():
    with pytest.raises(Refusal, match="no constants are listed for the counter-ion"):
        compose("CCN.O[Si](O)(O)O")


def test_titrate_writes_a_table_with_its_equivalence_points(run, folder):
    result = run("titrate", "NCCN diamine", "--concentration", "0.05", "--volume", "20", "-o", "t.csv")
    assert result.exit_code == 0, result.stderr
    rows = table(Path("t.csv").read_text())
    marked = [row for row in rows if row["equivalence_point"]]
    assert [float(row["volume_ml"]) for row in marked] == [10.0, 20.0]
    assert [row["equivalence_point"] for row in marked] == ["1", "2"]
    ph = [float(row["ph"]) for row in rows]
    assert ph == sorted(ph, reverse=True)
    assert "equivalence point 2: 20.00 mL" in result.stderr


@pytest.mark.parametrize(
    "arguments, words",
    [
        (("CCN", "--volume", "-1"), "volume must lie between"),
        (("CCN", "--concentration", "x"), "concentration must be a number"),
        (("CCN", "--titrant", "CCC"), "no base"),
        (("CCN", "--temperature", "80"), "between 0 and 60 C"),
        (("CCN", "CNC"), "takes one compound"),
        (("CCN", "--points", "5"), "between 10 and 5000"),
        (("C1CC",), "refused"),
        (("CCN.O[Si](O)(O)O",), "no constants are listed"),
    ],
)
def test_a_wrong_call_of_titrate_is_one_line(run, arguments, words):
    result = run("titrate", *arguments)
    assert result.exit_code == 2 and result.stdout == ""
    assert result.stderr.count("\n") == 1 and words in result.stderr
