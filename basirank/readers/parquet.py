"""Parquet files as rows: read in small batches of rows, cells as text and, where asked for, as they are."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import Any

from ..extras import needed
from ..records import structure_column
from .rows import InputError, Row, Table, nul_problem

_BATCH = 1_000  # rows decoded at a time


@contextmanager
def parquet_table(name: str, smiles_column: str | None, typed: bool) -> Iterator[Table]:
    """A Parquet file as a table.

    Parameters
    ----------
    name : str
        File name.
    smiles_column : str, optional
        Column that holds the SMILES; `smiles` in any letter case when not given.
    typed : bool
        Whether rows keep the cells with their own types as well.

    Raises
    ------
    InputError
        Broken or unreadable file, no such column.
    """
    pyarrow = needed("pyarrow", "parquet", name)
    parquet = needed("pyarrow.parquet", "parquet", name)
    try:
        file = parquet.ParquetFile(name, pre_buffer=False, buffer_size=1 << 20)
    except (pyarrow.ArrowException, OSError, ValueError) as error:
        raise InputError(f"cannot read {name}: {_plain(error)}") from None
    with file:
        schema = file.schema_arrow
        try:
            place = structure_column(schema.names, smiles_column)
        except ValueError as error:
            raise InputError(f"{name}: {error}") from None
        read = [0]

        def share() -> float | None:
            return read[0] / file.metadata.num_rows if file.metadata.num_rows else None

        rows = _rows(file, name, place, typed, read, pyarrow.ArrowException)
        yield Table(tuple(schema.names), rows, name, types=schema.remove_metadata(), done=share)


def _rows(
    file: Any, name: str, place: int, typed: bool, read: list[int], broken: type[Exception]
) -> Iterator[Row]:
    batches = file.iter_batches(batch_size=_BATCH, use_threads=False)
    while True:
        try:
            batch = next(batches, None)
            columns = [] if batch is None else [column.to_pylist() for column in batch.columns]
        except (broken, OSError, ValueError) as error:
            raise InputError(f"cannot read {name}: {_plain(error)}") from None
        if batch is None:
            return
        for values in zip(*columns, strict=True):
            cells = tuple(map(cell_text, values))
            problem = next((nul_problem(text) for text in cells if "\0" in text), None)
            yield Row(cells, cells[place], problem, values=values if typed else None)
            read[0] += 1


def _plain(error: Exception) -> str:
    return f"broken Parquet file ({' '.join(str(error).split())[:200]})"


_TEXT: dict[type, Callable[[Any], str]] = {
    str: str,
    bool: lambda value: "true" if value else "false",
    int: str,
    float: repr,
    bytes: lambda value: value.decode("utf-8", "replace"),
    list: lambda value: json.dumps(value, ensure_ascii=False, default=cell_text),
    dict: lambda value: json.dumps(value, ensure_ascii=False, default=cell_text),
}


def cell_text(value: object) -> str:
    """Text of a typed cell, a missing one empty.

    Examples
    --------
    >>> cell_text(None), cell_text(True), cell_text(0.1), cell_text([1, "a"])
    ('', 'true', '0.1', '[1, "a"]')
    """
    return "" if value is None else _TEXT.get(type(value), str)(value)
