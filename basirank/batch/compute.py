"""Compute: from the rows of a chunk to the bytes of its result, a pure function of rows and plan.

This is what every engine runs, in this process, in a worker or on a cluster. Rows hold text; molecules are made
here and go nowhere else.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Sequence
from contextlib import suppress
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from ..readers import Row
from ..records import Record, refused_record
from ..request import PLAIN, Request
from .encoding import encode
from .interrupts import interrupt_held
from .plan import Plan

if TYPE_CHECKING:
    from ..kinship import Standing

_ATOM = re.compile(r" \(atom \d+\)")  # what makes the reason of one row different from that of the next


@dataclass(frozen=True, slots=True)
class Done:
    """Result of a chunk: its bytes, and how many rows have each status and each reason of refusal."""

    data: bytes
    statuses: dict[str, int]
    refusals: dict[str, int]


def compute(plan: Plan, rows: Sequence[Row]) -> Done:
    """Result of a chunk.

    Parameters
    ----------
    plan : Plan
        What is to be computed and written.
    rows : sequence of Row
        The rows.
    """
    records = records_of_rows(rows, plan.ph, plan.request)
    refusals = Counter(_ATOM.sub("", str(record[1])) for record in records if record[0] == "refused")
    return Done(encode(plan, rows, records), Counter(str(record[0]) for record in records), refusals)


def records_of_rows(rows: Sequence[Row], ph: tuple[float, ...], request: Request = PLAIN) -> list[Record]:
    """A record for each row; a row with a problem is refused."""
    from ..annotation import records_of

    subjects = with_molecules(rows)
    with interrupt_held():
        computed = iter(records_of([row.structure for row in subjects if row.problem is None], ph, request))
    return [
        next(computed) if row.problem is None else refused_record(row.problem, ph, request)
        for row in subjects
    ]


def standings_of_rows(
    rows: Sequence[Row], ph: tuple[float, ...], request: Request = PLAIN
) -> list[tuple[Record, Standing | None]]:
    """The same, each with what the order of a list needs to know."""
    from ..annotation import standings_of

    subjects = with_molecules(rows)
    with interrupt_held():
        computed = iter(standings_of([row.structure for row in subjects if row.problem is None], ph, request))
    return [
        next(computed) if row.problem is None else (refused_record(row.problem, ph, request), None)
        for row in subjects
    ]


def with_molecules(rows: Sequence[Row]) -> list[Row]:
    """The rows, with a molecule in place of each SD record, or a problem where it cannot be read."""
    from ..readers.sdf import molecule

    out = []
    for row in rows:
        if row.is_record and row.problem is None:
            try:
                row = replace(row, structure=molecule(row.structure))  # type: ignore[arg-type]
            except ValueError as error:
                row = replace(row, problem=str(error))
        out.append(row)
    return out


def with_smiles(rows: Sequence[Row]) -> list[Row]:
    """The rows, with a SMILES in place of each SD record, for what doesn't ask for the numbers of atoms."""
    from rdkit import Chem, rdBase

    out = []
    for row in with_molecules(rows):
        if row.is_record and row.problem is None:
            mol = row.structure
            with rdBase.BlockLogs(), suppress(ValueError):  # unsound chemistry stays as it is, and is refused
                mol = Chem.RemoveHs(mol)
            row = replace(row, structure=Chem.MolToSmiles(mol))
        out.append(row)
    return out
