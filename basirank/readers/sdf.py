"""SD files: mol blocks (V2000 and V3000) with named fields, split on `$$$$`.

The split is made on the text, so that a broken record costs itself only. A record stays text until the process
that computes it; its atoms are counted in the order of the atom block, explicit hydrogen included.
"""

from __future__ import annotations

import json
import re
from collections.abc import Iterable, Iterator
from itertools import chain, islice
from typing import TYPE_CHECKING

from .rows import InputError, Row, Table, nul_problem
from .streams import LINE_CUT, is_cut

if TYPE_CHECKING:
    from rdkit import Chem

RECORD_LIMIT = 1 << 24  # characters in a record
RECORDS_AHEAD = 1_000  # records of a stream that settle its columns
OTHER_FIELDS = "other_fields"
"""Column of a stream for fields that its first records don't have: a JSON object of name and value."""

MOLBLOCK_END = "M  END"
SEPARATOR = "$$$$"

_FIELD_NAME = re.compile(r">[^<]*<(.+)>")


def sdf_table(lines: Iterable[str], source: str, fields: Iterable[str] | None) -> Table:
    """An SD file as a table: the title line as `name`, then the fields.

    Parameters
    ----------
    lines : iterable of str
        Lines of the file.
    source : str
        What it is called in messages.
    fields : iterable of str, optional
        Names of all fields of the file (`field_names`). When they aren't known, those of the first
        1,000 records are the columns, and a last column `other_fields` takes what comes later.
    """
    blank = [0]
    records = _records(lines, blank)
    if fields is None:
        ahead = list(islice(records, RECORDS_AHEAD + 1))
        fields = _names(text for text, _ in ahead[:RECORDS_AHEAD])
        others = len(ahead) > RECORDS_AHEAD
        records = chain(ahead, records)
    else:
        others = False
    fields = list(fields)
    first = next(records, None)
    if first is None:
        raise InputError(f"{source}: empty, no record in it")
    title = "name"
    while title in fields:
        title = f"title_{title}"
    columns = [title, *fields]
    if others:
        columns.append(_unused(OTHER_FIELDS, columns))
    rows = _rows(chain([first], records), fields, others)
    return Table(tuple(columns), rows, source, blank, is_sdf=True)


def field_names(lines: Iterable[str]) -> list[str]:
    """Names of all fields of an SD file, in the order in which they turn up."""
    return _names(text for text, _ in _records(lines, [0]))


def _names(records: Iterable[str]) -> list[str]:
    names: dict[str, None] = {}
    for text in records:
        names.update(dict.fromkeys(record_fields(text)))
    return list(names)


def _unused(name: str, taken: list[str]) -> str:
    while name in taken:
        name = f"{name}_"
    return name


def _rows(records: Iterable[tuple[str, str | None]], fields: list[str], others: bool) -> Iterator[Row]:
    for text, problem in records:
        found = record_fields(text)
        cells = [text.split("\n", 1)[0].strip(), *(found.pop(name, "") for name in fields)]
        if others:
            cells.append(json.dumps(found, ensure_ascii=False) if found else "")
        yield Row(tuple(cells), text, problem or nul_problem(text), is_record=True)


def _records(lines: Iterable[str], blank: list[int]) -> Iterator[tuple[str, str | None]]:
    """Text of each record without its `$$$$`, and what is wrong with it."""
    taken: list[str] = []
    size, problem = 0, None
    for line in lines:
        if line.startswith(SEPARATOR):
            yield _finished(taken, problem)
            taken, size, problem = [], 0, None
            continue
        size += len(line)
        if is_cut(line):
            problem = LINE_CUT
        if size > RECORD_LIMIT:
            problem = f"a record of more than {RECORD_LIMIT:,} characters, cut"
            continue
        taken.append(line.rstrip("\r\n"))
    if any(line.strip() for line in taken):
        yield _finished(taken, problem)
    else:
        blank[0] += len(taken)


def _finished(taken: list[str], problem: str | None) -> tuple[str, str | None]:
    text = "\n".join([*taken, ""])
    if problem is None and not any(line.startswith(MOLBLOCK_END) for line in taken):
        problem = f"the record has no line '{MOLBLOCK_END}'" if text.strip() else "an empty record"
    return text, problem


def split_record(text: str) -> tuple[str, str]:
    """Mol block of a record and what follows it, its fields."""
    lines = text.splitlines(keepends=True)
    for number, line in enumerate(lines):
        if line.startswith(MOLBLOCK_END):
            return "".join(lines[: number + 1]), "".join(lines[number + 1 :])
        if number > 3 and line.startswith(">"):
            return "".join(lines[:number]), "".join(lines[number:])
    return text, ""


def record_fields(text: str) -> dict[str, str]:
    """Fields of a record by name; lines of a value stay lines, values of a repeated name follow each other.

    Examples
    --------
    >>> record_fields("M  END\\n> <id>\\n007\\n\\n>  <note>  (1)\\na\\nb\\n\\n")
    {'id': '007', 'note': 'a\\nb'}
    """
    found: dict[str, list[str]] = {}
    value: list[str] | None = None
    ended = True
    for line in split_record(text)[1].split("\n"):
        if line.startswith(">") and ended:
            value = found.setdefault(field_name(line), [])
            ended = False
        elif not line.strip():
            ended = True
        elif value is not None:
            if ended and value:
                value.append("")  # a blank line within a value, which the format doesn't have
            value.append(line)
            ended = False
    return {name: "\n".join(lines) for name, lines in found.items()}


def field_name(line: str) -> str:
    """Name of a field, from its line."""
    match = _FIELD_NAME.match(line)
    return match[1] if match else line[1:].strip()


def molecule(text: str) -> Chem.Mol:
    """Molecule of an SD record, all its atoms in the order of the atom block.

    Raises
    ------
    ValueError
        It cannot be read; the message says why.
    """
    from rdkit import Chem, rdBase

    block = split_record(text)[0]
    with rdBase.BlockLogs():
        try:
            mol = Chem.MolFromMolBlock(block, sanitize=True, removeHs=False)
            if mol is None:  # `read_parent` says what is wrong with its chemistry
                mol = Chem.MolFromMolBlock(block, sanitize=False, removeHs=False)
        except (ValueError, RuntimeError):
            mol = None
    if mol is None:
        raise ValueError("cannot be read as a mol block")
    return mol
