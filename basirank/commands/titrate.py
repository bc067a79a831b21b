"""`titrate`: the titration curve of one compound or salt, as a table or a picture."""

from __future__ import annotations

from itertools import islice

import click

from ..batch.compute import with_smiles
from ..readers import InputError, open_table
from ..request import STANDARD, Request
from ..writers import STDOUT, TableWriter, open_output
from .shared import WRONG_INPUT, check_picture, input_options, label_place, quiet_rdkit, request_options, say


@click.command("titrate")
@input_options(
    "Write to FILE: a table (.csv, .tsv) or a picture (.svg, .png). [default: CSV to standard output]"
)
@request_options()
@click.option("--concentration", metavar="C", default="0.1", help="Of the compound, mol/L. [default: 0.1]")
@click.option("--volume", metavar="V", default="25", help="Of its solution, mL. [default: 25]")
@click.option(
    "--titrant",
    metavar="T",
    help="acid, base (strong ones) or the SMILES of a weak one. [default: by the pH of the solution]",
)
@click.option("--titrant-concentration", metavar="C", default="0.1", help="mol/L. [default: 0.1]")
@click.option(
    "--to", "last_volume", metavar="V", help="Last volume of titrant, mL. [default: past the last point]"
)
@click.option("--points", metavar="N", default="301", help="Volumes of the curve, 10 to 5000. [default: 301]")
def command(
    inputs: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str | None,
    request: Request,
    concentration: str,
    volume: str,
    titrant: str | None,
    titrant_concentration: str,
    last_volume: str | None,
    points: str,
) -> int:
    """Compute the titration curve of a compound, and its equivalence points with the pH at each.

    INPUT is one compound. A salt is titrated with its counter-ions, as drawn: a hydrochloride brings chloride.
    Temperature and ionic strength stay as they are given (a background salt).
    """  # fmt: skip
    target = output or STDOUT
    picture = check_picture(target, inputs)
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        quiet_rdkit()
        rows = with_smiles(list(islice(table.rows, 2)))
        label = label_place(table)
    if len(rows) != 1:
        raise InputError("titrate takes one compound")
    (row,) = rows
    name = row.cells[label] if label is not None else ""
    if row.problem is not None:
        say(f"{name or row.structure or 'a row'}: refused: {row.problem}")
        return WRONG_INPUT
    from ..structures import Refusal
    from ..titration import titrate

    conditions = request.conditions
    try:
        done = titrate(
            row.structure,
            concentration=concentration,  # type: ignore[arg-type]
            volume=volume,  # type: ignore[arg-type]
            titrant=titrant,
            titrant_concentration=titrant_concentration,  # type: ignore[arg-type]
            last_volume=last_volume,  # type: ignore[arg-type]
            points=points,  # type: ignore[arg-type]
            temperature=conditions.temperature,
            ionic_strength=conditions.ionic_strength,
            local=request.local,
        )
    except Refusal as reason:
        say(f"{name or row.structure}: refused: {reason}")
        return WRONG_INPUT
    except ValueError as error:
        raise InputError(str(error)) from None
    if picture:
        from ..figures import titration_figure

        added = titrant if titrant not in (None, "acid", "base") else f"strong {done.titrant}"
        note = f"{added}, {float(titrant_concentration):g} mol/L"
        note += "" if conditions == STANDARD else f"; {conditions}"
        picture.write(target, titration_figure(done, name or row.structure, note))
    else:
        points_at = {point.volume: str(n) for n, point in enumerate(done.equivalences, start=1)}
        with open_output(target) as stream:
            writer = TableWriter(stream, target, ["volume_ml", "ph", "equivalence_point"])
            writer.write(
                [f"{at:.4f}", f"{ph:.3f}", points_at.get(at, "")]
                for at, ph in zip(done.volume.tolist(), done.ph.tolist(), strict=True)
            )
    for note in done.notes:
        say(note)
    if conditions != STANDARD:
        say(f"at {conditions}")
    for n, point in enumerate(done.equivalences, start=1):
        seen = f"{point.jump:.2f} over 1 % each side" if point.visible else "no inflection"
        say(f"equivalence point {n}: {point.volume:.2f} mL, pH {point.ph:.2f}, {seen}")
    if not done.equivalences:
        say(
            f"no equivalence point with {'an' if done.titrant == 'acid' else 'a'} {done.titrant} in this range"
        )
    return 0
