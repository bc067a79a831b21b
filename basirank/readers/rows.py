"""Rows and tables: what every reader yields, whatever the format it reads."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from typing import Any

Warn = Callable[[str], None]


class InputError(ValueError):
    """An input that cannot be read at all; the message is one plain line."""


@dataclass(frozen=True, slots=True)
class Row:
    """One row of a list.

    Attributes
    ----------
    cells : tuple of str
        Its cells as text, one for each column of the table.
    structure : str
        SMILES, or the text of an SD record.
    problem : str or None
        What is wrong with the row, if anything: it comes out as `refused`.
    is_record : bool
        Whether `structure` is an SD record.
    values : tuple or None
        The cells with their own types, where the format has types and they were asked for.
    """

    cells: tuple[str, ...]
    structure: str
    problem: str | None = None
    is_record: bool = False
    values: tuple[object, ...] | None = None


@dataclass(slots=True)
class Table:
    """An open list.

    Attributes
    ----------
    columns : tuple of str
        Names of its columns.
    rows : iterator of Row
        Its rows, one after another.
    source : str
        What it is called in messages.
    blank_lines : list of int
        Blank lines skipped so far, in one place.
    types : pyarrow.Schema or None
        Types of the columns, where the format has them.
    done : callable
        Share of the list that has been read [-], or None where that cannot be known.
    is_sdf : bool
        Whether the rows are SD records.
    """

    columns: tuple[str, ...]
    rows: Iterator[Row]
    source: str
    blank_lines: list[int] = field(default_factory=lambda: [0])
    types: Any = None
    done: Callable[[], float | None] = lambda: None
    is_sdf: bool = False


def nul_problem(text: str) -> str | None:
    """What is wrong with a text that holds a NUL byte."""
    return "the row holds a NUL byte" if "\0" in text else None
