"""`calibrate`: a user's own measured constants as a local model, with what it is worth."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import click

from ..batch.workers import one_thread
from ..readers import InputError, open_table
from ..request import Conditions
from ..writers import TABLE_ENDINGS, TableWriter, aligned_table, check_output, open_output, shorten
from .shared import counted, input_options, quiet_rdkit, say, show

if TYPE_CHECKING:
    from ..calibration import Calibrated, Calibration

COLUMNS = ("row", "name", "smiles", "status", "message", "kind", "step", "measured", "at_standard", "error", "before",
           "left_out", "in_training", "remark")  # fmt: skip
HEADING = ("compound", "step", "measured", "standard", "±sd", "before", "off", "left out", "off", "")
NAME_WIDTH = 32
REASONS_SHOWN = 10


@click.command("calibrate")
@input_options("Write the local model to FILE (.npz), for --local of the other commands.")
@click.option(
    "--table", "table_file", metavar="FILE", help="Write what is said of each row to FILE (.csv, .tsv)."
)
@click.option("--value-column", metavar="NAME",
              help="Column of the measured values. [default: pkah, pka, value, measured and the like]")  # fmt: skip
@click.option("--kind", type=click.Choice(("pkah", "pka")),
              help="Kind of values without a column kind. [default: by the name pkah, or the nearest]")  # fmt: skip
@click.option("--temperature", metavar="C", default="25",
              help="Temperature of the values where the table has none, 0 to 60 C. [default: 25]")  # fmt: skip
@click.option("--ionic-strength", metavar="I", default="0",
              help="Ionic strength where the table has none in mol/L, 0 to 0.5. [default: 0]")  # fmt: skip
def command(
    inputs: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str | None,
    table_file: str | None,
    value_column: str | None,
    kind: str | None,
    temperature: str,
    ionic_strength: str,
) -> int:
    """Learn from own measured constants: condition the corrections of like compounds on them, exactly.

    A row holds a structure and a value; it may say kind (pkah or pka), step, error, method, cosolvent, temperature,
    ionic_strength and constant (mixed, concentration or thermodynamic) in columns of these names. Shows for each row
    what is said of it before, and what the other compounds of the table make of that when it is left out itself. The
    shipped model is not changed.

    Example: basirank calibrate measured.csv -o series.npz, then basirank rank ideas.smi --local series.npz
    """
    with one_thread():  # of many small systems of equations: more would wait for each other
        from ..local_models import ENDING

    if output is not None:
        check_output(output, inputs, (ENDING,))
    if table_file is not None:
        check_output(table_file, (*inputs, *([output] if output else [])), TABLE_ENDINGS)
    try:
        conditions = Conditions(temperature, ionic_strength)  # type: ignore[arg-type]
    except ValueError as error:
        raise InputError(str(error)) from None
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        quiet_rdkit()
        from ..batch.compute import with_smiles
        from ..calibration import calibrated
        from ..measurements import columns_of, measured_of

        columns = columns_of(table.columns, value_column, kind)
        rows = [(row.structure, row.cells, row.problem) for row in with_smiles(list(table.rows))]
    try:
        found = calibrated(measured_of(rows, columns, conditions))
    except ValueError as error:
        raise InputError(str(error)) from None
    show(_text(found))
    if table_file is not None:
        with open_output(table_file) as stream:
            TableWriter(stream, table_file, COLUMNS).write(_rows(found))
    if output is not None:
        from ..local_models import save_local

        save_local(found.local, output)
    for one in found.unused[:REASONS_SHOWN]:
        say(f"row {one.number}{f' ({one.name})' if one.name else ''} not used: {one.told}")
    if len(found.unused) > REASONS_SHOWN:
        say(f"and {len(found.unused) - REASONS_SHOWN:,} more rows not used")
    where = f"; written to {output}" if output else "; not kept (-o FILE.npz keeps it)"
    say(f"{counted(len(rows), 'row')}: {len(found.rows):,} used, {len(found.unused):,} not used{where}")
    return 0


def _text(found: Calibration) -> str:
    """The rows, and the figures before and after."""
    from ..explanation import CAUTION

    lines = []
    for row in found.rows:
        of = row.measured
        label = of.name or str(of.structure)
        lines.append([
            shorten(label, NAME_WIDTH), f"{row.kind}_{row.step}", f"{of.value:.2f}", f"{row.value:.2f}",
            f"{row.error:.2f}", f"{row.before:.2f}", f"{row.before - row.value:+z.2f}", f"{row.after:.2f}",
            f"{row.after - row.value:+z.2f}", "; ".join(_remarks(row)),
        ])  # fmt: skip
    before, after = found.errors()
    count = f"{counted(len(found.rows), 'value')} of {counted(found.compounds, 'compound')}"
    text = aligned_table(HEADING, lines, (0, 1, len(HEADING) - 1))
    text += f"\n\n{count}, error of the shipped model, then with all other compounds of the table known:\n"
    figures = [
        [name, f"{abs(error).mean():.2f}", f"{(error**2).mean() ** 0.5:.2f}", f"{error.mean():+z.2f}"]
        for name, error in (("shipped model", before), ("each compound left out", after))
    ]
    text += aligned_table(("", "MAE", "RMSE", "bias"), figures)
    known = len({row.compound for row in found.rows if row.trained})
    if known:
        text += f"\n\n{counted(known, 'compound')} of these stand in the training table: "
        text += "both lines flatter, and these values count twice."
    return f"{text}\n\n{CAUTION}"


def _remarks(row: Calibrated) -> list[str]:
    return [*(["in the training table"] if row.trained else []), *row.remarks]


def _rows(found: Calibration) -> Sequence[list[str]]:
    """A row for each row of the table, in order."""
    from ..scorecard import text_of

    rows: dict[int, list[str]] = {}
    for one in found.unused:
        lead = [str(one.number), one.name, text_of(one.structure), "unused", one.told]
        rows[one.number] = lead + [""] * (len(COLUMNS) - len(lead))
    for row in found.rows:
        of = row.measured
        rows[of.number] = [
            str(of.number), of.name, text_of(of.structure), "used", "", row.kind, str(row.step), f"{of.value:g}",
            f"{row.value:z.2f}", f"{row.error:.2f}", f"{row.before:z.2f}", f"{row.after:z.2f}",
            "yes" if row.trained else "no", "; ".join(row.remarks),
        ]  # fmt: skip
    return [rows[number] for number in sorted(rows)]
