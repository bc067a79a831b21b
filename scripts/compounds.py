"""Which compound a structure is, and which compounds are kept apart.

A compound is named by the first block (14 letters) of its InChIKey: constitution without stereo, isotopes and mobile
protons. An eighth of all compounds only scores, and those of `data/holdout.csv` are never trained on.
"""

from __future__ import annotations

import csv
import hashlib
from pathlib import Path

from rdkit import Chem

ROOT = Path(__file__).resolve().parent.parent


def unmarked(smiles: str) -> str:
    """Canonical SMILES of a structure without its mark."""
    mol = Chem.MolFromSmiles(smiles)
    for atom in mol.GetAtoms():
        atom.SetAtomMapNum(0)
    return str(Chem.MolToSmiles(mol))


def skeleton(smiles: str) -> str:
    """First block of the InChIKey of a structure without its mark."""
    return str(Chem.MolToInchiKey(Chem.MolFromSmiles(unmarked(smiles)))[:14])


def only_scores(key: str) -> bool:
    """Whether the compound belongs to the eighth that is kept for scoring."""
    return hashlib.sha256(key.encode()).hexdigest()[-1] in "01"


def held_out() -> set[str]:
    """Keys of the compounds of the hold-out table."""
    with (ROOT / "data" / "holdout.csv").open(encoding="utf-8", newline="") as handle:
        return {skeleton(row["smiles"]) for row in csv.DictReader(handle)}
