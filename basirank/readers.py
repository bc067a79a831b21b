"""Readers: lists of structures as rows of text, streamed, in order, none lost.

Cells stay text (`007` stays `007`, `NA` stays `NA`). A row that breaks the rules of its format is kept and
marked with what is wrong, so that it comes out as `refused`; only what makes the whole list unreadable is an
`InputError`.
"""

from __future__ import annotations

import csv
import gzip
import os
import re
import sys
import zlib
from collections import deque
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import IO

from .records import structure_column

FORMATS = ("smi", "csv", "tsv")
ENDINGS = tuple(f".{name}{zipped}" for name in FORMATS for zipped in ("", ".gz"))
LIST_COLUMNS = ("smiles", "name")
STDIN = "-"

_DELIMITERS = {"csv": ",", "tsv": "\t"}
_UTF16_MARKS = (b"\xff\xfe", b"\xfe\xff")
_SMILES_TOKENS = re.compile(r"(?:Cl|Br|[BCNOPSFIHbcnops*]|\[[^\[\]\s]+\]|[-=#$:/\\.~()0-9%+>@<])+")
_FILE_ENDING = re.compile(r"\.[A-Za-z][A-Za-z0-9]{0,7}$")

Warn = Callable[[str], None]


class InputError(ValueError):
    """An input that cannot be read at all; the message is one plain line."""


@dataclass(frozen=True, slots=True)
class Row:
    """One row: its cells as text, the structure among them, and what is wrong with the row, if anything."""

    cells: tuple[str, ...]
    structure: str
    problem: str | None = None


@dataclass(slots=True)
class Table:
    """An open list: names of its columns, its rows one after another, blank lines skipped so far."""

    columns: tuple[str, ...]
    rows: Iterator[Row]
    source: str
    structure_place: int = 0
    blank_lines: list[int] = field(default_factory=lambda: [0])


def looks_like_smiles(text: str) -> bool:
    """Whether a text is made of SMILES symbols only (no file name with a known ending is).

    Examples
    --------
    >>> looks_like_smiles("C/C=C/CN"), looks_like_smiles("list.smi"), looks_like_smiles("/data/CN")
    (True, False, False)
    """
    return not text.startswith(("/", "\\", ".")) and _SMILES_TOKENS.fullmatch(text) is not None


def is_file_name(text: str) -> bool:
    """Whether an argument means a file: not made of SMILES symbols, and there, with an ending or a folder.

    Examples
    --------
    >>> is_file_name("foo.smi"), is_file_name("list.xlsx"), is_file_name("CCN"), is_file_name("CC[Xx]")
    (True, True, False, False)
    """
    if looks_like_smiles(text):
        return False
    first = text.split(maxsplit=1)
    if len(first) > 1 and looks_like_smiles(first[0]) and not os.path.exists(text):
        return False  # a SMILES and a name in one argument
    return bool(
        os.path.exists(text)
        or text.lower().endswith(ENDINGS)
        or _FILE_ENDING.search(text)
        or (text.startswith((os.sep, "./", "../", "~")) or (os.altsep and os.altsep in text))
        or (os.sep in text and not set(text) & set("[]()="))
    )


@contextmanager
def open_table(
    inputs: Sequence[str],
    *,
    smiles_column: str | None = None,
    stdin_format: str = "smi",
    warn: Warn = lambda message: None,
) -> Iterator[Table]:
    """Open what the user named: one file, `-` for standard input, or SMILES.

    Parameters
    ----------
    inputs : sequence of str
        One file name, `-`, or any number of SMILES (each may be followed by white space and a name).
    smiles_column : str, optional
        Column that holds the SMILES of a `.csv` or `.tsv` table; `smiles` in any letter case when not given.
    stdin_format : {"smi", "csv", "tsv"}
        Format of standard input.
    warn : callable
        Takes a one-line remark on how the input was read.

    Raises
    ------
    InputError
        Missing or unreadable file, folder, unknown ending, empty list, table without a SMILES column.
    """
    if not inputs:
        raise InputError("no input: give a file, '-' for standard input, or SMILES")
    files = [text for text in inputs if text == STDIN or is_file_name(text)]
    if not files:
        if smiles_column is not None:
            raise InputError("--smiles-column goes with a table, not with SMILES given as arguments")
        yield _list_table(iter(inputs), "arguments", warn)
        return
    if len(inputs) > 1:
        raise InputError(
            f"give one file or any number of SMILES, not both or several files ({', '.join(files[:3])})"
        )
    name = files[0]
    if name == STDIN:
        yield _table(
            _bytes_lines(sys.stdin.buffer, "standard input"),
            stdin_format,
            "standard input",
            smiles_column,
            warn,
        )
        return
    kind = file_format(name)
    with _open_binary(name) as stream:
        yield _table(_bytes_lines(stream, name), kind, name, smiles_column, warn)


def file_format(name: str) -> str:
    """`smi`, `csv` or `tsv`, from the ending of a file that is there.

    Raises
    ------
    InputError
        No such file, a folder, or an ending that is not known.
    """
    path = Path(name)
    if path.is_dir():
        raise InputError(f"{name} is a folder, not a file")
    lowered = name.lower().removesuffix(".gz")
    kind = next((one for one in FORMATS if lowered.endswith(f".{one}")), None)
    if not path.exists() and (kind is not None or not _FILE_ENDING.search(name)):
        raise InputError(f"no such file: {name}")
    if kind is None:
        raise InputError(f"{name}: unknown ending; known are {' '.join(ENDINGS)}")
    return kind


@contextmanager
def _open_binary(name: str) -> Iterator[IO[bytes]]:
    try:
        with open(name, "rb") as raw:
            if name.lower().endswith(".gz"):
                with gzip.open(raw, "rb") as unzipped:
                    yield unzipped  # type: ignore[misc]
            else:
                yield raw
    except (PermissionError, IsADirectoryError, FileNotFoundError) as error:
        if error.filename not in (None, name):
            raise
        raise InputError(f"cannot read {name}: {(error.strerror or str(error)).lower()}") from None


def _bytes_lines(stream: IO[bytes], source: str) -> Iterator[bytes]:
    """Lines with their ends, whichever of the three kinds of line end is used."""
    try:
        for raw in stream:
            if b"\r" in raw:
                yield from raw.splitlines(keepends=True)
            else:
                yield raw
    except (gzip.BadGzipFile, EOFError, zlib.error) as error:
        raise InputError(f"cannot read {source}: broken gzip file ({error})") from None


def _text_lines(lines: Iterable[bytes], source: str, warn: Warn) -> Iterator[str]:
    """Lines as text: UTF-8, with or without a byte-order mark; a line that is not, as Latin-1, said once."""
    told = False
    for number, raw in enumerate(lines, start=1):
        if number == 1:
            if raw.startswith(_UTF16_MARKS):
                raise InputError(f"{source} is UTF-16 text; save it as UTF-8")
            raw = raw.removeprefix(b"\xef\xbb\xbf")
        try:
            yield raw.decode("utf-8")
        except UnicodeDecodeError:
            if not told:
                warn(f"{source}, line {number}: not UTF-8, such lines are read as Latin-1")
                told = True
            yield raw.decode("latin-1")


def _table(lines: Iterable[bytes], kind: str, source: str, smiles_column: str | None, warn: Warn) -> Table:
    text = _text_lines(lines, source, warn)
    if kind == "smi":
        if smiles_column is not None:
            raise InputError(f"--smiles-column goes with a table; {source} is a list of SMILES")
        return _list_table(text, source, warn)
    return _delimited_table(text, source, _DELIMITERS[kind], smiles_column)


def _list_table(lines: Iterable[str], source: str, warn: Warn) -> Table:
    """A `.smi` list: SMILES, white space, name; blank lines and a heading line are skipped."""
    blank = [0]
    rows = _list_rows(lines, source, blank, warn)
    first = next(rows, None)
    if first is None:
        raise InputError(f"{source}: empty, no structure in it")
    return Table(LIST_COLUMNS, _with_first(first, rows), source, 0, blank)


def _list_rows(lines: Iterable[str], source: str, blank: list[int], warn: Warn) -> Iterator[Row]:
    for number, line in enumerate(lines):
        parts = line.split(maxsplit=1)
        if not parts:
            blank[0] += 1
        elif number == 0 and parts[0].casefold() == "smiles":
            warn(f"{source}: the first line is a heading and is skipped")
        else:
            cells = (parts[0], parts[1].strip() if len(parts) > 1 else "")
            yield Row(cells, parts[0], _nul_problem(line))


def _with_first(first: Row, rest: Iterator[Row]) -> Iterator[Row]:
    yield first
    yield from rest


def _nul_problem(text: str) -> str | None:
    return "the row holds a NUL byte" if "\0" in text else None


def _delimited_table(lines: Iterable[str], source: str, delimiter: str, smiles_column: str | None) -> Table:
    """A table with a heading; see `_Records` for how rows are told apart."""
    records = _Records(lines, delimiter)
    heading = next(records, None)
    if heading is None:
        raise InputError(f"{source}: empty, not even a heading")
    columns = tuple(heading.cells)
    try:
        place = structure_column(columns, smiles_column)
    except ValueError as error:
        raise InputError(f"{source} has {error}") from None
    records.width = len(columns)
    return Table(columns, _delimited_rows(records, columns, place), source, place, records.blank_lines)


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
            problem = next((_nul_problem(text) for text in cells if "\0" in text), None)
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
        return _Found(cells, "a quote in the row is never closed")


class _Feed:
    """An iterator over a function that raises StopIteration at its end."""

    def __init__(self, take: Callable[[], str]) -> None:
        self._take = take

    def __iter__(self) -> _Feed:
        return self

    def __next__(self) -> str:
        return self._take()
