"""Measured pairs: two compounds of the measured table that one edit turns into each other.

What an edit did where it was measured stands beside what the model says of it. `scripts/pair_edits` applies every edit
near the marked site of every measured base, looks the product up in the table, and writes `models/edit_pairs.csv`.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from functools import cache

from .residual import group_of
from .sites import site_classes
from .tables import read_model_table

EXAMPLES = 3
"""Pairs that are shown for an edit."""


@dataclass(frozen=True, slots=True)
class MeasuredPair:
    """Two measured compounds, SMILES with the site marked by atom map 1, their constants [-], difference, sources."""

    before: str
    after: str
    value_before: float
    value_after: float
    shift: float
    source: str


@dataclass(frozen=True, slots=True)
class Precedent:
    """What an edit did to measured compounds: number of pairs, mean, least and greatest shift, up to three pairs.

    The same atoms stand between site and edit in all of them; `same_class` says whether the site before it is of the
    class asked for, or only of the same kind (an aliphatic amine, an azine, ...).
    """

    count: int
    mean: float
    least: float
    greatest: float
    examples: tuple[MeasuredPair, ...]
    same_class: bool


Pairs = dict[tuple[str, str, str], list[MeasuredPair]]


@cache
def _pairs() -> tuple[Pairs, Pairs]:
    """Pairs by edit, class of the site before it, and the atoms between the two; and by group of classes instead."""
    group = {row.name: group_of().get(row.family, "") for row in site_classes() if row.kind == "base"}
    by_class: Pairs = defaultdict(list)
    by_group: Pairs = defaultdict(list)
    for row in read_model_table("edit_pairs.csv"):
        before, after = float(row["value_before"]), float(row["value_after"])
        pair = MeasuredPair(
            row["before"], row["after"], before, after, round(after - before, 2), row["source"]
        )
        by_class[row["edit"], row["class"], row["path"]].append(pair)
        by_group[row["edit"], group.get(row["class"], ""), row["path"]].append(pair)
    return dict(by_class), dict(by_group)


@cache
def precedent(edit: str, site_class: str, group: str, path: str) -> Precedent | None:
    """What an edit did to measured compounds.

    Parameters
    ----------
    edit : str
        Its name.
    site_class, group : str
        Class of the site before the edit, and group of its family (`families.csv`), which counts where no pair
        has a site of the class.
    path : str
        Atoms from the site to the edit, as `Workbench.path_to` gives them.

    Returns
    -------
    Precedent or None
        None where no two measured compounds are related so. The pairs nearest to the mean are the examples.

    Examples
    --------
    >>> precedent("beta-fluoro", "primary aliphatic amine", "aliphatic", "NCC").mean < -1
    True
    """
    of_class, of_group = _pairs()
    own = of_class.get((edit, site_class, path))
    pairs = own or of_group.get((edit, group, path))
    if not pairs:
        return None
    shifts = [pair.shift for pair in pairs]
    mean = sum(shifts) / len(shifts)
    typical = sorted(
        pairs, key=lambda pair: (round(abs(pair.shift - mean), 6), len(pair.before), pair.before)
    )
    return Precedent(
        len(pairs), round(mean, 2), min(shifts), max(shifts), tuple(typical[:EXAMPLES]), own is not None
    )
