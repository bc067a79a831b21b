"""What several commands share: options, checks of the call, batches of rows and the lines on standard error."""

from __future__ import annotations

import os
import time
from collections import Counter
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import wraps
from itertools import islice
from typing import Any, TypeVar, cast

import click

from ..batch.compute import records_of_rows, standings_of_rows
from ..readers import FORMATS, InputError, Row, Table
from ..records import clean_ph
from ..request import Conditions, Request
from ..selection import SORT_KEYS, SUPPORTS, Selection
from ..writers import STDOUT, TABLE_ENDINGS, check_output, open_bytes, open_output

__all__ = [
    "PICTURE_ENDINGS",
    "WRONG_INPUT",
    "Picture",
    "Progress",
    "batches_of",
    "check_document",
    "check_picture",
    "checked",
    "counted",
    "duration",
    "input_options",
    "label_of",
    "label_place",
    "no_row_left",
    "on_terminal",
    "quiet_rdkit",
    "records_of_rows",
    "request_options",
    "say",
    "shared_options",
    "show",
    "standings_of_rows",
    "summarise",
    "summary_line",
]

WRONG_INPUT = 2
PICTURE_ENDINGS = (".svg", ".png")

Command = TypeVar("Command", bound=Callable[..., Any])


def say(message: str) -> None:
    """One line on standard error."""
    line = " ".join("".join(letter if letter.isprintable() else " " for letter in message).split())
    click.echo(f"basirank: {line}", err=True)


def show(text: str) -> None:
    """Text on standard output."""
    with open_output(STDOUT) as stream:
        stream.write(f"{text}\n")


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
        click.option("--format", "stdin_format", type=click.Choice(FORMATS),
                     help="Format of the input. [default: by the ending; smi for standard input]"),
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
        click.option("--local", "local_file", metavar="FILE",
                     help="Take own measurements into account, from a file of `basirank calibrate`."),
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
            local_file: str | None,
            forms: bool = False,
            show_pkb: bool = False,
            **kwargs: Any,
        ) -> Any:
            try:
                conditions = Conditions(temperature, ionic_strength)  # type: ignore[arg-type]
            except ValueError as error:
                raise InputError(str(error)) from None
            local = None
            if local_file is not None:
                from ..local_models import read_local

                local = read_local(local_file)
            return command(*args, request=Request(conditions, forms, show_pkb, local), **kwargs)

        wrapped: Any = with_request
        for option in reversed(options):
            wrapped = option(wrapped)
        return wrapped  # type: ignore[no-any-return]

    return add


def selection_options(command: Command) -> Command:
    """The options that choose and sort the rows of a ranked list; the command gets them as one `selection`."""

    @wraps(command)
    def gathered(
        *arguments: Any,
        top: int | None,
        between: tuple[float, float] | None,
        site_class: str,
        support: str | None,
        sort: str,
        reverse: bool,
        **others: Any,
    ) -> Any:
        if between is not None and not between[0] <= between[1]:
            raise InputError(f"--between takes the lower pKaH first, not {between[0]:g} {between[1]:g}")
        chosen = Selection(top, between, site_class.strip(), support or "", sort, reverse)
        return command(*arguments, selection=chosen, **others)

    options = [
        click.option("--top", type=click.IntRange(min=1), metavar="N", help="Keep the first N rows after sorting."),
        click.option("--between", type=float, nargs=2, metavar="LOW HIGH",
                     help="Keep rows whose first pKaH lies between two values."),
        click.option("--class", "site_class", default="", metavar="NAME",
                     help="Keep rows whose first site has NAME in its class (amidine, cyclic, ...)."),
        click.option("--support", type=click.Choice(SUPPORTS), metavar="|".join(SUPPORTS),
                     help="Keep rows whose first pKaH is supported, or extrapolated."),
        click.option("--sort", type=click.Choice(SORT_KEYS), default="pkah", metavar="|".join(SORT_KEYS),
                     help="Sort by this, numbers from the highest. [default: pkah]"),
        click.option("--reverse", is_flag=True, help="Sort the other way round."),
    ]  # fmt: skip
    result: Any = gathered
    for option in reversed(options):
        result = option(result)
    return cast("Command", result)


def no_row_left(order: Sequence[object], rows: Sequence[object]) -> None:
    """Say so where filters left nothing of a list."""
    if not order:
        say(f"no row of {len(rows):,} fits the filters")


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


def check_picture(
    output: str, inputs: Sequence[str], others: Sequence[str] = TABLE_ENDINGS
) -> Picture | None:
    """The picture that an output's ending asks for, None for another file; checked before any work is done."""
    check_output(output, inputs, (*others, *PICTURE_ENDINGS))
    ending = os.path.splitext(output)[1].lower()
    if ending == ".png":
        from ..plots import png_ready

        png_ready()
    return Picture(ending == ".png") if ending in PICTURE_ENDINGS else None


def check_document(output: str | None, inputs: Sequence[str]) -> Picture | None:
    """The same where JSON may be asked for too, and text goes to the terminal: None for all that is no picture."""
    if output is None or output == STDOUT or os.path.splitext(output)[1].lower() in PICTURE_ENDINGS:
        return None if output is None else check_picture(output, inputs)
    check_output(output, inputs, (*TABLE_ENDINGS, ".json", *PICTURE_ENDINGS))
    return None


def quiet_rdkit() -> None:
    """Keep RDKit's own remarks off standard error: what matters in them is in `message`."""
    from rdkit import RDLogger

    RDLogger.DisableLog("rdApp.*")  # type: ignore[attr-defined]


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


def label_of(row: Row, place: int | None) -> str:
    """What a compound is called in the terminal: its name, or its SMILES."""
    name = row.cells[place] if place is not None else ""
    return name or ("unnamed" if row.is_record else row.structure)


def on_terminal(stream: Any) -> bool:
    return bool(getattr(stream, "isatty", bool)())


def summarise(statuses: Counter[str], table: Table, output: str, kept: int | None = None) -> None:
    """One line on what was done, on standard error."""
    say(summary_line(statuses, table.blank_lines[0], output, kept))


def summary_line(statuses: Mapping[str, int], blank_lines: int, output: str, kept: int | None = None) -> str:
    """Rows by status, blank lines, and where the table went."""
    rows = sum(statuses.values())
    line = f"{counted(rows, 'row')}: {statuses.get('ok', 0):,} ok"
    line += f", {statuses.get('no_basic_site', 0):,} without a basic site"
    line += f", {statuses.get('refused', 0):,} refused"
    if blank_lines:
        line += f"; {counted(blank_lines, 'blank line')} skipped"
    if kept is not None and kept < rows:
        line += f"; {kept:,} kept"
    if output != STDOUT:
        line += f"; written to {output}"
    return line


def counted(number: int, what: str) -> str:
    """A number and what it counts.

    Examples
    --------
    >>> counted(1, "row"), counted(1200, "row")
    ('1 row', '1,200 rows')
    """
    return f"{number:,} {what}{'' if number == 1 else 's'}"


class Progress:
    """Rows done, rows per second and time left on one line of standard error, for lists that take their time."""

    def __init__(self, wanted: bool) -> None:
        self._wanted = wanted
        self._start = self._last = time.monotonic()
        self._before: int | None = None
        self._share_before = 0.0
        self._width = 0

    def show(self, done: int, more: bool, share: float | None = None) -> None:
        """Renew the line if there may be more to come, at most five times a second.

        Parameters
        ----------
        done : int
            Rows done, those of an earlier run included.
        more : bool
            Whether there may be more to come.
        share : float, optional
            Share of the list that has been read [-].
        """
        now = time.monotonic()
        if self._before is None:  # an earlier run may have done most of them
            self._before, self._share_before, self._start = done, share or 0.0, now
            return
        if not self._wanted or not more or now - self._last <= 0.2:
            return
        self._last = now
        spent = now - self._start
        line = f"{done:,} rows, {(done - self._before) / spent:,.0f} rows/s"
        if share is not None and share > self._share_before:
            left = spent * (1.0 - share) / (share - self._share_before)
            bar = "#" * round(20 * share)
            line = f"[{bar:<20}] {100 * share:3.0f} %  {line}, {duration(left)} left"
        click.echo("\r" + line.ljust(self._width), nl=False, err=True)
        self._width = len(line)

    def clear(self) -> None:
        """Take the line away."""
        if self._width:
            click.echo("\r" + " " * self._width + "\r", nl=False, err=True)
            self._width = 0


def duration(seconds: float) -> str:
    """A time for reading.

    Examples
    --------
    >>> duration(5.2), duration(65), duration(3661)
    ('5 s', '1 min 05 s', '1 h 01 min')
    """
    whole = round(seconds)
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        return f"{whole // 60} min {whole % 60:02} s"
    return f"{whole // 3600} h {whole % 3600 // 60:02} min"
