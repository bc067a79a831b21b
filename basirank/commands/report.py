"""`report`: a list as one page to read, with pictures, intervals, increments and an overview."""

from __future__ import annotations

import sys
from collections import Counter
from collections.abc import Sequence
from itertools import islice
from typing import TYPE_CHECKING

import click

from ..annotation import CHUNK
from ..batch.compute import with_molecules
from ..readers import InputError, Row, Table, open_table
from ..records import schema
from ..request import Request
from ..selection import Selection, selected
from ..writers import open_output
from .shared import (
    Progress,
    batches_of,
    checked,
    label_place,
    no_row_left,
    on_terminal,
    quiet_rdkit,
    request_options,
    say,
    selection_options,
    shared_options,
    summarise,
)

if TYPE_CHECKING:
    from ..entries import Subject

ENDINGS = (".html",)
DEFAULT = "report.html"
TITLE = "Basicity report"


@click.command("report")
@shared_options(f"Write the page to FILE (.html). [default: {DEFAULT}]")
@request_options()
@selection_options
@click.option("--title", default=TITLE, metavar="TEXT", help="Heading of the page.", show_default=True)
def command(
    inputs: tuple[str, ...],
    ph: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str,
    request: Request,
    selection: Selection,
    title: str,
) -> int:
    """Write a ranked list as one page that opens in a browser from disk, without a network.

    The page sorts, filters and searches; it draws each structure with its sites, shows intervals on a common
    scale and the state at each pH, and for each compound the increments of its sites as a waterfall.
    """
    target = output or DEFAULT
    values = checked(ph, target, inputs, ENDINGS)
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        quiet_rdkit()
        from ..report import REPORT_LIMIT

        rows = list(islice(table.rows, REPORT_LIMIT + 1))
        if len(rows) > REPORT_LIMIT:
            raise InputError(
                f"more than {REPORT_LIMIT:,} rows are no page to read: rank the list and take its top"
            )
        write_page(rows, table, values, request, selection, title, target)
    return 0


def write_page(
    rows: Sequence[Row],
    table: Table,
    ph: tuple[float, ...],
    request: Request,
    selection: Selection,
    title: str,
    output: str,
) -> None:
    """Compute the rows of an open list, and write those that are selected as a page."""
    from ..entries import Entry, entries_of
    from ..report import page

    progress = Progress(on_terminal(sys.stderr))
    entries: list[Entry] = []
    for batch in batches_of(rows, CHUNK):
        entries += entries_of([subject_of(row, table) for row in with_molecules(batch)], ph, request)
        progress.show(len(entries), len(batch) == CHUNK)
    progress.clear()
    records = [entry.record for entry in entries]
    order = selected(records, [entry.subject.name for entry in entries], selection, schema(ph))
    no_row_left(order, records)
    with open_output(output) as stream:
        stream.write(page([(place, entries[n]) for place, n in order], ph, title, request.conditions))
    summarise(Counter(str(record[0]) for record in records), table, output, len(order))


def subject_of(row: Row, table: Table) -> Subject:
    """A row of a list as a report takes it: structure, name, and its own further columns (that of the SMILES apart)."""
    from ..entries import Subject

    label = label_place(table)
    cells = tuple(
        (column, text)
        for n, (column, text) in enumerate(zip(table.columns, row.cells, strict=True))
        if text and n != label and text != row.structure
    )
    return Subject(row.structure, row.cells[label] if label is not None else "", cells, row.problem)
