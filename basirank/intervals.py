"""Intervals: the spread of each class on known values, until measured neighbours narrow it down.

`models/class_spread.csv` holds, by class, the half-width that covered 90 % of the measured values in
cross-validation; a class with few values leans on its family and on all classes together.
"""

from __future__ import annotations

from functools import cache

from .sites import SiteClass
from .tables import read_model_table

_UNKNOWN = 3.0
"""Half-width where nothing is known [pK units]: a plain wide guess."""


@cache
def _spreads() -> dict[str, float]:
    return {row["name"]: float(row["half_width"]) for row in read_model_table("class_spread.csv")}


def half_width(row: SiteClass) -> float:
    """Half of the 90 % interval of an intrinsic constant of this class [pK units]."""
    spreads = _spreads()
    for name in (row.name, f"family {row.family}", f"all {'acids' if row.kind == 'acid' else 'bases'}"):
        if name in spreads:
            return spreads[name]
    return _UNKNOWN
