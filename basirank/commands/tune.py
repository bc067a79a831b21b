"""`tune`: small changes of structure that would bring a pKaH into a window, or a map of what one edit does where."""

from __future__ import annotations

import json
import os
from collections.abc import Iterable, Sequence
from itertools import islice
from typing import Any

import click

from ..batch.compute import with_molecules
from ..readers import InputError, Row, open_table
from ..request import Request
from ..writers import STDOUT, TABLE_ENDINGS, TableWriter, open_output
from .shared import check_picture, input_options, label_place, quiet_rdkit, request_options, say

TEXT, JSON = ".txt", ".json"
DEFAULT_REACH, MOST_REACH = 5, 12  # bonds; as in `tuning`, which needs numpy


@click.command("tune")
@input_options("Write to FILE: all results (.csv, .tsv, .json), text (.txt) or a picture (.svg, .png).")
@request_options()
@click.option("--to", metavar="LOW:HIGH", help="Where the pKaH is to go, such as 7.0:8.0.")
@click.option(
    "--site",
    type=click.IntRange(min=0),
    metavar="ATOM",
    help="The nitrogen, as the input numbers it from 0. [default: that of the first proton]",
)
@click.option(
    "--keep",
    multiple=True,
    metavar="SMARTS|ATOMS",
    help="Atoms that stay as they are: SMARTS, or numbers with commas; may be repeated.",
)
@click.option(
    "--near",
    type=click.IntRange(0, MOST_REACH),
    default=DEFAULT_REACH,
    metavar="BONDS",
    help=f"How far from the nitrogen edits are made. [default: {DEFAULT_REACH}]",
)
@click.option(
    "--edits",
    type=click.IntRange(1, 2),
    default=1,
    metavar="1|2",
    help="One edit, or also two one after another. [default: 1]",
)
@click.option(
    "--top",
    type=click.IntRange(min=1),
    metavar="N",
    help="Show the first N, in the window or not. [default: the first 10 in the window]",
)
@click.option("--scan", metavar="NAME",
              help="Show the shift at each atom by an edit, a family of edits, or all.")  # fmt: skip
def command(
    inputs: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str | None,
    request: Request,
    to: str | None,
    site: int | None,
    keep: tuple[str, ...],
    near: int,
    edits: int,
    top: int | None,
    scan: str | None,
) -> int:
    """Show small changes of one structure that would bring the pKaH of a nitrogen into a window.

    Edits that a chemist would make (fluorine, ring, chain and N-alkyl changes, aza walks, groups on rings, ...) are
    made near the nitrogen; those in the window come first, the least change first. A protected atom (--keep) stays
    with its element, charge, hydrogens, neighbours and bonds. With --scan: what an edit does at each atom.

    Example: basirank tune "Fc1ccc(CN2CCCCC2)cc1" --to 6.5:7.5
    """
    if (to is None) == (scan is None):
        raise InputError("give either --to LOW:HIGH or --scan NAME")
    if scan is not None and (edits != 1 or top is not None):
        raise InputError("--edits and --top go with --to, not with --scan")
    target = output or STDOUT
    picture = check_picture(target, inputs, (*TABLE_ENDINGS, TEXT, JSON))
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        rows, label = list(islice(table.rows, 2)), label_place(table)
    if len(rows) != 1:
        raise InputError(f"tune takes one compound, {'not several' if rows else 'and none was given'}")
    quiet_rdkit()
    settings: dict[str, Any] = {
        "site": site,
        "keep": keep,
        "reach": near,
        "temperature": request.conditions.temperature,
        "ionic_strength": request.conditions.ionic_strength,
        "local": request.local,
    }
    name = rows[0].cells[label] if label is not None else ""
    try:
        structure = _structure(rows[0])
        if scan is not None:
            return _scan(structure, name, scan, settings, target, picture)
        return _tune(structure, name, str(to), edits, settings, target, picture, top)
    except ValueError as error:
        raise InputError(str(error)) from None


def _structure(row: Row) -> Any:
    if row.problem:
        raise ValueError(f"refused: {row.problem}")
    (ready,) = with_molecules([row])
    if ready.problem:
        raise ValueError(f"refused: {ready.problem}")
    return ready.structure


def _tune(
    structure: Any,
    name: str,
    to: str,
    edits: int,
    settings: dict[str, Any],
    target: str,
    picture: Any,
    top: int | None,
) -> int:
    from ..tuning import as_dict, tune
    from ..tuning_text import COLUMNS, row_of, tuning_text

    found = tune(structure, to, edits=edits, **settings)  # type: ignore[arg-type]
    if picture is not None:
        from ..tuning_figures import tuning_figure

        picture.write(target, tuning_figure(found, top))
    elif target == STDOUT or _ending(target) == TEXT:
        _write(target, _named(name) + tuning_text(found, top) + "\n")
        return 0
    elif _ending(target) == JSON:
        _write(target, _as_json(name, as_dict(found)))
    else:
        _write_table(target, COLUMNS, (row_of(n, one) for n, one in enumerate(found.candidates, start=1)))
    low, high = found.window
    hits = f"{len(found.hits)} of {len(found.candidates)} structures from {low:g} to {high:g}"
    say(
        f"{hits if found.hits else f'no edit reaches {low:g} to {high:g}; the nearest come first'}; written to {target}"
    )
    return 0


def _scan(structure: Any, name: str, edit: str, settings: dict[str, Any], target: str, picture: Any) -> int:
    from ..scanning import scan, scan_row
    from ..tuning import as_dict
    from ..tuning_text import SCAN_COLUMNS, scan_text

    found = scan(structure, edit, **settings)
    if picture is not None:
        from ..tuning_figures import scan_figure

        picture.write(target, scan_figure(found))
    elif target == STDOUT or _ending(target) == TEXT:
        _write(target, _named(name) + scan_text(found) + "\n")
        return 0
    elif _ending(target) == JSON:
        _write(target, _as_json(name, as_dict(found)))
    else:
        _write_table(target, SCAN_COLUMNS, (scan_row(point) for point in found.points))
    say(f"{len(found.points)} shifts; written to {target}")
    return 0


def _ending(target: str) -> str:
    return os.path.splitext(target)[1].lower()


def _named(name: str) -> str:
    return f"Compound   {name}\n" if name else ""


def _as_json(name: str, found: dict[str, Any]) -> str:
    from ..tuning_text import CAUTION

    return (
        json.dumps({"name": name, **found, "note": CAUTION.replace("\n", " ")}, ensure_ascii=False, indent=2)
        + "\n"
    )


def _write(target: str, text: str) -> None:
    with open_output(target) as stream:
        stream.write(text)


def _write_table(target: str, columns: Sequence[str], rows: Iterable[Sequence[Any]]) -> None:
    """Rows as text, constants with two decimals."""
    with open_output(target) as stream:
        writer = TableWriter(stream, target, columns)
        writer.write([_cell(value) for value in row] for row in rows)


def _cell(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    return f"{value:.2f}" if isinstance(value, float) else str(value)
