"""Ratios of protomers as rows of the fit: they speak of two sites of one molecule and move both."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).resolve().parent.parent / "scripts"))

from compounds import ROOT
from line_fit import Fit, balance, priors
from measured_rows import Row, load_protomers, protomers_of

from basirank.interactions import couple

TYROSINE = "O=C(O)C([NH2:1])Cc1ccc([OH:2])cc1"


def row(smiles: str, charge: int = 0) -> Row:
    (found,) = protomers_of(
        [{"name": "", "smiles": smiles, "charge": str(charge), "log_ratio": "0.0", "quality": ""}]
    )
    return found


def test_one_base_and_one_acid_balance_by_their_constants_and_the_pull_between_their_charges():
    glycine = row("O=C([OH:2])C[NH2:1]")
    base, acid = glycine.pair
    pk = np.zeros(2)
    pk[base], pk[acid] = 7.7, 4.5
    ratio, gain = balance(glycine, pk, np.array([[0.0, 2.2], [2.2, 0.0]]))
    assert ratio == pytest.approx(7.7 - 4.5 + 2.2)
    assert gain[base] == pytest.approx(1.0) and gain[acid] == pytest.approx(-1.0)


@pytest.mark.parametrize("charge", [-1, 0])
def test_gains_are_the_derivatives_by_the_constants(charge):
    tyrosine = row(TYROSINE, charge)
    coupling, _ = couple(tyrosine.lines.graph, tyrosine.lines.sites)
    pk = np.array(tyrosine.lines.values)
    _, gain = balance(tyrosine, pk, coupling)
    for site in range(len(pk)):
        step = 1e-6 * np.eye(len(pk))[site]
        up, down = balance(tyrosine, pk + step, coupling)[0], balance(tyrosine, pk - step, coupling)[0]
        assert gain[site] == pytest.approx((up - down) / 2e-6, abs=1e-6)


def test_marks_that_are_no_two_sites_and_charges_out_of_reach_are_named():
    for smiles, charge in [("[CH3:2]C[NH2:1]", 0), ("CC[NH2:1]", 0), (TYROSINE, 1), (TYROSINE, -2)]:
        with pytest.raises(ValueError, match="two sites"):
            row(smiles, charge)


def test_the_fit_goes_towards_the_measured_ratios():
    rows = load_protomers(ROOT / "data" / "protomers.csv")
    fit = Fit(rows, priors())
    everything = np.arange(len(rows))
    before = np.abs(fit.macroscopic(fit.mean, everything).predicted - fit.value).mean()
    after = np.abs(fit.macroscopic(fit.solve(everything), everything).predicted - fit.value).mean()
    assert after < 0.75 * before
