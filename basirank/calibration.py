"""Calibration: a table of a user's own measured constants, brought to standard conditions and conditioned upon.

Each value finds its step, is moved to 25 C and ionic strength 0 by what the package says of that step, and gets an
error by its method. What each compound is told by the others, itself left out, shows what the table is worth.
"""

from __future__ import annotations

import math
import os
from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from functools import cache
from typing import TYPE_CHECKING

import numpy as np

from .binding import EXACT_SITES
from .conditioning import LocalModel, Measurement, condition, left_out
from .conditions import ionic_strength_shift
from .equilibrium import Step
from .evidence import compound_keys, trained_compounds
from .measurements import Kind, Measured, Unused, measured_of, structures_of
from .prediction import Prediction, predict
from .request import STANDARD, Conditions
from .scoring import along_ladder, by_number
from .tables import read_table

if TYPE_CHECKING:
    import pandas as pd

COSOLVENT_ERROR = 0.5
"""Further standard deviation of a constant measured in a mixture with an organic solvent and not brought to water
[pK units]: in half methanol ammonium constants fall by 0.3 to 0.8 and carboxylic ones rise by about 1 (memory)."""
FAR = 3.0
"""A value farther than this from the prediction contradicts the structure; it counts with that distance as its error,
so that one slip does not move its neighbours [pK units]."""
AMBIGUOUS = 0.7
"""Another step that is farther from the value by less than this could be meant as well [pK units]."""
NEARER = 1.0
"""Another step that is nearer than the stated one by more than this is named [pK units]."""
DISAGREE = 0.3
"""Values of one step that lie farther apart are named [pK units]."""


@dataclass(frozen=True, slots=True)
class Calibrated:
    """One measured constant in a calibration.

    Attributes
    ----------
    measured : Measured
        The row of the table.
    kind : {"pkah", "pka"}
    step : int
        The step that it was taken for, as the columns are numbered at 25 C and ionic strength 0.
    value : float
        Constant at 25 C and ionic strength 0, in water [-].
    error : float
        Its standard deviation [pK units].
    before, after : float
        What is said of it by the shipped model, and by the other compounds of the table as well [-].
    compound : str
        Parent SMILES.
    trained : bool
        Whether the compound stands in the training table of the shipped model.
    remarks : tuple of str
        What contradicts, or could be meant otherwise.
    """

    measured: Measured
    kind: Kind
    step: int
    value: float
    error: float
    before: float
    after: float
    compound: str
    trained: bool
    remarks: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Calibration:
    """A table of measured constants, what it is worth, and the local model that it makes.

    Attributes
    ----------
    rows : tuple of Calibrated
        In the order of the table.
    unused : tuple of Unused
        Rows that could not be used, each with its reason.
    local : LocalModel
        To be given as `local`, or saved with `local_models.save_local`.
    """

    rows: tuple[Calibrated, ...]
    unused: tuple[Unused, ...]
    local: LocalModel

    @property
    def compounds(self) -> int:
        """Number of compounds."""
        return len({row.compound for row in self.rows})

    def errors(self) -> tuple[np.ndarray, np.ndarray]:
        """Errors of the shipped model, and with all other compounds of the table known [pK units]."""
        value = np.array([row.value for row in self.rows])
        before, after = (np.array([getattr(row, name) for row in self.rows]) for name in ("before", "after"))
        return before - value, after - value


@cache
def _methods() -> tuple[tuple[str, float], ...]:
    return tuple((row["word"], float(row["error"])) for row in read_table("methods.csv"))


def error_of(row: Measured) -> float:
    """Standard deviation of a measured constant: stated, or by its method; more in a mixture of solvents [pK units].

    Examples
    --------
    >>> error_of(Measured(1, "CCN", 10.6, method="potentiometric titration"))
    0.05
    >>> round(error_of(Measured(1, "CCN", 10.1, method="potentiometry", cosolvent="50 % methanol")), 3)
    0.502
    """
    said = row.method.casefold()
    own = next(error for word, error in _methods() if word in said) if row.error is None else row.error
    return math.hypot(own, COSOLVENT_ERROR) if row.cosolvent else own


def calibrated(rows: Sequence[Measured | Unused]) -> Calibration:
    """Calibrate on rows as `measurements.measured_of` gives them.

    Raises
    ------
    ValueError
        No row can be used; the message has the first reason.
    """
    unused = [row for row in rows if isinstance(row, Unused)]
    placed: list[Calibrated] = []
    for one in _placed([row for row in rows if isinstance(row, Measured)]):
        if isinstance(one, Unused):
            unused.append(one)
        else:
            placed.append(one)
    unused.sort(key=lambda row: row.number)
    if not placed:
        raise ValueError(f"no row can be used{f': {unused[0].told}' if unused else ''}")
    measurements = [
        Measurement(row.measured.structure, row.value, row.kind, row.step, row.error, row.measured.name)
        for row in placed
    ]
    told = [replace(row, after=after) for row, after in zip(placed, left_out(measurements), strict=True)]
    return Calibration(tuple(_with_repeats(told)), tuple(unused), condition(measurements))


def calibrate(
    table: pd.DataFrame | str | os.PathLike[str],
    *,
    smiles_column: str | None = None,
    value_column: str | None = None,
    kind: str | None = None,
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
) -> Calibration:
    """A local model from a table of measured constants.

    Parameters
    ----------
    table : pandas.DataFrame or path
        A frame, or a file that the readers know. Columns found by name: that of the values (`pkah`, `pka`, `value`,
        `measured` and the like) and, where they are there, `kind` (pkah or pka), `step` (numbered as the result
        columns are), `name`, `error` [pK units], `method`, `cosolvent`, `temperature` [C], `ionic_strength` [mol/L]
        and `constant` (mixed, concentration or thermodynamic).
    smiles_column : str, optional
        Column of the structures; `smiles` in any letter case when not given.
    value_column : str, optional
        Column of the measured values.
    kind : {"pkah", "pka"}, optional
        Kind of the values where there is no column `kind`. When neither that nor the name `pkah` says it, each value
        is taken for the step that lies nearest.
    temperature, ionic_strength : float
        Where the table doesn't say them [C], [mol/L].

    Returns
    -------
    Calibration

    Raises
    ------
    ValueError
        No such column, wrong conditions, no row that can be used, or a file that cannot be read
        (`readers.InputError`).

    Examples
    --------
    Three values of Hall 1957 (memory).

    >>> import pandas as pd
    >>> table = pd.DataFrame({"smiles": ["C1CCNCC1", "C1CCNC1", "CCNCC"], "pkah": [11.22, 11.27, 10.98]})
    >>> found = calibrate(table)
    >>> len(found.rows), found.compounds, [row.step for row in found.rows]
    (3, 3, [1, 1, 1])
    """
    structures, columns = structures_of(table, smiles_column, value_column, kind)
    return calibrated(measured_of(structures, columns, Conditions(temperature, ionic_strength)))


def _placed(rows: Sequence[Measured]) -> Iterable[Calibrated | Unused]:
    """Each row with its step, its value at standard conditions and what the shipped model says; in order."""
    by_conditions: dict[Conditions, list[int]] = defaultdict(list)
    for place, row in enumerate(rows):
        by_conditions[row.conditions].append(place)
    standard = predict([row.structure for row in rows])
    found: dict[int, Calibrated | Unused] = {}
    for conditions, places in by_conditions.items():
        there = (
            [standard[place] for place in places]
            if conditions == STANDARD
            else predict([rows[place].structure for place in places], conditions=conditions)
        )
        for place, at_conditions in zip(places, there, strict=True):
            found[place] = _place(rows[place], at_conditions, standard[place])
    return [found[place] for place in range(len(rows))]


def _place(row: Measured, there: Prediction, standard: Prediction) -> Calibrated | Unused:
    if there.equilibrium is None or standard.equilibrium is None or standard.parent is None:
        return Unused(row.number, row.structure, row.name, standard.message)
    if len(standard.estimates) > EXACT_SITES:
        return Unused(row.number, row.structure, row.name, f"more than {EXACT_SITES} sites")
    steps = sorted(there.equilibrium.steps, key=lambda step: -step.value)
    value = row.value + _to_mixed(row)
    step = _step_of(row, there, steps, value)
    if step is None:
        return Unused(row.number, row.structure, row.name, "no such step", row.wanted)
    rung = steps.index(step)
    same = sorted(standard.equilibrium.steps, key=lambda one: -one.value)[rung]
    like = [one for one in standard.equilibrium.steps if one.kind == same.kind]
    keys = compound_keys(row.structure, standard.parent.mol)
    off = abs(step.value - value)
    return Calibrated(
        row,
        "pkah" if same.kind == "base" else "pka",
        like.index(same) + 1,
        value + same.value - step.value,
        math.hypot(error_of(row), off) if off > FAR else error_of(row),
        same.value,
        math.nan,
        standard.parent.smiles,
        not keys.isdisjoint(trained_compounds()),
        _remarks(row, steps, step, value),
    )


def _to_mixed(row: Measured) -> float:
    """From a constant of concentrations to the mixed one that the package speaks of [pK units]."""
    if not row.concentration_constant:
        return 0.0
    at = row.conditions
    mixed, plain = (
        float(ionic_strength_shift(1, at.ionic_strength, temperature=at.temperature, kind=kind))
        for kind in ("mixed", "concentration")
    )
    return mixed - plain


def _step_of(row: Measured, there: Prediction, steps: Sequence[Step], value: float) -> Step | None:
    """The step that a row states, or the nearest where it states none."""
    if row.acid_charge is not None:
        return along_ladder(there, row.acid_charge)
    if row.stated:
        return by_number(there, row.kind, row.step)
    return min(steps, key=lambda step: abs(step.value - value), default=None)


def _remarks(row: Measured, steps: Sequence[Step], taken: Step, value: float) -> tuple[str, ...]:
    """What speaks against a row, in words."""
    remarks = []
    off = abs(taken.value - value)
    others = sorted((abs(step.value - value), n) for n, step in enumerate(steps) if step is not taken)
    if off > FAR:
        remarks.append(f"over {FAR:g} units from the prediction, counts little: another compound or step?")
    if others:
        distance, place = others[0]
        other = steps[place]
        like = [step for step in steps if step.kind == other.kind]
        number = like.index(other) + 1 if other.kind == "base" else len(like) - like.index(other)
        name = f"{'pkah' if other.kind == 'base' else 'pka'}_{number} ({other.value:.2f})"
        if distance < off - NEARER:
            remarks.append(f"{name} lies nearer")
        elif not row.stated and distance < off + AMBIGUOUS:
            remarks.append(f"site ambiguous: {name} could be meant as well")
    if row.cosolvent:
        remarks.append(f"measured with {row.cosolvent}: counts less")
    return tuple(remarks)


def _with_repeats(rows: Sequence[Calibrated]) -> list[Calibrated]:
    """The rows, with a remark where values of one step disagree."""
    same: dict[tuple[str, str, int], list[float]] = defaultdict(list)
    for row in rows:
        same[row.compound, row.kind, row.step].append(row.value)
    told = []
    for row in rows:
        values = same[row.compound, row.kind, row.step]
        apart = max(values) - min(values)
        if apart > DISAGREE:
            row = replace(row, remarks=(*row.remarks, f"values of this step disagree by {apart:.2f}"))
        told.append(row)
    return told
