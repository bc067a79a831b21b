"""A user's own measured constants move their neighbours, exactly, and nothing else."""

from __future__ import annotations

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import basirank
from basirank import Measurement, condition

SERIES = [f"{group}c1ccc(CN2CCN3CCOC3C2)cc1" for group in ("F", "Cl", "Br", "C", "CO", "N#C")]
"""An invented series that nobody has measured."""


def first(smiles: str, local: basirank.LocalModel | None = None) -> float:
    return float(basirank.annotate([smiles], local=local).loc[0, "pkah_1"])


def width(smiles: str, local: basirank.LocalModel | None = None) -> float:
    row = basirank.annotate([smiles], local=local).loc[0]
    return float(row["pkah_1_high"] - row["pkah_1_low"])


def test_a_measured_compound_comes_close_to_its_value_and_its_neighbours_follow():
    shift = 1.2
    measured = [(smiles, first(smiles) + shift) for smiles in SERIES[:3]]
    local = condition(measured)
    assert first(SERIES[0], local) == pytest.approx(measured[0][1], abs=0.35)
    for smiles in SERIES[3:]:
        assert 0.5 * shift < first(smiles, local) - first(smiles) < 1.1 * shift


def test_the_interval_of_a_neighbour_shrinks():
    local = condition([(smiles, first(smiles)) for smiles in SERIES[:4]])
    assert width(SERIES[5], local) < 0.95 * width(SERIES[5])


def test_a_stranger_does_not_move():
    local = condition([(smiles, first(smiles) + 2) for smiles in SERIES[:3]])
    for smiles in ("c1ccncc1", "CC(=O)O", "Nc1ccccc1"):
        assert first(smiles, local) == pytest.approx(first(smiles), abs=0.02) or math.isnan(first(smiles))


def test_a_value_that_is_as_predicted_moves_nothing():
    local = condition([Measurement(SERIES[0], first(SERIES[0]))])
    for smiles in SERIES:
        assert first(smiles, local) == pytest.approx(first(smiles), abs=0.02)


@settings(max_examples=15, deadline=None)
@given(st.permutations([(smiles, 6.5 + 0.1 * n) for n, smiles in enumerate(SERIES[:4])]))
def test_the_order_of_the_measurements_does_not_matter(measured):
    one, other = condition(measured), condition(sorted(measured))
    assert first(SERIES[5], one) == pytest.approx(first(SERIES[5], other), abs=0.011)


def test_a_surer_measurement_pulls_more():
    value = first(SERIES[0]) + 1
    sure, doubtful = (condition([Measurement(SERIES[0], value, error=error)]) for error in (0.05, 1.0))
    assert first(SERIES[0], doubtful) < first(SERIES[0], sure)


def test_the_second_constant_and_that_of_an_acid_can_be_given():
    diamine = "NCCN1CCOC2(C1)CC2"
    row = basirank.annotate([diamine]).loc[0]
    local = condition([Measurement(diamine, row["pkah_2"] + 1, step=2)])
    moved = basirank.annotate([diamine], local=local).loc[0]
    assert moved["pkah_2"] > row["pkah_2"] + 0.3
    acid = "OC(=O)C1CC2(C1)COC2"
    value = float(basirank.annotate([acid]).loc[0, "pka_1"])
    local = condition([Measurement(acid, value + 1, kind="pka")])
    assert basirank.annotate([acid], local=local).loc[0, "pka_1"] > value + 0.3


def test_explain_and_rank_take_it_too():
    local = condition([(smiles, first(smiles) + 1) for smiles in SERIES[:3]])
    ranked = basirank.rank(SERIES, local=local)
    assert ranked["pkah_1"].iloc[0] == basirank.explain(SERIES[ranked.index[0]], local=local).steps[0].value


@pytest.mark.parametrize(
    ("measurements", "message"),
    [
        ([], "no measurement"),
        ([("CCN", "high")], "measurement 1"),
        ([("CCN", float("nan"))], "measurement 1: value and error"),
        ([("CCN", 10.6, "pKa")], "kind must be"),
        ([("CCN", 10.6, "pkah", 2)], "has 1 pkah steps"),
        ([("CCN", 10.6), ("C1CC", 9.0)], "measurement 2"),
        ([("CCN", 10.6, "pkah", 1, 0.0)], "error above 0"),
    ],
)
def test_a_wrong_measurement_is_named(measurements, message):
    with pytest.raises(ValueError, match=message):
        condition(measurements)
