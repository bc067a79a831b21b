"""Chunks: rows of a list by the hundred, numbered, with a running digest of all that was read up to their end.

The digest tells a resumed run whether the list is still the one that the interrupted run read.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from itertools import islice

from ..readers import Row


@dataclass(frozen=True, slots=True)
class Chunk:
    """Rows that are computed together.

    Attributes
    ----------
    first : int
        Number of the first row in the list, from 0.
    rows : list of Row
        The rows.
    digest : str
        Digest of the list from its beginning to the end of this chunk.
    """

    first: int
    rows: list[Row]
    digest: str

    @property
    def end(self) -> int:
        """Number of the row after the last."""
        return self.first + len(self.rows)


def chunks_of(rows: Iterable[Row], size: int, refused: Mapping[int, str]) -> Iterator[Chunk]:
    """Chunks of a list.

    Parameters
    ----------
    rows : iterable of Row
        The list.
    size : int
        Rows in a chunk.
    refused : mapping of int to str
        Rows, by their number, that are known to be beyond computing, and why.
    """
    walk, first, running = iter(rows), 0, hashlib.blake2b(digest_size=16)
    while batch := list(islice(walk, size)):
        for row in batch:
            running.update(repr((row.cells, row.structure, row.problem)).encode("utf-8", "surrogatepass"))
        if refused:
            batch = with_refusals(batch, first, refused)
        yield Chunk(first, batch, running.copy().hexdigest())
        first += len(batch)


def with_refusals(rows: list[Row], first: int, refused: Mapping[int, str]) -> list[Row]:
    """Rows, those that are beyond computing marked with the reason."""
    return [
        replace(row, problem=refused[n]) if n in refused else row for n, row in enumerate(rows, start=first)
    ]
