"""Folds leave compounds or whole scaffolds out, and every learner has the same rows to answer for."""

from __future__ import annotations

import re
import subprocess
import sys
from collections import defaultdict
from pathlib import Path

import pytest
from rdkit import Chem

sys.path.insert(0, str(Path(__file__).resolve().parent.parent / "scripts"))

from compounds import ROOT
from folds import by_compound, by_scaffold, carbon_skeleton, scaffold
from measured_rows import Row, load


@pytest.fixture(scope="module")
def small(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Every thirtieth row of the measured table."""
    lines = (ROOT / "data" / "measured.csv").read_text(encoding="utf-8").splitlines()
    path = tmp_path_factory.mktemp("table") / "small.csv"
    path.write_text("\n".join([lines[0], *lines[1::30]]) + "\n", encoding="utf-8")
    return path


@pytest.fixture(scope="module")
def rows(small: Path) -> list[Row]:
    return load(small)


@pytest.mark.parametrize(("dealt", "whole"), [(by_compound, lambda row: row.group), (by_scaffold, scaffold)])
def test_nothing_that_is_left_out_is_trained_on(rows, dealt, whole):
    fold = dealt(rows, 5)
    folds_of = defaultdict(set)
    for row, k in zip(rows, fold, strict=True):
        folds_of[whole(row)].add(int(k))
    assert all(len(folds) == 1 for folds in folds_of.values())
    assert set(fold) == set(range(5))


def test_scaffolds_are_rings_with_their_links_and_without_rings_classes_with_the_carbons(rows):
    scaffolds = {row.group: scaffold(row) for row in rows}
    for smiles, name in scaffolds.items():
        mol = Chem.MolFromSmiles(smiles)
        if mol.GetRingInfo().NumRings():
            assert mol.HasSubstructMatch(Chem.MolFromSmarts(Chem.MolToSmarts(Chem.MolFromSmiles(name))))
        else:
            assert re.fullmatch(r"[^:]+: [C.()]*", name), name
    assert len(set(scaffolds.values())) < len(scaffolds)


@pytest.mark.parametrize(
    ("smiles", "skeleton"),
    [("CCNCC", "CC.CC"), ("NCC(O)C(=O)O", "CCC"), ("C[C@H](N)C=C", "CCCC"), ("N", "")],
)
def test_the_carbon_skeleton_has_neither_heteroatoms_nor_bond_orders(smiles, skeleton):
    assert carbon_skeleton(Chem.MolFromSmiles(smiles)) == skeleton


def test_all_learners_are_compared_and_do_better_than_no_answer(small):
    options = ["--table", str(small), "--folds", "2", "--left-out", "compounds"]
    result = subprocess.run(
        [sys.executable, str(ROOT / "scripts" / "compare"), *options],
        capture_output=True,
        text=True,
        check=False,
        timeout=280,
    )
    assert result.returncode == 0, result.stderr[-3000:]
    lines = [[cell.strip() for cell in line.split("|")[1:-1]] for line in result.stdout.splitlines()[2:]]
    errors = {cells[1]: float(cells[2]) for cells in lines}
    assert len(errors) == 7
    assert all(0.2 < error < 1.2 for error in errors.values()), errors
    exact, sparse = errors["exact Gaussian process"], errors["sparse Gaussian process (shipped)"]
    assert exact == pytest.approx(sparse, abs=0.05)  # nearly all sites fit into the basis
