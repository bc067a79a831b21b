"""Engines: chunks in, their results out, in order.

`here` computes in this process, `by_workers` (in `workers`) in others of this machine, `by_cluster` (in `cluster`)
on many. What they share is how a chunk that fails is taken apart, so that one row is refused and not the run.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence

from ..readers import Row
from .chunks import Chunk, with_refusals
from .compute import Done
from .plan import Plan

Work = Callable[[Plan, Sequence[Row]], Done]
"""What turns the rows of a chunk into its result: `compute`."""

Refuse = Callable[[int, str], None]
"""Takes the number of a row that is beyond computing, and the reason."""


def here(plan: Plan, chunks: Iterable[Chunk], refuse: Refuse, work: Work) -> Iterator[tuple[Chunk, Done]]:
    """Compute in this process, one chunk after another."""
    for chunk in chunks:
        try:
            yield chunk, work(plan, chunk.rows)
            continue
        except (MemoryError, OSError):
            raise
        except Exception as fault:
            bad = {
                chunk.first + n: why
                for n, row in enumerate(chunk.rows)
                if (why := _fault_of(work, plan, row)) is not None
            }
            check_faults(chunk, bad, fault)
        yield chunk, work(plan, refused_in(chunk, bad, refuse))


def _fault_of(work: Work, plan: Plan, row: Row) -> str | None:
    try:
        work(plan, [row])
    except (MemoryError, OSError):
        raise
    except Exception as fault:
        return fault_reason(fault)
    return None


def fault_reason(fault: BaseException) -> str:
    """What is said of a row at which the program has a fault."""
    return f"a fault of the program at this structure: {type(fault).__name__}: {fault}"


def check_faults(chunk: Chunk, bad: dict[int, str], fault: BaseException) -> None:
    """Raise where it cannot be the rows: all of the first chunk, or none although the chunk fails."""
    if not bad or (chunk.first == 0 and len(bad) == len(chunk.rows)):
        raise fault


def refused_in(chunk: Chunk, bad: dict[int, str], refuse: Refuse) -> list[Row]:
    """Rows of a chunk, those that are beyond computing marked and noted."""
    for number, reason in sorted(bad.items()):
        refuse(number, reason)
    return with_refusals(chunk.rows, chunk.first, bad)
