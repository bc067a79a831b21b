"""Temperature and ionic strength: measured series and salt effects, and the way back to 25 C and I = 0."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from basirank.conditions import (
    at_temperature,
    davies,
    family_thermodynamics,
    from_standard,
    ionic_strength_shift,
    pkw,
    to_standard,
)
from basirank.tables import read_table

GAS = 8.314462618e-3  # kJ/(mol K)

# name, family, constant at each temperature [C], tolerance; from memory of the tables of the papers named
SERIES = [
    (
        "ammonia",
        "aliphatic",
        {0: 10.081, 10: 9.731, 25: 9.246, 40: 8.805, 50: 8.539},
        0.01,
    ),  # Bates, Pinching 1949
    (
        "methylamine",
        "primary",
        {10: 11.130, 25: 10.624, 40: 10.161, 50: 9.876},
        0.05,
    ),  # Everett, Wynne-Jones 1941
    ("ethanolamine", "primary", {0: 10.31, 25: 9.498, 50: 8.80}, 0.03),  # Bates, Pinching 1951
    ("tris", "primary", {0: 8.850, 10: 8.516, 25: 8.072, 37: 7.751, 50: 7.437}, 0.09),  # Bates, Hetzer 1961
    (
        "piperidine",
        "secondary",
        {0: 11.963, 10: 11.613, 25: 11.123, 40: 10.670, 50: 10.384},
        0.02,
    ),  # Bates, Bower 1956
    ("acetic acid", "carboxylic", {0: 4.781, 25: 4.756, 50: 4.787, 60: 4.812}, 0.02),  # Harned, Ehlers 1933
]


@pytest.mark.parametrize("name, family, series, tolerance", SERIES, ids=[row[0] for row in SERIES])
def test_a_measured_series_follows_from_its_value_at_25(name, family, series, tolerance):
    for temperature, measured in series.items():
        said = at_temperature(series[25], family, temperature)
        assert said == pytest.approx(measured, abs=tolerance), (name, temperature)


# name, family, constant at 25 C, enthalpy [kJ/mol]; NIST Database 46 as tabulated in minteq.v4.dat of
# IPhreeqcPy, or the compilation in ionize (both open packages)
ENTHALPIES = [
    ("hexylamine", "primary", 10.63, 58.6),
    ("allylamine", "primary", 9.69, 53.9),
    ("benzylamine", "primary", 9.33, 54.3),
    ("diethylamine", "secondary", 10.93, 53.1),
    ("morpholine", "secondary", 8.49, 39.0),
    ("trimethylamine", "tertiary", 9.80, 36.8),
    ("tripropylamine", "tertiary", 10.66, 43.9),
    ("pyridine", "azine", 5.22, 20.1),
    ("4-methylpyridine", "azine", 6.03, 25.3),
    ("aniline", "aniline", 4.60, 29.7),
    ("imidazole", "azole", 6.99, 36.6),
    ("phenol", "phenol", 9.998, 23.6),
    ("3-chlorophenol", "phenol", 9.02, 17.8),
    ("benzoic acid", "benzoic", 4.202, 0.46),
    ("bromoacetic acid", "carboxylic", 2.90, -5.0),
]


@pytest.mark.parametrize("name, family, pk, enthalpy", ENTHALPIES, ids=[row[0] for row in ENTHALPIES])
def test_the_slope_at_25_is_the_measured_enthalpy(name, family, pk, enthalpy):
    per_degree = (at_temperature(pk, family, 25.5) - at_temperature(pk, family, 24.5)).item()
    said = -per_degree * np.log(10.0) * GAS * 298.15**2
    assert said == pytest.approx(enthalpy, abs=5.5)  # 5 kJ/mol are 0.003 per degree


def test_bases_lose_and_acids_hardly_change_with_heat():
    """Per degree near 25 C, as the trade counts: ammonium -0.03, tertiary -0.02, pyridinium -0.012, acids 0."""
    slopes = {
        family: (at_temperature(pk, family, 30.0) - at_temperature(pk, family, 20.0)).item() / 10
        for family, pk in {"primary": 10.6, "secondary": 11.0, "tertiary": 10.0, "azine": 5.2, "aniline": 4.6,
                           "azole": 7.0, "carboxylic": 4.76, "phenol": 10.0}.items()
    }  # fmt: skip
    expected = {"primary": -0.033, "secondary": -0.030, "tertiary": -0.022, "azine": -0.013, "aniline": -0.018,
                "azole": -0.021, "carboxylic": 0.0, "phenol": -0.013}  # fmt: skip
    assert slopes == pytest.approx(expected, abs=0.003)


def test_ion_product_of_water():
    """Harned and Owen 1958, as in the CRC Handbook (memory)."""
    measured = {0: 14.944, 10: 14.535, 20: 14.167, 25: 13.997, 30: 13.833, 40: 13.535, 50: 13.262, 60: 13.017}
    for temperature, value in measured.items():
        assert pkw(temperature) == pytest.approx(value, abs=0.01)
    # concentration constant at I = 0.1: 13.78 (Martell and Smith, memory)
    assert pkw(25.0, 0.1) - davies(0.1) == pytest.approx(13.78, abs=0.02)


# name, charge of the acid form, constant at I = 0, concentration constant at I = 0.1, 25 C (Martell and Smith, memory)
SALT = [
    ("acetic acid", 0, 4.757, 4.56, 0.03),
    ("dihydrogen phosphate", -1, 7.199, 6.75, 0.05),
    ("ethylenediamine, first proton", 1, 9.928, 9.89, 0.05),
    ("ethylenediamine, second proton", 2, 6.848, 7.08, 0.05),
]


@pytest.mark.parametrize("name, charge, dilute, salted, tolerance", SALT, ids=[row[0] for row in SALT])
def test_measured_salt_effects(name, charge, dilute, salted, tolerance):
    said = dilute + ionic_strength_shift(charge, 0.1, kind="concentration")
    assert said == pytest.approx(salted, abs=tolerance)


def test_a_mixed_constant_has_the_activity_of_the_proton():
    """0.11 at 0.1 mol/L and singly charged ions, Albert and Serjeant 1984 (memory)."""
    assert davies(0.1) == pytest.approx(0.11, abs=0.005)
    for charge in (-1, 0, 1, 2):
        mixed = ionic_strength_shift(charge, 0.1)
        assert mixed == pytest.approx((2 * charge - 1) * davies(0.1))
        assert mixed - ionic_strength_shift(charge, 0.1, kind="concentration") == pytest.approx(davies(0.1))


def test_every_family_has_its_row():
    assert set(family_thermodynamics()) == {row["family"] for row in read_table("families.csv")}
    assert all(row["source"] for row in read_table("conditions.csv"))


@given(
    pk=st.floats(-5, 16),
    family=st.sampled_from(sorted(family_thermodynamics())),
    charge=st.integers(-3, 4),
    temperature=st.floats(0, 60),
    ionic_strength=st.floats(0, 0.5),
    kind=st.sampled_from(["mixed", "concentration"]),
    interaction=st.floats(-4, 4),
)
def test_there_and_back(pk, family, charge, temperature, ionic_strength, kind, interaction):
    at = {
        "family": family,
        "acid_charge": charge,
        "temperature": temperature,
        "ionic_strength": ionic_strength,
        "kind": kind,
        "interaction": interaction,
    }
    assert to_standard(from_standard(pk, **at), **at) == pytest.approx(pk, abs=1e-9)


def test_standard_conditions_change_nothing():
    pk = np.linspace(-5, 16, 22)
    assert np.array_equal(from_standard(pk, family="azine", acid_charge=1), pk)


@pytest.mark.parametrize(
    "wrong, words",
    [
        ({"temperature": -1.0}, "between 0 and 60 C"),
        ({"temperature": float("nan")}, "must be a number"),
        ({"ionic_strength": 0.6}, "between 0 and 0.5 mol/L"),
        ({"ionic_strength": [0.1, -0.1]}, "not -0.1"),
        ({"temperature": "warm"}, "must be a number"),
        ({"family": "amine"}, "no family of sites named 'amine'"),
        ({"kind": "molal"}, "'mixed' or 'concentration'"),
    ],
)
def test_what_the_laws_do_not_cover_is_refused(wrong, words):
    with pytest.raises(ValueError, match=words):
        to_standard([9.0, 9.1], **{"family": "primary", "acid_charge": 1, **wrong})
