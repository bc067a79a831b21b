"""Scoring: figures computed by hand, steps as stated, compounds of the training table apart, and what is written."""

from __future__ import annotations

import json
import re
import subprocess
import sys
from pathlib import Path
from xml.etree import ElementTree

import pandas as pd
import pytest
from conftest import table

import basirank
from basirank.measurements import Measured, Unused, columns_of, measured_of
from basirank.readers import InputError
from basirank.scorecard import score_dict, score_html, score_markdown, score_rows
from basirank.scoring import Scored, figures_of, groups_of, pair_order

ROOT = Path(__file__).resolve().parent.parent


def row(measured: float, predicted: float, half_width: float = 1.0, **given: object) -> Scored:
    known = "training" if given.pop("trained", False) else ""
    support = str(given.pop("support", "supported"))
    one = Measured(1, "CCN", measured, **given)  # type: ignore[arg-type]
    return Scored(one, "amine", "primary", 0, predicted, half_width, support, known, "")


def predicted_of(smiles: str, column: str = "pkah_1") -> float:
    return float(basirank.annotate([smiles])[column][0])


def test_figures_of_four_values_are_those_worked_out_by_hand():
    # errors +0.5, -1.0, +2.0, 0.0
    rows = [row(10.0, 10.5, 0.6), row(9.0, 8.0, 0.9), row(4.0, 6.0, 2.0), row(5.0, 5.0, 0.5)]
    found = figures_of(rows)
    assert (found.n, found.first) == (4, 4)
    assert found.mae == pytest.approx(3.5 / 4)
    assert found.rmse == pytest.approx((5.25 / 4) ** 0.5)
    assert found.bias == pytest.approx(1.5 / 4)
    assert found.median == pytest.approx(0.75)
    assert (found.within_half, found.within_one, found.coverage) == (0.5, 0.75, 0.75)
    assert found.half_width == pytest.approx(1.0) and found.median_half_width == pytest.approx(0.75)
    # six pairs, all over 0.5 apart; 5.0 against 4.0 comes out as 5.0 against 6.0, the wrong way round
    assert (found.order, found.pairs) == (pytest.approx(5 / 6), 6)


def test_pairs_that_lie_close_as_measured_say_nothing_of_the_order():
    assert pair_order([row(10.0, 9.0), row(9.6, 9.5)])[1] == 0
    assert pair_order([row(10.0, 9.0), row(9.4, 9.5)]) == (0.0, 1)


def test_order_does_not_depend_on_the_blocks_in_which_pairs_are_counted():
    rows = [row(n / 100, (n * 37 % 1201) / 100) for n in range(1201)]
    by_hand = [
        a.predicted > b.predicted for a in rows for b in rows if a.measured.value - b.measured.value > 0.5
    ]
    share, pairs = pair_order(rows)
    assert pairs == len(by_hand) and share == pytest.approx(sum(by_hand) / len(by_hand))


def test_second_constants_take_no_part_in_the_order():
    found = figures_of([row(10.0, 10.0), row(6.0, 11.0, step=2, first=False)])
    assert (found.n, found.first, found.pairs) == (2, 1, 0)


def test_groups_tell_training_table_support_and_class_apart():
    rows = [row(10.0, 10.1, trained=True), row(9.0, 9.3), row(8.0, 9.0, support="extrapolated")]
    found = {(group.by, group.label): group for group in groups_of(rows)}
    assert found["all", "bases"].figures.n == 3
    assert found["all", "bases"].new.mae == pytest.approx(0.65)
    assert found["training", "in the training table"].figures.mae == pytest.approx(0.1)
    assert found["support", "extrapolated"].figures.bias == pytest.approx(1.0)
    assert found["class", "amine"].new.n == 2 and found["family", "primary"].figures.n == 3
    assert not any(by == "own class" for by, _ in found)


def test_compounds_of_the_training_table_are_known_also_as_salts_and_other_drawings():
    frame = pd.DataFrame({"smiles": ["CC(=N)N", "CC(N)=[NH2+].[Cl-]", "FC(F)CCNCC1CCOC1"], "pkah": 12.4})
    assert [bool(one.known) for one in basirank.score(frame).rows] == [True, True, False]


def test_a_value_is_scored_at_the_step_that_its_row_states():
    both = basirank.annotate(["NCCN"])
    first, second = float(both.pkah_1[0]), float(both.pkah_2[0])
    frame = pd.DataFrame({"smiles": ["NCCN"] * 2, "pkah": [second, second], "step": [1, 2]})
    stated, right = basirank.score(frame).rows
    assert stated.error == pytest.approx(first - second, abs=0.011)
    assert "pkah_2" in stated.remark and "lies nearer" in stated.remark
    assert abs(right.error) < 0.01 and right.remark == ""


def test_without_a_step_an_acid_value_is_that_of_the_strongest_acid():
    frame = pd.DataFrame({"smiles": ["OC(=O)CN"], "value": [2.3], "kind": ["pka"]})
    (one,) = basirank.score(frame).rows
    assert one.predicted == pytest.approx(predicted_of("OC(=O)CN", "pka_1"), abs=0.006)
    assert one.measured.wanted == "pka_1"


@pytest.mark.parametrize(
    ("name", "kind"), [("pKaH", "pkah"), ("pKa", "pka"), ("Measured", "pkah"), ("exp. pKa", "pka")]
)
def test_kind_follows_from_the_name_of_the_column(name: str, kind: str):
    assert columns_of(["smiles", name]).default_kind == kind
    assert columns_of(["smiles", name], kind="pkah").default_kind == "pkah"


def test_conditions_of_a_row_are_those_of_its_prediction():
    frame = pd.DataFrame({"smiles": ["CCN", "CCN"], "pkah": [10.0, 10.0], "temperature": ["37", ""]})
    warm, plain = basirank.score(frame).rows
    expected = float(basirank.annotate(["CCN"], temperature=37).pkah_1[0])
    assert warm.predicted == pytest.approx(expected, abs=0.006) and warm.predicted < plain.predicted - 0.2


def test_local_corrections_take_part_and_are_said_to():
    series = basirank.condition([("Fc1ccc(CN2CCN3CCOC3C2)cc1", 7.0), ("Clc1ccc(CN2CCN3CCOC3C2)cc1", 6.9)])
    frame = pd.DataFrame({"smiles": ["Brc1ccc(CN2CCN3CCOC3C2)cc1"], "pkah": [6.95]})
    before, after = basirank.score(frame), basirank.score(frame, local=series)
    assert after.rows[0].predicted != before.rows[0].predicted
    assert after.local and not before.local
    both = pd.DataFrame({"smiles": ["Fc1ccc(CN2CCN3CCOC3C2)cc1", *frame["smiles"]], "pkah": [7.0, 6.95]})
    assert [one.known for one in basirank.score(both, local=series).rows] == ["local", ""]


BAD = """Name,SMILES,pKaH,kind,step,temperature
good,CCN,10.0,,,
<b>,nonsense(,5,,,
none,,5,,,
blank,CCN,,,,
more,CCN,>10,,,
what,CCN,5,acidic,,
zero,CCN,5,,0,
half,CCN,5,,1.5,
third,CCN,5,,3,
hot,CCN,5,,,99
alkane,CCCC,3,,,
low,CCN,-4,,,
"""


def test_no_row_is_lost_and_each_that_is_not_used_says_why(run, folder):
    (folder / "t.csv").write_text(BAD)
    result = run("score", "t.csv", "-o", "out.csv")
    assert result.exit_code == 0, result.output
    rows = table((folder / "out.csv").read_text())
    assert [one["row"] for one in rows] == [str(n) for n in range(1, 13)]
    reasons = {one["name"]: one["message"] for one in rows if one["status"] == "unused"}
    assert reasons == {
        "<b>": "cannot be read as SMILES: parentheses do not pair",
        "none": "no structure given",
        "blank": "no measured value given",
        "more": "the measured value is not a number: '>10'",
        "what": "kind must be pkah or pka, not 'acidic'",
        "zero": "steps count from 1, not 0",
        "half": "the step is not a whole number: 1.5",
        "third": "no such step: pkah_3",
        "hot": "temperature must lie between 0 and 60 C, not 99",
        "alkane": "no such step: pkah_1",
        "low": "measured below -2, where bases are not scored",
    }
    assert "12 rows: 1 scored, 11 not used" in result.stderr
    assert "row 2 (<b>) not used" in result.stderr and "and 1 more row" in result.stderr


def test_figures_are_those_of_the_accuracy_script(run, folder):
    frame = pd.read_csv(ROOT / "data" / "check_values.csv", dtype=str, keep_default_na=False).iloc[::9]
    frame.drop(columns="class").to_csv(folder / "part.csv", index=False)
    script = subprocess.run(
        [sys.executable, str(ROOT / "scripts" / "accuracy"), "part.csv", "--worst", "3"],
        capture_output=True, text=True, check=True, cwd=folder,
    ).stdout  # fmt: skip
    result = run("score", "part.csv", "-o", "part.json")
    assert result.exit_code == 0, result.output
    groups = json.loads((folder / "part.json").read_text())["groups"]
    compared = 0
    for line in script.splitlines():
        if "MAE" not in line:
            continue
        label, numbers = line.split(" n ", 1)
        n, mae, rmse, bias = re.findall(r"[-+]?\d+(?:\.\d+)?", numbers)[:4]
        assert any(
            one["label"] == label.strip() and one["n"] == int(n) and f"{one['mae']:.2f}" == mae
            and f"{one['rmse']:.2f}" == rmse and f"{one['bias']:+.2f}" == bias
            for one in groups
        ), line  # fmt: skip
        compared += 1
    orders = re.findall(r"over 0.5 apart: ([\d.]+) %", script)
    assert orders == [f"{100 * one['order']:.1f}" for one in groups if one["by"] == "all"]
    assert compared > 20


def marks(document: str, name: str) -> int:
    root = ElementTree.fromstring(document)
    return sum(element.get("class") == name for element in root.iter())


def test_picture_shows_every_value_by_support_and_names_the_farthest(run, folder):
    (folder / "t.csv").write_text(
        "name,smiles,pkah\n<far> & away,NCc1ccc(OCC2CC2)c(F)c1,13\nB,Brc1ccc(CN2CCN3CCOC3C2)cc1,6.3\n"
    )
    result = run("score", "t.csv", "-o", "p.svg")
    assert result.exit_code == 0, result.output
    document = (folder / "p.svg").read_text()
    texts = "".join(ElementTree.fromstring(document).itertext())
    assert "<far> & away" in texts and "not in the training table: n 2" in texts
    # one each, and one each in the key
    assert marks(document, "supported") == marks(document, "extrapolated") == 2
    assert marks(document, "band") == 1
    run("score", "t.csv", "-o", "p.png")
    assert (folder / "p.png").read_bytes().startswith(b"\x89PNG")


def test_page_shows_the_farthest_with_pictures_and_text_of_the_table_cannot_be_markup(run, folder):
    (folder / "t.csv").write_text(
        "name,smiles,pkah,class\n<script>alert(1)</script>,NCc1ccc(OCC2CC2)c(F)c1,13,<i>x</i>\n<img src=x>,zz,1,\n"
    )
    result = run("score", "t.csv", "-o", "p.html")
    assert result.exit_code == 0, result.output
    page = (folder / "p.html").read_text()
    assert "<script" not in page and "<img" not in page and "<i>" not in page
    assert "&lt;script&gt;alert(1)&lt;/script&gt;" in page
    assert page.count("<article>") == 1 and page.count('class="b-mark"') == 1
    assert "default-src 'none'" in page and "http" not in page.replace("http-equiv", "").replace(
        "http://www.w3.org/2000/svg", ""
    )


def test_markdown_and_json_hold_the_same_figures():
    frame = pd.DataFrame({"smiles": ["CCN", "CCCC"], "name": ["a|b", "c"], "pkah": [10.0, 3.0]})
    found = basirank.score(frame)
    text = score_markdown(found)
    assert "a\\|b" in text and "no such step: pkah\\_1" in text
    (whole,) = [group for group in score_dict(found)["groups"] if group["by"] == "all"]
    assert f"| all | 1 | {whole['mae']:.2f} |" in text
    assert whole["order"] is None and json.dumps(score_dict(found), allow_nan=False)
    assert [one[3] for one in score_rows(found)] == ["scored", "unused"]
    assert "<article>" in score_html(found)


def test_sd_file_and_frame_of_molecules_score_like_their_smiles(run, folder):
    from rdkit import Chem

    mol = Chem.MolFromSmiles("CCNCC")
    with Chem.SDWriter(str(folder / "t.sdf")) as writer:
        copy = Chem.Mol(mol)
        copy.SetProp("pKaH", "11.0")
        writer.write(copy)
    by_file = basirank.score(folder / "t.sdf").rows[0]
    by_frame = basirank.score(pd.DataFrame({"smiles": [mol], "pKaH": [11.0]})).rows[0]
    assert by_file.predicted == by_frame.predicted == basirank.score(
        pd.DataFrame({"smiles": ["CCNCC"], "pKaH": [11.0]})
    ).rows[0].predicted  # fmt: skip


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["CCN"], "no column of measured values"),
        (["t.csv", "--value-column", "nope"], "no column named 'nope'"),
        (["two.csv"], "several columns may hold the measured values (pkah, pka)"),
        (["t.csv", "-o", "x.xlsx"], "unknown ending"),
        (["t.csv", "--temperature", "99"], "temperature must lie between"),
        (["bad.csv"], "1 row: 0 scored, 1 not used"),
        (["bad.csv", "-o", "x.svg"], "no row could be used"),
        (["absent.csv"], "no such file"),
    ],
)
def test_a_wrong_call_is_told_plainly_and_writes_nothing(run, folder, arguments, message):
    (folder / "t.csv").write_text("smiles,pkah\nCCN,10\n")
    (folder / "two.csv").write_text("smiles,pkah,pka\nCCN,10,\n")
    (folder / "bad.csv").write_text("smiles,pkah\nzz,10\n")
    before = set(folder.iterdir())
    result = run("score", *arguments)
    assert result.exit_code == 2 and message in result.stderr
    assert "Traceback" not in result.output and set(folder.iterdir()) == before


def test_errors_in_python_are_value_errors():
    with pytest.raises(InputError, match="name it"):
        basirank.score(pd.DataFrame({"smiles": ["CCN"]}))
    with pytest.raises(ValueError, match="no column named 'smiles'"):
        basirank.score(pd.DataFrame({"x": ["CCN"], "pkah": [1.0]}))
    assert isinstance(measured_of([("", [""], None)], columns_of(["pkah"]))[0], Unused)
