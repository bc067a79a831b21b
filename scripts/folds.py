"""Folds of the measured table, and what is said of each row when its fold was left out of all training.

A compound is never in two folds. Harder folds leave out whole scaffolds, the rings and what links them (Bemis and
Murcko, J. Med. Chem. 39, 2887 (1996)): what is told of a compound then comes from other ring systems or other chains.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from line_fit import Fit
from measured_rows import Row
from rdkit import Chem
from rdkit.Chem.Scaffolds import MurckoScaffold
from residual_fit import SiteTable, sparse_fit, sparse_prediction


def by_compound(rows: list[Row], folds: int) -> np.ndarray:
    """Fold of each row: compounds dealt in a fixed random order."""
    groups = sorted({row.group for row in rows})
    order = np.random.default_rng(7).permutation(groups)
    fold_of = {group: position % folds for position, group in enumerate(order)}
    return np.array([fold_of[row.group] for row in rows])


def carbon_skeleton(mol: Chem.Mol) -> str:
    """What is left when all atoms but carbon are taken off and all bonds made single."""
    bare = Chem.RWMol(mol)
    bare.BeginBatchEdit()
    for atom in bare.GetAtoms():
        if atom.GetAtomicNum() != 6:
            bare.RemoveAtom(atom.GetIdx())
        atom.SetFormalCharge(0)
        atom.SetChiralTag(Chem.ChiralType.CHI_UNSPECIFIED)
        atom.SetNoImplicit(False)
        atom.SetNumExplicitHs(0)
    bare.CommitBatchEdit()
    for bond in bare.GetBonds():
        bond.SetBondType(Chem.BondType.SINGLE)
        bond.SetStereo(Chem.BondStereo.STEREONONE)
    return str(Chem.MolToSmiles(bare))


def scaffold(row: Row) -> str:
    """Scaffold of the compound of a row; without rings, the classes of its sites and its carbon skeleton."""
    mol = Chem.MolFromSmiles(row.group)
    if mol.GetRingInfo().NumRings():
        return str(Chem.MolToSmiles(MurckoScaffold.GetScaffoldForMol(mol), isomericSmiles=False))
    classes = sorted({site.site_class for site in row.lines.sites})
    return f"{' + '.join(classes)}: {carbon_skeleton(mol)}"


def by_scaffold(rows: list[Row], folds: int) -> np.ndarray:
    """Fold of each row: scaffolds from the most common down, each into the fold that has fewest rows so far."""
    known: dict[str, str] = {}
    members: dict[str, list[int]] = {}
    for place, row in enumerate(rows):
        if row.group not in known:
            known[row.group] = scaffold(row)
        members.setdefault(known[row.group], []).append(place)
    fold = np.empty(len(rows), dtype=int)
    size = np.zeros(folds, dtype=int)
    for _, places in sorted(members.items(), key=lambda item: (-len(item[1]), item[0])):
        least = int(np.argmin(size))
        fold[places] = least
        size[least] += len(places)
    return fold


@dataclass(frozen=True, slots=True)
class LeftOut:
    """What is said of each row when its fold was left out of the fit of lines, interactions and regression.

    `lines` and `corrected` are errors, predicted less measured [pK units]; `variance` is that of the correction;
    `strain` is what interaction takes off the constant.
    """

    lines: np.ndarray
    corrected: np.ndarray
    variance: np.ndarray
    strain: np.ndarray


def left_out(
    rows: list[Row], fit: Fit, whole: np.ndarray, table: SiteTable, fold: np.ndarray, basis: int
) -> LeftOut:
    """Cross-validate lines, interactions and the shipped kind of regression."""
    everything = np.arange(len(rows))
    result = LeftOut(*(np.empty(len(rows)) for _ in range(4)))
    for k in range(int(fold.max()) + 1):
        train, test = everything[fold != k], everything[fold == k]
        # started from the fit of all rows for speed only: the posterior has one mode near it
        theta = fit.solve(train, start=whole, rounds=4)
        through = fit.macroscopic(theta, everything, by_law=False)
        residual = fit.value - through.predicted
        value = fit.site_values(theta, table)
        trained = sparse_fit(rows, table, value, through.gains, residual, train, basis)
        mean, own = sparse_prediction(table, value, through.gains, test, trained)
        result.lines[test] = -residual[test]
        result.corrected[test] = mean - residual[test]
        result.variance[test] = own
        result.strain[test] = through.strain[test]
    return result
