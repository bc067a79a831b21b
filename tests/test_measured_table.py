"""The measured table is sound: what `scripts/check_table` asks of every row."""

import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent


def check(table: Path) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, str(ROOT / "scripts" / "check_table"), str(table)],
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
