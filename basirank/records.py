"""Records: one row of the result table for each structure, in one fixed schema.

A record holds what a chemist reads off a prediction: the macroscopic constants with their 90 % intervals, the
atom that takes the first proton, and the protonation state at each pH. Names, order, text format and pandas
type of every column follow from the one table `CONSTANT_COLUMNS` + `STATE_COLUMNS`, so that no writer can
differ.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from functools import cache
from typing import TYPE_CHECKING, Literal

from .request import PLAIN, Request

if TYPE_CHECKING:
    from .equilibrium import Step
    from .prediction import Prediction

Kind = Literal["text", "integer", "constant", "fraction"]
Value = str | int | float | None
Record = tuple[Value, ...]

PH_RANGE = (
    -2.0,
    16.0,
)  # pH that may be asked for: the span of the acidity functions behind the weakest bases [-]
REPORTED_RANGE = (
    -5.0,
    16.0,
)  # constants outside it are not reported: no measured value in water stands behind them [-]
NAMES_LISTED = 40  # column names that a message shows
STEPS_SHOWN = 4  # steps of each kind that have columns of their own

DECIMALS: dict[Kind, int] = {"constant": 2, "fraction": 4}
PANDAS_TYPES: dict[Kind, str] = {
    "text": "string",
    "integer": "Int64",
    "constant": "float64",
    "fraction": "float64",
}


_TEXT: dict[Kind, Callable[[object], str]] = {  # z: never a negative zero
    "text": str,
    "integer": str,
    **{kind: f"{{:z.{decimals}f}}".format for kind, decimals in DECIMALS.items()},
}


@dataclass(frozen=True, slots=True)
class Column:
    """One column of the result table: its name, and the kind that fixes text format and pandas type."""

    name: str
    kind: Kind


def _pkah_columns(n: int) -> tuple[Column, ...]:
    return tuple(Column(f"pkah_{n}{end}", "constant") for end in ("", "_low", "_high"))


RANK_COLUMN = Column("rank", "integer")
ABOVE_COLUMN = Column("above_next", "fraction")

CONSTANT_COLUMNS: tuple[Column, ...] = (
    Column("status", "text"),
    Column("message", "text"),
    Column("parent_smiles", "text"),
    *(column for n in range(1, STEPS_SHOWN + 1) for column in _pkah_columns(n)),
    Column("pkah_1_atom", "integer"),
    Column("pkah_1_class", "text"),
    Column("pkah_1_support", "text"),
    *(Column(f"pka_{n}", "constant") for n in range(1, STEPS_SHOWN + 1)),
    Column("steps_omitted", "integer"),
)

PKB_COLUMNS: tuple[Column, ...] = tuple(Column(f"pkb_{n}", "constant") for n in range(1, STEPS_SHOWN + 1))
"""On request: each stands after the interval of the pKaH of the same number."""

STATE_COLUMNS: tuple[Column, ...] = (
    Column("net_charge", "fraction"),
    Column("protonated_fraction", "fraction"),
    Column("dominant_form", "text"),
    Column("dominant_fraction", "fraction"),
)

FORM_COLUMNS: tuple[Column, ...] = (
    Column("neutral_fraction", "fraction"),
    Column("zwitterion_fraction", "fraction"),
)
"""On request: shares of the form without any charge and of that whose charges add up to none."""


def clean_ph(ph: float | str | Iterable[float | str]) -> tuple[float, ...]:
    """The pH values asked for, as numbers, each once, in the order given.

    Parameters
    ----------
    ph : float, str or an iterable of them
        pH [-], from -2 to 16; six digits are kept.

    Returns
    -------
    tuple of float

    Raises
    ------
    ValueError
        Not a number, outside -2 to 16, or none at all.

    Examples
    --------
    >>> clean_ph(7.4), clean_ph(["5.5", 7.4, 5.5])
    ((7.4,), (5.5, 7.4))
    """
    wanted = ph if isinstance(ph, Iterable) and not isinstance(ph, str | bytes) else (ph,)
    seen: dict[float, None] = {}
    for value in wanted:
        try:
            number = math.nan if isinstance(value, bool) else float(value)  # type: ignore[arg-type]
        except (TypeError, ValueError):
            number = math.nan
        if math.isnan(number):
            raise ValueError(f"pH must be a number, not {value!r}")
        if not PH_RANGE[0] <= number <= PH_RANGE[1]:
            raise ValueError(f"pH must lie between {PH_RANGE[0]:g} and {PH_RANGE[1]:g}, not {number:g}")
        seen[float(f"{number:g}") + 0.0] = None
    if not seen:
        raise ValueError("no pH given")
    return tuple(seen)


def constant_columns(request: Request = PLAIN) -> tuple[Column, ...]:
    """Columns of the constants, with pKb beside pKaH where that is asked for."""
    if not request.pkb:
        return CONSTANT_COLUMNS
    after = {f"pkah_{n}_high": column for n, column in enumerate(PKB_COLUMNS, start=1)}
    pairs = ((column, after.get(column.name)) for column in CONSTANT_COLUMNS)
    return tuple(column for pair in pairs for column in pair if column is not None)


def state_columns(request: Request = PLAIN) -> tuple[Column, ...]:
    """Columns of the state at one pH."""
    return STATE_COLUMNS + FORM_COLUMNS if request.forms else STATE_COLUMNS


def schema(
    ph: Sequence[float] = (7.4,), *, ranked: bool = False, request: Request = PLAIN
) -> tuple[Column, ...]:
    """Columns of the result table.

    Parameters
    ----------
    ph : sequence of float
        pH values [-]. With one the state columns stand as named, with several each is followed by `_at_<pH>`.
    ranked : bool
        Whether the column `rank` comes first, and `above_next` last.
    request : Request
        Further columns.

    Examples
    --------
    >>> [column.name for column in schema((7.4,))[-4:]]
    ['net_charge', 'protonated_fraction', 'dominant_form', 'dominant_fraction']
    >>> [column.name for column in schema((5.5, 7.4))][-8::4]
    ['net_charge_at_5.5', 'net_charge_at_7.4']
    """
    states = state_columns(request)
    if len(ph) > 1:
        states = tuple(
            Column(f"{column.name}_at_{value:g}", column.kind) for value in ph for column in states
        )
    columns = (*constant_columns(request), *states)
    return (RANK_COLUMN, *columns, ABOVE_COLUMN) if ranked else columns


def column_positions(columns: Sequence[Column]) -> dict[str, int]:
    """Place of each column by name."""
    return {column.name: place for place, column in enumerate(columns)}


def shown(value: float, kind: Kind) -> float:
    """A number rounded to the decimals of its kind; never a negative zero."""
    return round(float(value), DECIMALS[kind]) + 0.0


def reported(value: float) -> float | None:
    """A constant to two decimals, or nothing where it lies outside -5 to 16 or is no number."""
    return shown(value, "constant") if REPORTED_RANGE[0] <= value <= REPORTED_RANGE[1] else None


def cell(value: Value, kind: Kind) -> str:
    """Text of one cell: constants with two decimals, fractions with four, a missing value empty.

    Examples
    --------
    >>> cell(9.8, "constant"), cell(-0.00001, "fraction"), cell(None, "constant"), cell(3, "integer")
    ('9.80', '0.0000', '', '3')
    """
    return "" if value is None else _TEXT[kind](value)


def cells(record: Record, columns: Sequence[Column]) -> list[str]:
    """Text of one record, cell by cell."""
    return [
        "" if value is None else _TEXT[column.kind](value)
        for value, column in zip(record, columns, strict=True)
    ]


def refused_record(reason: str, ph: Sequence[float], request: Request = PLAIN) -> Record:
    """The row of a structure that cannot be computed: `refused`, the reason, all else empty."""
    return ("refused", reason) + (None,) * (len(schema(ph, request=request)) - 2)


def equivalent_carriers(prediction: Prediction, step: Step) -> list[int]:
    """Sites that may carry the proton of a step: its carrier and those that symmetry makes equivalent to it.

    Returns
    -------
    list of int
        Places in the list of sites, by the number of their atom in the input, so that the answer follows
        the drawing and not the order in which sites were found.
    """
    parent, estimates = prediction.parent, prediction.estimates
    assert parent is not None
    chosen = estimates[step.carrier]
    alike = [
        place
        for place, other in enumerate(estimates)
        if other.site.site_class == chosen.site.site_class and abs(other.value - chosen.value) < 1e-9
    ]
    if len(alike) > 1:
        from rdkit import Chem

        ranks = Chem.CanonicalRankAtoms(parent.mol, breakTies=False, includeChirality=False)
        alike = [place for place in alike if ranks[estimates[place].site.atom] == ranks[chosen.site.atom]]
    return sorted(alike or [step.carrier], key=lambda place: parent.atom_index[estimates[place].site.atom])


def site_atom(prediction: Prediction, place: int) -> int:
    """Atom of a site, numbered as written in the input."""
    assert prediction.parent is not None
    return prediction.parent.atom_index[prediction.estimates[place].site.atom]


def support(estimate: object) -> str:
    """`supported` or `extrapolated`: whether measured neighbours stand behind a value; by default none do."""
    return str(getattr(estimate, "support", "extrapolated"))


def interval(step: Step) -> tuple[float | None, float | None]:
    """Ends of the 90 % interval of a step [-]; an end outside the reported range is left out."""
    return reported(step.value - step.half_width), reported(step.value + step.half_width)


def record(prediction: Prediction, ph: Sequence[float], request: Request = PLAIN) -> Record:
    """One row, in the order of `schema(ph, request=request)`, numbers rounded as they are shown.

    Parameters
    ----------
    prediction : Prediction
        Result for one structure, computed at the same `ph`.
    ph : sequence of float
        pH values [-].
    request : Request
        Further columns, and the conditions at which the prediction was made.

    Returns
    -------
    tuple
        Text, whole numbers, floats or None. Step n keeps its number n even where a stronger step lies outside
        the reported range; `steps_omitted` counts the reportable steps that found no column.
    """
    parent, equilibrium = prediction.parent, prediction.equilibrium
    if prediction.status == "refused" or parent is None:
        return refused_record(prediction.message or "cannot be computed", ph, request)
    steps = equilibrium.steps if equilibrium is not None else ()
    bases = [step for step in steps if step.kind == "base"]
    acids = [step for step in steps if step.kind == "acid"]
    message = prediction.message
    if bases and bases[0].value > REPORTED_RANGE[1]:
        message = "; ".join(filter(None, (message, f"first pKaH above {REPORTED_RANGE[1]:g}, not reported")))
    row: list[Value] = [prediction.status, message, parent.smiles]
    for n in range(STEPS_SHOWN):
        value = reported(bases[n].value) if n < len(bases) else None
        row += (None, None, None) if value is None else (value, *interval(bases[n]))
        if request.pkb:
            row.append(None if value is None else pkb(value, request))
    if bases and reported(bases[0].value) is not None:
        first = prediction.estimates[bases[0].carrier]
        atom = site_atom(prediction, equivalent_carriers(prediction, bases[0])[0])
        row += (atom, first.site.site_class, support(first))
    else:
        row += (None, None, None)
    row += (reported(acids[n].value) if n < len(acids) else None for n in range(STEPS_SHOWN))
    beyond = bases[STEPS_SHOWN:] + acids[STEPS_SHOWN:]
    row.append(sum(reported(step.value) is not None for step in beyond))
    if equilibrium is None:
        row += (None,) * (len(state_columns(request)) * len(ph))
        return tuple(row)
    for state, form in zip(equilibrium.states, prediction.forms, strict=True):
        row += (
            shown(state.net_charge, "fraction"),
            shown(state.protonated_fraction, "fraction"),
            form,
            shown(state.dominant_fraction, "fraction"),
        )
        if request.forms:
            row += (shown(state.neutral_fraction, "fraction"), shown(state.zwitterion_fraction, "fraction"))
    return tuple(row)


def pkb(pkah: float, request: Request = PLAIN) -> float:
    """pKb beside a pKaH: pKw of the conditions less pKaH, to two decimals; 14.00 - pKaH at 25 C.

    Examples
    --------
    >>> pkb(9.25)
    4.75
    """
    return shown(_pkw(request.conditions.temperature, request.conditions.ionic_strength) - pkah, "constant")


@cache
def _pkw(temperature: float, ionic_strength: float) -> float:
    from .conditions import pkw

    return float(pkw(temperature, ionic_strength))


def ranking(records: Sequence[Record]) -> list[tuple[int | None, int]]:
    """Order of a list by the first pKaH, strongest base first.

    Returns
    -------
    list of (rank, position)
        Rank 1, 2, ... and the position of the record in `records`. Equal constants (to the two decimals
        shown) keep the order of the list; records without a first pKaH follow in that order, without a rank.
    """
    place = column_positions(CONSTANT_COLUMNS)["pkah_1"]
    valued = [n for n, row in enumerate(records) if row[place] is not None]
    valued.sort(key=lambda n: -float(records[n][place]))  # type: ignore[arg-type]
    rest = [n for n, row in enumerate(records) if row[place] is None]
    return [(rank, n) for rank, n in enumerate(valued, start=1)] + [(None, n) for n in rest]


def structure_column(names: Sequence[object], wanted: str | None = None) -> int:
    """Place of the column that holds the SMILES.

    Parameters
    ----------
    names : sequence
        Column names of the table.
    wanted : str, optional
        Name to look for, `smiles` when not given; an exact match is taken before one in other letter case.

    Raises
    ------
    ValueError
        No such column, or several; the message lists the columns.

    Examples
    --------
    >>> structure_column(["id", "SMILES"])
    1
    """
    target = "smiles" if wanted is None else str(wanted)
    exact = [n for n, name in enumerate(names) if name == target]
    loose = [n for n, name in enumerate(names) if str(name).strip().casefold() == target.strip().casefold()]
    found = exact or loose
    if len(found) == 1:
        return found[0]
    listed = ", ".join(str(name) for name in names[:NAMES_LISTED]) or "none"
    listed += f" and {len(names) - NAMES_LISTED} more" if len(names) > NAMES_LISTED else ""
    if not found:
        raise ValueError(f"no column named {target!r}; its columns are: {listed}")
    raise ValueError(f"{len(found)} columns are named {target!r}; its columns are: {listed}")


def unclashed(names: Sequence[object], columns: Sequence[Column]) -> list[object]:
    """Names of the input's own columns; one that clashes with the result's gains `input_` until it is unique.

    Examples
    --------
    >>> unclashed(["id", "status", "input_status"], schema())
    ['id', 'input_input_status', 'input_status']
    """
    fixed = {column.name for column in columns}
    taken = {*fixed, *names}
    out: list[object] = []
    for name in names:
        new = name
        while new in fixed or (new is not name and new in taken):
            new = f"input_{new}"
        taken.add(new)
        out.append(new)
    return out
