"""No prediction moves unnoticed: 500 structures with their constants, charge and form, stored with the model."""

from __future__ import annotations

import csv
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
STORED = ROOT / "models" / "guard.csv"


def guard(*arguments: str | Path) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, str(ROOT / "scripts" / "guard"), *map(str, arguments)],
        capture_output=True,
        text=True,
        check=False,
        timeout=240,
    )


@pytest.fixture(scope="module")
def present(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The first thirty structures with their present predictions."""
    path = tmp_path_factory.mktemp("guard") / "guard.csv"
    path.write_text("\n".join(STORED.read_text(encoding="utf-8").splitlines()[:31]) + "\n", encoding="utf-8")
    assert guard("--file", path, "--accept").returncode == 0
    return path


@pytest.fixture
def disturbed(present: Path, tmp_path: Path) -> Path:
    """The same with four rows changed, one of them by no more than is allowed."""
    with present.open(encoding="utf-8", newline="") as handle:
        rows = list(csv.DictReader(handle))
    with_base = [row for row in rows if row["pkah_1"] and row["net_charge"]]
    with_base[0]["pkah_1"] = f"{float(with_base[0]['pkah_1']) - 1.5:.2f}"
    with_base[1]["net_charge"] = f"{float(with_base[1]['net_charge']) + 0.03:.2f}"
    with_base[2]["pkah_1"] = f"{float(with_base[2]['pkah_1']) + 0.02:.2f}"
    with_base[3]["dominant_form"] = "C"
    path = tmp_path / "guard.csv"
    with path.open("w", encoding="utf-8", newline="") as handle:
        writer = csv.DictWriter(handle, rows[0], lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)
    return path


def test_predictions_are_those_that_were_accepted():
    result = guard()
    assert result.returncode == 0, result.stdout[-6000:] + result.stderr
    assert result.stdout.startswith("500 structures: 0 numbers moved")
    assert result.stdout.endswith("; 0 lines of text changed\n")


def test_what_moved_is_listed_largest_first_and_fails(disturbed):
    result = guard("--file", disturbed)
    assert result.returncode == 1
    lines = result.stdout.splitlines()
    assert lines[1].startswith("  +1.50  pkah_1") and lines[2].startswith("  -0.03  net_charge")
    assert "    was C" in lines
    assert lines[-1].startswith(
        "30 structures: 2 numbers moved by more than 0.02, came or went, 1 dominant forms"
    )


def test_accepting_stores_the_present_predictions(present, disturbed):
    assert guard("--file", disturbed, "--accept").returncode == 0
    assert disturbed.read_text(encoding="utf-8") == present.read_text(encoding="utf-8")
    assert guard("--file", disturbed).returncode == 0


def test_a_word_that_changed_in_an_explanation_is_shown_and_fails(present, tmp_path):
    for ending in (".csv", ".txt"):
        (tmp_path / f"guard{ending}").write_bytes(present.with_suffix(ending).read_bytes())
    told = tmp_path / "guard.txt"
    kept = told.read_text(encoding="utf-8")
    assert "histidine, as Markdown" in kept and "report page, sha256" in kept
    told.write_text(kept.replace("As a buffer", "As buffer", 1), encoding="utf-8")
    result = guard("--file", tmp_path / "guard.csv")
    assert result.returncode == 1
    lines = result.stdout.splitlines()
    assert lines[0] == "explanations and report" and lines[1].startswith("  -As buffer")
    assert lines[-1].endswith("; 2 lines of text changed")
    told.write_text(
        kept.replace("with RDKit 20", "with RDKit 19").replace(kept[-20:], "0" * 19 + "\n"), encoding="utf-8"
    )
    assert guard("--file", tmp_path / "guard.csv").returncode == 0


def test_a_file_that_is_none_is_one_line_on_standard_error(tmp_path):
    result = guard("--file", tmp_path / "none.csv")
    assert result.returncode == 2 and result.stdout == ""
    assert result.stderr.startswith("guard: ") and result.stderr.count("\n") == 1
