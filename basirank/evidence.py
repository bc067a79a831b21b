"""Evidence: the measured values that carry the correction of a site, and how much each pulls.

The correction is linear in the measured residuals (measured value less what the lines say), so it is a sum of one
contribution for each measured value: its weight, which says how alike the two are and how much else is known there,
times its residual.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from importlib.resources import as_file, files
from typing import Any

import numpy as np
from rdkit import Chem, rdBase

from .graph import Graph
from .residual import covariances, group_of
from .sites import Site

SHOWN = 4
"""Measured values named for a site."""
PULL_STEP = 2.0**-11
"""Steps in which the pulls are stored."""
LEAST_WEIGHT = 0.02
"""A measured value that moves the correction by less than this share of its residual isn't named."""
QUANTITIES = {"pkah": "pKaH", "pka": "pKa", "ratio": "log ratio of protomers"}
"""What a measured value is, by its kind."""


@dataclass(frozen=True, slots=True)
class Analogue:
    """One measured value behind a correction.

    Attributes
    ----------
    name, smiles : str
        The compound, without a name where the source's table gives none; atom map 1 marks the site that was measured.
    kind : {"pkah", "pka", "ratio"}
        What was measured: a constant, or the ratio of two protomers (atom map 1 holds the proton in the form above, 2
        in that below).
    value : float
        Measured constant, or decadic logarithm of the ratio [-].
    source : str
        Publication, as in `data/SOURCES.md`.
    weight : float
        Share of its residual that it hands on [-].
    pull : float
        What it adds to the correction [pK units].
    """

    name: str
    smiles: str
    kind: str
    value: float
    source: str
    weight: float
    pull: float

    @property
    def quantity(self) -> str:
        """What was measured, in words."""
        return QUANTITIES[self.kind]


@cache
def _measured() -> dict[str, np.ndarray]:
    resource = files("basirank.models").joinpath("evidence.npz")
    with as_file(resource) as path, np.load(path, allow_pickle=False) as arrays:
        return dict(arrays)


@cache
def trained_compounds() -> frozenset[str]:
    """Keys (`compound_keys`) of all compounds with a measured value behind the model."""
    return frozenset().union(*(compound_keys(smiles) for smiles in set(_measured()["smiles"].tolist())))


def compound_keys(*structures: Any) -> frozenset[str]:
    """Which compound this is: first block of the InChIKey, without stereo, isotopes, mobile protons and atom maps.

    Parameters
    ----------
    structures : str or rdkit.Chem.Mol
        One or several drawings of it; one that has no InChI gives no key.

    Examples
    --------
    >>> compound_keys("CC(N)=[NH:1]", "CC(=N)N") == compound_keys("N=C(C)N")
    True
    """
    keys = set()
    with rdBase.BlockLogs():
        for structure in structures:
            text = isinstance(structure, str)
            mol = Chem.MolFromSmiles(structure.split()[0]) if text else Chem.Mol(structure)
            if mol is None:
                continue
            for atom in mol.GetAtoms():
                atom.SetAtomMapNum(0)
                atom.SetIsotope(0)
            if key := Chem.MolToInchiKey(mol):
                keys.add(str(key[:14]))
    return frozenset(keys)


def analogues(graph: Graph, site: Site, value: float) -> tuple[Analogue, ...]:
    """The measured values that weigh most in the correction of a site, the heaviest first.

    Parameters
    ----------
    graph : Graph
        Molecule of the site.
    site : Site
        The site.
    value : float
        Its line value [-].

    Returns
    -------
    tuple of Analogue
        At most `SHOWN`; none where nothing measured is alike.
    """
    group = group_of()[site.row.family]
    stored = _measured()
    if f"{group}/pulls" not in stored:
        return ()
    weights = covariances(graph, site, value) @ (stored[f"{group}/pulls"] * PULL_STEP)
    rows = stored[f"{group}/rows"]
    heaviest: list[int] = np.argsort(-np.abs(weights), kind="stable")[:SHOWN].tolist()
    return tuple(
        _analogue(stored, int(rows[place]), float(weights[place]))
        for place in heaviest
        if abs(weights[place]) >= LEAST_WEIGHT
    )


def _analogue(stored: dict[str, np.ndarray], row: int, weight: float) -> Analogue:
    name, smiles, kind, source = (str(stored[field][row]) for field in ("name", "smiles", "kind", "source"))
    value, residual = float(stored["value"][row]), float(stored["residual"][row])
    return Analogue(name, smiles, kind, value, source, round(weight, 3), round(weight * residual, 3))
