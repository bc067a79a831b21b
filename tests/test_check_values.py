"""Published values: how far predictions lie from them by class, in which order, and the form at pH 7.4.

The check values overlap with what the residual was trained on; a second ruler therefore takes the lines
alone. Values measured by acidity functions or assessed as uncertain where compiled are held to a
tolerance of their own.
"""

from __future__ import annotations

import csv
from collections import defaultdict
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
from rdkit import Chem

from basirank.prediction import CORRECTION, Prediction, predict
from basirank.records import equivalent_carriers
from basirank.residual import group_of

DATA = Path(__file__).resolve().parent.parent / "data"

FEWEST = 5
"""Members from which a class has its own tolerance; smaller ones are pooled by kind and group of families."""

TOLERANCE = 0.35
"""Mean absolute error allowed to a class that isn't listed below [pK units]."""

TOLERANCES = {
    # about one and a half times what these classes show, where that is more
    "1,3-dicarbonyl CH": 0.9,
    "N-H purine acid": 1.0,
    "aminopyrimidine": 0.4,
    "benzodiazine": 0.5,
    "bipyridyl": 0.4,
    "bridgehead amine": 0.5,
    "dicarboxylic acid": 0.5,
    "heteroaryl OH": 0.45,
    "hydroxybenzoic acid": 0.4,
    "quinoline": 0.4,
    "sulfonamide acid": 0.4,
    "thiol": 0.75,
}

POOLED = {
    # small classes of a group together; carbon, oxygen and sulfur acids have few measured neighbours
    ("pka", "carboxylic"): 0.6,
    ("pka", "phenol"): 1.5,
    ("pka", "nh_acid"): 0.7,
    ("pkah", "arylamine"): 0.45,
    ("pkah", "amidine"): 0.4,
}

DOUBTFUL = ("assessed as uncertain", "acidity function", "method O6", "extrapolated", "mixed")
"""Words of a tolerance note that mark a value held to the wider tolerance."""

DOUBTFUL_MAE = 0.45
FARTHEST = 4.0
"""No row may lie farther from its prediction than this [pK units] ..."""

FAR = {
    # ... except these, each for its reason
    ("cyanoacetohydrazide", "pkah", 1): "its one published constant is uncertain and contested by a C-H acid",
}


@dataclass(frozen=True, slots=True)
class Compared:
    """One published constant beside its prediction."""

    name: str
    kind: str
    step: int
    published: float
    predicted: float
    line: float | None
    check_class: str
    group: str
    note: str

    @property
    def error(self) -> float:
        return self.predicted - self.published

    @property
    def doubtful(self) -> bool:
        return any(word in self.note for word in DOUBTFUL)


def rows_of(name: str) -> list[dict[str, str]]:
    with (DATA / name).open(encoding="utf-8", newline="") as handle:
        return list(csv.DictReader(handle))


def compare(row: dict[str, str], prediction: Prediction) -> Compared | None:
    if prediction.equilibrium is None:
        return None
    kind = "base" if row["kind"] == "pkah" else "acid"
    steps = [step for step in prediction.equilibrium.steps if step.kind == kind]
    number = int(row["step"])
    if number > len(steps):
        return None
    step = steps[number - 1]
    estimate = prediction.estimates[step.carrier]
    alone = len(prediction.estimates) == 1
    line = sum(term.value for term in estimate.terms if term.name != CORRECTION)
    return Compared(
        row["name"],
        row["kind"],
        number,
        float(row["value"]),
        step.value,
        line if alone else None,
        row["class"],
        group_of()[estimate.site.row.family],
        row["tolerance_note"],
    )


@pytest.fixture(scope="module")
def compared() -> list[Compared]:
    """Every check value that the prediction has a step for."""
    rows = rows_of("check_values.csv")
    predictions = predict([row["smiles"] for row in rows])
    found = [compare(row, prediction) for row, prediction in zip(rows, predictions, strict=True)]
    return [one for one in found if one is not None]


def mae(rows: list[Compared]) -> float:
    return float(np.mean([abs(row.error) for row in rows]))


# the table


def test_the_table_has_published_values_over_many_classes_each_with_its_source():
    rows = rows_of("check_values.csv")
    assert len(rows) >= 500
    assert len({row["class"] for row in rows}) >= 120
    for row in rows:
        assert row["source"], row["name"]
        assert row["taken"] in ("published", "memory"), row["name"]
        assert -12.0 <= float(row["value"]) <= 17.0, row["name"]
        assert Chem.MolFromSmiles(row["smiles"]) is not None, row["name"]
    keys = [(row["smiles"], row["kind"], row["step"]) for row in rows]
    assert len(keys) == len(set(keys))


def test_almost_every_check_value_has_a_predicted_step(compared):
    """Boric acid holds no carbon, carbazole and the second loss of ascorbic acid have no site."""
    assert len(compared) >= 0.99 * len(rows_of("check_values.csv"))


# how far


def test_bases_lie_within_0_45_of_published_values_on_average(compared):
    assert mae([row for row in compared if row.kind == "pkah"]) < 0.45


def test_acids_lie_within_0_6_of_published_values_on_average(compared):
    assert mae([row for row in compared if row.kind == "pka"]) < 0.60


def test_nine_bases_of_ten_lie_within_half_a_unit(compared):
    errors = np.array([abs(row.error) for row in compared if row.kind == "pkah"])
    assert np.mean(errors <= 0.5) > 0.9
    assert np.mean(errors <= 1.0) > 0.96


def test_each_class_stays_within_its_tolerance(compared):
    by_class: dict[str, list[Compared]] = defaultdict(list)
    for row in compared:
        if not row.doubtful:
            by_class[row.check_class].append(row)
    beyond = {
        name: round(mae(rows), 2)
        for name, rows in by_class.items()
        if len(rows) >= FEWEST and mae(rows) > TOLERANCES.get(name, TOLERANCE)
    }
    assert beyond == {}


def test_small_classes_stay_within_the_tolerance_of_their_group(compared):
    members: dict[str, int] = defaultdict(int)
    for row in compared:
        members[row.check_class] += not row.doubtful
    pooled: dict[tuple[str, str], list[Compared]] = defaultdict(list)
    for row in compared:
        if (
            not row.doubtful
            and members[row.check_class] < FEWEST
            and (row.name, row.kind, row.step) not in FAR
        ):
            pooled[row.kind, row.group].append(row)
    beyond = {
        key: (round(mae(rows), 2), len(rows))
        for key, rows in pooled.items()
        if mae(rows) > POOLED.get(key, TOLERANCE)
    }
    assert beyond == {}


def test_values_assessed_as_uncertain_stay_within_their_own_tolerance(compared):
    doubtful = [row for row in compared if row.doubtful and (row.name, row.kind, row.step) not in FAR]
    assert len(doubtful) > 50
    assert mae(doubtful) < DOUBTFUL_MAE


def test_no_row_lies_more_than_four_units_away_unless_it_is_listed(compared):
    far = {
        (row.name, row.kind, row.step): round(row.error, 2) for row in compared if abs(row.error) > FARTHEST
    }
    assert set(far) - set(FAR) == set()


def test_the_lines_alone_are_a_fair_account_of_molecules_with_one_site(compared):
    """Without any measured neighbour: what published constants and refined coefficients say by themselves."""
    for kind, limit in (("pkah", 0.7), ("pka", 0.7)):
        errors = [
            abs(row.line - row.published) for row in compared if row.kind == kind and row.line is not None
        ]
        assert len(errors) > 50
        assert np.mean(errors) < limit


def test_neither_bases_nor_acids_are_shifted_as_a_whole(compared):
    for kind in ("pkah", "pka"):
        assert abs(np.mean([row.error for row in compared if row.kind == kind])) < 0.15


# order


@pytest.mark.parametrize("kind", ["pkah", "pka"])
def test_pairs_more_than_half_a_unit_apart_come_in_the_right_order(compared, kind):
    rows = [row for row in compared if row.kind == kind and row.step == 1]
    published = np.array([row.published for row in rows])
    predicted = np.array([row.predicted for row in rows])
    apart = published[:, None] - published[None, :] > 0.5
    right = (predicted[:, None] - predicted[None, :])[apart] > 0
    assert len(right) > 10_000
    assert right.mean() >= 0.96


# which nitrogen first, and what it looks like at pH 7.4


def test_the_first_proton_goes_where_it_is_known_to_go():
    rows = rows_of("first_site.csv")
    assert len(rows) >= 60
    wrong = []
    for row, prediction in zip(rows, predict([row["smiles"] for row in rows]), strict=True):
        assert prediction.equilibrium is not None, row["name"]
        assert prediction.parent is not None
        step = next((s for s in prediction.equilibrium.steps if s.kind == "base"), None)
        known = {int(atom) for atom in row["atoms"].split()}
        sites = (
            [prediction.estimates[k].site.atom for k in equivalent_carriers(prediction, step)] if step else []
        )
        if not sites or prediction.parent.atom_index[sites[0]] not in known:
            wrong.append(row["name"])
    assert len(wrong) <= 0.05 * len(rows), wrong


@pytest.fixture(scope="module")
def charged() -> list[tuple[dict[str, str], Prediction]]:
    """Compounds whose charge at pH 7.4 is known; those without carbon or nitrogen are refused by design."""
    rows = rows_of("charge_states.csv")
    both = list(zip(rows, predict([row["smiles"] for row in rows], ph=(7.4,)), strict=True))
    for row, prediction in both:
        assert prediction.equilibrium is not None or "no organic part" in prediction.message, row["name"]
    return [(row, prediction) for row, prediction in both if prediction.equilibrium is not None]


def test_the_dominant_form_at_ph_7_4_carries_the_known_charge(charged):
    wrong = [
        row["name"]
        for row, prediction in charged
        if Chem.GetFormalCharge(Chem.MolFromSmiles(prediction.forms[0])) != int(row["net_charge"])
    ]
    assert len(charged) >= 150
    assert len(wrong) <= 0.05 * len(charged), wrong


def test_the_dominant_form_at_ph_7_4_is_the_known_one(charged):
    drawn = [(row, prediction) for row, prediction in charged if row["dominant_form"]]
    wrong = [
        row["name"]
        for row, prediction in drawn
        if Chem.CanonSmiles(prediction.forms[0]) != Chem.CanonSmiles(row["dominant_form"])
    ]
    assert len(drawn) >= 120
    assert len(wrong) <= 0.10 * len(drawn), wrong
