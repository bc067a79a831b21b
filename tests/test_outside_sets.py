"""Constants of amines and azines that other packages hold: values that nobody here chose, read where they lie.

Compilations: T. Hirokawa et al., J. Chromatogr. 271 (1983) D1 and later parts (`ionize`, `electrolytes`); NIST Standard
Reference Database 46 by way of `minteq.v4.dat` (`IPhreeqcPy`). All at 25 C and ionic strength 0. The bounds lie a third
above what `scripts/outside` measured; figures without the values that `outside_sets.DOUBTFUL` gives a reason against.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).resolve().parent.parent / "scripts"))

import outside_sets
from outside_sets import Checked, OutsideSet

pytestmark = pytest.mark.skipif(
    bool(outside_sets.missing()), reason=f"not installed: {', '.join(outside_sets.missing())}"
)


@pytest.fixture(scope="module")
def checked() -> dict[str, tuple[OutsideSet, list[Checked]]]:
    return {found.package: (found, outside_sets.check(found)) for found in outside_sets.outside_sets()}


@pytest.mark.parametrize(
    ("package", "known", "least", "bound"),
    [
        # values, then a third above the MAE measured: 0.16, 0.16; 0.16, 0.20; 0.16, 0.29
        ("ionize", True, 100, 0.21),
        ("ionize", False, 30, 0.21),
        ("electrolytes", True, 100, 0.21),
        ("electrolytes", False, 30, 0.27),
        ("IPhreeqcPy", True, 15, 0.21),
        ("IPhreeqcPy", False, 8, 0.39),
    ],
)
def test_constants_of_outside_compilations_are_met(checked, package, known, least, bound):
    rows = [row for row in checked[package][1] if row.row.known == known and not row.row.doubt]
    assert len(rows) >= least
    error = np.abs([row.error for row in rows])
    assert error.mean() < bound, sorted(
        ((row.error, row.row.name) for row in rows), key=lambda x: -abs(x[0])
    )[:5]
    inside = np.mean([abs(row.error) <= row.half_width for row in rows])
    assert 0.80 <= inside <= 1.0


def test_no_prediction_lies_far_from_a_sound_value(checked):
    for _, rows in checked.values():
        far = [
            (row.row.name, row.row.value, row.error)
            for row in rows
            if not row.row.doubt and abs(row.error) > 2
        ]
        assert far == []


def test_names_without_a_structure_are_counted(checked):
    found = checked["ionize"][0]
    assert "amediol" in found.left_out["no structure for the name"]
    assert "sodium" in found.left_out["no amine or azine nitrogen"]
    assert "dipropylamine" in found.left_out["assumed value"]


def test_steps_are_placed_along_the_ladder(checked):
    """Histidine in Hirokawa's table: 9.33, 6.04, 2.0; ethylenediamine in SRD 46: log K 9.928 and log beta2 16.776."""
    ions = {(row.row.name, row.row.acid_charge): row.row.value for row in checked["ionize"][1]}
    assert [ions["histidine", charge] for charge in (0, 1, 2)] == [9.33, 6.04, 2.0]
    complexes = {(row.row.name, row.row.acid_charge): row.row.value for row in checked["IPhreeqcPy"][1]}
    assert complexes["ethylenediamine", 1] == 9.928
    assert complexes["ethylenediamine", 2] == pytest.approx(6.848, abs=1e-9)
    assert complexes["glycine", 0] == 9.778


def test_every_doubtful_value_still_stands_in_its_package(checked):
    doubted = {(row.row.name, row.row.value) for _, rows in checked.values() for row in rows if row.row.doubt}
    assert doubted == set(outside_sets.DOUBTFUL)
