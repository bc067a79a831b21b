"""Compounds with several measured steps: families, order of the constants, and figures of those left out."""

from __future__ import annotations

import csv
import subprocess
import sys
from collections import defaultdict
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).resolve().parent.parent / "scripts"))

from compounds import ROOT, unmarked


@pytest.fixture(scope="module")
def measured() -> dict[str, list[dict[str, str]]]:
    """Rows of the measured table by compound."""
    of_compound = defaultdict(list)
    with (ROOT / "data" / "measured.csv").open(encoding="utf-8", newline="") as handle:
        for row in csv.DictReader(handle):
            of_compound[unmarked(row["smiles"])].append(row)
    return of_compound


@pytest.fixture(scope="module")
def printed(measured, tmp_path_factory) -> str:
    """What the script prints of sixty compounds with several steps and forty with one."""
    several = [rows for _, rows in sorted(measured.items()) if len({row["acid_charge"] for row in rows}) > 1]
    single = [rows for _, rows in sorted(measured.items()) if len(rows) == 1]
    chosen = [row for rows in several[:: len(several) // 60][:60] + single[::90][:40] for row in rows]
    path = tmp_path_factory.mktemp("table") / "some.csv"
    with path.open("w", encoding="utf-8", newline="") as handle:
        writer = csv.DictWriter(handle, chosen[0], lineterminator="\n")
        writer.writeheader()
        writer.writerows(chosen)
    result = subprocess.run(
        [
            sys.executable,
            str(ROOT / "scripts" / "polyprotic"),
            "--table",
            str(path),
            "--folds",
            "3",
            "--list",
        ],
        capture_output=True,
        text=True,
        check=False,
        timeout=280,
    )
    assert result.returncode == 0, result.stderr[-3000:]
    return result.stdout


def test_more_than_two_hundred_compounds_have_two_measured_steps(measured):
    assert sum(len({row["acid_charge"] for row in rows}) > 1 for rows in measured.values()) > 200


def test_only_compounds_with_several_steps_count_each_once(printed):
    table, *families = printed.strip().split("\n\n")
    cells = [[cell.strip() for cell in line.split("|")[1:-1]] for line in table.splitlines()[2:]]
    counts = {line[0]: [int(line[n]) for n in (1, 2, 5)] for line in cells}
    whole = counts.pop("all")
    assert whole == [sum(count[n] for count in counts.values()) for n in range(3)]
    assert 50 <= whole[0] == whole[1] <= 60  # some compounds have further rows for one step only
    assert whole[2] >= whole[0]
    listed = {text.splitlines()[0]: len(text.splitlines()) - 1 for text in families}
    assert listed == {name: count[0] for name, count in counts.items()}


def test_base_steps_come_from_the_highest_down_then_acid_steps_from_the_lowest_up(printed):
    """An amino acid is listed as its amine's constant, then that of its carboxyl group."""
    section = next(text for text in printed.split("\n\n") if text.startswith("amino acids"))
    for line in section.strip().splitlines()[1:]:
        constants = [float(part.split(" (")[0]) for part in line.strip().split("  ")[0].split(", ")]
        if len(constants) == 2 and "Oc1" not in line and "(O)c" not in line:  # no phenol
            assert constants[0] > constants[1] + 0.5, line


def test_figures_are_those_of_rows_that_were_left_out(printed):
    """Left out, sixty compounds can't be met as the whole table would: errors are finite, and not all small."""
    last = next(line for line in printed.splitlines() if line.startswith("| all"))
    cells = [cell.strip() for cell in last.split("|")[1:-1]]
    assert 0.2 < float(cells[6]) < 2.0
    assert float(cells[7]) >= float(cells[6])
