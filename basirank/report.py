"""Report: a ranked list as one page that opens from disk, with pictures, intervals, increments and an overview.

The page holds its data as JSON (the list as columns; each row's details apart and packed, read when they are shown),
its own style and script, and a policy that lets it load and run nothing else. Structures go in as bare geometry, so
that five thousand of them stay a file one can send.
"""

from __future__ import annotations

import base64
import gzip
import hashlib
import json
import re
from collections.abc import Iterable, Sequence
from functools import cache
from html import escape
from importlib.resources import files
from typing import TYPE_CHECKING, Any

from .depiction import MARK, Picture, lead_line, measured_picture, picture_of
from .entries import GRID, Entry, entries_of, subjects_of
from .explanation import CAUTION, INTERVAL_NOTE, LEAST_SHOWN, SiteLine
from .records import CONSTANT_COLUMNS, Record, clean_ph, column_positions, ranking
from .request import STANDARD, Conditions, Request

if TYPE_CHECKING:
    from .conditioning import LocalModel
    from .evidence import Analogue

CURVE_LEVELS = 255  # a share of the curve is kept as two hexadecimal digits
REPORT_LIMIT = 50_000  # rows that a page can hold and a browser still opens
SCALE_LIMITS = (-5.0, 16.0)
LEAST_SCALE = (0.0, 12.0)

_PLACES = column_positions(CONSTANT_COLUMNS)


def report_html(
    structures: Iterable[Any] | Any,
    *,
    names: Iterable[str] | None = None,
    smiles_column: str = "smiles",
    ph: float | Iterable[float] = 7.4,
    title: str = "Basicity report",
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
    local: LocalModel | None = None,
) -> str:
    """The report of a list as the text of one page.

    Parameters
    ----------
    structures : iterable of str or rdkit.Chem.Mol, or pandas.DataFrame
        A list, or a frame whose further columns are shown with each compound.
    names : iterable of str, optional
        Names of the compounds; for a frame its column `name`, if there is one.
    smiles_column : str
        Column that holds the structures when a frame is given.
    ph : float or iterable of float
        pH of the states [-], -2 to 16.
    title : str
        Heading of the page.
    temperature, ionic_strength : float
        Of the constants and states [C], 0 to 60, and [mol/L], 0 to 0.5.
    local : LocalModel, optional
        A user's own measurements (`condition`).

    Raises
    ------
    ValueError
        A wrong pH, a frame without such a column, not as many names as structures, or over 50,000 rows.

    Examples
    --------
    >>> page = report_html(["CCN", "c1ccncc1"], names=["ethylamine", "pyridine"])
    >>> page.startswith("<!doctype html>"), page.count("no basis for dosing")
    (True, 1)
    """
    values, conditions = clean_ph(ph), Conditions(temperature, ionic_strength)
    subjects = subjects_of(structures, names, smiles_column)
    if len(subjects) > REPORT_LIMIT:
        raise ValueError(
            f"more than {REPORT_LIMIT:,} rows are no page to read; rank the list and take its top"
        )
    entries = entries_of(subjects, values, Request(conditions, local=local))
    order = ranking([entry.record for entry in entries])
    return page([(place, entries[n]) for place, n in order], values, title, conditions)


def page(
    ranked: Sequence[tuple[int | None, Entry]],
    ph: Sequence[float],
    title: str,
    conditions: Conditions = STANDARD,
) -> str:
    """The page of a ranked list.

    Parameters
    ----------
    ranked : sequence of (rank, Entry)
        Rows in the order to be shown, rank None for those without a pKaH.
    ph : sequence of float
        pH of the states [-].
    title : str
        Heading; like every text of the user's it stands in the page as text.
    conditions : Conditions
        At which the entries were computed.
    """
    strings, analogues = _Strings(), _Analogues()
    details = [_detail(entry, strings, analogues) for _, entry in ranked]
    for place, share in enumerate(_above_next(ranked)):
        details[place]["above"] = share
    data = {
        "ph": list(ph),
        "grid": GRID,
        "scale": _scale([entry.record for _, entry in ranked]),
        "rows": _columns(ranked, strings),
        "strings": strings.listed,
    }
    style, script = _part("report.css"), _part("charts.js") + _part("report.js")
    told = (
        f"{len(ranked):,} compound{'s' if len(ranked) != 1 else ''}, pKaH in water at {conditions}, state at pH "
        f"{', '.join(f'{value:g}' for value in ph)}, by basirank"
    )
    parts = {
        "title": escape(_visible(title)),
        "subtitle": escape(told),
        "note": escape(INTERVAL_NOTE),
        "caution": escape(CAUTION),
        "style": style,
        "script": script,
        "policy": (
            f"default-src 'none'; base-uri 'none'; form-action 'none'; "
            f"style-src {_digest(style)}; script-src {_digest(script)}"
        ),
        "list": json_in_html(data),
        "details": _packed([*details, *analogues.listed]),
    }
    return re.sub(r"\{\{(\w+)\}\}", lambda found: parts[found[1]], _part("report.html"))


def _above_next(ranked: Sequence[tuple[int | None, Entry]]) -> list[float | None]:
    """Probability that each is truly more basic than the next by rank among these, whatever their order here [-]."""
    from .kinship import above_next

    order = sorted((rank, n) for n, (rank, _) in enumerate(ranked) if rank is not None)
    found = dict(
        zip((n for _, n in order), above_next([ranked[n][1].standing for _, n in order]), strict=True)
    )
    return [found.get(n) for n in range(len(ranked))]


@cache
def _part(name: str) -> str:
    return files("basirank").joinpath("page", name).read_text(encoding="utf-8")


def _digest(text: str) -> str:
    """A script or style by its hash, as a content security policy names it."""
    return f"'sha256-{base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()}'"


def json_in_html(value: Any) -> str:
    r"""JSON that can stand in a page: no character in it can end the element or begin another.

    Examples
    --------
    >>> json_in_html({"name": "</script><b>"})
    '{"name":"\\u003c/script\\u003e\\u003cb\\u003e"}'
    """
    text = json.dumps(value, ensure_ascii=False, separators=(",", ":"), allow_nan=False)
    for letter in "<>&\u2028\u2029":
        text = text.replace(letter, f"\\u{ord(letter):04x}")
    return "".join(letter if not 0xD800 <= ord(letter) <= 0xDFFF else "\ufffd" for letter in text)


def _packed(values: Iterable[Any]) -> str:
    """A line of JSON for each value, compressed and as letters: a fifth of the size, the same bytes every time."""
    lines = "\n".join(map(json_in_html, values))
    return base64.b64encode(gzip.compress(lines.encode(), mtime=0)).decode()


def _visible(text: str) -> str:
    return " ".join("".join(letter if letter.isprintable() else " " for letter in text).split()) or "Report"


class _Strings:
    """Texts that come again and again (terms, sources, classes), each kept once and known by its number."""

    def __init__(self) -> None:
        self.listed: list[str] = []
        self._numbers: dict[str, int] = {}

    def __call__(self, text: str) -> int:
        number = self._numbers.setdefault(text, len(self.listed))
        if number == len(self.listed):
            self.listed.append(text)
        return number


def _columns(ranked: Sequence[tuple[int | None, Entry]], strings: _Strings) -> dict[str, list[Any]]:
    """What the table shows, sorts and searches, column by column."""
    supports = {"supported": 1, "extrapolated": 0}
    columns: dict[str, list[Any]] = {
        "rank": [rank for rank, _ in ranked],
        "name": [entry.subject.name for _, entry in ranked],
        "smiles": [entry.told.structure for _, entry in ranked],
        "more": [" ".join(text for _, text in entry.subject.cells) for _, entry in ranked],
        "states": [
            [[state.net_charge, state.protonated_fraction] for state in entry.told.states] or None
            for _, entry in ranked
        ],
        "curve": [
            "".join(f"{round(CURVE_LEVELS * share):02x}" for share in entry.curve) for _, entry in ranked
        ],
    }
    wanted = {"status": "status", "message": "message", "pkah_1": "pkah", "pkah_1_low": "low", "pkah_1_high": "high",
              "pkah_1_atom": "atom"}  # fmt: skip
    for column, name in wanted.items():
        columns[name] = [entry.record[_PLACES[column]] for _, entry in ranked]
    classes = [entry.record[_PLACES["pkah_1_class"]] for _, entry in ranked]
    columns["class"] = [None if text is None else strings(str(text)) for text in classes]
    columns["support"] = [supports.get(str(entry.record[_PLACES["pkah_1_support"]])) for _, entry in ranked]
    return columns


def _scale(records: Sequence[Record]) -> tuple[float, float]:
    """Whole numbers around all values and intervals: the common scale of the bars [-]."""
    names = ("pkah_1", "pkah_1_low", "pkah_1_high")
    values = [value for row in records for name in names if isinstance(value := row[_PLACES[name]], float)]
    low, high = min([LEAST_SCALE[0], *values]), max([LEAST_SCALE[1], *values])
    return max(float(low // 1), SCALE_LIMITS[0]), min(float(-(-high // 1)), SCALE_LIMITS[1])


def _detail(entry: Entry, strings: _Strings, analogues: _Analogues) -> dict[str, Any]:
    """What a row shows when it is opened."""
    told = entry.told
    picture = picture_of(told)
    sites = {site.number: site for site in told.sites}
    turn: dict[int, int] = {}
    steps = []
    for step in told.steps:
        turn.setdefault(step.site, len(turn))
        site = sites[step.site]
        steps.append(
            [step.name, step.value, step.low, step.high, f"{site.symbol} atom {step.atom}, {site.site_class}"]
        )
    return {
        "picture": picture and _picture(picture),
        "parent": told.parent_smiles,
        "cells": entry.subject.cells,
        "steps": steps,
        "forms": [[state.dominant_form, state.dominant_fraction] for state in told.states],
        "pairs": [[a, b, round(w, 3)] for a, b, w in told.interactions],
        "sites": [
            _site(site, [step.name for step in told.steps if step.site == site.number], strings, analogues)
            for site in sorted(told.sites, key=lambda site: turn.get(site.number, len(turn)))
        ],
    }


def _site(site: SiteLine, steps: list[str], strings: _Strings, analogues: _Analogues) -> dict[str, Any]:
    terms = [term for n, term in enumerate(site.terms) if n == 0 or abs(term.value) >= LEAST_SHOWN]
    return {
        "number": site.number,
        "steps": steps,
        "kind": site.kind,
        "atom": site.atom,
        "symbol": site.symbol,
        "class": site.site_class,
        "value": round(site.value, 3),
        "adjusted": None if site.at_conditions is None else round(site.at_conditions, 3),
        "half": round(site.half_width, 3),
        "support": site.support,
        "silent": len(site.terms) - len(terms),
        "terms": [
            [
                strings(term.name),
                round(term.value, 3),
                strings(term.source),
                term.atoms,
                f"{term.coefficient:+.3g} × {term.descriptor:.3g}"
                if term.descriptor != 1.0 and term.coefficient != 1.0
                else "",
            ]
            for term in terms
        ],
        "evidence": [[analogues(one), one.weight, one.pull] for one in site.evidence],
    }


class _Analogues:
    """Measured compounds that stand as evidence anywhere in the list, each kept once and known by its number."""

    def __init__(self) -> None:
        self.listed: list[dict[str, Any]] = []
        self._numbers: dict[tuple[str, str, float, str], int] = {}

    def __call__(self, one: Analogue) -> int:
        key = (one.smiles, one.kind, one.value, one.source)
        if key not in self._numbers:
            self._numbers[key] = len(self.listed)
            picture = measured_picture(one.smiles, one.kind, one.value)
            self.listed.append(
                {
                    "name": one.name,
                    "smiles": one.smiles,
                    "quantity": one.quantity,
                    "value": round(one.value, 2),
                    "source": one.source,
                    "picture": picture and _picture(picture),
                }
            )
        return self._numbers[key]


def _picture(picture: Picture) -> dict[str, Any]:
    """A picture as the page's script draws it."""
    drawing, box = picture.drawing, picture.box
    marks = []
    for mark in picture.marks:
        line = lead_line(mark.x, mark.y, mark.box, MARK)
        marks.append(
            {
                "kind": mark.kind,
                "x": mark.x,
                "y": mark.y,
                "label": mark.label,
                "at": [round((mark.box.left + mark.box.right) / 2, 1), round(mark.box.bottom - 3.5, 1)],
                "minor": mark.minor,
                "lead": line and f"M{line[0]:.1f} {line[1]:.1f}L{line[2]:.1f} {line[3]:.1f}",
            }
        )
    return {
        "box": [
            round(box.left, 1),
            round(box.top, 1),
            round(box.right - box.left, 1),
            round(box.bottom - box.top, 1),
        ],
        "lines": drawing.lines,
        "wedges": drawing.wedges,
        "letters": [[one.x, one.y, one.text, one.size] for one in drawing.letters],
        "marks": marks,
        "radius": MARK,
        "atoms": {number: drawing.atoms[n] for number, n in picture.place.items()},
    }
