"""`salts`: counter-ions ranked for a salt, and solubility against pH, as text, a table, JSON or a picture."""

from __future__ import annotations

import json
from itertools import islice

import click

from ..batch.compute import with_smiles
from ..readers import InputError, open_table
from ..records import clean_ph
from ..request import STANDARD, Request
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

MOST_ROWS = 10_000  # compounds of one list


@click.command("salts")
@input_options(
    "Write to FILE: a table (.csv, .tsv), .json or a picture of the solubility (.svg, .png). [default: text]"
)
@request_options()
@click.option(
    "--as",
    "side",
    type=click.Choice(("base", "acid")),
    help="What the compound is in its salt. [default: whatever it can be]",
)
@click.option(
    "--class", "family", default="", metavar="NAME", help="Counter-ions whose class has NAME in it."
)
@click.option("--top", type=click.IntRange(min=1), metavar="N", help="The first N counter-ions.")
@click.option(
    "--solubility", metavar="S", help="Of the form without net charge, mg/mL or with a unit (2e-4 mol/L)."
)
@click.option(
    "--salt-solubility", metavar="S", help="Of the 1:1 salt, as mass of the free form; units as before."
)
@click.option("--ksp", metavar="K", help="Solubility product of that salt instead, mol2/L2.")
@click.option(
    "--ph",
    "ph",
    multiple=True,
    default=("1.2", "4.5", "6.8"),
    metavar="PH",
    help="pH of the solubility; may be repeated. [default: 1.2, 4.5 and 6.8]",
)
def command(
    inputs: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str | None,
    request: Request,
    side: str | None,
    family: str,
    top: int | None,
    solubility: str | None,
    salt_solubility: str | None,
    ksp: str | None,
    ph: tuple[str, ...],
) -> int:
    """Rank counter-ions for a salt by the difference of constants, each with how often such a pair makes a salt.

    What counts is the macroscopic step from no net charge to the ion, whatever group takes or gives the proton. With
    the intrinsic solubility, of one compound, come its solubility against pH and the pH of maximum solubility.

    Example: basirank salts "CCN(CC)CC" --solubility "1 mg/mL"
    """  # fmt: skip
    picture = check_document(output, inputs)
    try:
        media = clean_ph(ph)
    except ValueError as error:
        raise InputError(str(error)) from None
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        quiet_rdkit()
        rows = with_smiles(list(islice(table.rows, MOST_ROWS + 1)))
        label = label_place(table)
    if not rows:
        raise InputError("no compound in the input")
    if len(rows) > MOST_ROWS:
        raise InputError(f"more than {MOST_ROWS:,} compounds: salts takes fewer")
    if solubility is not None and len(rows) != 1:
        raise InputError(f"--solubility is for one compound, not for {len(rows)}")
    from ..salt_selection import SaltSelection, selections_of
    from ..salt_text import COLUMNS, NOTE, caution, no_salt, selection_cells, selection_dict, selections_text

    names = [row.cells[label] if label is not None else "" for row in rows]
    try:
        found = selections_of(
            [row.structure if row.problem is None else "" for row in rows],
            names,
            side=side,
            solubility=solubility,
            salt_solubility=salt_solubility,
            ksp=ksp,  # type: ignore[arg-type]
            ph=media,
            conditions=request.conditions,
            local=request.local,
        )
    except ValueError as error:
        raise InputError(str(error)) from None
    found = [
        one if row.problem is None else SaltSelection(one.name, str(row.structure), row.problem)
        for one, row in zip(found, rows, strict=True)
    ]
    target = output or STDOUT
    if output is None:
        show(selections_text(found, top, family))
    elif picture:
        from ..figures import solubility_figure

        note = "" if request.conditions == STANDARD else str(request.conditions)
        try:
            picture.write(target, solubility_figure(found, note))
        except ValueError as error:
            raise InputError(str(error)) from None
    else:
        with open_output(target) as stream:
            if target.lower().endswith(".json"):
                told = [selection_dict(one, top, family) for one in found]
                note = " ".join([NOTE, *caution()])
                stream.write(
                    json.dumps({"compounds": told, "note": note}, ensure_ascii=False, indent=2) + "\n"
                )
            else:
                writer = TableWriter(stream, target, ["smiles", "name", *COLUMNS])
                for one in found:
                    writer.write(
                        [one.structure, one.name, *cells] for cells in selection_cells(one, top, family)
                    )
    refused = [one for one in found if one.steps is None]
    if output is not None:
        for one in refused:
            say(f"{one.name or one.structure or 'a row'}: refused: {one.message}")
    if picture:
        for one in found:
            if one.steps is not None and not one.sides:
                say(f"{one.name or one.structure}: {no_salt(one)}")
    return WRONG_INPUT if len(refused) == len(found) else 0
