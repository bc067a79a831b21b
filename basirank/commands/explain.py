"""`explain`: why a compound has its pKaH, term by term."""

from __future__ import annotations

import click

from ..batch.compute import with_molecules
from ..explanation import CAUTION, INTERVAL_NOTE, explain
from ..readers import open_table
from ..request import Request
from ..writers import STDOUT, open_output
from .shared import (
    WRONG_INPUT,
    batches_of,
    checked,
    label_place,
    quiet_rdkit,
    request_options,
    say,
    shared_options,
)


@click.command("explain")
@shared_options("Write the text to FILE (.txt).")
@request_options(pkb=True)
def command(
    inputs: tuple[str, ...],
    ph: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str | None,
    request: Request,
) -> int:
    """Show the sites of a compound: parent value and increments of each, with their atoms and sources.

    Then come the interaction between sites, the macroscopic constants in the order of protonation, protomers of
    the same charge with their shares, the state at each pH, and the compound as a buffer. Atoms are counted from 0
    as written.
    """
    values = checked(ph, output, inputs, (".txt",))
    code = 0
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        quiet_rdkit()
        label = label_place(table)
        texts = []
        for row in (one for batch in batches_of(table.rows, 1) for one in with_molecules(batch)):
            name = row.cells[label] if label is not None else ""
            told = None
            if not row.problem:
                told = explain(
                    row.structure,
                    ph=values,
                    temperature=request.conditions.temperature,
                    ionic_strength=request.conditions.ionic_strength,
                    show_pkb=request.pkb,
                )
            if told is None or told.status == "refused":
                reason = row.problem if told is None else told.message
                say(f"{name or row.structure or 'a row'}: refused: {reason}")
                code = WRONG_INPUT
            else:
                texts.append(f"Compound   {name}\n{told}" if name else str(told))
    if texts:
        with open_output(output or STDOUT) as stream:
            stream.write(f"\n\n{'-' * 72}\n\n".join(texts) + f"\n\n{INTERVAL_NOTE}\n{CAUTION}\n")
    return code
