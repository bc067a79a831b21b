"""Ranked, explained pKaH values with intervals, site by site, and the protonation state at a pH.

`annotate`, `annotate_frame`, `rank` and `explain` are loaded when first used, so that importing the package
stays cheap.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .annotation import annotate, annotate_frame, rank
    from .explanation import Explanation, explain

__version__ = "0.1.0"

__all__ = ["Explanation", "__version__", "annotate", "annotate_frame", "explain", "rank"]

_HOMES = {
    "annotate": "annotation",
    "annotate_frame": "annotation",
    "rank": "annotation",
    "explain": "explanation",
    "Explanation": "explanation",
}


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    found = getattr(import_module(f".{_HOMES[name]}", __name__), name)
    globals()[name] = found
    return found


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
