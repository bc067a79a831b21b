"""Entries: what a report says of each row of a list: record, explanation and share protonated against pH."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from .explanation import Explanation, explanation_of
from .records import Record, record, refused_record, structure_column
from .request import PLAIN, Request

if TYPE_CHECKING:
    from .kinship import Standing
    from .prediction import Prediction

GRID = tuple(n / 2 for n in range(29))  # pH of the curve of the whole list [-]


@dataclass(frozen=True, slots=True)
class Subject:
    """One row of the input: its structure, name, own further columns, and what is wrong with it, if anything."""

    structure: Any
    name: str = ""
    cells: tuple[tuple[str, str], ...] = ()
    problem: str | None = None


@dataclass(frozen=True, slots=True)
class Entry:
    """One row of a report.

    Attributes
    ----------
    subject : Subject
        The row of the input.
    record : tuple
        Its record.
    told : Explanation
        What stands behind the record.
    curve : tuple of float
        Share of molecules with a proton on a base site at each pH of `GRID` [-].
    standing : Standing or None
        What the order of a list needs to know of the first constant.
    """

    subject: Subject
    record: Record
    told: Explanation
    curve: tuple[float, ...] = ()
    standing: Standing | None = None


def entries_of(subjects: Sequence[Subject], ph: tuple[float, ...], request: Request = PLAIN) -> list[Entry]:
    """Everything a report says of each subject, in order.

    Parameters
    ----------
    subjects : sequence of Subject
        Rows of a list; one that cannot be computed becomes an entry that is `refused`.
    ph : tuple of float
        pH of the states [-], checked already.
    request : Request
        Conditions of the constants and states, and a user's own measurements.
    """
    from .prediction import predict

    sound = [one for one in subjects if one.problem is None and _given(one.structure)]
    found = iter(
        predict(
            [one.structure for one in sound],
            ph=(*ph, *GRID),
            conditions=request.conditions,
            standings=True,
            local=request.local,
        )
    )
    computed = {id(one): next(found) for one in sound}
    return [_entry(one, computed.get(id(one)), ph, request) for one in subjects]


def _given(structure: Any) -> bool:
    from rdkit import Chem

    return isinstance(structure, Chem.Mol) or (isinstance(structure, str) and bool(structure.strip()))


def _entry(subject: Subject, prediction: Prediction | None, ph: tuple[float, ...], request: Request) -> Entry:
    written = _written(subject.structure)
    if prediction is None:
        reason = subject.problem or "no structure given"
        return Entry(subject, refused_record(reason, ph), Explanation(written, "", "refused", reason))
    told = explanation_of(written, prediction, request)
    states = prediction.equilibrium.states if prediction.equilibrium is not None else ()
    curve = tuple(state.protonated_fraction for state in states[len(ph) :])
    if prediction.equilibrium is not None:
        prediction = replace(
            prediction,
            equilibrium=replace(prediction.equilibrium, states=states[: len(ph)]),
            forms=prediction.forms[: len(ph)],
        )
    row = record(prediction, ph, request)
    return Entry(subject, row, replace(told, states=told.states[: len(ph)]), curve, prediction.standing)


def _written(structure: Any) -> str:
    if isinstance(structure, str):
        return structure.strip()
    from rdkit import Chem

    return Chem.MolToSmiles(structure) if isinstance(structure, Chem.Mol) else ""


def subjects_of(structures: Any, names: Iterable[str] | None, smiles_column: str) -> list[Subject]:
    """The rows of a list or frame as subjects; see `report.report_html` for the arguments."""
    if hasattr(structures, "columns"):
        columns = [str(name) for name in structures.columns]
        place = structure_column(columns, smiles_column)
        label = next(
            (n for n, column in enumerate(columns) if column.casefold() == "name" and names is None), None
        )
        rows = list(structures.itertuples(index=False, name=None))
        items = [row[place] for row in rows]
        shown = [(n, column) for n, column in enumerate(columns) if n not in (place, label)]
        cells = [tuple((column, str(row[n])) for n, column in shown) for row in rows]
        called = [str(row[label]) for row in rows] if label is not None else [""] * len(rows)
    else:
        items = [structures] if isinstance(structures, str) else list(structures)
        cells, called = [()] * len(items), [""] * len(items)
    if names is not None:
        called = [str(name) for name in names]
    if len(called) != len(items):
        raise ValueError(f"{len(items)} structures but {len(called)} names")
    return [Subject(*row) for row in zip(items, called, cells, strict=True)]
