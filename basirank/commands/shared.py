"""What several commands share: options, checks of the call, batches of rows and the lines on standard error."""

from __future__ import annotations

import os
import signal
import time
from collections import Counter
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from functools import wraps
from itertools import islice
from typing import TYPE_CHECKING, Any, TypeVar

import click

from ..readers import FORMATS, InputError, Row, Table
from ..records import Record, clean_ph, refused_record
from ..request import PLAIN, Conditions, Request
from ..writers import STDOUT, TABLE_ENDINGS, check_output, open_bytes, open_output

if TYPE_CHECKING:
    from ..kinship import Standing

WRONG_INPUT = 2
PICTURE_ENDINGS = (".svg", ".png")

Command = TypeVar("Command", bound=Callable[..., Any])


def say(message: str) -> None:
    """One line on standard error."""
    line = " ".join("".join(letter if letter.isprintable() else " " for letter in message).split())
    click.echo(f"basirank: {line}", err=True)


def shared_options(output_help: str) -> Callable[[Command], Command]:
    """The arguments and options of the commands that tell the state at a pH."""
    ph = click.option("--ph", "ph", multiple=True, default=("7.4",), metavar="PH",
                      help="pH of the charge and form columns, -2 to 16; may be repeated. [default: 7.4]")  # fmt: skip

    def add(command: Command) -> Command:
        return input_options(output_help)(ph(command))

    return add


def input_options(output_help: str) -> Callable[[Command], Command]:
    """The arguments and options that all commands have."""
    options = [
        click.argument("inputs", nargs=-1, metavar="INPUT..."),
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


def request_options(*, forms: bool = False, pkb: bool = False) -> Callable[[Command], Command]:
    """Options of the conditions and, where wanted, of further columns; the command gets them as one `request`."""
    options = [
        click.option("--temperature", metavar="C", default="25",
                     help="Temperature of constants and states, 0 to 60 C. [default: 25]"),
        click.option("--ionic-strength", metavar="I", default="0",
                     help="Ionic strength in mol/L, 0 to 0.5; constants are then mixed ones. [default: 0]"),
    ]  # fmt: skip
    if forms:
        options.append(
            click.option("--forms", is_flag=True, help="Add shares of neutral form and zwitterion.")
        )
    if pkb:
        options.append(click.option("--show-pkb", is_flag=True, help="Add pKb beside pKaH."))

    def add(command: Command) -> Command:
        @wraps(command)
        def with_request(
            *args: Any,
            temperature: str,
            ionic_strength: str,
            forms: bool = False,
            show_pkb: bool = False,
            **kwargs: Any,
        ) -> Any:
            try:
                conditions = Conditions(temperature, ionic_strength)  # type: ignore[arg-type]
            except ValueError as error:
                raise InputError(str(error)) from None
            return command(*args, request=Request(conditions, forms, show_pkb), **kwargs)

        wrapped: Any = with_request
        for option in reversed(options):
            wrapped = option(wrapped)
        return wrapped  # type: ignore[no-any-return]

    return add


def checked(
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


@dataclass(frozen=True, slots=True)
class Picture:
    """How a picture is written: as the SVG itself, or drawn as a PNG."""

    as_png: bool

    def write(self, output: str, document: str) -> None:
        """Write an SVG document to a file that takes its name when whole."""
        from ..plots import png

        if self.as_png:
            data = png(document)
            with open_bytes(output) as stream:
                stream.write(data)
        else:
            with open_output(output) as stream:
                stream.write(document)


def check_picture(output: str, inputs: Sequence[str]) -> Picture | None:
    """The picture that an output's ending asks for, None for a table; checked before any work is done."""
    check_output(output, inputs, (*TABLE_ENDINGS, *PICTURE_ENDINGS))
    ending = os.path.splitext(output)[1].lower()
    if ending == ".png":
        from ..plots import png_ready

        png_ready()
    return Picture(ending == ".png") if ending in PICTURE_ENDINGS else None


def quiet_rdkit() -> None:
    """Keep RDKit's own remarks off standard error: what matters in them is in `message`."""
    from rdkit import RDLogger

    RDLogger.DisableLog("rdApp.*")  # type: ignore[attr-defined]


def records_of_rows(batch: Sequence[Row], ph: tuple[float, ...], request: Request = PLAIN) -> list[Record]:
    """A record for each row of a batch; a row with a problem is refused."""
    from ..annotation import records_of

    with _interrupt_held():
        computed = iter(records_of([row.structure for row in batch if row.problem is None], ph, request))
    return [
        next(computed) if row.problem is None else refused_record(row.problem, ph, request) for row in batch
    ]


def standings_of_rows(
    batch: Sequence[Row], ph: tuple[float, ...], request: Request = PLAIN
) -> list[tuple[Record, Standing | None]]:
    """The same, each with what the order of a list needs to know."""
    from ..annotation import standings_of

    with _interrupt_held():
        computed = iter(standings_of([row.structure for row in batch if row.problem is None], ph, request))
    return [
        next(computed) if row.problem is None else (refused_record(row.problem, ph, request), None)
        for row in batch
    ]


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


def batches_of(rows: Iterable[Row], size: int) -> Iterator[list[Row]]:
    walk = iter(rows)
    while batch := list(islice(walk, size)):
        yield batch


def label_place(table: Table) -> int | None:
    """Column that names a compound in the terminal: `name`, `compound`, `title` or `id`, if there is one."""
    names = [name.strip().casefold() for name in table.columns]
    return next(
        (names.index(wanted) for wanted in ("name", "compound", "title", "id") if wanted in names), None
    )


def on_terminal(stream: Any) -> bool:
    return bool(getattr(stream, "isatty", bool)())


def summarise(statuses: Counter[str], table: Table, output: str) -> None:
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
