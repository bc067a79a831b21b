"""Packing: from the part file of a finished run to the output under its final name.

What can be written in pieces (CSV, TSV, SDF, gzip) needs a new name only. Zstd gets one frame, as some readers
stop after the first, and Parquet row groups of a fixed size; both are made of the part file in one pass.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from contextlib import suppress
from pathlib import Path
from typing import IO, Any

from ..extras import needed
from .encoding import arrow_schema
from .plan import Plan

ROW_GROUP = 20_000  # rows of a row group in a Parquet file
_ZSTD_LEVEL = 3


def finish(plan: Plan, part: Path, final: Path) -> None:
    """Make the output of a part file that is whole, and take the part file away."""
    packed = part.with_name(part.name.removesuffix(".part") + ".packed")
    if plan.form != "parquet" and plan.packing != "zst":
        os.replace(part, final)
        return
    try:
        with open(part, "rb") as source, open(packed, "wb") as target:
            (_parquet if plan.form == "parquet" else _zstd)(plan, source, target)
            target.flush()
            os.fsync(target.fileno())
        os.replace(packed, final)
    except BaseException:
        with suppress(OSError):
            packed.unlink()
        raise
    part.unlink()


def _zstd(plan: Plan, source: IO[bytes], target: IO[bytes]) -> None:
    zstandard = needed("zstandard", "zstd", "output as .zst")
    zstandard.ZstdCompressor(level=_ZSTD_LEVEL, write_checksum=True).copy_stream(source, target)


def _parquet(plan: Plan, source: IO[bytes], target: IO[bytes]) -> None:
    pyarrow = needed("pyarrow", "parquet", "Parquet output")
    parquet = needed("pyarrow.parquet", "parquet", "Parquet output")
    schema = arrow_schema(plan)
    waiting: list[Any] = []
    with parquet.ParquetWriter(target, schema, compression="snappy") as writer:
        for batch in _batches(pyarrow, source):
            waiting.append(batch)
            if sum(one.num_rows for one in waiting) >= ROW_GROUP:
                table = pyarrow.Table.from_batches(waiting, schema).combine_chunks()
                writer.write_table(table.slice(0, ROW_GROUP), row_group_size=ROW_GROUP)
                waiting = table.slice(ROW_GROUP).to_batches()
        if waiting:
            table = pyarrow.Table.from_batches(waiting, schema).combine_chunks()
            writer.write_table(table, row_group_size=ROW_GROUP)


def _batches(pyarrow: Any, source: IO[bytes]) -> Iterator[Any]:
    """Batches of the Arrow streams that stand one after another in a file."""
    size = os.fstat(source.fileno()).st_size
    while source.tell() < size:
        with pyarrow.ipc.open_stream(source) as stream:
            yield from stream
