"""The measured table is sound: what `scripts/check_table` asks of every row."""

import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent


def check(table: Path, *options: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, str(ROOT / "scripts" / "check_table"), str(table), *options],
        capture_output=True,
        text=True,
        check=False,
        timeout=240,
    )


def test_every_row_of_the_measured_table_stands_up_to_the_check():
    result = check(ROOT / "data" / "measured.csv")
    assert result.returncode == 0, result.stdout[-2000:] + result.stderr[-2000:]
    assert result.stdout.strip().endswith("0 faults")


def test_a_wrong_row_is_named(tmp_path):
    header = (ROOT / "data" / "measured.csv").read_text(encoding="utf-8").splitlines()[0]
    table = tmp_path / "table.csv"
    table.write_text(
        f"{header}\n"
        "mark on carbon,[CH3:1]CN,pkah,1,10.7,25,,primary aliphatic amine,Perrin 1965,memory,approximate,\n"
        "no such source,CCC[NH2:1],pkah,1,10.6,25,,primary aliphatic amine,Nobody 1900,memory,approximate,\n",
        encoding="utf-8",
    )
    result = check(table)
    assert result.returncode == 1
    assert "mark on carbon" in result.stdout and "is no 'primary aliphatic amine' site" in result.stdout
    assert "source 'Nobody 1900' is not in SOURCES.md" in result.stdout


def table_of(path: Path, *rows: str) -> Path:
    """A table with the header of the measured one."""
    header = (ROOT / "data" / "measured.csv").read_text(encoding="utf-8").splitlines()[0]
    path.write_text("\n".join([header, *rows]) + "\n", encoding="utf-8")
    return path


def test_a_step_given_twice_is_a_fault_in_whatever_drawing(tmp_path):
    """4-Methylimidazole drawn either way is one compound, and so is a salt of it."""
    rows = [
        f"{name},{smiles},pkah,1,{value},25,,imidazole,Perrin 1965,memory,approximate,"
        for name, smiles, value in (
            ("one tautomer", "Cc1c[nH]c[n:1]1", "7.52"),
            ("the other", "Cc1c[n:1]c[nH]1", "7.45"),
        )
    ]
    result = check(table_of(tmp_path / "table.csv", *rows))
    assert result.returncode == 1
    assert "7.52 (Perrin 1965), 7.45 (Perrin 1965) give one step twice" in result.stdout
    result = check(table_of(tmp_path / "table.csv", rows[0], rows[1].replace("7.45", "6.9")))
    assert "7.52 (Perrin 1965), 6.9 (Perrin 1965) disagree" in result.stdout


def test_rows_far_from_the_increments_and_thin_classes_are_listed_on_request(tmp_path):
    """Ethylamine 10.65 (Hall 1957, memory) lies on its line; 5.0 would not."""
    row = "made,CC[NH2:1],pkah,1,{},25,,primary aliphatic amine,Perrin 1965,memory,approximate,"
    far = check(table_of(tmp_path / "far.csv", row.format("5.0")), "--residuals", "--classes")
    assert far.returncode == 0
    assert "1 rows over 2 from the increments alone" in far.stdout
    assert "CC[NH2:1]" in far.stdout
    assert "   1  primary aliphatic amine" in far.stdout and "   0  pyridine" in far.stdout.splitlines()
    near = check(table_of(tmp_path / "near.csv", row.format("10.65")), "--residuals")
    assert "0 rows over 2 from the increments alone" in near.stdout
    assert "   0  pyridine" not in near.stdout.splitlines()
