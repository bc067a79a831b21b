"""Scoring: measured constants against predicted ones, and the figures that say how far apart they lie.

A value is compared with the step that its row states, even where another step would fit better; a remark says so.
Compounds that stand in the training table are told apart, because a figure that counts them is no test.
"""

from __future__ import annotations

import os
from collections import defaultdict
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from .annotation import CHUNK
from .equilibrium import Step
from .evidence import compound_keys, trained_compounds
from .measurements import Columns, Measured, Unused, measured_of, structures_of
from .prediction import Prediction, predict
from .request import Conditions

if TYPE_CHECKING:
    import pandas as pd

    from .conditioning import LocalModel

APART = 0.5
"""Pairs whose measured values lie no further apart say nothing about the order [pK units]."""
LOWEST = -2.0
"""Bases measured below it are left out of the figures: such constants depend on the acidity function taken [-]."""
MUCH_BETTER = 1.0
"""A step that lies nearer to the measured value than the stated one by more than this is named [pK units]."""


KNOWN = {
    "": "not in the training table",
    "training": "in the training table",
    "local": "among the local measurements",
}


@dataclass(frozen=True, slots=True)
class Scored:
    """One measured constant beside its prediction.

    Attributes
    ----------
    measured : Measured
    site_class, family : str
        Of the site that takes or gives the proton of this step.
    atom : int
        Its atom, as numbered in the input.
    predicted, half_width : float
        Macroscopic constant and half of its 90 % interval [-].
    support : str
        `supported` or `extrapolated`.
    known : {"", "training", "local"}
        Whether the compound stands in the training table, or among the measurements of the local corrections: what
        the model has seen is no test.
    remark : str
    """

    measured: Measured
    site_class: str
    family: str
    atom: int
    predicted: float
    half_width: float
    support: str
    known: str
    remark: str

    @property
    def error(self) -> float:
        """Predicted less measured [pK units]."""
        return self.predicted - self.measured.value

    @property
    def inside(self) -> bool:
        """Whether the measured value lies in the 90 % interval."""
        return abs(self.error) <= self.half_width


@dataclass(frozen=True, slots=True)
class Figures:
    """Figures of a set of values; not a number where there is none.

    Attributes
    ----------
    n : int
    mae, rmse, bias, median : float
        Mean absolute error, root of the mean square, mean error (predicted less measured), median absolute error.
    within_half, within_one : float
        Share of values within 0.5 and 1.0 of the prediction [-].
    coverage : float
        Share of values inside their 90 % interval [-].
    half_width, median_half_width : float
        Of these intervals, mean and median.
    order, pairs : float, int
        Share of pairs of first constants, measured more than 0.5 apart, that come in the right order, and how many
        such pairs there are.
    first : int
        First constants among the values.
    """

    n: int
    mae: float
    rmse: float
    bias: float
    median: float
    within_half: float
    within_one: float
    coverage: float
    half_width: float
    median_half_width: float
    order: float
    pairs: int
    first: int


@dataclass(frozen=True, slots=True)
class Group:
    """Figures of a part of the values: of all, of those in or not in the training table, of a class ...

    Attributes
    ----------
    kind : {"pkah", "pka"}
    by : {"all", "training", "support", "class", "family", "own class"}
    label : str
    figures : Figures
    new : Figures
        Of those whose compound is not in the training table (nor among the local measurements).
    """

    kind: str
    by: str
    label: str
    figures: Figures
    new: Figures


@dataclass(frozen=True, slots=True)
class Score:
    """A table of measured values against their predictions.

    Attributes
    ----------
    rows : tuple of Scored
        In the order of the table.
    unused : tuple of Unused
        Rows that could not be used, each with its reason.
    groups : tuple of Group
        Figures, by kind and part.
    value_column : str
        Column of the measured values.
    assumed : str
        Step taken for rows that name neither kind nor step; empty where all did.
    local : bool
        Whether corrections conditioned on a user's own values took part.
    """

    rows: tuple[Scored, ...]
    unused: tuple[Unused, ...]
    groups: tuple[Group, ...]
    value_column: str
    assumed: str = ""
    local: bool = False

    def worst(self, count: int) -> tuple[Scored, ...]:
        """The rows farthest from their prediction."""
        return tuple(sorted(self.rows, key=lambda row: -abs(row.error))[:count])


def along_ladder(prediction: Prediction, acid_charge: int) -> Step | None:
    """Step whose protonated form carries that charge (fixed charges apart); None where there is none.

    BH+ is 1 and HA 0: that says which constant is meant whatever group gives or takes the proton, and whatever a
    compilation calls it.
    """
    assert prediction.equilibrium is not None
    acids = sum(estimate.site.kind == "acid" for estimate in prediction.estimates)
    steps = sorted(prediction.equilibrium.steps, key=lambda step: -step.value)
    index = acids + acid_charge - 1
    return steps[index] if 0 <= index < len(steps) else None


def by_number(prediction: Prediction, kind: str, step: int) -> Step | None:
    """Step as the output columns number it."""
    assert prediction.equilibrium is not None
    wanted = "base" if kind == "pkah" else "acid"
    steps = [one for one in prediction.equilibrium.steps if one.kind == wanted]
    return steps[step - 1] if step <= len(steps) else None


def compare(rows: Iterable[Measured], local: LocalModel | None = None) -> list[Scored | Unused]:
    """Each measured constant beside the predicted step that its row states, in order; or why there is none."""
    listed = list(rows)
    own = compound_keys(*(one.structure for one in local.measurements)) if local is not None else frozenset()
    groups: dict[Conditions, list[int]] = defaultdict(list)
    for n, row in enumerate(listed):
        groups[row.conditions].append(n)
    found: dict[int, Scored | Unused] = {}
    for conditions, places in groups.items():
        for start in range(0, len(places), CHUNK):
            part = places[start : start + CHUNK]
            predictions = predict([listed[n].structure for n in part], conditions=conditions, local=local)
            for n, prediction in zip(part, predictions, strict=True):
                found[n] = _compared(listed[n], prediction, own)
    return [found[n] for n in range(len(listed))]


def _compared(row: Measured, prediction: Prediction, own: frozenset[str]) -> Scored | Unused:
    if prediction.equilibrium is None or prediction.parent is None:
        return Unused(row.number, row.structure, row.name, prediction.message)
    if row.acid_charge is not None:
        step = along_ladder(prediction, row.acid_charge)
    else:
        step = by_number(prediction, row.kind, row.step)
    if step is None:
        return Unused(row.number, row.structure, row.name, "no such step", row.wanted)
    estimate = prediction.estimates[step.carrier]
    site = estimate.site
    keys = compound_keys(row.structure, prediction.parent.mol)
    known = "local" if keys & own else "training" if keys & trained_compounds() else ""
    return Scored(
        row, site.site_class, site.row.family, prediction.parent.atom_index[site.atom], step.value, step.half_width,
        estimate.support, known, _remark(row, prediction, step),
    )  # fmt: skip


def _remark(row: Measured, prediction: Prediction, stated: Step) -> str:
    """The step that would fit much better than the stated one, if there is one, and the remarks of the prediction."""
    assert prediction.equilibrium is not None
    notes = [row.note] if row.note else []
    numbers = {"base": 0, "acid": 0}
    nearest, name = abs(stated.value - row.value) - MUCH_BETTER, ""
    for step in prediction.equilibrium.steps:
        numbers[step.kind] += 1
        if step is not stated and abs(step.value - row.value) < nearest:
            nearest = abs(step.value - row.value)
            kind = "pkah" if step.kind == "base" else "pka"
            name = f"{kind}_{numbers[step.kind]} ({step.value:.2f}) lies nearer"
    if name:
        notes.append(name)
    if prediction.message:
        notes.append(prediction.message)
    return "; ".join(notes)


def pair_order(rows: Sequence[Scored], apart: float = APART) -> tuple[float, int]:
    """Share of pairs, more than `apart` apart as measured, that come in the right order, and their number."""
    measured = np.array([row.measured.value for row in rows])
    predicted = np.array([row.predicted for row in rows])
    right = pairs = 0
    for start in range(0, len(rows), CHUNK):
        part = slice(start, start + CHUNK)
        wide = measured[part, None] - measured[None, :] > apart
        pairs += int(wide.sum())
        right += int(((predicted[part, None] - predicted[None, :])[wide] > 0).sum())
    return (right / pairs if pairs else float("nan")), pairs


def figures_of(rows: Sequence[Scored]) -> Figures:
    """Figures of a set of values."""
    first = [row for row in rows if row.measured.first]
    order, pairs = pair_order(first)
    if not rows:
        nan = float("nan")
        return Figures(0, nan, nan, nan, nan, nan, nan, nan, nan, nan, order, pairs, 0)
    error = np.array([row.error for row in rows])
    width = np.array([row.half_width for row in rows])
    far = np.abs(error)
    return Figures(
        n=len(rows),
        mae=float(far.mean()),
        rmse=float(np.sqrt((error**2).mean())),
        bias=float(error.mean()),
        median=float(np.median(far)),
        within_half=float(np.mean(far <= 0.5)),
        within_one=float(np.mean(far <= 1.0)),
        coverage=float(np.mean(far <= width)),
        half_width=float(width.mean()),
        median_half_width=float(np.median(width)),
        order=order,
        pairs=pairs,
        first=len(first),
    )


_PARTS: tuple[tuple[str, Callable[[Scored], str]], ...] = (
    ("training", lambda row: KNOWN[row.known]),
    ("support", lambda row: row.support),
    ("class", lambda row: row.site_class),
    ("family", lambda row: row.family),
    ("own class", lambda row: row.measured.own_class),
)


def groups_of(rows: Sequence[Scored]) -> tuple[Group, ...]:
    """Figures by kind: of all values, then of their parts, each the largest first."""
    groups = []
    for kind in ("pkah", "pka"):
        of_kind = [row for row in rows if row.measured.kind == kind]
        if not of_kind:
            continue
        groups.append(_group(kind, "all", "bases" if kind == "pkah" else "acids", of_kind))
        for by, key in _PARTS:
            parts: dict[str, list[Scored]] = defaultdict(list)
            for row in of_kind:
                parts[key(row)].append(row)
            if by == "own class" and set(parts) == {""}:
                continue
            for label, part in sorted(parts.items(), key=lambda item: -len(item[1])):
                groups.append(_group(kind, by, label or "none given", part))
    return tuple(groups)


def _group(kind: str, by: str, label: str, rows: Sequence[Scored]) -> Group:
    return Group(kind, by, label, figures_of(rows), figures_of([row for row in rows if not row.known]))


def scored(
    rows: Sequence[Measured | Unused],
    columns: Columns,
    *,
    local: LocalModel | None = None,
    lowest: float = LOWEST,
) -> Score:
    """Score rows of a table, as `measurements.measured_of` gives them."""
    usable, unused = [], []
    for row in rows:
        if isinstance(row, Unused):
            unused.append(row)
        elif row.kind == "pkah" and row.value < lowest:
            reason = f"measured below {lowest:g}, where bases are not scored"
            unused.append(Unused(row.number, row.structure, row.name, reason))
        else:
            usable.append(row)
    kept: list[Scored] = []
    for one in compare(usable, local):
        if isinstance(one, Scored):
            kept.append(one)
        else:
            unused.append(one)
    unused.sort(key=lambda row: row.number)
    assumed = f"{columns.default_kind}_1" if columns.kind is None and columns.acid_charge is None else ""
    if columns.step is not None:
        assumed = assumed.removesuffix("_1")
    return Score(tuple(kept), tuple(unused), groups_of(kept), columns.value_name, assumed, local is not None)


def score(
    table: pd.DataFrame | str | os.PathLike[str],
    *,
    smiles_column: str | None = None,
    value_column: str | None = None,
    kind: str | None = None,
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
    local: LocalModel | None = None,
    lowest: float = LOWEST,
) -> Score:
    """Measured constants of a table against the predicted ones.

    Parameters
    ----------
    table : pandas.DataFrame or path
        A frame, or a file that the readers know. Columns found by name: that of the values (`pkah`, `pka`, `value`,
        `measured` and the like) and, where they are there, `kind` (pkah or pka), `step` (numbered as the result
        columns are), `acid_charge`, `name`, `class`, `temperature` [C] and `ionic_strength` [mol/L].
    smiles_column : str, optional
        Column of the structures; `smiles` in any letter case when not given.
    value_column : str, optional
        Column of the measured values.
    kind : {"pkah", "pka"}, optional
        Kind of the values where there is no column `kind`; by the name of the column of values when not given.
    temperature, ionic_strength : float
        Where the table doesn't say them [C], [mol/L].
    local : LocalModel, optional
        Corrections conditioned on measured constants, from `condition`; the rows they come from are no test.
    lowest : float
        Bases measured below it are left out [-].

    Returns
    -------
    Score

    Raises
    ------
    ValueError
        No such column, wrong conditions, or a file that cannot be read (`readers.InputError`).

    Examples
    --------
    Two values of Hall 1957 (memory); both compounds are in the training table.

    >>> import pandas as pd
    >>> found = score(pd.DataFrame({"smiles": ["CCN", "CCNCC"], "pkah": [10.63, 10.98]}))
    >>> [(group.label, group.figures.n, group.new.n) for group in found.groups if group.by == "all"]
    [('bases', 2, 0)]
    """
    conditions = Conditions(temperature, ionic_strength)
    rows, columns = structures_of(table, smiles_column, value_column, kind)
    return scored(measured_of(rows, columns, conditions), columns, local=local, lowest=lowest)
