"""`annotate`: a list of any length, streamed, with the constants and states of each row."""

from __future__ import annotations

import sys
from collections import Counter
from itertools import chain

import click

from ..annotation import CHUNK
from ..readers import open_table
from ..records import cells, schema, unclashed
from ..request import Request
from ..writers import STDOUT, TableWriter, open_output
from .shared import (
    Progress,
    batches_of,
    checked,
    on_terminal,
    quiet_rdkit,
    records_of_rows,
    request_options,
    say,
    shared_options,
    summarise,
)


@click.command("annotate")
@shared_options("Write to FILE (.csv, .tsv) instead of CSV to standard output.")
@request_options(forms=True, pkb=True)
def command(
    inputs: tuple[str, ...],
    ph: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str,
    request: Request,
) -> int:
    """Add pKaH and pKa values, the first site and the state at each pH to every row, in order, none lost.

    The list is streamed, so its length does not matter. A file appears under its name only when it is whole.
    """
    values = checked(ph, output, inputs)
    columns = schema(values, request=request)
    target = output or STDOUT
    statuses: Counter[str] = Counter()
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        quiet_rdkit()
        heading = [*map(str, unclashed(table.columns, columns)), *(column.name for column in columns)]
        progress = Progress(on_terminal(sys.stderr) and (target != STDOUT or not on_terminal(sys.stdout)))
        batches = batches_of(table.rows, CHUNK)
        first = next(batches, [])  # read before anything is written
        with open_output(target) as stream:
            writer = TableWriter(stream, target, heading)
            for batch in chain([first], batches):
                records = records_of_rows(batch, values, request)
                writer.write(
                    [*row.cells, *cells(record, columns)] for row, record in zip(batch, records, strict=True)
                )
                statuses.update(str(record[0]) for record in records)
                progress.show(statuses.total(), len(batch) == CHUNK)
        progress.clear()
    if target != STDOUT:
        summarise(statuses, table, target)
    return 0
