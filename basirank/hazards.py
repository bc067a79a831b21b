"""Groups that don't stand the extremes of pH: what a wash with strong acid or base would do to a compound.

Each row of `workup_hazards.csv` is a pattern with the pH below which, or above which, it reacts within the time of
a work-up at room temperature.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

from rdkit import Chem

from .tables import read_table


@dataclass(frozen=True, slots=True)
class Hazard:
    """One group of a compound that reacts in water of some pH.

    Attributes
    ----------
    name : str
        The group.
    below, above : float or None
        pH from which on it reacts [-]; None where that side is safe.
    what : str
        What happens.
    source : str
    """

    name: str
    below: float | None
    above: float | None
    what: str
    source: str

    def at(self, ph: float) -> bool:
        """Whether the group reacts at a pH."""
        return (self.below is not None and ph <= self.below) or (self.above is not None and ph >= self.above)

    def __str__(self) -> str:
        sides = [
            f"{word} pH {limit:g}"
            for word, limit in (("below", self.below), ("above", self.above))
            if limit is not None
        ]
        always = self.below is not None and self.below == self.above
        return f"{self.name}: {self.what}" + ("" if always else f" {' and '.join(sides)}")


@cache
def _table() -> tuple[tuple[Chem.Mol, Hazard], ...]:
    found = []
    for row in read_table("workup_hazards.csv"):
        pattern = Chem.MolFromSmarts(row["smarts"])
        if pattern is None:
            raise ValueError(f"workup_hazards.csv: the pattern of {row['name']} cannot be read as SMARTS")
        below, above = (float(row[side]) if row[side] else None for side in ("below", "above"))
        found.append((pattern, Hazard(row["name"], below, above, row["what"], row["source"])))
    return tuple(found)


def hazards_of(mol: Chem.Mol, low: float, high: float) -> tuple[Hazard, ...]:
    """Groups of a molecule that react somewhere between two pH values.

    Parameters
    ----------
    mol : rdkit.Chem.Mol
    low, high : float
        Limits of the pH that will be used [-].

    Returns
    -------
    tuple of Hazard
        In the order of the table.

    Examples
    --------
    >>> [str(one) for one in hazards_of(Chem.MolFromSmiles("CCNC(=O)OC(C)(C)C"), 1.0, 13.0)]
    ['tert-butyl carbamate: loses isobutene and carbon dioxide below pH 1']
    """
    return tuple(
        hazard
        for pattern, hazard in _table()
        if (hazard.at(low) or hazard.at(high)) and mol.HasSubstructMatch(pattern)
    )
