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
from ..records import Record, cell, cells, ranking, schema, unclashed
from ..request import STANDARD, Request
from ..writers import TableWriter, open_output, ranked_table
from .shared import (
    Progress,
    batches_of,
    checked,
    label_of,
    label_place,
    on_terminal,
    quiet_rdkit,
    request_options,
    say,
    shared_options,
    standings_of_rows,
    summarise,
)

if TYPE_CHECKING:
    from ..kinship import Standing

RANK_LIMIT = 1_000_000  # rows that `rank` will hold and sort
TABLE_WIDTH = 160  # of the ranked table where standard output is no terminal


@click.command("rank")
@shared_options("Write the whole table to FILE (.csv, .tsv), or as CSV to standard output for '-'.")
@request_options(forms=True, pkb=True)
def command(
    inputs: tuple[str, ...],
    ph: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str | None,
    request: Request,
) -> int:
    """Sort a list by its first pKaH, strongest base first.

    Without -o an aligned table is shown: half of the 90 % interval, probability that the compound is truly
    more basic than the next, atom (counted from 0 as written) and class of the first proton, mean net
    charge and share of molecules with a proton on a base site at each pH. Rows without a pKaH come last.
    """
    values = checked(ph, output, inputs)
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        quiet_rdkit()
        rows = list(islice(table.rows, RANK_LIMIT + 1))
        if len(rows) > RANK_LIMIT:
            raise InputError(
                f"more than {RANK_LIMIT:,} rows: rank sorts, so it holds them all; use annotate instead"
            )
        progress = Progress(on_terminal(sys.stderr))
        records: list[Record] = []
        standings: list[Standing | None] = []
        for batch in batches_of(rows, CHUNK):
            for record, standing in standings_of_rows(batch, values, request):
                records.append(record)
                standings.append(standing)
            progress.show(len(records), len(batch) == CHUNK)
        progress.clear()
    order = ranking(records)
    surer = _above_next([standings[n] for _, n in order])
    columns = schema(values, ranked=True, request=request)
    if output is None:
        label = label_place(table)
        click.echo(
            ranked_table(
                [place for place, _ in order],
                [label_of(rows[n], label) for _, n in order],
                [records[n] for _, n in order],
                surer,
                schema(values, request=request),
                values,
                shutil.get_terminal_size().columns if on_terminal(sys.stdout) else TABLE_WIDTH,
            )
        )
        if request.conditions != STANDARD:
            click.echo(f"\nAt {request.conditions}.")
        click.echo(f"\n{INTERVAL_NOTE}\n{CAUTION}")
        return 0
    heading = ["rank", *map(str, unclashed(table.columns, columns)), *(column.name for column in columns[1:])]
    with open_output(output) as stream:
        writer = TableWriter(stream, output, heading)
        writer.write(
            [cell(place, "integer"), *rows[n].cells, *cells((*records[n], sure), columns[1:])]
            for (place, n), sure in zip(order, surer, strict=True)
        )
    summarise(Counter(str(record[0]) for record in records), table, output)
    return 0


def _above_next(standings: list[Standing | None]) -> list[float | None]:
    from ..kinship import above_next

    return above_next(standings)
