"""What dissolves with a compound: its own sites, the counter-ions of its salt, and ions that never change.

A hydrochloride brings chloride, a sodium salt sodium, a tartrate the two acid groups of tartaric acid. Listed acids
without carbon have their constants in `inorganic_acids.csv`, all that holds carbon or a basic nitrogen is predicted.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from typing import TYPE_CHECKING

import numpy as np
from rdkit import Chem

from .conditions import ionic_strength_shift
from .ladder import Ladder, ladder_of
from .prediction import predict
from .request import STANDARD, Conditions
from .salts import Component, components_of, split_ion_pairs
from .structures import Refusal, read_parent
from .tables import read_table

if TYPE_CHECKING:
    from .conditioning import LocalModel

STRONG = -10.0
"""Constant that stands for an acid which gives its proton to any water [-]."""


@dataclass(frozen=True, slots=True, eq=False)
class Composition:
    """One formula unit in solution.

    Attributes
    ----------
    solutes : tuple of Ladder
        One for each molecule or ion that takes or gives protons.
    fixed_charge : int
        Sum of the charges of ions that do neither: metals, tetrafluoroborate and so on.
    notes : tuple of str
        What was taken for what.
    """

    solutes: tuple[Ladder, ...]
    fixed_charge: int = 0
    notes: tuple[str, ...] = ()

    def charge(self, ph: np.ndarray) -> np.ndarray:
        """Charge of all that one formula unit holds, at each pH, shape (h,)."""
        total = np.full(len(ph), float(self.fixed_charge))
        for solute in self.solutes:
            total += solute.charge(ph)
        return total

    @property
    def constants(self) -> np.ndarray:
        """Constants of all solutes, highest first: the order in which protons go on."""
        return np.sort(np.concatenate([np.zeros(0), *(solute.constants for solute in self.solutes)]))[::-1]

    @property
    def protons(self) -> int:
        """Protons that the uncharged formula unit holds on its sites."""
        return -self.fixed_charge - sum(solute.bare_charge for solute in self.solutes)


@cache
def _inorganic() -> dict[str, tuple[str, tuple[float, ...]]]:
    """Name and constants of each acid without carbon, by canonical SMILES."""
    found = {}
    for row in read_table("inorganic_acids.csv"):
        constants = tuple(STRONG if text == "strong" else float(text) for text in row["constants"].split())
        found[Chem.CanonSmiles(row["smiles"])] = (row["name"], constants)
    return found


def compose(
    structure: str | Chem.Mol, conditions: Conditions = STANDARD, local: LocalModel | None = None
) -> Composition:
    """Everything that one formula unit of a structure brings into solution.

    Parameters
    ----------
    structure : str or rdkit.Chem.Mol
        Salts included; a name after the white space of a SMILES is ignored.
    conditions : Conditions
        Of the constants; those of acids without carbon keep their value of 25 C.
    local : LocalModel, optional
        A user's own measurements.

    Returns
    -------
    Composition
        A charge that is drawn without its counter-ion gets chloride or sodium, and a note says so.

    Raises
    ------
    Refusal
        The structure cannot be computed, or holds a counter-ion without known constants.

    Examples
    --------
    >>> compose("CCN.Cl").protons, compose("CC(=O)[O-].[Na+]").protons, compose("CCN").protons
    (1, 0, 0)
    """
    parent = read_parent(structure)
    text = structure if isinstance(structure, str) else Chem.MolToSmiles(structure)
    mol = split_ion_pairs(Chem.MolFromSmiles(text.split()[0]))
    solutes: list[Ladder] = []
    notes: list[str] = []
    fixed = 0
    for component in components_of(mol, range(mol.GetNumAtoms())):
        drawn = sum(mol.GetAtomWithIdx(atom).GetFormalCharge() for atom in component.index)
        if component.kind == "metal":
            if drawn <= 0:
                raise Refusal("a metal drawn without its charge: its ion is not known")
            fixed += drawn
        elif component.kind != "solvent":
            solute, name = _solute(component, conditions, local)
            if solute is None:
                fixed += drawn
            else:
                solutes.append(solute)
            if name != parent.smiles:
                notes.append(f"with {name}")
    net = Chem.GetFormalCharge(mol)
    if net:
        ion = "chloride" if net > 0 else "sodium"
        notes.append(f"drawn with charge {net:+d} and no counter-ion: {abs(net)} {ion} added")
        fixed -= net
    return Composition(tuple(solutes), fixed, tuple(dict.fromkeys(notes)))


def _solute(
    component: Component, conditions: Conditions, local: LocalModel | None
) -> tuple[Ladder | None, str]:
    """Ladder of a component and its name; no ladder for an ion without hydrogen, which keeps its drawn charge."""
    if component.is_organic:
        (found,) = predict([Chem.MolToSmiles(component.mol)], ph=(7.0,), conditions=conditions, local=local)
        if found.sites is None:
            raise Refusal(found.message)
        return ladder_of(found.sites), "" if found.parent is None else found.parent.smiles
    if component.key in _inorganic():
        name, constants = _inorganic()[component.key]
        taken_up = np.array(constants[::-1])
        charges = np.arange(1 - len(constants), 1)  # of the form with the 1st, 2nd, ... proton
        shift = ionic_strength_shift(charges, conditions.ionic_strength, temperature=conditions.temperature)
        if conditions.temperature != STANDARD.temperature and max(constants) > STRONG:
            name += " (its constants as at 25 C)"
        return Ladder(taken_up + shift, -len(constants)), name
    if any(atom.GetTotalNumHs() for atom in component.mol.GetAtoms()):
        raise Refusal(f"no constants are listed for the counter-ion {component.key}")
    return None, f"the ion {component.key}"
