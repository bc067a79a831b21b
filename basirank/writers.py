"""Writers: result tables as CSV or TSV files that appear whole or not at all, and as aligned text.

A file is written beside its final place and moved there when complete, so that a run that fails or is stopped
leaves nothing, and an older file of that name stays as it was.
"""

from __future__ import annotations

import csv
import os
import sys
from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import BinaryIO, TextIO

from .records import Column, Record, column_positions

TABLE_ENDINGS = (".csv", ".tsv")
STDOUT = "-"
ELLIPSIS = "…"


class OutputError(ValueError):
    """An output that cannot be written; the message is one plain line."""


def check_output(output: str, inputs: Sequence[str] = (), endings: Sequence[str] = TABLE_ENDINGS) -> None:
    """Refuse an output before any work is done.

    Raises
    ------
    OutputError
        Unknown ending, folder that does not exist or may not be written to, a folder's own name, or an input
        file.
    """
    if output == STDOUT:
        return
    path = Path(output)
    if path.is_dir():
        raise OutputError(f"{output} is a folder; name a file in it")
    if not path.name.lower().endswith(tuple(endings)):
        raise OutputError(f"{output}: unknown ending for an output; known are {' '.join(endings)}")
    if not path.parent.is_dir():
        raise OutputError(f"the output folder does not exist: {path.parent}")
    if not os.access(path.parent, os.W_OK):
        raise OutputError(f"the output folder may not be written to: {path.parent}")
    for name in inputs:
        with suppress(OSError):
            if path.exists() and os.path.samefile(name, path):
                raise OutputError(f"the output is the input: {output}")


@contextmanager
def writing(output: str) -> Iterator[None]:
    """Say plainly of what goes wrong in here that it is the output that cannot be written."""
    try:
        yield
    except BrokenPipeError:  # whoever reads has had enough: no error of the user
        raise
    except OSError as error:
        where = "standard output" if output == STDOUT else output
        raise OutputError(f"cannot write {where}: {(error.strerror or str(error)).lower()}") from None


@contextmanager
def open_output(output: str) -> Iterator[TextIO]:
    """A text stream to a file that takes its name when whole, or to standard output for `-`."""
    if output == STDOUT:
        reconfigure = getattr(sys.stdout, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(encoding="utf-8", errors="replace")
        with writing(output):
            yield sys.stdout
            sys.stdout.flush()
        return
    with (
        _beside(output) as partial,
        open(partial, "w", encoding="utf-8", errors="replace", newline="") as stream,
    ):
        yield stream


@contextmanager
def open_bytes(output: str) -> Iterator[BinaryIO]:
    """A stream of bytes to a file that takes its name when whole."""
    with _beside(output) as partial, open(partial, "wb") as stream:
        yield stream


@contextmanager
def _beside(output: str) -> Iterator[Path]:
    """A path to write to, which takes the name of the output at the end, or is gone if something fails."""
    final = Path(os.path.realpath(output))
    partial = final.with_name(f".{final.name}.{os.getpid()}.part")
    try:
        with writing(output):
            yield partial
            os.replace(partial, final)
    except BaseException:
        with suppress(OSError):
            partial.unlink()
        raise


class TableWriter:
    """Rows of text as delimited lines, quoted only where needed."""

    def __init__(self, stream: TextIO, output: str, heading: Sequence[str]) -> None:
        delimiter = "\t" if output.lower().endswith(".tsv") else ","
        self._writer = csv.writer(stream, delimiter=delimiter, lineterminator="\n")
        self._writer.writerow(heading)

    def write(self, rows: Iterable[Sequence[str]]) -> None:
        """Write rows, in order."""
        self._writer.writerows(rows)


def shorten(text: str, width: int) -> str:
    """A text cut in the middle to a width.

    Examples
    --------
    >>> shorten("CCCCCCCCCCN", 7)
    'CCC…CCN'
    """
    if len(text) <= width:
        return text
    if width <= 1:
        return text[:width]
    head = width // 2
    return text[:head] + ELLIPSIS + text[len(text) - (width - head - 1) :]


_FLEXIBLE = ("compound", "class")
_LEFT = ("compound", "class", "support")  # set to the left, numbers to the right
_ALWAYS = ("rank", "compound", "pKaH")
_LEAST_WIDTH = 12


def ranked_table(
    ranks: Sequence[int | None],
    labels: Sequence[str],
    records: Sequence[Record],
    above: Sequence[float | None],
    columns: Sequence[Column],
    ph: Sequence[float],
    width: int,
) -> str:
    """A ranked list as aligned text that fits a width.

    Parameters
    ----------
    ranks : sequence of int or None
        Rank of each row.
    labels : sequence of str
        Name or SMILES of each row.
    records : sequence of tuple
        Records in the order to be shown.
    above : sequence of float or None
        Probability that each is truly more basic than the next [-].
    columns : sequence of Column
        Their schema.
    ph : sequence of float
        pH values [-]; mean net charge and protonated share [%] are shown for each, under the pH.
    width : int
        Characters in a line. Compound and class are shortened first; then columns are left out from the
        right.
    """
    places = column_positions(columns)
    table: dict[str, list[str]] = {
        "rank": ["" if rank is None else str(rank) for rank in ranks],
        "compound": [_printable(label) for label in labels],
        "pKaH": [_decimal(row[places["pkah_1"]], 2) for row in records],
        "±90%": [_half_width(row, places) for row in records],
        **({"pKb": [_decimal(row[places["pkb_1"]], 2) for row in records]} if "pkb_1" in places else {}),
        "above%": [_decimal(None if share is None else 100 * share, 0) for share in above],
        "atom": [_plain(row[places["pkah_1_atom"]]) for row in records],
        "class": [_plain(row[places["pkah_1_class"]]) for row in records],
    }
    for value in ph:
        end = "" if len(ph) == 1 else f"_at_{value:g}"
        table[f"charge {value:g}"] = [_decimal(row[places[f"net_charge{end}"]], 2, "+") for row in records]
        table[f"prot.% {value:g}"] = [_percent(row[places[f"protonated_fraction{end}"]]) for row in records]
        for name, column in (("neutral%", "neutral_fraction"), ("zwitt.%", "zwitterion_fraction")):
            if column + end in places:
                table[f"{name} {value:g}"] = [_percent(row[places[column + end]]) for row in records]
    table["support"] = [_plain(row[places["pkah_1_support"]]) for row in records]
    reasons = [_printable(_reason(row, places)) for row in records]
    wanted = {name: max(len(name), *map(len, texts), 1) for name, texts in table.items()}
    widths = _fit(wanted, width)
    lines = [
        _line({name: name for name in widths}, widths),
        "  ".join("-" * size for size in widths.values()),
    ]
    for n, reason in enumerate(reasons):
        texts = {name: table[name][n] for name in widths}
        if reason and "class" in widths:
            texts["class"] = reason
        lines.append(_line(texts, widths, width))
    return "\n".join(lines)


def aligned(rows: Sequence[Sequence[str]], right: Sequence[int] = ()) -> list[str]:
    """Rows of text as lines with even columns; those in `right` are set to the right.

    Examples
    --------
    >>> aligned([["a", "1"], ["bc", "10"]], right=[1])
    ['a    1', 'bc  10']
    """
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    return [
        "  ".join(
            text.rjust(width) if n in right else text.ljust(width)
            for n, (text, width) in enumerate(zip(row, widths, strict=True))
        ).rstrip()
        for row in rows
    ]


def aligned_table(heading: Sequence[str], rows: Sequence[Sequence[str]], text: Sequence[int] = (0,)) -> str:
    """A table as indented lines; columns named by number in `text` stand to the left, numbers to the right."""
    clean = [
        ["".join(c if c.isprintable() else " " for c in cell) for cell in row] for row in (heading, *rows)
    ]
    lines = aligned(clean, [n for n in range(len(heading)) if n not in text])
    return "\n".join("  " + line for line in lines)


def printable(text: str, width: int) -> str:
    """A name on one line, without control characters, cut to a width."""
    return shorten("".join(letter if letter.isprintable() else " " for letter in text), width)


def _fit(widths: dict[str, int], width: int) -> dict[str, int]:
    """Column widths that fit: the flexible ones shrink, the widest first, then columns go, the last first."""
    widths = dict(widths)
    while True:
        excess = sum(widths.values()) + 2 * (len(widths) - 1) - width
        flexible = [name for name in _FLEXIBLE if name in widths]
        while excess > 0 and (widest := max(flexible, key=lambda name: widths[name])):
            if widths[widest] <= _LEAST_WIDTH:
                break
            widths[widest] -= 1
            excess -= 1
        if excess <= 0 or len(widths) <= len(_ALWAYS):
            return widths
        del widths[next((name for name in reversed(widths) if name not in (*_ALWAYS, "class")), "class")]


def _line(texts: dict[str, str], widths: dict[str, int], width: int = 0) -> str:
    """One aligned line; its last text may run on to the end of the line where columns after it are empty."""
    filled = [name for name in widths if texts[name]]
    line = ""
    for name, size in widths.items():
        if filled and name == filled[-1]:
            size = max(size, width - len(line)) if name in _LEFT else size
        line += _aligned(shorten(texts[name], size), size, name in _LEFT) + "  "
        if not filled or name == filled[-1]:
            break
    return line.rstrip()


def _aligned(text: str, width: int, left: bool) -> str:
    return text.ljust(width) if left else text.rjust(width)


def _printable(text: str) -> str:
    """A text on one line, without control characters."""
    return "".join(letter if letter.isprintable() else " " for letter in text)


def _plain(value: object) -> str:
    return "" if value is None else str(value)


def _decimal(value: object, decimals: int, sign: str = "") -> str:
    if not isinstance(value, int | float):
        return ""
    return f"{round(value, decimals) + 0.0:{sign if round(value, decimals) else ''}.{decimals}f}"


def _percent(value: object) -> str:
    return _decimal(100 * value if isinstance(value, int | float) else None, 1)


def _half_width(row: Record, places: dict[str, int]) -> str:
    """Half of the 90 % interval of the first pKaH, from whichever end is reported."""
    value = row[places["pkah_1"]]
    for end in ("pkah_1_high", "pkah_1_low"):
        if isinstance(value, float) and isinstance(edge := row[places[end]], float):
            return _decimal(abs(edge - value), 2)
    return ""


def _reason(row: Record, places: dict[str, int]) -> str:
    """What to say in place of a class of a row without a first pKaH."""
    if row[places["pkah_1_class"]] is not None:
        return ""
    status, message = _plain(row[places["status"]]), _plain(row[places["message"]])
    if status == "refused":
        return f"refused: {message}"
    return "no basic site" if status == "no_basic_site" else message
