"""Measured values as rows of the fit: each with the sites of its molecule and the step or the protomers it speaks of.

`data/measured.csv` has macroscopic constants, `data/protomers.csv` ratios of protomers: which of two sites of one
molecule holds the proton. Macroscopic constants don't say that (those of nicotinic acid are the same whether its form
without net charge is a zwitterion or not); spectra and the constants of esters, ethers and betaines do.
"""

from __future__ import annotations

import csv
import sys
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from rdkit import Chem

from basirank.conditions import (
    IONIC_STRENGTH_RANGE,
    STANDARD_TEMPERATURE,
    TEMPERATURE_RANGE,
    to_standard,
)
from basirank.interactions import Paths, find_paths
from basirank.prediction import Lines, site_lines
from basirank.sites import site_classes
from basirank.structures import Parent, Refusal, read_parent

QUALITY_ERROR = {"reliable": 0.05, "approximate": 0.10, "uncertain": 0.20, "": 0.20}
"""Error of a measured value by the compilation's own judgement [pK units] (common practice)."""
MOST_SITES = 12
"""Molecules with more sites are left out of the fit."""


RATIO = "ratio"
"""Kind of a row that tells a ratio of protomers."""


@dataclass(slots=True)
class Row:
    """One measured value with the sites of its molecule.

    `index` is the macroscopic step that it belongs to; for a ratio of protomers (`pair`: the site that holds the
    proton in the form counted above, and in the form below) the number of protons that both hold.
    """

    record: dict[str, str]
    group: str
    value: float
    error: float
    index: int
    keys: list[list[tuple[tuple[str, str, str], float]]]
    lines: Lines
    paths: Paths
    exclusive: np.ndarray
    acid: np.ndarray
    pair: tuple[int, int] | None = None
    main_site: int = 0


@dataclass(frozen=True, slots=True)
class _Molecule:
    """What the rows of one compound have in common."""

    parent: Parent
    lines: Lines
    paths: Paths
    exclusive: np.ndarray
    acid: np.ndarray


def load(path: Path) -> list[Row]:
    """Read a table in the columns of `data/measured.csv`."""
    with path.open(encoding="utf-8", newline="") as handle:
        return rows_of(csv.DictReader(handle))


def load_protomers(path: Path) -> list[Row]:
    """Read a table in the columns of `data/protomers.csv`."""
    with path.open(encoding="utf-8", newline="") as handle:
        return protomers_of(csv.DictReader(handle))


def rows_of(records: Iterable[dict[str, str]]) -> list[Row]:
    """Find the macroscopic step that each value belongs to."""
    rows: list[Row] = []
    known: dict[str, _Molecule | None] = {}
    for record in records:
        smiles = record["smiles"]
        if smiles not in known:
            try:
                known[smiles] = _molecule(smiles)
            except Refusal as reason:
                print(f"skipped {smiles}: {reason}", file=sys.stderr)
                known[smiles] = None
        molecule = known[smiles]
        if molecule is None:
            continue
        index = int(molecule.acid.sum()) + int(record["acid_charge"]) - 1
        if not 0 <= index < len(molecule.acid) or len(molecule.acid) > MOST_SITES:
            print(f"skipped {record['name']}, {smiles}: no such step", file=sys.stderr)
            continue
        rows.append(_row(record, molecule, at_standard(record, sum(molecule.lines.graph.charge)), index))
    return rows


def protomers_of(records: Iterable[dict[str, str]]) -> list[Row]:
    """Find the two sites that each ratio speaks of: atom map 1 holds the proton in the form above, 2 in that below.

    Raises
    ------
    ValueError
        The marks are not two sites, or no two protomers of this charge differ so.
    """
    rows = []
    for record in records:
        molecule = _molecule(record["smiles"])
        marks = {
            atom.GetAtomMapNum(): atom.GetIdx() for atom in Chem.MolFromSmiles(record["smiles"]).GetAtoms()
        }
        sites = {
            molecule.parent.atom_index[site.atom]: place for place, site in enumerate(molecule.lines.sites)
        }
        protons = int(molecule.acid.sum()) + int(record["charge"]) - sum(molecule.lines.graph.charge)
        if not {marks.get(1), marks.get(2)} <= set(sites) or not 0 < protons < len(sites) <= MOST_SITES:
            raise ValueError(
                f"{record['name']}, {record['smiles']}: the marks are not two sites, or the charge is off"
            )
        row = _row({**record, "kind": RATIO}, molecule, float(record["log_ratio"]), protons)
        row.pair = sites[marks[1]], sites[marks[2]]
        rows.append(row)
    return rows


def _molecule(smiles: str) -> _Molecule:
    parent = read_parent(smiles)
    lines = site_lines(parent)
    paths, exclusive = find_paths(lines.graph, lines.sites)
    if exclusive is None:
        exclusive = np.zeros((len(lines.sites), len(lines.sites)), dtype=bool)
    acid = np.array([site.kind == "acid" for site in lines.sites], dtype=bool)
    return _Molecule(parent, lines, paths, exclusive, acid)


def _row(record: dict[str, str], molecule: _Molecule, value: float, index: int) -> Row:
    keys = [[(term.key, term.descriptor) for term in terms] for terms in molecule.lines.terms]
    error = QUALITY_ERROR.get(record["quality"].lower(), 0.3)
    return Row(
        record,
        molecule.parent.smiles,
        value,
        error,
        index,
        keys,
        molecule.lines,
        molecule.paths,
        molecule.exclusive,
        molecule.acid,
    )


def at_standard(record: dict[str, str], fixed_charge: int) -> float:
    """Measured value brought to 25 C and ionic strength 0; what isn't stated is taken as these.

    A value at a stated ionic strength is a concentration constant unless its note says mixed: such are those of the
    polyamines and chelators (1,2-diaminoethane 7.08 at 0.1 mol/L against 6.85, Martell and Smith, memory). A value
    at a temperature or an ionic strength out of reach of the laws stays as it is in that respect.
    """
    family = next(row.family for row in site_classes() if row.name == record["class"] and row.kind != "none")
    temperature = float(record["temperature_c"] or STANDARD_TEMPERATURE)
    strength = float(record["ionic_strength"] or 0.0)
    return float(
        to_standard(
            float(record["value"]),
            family=family,
            acid_charge=int(record["acid_charge"]) + fixed_charge,
            temperature=temperature if _within(temperature, TEMPERATURE_RANGE) else STANDARD_TEMPERATURE,
            ionic_strength=strength if _within(strength, IONIC_STRENGTH_RANGE) else 0.0,
            kind="mixed" if "mixed constant" in record["note"] else "concentration",
        )
    )


def _within(value: float, ends: tuple[float, float]) -> bool:
    return ends[0] <= value <= ends[1]
