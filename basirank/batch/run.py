"""A run: a list through an engine into its output, taken up where an earlier run was stopped."""

from __future__ import annotations

import os
import time
from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, closing
from dataclasses import dataclass
from functools import partial
from itertools import chain, islice
from typing import IO, Any

from ..annotation import CHUNK
from ..readers import InputError, Table
from ..request import Request
from ..writers import STDOUT, writing
from .chunks import Chunk, chunks_of
from .cluster import by_cluster
from .compute import Done, compute
from .encoding import heading
from .engines import Refuse, Work, here
from .journal import Journal, Progress, journal
from .packing import finish
from .plan import Plan, fingerprint, plan_for
from .workers import by_workers

SMALL = 2  # chunks up to which no worker is started
PATIENCE = 600.0  # seconds

Engine = Callable[[Plan, Iterator[Chunk], Refuse], Iterator[tuple[Chunk, Done]]]
OpenTable = Callable[[], AbstractContextManager[Table]]
Show = Callable[[int, float | None], None]
"""Takes the rows done and the share of the list that has been read [-]."""


class _Changed(Exception):
    """The list is not the one that the interrupted run read."""


@dataclass(frozen=True, slots=True)
class Summary:
    """What a run has done.

    Attributes
    ----------
    progress : Progress
        Rows, statuses, reasons of refusal, seconds over all its beginnings.
    resumed : int
        Rows that earlier beginnings had done.
    blank_lines : int
        Blank lines skipped.
    here : float
        Seconds of this beginning.
    """

    progress: Progress
    resumed: int
    blank_lines: int
    here: float

    @property
    def rate(self) -> float:
        """Rows per second, of those done from this beginning on."""
        return (self.progress.rows - self.resumed) / self.here if self.here > 0 else 0.0


def engine_for(
    *,
    jobs: int | None = None,
    patience: float | None = None,
    cluster: str | None = None,
    work: Work = compute,
) -> Engine:
    """The engine that the options ask for.

    Parameters
    ----------
    jobs : int, optional
        Worker processes; when not given, one for each core, and none for a short list.
    patience : float, optional
        Time after which a single row is refused [s]; 600 when not given.
    cluster : str, optional
        Address of a Dask scheduler.
    work : callable
        What computes a chunk.
    """
    if cluster is not None:
        return partial(by_cluster, work=work, address=cluster)
    workers = partial(
        by_workers,
        work=work,
        jobs=jobs or usable_cores(),
        patience=PATIENCE if patience is None else patience,
    )
    if jobs is not None or patience is not None:
        return workers

    def by_length(plan: Plan, chunks: Iterator[Chunk], refuse: Refuse) -> Iterator[tuple[Chunk, Done]]:
        ahead = list(islice(chunks, SMALL + 1))
        if len(ahead) <= SMALL:
            return here(plan, ahead, refuse, work)
        return workers(plan, chain(ahead, chunks), refuse)

    return by_length


def usable_cores() -> int:
    """Cores that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0)) or 1
    return os.cpu_count() or 1


def to_stream(
    open_table: OpenTable,
    ph: tuple[float, ...],
    request: Request,
    stream: IO[bytes],
    engine: Engine,
    show: Show,
) -> Summary:
    """Annotate a list as CSV to a stream, which cannot be resumed."""
    begun, progress = time.monotonic(), Progress()
    with open_table() as table:
        plan = plan_for(table, ph, "-", request)
        chunks = chunks_of(table.rows, CHUNK, {})
        results = engine(plan, _first_read(chunks), lambda row, reason: None)
        with closing(results):  # type: ignore[type-var]
            for number, (_, done) in enumerate(results):
                with writing(STDOUT):
                    stream.write(done.data if number else heading(plan) + done.data)
                    stream.flush()
                progress.add(done)
                show(progress.rows, table.done())
        if not progress.rows:
            with writing(STDOUT):
                stream.write(heading(plan))
                stream.flush()
        progress.seconds = time.monotonic() - begun
        return Summary(progress, 0, table.blank_lines[0], progress.seconds)


def _first_read(chunks: Iterator[Chunk]) -> Iterator[Chunk]:
    """The same chunks, the first of them read now: what is wrong with the list is said before anything else."""
    first = next(chunks, None)
    return iter(()) if first is None else chain([first], chunks)


def to_file(
    open_table: OpenTable,
    ph: tuple[float, ...],
    request: Request,
    output: str,
    engine: Engine,
    show: Show,
    say: Callable[[str], None],
    *,
    rereadable: bool = True,
) -> Summary:
    """Annotate a list into a file that appears when it is whole; go on with an interrupted run.

    Parameters
    ----------
    open_table : callable
        Opens the list.
    ph : tuple of float
        pH values [-].
    request : Request
        Conditions and further columns.
    output : str
        File name; its ending is its format.
    engine : callable
        What computes the chunks.
    show : callable
        Takes rows done and share read, after each chunk.
    say : callable
        Takes a one-line remark.
    rereadable : bool
        Whether the list can be opened a second time (standard input can't).

    Raises
    ------
    InputError, OutputError
        See `readers` and `journal`.
    """
    with journal(output) as kept:
        try:
            return _attempt(open_table, ph, request, kept, engine, show, say)
        except _Changed:
            kept.close()
            kept.forget()
            if not rereadable:
                raise InputError(
                    f"standard input is not what the interrupted run of {output} read; what it left is taken"
                    " away, run the command again"
                ) from None
            say(f"{output}: an interrupted run was there, but its input has changed: beginning anew")
            return _attempt(open_table, ph, request, kept, engine, show, say)


def _attempt(
    open_table: OpenTable,
    ph: tuple[float, ...],
    request: Request,
    kept: Journal,
    engine: Engine,
    show: Show,
    say: Callable[[str], None],
) -> Summary:
    begun = time.monotonic()
    with open_table() as table:
        plan = plan_for(table, ph, kept.output, request)
        if (why := kept.resume(fingerprint(plan, CHUNK))) is not None:
            say(f"{kept.output}: an interrupted run was there, but {why}: beginning anew")
            kept.forget()
        before = kept.progress.rows
        chunks = _behind(chunks_of(table.rows, CHUNK, kept.progress.refused_rows), kept.progress)
        if before:
            say(f"{kept.output}: going on after {before:,} rows of an interrupted run")
        begun = time.monotonic()
        kept.open(heading(plan))
        results: Any = engine(plan, chunks, kept.refuse)
        with closing(results):
            for chunk, done in results:
                kept.add(done, chunk.digest)
                show(kept.progress.rows, table.done())
        blank_lines = table.blank_lines[0]
    kept.progress.seconds = kept.seconds
    spent = time.monotonic() - begun
    kept.complete(partial(finish, plan))
    return Summary(kept.progress, before, blank_lines, spent)


def _behind(chunks: Iterator[Chunk], progress: Progress) -> Iterator[Chunk]:
    """The chunks behind those that are done, once it is sure that the latter are the same."""
    end, digest = 0, ""
    while end < progress.rows:
        chunk = next(chunks, None)
        if chunk is None:
            raise _Changed
        end, digest = chunk.end, chunk.digest
    if end != progress.rows or digest != progress.digest:
        raise _Changed
    return _first_read(chunks)
