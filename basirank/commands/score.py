"""`score`: a table of measured constants against the predicted ones."""

from __future__ import annotations

import json
import os
from collections.abc import Sequence
from typing import TYPE_CHECKING

import click

from ..readers import InputError, open_table
from ..request import STANDARD, Request
from ..writers import STDOUT, TABLE_ENDINGS, TableWriter, check_output, open_output
from .shared import (
    PICTURE_ENDINGS,
    WRONG_INPUT,
    Picture,
    counted,
    input_options,
    quiet_rdkit,
    request_options,
    say,
    show,
)

if TYPE_CHECKING:
    from ..measurements import Unused

ENDINGS = (*TABLE_ENDINGS, ".json", ".md", ".html", *PICTURE_ENDINGS)
REASONS_SHOWN = 10


@click.command("score")
@input_options("Write to FILE: the rows (.csv, .tsv), all of it (.json, .md, .html) or a plot (.svg, .png).")
@click.option("--value-column", metavar="NAME",
              help="Column of the measured values. [default: pkah, pka, value, measured and the like]")  # fmt: skip
@click.option("--kind", type=click.Choice(("pkah", "pka")),
              help="Kind of the values without a column kind. [default: by the column's name, else pkah]")  # fmt: skip
@click.option("--lowest", type=float, default=-2.0, metavar="PKAH", show_default=True,
              help="Leave out bases measured below it.")  # fmt: skip
@click.option("--worst", type=click.IntRange(min=0), default=10, metavar="N", show_default=True,
              help="Rows listed, named or drawn as the farthest.")  # fmt: skip
@request_options()
def command(
    inputs: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str | None,
    value_column: str | None,
    kind: str | None,
    lowest: float,
    worst: int,
    request: Request,
) -> int:
    """Compare a table of measured constants with the predicted ones.

    A row holds a structure and a value; it may say its kind (pkah or pka), step, temperature, ionic_strength and
    class in columns of these names. Without a step the value is taken for the first constant of its kind. Compounds
    in the training table are counted apart, and rows that cannot be used are named.

    Example: basirank score measured.csv -o score.html
    """
    if output not in (None, STDOUT):
        check_output(output, inputs, ENDINGS)
    ending = os.path.splitext(output or "")[1].lower()
    if ending == ".png":
        from ..plots import png_ready

        png_ready()
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        quiet_rdkit()
        from ..batch.compute import with_smiles
        from ..measurements import columns_of, measured_of
        from ..scoring import scored

        columns = columns_of(table.columns, value_column, kind)
        rows = [(row.structure, row.cells, row.problem) for row in with_smiles(list(table.rows))]
    found = scored(
        measured_of(rows, columns, request.conditions), columns, local=request.local, lowest=lowest
    )
    from .. import scorecard

    if output is None or output == STDOUT:
        show(scorecard.score_text(found, worst))
    elif ending in PICTURE_ENDINGS:
        from ..parity import parity_svg

        if not found.rows:
            _tell_unused(found.unused)
            raise InputError("no row could be used: there is nothing to draw")
        note = "" if request.conditions == STANDARD else str(request.conditions)
        Picture(ending == ".png").write(output, parity_svg(found, labelled=worst, note=note))
    else:
        with open_output(output) as stream:
            if ending == ".json":
                json.dump(scorecard.score_dict(found), stream, ensure_ascii=False, indent=1)
                stream.write("\n")
            elif ending == ".md":
                stream.write(scorecard.score_markdown(found, worst))
            elif ending == ".html":
                stream.write(scorecard.score_html(found, request, worst))
            else:
                TableWriter(stream, output, scorecard.COLUMNS).write(scorecard.score_rows(found))
    _tell_unused(found.unused)
    where = f"; written to {output}" if output not in (None, STDOUT) else ""
    say(f"{counted(len(rows), 'row')}: {len(found.rows):,} scored, {len(found.unused):,} not used{where}")
    return 0 if found.rows else WRONG_INPUT


def _tell_unused(unused: Sequence[Unused]) -> None:
    for one in unused[:REASONS_SHOWN]:
        say(f"row {one.number}{f' ({one.name})' if one.name else ''} not used: {one.told}")
    if len(unused) > REASONS_SHOWN:
        say(f"and {len(unused) - REASONS_SHOWN:,} more rows not used")
