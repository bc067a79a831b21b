"""Plan: what a batch computes and writes, small enough to travel to every process that takes part."""

from __future__ import annotations

import platform
from dataclasses import asdict, dataclass, replace
from importlib.metadata import version
from typing import Any

from ..readers import Table
from ..records import Column, schema, unclashed
from ..request import PLAIN, Request
from ..tables import tables_digest

OUTPUT_ENDINGS = (".csv", ".tsv", ".sdf", ".csv.gz", ".tsv.gz", ".sdf.gz", ".csv.zst", ".tsv.zst",
                  ".sdf.zst", ".parquet")  # fmt: skip


@dataclass(frozen=True, slots=True)
class Plan:
    """What is computed and written.

    Attributes
    ----------
    ph : tuple of float
        pH values [-].
    form : {"csv", "tsv", "sdf", "parquet"}
        Format of the output.
    packing : {"", "gz", "zst"}
        How it is packed.
    columns : tuple of str
        Names of the input's own columns, as they stand in the output.
    renamed : tuple of (str, str)
        Old and new name of each that gained `input_`.
    request : Request
        Conditions and further columns.
    types : bytes or None
        Types of the input's own columns (an Arrow schema), where the format of the input has them.
    """

    ph: tuple[float, ...]
    form: str
    packing: str
    columns: tuple[str, ...]
    renamed: tuple[tuple[str, str], ...] = ()
    types: bytes | None = None
    request: Request = PLAIN

    @property
    def results(self) -> tuple[Column, ...]:
        """The result columns."""
        return schema(self.ph, request=self.request)


def plan_for(table: Table, ph: tuple[float, ...], output: str, request: Request = PLAIN) -> Plan:
    """The plan for a table and the name of an output (`-` is CSV)."""
    form, packing = output_format(output)
    columns = tuple(map(str, unclashed(table.columns, schema(ph, request=request))))
    if form == "parquet":
        columns = _each_once(columns)
    changed = tuple((old, new) for old, new in zip(table.columns, columns, strict=True) if old != new)
    types = table.types.serialize().to_pybytes() if form == "parquet" and table.types is not None else None
    return Plan(ph, form, packing, columns, changed, types, request)


def output_format(output: str) -> tuple[str, str]:
    """Format and packing that the name of an output stands for.

    Examples
    --------
    >>> output_format("out.csv.gz"), output_format("out.parquet"), output_format("-")
    (('csv', 'gz'), ('parquet', ''), ('csv', ''))
    """
    lowered = output.lower()
    ending = next((one for one in OUTPUT_ENDINGS if lowered.endswith(one)), ".csv")
    _, form, *packing = ending.split(".")
    return form, packing[0] if packing else ""


def _each_once(names: tuple[str, ...]) -> tuple[str, ...]:
    """Names of which no two are equal: a repeated one gains its number."""
    out: list[str] = []
    for name in names:
        number, new = 1, name
        while new in out or (new != name and new in names):
            number += 1
            new = f"{name}_{number}"
        out.append(new)
    return tuple(out)


def fingerprint(plan: Plan, chunk_size: int) -> dict[str, Any]:
    """What must be the same for a stopped run to be gone on with."""
    return {
        "options": {"ph": list(plan.ph), "form": plan.form, "packing": plan.packing, **_asked(plan.request)},
        "columns": {"names": list(plan.columns), "types": plan.types.hex() if plan.types else None},
        "versions": {
            **{name: version(name) for name in ("basirank", "numpy", "rdkit")},
            "python": platform.python_version(),
            "tables": tables_digest(),
            "chunk": chunk_size,
        },
    }


def _asked(request: Request) -> dict[str, Any]:
    """A request as JSON has it: of a local model, which one it is."""
    told = asdict(replace(request, local=None))
    return told if request.local is None else {**told, "local": request.local.digest}
