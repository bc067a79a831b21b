"""Scan: the shift that one edit, or each of a family, brings about at every atom where it can be made."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from .candidates import REACH, Start, start_of
from .edits import Product, chosen_edits, marked_smiles
from .records import reported, shown
from .request import STANDARD, Conditions, Request
from .shifts import shift_half_width

if TYPE_CHECKING:
    import pandas as pd
    from rdkit import Chem

    from .conditioning import LocalModel


@dataclass(frozen=True, slots=True)
class ScanPoint:
    """One edit at one atom of the input: what it makes, the constant and the shift with 90 % intervals."""

    atom: int
    edit: str
    label: str
    smiles: str
    step: str
    value: float
    low: float
    high: float
    shift: float
    shift_low: float
    shift_high: float


@dataclass(frozen=True, slots=True)
class Scan:
    """A structure, its nitrogen, and the shift of each edit at each atom.

    Attributes
    ----------
    structure, parent_smiles : str
        As given, and the neutral parent.
    message : str
        Remarks on the structure and its constants.
    site : int
        The nitrogen, as the input numbers it.
    site_class, step : str
        Its class, and which constant is its own.
    value, low, high : float
        That constant and its 90 % interval [-].
    reach : int
        Bonds from the nitrogen within which edits were made.
    points : tuple of ScanPoint
        By edit in the order of the table, then by atom. Atoms that are equal by symmetry have a point each.
    parent_atoms : tuple of int
        Number in the input of each atom of `parent_smiles`, in the order in which they stand there.
    conditions : Conditions
        Of the constants.
    """

    structure: str
    parent_smiles: str
    message: str
    site: int
    site_class: str
    step: str
    value: float
    low: float
    high: float
    reach: int
    points: tuple[ScanPoint, ...]
    parent_atoms: tuple[int, ...]
    conditions: Conditions = STANDARD

    def __str__(self) -> str:
        from .tuning_text import scan_text

        return scan_text(self)

    def frame(self) -> pd.DataFrame:
        """All points as a table, a row for each, in order."""
        import pandas as pd

        from .tuning_text import SCAN_COLUMNS

        return pd.DataFrame([scan_row(point) for point in self.points], columns=list(SCAN_COLUMNS))


def scan_row(point: ScanPoint) -> tuple[int | str | float, ...]:
    """One point as a row of the table, in the order of `SCAN_COLUMNS`."""
    return (
        point.atom,
        point.edit,
        point.label,
        point.smiles,
        point.step,
        point.value,
        point.low,
        point.high,
        point.shift,
        point.shift_low,
        point.shift_high,
    )


def scan(
    structure: str | Chem.Mol,
    edit: str = "all",
    *,
    site: int | None = None,
    keep: str | Iterable[int | str] = (),
    reach: int = REACH,
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
    local: LocalModel | None = None,
) -> Scan:
    """The shift of one nitrogen's constant by an edit at each atom where it can be made.

    Parameters
    ----------
    structure : str or rdkit.Chem.Mol
        One compound; atoms are numbered from 0 as written in it.
    edit : str
        Name of an edit or of a family, or a part of one ("fluoro"); "all" for every edit.
    site, keep, reach, temperature, ionic_strength, local
        As in `tune`.

    Returns
    -------
    Scan
        Without points where the edit can be made nowhere.

    Raises
    ------
    ValueError
        No edit of that name; otherwise as in `tune`.

    Examples
    --------
    Fluorine shifts most where it is nearest:

    >>> [point.shift < -1 for point in scan("NCCCC", "beta-fluoro").points]
    [True]
    """
    wanted = chosen_edits(edit)
    request = Request(Conditions(temperature, ionic_strength), local=local)
    start = start_of(structure, site=site, keep=keep, reach=reach, request=request)
    own = start.step
    return Scan(
        structure=start.structure,
        parent_smiles=start.parent_smiles,
        message=own.prediction.message,
        site=start.site,
        site_class=own.estimate.site.site_class,
        step=f"pKaH {own.number}",
        value=shown(own.value, "constant"),
        low=shown(own.value - own.half_width, "constant"),
        high=shown(own.value + own.half_width, "constant"),
        reach=reach,
        points=tuple(_points(start, start.products(wanted))),
        parent_atoms=start.parent_atoms,
        conditions=request.conditions,
    )


def _points(start: Start, products: list[Product]) -> list[ScanPoint]:
    """A point for each edit, atom and product; products that symmetry makes equal are computed once."""
    ways: dict[str, list[Product]] = defaultdict(list)
    for product in products:
        ways[marked_smiles(product.mol, product.site)].append(product)
    parent = start.step.prediction.parent
    assert parent is not None
    points: dict[tuple[int, int, str], ScanPoint] = {}
    for alike, step in zip(ways.values(), start.steps([some[0] for some in ways.values()]), strict=True):
        if step is None or step.prediction.parent is None or reported(step.value) is None:
            continue
        smiles = step.prediction.parent.smiles
        if smiles == start.parent_smiles:
            continue
        shift, half = step.value - start.step.value, shift_half_width(start.step, step)
        for product in alike:
            (edit,), atom = product.edits, parent.atom_index[product.position]
            points[edit.place, atom, smiles] = ScanPoint(
                atom,
                edit.name,
                edit.label,
                smiles,
                f"pKaH {step.number}",
                *(
                    shown(value, "constant")
                    for value in (
                        step.value,
                        step.value - step.half_width,
                        step.value + step.half_width,
                        shift,
                        shift - half,
                        shift + half,
                    )
                ),
            )
    return [points[key] for key in sorted(points)]
