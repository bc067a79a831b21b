"""Measurements: rows of a user's table as measured constants, each with the step it belongs to.

A row that cannot be used is kept with its reason. Columns are found by name, in any letter case; what the table does
not say (kind, step, conditions) is taken as stated in `columns_of`.
"""

from __future__ import annotations

import math
import os
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

from .readers.rows import InputError
from .records import NAMES_LISTED, structure_column
from .request import STANDARD, Conditions

if TYPE_CHECKING:
    import pandas as pd

Kind = Literal["pkah", "pka"]

VALUE_NAMES = ("pkah", "pka", "value", "measured", "measured_value", "measured_pkah", "measured_pka", "pkah_measured",
               "pka_measured", "experimental", "exp", "exp_pkah", "exp_pka", "pkah_exp", "pka_exp")  # fmt: skip
"""Columns that hold measured values, where none is named."""
NAME_NAMES = ("name", "compound", "title", "id")
KINDS: dict[str, Kind] = {"pkah": "pkah", "base": "pkah", "pka": "pka", "acid": "pka"}
CONSTANTS = ("", "mixed", "concentration", "thermodynamic")
"""Types of constant: with the activity of hydrogen ions alone, of concentrations alone, and at ionic strength 0."""
WATER = ("water", "h2o", "aqueous", "0", "0 %", "0%")
MISSING = ("", "na", "nan", "n/a", "none", "null", "-", "<na>")


@dataclass(frozen=True, slots=True)
class Measured:
    """One measured constant.

    Attributes
    ----------
    number : int
        Row of the table, counted from 1.
    structure : str or rdkit.Chem.Mol
    value : float
        Measured constant [-].
    kind : {"pkah", "pka"}
        Whether it is that of a base or of an acid group.
    step : int
        Which of them, as the columns are numbered: 1 is the highest pKaH or the lowest pKa.
    acid_charge : int or None
        Net charge of the protonated form, fixed charges apart (BH+ 1, HA 0); where given it names the step instead.
    name, own_class, note : str
        What the table calls the compound, its class there, and a remark.
    conditions : Conditions
        Temperature and ionic strength at which the value holds.
    first : bool
        Whether it is the first constant of its kind.
    error : float or None
        Standard deviation of the value, where given [pK units].
    method, cosolvent : str
        How it was measured, and in which mixture with water if not in water.
    concentration_constant : bool
        Whether it is a constant of concentrations alone at its ionic strength, not of the activity of hydrogen ions.
    stated : bool
        Whether the table says of which kind it is; if not, `kind` and `step` are taken for granted.
    """

    number: int
    structure: Any
    value: float
    kind: Kind = "pkah"
    step: int = 1
    acid_charge: int | None = None
    name: str = ""
    own_class: str = ""
    note: str = ""
    conditions: Conditions = STANDARD
    first: bool = True
    error: float | None = None
    method: str = ""
    cosolvent: str = ""
    concentration_constant: bool = False
    stated: bool = True

    @property
    def wanted(self) -> str:
        """Name of the step, e.g. `pkah_1`."""
        if self.acid_charge is not None:
            return f"{self.kind} from charge {self.acid_charge:+d}"
        return f"{self.kind}_{self.step}"


@dataclass(frozen=True, slots=True)
class Unused:
    """A row that could not be used, with its reason; `wanted` is the step it was to be compared with."""

    number: int
    structure: Any
    name: str
    reason: str
    wanted: str = ""

    @property
    def told(self) -> str:
        """The reason as a reader needs it."""
        return f"{self.reason}: {self.wanted}" if self.wanted else self.reason


@dataclass(frozen=True, slots=True)
class Columns:
    """Places of the columns of a table of measured values; None for one that it does not have."""

    value: int
    value_name: str
    default_kind: Kind
    kind: int | None
    step: int | None
    acid_charge: int | None
    name: int | None
    own_class: int | None
    temperature: int | None
    ionic_strength: int | None
    note: int | None
    error: int | None
    method: int | None
    cosolvent: int | None
    constant: int | None
    stated: bool


def columns_of(names: Sequence[object], value_column: str | None = None, kind: str | None = None) -> Columns:
    """Find the columns of a table of measured values.

    Parameters
    ----------
    names : sequence
        Column names.
    value_column : str, optional
        Column of the values; one of `VALUE_NAMES` when not given.
    kind : {"pkah", "pka"}, optional
        Kind of the rows that do not say theirs. When not given, `pka` for a column of values whose name says pKa,
        `pkah` otherwise.

    Raises
    ------
    InputError
        No such column, several of them, or an unknown kind.

    Examples
    --------
    >>> found = columns_of(["SMILES", "Compound", "pKaH"])
    >>> found.value, found.default_kind, found.name
    (2, 'pkah', 1)
    """
    plain = [re.sub(r"[^0-9a-z]+", "_", str(name).strip().casefold()).strip("_") for name in names]
    if value_column is None:
        places = [n for n, name in enumerate(plain) if name in VALUE_NAMES]
    else:
        exact = [n for n, name in enumerate(names) if str(name) == value_column]
        folded = value_column.strip().casefold()
        places = exact or [n for n, name in enumerate(names) if str(name).strip().casefold() == folded]
    if len(places) != 1:
        listed = ", ".join(str(name) for name in names[:NAMES_LISTED]) or "none"
        listed += f" and {len(names) - NAMES_LISTED} more" if len(names) > NAMES_LISTED else ""
        if value_column is not None:
            what = "no column" if not places else f"{len(places)} columns"
            raise InputError(f"{what} named {value_column!r}; the columns are: {listed}")
        if not places:
            raise InputError(
                f"no column of measured values (pkah, pka, value, measured ...): name it; the columns are: {listed}"
            )
        several = ", ".join(str(names[n]) for n in places)
        raise InputError(f"several columns may hold the measured values ({several}): name one")
    if kind is not None and kind not in ("pkah", "pka"):
        raise InputError(f"kind must be 'pkah' or 'pka', not {kind!r}")

    def place(*wanted: str) -> int | None:
        return next((plain.index(name) for name in wanted if name in plain), None)

    (value,) = places
    says_pka = "pka" in plain[value] and "pkah" not in plain[value]
    default: Kind = KINDS[kind] if kind is not None else ("pka" if says_pka else "pkah")
    return Columns(
        value=value,
        value_name=str(names[value]),
        default_kind=default,
        kind=place("kind"),
        step=place("step"),
        acid_charge=place("acid_charge"),
        name=place(*NAME_NAMES),
        own_class=place("class", "series"),
        temperature=place("temperature", "temperature_c"),
        ionic_strength=place("ionic_strength"),
        note=place("note", "remark"),
        error=place("error", "sd", "standard_deviation", "uncertainty"),
        method=place("method"),
        cosolvent=place("cosolvent", "co_solvent", "solvent"),
        constant=place("constant", "constant_type"),
        stated=kind is not None or "pkah" in plain[value],
    )


def measured_of(
    rows: Iterable[tuple[Any, Sequence[Any], str | None]], columns: Columns, conditions: Conditions = STANDARD
) -> list[Measured | Unused]:
    """Rows of a table as measured constants, or the reason why not, in order.

    Parameters
    ----------
    rows : iterable of (structure, cells, problem)
        `problem` is what is wrong with the row already, or None.
    columns : Columns
        From `columns_of`.
    conditions : Conditions
        For rows that do not say theirs.

    Examples
    --------
    >>> columns = columns_of(["smiles", "pkah", "temperature"])
    >>> sound, bad = measured_of([("CCN", ["CCN", "10.65", ""], None), ("CCN", ["CCN", ">10", ""], None)], columns)
    >>> sound.wanted, sound.value, bad.reason
    ('pkah_1', 10.65, "the measured value is not a number: '>10'")
    """
    found: list[Measured | Unused] = []
    for number, (structure, cells, problem) in enumerate(rows, start=1):
        name = _text(cells, columns.name)
        try:
            if problem is not None:
                raise ValueError(problem)
            if structure is None or (isinstance(structure, str) and not structure.strip()):
                raise ValueError("no structure given")
            found.append(_measured(number, structure, cells, columns, conditions, name))
        except ValueError as error:
            found.append(Unused(number, structure, name, str(error)))
    return found


def structures_of(
    table: pd.DataFrame | str | os.PathLike[str],
    smiles_column: str | None = None,
    value_column: str | None = None,
    kind: str | None = None,
) -> tuple[list[tuple[Any, Sequence[Any], str | None]], Columns]:
    """Rows of a frame or a file as `measured_of` takes them, and the columns found.

    Raises
    ------
    ValueError
        No such column, or a file that cannot be read (`InputError`).
    """
    if isinstance(table, str | os.PathLike):
        from .batch.compute import with_smiles
        from .readers import open_table

        with open_table([os.fspath(table)], smiles_column=smiles_column) as opened:
            columns = columns_of(opened.columns, value_column, kind)
            return [
                (row.structure, row.cells, row.problem) for row in with_smiles(list(opened.rows))
            ], columns
    names = list(table.columns)
    place = structure_column(names, smiles_column)
    columns = columns_of(names, value_column, kind)
    return [
        (_structure(cells[place]), cells, None) for cells in table.itertuples(index=False, name=None)
    ], columns


def _structure(cell: Any) -> Any:
    from rdkit import Chem

    return cell if isinstance(cell, str | Chem.Mol) else None


def _measured(
    number: int, structure: Any, cells: Sequence[Any], columns: Columns, conditions: Conditions, name: str
) -> Measured:
    value = _number(cells, columns.value, "the measured value")
    if value is None:
        raise ValueError("no measured value given")
    said = _given(cells, columns.kind).casefold()
    if said and said not in KINDS:
        raise ValueError(f"kind must be pkah or pka, not {said!r}")
    kind = KINDS[said] if said else columns.default_kind
    step = _whole(cells, columns.step, "the step")
    if step is not None and step < 1:
        raise ValueError(f"steps count from 1, not {step}")
    charge = _whole(cells, columns.acid_charge, "the charge of the acid form")
    temperature = _number(cells, columns.temperature, "the temperature")
    strength = _number(cells, columns.ionic_strength, "the ionic strength")
    constant = _text(cells, columns.constant).casefold()
    if constant not in CONSTANTS:
        raise ValueError(f"a constant is mixed, concentration or thermodynamic, not {constant!r}")
    if constant == "thermodynamic":
        strength = 0.0
    at = Conditions(
        conditions.temperature if temperature is None else temperature,
        conditions.ionic_strength if strength is None else strength,
    )
    error = _number(cells, columns.error, "the error")
    if error is not None and error <= 0:
        raise ValueError(f"the error must be above 0, not {error:g}")
    first = charge == 1 if charge is not None else step in (None, 1)
    return Measured(
        number, structure, value, kind, step or 1, charge, name,
        _text(cells, columns.own_class), _text(cells, columns.note), at, first, error,
        _text(cells, columns.method), _cosolvent(cells, columns.cosolvent), constant == "concentration",
        columns.stated or bool(said) or charge is not None,
    )  # fmt: skip


def _cosolvent(cells: Sequence[Any], place: int | None) -> str:
    """What stands beside water; empty for water alone."""
    text = _text(cells, place)
    return "" if text.casefold() in WATER else text


def _text(cells: Sequence[Any], place: int | None) -> str:
    """A cell as text; empty for one that holds nothing."""
    if place is None or place >= len(cells):
        return ""
    cell = cells[place]
    nothing = (
        cell is None or (isinstance(cell, float) and math.isnan(cell)) or type(cell).__name__ == "NAType"
    )
    return "" if nothing else str(cell).strip()


def _given(cells: Sequence[Any], place: int | None) -> str:
    """The same, empty also for a word that says that nothing is known."""
    text = _text(cells, place)
    return "" if text.casefold() in MISSING else text


def _number(cells: Sequence[Any], place: int | None, what: str) -> float | None:
    text = _given(cells, place)
    if not text:
        return None
    try:
        number = float(text)
    except ValueError:
        number = math.nan
    if not math.isfinite(number):
        raise ValueError(f"{what} is not a number: {text!r}")
    return number


def _whole(cells: Sequence[Any], place: int | None, what: str) -> int | None:
    number = _number(cells, place, what)
    if number is not None and number != int(number):
        raise ValueError(f"{what} is not a whole number: {number:g}")
    return None if number is None else int(number)
