"""Streams: files as bytes, unpacked, cut into lines of bounded length, decoded.

A list may be longer than memory, and so may a line of a broken one: a line is cut where it grows past
`LINE_LIMIT`, marked, and the rest of it is passed over, so that its row is refused and the next one is read.
"""

from __future__ import annotations

import gzip
import os
import zlib
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from typing import IO

from ..extras import needed
from .rows import InputError, Warn

LINE_LIMIT = 1 << 20  # bytes in a line
LINE_CUT = f"a line of more than {LINE_LIMIT:,} bytes, cut"

_BLOCK = 1 << 18  # bytes read at a time
_PACKED_BLOCK = 1 << 14  # of zstd data, which may unpack to thousands of times as much
_CUT_TO = 1_000  # bytes kept of a line that is too long
_UTF16_MARKS = (b"\xff\xfe", b"\xfe\xff")
_PACKED_MARKS = {b"\x1f\x8b": "gzip", b"\x28\xb5\x2f\xfd": "zstd"}


class CutText(str):
    """What is kept of a line that is too long."""

    __slots__ = ()


class _CutBytes(bytes):
    __slots__ = ()


@contextmanager
def opened(name: str) -> Iterator[tuple[Iterator[bytes], Callable[[], float | None]]]:
    """Blocks of a file, unpacked as its ending says, and the share of it that has been read [-].

    Raises
    ------
    InputError
        A file that may not be read, a broken or truncated packed file, a missing package.
    """
    try:
        raw = open(name, "rb")  # noqa: SIM115
    except OSError as error:
        raise InputError(f"cannot read {name}: {(error.strerror or str(error)).lower()}") from None
    with raw:
        size = os.fstat(raw.fileno()).st_size

        def share() -> float | None:
            return raw.tell() / size if size and not raw.closed else None

        yield _unpacked(raw, name), share


def _unpacked(raw: IO[bytes], name: str) -> Iterator[bytes]:
    lowered = name.lower()
    if lowered.endswith(".gz"):
        return _from_gzip(raw, name)
    if lowered.endswith(".zst"):
        return _from_zstd(raw, name)
    return plain_blocks(raw, name)


def plain_blocks(raw: IO[bytes], source: str) -> Iterator[bytes]:
    """Blocks of a stream that is not packed, as they come."""
    read = getattr(raw, "read1", raw.read)
    first = True
    while block := _read(read, source, _BLOCK):
        for mark, kind in _PACKED_MARKS.items():
            if first and block.startswith(mark):
                raise InputError(f"{source} is packed ({kind}); give it that ending, or unpack it first")
        first = False
        yield block


def _read(read: Callable[[int], bytes], source: str, size: int) -> bytes:
    try:
        return read(size)
    except OSError as error:
        raise InputError(f"cannot read {source}: {(error.strerror or str(error)).lower()}") from None


def _from_gzip(raw: IO[bytes], source: str) -> Iterator[bytes]:
    try:
        with gzip.open(raw, "rb") as stream:
            while block := stream.read(_BLOCK):
                yield block
    except (EOFError, OSError, zlib.error) as error:
        raise InputError(f"cannot read {source}: broken gzip file ({error})") from None


def _from_zstd(raw: IO[bytes], source: str) -> Iterator[bytes]:
    """Frames one after another; the library's own reader takes a truncated frame for the end of the file."""
    zstandard = needed("zstandard", "zstd", source)
    frame = zstandard.ZstdDecompressor().decompressobj()
    begun = False
    try:
        while block := _read(raw.read, source, _PACKED_BLOCK):
            while block:
                if frame.eof:
                    frame = zstandard.ZstdDecompressor().decompressobj()
                begun = True
                if data := frame.decompress(block):
                    yield data
                block = frame.unused_data if frame.eof else b""
    except zstandard.ZstdError as error:
        raise InputError(f"cannot read {source}: broken zstd file ({error})") from None
    if begun and not frame.eof:
        raise InputError(f"cannot read {source}: broken zstd file (it ends in the middle of its data)")


def byte_lines(blocks: Iterable[bytes]) -> Iterator[bytes]:
    """Lines with their ends, whichever of the three kinds of line end is used."""
    rest, skipping = b"", False
    for block in blocks:
        pieces = (rest + block).splitlines(keepends=True)
        rest = b""
        if pieces and not pieces[-1].endswith(b"\n"):
            rest = pieces.pop()  # its end, or the second half of its end, is still to come
        for piece in pieces:
            if skipping:
                skipping = False
            elif len(piece) > LINE_LIMIT:
                yield _CutBytes(piece[:_CUT_TO])
            else:
                yield piece
        if len(rest) > LINE_LIMIT or skipping:
            if not skipping:
                yield _CutBytes(rest[:_CUT_TO])
            skipping, rest = True, rest[-1:] if rest.endswith(b"\r") else b""
    if rest and not skipping:
        yield rest


def text_lines(lines: Iterable[bytes], source: str, warn: Warn) -> Iterator[str]:
    """Lines as text: UTF-8, with or without a byte-order mark; a line that is not, as Latin-1, said once."""
    told = False
    for number, raw in enumerate(lines, start=1):
        cut = is_cut(raw)
        if number == 1:
            if raw.startswith(_UTF16_MARKS):
                raise InputError(f"{source} is UTF-16 text; save it as UTF-8")
            raw = raw.removeprefix(b"\xef\xbb\xbf")
        if cut:
            yield CutText(raw.decode("utf-8", "replace"))
            continue
        try:
            yield raw.decode("utf-8")
        except UnicodeDecodeError:
            if not told:
                warn(f"{source}, line {number}: not UTF-8, such lines are read as Latin-1")
                told = True
            yield raw.decode("latin-1")


def is_cut(line: str | bytes) -> bool:
    """Whether a line was too long and is only the beginning of itself."""
    return isinstance(line, CutText | _CutBytes)
