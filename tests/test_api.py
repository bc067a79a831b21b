"""The Python calls: lists, series and frames in, one fixed schema out, no exception for a bad structure."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from rdkit import Chem

import basirank
from basirank.records import PANDAS_TYPES, schema

NAMES = [column.name for column in schema()]
BASES = ["c1ccncc1", "CCN", "CCCCCC", "not a SMILES", "NCCN"]


def types(frame: pd.DataFrame) -> list[str]:
    return [str(kind) for kind in frame.dtypes]


def test_a_list_gives_the_fixed_columns_and_types():
    frame = basirank.annotate(BASES)
    assert list(frame.columns) == NAMES
    assert types(frame) == [str(pd.Series(dtype=PANDAS_TYPES[column.kind]).dtype) for column in schema()]
    assert list(frame["status"]) == ["ok", "ok", "no_basic_site", "refused", "ok"]
    assert frame["pkah_1"].notna().tolist() == [True, True, False, False, True]
    assert frame.loc[1, "pkah_1_atom"] == 2
    assert frame.loc[3, "message"]


def test_the_index_of_a_series_is_kept():
    series = pd.Series(["CCN", "CN", "CCN"], index=["b", "a", "b"], name="structures")
    frame = basirank.annotate(series)
    assert list(frame.index) == ["b", "a", "b"]
    assert frame.iloc[0].equals(frame.iloc[2])


def test_molecules_and_single_structures_are_taken():
    from_text = basirank.annotate("CCN")
    from_molecule = basirank.annotate(Chem.MolFromSmiles("CCN"))
    pd.testing.assert_frame_equal(from_text, from_molecule)
    pd.testing.assert_frame_equal(from_text, basirank.annotate(np.array(["CCN"], dtype=object)))


@pytest.mark.parametrize(
    "cell", [None, np.nan, pd.NA, pd.NaT, "", "  ", 7, b"CCN", ["CCN"], np.array([1, 2])]
)
def test_a_cell_that_is_no_structure_is_a_refused_row(cell):
    frame = basirank.annotate(["CCN", cell, "CN"])
    assert list(frame["status"]) == ["ok", "refused", "ok"]
    assert frame.loc[1, "message"]


def test_a_frame_keeps_its_columns_index_and_types():
    frame = pd.DataFrame(
        {"id": ["007", "NA"], "SMILES": ["CCN", "x"], "status": [1, 2]}, index=pd.Index([5, 5], name="row")
    )
    before = frame.copy()
    out = basirank.annotate_frame(frame)
    assert list(out.columns) == ["id", "SMILES", "input_status", *NAMES]
    assert list(out["id"]) == ["007", "NA"]
    assert list(out["input_status"]) == [1, 2]
    assert out.index.equals(frame.index) and out.index.name == "row"
    pd.testing.assert_frame_equal(frame, before)


def test_an_empty_frame_has_the_same_columns_and_types():
    full = pd.DataFrame({"name": ["a"], "smiles": ["CCN"]})
    empty = basirank.annotate_frame(full.iloc[:0], ph=[5.5, 7.4])
    assert len(empty) == 0
    assert list(empty.columns) == list(basirank.annotate_frame(full, ph=[5.5, 7.4]).columns)
    assert types(empty) == types(basirank.annotate_frame(full, ph=[5.5, 7.4]))
    assert types(basirank.annotate([])) == types(basirank.annotate(["CCN"]))


def test_a_column_of_refused_rows_keeps_its_types():
    assert types(basirank.annotate(["x", None])) == types(basirank.annotate(["CCN"]))


def test_partitions_put_together_equal_the_whole():
    frame = pd.DataFrame({"smiles": BASES * 3})
    parts = [basirank.annotate_frame(frame.iloc[n : n + 4]) for n in range(0, len(frame), 4)]
    pd.testing.assert_frame_equal(pd.concat(parts), basirank.annotate_frame(frame))


def test_another_column_and_a_missing_one():
    frame = pd.DataFrame({"id": [1], "structure": ["CCN"]})
    assert list(basirank.annotate_frame(frame, smiles_column="structure")["status"]) == ["ok"]
    with pytest.raises(ValueError, match="id, structure"):
        basirank.annotate_frame(frame)


def test_a_column_whose_name_is_no_text():
    frame = pd.DataFrame({0: ["CCN"], 1: ["x"]})
    assert basirank.annotate_frame(frame, smiles_column=0).loc[0, "pkah_1"] > 10


def test_rank_sorts_and_puts_rank_first():
    ranked = basirank.rank(BASES)
    assert list(ranked.columns) == ["rank", *NAMES, "above_next"]
    assert ranked["rank"].tolist()[:3] == [1, 2, 3]
    assert ranked["rank"].isna().tolist() == [False] * 3 + [True] * 2
    assert ranked["pkah_1"].iloc[:3].is_monotonic_decreasing
    assert list(ranked.index)[2:] == [0, 2, 3]
    pd.testing.assert_frame_equal(
        ranked.drop(columns=["rank", "above_next"]).sort_index(), basirank.annotate(BASES)
    )


def test_rank_of_a_frame_keeps_its_columns_after_the_rank():
    frame = pd.DataFrame({"rank": ["x", "y"], "smiles": ["c1ccncc1", "CCN"]}, index=["p", "q"])
    ranked = basirank.rank(frame)
    assert list(ranked.columns) == ["rank", "input_rank", "smiles", *NAMES, "above_next"]
    assert list(ranked.index) == ["q", "p"]
    assert list(ranked["input_rank"]) == ["y", "x"]


def test_rank_says_how_sure_the_order_is():
    ranked = basirank.rank(BASES)
    assert ranked["above_next"].isna().tolist() == [False, False, True, True, True]
    assert ranked["above_next"].iloc[1] > 0.99  # ethylamine above pyridine


def test_rank_of_nothing():
    assert types(basirank.rank([])) == types(basirank.rank(["CCN"]))


def test_several_ph_give_columns_for_each():
    frame = basirank.annotate(["CCN"], ph=(2, 12.5))
    assert frame.loc[0, "net_charge_at_2"] > 0.99
    assert frame.loc[0, "net_charge_at_12.5"] < 0.1
    assert "net_charge" not in frame.columns


@pytest.mark.parametrize(
    "call", [basirank.annotate, basirank.rank, lambda items, ph: basirank.explain(items[0], ph=ph)]
)
@pytest.mark.parametrize("ph", [20, "x", [7.4, -3]])
def test_a_wrong_ph_is_a_value_error(call, ph):
    with pytest.raises(ValueError, match="pH"):
        call(["CCN"], ph=ph)


def test_explain_adds_up():
    told = basirank.explain("OC(=O)CN", ph=[2.0, 7.4])
    assert told.status == "ok"
    assert {site.kind for site in told.sites} == {"base", "acid"}
    for site in told.sites:
        assert site.terms
        assert sum(term.value for term in site.terms) == pytest.approx(site.value)
        assert all(0 <= atom < 5 for term in site.terms for atom in term.atoms)
    assert next(site.atom for site in told.sites if site.kind == "base") == 4
    assert [step.name for step in told.steps] == ["pKaH 1", "pKa 1"]
    assert [state.ph for state in told.states] == [2.0, 7.4]
    assert all(pair[0] < pair[1] for pair in told.interactions)


def test_explain_and_annotate_say_the_same():
    told, row = basirank.explain("NCCCN"), basirank.annotate(["NCCCN"]).iloc[0]
    assert [step.value for step in told.steps if step.name.startswith("pKaH")] == [
        row["pkah_1"],
        row["pkah_2"],
    ]
    assert (told.steps[0].low, told.steps[0].high) == (row["pkah_1_low"], row["pkah_1_high"])
    assert told.steps[0].atom == row["pkah_1_atom"]
    assert told.states[0].net_charge == row["net_charge"]
    assert told.states[0].dominant_form == row["dominant_form"]


def test_the_text_of_an_explanation_names_what_a_chemist_asks_for():
    told = basirank.explain("NCCN")
    text = str(told)
    site = told.sites[0]
    for wanted in (
        "Structure  NCCN",
        f"Site 1: {site.site_class}, base, on N atom 0",
        site.terms[0].source.split()[0],
        "intrinsic pKaH",
        "site 1 - site 2",
        "pKaH 1",
        "pKaH 2",
        "At pH 7.4",
        told.states[0].dominant_form,
    ):
        assert wanted in text
    assert max(map(len, text.splitlines())) < 140


def test_explain_refuses_without_an_exception():
    told = basirank.explain("C1CC")
    assert told.status == "refused" and told.message
    assert "Refused" in str(told) and told.message in str(told)
    assert basirank.explain(None).status == "refused"


def test_every_public_name_is_listed_and_found():
    assert set(basirank.__all__) <= set(dir(basirank))
    for name in basirank.__all__:
        assert getattr(basirank, name) is not None


def test_an_unknown_name_of_the_package():
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        _ = basirank.nothing
