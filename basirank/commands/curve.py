"""`curve`: share of each form, mean charge and log D against pH, as a table or a picture."""

from __future__ import annotations

from itertools import islice

import click

from ..batch.compute import with_smiles
from ..readers import InputError, open_table
from ..records import cell
from ..request import STANDARD, Request, within
from ..writers import STDOUT, TableWriter, open_output
from .shared import WRONG_INPUT, check_picture, input_options, label_place, quiet_rdkit, request_options, say

MOST_ROWS = 10_000  # compounds of one table
TABLE_STEP, PICTURE_STEP = 0.1, 0.02  # pH


@click.command("curve")
@input_options(
    "Write to FILE: a table (.csv, .tsv) or a picture (.svg, .png). [default: CSV to standard output]"
)
@request_options()
@click.option("--from", "low", metavar="PH", default="0", help="First pH, -2 to 16. [default: 0]")
@click.option("--to", "high", metavar="PH", default="14", help="Last pH. [default: 14]")
@click.option("--step", metavar="PH", help="Step of the pH. [default: 0.1, finer in a picture]")
@click.option("--logp", metavar="P", help="log P of the neutral form of one compound. [default: estimated]")
@click.option("--show", type=click.Choice(("forms", "charge", "logd")), multiple=True,
              help="What a picture shows; may be repeated. [default: all]")  # fmt: skip
def command(
    inputs: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str | None,
    request: Request,
    low: str,
    high: str,
    step: str | None,
    logp: str | None,
    show: tuple[str, ...],
) -> int:
    """Show how a compound changes with pH: the share of each form, mean net charge and log D.

    A picture holds up to six compounds. log P is estimated from atom contributions (Wildman and Crippen 1999) unless
    it is given; ion pairs count three (cations) and four units (anions) below it.
    """
    target = output or STDOUT
    picture = check_picture(target, inputs)
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        quiet_rdkit()
        from ..curves import LOG_P_RANGE, curve_table, curves_of, ph_grid
        from ..figures import MOST_COMPOUNDS, QUANTITIES, curve_figure

        label = label_place(table)
        most = MOST_COMPOUNDS if picture else MOST_ROWS
        rows = with_smiles(list(islice(table.rows, most + 1)))
        try:
            ph = ph_grid(low, high, step or (PICTURE_STEP if picture else TABLE_STEP))  # type: ignore[arg-type]
            log_p = None if logp is None else within("log P", logp, LOG_P_RANGE, "")
        except ValueError as error:
            raise InputError(str(error)) from None
        if len(rows) > most:
            raise InputError(
                f"more than {most:,} compounds: {'a picture' if picture else 'curve'} takes fewer"
            )
        if log_p is not None and len(rows) != 1:
            raise InputError(f"--logp is for one compound, not for {len(rows)}")
        code, sound = 0, []
        named = [row.cells[label] if label is not None else "" for row in rows]
        curves = curves_of(
            [row.structure if row.problem is None else "" for row in rows],
            named,
            ph,
            log_p=log_p,
            conditions=request.conditions,
            local=request.local,
        )
        for row, found in zip(rows, curves, strict=True):
            if len(found.ph):
                sound.append(found)
            else:
                say(f"{found.name or row.structure or 'a row'}: refused: {row.problem or found.message}")
                code = WRONG_INPUT
    if not sound:
        return WRONG_INPUT
    note = "" if request.conditions == STANDARD else str(request.conditions)
    if picture:
        try:
            picture.write(target, curve_figure(sound, show or QUANTITIES, note))
        except ValueError as error:
            raise InputError(str(error)) from None
    else:
        names, values, owners = curve_table(sound)
        with open_output(target) as stream:
            writer = TableWriter(stream, target, ["smiles", "name", *names])
            writer.write(
                [sound[owner].structure, sound[owner].name, f"{line[0]:g}", *(
                    cell(value, "constant" if name in ("log_p", "log_d") else "fraction")
                    for name, value in zip(names[1:], line[1:], strict=True)
                )]
                for line, owner in zip(values, owners, strict=True)
            )  # fmt: skip
    if note:
        say(f"at {note}")
    if any(found.estimated for found in sound) and (not picture or "logd" in (show or QUANTITIES)):
        say(
            "log P is an estimate from atom contributions (Wildman and Crippen 1999); --logp gives a measured one"
        )
    return code
