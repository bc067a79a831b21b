"""Encoding: rows and their records as the bytes of one chunk, in each output format.

CSV, TSV and SDF bytes are those of the output itself (a gzip member for each chunk where it is packed so).
Parquet cannot be written in pieces: there a chunk is an Arrow stream, and `packing` makes the file of all.
"""

from __future__ import annotations

import csv
import gzip
import io
from collections.abc import Callable, Sequence
from typing import Any

from ..extras import needed
from ..readers import Row
from ..readers.sdf import field_name, split_record
from ..records import Kind, Record, cells
from .plan import Plan

DELIMITERS = {"csv": ",", "tsv": "\t"}
TITLE_COLUMNS = ("name", "title", "compound", "id")
"""Columns that give the title line of a record, where the input was a table; the first that is there."""


def heading(plan: Plan) -> bytes:
    """What stands before the first chunk."""
    if plan.form in DELIMITERS:
        names = [*plan.columns, *(column.name for column in plan.results)]
        return _packed(plan, _delimited(plan, [names]))
    if plan.form == "parquet":
        return _arrow_stream(plan, (), ())
    return b""


def encode(plan: Plan, rows: Sequence[Row], records: Sequence[Record]) -> bytes:
    """Bytes of a chunk."""
    return _packed(plan, _ENCODERS[plan.form](plan, rows, records))


def _packed(plan: Plan, data: bytes) -> bytes:
    return gzip.compress(data, compresslevel=6, mtime=0) if plan.packing == "gz" else data


def _delimited(plan: Plan, lines: Sequence[Sequence[str]]) -> bytes:
    stream = io.StringIO()
    csv.writer(stream, delimiter=DELIMITERS[plan.form], lineterminator="\n").writerows(lines)
    return stream.getvalue().encode("utf-8", "replace")


def _delimited_rows(plan: Plan, rows: Sequence[Row], records: Sequence[Record]) -> bytes:
    columns = plan.results
    return _delimited(
        plan, [[*row.cells, *cells(record, columns)] for row, record in zip(rows, records, strict=True)]
    )


def _sdf(plan: Plan, rows: Sequence[Row], records: Sequence[Record]) -> bytes:
    columns = plan.results
    names = [name.casefold() for name in plan.columns]
    title = next((names.index(name) for name in TITLE_COLUMNS if name in names), None)
    parts = []
    for row, record in zip(rows, records, strict=True):
        if row.is_record:
            parts.append(_with_new_names(row.structure, dict(plan.renamed)))
        else:
            parts.append(drawn(row.structure, row.cells[title] if title is not None else ""))
            parts += map(_field, plan.columns, row.cells)
        texts = cells(record, columns)
        parts += (_field(column.name, text) for column, text in zip(columns, texts, strict=True))
        parts.append("$$$$\n")
    return "".join(parts).encode("utf-8", "replace")


def _with_new_names(text: str, renamed: dict[str, str]) -> str:
    """A record that ends where its next field may begin, fields that clash with a result renamed."""
    block, rest = split_record(text)
    out, ended = [], True
    for line in rest.rstrip("\n").split("\n") if rest.strip() else []:
        if ended and line.startswith(">") and (name := field_name(line)) in renamed:
            line = f">  <{renamed[name]}>"
        ended = not line.strip()
        out.append(line + "\n")
    if out:
        out.append("\n")
    return block + "".join(out)


def _field(name: str, text: str) -> str:
    """A field; a blank line would end its value, `$$$$` its record."""
    lines = [" " + line if not line or line.startswith("$$$$") else line for line in text.splitlines()]
    clean = "".join(" " if letter in "<>\r\n" else letter for letter in name)
    return f">  <{clean}>\n" + "".join(line + "\n" for line in lines) + "\n"


def drawn(smiles: str, title: str) -> str:
    """Mol block of a SMILES, atoms as written and laid out in the plane; one without atoms where it has none.

    Examples
    --------
    >>> drawn("CN", "methylamine").splitlines()[3]
    '  2  1  0  0  0  0  0  0  0  0999 V2000'
    """
    from rdkit import Chem, rdBase
    from rdkit.Chem import rdDepictor

    parameters = Chem.SmilesParserParams()
    parameters.removeHs = False  # type: ignore[assignment]
    words = smiles.split(None, 1)
    with rdBase.BlockLogs():
        try:
            mol = Chem.MolFromSmiles(words[0], parameters) if words else None
            if mol is not None:
                rdDepictor.Compute2DCoords(mol)
        except (ValueError, RuntimeError):
            mol = None
        block = Chem.MolToMolBlock(mol if mol is not None else Chem.Mol())
    line = "".join(letter if letter.isprintable() else " " for letter in title)[:80]
    return ("_" + line[1:] if line.startswith(("$$$$", ">")) else line) + block[block.index("\n") :]


def arrow_schema(plan: Plan) -> Any:
    """Types of all columns: the input's own (text where its format has none), then the results'."""
    pyarrow = needed("pyarrow", "parquet", "Parquet output")
    kinds: dict[Kind, Any] = {
        "text": pyarrow.string(),
        "integer": pyarrow.int64(),
        "constant": pyarrow.float64(),
        "fraction": pyarrow.float64(),
    }
    if plan.types is None:
        own = [pyarrow.field(name, pyarrow.string()) for name in plan.columns]
    else:
        given = pyarrow.ipc.read_schema(pyarrow.py_buffer(plan.types))
        own = [field.with_name(name) for field, name in zip(given, plan.columns, strict=True)]
    return pyarrow.schema(
        [*own, *(pyarrow.field(column.name, kinds[column.kind]) for column in plan.results)]
    )


def _arrow_stream(plan: Plan, rows: Sequence[Row], records: Sequence[Record]) -> bytes:
    pyarrow = needed("pyarrow", "parquet", "Parquet output")
    fields = arrow_schema(plan)
    own = list(zip(*(row.values or row.cells for row in rows), strict=True)) or [()] * len(plan.columns)
    found = list(zip(*records, strict=True)) or [()] * len(plan.results)
    arrays = [
        pyarrow.array(_valid(values), field.type)
        for values, field in zip([*own, *found], fields, strict=True)
    ]
    sink = pyarrow.BufferOutputStream()
    with pyarrow.ipc.new_stream(sink, fields) as stream:
        if rows:
            stream.write_batch(pyarrow.record_batch(arrays, schema=fields))
    data: bytes = sink.getvalue().to_pybytes()
    return data


def _valid(values: Sequence[object]) -> list[object]:
    """Text that UTF-8 can hold."""
    return [
        value.encode("utf-8", "replace").decode() if isinstance(value, str) and not value.isascii() else value
        for value in values
    ]


_ENCODERS: dict[str, Callable[[Plan, Sequence[Row], Sequence[Record]], bytes]] = {
    "csv": _delimited_rows,
    "tsv": _delimited_rows,
    "sdf": _sdf,
    "parquet": _arrow_stream,
}
