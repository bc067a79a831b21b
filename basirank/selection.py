"""Selection: which rows of a ranked list to keep, and in which order to show them.

A rank is a compound's place in the whole list; it stays with the row when others are left out.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

from .records import Column, Record, column_positions, ranking

SORT_KEYS = ("pkah", "charge", "protonated", "name", "class", "input")
SUPPORTS = ("supported", "extrapolated")


@dataclass(frozen=True, slots=True)
class Selection:
    """What to keep and how to sort.

    Attributes
    ----------
    top : int or None
        Keep the first `top` rows after sorting.
    between : (float, float) or None
        Keep first pKaH values from the one to the other, ends included [-].
    site_class : str
        Keep rows whose first site has this text in its class, in any letter case; empty: all.
    support : str
        Keep rows whose first pKaH is `supported` or `extrapolated`; empty: all.
    sort : str
        One of `SORT_KEYS`: pKaH, net charge or protonated share at the first pH (highest first), name or class (from
        A), or the order of the input. Rows without the value come last.
    reverse : bool
        Sort the other way; rows without the value still come last.
    """

    top: int | None = None
    between: tuple[float, float] | None = None
    site_class: str = ""
    support: str = ""
    sort: str = "pkah"
    reverse: bool = False

    def keeps(self, row: Record, places: dict[str, int]) -> bool:
        """Whether a record, with its columns at these places, passes the filters."""
        value, support = row[places["pkah_1"]], row[places["pkah_1_support"]]
        if self.between is not None and not (
            isinstance(value, float) and self.between[0] <= value <= self.between[1]
        ):
            return False
        if self.site_class.casefold() not in str(row[places["pkah_1_class"]] or "").casefold():
            return False
        return not self.support or support == self.support


def selected(
    records: Sequence[Record], labels: Sequence[str], selection: Selection, columns: Sequence[Column]
) -> list[tuple[int | None, int]]:
    """Rank and position of the rows to show, in order.

    Parameters
    ----------
    records : sequence of tuple
        Records of the whole list.
    labels : sequence of str
        Name (or SMILES) of each.
    selection : Selection
        Filters and sort key.
    columns : sequence of Column
        Schema of the records.

    Returns
    -------
    list of (rank, position)
        As from `records.ranking`, fewer and in another order.
    """
    places = column_positions(columns)
    kept = [(rank, n) for rank, n in ranking(records) if selection.keeps(records[n], places)]
    if selection.sort != "pkah" or selection.reverse:
        key = _key(selection.sort, records, labels, places)
        valued = [pair for pair in kept if key(pair[1]) is not None]
        falling = selection.sort in ("pkah", "charge", "protonated")
        valued.sort(key=lambda pair: key(pair[1]), reverse=falling != selection.reverse)
        kept = valued + [pair for pair in kept if key(pair[1]) is None]
    return kept[: selection.top]


def _key(
    sort: str, records: Sequence[Record], labels: Sequence[str], places: dict[str, int]
) -> Callable[[int], Any]:
    if sort == "name":
        return lambda n: natural(labels[n]) if labels[n] else None
    if sort == "input":
        return lambda n: n
    column = {
        "pkah": "pkah_1",
        "class": "pkah_1_class",
        "charge": "net_charge",
        "protonated": "protonated_fraction",
    }[sort]
    place = next(at for name, at in places.items() if name == column or name.startswith(f"{column}_at_"))
    return lambda n: records[n][place]


def natural(text: str) -> list[tuple[int, int, str]]:
    """A name as a sort key that puts `A-2` before `A-10`, in any letter case.

    Examples
    --------
    >>> sorted(["A-10", "a-2", "7"], key=natural)
    ['7', 'a-2', 'A-10']
    """
    parts = re.findall(r"\d+|\D+", text.casefold())
    return [(0, int(part), "") if part.isdecimal() else (1, 0, part) for part in parts]
