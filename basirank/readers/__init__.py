"""Readers: lists of structures as rows, streamed, in order, none lost, whatever the format.

What the user named is a file, a folder of Parquet parts, a pattern of file names, standard input, or SMILES. A
row that breaks the rules of its format is kept and marked with what is wrong, so that it comes out as `refused`;
only what makes the whole list unreadable is an `InputError`.
"""

from __future__ import annotations

import glob
import os
import re
import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from functools import partial
from pathlib import Path

from .delimited import DELIMITERS, LIST_COLUMNS, delimited_table, list_table
from .rows import InputError, Row, Table, Warn
from .streams import byte_lines, opened, plain_blocks, text_lines

__all__ = ["ENDINGS", "FORMATS", "STDIN", "InputError", "Row", "Table", "is_file_name", "looks_like_smiles",
           "open_table"]  # fmt: skip

FORMATS = ("smi", "csv", "tsv", "sdf", "parquet")
PACKINGS = (".gz", ".zst")
ENDINGS = tuple(
    f".{name}{packed}" for name in FORMATS for packed in (("",) if name == "parquet" else ("", *PACKINGS))
)
STDIN = "-"

_SMILES_TOKENS = re.compile(r"(?:Cl|Br|[BCNOPSFIHbcnops*]|\[[^\[\]\s]+\]|[-=#$:/\\.~()0-9%+>@<])+")
_FILE_ENDING = re.compile(r"\.[A-Za-z][A-Za-z0-9]{0,7}$")


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
    stdin_format: str | None = None,
    typed: bool = False,
    warn: Warn = lambda message: None,
) -> Iterator[Table]:
    """Open what the user named.

    Parameters
    ----------
    inputs : sequence of str
        One file name, folder of Parquet files, pattern of file names or `-` for standard input, or any number
        of SMILES (each may be followed by white space and a name).
    smiles_column : str, optional
        Column that holds the SMILES of a table; `smiles` in any letter case when not given.
    stdin_format : {"smi", "csv", "tsv", "sdf", "parquet"}, optional
        Format of standard input (`smi` when not given), or of files, whatever their endings.
    typed : bool
        Whether rows keep cells with their own types, where the format has types.
    warn : callable
        Takes a one-line remark on how the input was read.

    Raises
    ------
    InputError
        Missing or unreadable file, unknown ending, empty list, table without a SMILES column, parts that
        differ, an argument that is neither a file nor a SMILES.
    MissingExtra
        A format whose package is not installed.
    """
    if not inputs:
        raise InputError("no input: give a file, '-' for standard input, or SMILES")
    files = [text for text in inputs if text == STDIN or is_file_name(text)]
    if not files:
        if smiles_column is not None:
            raise InputError("--smiles-column goes with a table, not with SMILES given as arguments")
        yield _arguments(inputs)
        return
    if len(inputs) > 1:
        raise InputError(
            f"give one file or any number of SMILES, not both or several files ({', '.join(files[:3])})"
        )
    if files[0] == STDIN:
        yield _standard_input(stdin_format or "smi", smiles_column, warn)
        return
    parts = _parts(files[0])
    kind = stdin_format or _format_of(parts[0])
    opener = _Opener(kind, smiles_column, typed, warn)
    with opener.one(parts[0]) if len(parts) == 1 else opener.several(files[0], parts) as table:
        yield table


def _arguments(inputs: Sequence[str]) -> Table:
    rows = []
    for text in inputs:
        first, name = (*text.split(maxsplit=1), "", "")[:2]
        if first and not looks_like_smiles(first) and not _parses(first):
            raise InputError(f"{text}: no such file, and not a SMILES")
        rows.append(Row((first, name.strip()), first))
    return Table(LIST_COLUMNS, iter(rows), "arguments")


def _parses(text: str) -> bool:
    from rdkit import Chem, rdBase

    with rdBase.BlockLogs():
        return Chem.MolFromSmiles(text, sanitize=False) is not None


def _standard_input(kind: str, smiles_column: str | None, warn: Warn) -> Table:
    source = "standard input"
    if kind == "parquet":
        raise InputError("Parquet cannot be read from standard input; give a file")
    lines = text_lines(byte_lines(plain_blocks(sys.stdin.buffer, source)), source, warn)
    return _text_table(lines, kind, source, smiles_column, None, warn)


def _parts(name: str) -> list[str]:
    """The file of that name, or the files that it stands for, sorted."""
    if os.path.isdir(name):
        found = sorted(str(path) for path in Path(name).rglob("*.parquet") if _is_part(path, Path(name)))
        if not found:
            raise InputError(f"{name} is a folder without Parquet files")
        return found
    if os.path.exists(name):
        return [name]
    found = sorted(path for path in glob.glob(name, recursive=True) if os.path.isfile(path))
    if not found:
        if not name.lower().endswith(ENDINGS) and _FILE_ENDING.search(name):
            raise InputError(f"{name}: unknown ending; known are {' '.join(ENDINGS)}")
        raise InputError(f"no such file: {name}")
    return found


def _is_part(path: Path, folder: Path) -> bool:
    """Whether a file counts: engines put their own notes into names that begin with a point or a line."""
    return path.is_file() and not any(part.startswith((".", "_")) for part in path.relative_to(folder).parts)


def _format_of(name: str) -> str:
    lowered = name.lower()
    ending = next((one for one in ENDINGS if lowered.endswith(one)), None)
    if ending is None:
        raise InputError(f"{name}: unknown ending; known are {' '.join(ENDINGS)}")
    return ending.split(".")[1]


class _Opener:
    """Opens one file, or several that have the same columns, as a table."""

    def __init__(self, kind: str, smiles_column: str | None, typed: bool, warn: Warn) -> None:
        self.kind, self.smiles_column, self.typed, self.warn = kind, smiles_column, typed, warn

    @contextmanager
    def one(self, name: str, fields: Sequence[str] | None = None) -> Iterator[Table]:
        if self.kind == "parquet":
            from .parquet import parquet_table

            with parquet_table(name, self.smiles_column, self.typed) as table:
                yield table
            return
        if self.kind == "sdf" and fields is None:
            fields = self._fields(name)
        with self._lines(name, self.warn) as (lines, share):
            table = _text_table(lines, self.kind, name, self.smiles_column, fields, self.warn)
            table.done = share
            yield table

    @contextmanager
    def _lines(self, name: str, warn: Warn) -> Iterator[tuple[Iterator[str], Callable[[], float | None]]]:
        with opened(name) as (blocks, share):
            yield text_lines(byte_lines(blocks), name, warn), share

    def _fields(self, name: str) -> list[str]:
        from .sdf import field_names

        with self._lines(name, lambda message: None) as (lines, _):
            return field_names(lines)

    @contextmanager
    def several(self, pattern: str, parts: Sequence[str]) -> Iterator[Table]:
        """Parts one after another; that their columns are the same is made sure of before the first row."""
        fields: list[str] | None = None
        if self.kind == "sdf":
            fields = list(dict.fromkeys(field for part in parts for field in self._fields(part)))
        silent = _Opener(self.kind, self.smiles_column, self.typed, lambda message: None)
        with silent.one(parts[0], fields) as first:
            columns, types = first.columns, first.types
        for part in parts[1:]:
            with silent.one(part, fields) as other:
                if other.columns != columns or other.types != types:
                    raise InputError(f"{part} has not the same columns as {parts[0]}")
        whole = Table(columns, iter(()), pattern, types=types, is_sdf=self.kind == "sdf")

        def rows() -> Iterator[Row]:
            for number, part in enumerate(parts):
                with self.one(part, fields) as table:
                    whole.done = partial(_share_of_parts, table, number, len(parts))
                    yield from table.rows
                    whole.blank_lines[0] += table.blank_lines[0]

        whole.rows = rows()
        yield whole


def _share_of_parts(table: Table, number: int, parts: int) -> float:
    return (number + (table.done() or 0.0)) / parts


def _text_table(
    lines: Iterator[str],
    kind: str,
    source: str,
    smiles_column: str | None,
    fields: Sequence[str] | None,
    warn: Warn,
) -> Table:
    if kind in DELIMITERS:
        return delimited_table(lines, source, DELIMITERS[kind], smiles_column)
    if smiles_column is not None:
        what = "a list of SMILES" if kind == "smi" else "an SD file"
        raise InputError(f"--smiles-column goes with a table; {source} is {what}")
    if kind == "smi":
        return list_table(lines, source, warn)
    from .sdf import sdf_table

    return sdf_table(lines, source, fields)
