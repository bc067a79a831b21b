"""`explain`: why a compound has its pKaH, term by term, as text, Markdown, JSON or pictures."""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path

import click

from ..batch.compute import with_molecules
from ..explanation import CAUTION, INTERVAL_NOTE, Explanation, as_dict, explain
from ..readers import InputError, open_table
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

KINDS = {".txt": "text", ".md": "md", ".json": "json", ".svg": "svg"}
"""Ending of an output file, and what is written to it."""


@click.command("explain")
@shared_options("Write to FILE; its ending (.txt, .md, .json, .svg) says what.")
@request_options(pkb=True)
@click.option(
    "--as",
    "kind",
    type=click.Choice(list(KINDS.values())),
    metavar="|".join(KINDS.values()),
    help="What to write: text, Markdown, JSON or the pictures. [default: text, or by the ending of -o]",
)
def command(
    inputs: tuple[str, ...],
    ph: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str | None,
    request: Request,
    kind: str | None,
) -> int:
    """Show the sites of a compound: parent value and increments of each, with their atoms and sources.

    Then come the interaction between sites, the macroscopic constants in the order of protonation, protomers of
    the same charge with their shares, the state at each pH, and the compound as a buffer. Atoms are counted from 0
    as written.
    """
    values = checked(ph, output, inputs, tuple(KINDS))
    by_ending = KINDS.get(Path(output or "").suffix.lower())
    if kind and by_ending and kind != by_ending:
        raise InputError(f"--as {kind} does not go with the ending of {output}")
    code = 0
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        quiet_rdkit()
        label = label_place(table)
        found: list[tuple[Explanation, str]] = []
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
                    local=request.local,
                )
            if told is None or told.status == "refused":
                reason = row.problem if told is None else told.message
                say(f"{name or row.structure or 'a row'}: refused: {reason}")
                code = WRONG_INPUT
            else:
                found.append((told, name))
    if found:
        text = as_text(found, kind or by_ending or "text")
        with open_output(output or STDOUT) as stream:
            stream.write(text)
    return code


def as_text(found: Sequence[tuple[Explanation, str]], kind: str) -> str:
    """Explanations with their names in one of the four forms."""
    if kind == "json":
        compounds = [{"name": name, **as_dict(told)} for told, name in found]
        remark = f"{INTERVAL_NOTE} {CAUTION}".replace("\n", " ")
        return json.dumps({"compounds": compounds, "note": remark}, ensure_ascii=False, indent=2) + "\n"
    if kind == "md":
        from ..markdown import explanation_markdown, note

        return "\n\n".join(explanation_markdown(told, name) for told, name in found) + f"\n\n{note()}\n"
    if kind == "svg":
        from ..depiction import stacked_svg

        return stacked_svg(found) or ""
    texts = [f"Compound   {name}\n{told}" if name else str(told) for told, name in found]
    return f"\n\n{'-' * 72}\n\n".join(texts) + f"\n\n{INTERVAL_NOTE}\n{CAUTION}\n"
