"""Ranked, explained pKaH values with intervals, site by site, and the protonation state at a pH.

The calls are loaded when first used, so that importing the package stays cheap.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .annotation import annotate, annotate_frame, rank
    from .calibration import Calibration, calibrate
    from .conditioning import LocalModel, Measurement, condition
    from .curves import curve
    from .display import show
    from .explanation import Explanation, explain
    from .extraction import Workup, workup
    from .features import BasicityFeatures
    from .local_models import read_local, save_local
    from .report import report_html
    from .salt_selection import SaltSelection, counter_ions
    from .scanning import Scan, scan
    from .scoring import Score, score
    from .titration import Titration, titrate
    from .tuning import Tuning, tune

__version__ = "0.1.0"

__all__ = [
    "BasicityFeatures",
    "Calibration",
    "Explanation",
    "LocalModel",
    "Measurement",
    "SaltSelection",
    "Scan",
    "Score",
    "Titration",
    "Tuning",
    "Workup",
    "__version__",
    "annotate",
    "annotate_frame",
    "calibrate",
    "condition",
    "counter_ions",
    "curve",
    "explain",
    "rank",
    "read_local",
    "report_html",
    "save_local",
    "scan",
    "score",
    "show",
    "titrate",
    "tune",
    "workup",
]

_HOMES = {
    "BasicityFeatures": "features",
    "annotate": "annotation",
    "annotate_frame": "annotation",
    "rank": "annotation",
    "calibrate": "calibration",
    "Calibration": "calibration",
    "condition": "conditioning",
    "read_local": "local_models",
    "save_local": "local_models",
    "LocalModel": "conditioning",
    "Measurement": "conditioning",
    "curve": "curves",
    "explain": "explanation",
    "Explanation": "explanation",
    "titrate": "titration",
    "Titration": "titration",
    "workup": "extraction",
    "Workup": "extraction",
    "counter_ions": "salt_selection",
    "SaltSelection": "salt_selection",
    "tune": "tuning",
    "Tuning": "tuning",
    "scan": "scanning",
    "Scan": "scanning",
    "report_html": "report",
    "score": "scoring",
    "Score": "scoring",
    "show": "display",
}


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    found = getattr(import_module(f".{_HOMES[name]}", __name__), name)
    globals()[name] = found
    return found


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
