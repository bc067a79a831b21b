"""The command line: `rank`, `annotate` and `explain`.

Commands are thin: they open the input, send rows through `annotation` or `explanation` and hand records to
the writers. Whatever the user got wrong is one line on standard error and exit code 2. Nothing heavy is
imported before it is needed.
"""

from __future__ import annotations

import os
import shutil
import signal
import sys
import time
from collections import Counter
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from itertools import chain, islice
from typing import Any, TypeVar

import click

from . import __version__
from .annotation import CHUNK
from .explanation import CAUTION, INTERVAL_NOTE, explain
from .readers import FORMATS, InputError, Row, Table, open_table
from .records import Record, cell, cells, clean_ph, ranking, refused_record, schema, unclashed
from .writers import STDOUT, OutputError, TableWriter, check_output, open_output, ranked_table

RANK_LIMIT = 1_000_000  # rows that `rank` will hold and sort
TABLE_WIDTH = 160  # of the ranked table where standard output is no terminal

WRONG_INPUT, INTERRUPTED, PIPE_CLOSED, TERMINATED = 2, 130, 141, 143

EXAMPLES = """
\b
Examples:
  basirank rank list.smi
  basirank rank CCN c1ccncc1 --ph 7.4 --ph 5.5
  basirank annotate library.csv -o annotated.csv
  basirank explain "OC(=O)CN"
"""

Command = TypeVar("Command", bound=Callable[..., Any])


def say(message: str) -> None:
    """One line on standard error."""
    line = " ".join("".join(letter if letter.isprintable() else " " for letter in message).split())
    click.echo(f"basirank: {line}", err=True)


class OneLineErrors(click.Group):
    """A group whose every error is one line on standard error, and never a traceback."""

    def main(self, args: Any = None, prog_name: Any = None, **extra: Any) -> Any:  # type: ignore[override]
        """Run a command and end the process with its exit code (without `standalone_mode`: return it)."""
        standalone_mode = extra.pop("standalone_mode", True)
        code = self._code(args, prog_name, **extra)
        if standalone_mode:
            sys.exit(code)
        return code

    def _code(self, args: Any, prog_name: Any, **extra: Any) -> int:
        try:
            result: object = super().main(args, prog_name, standalone_mode=False, **extra)
            return result if isinstance(result, int) else 0
        except click.ClickException as error:
            say(error.format_message())
            return WRONG_INPUT
        except click.Abort:
            say("interrupted")
            return INTERRUPTED

    def invoke(self, ctx: click.Context) -> Any:
        """Run the chosen command, turning what can go wrong into an exit code."""
        try:
            code = super().invoke(ctx)
            sys.stdout.flush()
            return code
        except BrokenPipeError:
            _forget_stdout()
            return PIPE_CLOSED
        except KeyboardInterrupt:
            say("interrupted")
            return INTERRUPTED
        except (InputError, OutputError) as error:
            say(str(error))
            return WRONG_INPUT
        except OSError as error:
            say(f"{error.strerror or error}{f': {error.filename}' if error.filename else ''}")
            return WRONG_INPUT
        except (click.ClickException, click.exceptions.Exit, click.Abort):
            raise
        except Exception as error:
            if os.environ.get("BASIRANK_TRACEBACK"):
                raise
            say(f"a fault of the program: {type(error).__name__}: {error} (BASIRANK_TRACEBACK=1 shows where)")
            return 1


def _forget_stdout() -> None:
    """Send what is left for a closed standard output nowhere, so that Python ends without a complaint."""
    try:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    except (OSError, ValueError):
        pass


def shared_options(output_help: str) -> Callable[[Command], Command]:
    """The arguments and options that all commands have."""
    options = [
        click.argument("inputs", nargs=-1, metavar="INPUT..."),
        click.option("--ph", "ph", multiple=True, default=("7.4",), metavar="PH",
                     help="pH of the charge and form columns, -2 to 16; may be repeated. [default: 7.4]"),
        click.option("-o", "--output", metavar="FILE", help=output_help),
        click.option("--smiles-column", metavar="NAME",
                     help="Column of a table that holds the SMILES. [default: smiles, in any letter case]"),
        click.option("--format", "stdin_format", type=click.Choice(FORMATS), default="smi",
                     help="Format of standard input. [default: smi]"),
    ]  # fmt: skip

    def add(command: Command) -> Command:
        for option in reversed(options):
            command = option(command)
        return command

    return add


@click.group(
    cls=OneLineErrors,
    invoke_without_command=True,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
    epilog=EXAMPLES,
)
@click.version_option(__version__, prog_name="basirank")
@click.pass_context
def commands(ctx: click.Context) -> None:
    """Rank, annotate and explain the basicity (pKaH) of organic compounds, site by site.

    INPUT is a file (.smi .csv .tsv, each also .gz), '-' for standard input, or SMILES. A line of a .smi file
    is a SMILES, white space, a name. Tables keep their own columns; a row that cannot be computed is kept as
    'refused'.
    """
    if ctx.invoked_subcommand is None:
        click.echo(ctx.get_help())


@commands.command("rank", short_help="Sort a list by basicity, strongest base first.")
@shared_options("Write the whole table to FILE (.csv, .tsv), or as CSV to standard output for '-'.")
def rank_command(
    inputs: tuple[str, ...],
    ph: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str,
) -> int:
    """Sort a list by its first pKaH, strongest base first.

    Without -o an aligned table is shown: half of the 90 % interval, atom (counted from 0 as written) and
    class of the first proton, mean net charge and share of molecules with a proton on a base site at each
    pH. Rows without a pKaH come last.
    """
    values = _checked(ph, output, inputs)
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        _quiet_rdkit()
        rows = list(islice(table.rows, RANK_LIMIT + 1))
        if len(rows) > RANK_LIMIT:
            raise InputError(
                f"more than {RANK_LIMIT:,} rows: rank sorts, so it holds them all; use annotate instead"
            )
        progress = Progress(_on_terminal(sys.stderr))
        records: list[Record] = []
        for batch in _batches(rows, CHUNK):
            records += _records(batch, values)
            progress.show(len(records), len(batch) == CHUNK)
        progress.clear()
    order = ranking(records)
    columns = schema(values, ranked=True)
    if output is None:
        label = _label_place(table)
        click.echo(
            ranked_table(
                [place for place, _ in order],
                [(rows[n].cells[label] if label is not None else "") or rows[n].structure for _, n in order],
                [records[n] for _, n in order],
                schema(values),
                values,
                shutil.get_terminal_size().columns if _on_terminal(sys.stdout) else TABLE_WIDTH,
            )
        )
        click.echo(f"\n{INTERVAL_NOTE}\n{CAUTION}")
        return 0
    heading = ["rank", *map(str, unclashed(table.columns, columns)), *(column.name for column in columns[1:])]
    with open_output(output) as stream:
        writer = TableWriter(stream, output, heading)
        writer.write(
            [cell(place, "integer"), *rows[n].cells, *cells(records[n], columns[1:])] for place, n in order
        )
    _summary(Counter(str(record[0]) for record in records), table, output)
    return 0


@commands.command("annotate", short_help="Add constants, first site and state to each row, in order.")
@shared_options("Write to FILE (.csv, .tsv) instead of CSV to standard output.")
def annotate_command(
    inputs: tuple[str, ...],
    ph: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str,
) -> int:
    """Add pKaH and pKa values, the first site and the state at each pH to every row, in order, none lost.

    The list is streamed, so its length does not matter. A file appears under its name only when it is whole.
    """
    values = _checked(ph, output, inputs)
    columns = schema(values)
    target = output or STDOUT
    statuses: Counter[str] = Counter()
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        _quiet_rdkit()
        heading = [*map(str, unclashed(table.columns, columns)), *(column.name for column in columns)]
        progress = Progress(_on_terminal(sys.stderr) and (target != STDOUT or not _on_terminal(sys.stdout)))
        batches = _batches(table.rows, CHUNK)
        first = next(batches, [])  # read before anything is written
        with open_output(target) as stream:
            writer = TableWriter(stream, target, heading)
            for batch in chain([first], batches):
                records = _records(batch, values)
                writer.write(
                    [*row.cells, *cells(record, columns)] for row, record in zip(batch, records, strict=True)
                )
                statuses.update(str(record[0]) for record in records)
                progress.show(statuses.total(), len(batch) == CHUNK)
        progress.clear()
    if target != STDOUT:
        _summary(statuses, table, target)
    return 0


@commands.command("explain", short_help="Show why a compound has its pKaH, term by term.")
@shared_options("Write the text to FILE (.txt).")
def explain_command(
    inputs: tuple[str, ...],
    ph: tuple[str, ...],
    output: str | None,
    smiles_column: str | None,
    stdin_format: str,
) -> int:
    """Show the sites of a compound: parent value and increments of each, with their atoms and sources.

    Then come the interaction between sites, the macroscopic constants in the order of protonation, and the
    state at each pH. Atoms are counted from 0 as written.
    """
    values = _checked(ph, output, inputs, (".txt",))
    code = 0
    with open_table(inputs, smiles_column=smiles_column, stdin_format=stdin_format, warn=say) as table:
        _quiet_rdkit()
        label = _label_place(table)
        texts = []
        for row in table.rows:
            name = row.cells[label] if label is not None else ""
            told = None if row.problem else explain(row.structure, ph=values)
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


def _checked(
    ph: Iterable[str], output: str | None, inputs: Sequence[str], endings: Sequence[str] | None = None
) -> tuple[float, ...]:
    """The pH values, once these and the output are known to be sound."""
    try:
        values = clean_ph(ph)
    except ValueError as error:
        raise InputError(str(error)) from None
    if output is not None:
        check_output(output, inputs, *(() if endings is None else (endings,)))
    return values


def _quiet_rdkit() -> None:
    """Keep RDKit's own remarks off standard error: what matters in them is in `message`."""
    from rdkit import RDLogger

    RDLogger.DisableLog("rdApp.*")  # type: ignore[attr-defined]


def _records(batch: Sequence[Row], ph: tuple[float, ...]) -> list[Record]:
    from .annotation import records_of

    with _interrupt_held():
        computed = iter(records_of([row.structure for row in batch if row.problem is None], ph))
    return [next(computed) if row.problem is None else refused_record(row.problem, ph) for row in batch]


@contextmanager
def _interrupt_held() -> Iterator[None]:
    """Let an interrupt wait for the end of a batch: RDKit's substructure search may swallow it."""
    if not hasattr(signal, "pthread_sigmask"):
        yield
        return
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


def _batches(rows: Iterable[Row], size: int) -> Iterator[list[Row]]:
    walk = iter(rows)
    while batch := list(islice(walk, size)):
        yield batch


def _label_place(table: Table) -> int | None:
    """Column that names a compound in the terminal: `name`, `compound`, `title` or `id`, if there is one."""
    names = [name.strip().casefold() for name in table.columns]
    return next(
        (names.index(wanted) for wanted in ("name", "compound", "title", "id") if wanted in names), None
    )


def _on_terminal(stream: Any) -> bool:
    return bool(getattr(stream, "isatty", bool)())


def _summary(statuses: Counter[str], table: Table, output: str) -> None:
    """One line on what was done, on standard error."""
    line = f"{statuses.total():,} rows: {statuses['ok']:,} ok"
    line += f", {statuses['no_basic_site']:,} without a basic site, {statuses['refused']:,} refused"
    if table.blank_lines[0]:
        line += f"; {table.blank_lines[0]:,} blank lines skipped"
    if output != STDOUT:
        line += f"; written to {output}"
    say(line)


class Progress:
    """Rows done and rows per second on one line of standard error, for lists that take their time."""

    def __init__(self, wanted: bool) -> None:
        self._wanted = wanted
        self._start = self._last = time.monotonic()
        self._shown = False

    def show(self, done: int, more: bool) -> None:
        """Renew the line if there may be more to come, at most five times a second."""
        now = time.monotonic()
        if self._wanted and more and now - self._last > 0.2:
            self._last, self._shown = now, True
            click.echo(f"\r{done:,} rows, {done / (now - self._start):,.0f} rows/s ", nl=False, err=True)

    def clear(self) -> None:
        """Take the line away."""
        if self._shown:
            click.echo("\r" + " " * 50 + "\r", nl=False, err=True)


def _terminate(signum: int, frame: Any) -> None:
    raise SystemExit(TERMINATED)


def main() -> None:
    """Entry point of the `basirank` command."""
    if hasattr(signal, "SIGTERM"):
        signal.signal(signal.SIGTERM, _terminate)
    commands(prog_name="basirank")
