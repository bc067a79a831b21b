"""Sites: the atoms that take (bases) or give (acids) a proton, found by an ordered table of SMARTS.

The first row that matches an atom wins, specific rows stand before general ones, and every nitrogen ends in exactly
one class, be it one that never takes a proton. The atom-map numbers of a row's SMARTS give the roles: 1 is the atom
that takes or gives the proton, 1 to 4 mark the nitrogens that the row accounts for, 1 to 8 are the anchors from which
substituents are walked, and 9 belongs to the unit without being an anchor.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from functools import cache
from typing import Literal

from rdkit import Chem

from .graph import Graph
from .screens import Screen
from .tables import read_table

Kind = Literal["base", "acid"]
_LAST_ACCOUNTED = 4
_LAST_ANCHOR = 8


@dataclass(frozen=True, slots=True)
class SiteClass:
    """One row of the table of classes.

    Attributes
    ----------
    kind : str
        "base", "acid" or "none" (a nitrogen that takes no proton).
    name, family : str
        The class, and the family whose reaction constants it shares.
    needs : frozenset of str and int
        Kinds of atom (`Graph.kind`) and sizes of ring (`3` in the table) that the molecule must have; the cheap test
        before the SMARTS.
    parent : float
        Constant of the unsubstituted parent [-].
    sd : float
        Plausible error of that value [pK units].
    note, source : str
        What the value stands for and where it was taken from.
    """

    kind: str
    name: str
    family: str
    needs: frozenset[str | int]
    pattern: Chem.Mol
    roles: tuple[tuple[int, int], ...]
    parent: float
    sd: float
    note: str
    source: str


@dataclass(frozen=True, slots=True)
class Site:
    """One atom that takes (base) or gives (acid) a proton, and the unit it belongs to.

    Attributes
    ----------
    atom : int
        Parent atom that takes or gives the proton.
    kind : {"base", "acid"}
        Which of the two.
    site_class : str
        Name of the class.
    core : tuple of int
        Atoms of the unit that the class describes.
    anchors : tuple of (int, int)
        (role, atom) pairs from which substituents are walked; role 1 is the site atom.
    row : SiteClass
        The row of the table.
    """

    atom: int
    kind: Kind
    site_class: str
    core: tuple[int, ...]
    anchors: tuple[tuple[int, int], ...]
    row: SiteClass


Shortlist = tuple[list[tuple[int, SiteClass]], list[int]]
"""Rows with their places in the table; for each atom the rows (bits) of which it may be a centre."""


@cache
def site_classes() -> tuple[SiteClass, ...]:
    """Rows of `site_classes.csv` in order, patterns parsed."""
    classes = []
    for row in read_table("site_classes.csv"):
        pattern = Chem.MolFromSmarts(row["smarts"])
        if pattern is None:
            raise ValueError(f"site_classes.csv: cannot read SMARTS {row['smarts']!r} of {row['name']!r}")
        roles = tuple(
            (atom.GetIdx(), atom.GetAtomMapNum()) for atom in pattern.GetAtoms() if atom.GetAtomMapNum()
        )
        if row["kind"] != "none" and sum(role == 1 for _, role in roles) != 1:
            raise ValueError(f"site_classes.csv: {row['smarts']!r} must mark one atom with :1")
        classes.append(
            SiteClass(
                kind=row["kind"],
                name=row["name"],
                family=row["family"],
                needs=frozenset(int(one) if one.isdigit() else one for one in row["needs"].split()),
                pattern=pattern,
                roles=roles,
                parent=float(row["parent"] or "nan"),
                sd=float(row["sd"] or "nan"),
                note=row["note"],
                source=row["source"],
            )
        )
    return tuple(classes)


@cache
def _screen() -> Screen:
    """Screen of all rows, centred on the nitrogens that a row accounts for or the atom of an acid."""
    rows = site_classes()
    last = [1 if row.kind == "acid" else _LAST_ACCOUNTED for row in rows]
    centres = [[q for q, role in row.roles if role <= end] for row, end in zip(rows, last, strict=True)]
    return Screen([row.pattern for row in rows], centres)


def _shortlist(graph: Graph) -> Shortlist:
    """Rows that may match, their cheap needs met too."""
    rows, there = site_classes(), {*graph.kind, *graph.ring_size}
    places, centres = _screen().shortlist(graph)
    return [(place, rows[place]) for place in places if rows[place].needs <= there], centres


def _matches(mol: Chem.Mol, row: SiteClass, position: Sequence[int]) -> Sequence[tuple[int, ...]]:
    """Matches of a row, in the order of the canonical positions of their atoms: the first decides the anchors."""
    found: tuple[tuple[int, ...], ...] = mol.GetSubstructMatches(
        row.pattern, uniquify=False, maxMatches=10_000
    )
    return sorted(found, key=lambda match: [position[atom] for atom in match]) if len(found) > 1 else found


def _site_atom(row: SiteClass, match: tuple[int, ...]) -> int:
    return next(match[query] for query, role in row.roles if role == 1)


def _site(row: SiteClass, match: tuple[int, ...]) -> Site:
    anchors = tuple(sorted((role, match[query]) for query, role in row.roles if role <= _LAST_ANCHOR))
    core = tuple(match[query] for query, _ in row.roles)
    return Site(
        _site_atom(row, match), "acid" if row.kind == "acid" else "base", row.name, core, anchors, row
    )


def _positions(graph: Graph, order: Iterable[int] | None) -> list[int]:
    """Canonical position of each atom (its index where no order is given)."""
    position = list(range(len(graph.element)))
    for place, atom in enumerate(order if order is not None else ()):
        position[atom] = place
    return position


def classify_nitrogens(
    mol: Chem.Mol, graph: Graph, order: Iterable[int] | None = None
) -> tuple[dict[int, str], list[Site]]:
    """Put every nitrogen into its class and collect the base sites on the way.

    Parameters
    ----------
    mol : Chem.Mol
        Neutral parent.
    graph : Graph
        Its plain arrays.
    order : iterable of int, optional
        Atoms in canonical order; of several ways to match one site the first in this order counts.

    Returns
    -------
    classes : dict of int to str
        Class of each nitrogen.
    sites : list of Site
        Base sites in the order of the table (a site on O, S or C stands with the nitrogen that feeds it).
    """
    return _bases(mol, graph, _shortlist(graph), _positions(graph, order))


def _bases(
    mol: Chem.Mol, graph: Graph, shortlist: Shortlist, position: Sequence[int]
) -> tuple[dict[int, str], list[Site]]:
    open_nitrogen = {atom for atom, element in enumerate(graph.element) if element == 7}
    rows, centres = shortlist
    classes: dict[int, str] = {}
    sites: dict[int, Site] = {}
    for place, row in rows:
        if row.kind == "acid" or not any(centres[atom] >> place & 1 for atom in open_nitrogen):
            continue
        matches = _matches(mol, row, position)
        accounted: dict[int, str] = {}
        for match in matches:
            fresh = [
                match[query]
                for query, role in row.roles
                if role <= _LAST_ACCOUNTED and match[query] in open_nitrogen
            ]
            if not fresh:
                continue
            if row.kind == "base":
                atom = _site_atom(row, match)
                if atom in sites or (graph.element[atom] == 7 and atom not in open_nitrogen):
                    continue
                sites[atom] = _site(row, match)
            accounted.update(dict.fromkeys(fresh, row.name))
        # one site can be matched in several equivalent ways: the nitrogens of all of them are accounted for
        if accounted and row.kind == "base":
            for match in matches:
                for query, role in row.roles:
                    if role <= _LAST_ACCOUNTED and match[query] in open_nitrogen:
                        accounted.setdefault(match[query], row.name)
        classes.update(accounted)
        open_nitrogen.difference_update(accounted)
        if not open_nitrogen:
            break
    return classes, list(sites.values())


def acid_sites(mol: Chem.Mol, graph: Graph, order: Iterable[int] | None = None) -> list[Site]:
    """Acid sites of the neutral parent, one for each atom that can give a proton."""
    return _acids(mol, _shortlist(graph), _positions(graph, order))


def _acids(mol: Chem.Mol, shortlist: Shortlist, position: Sequence[int]) -> list[Site]:
    rows, centres = shortlist
    sites: dict[int, Site] = {}
    for place, row in rows:
        # where every atom that may be the site is one already, there is nothing to find
        if row.kind != "acid" or all(atom in sites for atom, bits in enumerate(centres) if bits >> place & 1):
            continue
        for match in _matches(mol, row, position):
            atom = _site_atom(row, match)
            if atom not in sites:
                sites[atom] = _site(row, match)
    return list(sites.values())


def find_sites(mol: Chem.Mol, graph: Graph, order: Iterable[int]) -> list[Site]:
    """All sites of a parent, bases and acids.

    Parameters
    ----------
    mol : Chem.Mol
        Neutral parent.
    graph : Graph
        Its plain arrays.
    order : iterable of int
        Atoms in canonical order, so that the order of the sites doesn't depend on how the structure was written.

    Returns
    -------
    list of Site
        Sorted by the canonical position of the site atom; of two sites on one atom the base comes first.
    """
    position = _positions(graph, order)
    shortlist = _shortlist(graph)
    sites = _bases(mol, graph, shortlist, position)[1] + _acids(mol, shortlist, position)
    return sorted(sites, key=lambda site: (position[site.atom], site.kind == "acid"))
