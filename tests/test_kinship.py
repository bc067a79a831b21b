"""Order with its doubt, and the measured values behind a correction."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from basirank.evidence import LEAST_WEIGHT, analogues
from basirank.kinship import Standing, above, above_next, posterior_covariance
from basirank.prediction import CORRECTION, predict, site_lines
from basirank.residual import model
from basirank.structures import read_parent

AMINES = [
    "CCN",
    "CCCN",
    "CCCCCCN",
    "NCc1ccccc1",
    "c1ccncc1",
    "Cc1ccncc1",
    "C1COCCN1",
    "c1ccc(nc1)N",
    "C[SiH2]CN",
]


@pytest.fixture(scope="module")
def standings() -> dict[str, Standing]:
    found = {}
    for smiles, prediction in zip(AMINES, predict(AMINES, standings=True), strict=True):
        assert prediction.standing is not None
        found[smiles] = prediction.standing
    return found


def test_the_covariance_of_a_site_with_itself_is_what_is_left_of_its_variance(standings):
    for smiles, one in standings.items():
        (estimate,) = predict([smiles])[0].estimates
        scatter = model().spread.get(estimate.site.site_class, model().spread["all bases"])
        left = one.footprint.variance - scatter**2
        assert posterior_covariance(one.footprint, one.footprint) == pytest.approx(left, abs=0.02), smiles


def test_an_analogue_shares_more_of_its_error_than_a_stranger(standings):
    # two analogues that nobody has measured, and an amine of another kind
    series = ("Clc1ccc(CN2CCN3CCOC3C2)cc1F", "Fc1ccc(CN2CCN3CCOC3C2)cc1F", "OCC1CN(CC#N)C1")
    one, other, far = (one.standing.footprint for one in predict(series, standings=True))
    near = posterior_covariance(one, other)
    assert abs(posterior_covariance(one, far)) < near < one.variance
    assert near / math.sqrt(one.variance * other.variance) > 0.3


def test_amines_and_azines_have_nothing_in_common(standings):
    assert posterior_covariance(standings["CCN"].footprint, standings["c1ccncc1"].footprint) == 0.0


@given(st.sampled_from(AMINES), st.sampled_from(AMINES))
def test_either_is_the_more_basic(standings, first, second):
    one, other = standings[first], standings[second]
    assert above(one, other) + above(other, one) == pytest.approx(1.0)
    assert 0.0 <= above(one, other) <= 1.0
    assert (above(one, other) > 0.5) == (one.value > other.value)


def test_equal_compounds_are_a_toss_up(standings):
    assert above(standings["CCN"], standings["CCN"]) == 0.5


def test_the_order_of_a_list_stops_at_its_gaps(standings):
    one, other = standings["CCN"], standings["c1ccncc1"]
    sure = above_next([one, other, None, other])
    assert sure[0] is not None and sure[0] > 0.99
    assert sure[1:] == [None, None, None]
    assert above_next([]) == []


@pytest.mark.parametrize("smiles", ["CCN", "Nc1ccncc1", "OC(=O)CN"])
def test_a_measured_compound_is_its_own_first_evidence(smiles):
    parent = read_parent(smiles)
    lines = site_lines(parent)
    heaviest = analogues(lines.graph, lines.sites[0], lines.values[0])[0]
    assert read_parent(heaviest.smiles).smiles == parent.smiles
    assert heaviest.weight > 0.2
    assert heaviest.source


def test_nothing_measured_is_named_where_nothing_is_alike():
    lines = site_lines(read_parent("CC(C)(C)[Si](C)(C)N=[P](C)(C)C"))
    for site, value in zip(lines.sites, lines.values, strict=True):
        assert all(abs(one.weight) >= LEAST_WEIGHT for one in analogues(lines.graph, site, value))


def test_the_pulls_of_all_measured_values_sum_to_the_correction():
    from basirank import evidence
    from basirank.residual import covariances, group_of

    for smiles in ("CCNCC", "Cc1ccc(C)nc1", "c1ccc2[nH]cnc2c1"):
        lines = site_lines(read_parent(smiles))
        prediction = predict([smiles])[0]
        stored = evidence._measured()
        for site, value, estimate in zip(lines.sites, lines.values, prediction.estimates, strict=True):
            group = group_of()[site.row.family]
            weights = covariances(lines.graph, site, value) @ (stored[f"{group}/pulls"] * evidence.PULL_STEP)
            total = float(np.sum(weights * stored["residual"][stored[f"{group}/rows"]]))
            (correction,) = [term.value for term in estimate.terms if term.name == CORRECTION]
            # a thousand pulls, each rounded to a step, and cut residuals
            assert total == pytest.approx(correction, abs=0.15), smiles
