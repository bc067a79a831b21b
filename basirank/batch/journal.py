"""Journal: how far a run has come, kept beside its output, so that it can be gone on with after any end.

Beside `out.csv` stand, until it is whole, `.out.csv.part` (the chunks so far), `.out.csv.journal` (a JSON object:
how many rows and bytes of it count, their checksum, the digest of the input up to there, and what makes a run
the same run) and `.out.csv.lock`, which one process holds. The journal is replaced whole, after what it speaks
of is on the disk; whatever the part file holds beyond is cut off.
"""

from __future__ import annotations

import json
import os
import time
import zlib
from collections import Counter
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager, suppress
from dataclasses import dataclass, field, fields
from pathlib import Path
from typing import IO, Any

from ..writers import OutputError, writing
from .compute import Done

SAVE_EVERY = 1.0  # seconds between two entries
REASONS_KEPT = 200
OTHER_REASONS = "other reasons"


@dataclass(slots=True)
class Progress:
    """How far a run has come: what the journal holds besides the fingerprint."""

    rows: int = 0
    size: int = 0
    checksum: int = 0
    digest: str = ""
    seconds: float = 0.0
    statuses: Counter[str] = field(default_factory=Counter)
    refusals: Counter[str] = field(default_factory=Counter)
    refused_rows: dict[int, str] = field(default_factory=dict)

    def add(self, done: Done) -> None:
        """Count the rows of a chunk; reasons past the first 200 go under one heading."""
        self.rows += sum(done.statuses.values())
        self.statuses.update(done.statuses)
        for reason, number in done.refusals.items():
            known = reason in self.refusals or len(self.refusals) < REASONS_KEPT
            self.refusals[reason if known else OTHER_REASONS] += number


class Journal:
    """The part file of an output and its journal; made by `journal`."""

    def __init__(self, output: str) -> None:
        final = Path(os.path.realpath(output))
        self.output, self.final = output, final
        self.part, self.file, self.lock = (
            final.with_name(f".{final.name}.{end}") for end in ("part", "journal", "lock")
        )
        self.progress = Progress()
        self._fingerprint: Mapping[str, Any] = {}
        self._stream: IO[bytes] | None = None
        self._saved = time.monotonic()
        self._begun = time.monotonic()
        self._seconds_before = 0.0

    def resume(self, fingerprint: Mapping[str, Any]) -> str | None:
        """Take up what an earlier run left, if it was the same run.

        Returns
        -------
        str or None
            Why what was left cannot be gone on with; None where it can, or where nothing was left.
        """
        self._fingerprint = fingerprint
        self.progress = Progress()
        if not self.file.exists():
            return None
        try:
            told = json.loads(self.file.read_text("utf-8"))
            differing = [name for name in fingerprint if told["fingerprint"].get(name) != fingerprint[name]]
            if differing:
                return f"its {' and '.join(differing)} differ"
            kept = told["progress"]
            found = Progress(
                **{
                    **kept,
                    "statuses": Counter(kept["statuses"]),
                    "refusals": Counter(kept["refusals"]),
                    "refused_rows": {int(n): why for n, why in kept["refused_rows"].items()},
                }
            )
        except (OSError, ValueError, KeyError, TypeError, AttributeError):
            return "its journal cannot be read"
        if _checksum(self.part, found.size) != found.checksum:
            return "its part file is not what the journal says"
        self.progress = found
        self._seconds_before = found.seconds
        return None

    def open(self, heading: bytes) -> None:
        """Open the part file behind what counts of it."""
        with writing(self.output):
            self._stream = open(self.part, "r+b" if self.progress.size else "wb")  # noqa: SIM115
            self._stream.truncate(self.progress.size)
            self._stream.seek(self.progress.size)
            if not self.progress.size:
                self._write(heading)

    def forget(self) -> None:
        """Begin anew."""
        self.progress = Progress()
        self._seconds_before = 0.0
        for path in (self.file, self.part):
            path.unlink(missing_ok=True)

    def add(self, done: Done, digest: str) -> None:
        """Write a chunk."""
        with writing(self.output):
            self._write(done.data)
        self.progress.add(done)
        self.progress.digest = digest
        if time.monotonic() - self._saved > SAVE_EVERY:
            self.save()

    def refuse(self, row: int, reason: str) -> None:
        """Note, at once, a row that is beyond computing, so that a run that goes on says the same of it."""
        self.progress.refused_rows[row] = reason
        self.save()

    def save(self) -> None:
        """Bring the part file and then the journal onto the disk."""
        self._saved = time.monotonic()
        self.progress.seconds = self.seconds
        new = self.file.with_name(self.file.name + ".new")
        with writing(self.output):
            try:
                if self._stream is not None:
                    self._stream.flush()
                    os.fsync(self._stream.fileno())
                with open(new, "w", encoding="utf-8") as stream:
                    told = {field.name: getattr(self.progress, field.name) for field in fields(Progress)}
                    json.dump({"fingerprint": self._fingerprint, "progress": told}, stream)
                    stream.flush()
                    os.fsync(stream.fileno())
                os.replace(new, self.file)
            except OSError:
                new.unlink(missing_ok=True)
                raise

    @property
    def seconds(self) -> float:
        """Time that the run has taken, over all its beginnings [s]."""
        return self._seconds_before + time.monotonic() - self._begun

    def complete(self, finish: Callable[[Path, Path], None]) -> None:
        """Turn the part file into the output, and take the journal away."""
        self.close()
        with writing(self.output):
            finish(self.part, self.final)
        self.file.unlink(missing_ok=True)

    def close(self) -> None:
        """Close the part file, and note what it holds if it holds rows."""
        if self._stream is None:
            return
        try:
            if self.progress.rows:
                self.save()
        finally:
            with suppress(OSError):
                self._stream.close()
            self._stream = None

    def _write(self, data: bytes) -> None:
        assert self._stream is not None
        self._stream.write(data)
        self.progress.size += len(data)
        self.progress.checksum = zlib.crc32(data, self.progress.checksum)


def _checksum(path: Path, size: int) -> int | None:
    """Checksum of the first bytes of a file; None where it has fewer."""
    total = 0
    try:
        with open(path, "rb") as stream:
            while size and (block := stream.read(min(size, 1 << 20))):
                total = zlib.crc32(block, total)
                size -= len(block)
    except OSError:
        return None
    return total if not size else None


@contextmanager
def journal(output: str) -> Iterator[Journal]:
    """The journal of an output, for one process at a time.

    A run that is stopped or fails keeps what it has done; one that has done nothing leaves nothing.

    Raises
    ------
    OutputError
        Another process is writing this output, or it cannot be written (a full disk, no permission).
    """
    kept = Journal(output)
    with _locked(kept.lock, output):
        try:
            yield kept
        finally:
            try:
                kept.close()
            finally:
                if not kept.file.exists() or not kept.progress.rows:
                    kept.forget()


@contextmanager
def _locked(path: Path, output: str) -> Iterator[None]:
    while True:
        with writing(output):
            stream = open(path, "a+b")  # noqa: SIM115
        try:
            _lock(stream)
        except OSError:
            stream.close()
            raise OutputError(f"another run is writing {output}") from None
        with suppress(FileNotFoundError):
            if os.path.samestat(os.fstat(stream.fileno()), os.stat(path)):
                break
        stream.close()  # the run that held it has just ended and taken the file away
    try:
        yield
    finally:
        with suppress(OSError):
            path.unlink()
        stream.close()


def _lock(stream: IO[bytes]) -> None:
    """Take the lock of a file or raise OSError; the system gives it back when the process ends, however."""
    try:
        import fcntl
    except ImportError:
        import msvcrt

        msvcrt.locking(stream.fileno(), msvcrt.LK_NBLCK, 1)  # type: ignore[attr-defined]
    else:
        fcntl.flock(stream, fcntl.LOCK_EX | fcntl.LOCK_NB)
