"""Lists of SMILES (`.smi`) and delimited tables (`.csv`, `.tsv`) as rows of text.

Cells stay text (`007` stays `007`, `NA` stays `NA`). A row that breaks the rules of its format is kept and
marked with what is wrong. Blank lines are no rows: they are skipped and counted, in a table of one column too
(there an empty cell is written `""`).
"""

from __future__ import annotations

import csv
from collections import deque
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass

from ..records import structure_column
from .rows import InputError, Row, Table, Warn, nul_problem
from .streams import LINE_CUT, is_cut

LIST_COLUMNS = ("smiles", "name")
DELIMITERS = {"csv": ",", "tsv": "\t"}


def list_table(lines: Iterable[str], source: str, warn: Warn) -> Table:
    """A `.smi` list: SMILES, white space, name; blank lines and a heading line are skipped."""
    blank = [0]
    rows = _list_rows(lines, source, blank, warn)
    first = next(rows, None)
    if first is None:
        raise InputError(f"{source}: empty, no structure in it")
    return Table(LIST_COLUMNS, _with_first(first, rows), source, blank)


def _list_rows(lines: Iterable[str], source: str, blank: list[int], warn: Warn) -> Iterator[Row]:
    for number, line in enumerate(lines):
        parts = line.split(maxsplit=1)
        if not parts:
            blank[0] += 1
        elif number == 0 and parts[0].casefold() == "smiles":
            warn(f"{source}: the first line is a heading and is skipped")
        else:
            cells = (parts[0], parts[1].strip() if len(parts) > 1 else "")
            yield Row(cells, parts[0], LINE_CUT if is_cut(line) else nul_problem(line))


def _with_first(first: Row, rest: Iterator[Row]) -> Iterator[Row]:
    yield first
    yield from rest


def delimited_table(lines: Iterable[str], source: str, delimiter: str, smiles_column: str | None) -> Table:
    """A table with a heading; see `_Records` for how rows are told apart."""
    records = _Records(lines, delimiter)
    heading = next(records, None)
    if heading is None:
        raise InputError(f"{source}: empty, not even a heading")
    if heading.problem:
        raise InputError(f"{source}: its heading cannot be read: {heading.problem}")
    columns = tuple(heading.cells)
    try:
        place = structure_column(columns, smiles_column)
    except ValueError as error:
        raise InputError(f"{source}: {error}") from None
    records.width = len(columns)
    return Table(columns, _delimited_rows(records, columns, place), source, records.blank_lines)


def _delimited_rows(records: _Records, columns: Sequence[str], place: int) -> Iterator[Row]:
    width = len(columns)
    for found in records:
        cells, problem = found.cells, found.problem
        while len(cells) > width and not cells[-1]:
            cells.pop()
        if len(cells) > width:
            problem = problem or f"{len(cells)} cells where the heading has {width}"
            cells = [*cells[: width - 1], records.delimiter.join(cells[width - 1 :])]
        cells += [""] * (width - len(cells))
        if problem is None:
            problem = next((nul_problem(text) for text in cells if "\0" in text), None)
        yield Row(tuple(cells), cells[place], problem)


@dataclass(slots=True)
class _Found:
    cells: list[str]
    problem: str | None = None


class _Records:
    """Records of delimited text, quoted newlines included.

    A quote that is never closed would swallow the rows after it. So where a record of several lines reaches
    the end of the text with its quote open, grows past the field limit of `csv`, or has not the number of
    cells of the heading, only its first line is taken, marked as broken, and the lines after it are read
    anew.
    """

    def __init__(self, lines: Iterable[str], delimiter: str) -> None:
        self.delimiter = delimiter
        self.width: int | None = None
        self.blank_lines = [0]
        self._lines = iter(lines)
        self._again: deque[str] = deque()
        self._taken: list[str] = []
        self._reader = csv.reader(_Feed(self._next_line), delimiter=delimiter)

    def _next_line(self) -> str:
        line = self._again.popleft() if self._again else next(self._lines)
        self._taken.append(line)
        return line

    def __iter__(self) -> _Records:
        return self

    def __next__(self) -> _Found:
        while True:
            self._taken.clear()
            try:
                cells = next(self._reader)
            except csv.Error:
                return self._first_line_only()
            taken = self._taken
            if is_cut(taken[0]) or (len(taken) > 1 and any(map(is_cut, taken))):
                return self._first_line_only()
            if len(taken) == 1:
                if not taken[0].strip():
                    self.blank_lines[0] += 1
                    continue
                if taken[0].count('"') % 2 and self._left_open():
                    return self._first_line_only()
            elif (self.width is not None and len(cells) != self.width) or self._left_open():
                return self._first_line_only()
            return _Found(cells)

    def _left_open(self) -> bool:
        try:
            for _ in csv.reader(iter(self._taken), delimiter=self.delimiter, strict=True):
                pass
        except csv.Error as error:
            return "end of data" in str(error)
        return False

    def _first_line_only(self) -> _Found:
        first, *rest = self._taken
        self._again.extendleft(reversed(rest))
        self._reader = csv.reader(_Feed(self._next_line), delimiter=self.delimiter)
        cells = first.rstrip("\r\n").split(self.delimiter)
        if is_cut(first):
            return _Found(cells, LINE_CUT)
        if max(map(len, cells)) > csv.field_size_limit():
            return _Found(cells, f"a cell of more than {csv.field_size_limit():,} characters")
        return _Found(cells, "a quote in the row is never closed")


class _Feed:
    """An iterator over a function that raises StopIteration at its end."""

    def __init__(self, take: Callable[[], str]) -> None:
        self._take = take

    def __iter__(self) -> _Feed:
        return self

    def __next__(self) -> str:
        return self._take()
