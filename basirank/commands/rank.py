"""`rank`: a list sorted by basicity, as an aligned table or a file."""

from __future__ import annotations

import shutil
import sys
from collections import Counter
from itertools import islice
from typing import TYPE_CHECKING

import click

from ..annotation import CHUNK
from ..explanation import CAUTION, INTERVAL_NOTE
from ..readers import InputError, open_table
from ..records import Record, cell, cells, schema, unclashed
from ..request import STANDARD, Request
from ..selection import Selection, selected
from ..writers import TABLE_ENDINGS, TableWriter, open_output, ranked_table
from .report import TITLE, write_page
from .shared import (
    Progress,
    batches_of,
    checked,
    label_of,
    label_place,
    no_row_left,
    on_terminal,
    quiet_rdkit,
    request_options,
    say,
    selection_options,
    shared_options,
    show,
    standings_of_rows,
    summarise,
)

if TYPE_CHECKING:
    from ..kinship import Standing

RANK_LIMIT = 1_000_000  # rows that `rank` will hold and sort
DOCUMENT_ENDINGS = (".md", ".html")
TABLE_WIDTH = 160  # of the ranked table where standard output is no terminal


@click.command("rank")
@shared_options(
    "Write the whole table to FILE (.csv, .tsv), or as CSV to standard output for '-'; "
    "as a Markdown table (.md) or the page of `report` (.html)."
)
@request_options(forms=True, pkb=True)
@selection_options
def command(
    inputs: tuple[str, ...],
    ph: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str | None,
    request: Request,
    selection: Selection,
) -> int:
    """Sort a list by its first pKaH, strongest base first.

    Without -o an aligned table is shown: half of the 90 % interval, probability that the compound is truly
    more basic than the next, atom (counted from 0 as written) and class of the first proton, mean net
    charge and share of molecules with a proton on a base site at each pH. Rows without a pKaH come last. A
    rank is the place in the whole list, whatever is left out of it.
    """
    values = checked(ph, output, inputs, (*TABLE_ENDINGS, *DOCUMENT_ENDINGS))
    ending = "" if output is None else output[output.rfind(".") :].lower()
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        quiet_rdkit()
        rows = list(islice(table.rows, RANK_LIMIT + 1))
        if len(rows) > RANK_LIMIT:
            raise InputError(
                f"more than {RANK_LIMIT:,} rows: rank sorts, so it holds them all; use annotate instead"
            )
        if output is not None and ending == ".html":
            write_page(rows, table, values, request, selection, TITLE, output)
            return 0
        progress = Progress(on_terminal(sys.stderr))
        records: list[Record] = []
        standings: list[Standing | None] = []
        for batch in batches_of(rows, CHUNK):
            for record, standing in standings_of_rows(batch, values, request):
                records.append(record)
                standings.append(standing)
            progress.show(len(records), len(batch) == CHUNK)
        progress.clear()
    place = label_place(table)
    names = [row.cells[place] if place is not None else "" for row in rows]
    shown = schema(values, request=request)
    order = selected(records, names, selection, shown)
    no_row_left(order, records)
    ranks, found = [rank for rank, _ in order], [records[n] for _, n in order]
    labels = [label_of(rows[n], place) for _, n in order]
    ranked = selection.sort == "pkah" and not selection.reverse
    surer = _above_next([standings[n] if ranked else None for _, n in order])
    columns = schema(values, ranked=True, request=request)
    if output is None:
        width = shutil.get_terminal_size().columns if on_terminal(sys.stdout) else TABLE_WIDTH
        text = ranked_table(ranks, labels, found, surer, shown, values, width)
        conditions = "" if request.conditions == STANDARD else f"\n\nAt {request.conditions}."
        show(f"{text}{conditions}\n\n{INTERVAL_NOTE}\n{CAUTION}")
        return 0
    if ending == ".md":
        from ..markdown import ranked_markdown

        structures = [rows[n].structure for _, n in order]
        with open_output(output) as stream:
            stream.write(
                ranked_markdown(ranks, labels, structures, found, surer, shown, values, request.conditions)
            )
        summarise(Counter(str(record[0]) for record in records), table, output, len(order))
        return 0
    heading = ["rank", *map(str, unclashed(table.columns, columns)), *(column.name for column in columns[1:])]
    with open_output(output) as stream:
        writer = TableWriter(stream, output, heading)
        writer.write(
            [cell(rank, "integer"), *rows[n].cells, *cells((*records[n], sure), columns[1:])]
            for (rank, n), sure in zip(order, surer, strict=True)
        )
    summarise(Counter(str(record[0]) for record in records), table, output, len(order))
    return 0


def _above_next(standings: list[Standing | None]) -> list[float | None]:
    from ..kinship import above_next

    return above_next(standings)
