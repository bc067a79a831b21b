"""Tables that users bring to the training, in the layout of the IUPAC digitised pKa compilation.

The values are those of `data/measured.csv` (sources there), put into the columns of that layout.
"""

from __future__ import annotations

import csv
import subprocess
import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).resolve().parent.parent / "scripts"))

from compounds import ROOT, unmarked
from extra_tables import ExtraTable, TableError, read_iupac
from measured_rows import rows_of

COLUMNS = (
    "unique_ID", "SMILES", "InChI", "pka_type", "pka_value", "T", "remarks", "method", "assessment", "ref",
    "ref_remarks", "entry_remarks", "original_IUPAC_names", "name_contributors", "source", "pressure",
    "acidity_label", "cosolvent",
)  # fmt: skip


def written(path: Path, rows: list[dict[str, str]], columns: tuple[str, ...] = COLUMNS) -> Path:
    """A table in the layout; a cell that a row doesn't have is empty."""
    with path.open("w", encoding="utf-8", newline="") as handle:
        writer = csv.DictWriter(handle, columns, restval="")
        writer.writeheader()
        writer.writerows(rows)
    return path


def row(smiles: str, step: str, value: str, **further: str) -> dict[str, str]:
    return {
        "unique_ID": "made1",
        "SMILES": smiles,
        "pka_type": step,
        "pka_value": value,
        "T": "25",
        "assessment": "Reliable",
        **further,
    }


def taken(path: Path, *rows: dict[str, str], known: frozenset[tuple[str, int]] = frozenset()) -> ExtraTable:
    return read_iupac(written(path / "table.csv", list(rows)), set(known))


def test_an_amino_acid_is_numbered_along_the_ladder_of_charges(tmp_path):
    """Glycine, 2.35 and 9.78: the compilation's pKaH1 is the carboxyl group's, its pKa1 the amine's."""
    table = taken(tmp_path, row("NCC(=O)O", "pKaH1", "2.35"), row("NCC(=O)O", "pKa1", "9.78"))
    found = {record["kind"]: record for record in table.records}
    assert (found["pka"]["value"], found["pka"]["acid_charge"]) == ("2.35", "1")
    assert found["pka"]["class"] == "carboxylic acid"
    assert (found["pkah"]["value"], found["pkah"]["acid_charge"]) == ("9.78", "0")
    assert found["pkah"]["class"] == "primary aliphatic amine"
    assert [row.index for row in rows_of(table.records)] == [1, 0]


def test_sites_come_out_as_the_measured_table_has_them(tmp_path):
    """A tenth of the compounds, their marks and classes taken away, find kind and class again."""
    with (ROOT / "data" / "measured.csv").open(encoding="utf-8", newline="") as handle:
        records = list(csv.DictReader(handle))
    structures = {record["smiles"]: unmarked(record["smiles"]) for record in records}
    some = set(sorted(set(structures.values()))[::10])
    chosen = [record for record in records if structures[record["smiles"]] in some]
    rows = []
    for record in chosen:
        charge = int(record["acid_charge"])
        step = f"pKaH{charge}" if charge > 0 else f"pKa{1 - charge}"
        rows.append(row(structures[record["smiles"]], step, record["value"], T="25"))
    table = read_iupac(written(tmp_path / "table.csv", rows), set())
    asked = {(structures[r["smiles"]], r["acid_charge"]): (r["kind"], r["class"]) for r in chosen}
    found = {(r["smiles"], r["acid_charge"]): (r["kind"], r["class"]) for r in table.records}
    assert len(found) > 0.95 * len(asked)
    same = [found[step] == asked[step] for step in found if step in asked]
    assert sum(same) / len(same) > 0.95


@pytest.mark.parametrize(
    ("changed", "reason"),
    [
        ({"T": "80"}, "outside 15 to 35 C"),
        ({"cosolvent": "50% ethanol"}, "other solvent than water"),
        ({"remarks": "in 50% dioxan"}, "other solvent than water"),
        ({"assessment": "Very uncertain"}, "assessed as very uncertain"),
        ({"pka_value": ">11"}, "value that is no single number"),
        ({"pka_type": "pKb"}, "constant of another type (pKb)"),
        ({"pressure": "1000 atm"}, "under pressure"),
        ({"SMILES": "CC(N"}, "structure that can't be read"),
        ({"pka_type": "pKaH7"}, "no such step"),
    ],
)
def test_what_is_no_constant_in_water_near_25_c_is_left_out_and_counted(tmp_path, changed, reason):
    table = taken(tmp_path, row("CCN", "pKaH1", "10.65") | changed)
    assert table.records == [] and table.counts[reason] == 1


def test_doubtful_values_count_less(tmp_path):
    rows = [
        row("CCN", "pKaH1", "10.65"),
        row("CC(C)CN", "pKaH1", "10.49", assessment="Approx."),
        row("CCCCN", "pKaH1", "10.6", assessment="Uncertain"),
        row("CCCCCN", "pKaH1", "~10.6"),
        row("CCCCCCN", "pKaH1", "10.6", T=""),
    ]
    table = taken(tmp_path, *rows)
    words = [record["quality"] for record in table.records]
    assert words == ["reliable", "approximate", "uncertain", "uncertain", "uncertain"]
    errors = [row.error for row in rows_of(table.records)]
    assert errors[0] < errors[1] < errors[2] == errors[4]


def test_the_ionic_strength_is_read_from_the_remarks(tmp_path):
    table = taken(tmp_path, row("CCN", "pKaH1", "10.8", remarks="c = 0.01, I = 0.1 (KCl)"))
    assert table.records[0]["ionic_strength"] == "0.1"


def test_of_repeated_values_the_best_assessed_nearest_the_median_stands(tmp_path):
    rows = [row("CCN", "pKaH1", value) for value in ("10.6", "10.65", "10.7")]
    table = taken(tmp_path, *rows, row("NCC", "pKaH1", "9.0", assessment="Uncertain"))
    assert [record["value"] for record in table.records] == ["10.65"]
    assert table.counts["repeated value of a step"] == 3


def test_a_ladder_that_does_not_descend_is_left_out(tmp_path):
    table = taken(tmp_path, row("NCCCN", "pKaH1", "8.8"), row("NCCCN", "pKaH2", "10.5"))
    assert table.records == [] and table.counts["ladder out of order"] == 2


def test_compounds_kept_for_scoring_never_come_in(tmp_path):
    """Whether a compound only scores follows from its InChIKey alone; ammonia does, vigabatrin is held out."""
    table = taken(tmp_path, row("N", "pKaH1", "1"), row("C=CC(N)CCC(=O)O", "pKaH1", "1"))
    assert table.records == [] and table.counts["compound kept for scoring or held out"] == 2


def test_steps_of_the_measured_table_are_not_taken_twice(tmp_path):
    table = taken(tmp_path, row("CCN", "pKaH1", "10.65"), known=frozenset({("QUSNBJAOOMFDIB", 1)}))
    assert table.records == [] and table.counts["step that the measured table has"] == 1


def test_letter_case_and_missing_columns_are_no_matter(tmp_path):
    path = written(
        tmp_path / "t.csv",
        [{"smiles": "CCN", "PKA_TYPE": "pkah1", "pKa_value": "10.65"}],
        ("smiles", "PKA_TYPE", "pKa_value"),
    )
    assert [record["value"] for record in read_iupac(path, set()).records] == ["10.65"]
    with pytest.raises(TableError, match="no column pka_type"):
        read_iupac(written(tmp_path / "u.csv", [], ("SMILES", "pka_value")), set())


def train(*arguments: str | Path) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, str(ROOT / "scripts" / "train"), "--dry-run", "--folds", "2", *map(str, arguments)],
        capture_output=True,
        text=True,
        check=False,
        timeout=240,
    )


def test_the_training_takes_the_table(tmp_path):
    own = tmp_path / "own.csv"
    lines = (ROOT / "data" / "measured.csv").read_text(encoding="utf-8").splitlines()[:61]
    own.write_text("\n".join(lines) + "\n", encoding="utf-8")
    rows = [row("CCN", "pKaH1", "10.65"), row("CC(C)CN", "pKaH1", "10.49"), row("CCN", "pKaH1", "9", T="90")]
    alone, further = (
        train("--table", own),
        train("--table", own, "--iupac", written(tmp_path / "t.csv", rows)),
    )
    assert alone.returncode == further.returncode == 0, further.stderr
    assert "2 values taken" in further.stdout and "1  outside 15 to 35 C" in further.stdout

    def bases(text: str) -> int:
        return int(text.split("bases from -2 up")[1].split()[1])

    assert bases(further.stdout) == bases(alone.stdout) + 2
    missing = train("--table", own, "--iupac", tmp_path / "none.csv")
    assert (
        missing.returncode == 2 and missing.stderr.startswith("train: ") and missing.stderr.count("\n") == 1
    )
