"""`annotate`: a list of any length, streamed, with the constants and states of each row."""

from __future__ import annotations

import json
import sys
from functools import partial

import click

from .. import __version__
from ..batch.plan import OUTPUT_ENDINGS, output_format
from ..batch.run import PATIENCE, Summary, engine_for, to_file, to_stream
from ..batch.workers import one_thread
from ..extras import needed
from ..readers import STDIN, open_table
from ..request import Request
from ..writers import STDOUT, check_output, open_output
from .shared import (
    Progress,
    checked,
    counted,
    duration,
    on_terminal,
    quiet_rdkit,
    request_options,
    say,
    shared_options,
    summary_line,
)

REASONS_SHOWN = 5  # reasons of refusal on standard error


@click.command("annotate")
@shared_options(
    "Write to FILE (.csv, .tsv, .sdf, each also .gz or .zst, or .parquet) instead of CSV to standard output."
)
@request_options(forms=True, pkb=True)
@click.option(
    "--jobs",
    type=click.IntRange(1),
    metavar="N",
    help="Worker processes on this machine; not with --cluster. [default: one for each core, none for a short list]",
)
@click.option(
    "--patience",
    type=click.FloatRange(0.0, min_open=True),
    metavar="SECONDS",
    help=f"Refuse a row that takes a worker on this machine longer; not with --cluster. [default: {PATIENCE:g}]",
)
@click.option("--cluster", metavar="ADDRESS", help="Compute on the workers of this Dask scheduler.")
@click.option(
    "--summary", metavar="FILE", help="Write rows, refusals by reason, time and rate as JSON to FILE."
)
def command(
    inputs: tuple[str, ...],
    ph: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str | None,
    request: Request,
    jobs: int | None,
    patience: float | None,
    cluster: str | None,
    summary: str | None,
) -> int:
    """Add pKaH and pKa values, the first site and the state at each pH to every row, in order, none lost.

    The list is streamed, so its length does not matter. A file appears under its name only when it is whole;
    after an interruption the same command goes on from where it was.
    """
    if cluster is not None and (jobs is not None or patience is not None):
        raise click.UsageError(
            "--jobs and --patience are for workers of this machine; with --cluster its scheduler decides"
        )
    target = output or STDOUT
    values = checked(ph, output, inputs, OUTPUT_ENDINGS)
    if summary is not None:
        check_output(summary, (*inputs, target), (".json",))
    _check_packages(target)
    typed = output_format(target)[0] == "parquet"
    opener = partial(
        open_table, inputs, smiles_column=smiles_column, stdin_format=stdin_format, typed=typed, warn=say
    )
    engine = engine_for(jobs=jobs, patience=patience, cluster=cluster)
    progress = Progress(on_terminal(sys.stderr) and (target != STDOUT or not on_terminal(sys.stdout)))

    def show(done: int, share: float | None) -> None:
        progress.show(done, True, share)

    with one_thread():
        quiet_rdkit()
        try:
            if target == STDOUT:
                found = to_stream(opener, values, request, sys.stdout.buffer, engine, show)
            else:
                again = STDIN not in inputs
                found = to_file(opener, values, request, target, engine, show, say, rereadable=again)
        finally:
            progress.clear()
    if target != STDOUT:
        _tell(found, target)
    if summary is not None:
        with open_output(summary) as stream:
            json.dump(_summary(found, target), stream, indent=2, ensure_ascii=False)
            stream.write("\n")
    return 0


def _check_packages(target: str) -> None:
    form, packing = output_format(target)
    if form == "parquet":
        needed("pyarrow", "parquet", target)
    if packing == "zst":
        needed("zstandard", "zstd", target)


def _tell(found: Summary, target: str) -> None:
    """What was done: rows by status, the commonest reasons of refusal, time and rate."""
    progress = found.progress
    say(summary_line(progress.statuses, found.blank_lines, target))
    if found.here >= 1.0:
        say(f"{duration(progress.seconds)}, {found.rate:,.0f} rows/s")
    reasons = progress.refusals.most_common(REASONS_SHOWN)
    for reason, number in reasons:
        say(f"refused {counted(number, 'row')}: {reason}")
    if len(progress.refusals) > len(reasons):
        others = counted(len(progress.refusals) - len(reasons), "other reason")
        say(f"refused for {others} (--summary FILE has all)")


def _summary(found: Summary, target: str) -> dict[str, object]:
    progress = found.progress
    return {
        "rows": progress.rows,
        "ok": progress.statuses["ok"],
        "no_basic_site": progress.statuses["no_basic_site"],
        "refused": progress.statuses["refused"],
        "refusals": dict(progress.refusals.most_common()),
        "blank_lines": found.blank_lines,
        "rows_of_interrupted_runs": found.resumed,
        "seconds": round(progress.seconds, 3),
        "rows_per_second": round(found.rate, 1),
        "output": target,
        "basirank": __version__,
    }
