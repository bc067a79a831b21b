"""The fixed schema: its columns, their text, what is reported and what is left out."""

from __future__ import annotations

import math

import numpy as np
import pytest
from rdkit import Chem

from basirank.equilibrium import Equilibrium, State, Step
from basirank.explanation import explanation_of
from basirank.increments import Estimate, Term
from basirank.prediction import HIGHEST, LOWEST, Prediction
from basirank.records import (
    REPORTED_RANGE,
    cell,
    cells,
    clean_ph,
    column_positions,
    ranking,
    record,
    refused_record,
    schema,
    structure_column,
    unclashed,
)
from basirank.sites import Site, site_classes
from basirank.structures import Parent

SCHEMA = [
    "status",
    "message",
    "parent_smiles",
    "pkah_1",
    "pkah_1_low",
    "pkah_1_high",
    "pkah_2",
    "pkah_2_low",
    "pkah_2_high",
    "pkah_3",
    "pkah_3_low",
    "pkah_3_high",
    "pkah_4",
    "pkah_4_low",
    "pkah_4_high",
    "pkah_1_atom",
    "pkah_1_class",
    "pkah_1_support",
    "pka_1",
    "pka_2",
    "pka_3",
    "pka_4",
    "steps_omitted",
    "net_charge",
    "protonated_fraction",
    "dominant_form",
    "dominant_fraction",
]


def estimate(atom: int, kind: str, value: float, site_class: str) -> Estimate:
    """An estimate of one term."""
    row = site_classes()[0]  # of no matter here
    site = Site(atom=atom, kind=kind, site_class=site_class, core=(atom,), anchors=((1, atom),), row=row)
    return Estimate(site=site, terms=(Term("parent", (), 1.0, value, "memory"),), half_width=0.5)


def prediction(
    smiles: str,
    sites: list[tuple[int, str, float, str]],
    steps: list[tuple[str, float, int]],
    charge: float = 0.0,
) -> Prediction:
    """A prediction made by hand; atoms as in the SMILES."""
    mol = Chem.MolFromSmiles(smiles)
    atoms = tuple(range(mol.GetNumAtoms()))
    dominant = tuple(False for _ in sites)
    return Prediction(
        status="ok",
        message="",
        parent=Parent(mol=mol, atom_index=atoms, smiles=smiles, output_order=atoms, notes=()),
        estimates=tuple(estimate(*site) for site in sites),
        sites=None,
        equilibrium=Equilibrium(
            steps=tuple(Step(kind=kind, value=value, half_width=0.6, carrier=n) for kind, value, n in steps),
            states=(State(7.4, charge, 0.25, dominant, 0.75, 0.7, 0.05),),
            approximate=False,
        ),
        forms=(smiles,),
    )


def as_text(found: Prediction) -> dict[str, str]:
    columns = schema((7.4,))
    names = [column.name for column in columns]
    return dict(zip(names, cells(record(found, (7.4,)), columns), strict=True))


def test_one_ph_gives_exactly_the_fixed_columns():
    assert [column.name for column in schema((7.4,))] == SCHEMA


def test_rank_comes_first_and_the_surety_of_the_order_last():
    assert [column.name for column in schema((7.4,), ranked=True)] == ["rank", *SCHEMA, "above_next"]


def test_several_ph_repeat_the_state_columns_with_the_ph_in_their_names():
    names = [column.name for column in schema(clean_ph(["5.5", "7.40"]))]
    assert names[:-8] == SCHEMA[:-4]
    assert names[-8:] == [f"{name}_at_{ph}" for ph in ("5.5", "7.4") for name in SCHEMA[-4:]]


def test_constants_have_two_decimals_and_fractions_four():
    row = as_text(prediction("CCN", [(2, "base", 10.6, "amine")], [("base", 10.6049, 0)], charge=0.123456))
    assert (row["pkah_1"], row["pkah_1_low"], row["pkah_1_high"]) == ("10.60", "10.00", "11.20")
    assert (row["net_charge"], row["protonated_fraction"], row["dominant_fraction"]) == (
        "0.1235",
        "0.2500",
        "0.7500",
    )
    assert (row["pkah_1_atom"], row["pkah_1_class"], row["pkah_1_support"]) == ("2", "amine", "extrapolated")
    assert (row["pkah_2"], row["pka_1"], row["steps_omitted"]) == ("", "", "0")


@pytest.mark.parametrize(
    ("value", "kind"), [(-0.001, "constant"), (-0.0, "constant"), (-0.00004, "fraction")]
)
def test_no_negative_zero(value, kind):
    assert not cell(value, kind).startswith("-")


def test_no_negative_zero_in_a_frame():
    charge = record(prediction("CCN", [], [], charge=-0.00001), (7.4,))[
        column_positions(schema())["net_charge"]
    ]
    assert math.copysign(1.0, charge) == 1.0


def test_a_zwitterion_has_a_base_step_and_an_acid_step():
    glycine = prediction(
        "NCC(=O)O",
        [(0, "base", 8.0, "primary aliphatic amine"), (4, "acid", 4.0, "carboxylic acid")],
        [("base", 9.78, 0), ("acid", 2.35, 1)],
    )
    row = as_text(glycine)
    assert (row["pkah_1"], row["pka_1"], row["pkah_2"], row["pka_2"]) == ("9.78", "2.35", "", "")


def test_constants_outside_the_reported_range_are_empty_and_keep_their_number():
    row = as_text(
        prediction("NCCN", [(0, "base", 17, "a"), (3, "base", 9, "b")], [("base", 16.2, 0), ("base", 9.0, 1)])
    )
    assert (row["pkah_1"], row["pkah_1_low"], row["pkah_1_atom"], row["pkah_2"]) == ("", "", "", "9.00")
    assert row["message"] == "first pKaH above 16, not reported"
    row = as_text(prediction("CC#N", [(2, "base", -10, "nitrile")], [("base", -10.0, 0)]))
    assert (row["pkah_1"], row["pkah_1_class"], row["steps_omitted"]) == ("", "", "0")


def test_an_interval_end_outside_the_reported_range_is_empty():
    row = as_text(prediction("CC#N", [(2, "base", -4.8, "nitrile")], [("base", -4.8, 0)]))
    assert (row["pkah_1"], row["pkah_1_low"], row["pkah_1_high"]) == ("-4.80", "", "-4.20")


def test_what_is_reported_and_what_counts_as_basic_have_the_same_limits():
    assert REPORTED_RANGE == (LOWEST, HIGHEST)


def test_steps_without_a_column_are_counted_when_reportable():
    sites = [(n, "base", 10.0, f"class {n}") for n in range(6)]
    steps = [("base", value, n) for n, value in enumerate((10.0, 9.5, 9.0, 8.0, 3.0, -6.0))]
    row = as_text(prediction("NNNNNN", sites, steps))
    assert (row["pkah_4"], row["steps_omitted"]) == ("8.00", "1")


def test_the_lowest_of_equivalent_atoms_carries_the_first_proton():
    found = prediction(
        "NCCN", [(0, "base", 9.6, "amine"), (3, "base", 9.6, "amine")], [("base", 9.9, 1), ("base", 6.9, 0)]
    )
    assert as_text(found)["pkah_1_atom"] == "0"
    assert [step.atom for step in explanation_of("NCCN", found).steps] == [0, 3]


def test_atoms_of_one_class_that_symmetry_tells_apart_are_not_mixed_up():
    found = prediction("NCCC(C)N", [(0, "base", 9.6, "amine"), (5, "base", 9.6, "amine")], [("base", 9.9, 1)])
    assert as_text(found)["pkah_1_atom"] == "5"


def test_support_is_taken_from_the_estimate_when_it_has_one():
    class Supported:
        support = "supported"

    from basirank.records import support

    assert (support(Supported()), support(object())) == ("supported", "extrapolated")


def test_a_refused_structure_has_a_reason_and_nothing_else():
    columns = schema((5.5, 7.4))
    row = cells(refused_record("cannot parse", (5.5, 7.4)), columns)
    assert row == ["refused", "cannot parse"] + [""] * (len(columns) - 2)


def test_rank_is_highest_first_and_ties_keep_their_order():
    values = [5.0, None, 9.0, 5.0, None, 11.0]
    place = column_positions(schema())["pkah_1"]
    rows = [tuple(value if n == place else None for n in range(len(SCHEMA))) for value in values]
    assert ranking(rows) == [(1, 5), (2, 2), (3, 0), (4, 3), (None, 1), (None, 4)]


@pytest.mark.parametrize("ph", [-2.01, 16.01, "seven", "nan", "inf", None, True, [], [7.4, "x"]])
def test_a_wrong_ph_is_said(ph):
    with pytest.raises(ValueError, match="pH"):
        clean_ph(ph)


def test_ph_values_are_kept_in_order_each_once():
    assert clean_ph(np.array([7.4, 2.0, 7.4])) == (7.4, 2.0)
    assert clean_ph(-2) == (-2.0,)
    assert clean_ph("16") == (16.0,)
    assert [column.name for column in schema(clean_ph([-0.0, 1]))][-8] == "net_charge_at_0"


def test_the_smiles_column_is_found_in_any_letter_case():
    assert structure_column(["id", "SMILES"]) == 1
    assert structure_column(["SMILES", "smiles"]) == 1
    assert structure_column(["smiles", "Structure"], "structure") == 1


@pytest.mark.parametrize(
    ("names", "wanted"), [(["id", "mol"], None), (["SMILES", "Smiles"], None), (["smiles"], "mol")]
)
def test_without_one_smiles_column_the_columns_are_listed(names, wanted):
    with pytest.raises(ValueError, match=", ".join(names)):
        structure_column(names, wanted)


def test_clashing_names_gain_input_until_they_are_unique():
    names = ["smiles", "status", "input_status", "rank", "rank_"]
    assert unclashed(names, schema()) == ["smiles", "input_input_status", "input_status", "rank", "rank_"]
    assert unclashed(names, schema(ranked=True))[3] == "input_rank"
