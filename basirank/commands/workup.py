"""`workup`: acid-base extraction of a list, as text, a table, JSON or a picture."""

from __future__ import annotations

import json
from collections import Counter
from collections.abc import Sequence
from dataclasses import replace
from itertools import islice
from typing import TYPE_CHECKING, Any

import click

from ..batch.compute import with_smiles
from ..readers import InputError, Row, Table, open_table
from ..records import Column, unclashed
from ..request import STANDARD, Request, within
from ..writers import STDOUT, TableWriter, open_output
from .shared import (
    WRONG_INPUT,
    check_document,
    input_options,
    label_place,
    quiet_rdkit,
    request_options,
    say,
    show,
)

if TYPE_CHECKING:
    from ..extraction import Entry

MOST_ROWS = 10_000  # compounds of one list


@click.command("workup")
@input_options("Write to FILE: a table (.csv, .tsv), .json or a picture (.svg, .png). [default: text]")
@request_options()
@click.option(
    "--aim", metavar="SHARE", default="0.99", help="Share that shall go over, 0.5 to 0.99999. [default: 0.99]"
)
@click.option("--aqueous", metavar="V", default="50", help="Each portion of water, mL. [default: 50]")
@click.option(
    "--organic",
    metavar="V",
    default="50",
    help="Organic layer, and each portion of solvent, mL. [default: 50]",
)
@click.option("--washes", metavar="N", default="2", help="Number of portions, 1 to 20. [default: 2]")
@click.option("--from", "low", metavar="PH", default="1", help="Lowest pH to be used, 0 to 14. [default: 1]")
@click.option("--to", "high", metavar="PH", default="13", help="Highest pH to be used. [default: 13]")
@click.option(
    "--logp-column", metavar="NAME", help="Column with log P of the neutral forms. [default: estimated]"
)
@click.option(
    "--amount-column", metavar="NAME", help="Column with the amounts of substance. [default: equal]"
)
@click.option(
    "--ion-pairs",
    type=(str, str),
    metavar="C A",
    default=("5", "6"),
    help="log P units of ion pairs of cations and anions below the neutral form; 3 4 for octanol. [default: 5 6]",
)
@click.option("--alone", is_flag=True, help="Each compound by itself; no plan for the mixture.")
def command(
    inputs: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str | None,
    request: Request,
    aim: str,
    aqueous: str,
    organic: str,
    washes: str,
    low: str,
    high: str,
    logp_column: str | None,
    amount_column: str | None,
    ion_pairs: tuple[str, str],
    alone: bool,
) -> int:
    """Plan an acid-base extraction: the pH that takes a compound into water, and the pH that brings it back.

    INPUT of 2 to 12 compounds is taken for a mixture: washes that separate its members are looked for, with
    recovery and purity of each, and said to be impossible where pH alone cannot do it. log P is estimated from
    atom contributions (Wildman and Crippen 1999) unless a column gives it.

    Example: basirank workup "OC(=O)c1ccccc1 acid" "Nc1ccccc1 base" -o plan.svg
    """  # fmt: skip
    picture = check_document(output, inputs)
    from ..extraction import Setting, workup_of
    from ..mixtures import MOST_COMPOUNDS

    try:
        setting = Setting(aim, aqueous, organic, washes, low, high, ion_pairs)  # type: ignore[arg-type]
    except ValueError as error:
        raise InputError(str(error)) from None
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        quiet_rdkit()
        rows = with_smiles(list(islice(table.rows, MOST_ROWS + 1)))
    if not rows:
        raise InputError("no compound in the input")
    if len(rows) > MOST_ROWS:
        raise InputError(f"more than {MOST_ROWS:,} compounds: workup takes fewer")
    entries = _entries(rows, table, logp_column, amount_column)
    done = workup_of(entries, setting, mixture=not alone, conditions=request.conditions, local=request.local)
    from ..bench_text import COLUMNS, workup_cells, workup_dict

    note = "" if request.conditions == STANDARD else str(request.conditions)
    target = output or STDOUT
    if output is None:
        show(str(done))
    elif picture:
        from ..figures import workup_figure

        try:
            picture.write(target, workup_figure(done, note))
        except ValueError as error:
            raise InputError(str(error)) from None
    else:
        with open_output(target) as stream:
            if target.lower().endswith(".json"):
                stream.write(json.dumps(workup_dict(done), ensure_ascii=False, indent=2) + "\n")
            else:
                columns = [Column(name, "text") for name in COLUMNS]
                own = [*map(str, unclashed(table.columns, columns))]
                writer = TableWriter(stream, target, [*own, *COLUMNS])
                writer.write(
                    [*row.cells, *cells] for row, cells in zip(rows, workup_cells(done), strict=True)
                )
    statuses = Counter("refused" if one.partition is None else "ok" for one in done.compounds)
    if output is not None:
        for one in done.compounds:
            if one.partition is None:
                say(f"{one.name or one.structure or 'a row'}: refused: {one.message}")
    if not alone and statuses["ok"] > MOST_COMPOUNDS:
        say(
            f"washes for a mixture are looked for among up to {MOST_COMPOUNDS} compounds, not {statuses['ok']}"
        )
    return 0 if statuses["ok"] else WRONG_INPUT


def _entries(
    rows: Sequence[Row], table: Table, logp_column: str | None, amount_column: str | None
) -> list[Entry]:
    """The rows with log P and amount from their columns; an empty cell is as if there were no column."""
    from ..extraction import AMOUNT_RANGE, LOG_P_RANGE, Entry

    wanted: dict[str, tuple[str | None, tuple[float, float]]] = {
        "log_p": (logp_column, LOG_P_RANGE),
        "amount": (amount_column, AMOUNT_RANGE),
    }
    for column, _ in wanted.values():
        if column is not None and column not in table.columns:
            known = ", ".join(map(repr, table.columns))
            raise InputError(f"there is no column {column!r}; there are {known}")
    label = label_place(table)
    found = []
    for row in rows:
        entry = Entry(row.structure, row.cells[label] if label is not None else "", problem=row.problem or "")
        for field, (column, limits) in wanted.items():
            text = row.cells[table.columns.index(column)].strip() if column is not None else ""
            if text and not entry.problem:
                try:
                    number: Any = within(str(column), text, limits, "")
                    entry = replace(entry, **{field: number})
                except ValueError as error:
                    entry = replace(entry, problem=str(error))
        found.append(replace(entry, structure="") if entry.problem else entry)
    return found
