"""Sites: the atoms that take (bases) or give (acids) a proton, found by an ordered table of SMARTS.

The first row that matches an atom wins, specific rows stand before general ones, and every nitrogen ends in exactly
one class, be it one that never takes a proton. The atom-map numbers of a row's SMARTS give the roles: 1 is the atom
that takes or gives the proton, 1 to 4 mark the nitrogens that the row accounts for, 1 to 8 are the anchors from which
substituents are walked, and 9 belongs to the unit without being an anchor.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cache
from typing import Literal

from rdkit import Chem

from .graph import Graph
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
    needs : frozenset of str
        Kinds of atom (`Graph.kind`) that the molecule must have; the cheap test before the SMARTS.
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
    needs: frozenset[str]
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


@cache
def site_classes() -> tuple[SiteClass, ...]:
    """Rows of `site_classes.csv` in order, patterns parsed."""
    classes = []
    for row in read_table("site_classes.csv"):
        pattern = Chem.MolFromSmarts(row["smarts"])
        if pattern is None:
            raise ValueError(f"site_classes.csv: cannot read SMARTS {row['smarts']!r} of {row['name']!r}")
        roles = tuple((atom.GetIdx(), atom.GetAtomMapNum()) for atom in pattern.GetAtoms() if atom.GetAtomMapNum())
        if row["kind"] != "none" and sum(role == 1 for _, role in roles) != 1:
            raise ValueError(f"site_classes.csv: {row['smarts']!r} must mark one atom with :1")
        classes.append(
            SiteClass(
                kind=row["kind"],
                name=row["name"],
                family=row["family"],
                needs=frozenset(row["needs"].split()),
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
def _rows(acid: bool) -> tuple[tuple[SiteClass, frozenset[str]], ...]:
    """Rows for one pass, each with the kinds of nitrogen among its needs."""
    return tuple(
        (row, frozenset(kind for kind in row.needs if kind[0] in "Nn"))
        for row in site_classes()
        if (row.kind == "acid") == acid
    )


def _matches(mol: Chem.Mol, row: SiteClass) -> Iterable[tuple[int, ...]]:
    return mol.GetSubstructMatches(row.pattern, uniquify=False, maxMatches=10_000)


def _site(row: SiteClass, match: tuple[int, ...]) -> Site:
    anchors = tuple(sorted((role, match[query]) for query, role in row.roles if role <= _LAST_ANCHOR))
    atom = next(index for role, index in anchors if role == 1)
    core = tuple(match[query] for query, _ in row.roles)
    return Site(atom, "acid" if row.kind == "acid" else "base", row.name, core, anchors, row)


def classify_nitrogens(mol: Chem.Mol, graph: Graph) -> tuple[dict[int, str], list[Site]]:
    """Put every nitrogen into its class and collect the base sites on the way.

    Parameters
    ----------
    mol : Chem.Mol
        Neutral parent.
    graph : Graph
        Its plain arrays.

    Returns
    -------
    classes : dict of int to str
        Class of each nitrogen.
    sites : list of Site
        Base sites in the order of the table (a site on O, S or C stands with the nitrogen that feeds it).
    """
    kinds = set(graph.kind)
    open_nitrogen: dict[int, str] = {atom: kind for atom, kind in enumerate(graph.kind) if graph.element[atom] == 7}
    open_kinds = set(open_nitrogen.values())
    classes: dict[int, str] = {}
    sites: dict[int, Site] = {}
    for row, nitrogen_kinds in _rows(acid=False):
        if not open_nitrogen:
            break
        if not row.needs <= kinds or (nitrogen_kinds and nitrogen_kinds.isdisjoint(open_kinds)):
            continue
        accounted: dict[int, str] = {}
        for match in _matches(mol, row):
            fresh = [
                match[query]
                for query, role in row.roles
                if role <= _LAST_ACCOUNTED and match[query] in open_nitrogen
            ]
            if not fresh:
                continue
            if row.kind == "base":
                site = _site(row, match)
                if site.atom in sites or (graph.element[site.atom] == 7 and site.atom not in open_nitrogen):
                    continue
                accounted.update(dict.fromkeys(fresh, row.name))
                sites[site.atom] = site
            else:
                accounted.update(dict.fromkeys(fresh, row.name))
        # one site can be matched in several equivalent ways: the nitrogens of all of them are accounted for
        if accounted and row.kind == "base":
            for match in _matches(mol, row):
                for query, role in row.roles:
                    if role <= _LAST_ACCOUNTED and match[query] in open_nitrogen:
                        accounted.setdefault(match[query], row.name)
        if accounted:
            classes.update(accounted)
            for atom in accounted:
                open_nitrogen.pop(atom, None)
            open_kinds = set(open_nitrogen.values())
    return classes, list(sites.values())


def acid_sites(mol: Chem.Mol, graph: Graph) -> list[Site]:
    """Acid sites of the neutral parent, one for each atom that can give a proton."""
    kinds = set(graph.kind)
    sites: dict[int, Site] = {}
    for row, _ in _rows(acid=True):
        if not row.needs <= kinds:
            continue
        found: dict[int, Site] = {}
        for match in _matches(mol, row):
            site = _site(row, match)
            if site.atom not in sites and site.atom not in found:
                found[site.atom] = site
        sites.update(found)
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
    position = {atom: place for place, atom in enumerate(order)}
    sites = classify_nitrogens(mol, graph)[1] + acid_sites(mol, graph)
    return sorted(sites, key=lambda site: (position[site.atom], site.kind == "acid"))
