"""Increments: the intrinsic constant of a site as parent value plus itemised terms.

A linear free-energy relationship for each class: parent value, Taft terms along saturated chains, Hammett terms
around aromatic rings, inductive and resonance terms of groups bound directly, and structural terms (ring size,
branching, fusion). A row of `coefficients.csv` names the class or family, the anchors, the term and its reaction
constant; which descriptor a term means is defined here, once.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass
from functools import cache
from typing import Any, NamedTuple

from .graph import AROMATIC, Graph
from .resonance import resonance_of_groups
from .sites import Site, SiteClass
from .substituents import ChainHit, RingHit, Substituents, chain_walk, ring_walk
from .tables import read_model_table, read_table

Label = str | tuple[Any, ...]
"""Text, or a format string and what goes into it: put into words only when somebody reads the term."""


class Term(NamedTuple):
    """One increment of an intrinsic constant: coefficient times descriptor, tied to atoms.

    Attributes
    ----------
    label : str or tuple
        What the term is; `name` gives it as text.
    atoms : tuple of int
        Parent atoms it comes from.
    descriptor, coefficient : float
        Their product is the increment [pK units].
    source : str
        Source of the coefficient.
    key : tuple of (str, str, str)
        Row of the coefficient table: owner, anchors, term.
    """

    label: Label
    atoms: tuple[int, ...]
    descriptor: float
    coefficient: float
    source: str
    key: tuple[str, str, str] = ("", "", "")

    @property
    def name(self) -> str:
        """What the term is, e.g. "sigma* of hydroxy, 2 bonds out"."""
        return self.label if isinstance(self.label, str) else self.label[0].format(*self.label[1:])

    @property
    def value(self) -> float:
        """Contribution to the intrinsic constant [pK units]."""
        return self.descriptor * self.coefficient


@dataclass(frozen=True, slots=True)
class Estimate:
    """Intrinsic constant of one site, every other site neutral, with its itemised terms.

    Attributes
    ----------
    site : Site
        The site.
    terms : tuple of Term
        Parent, increments and correction; they sum to the value.
    half_width : float
        Half of the 90 % interval [pK units].
    support : {"supported", "extrapolated"}
        Whether measured neighbours stand behind the value.
    """

    site: Site
    terms: tuple[Term, ...]
    half_width: float
    support: str = "extrapolated"

    @property
    def value(self) -> float:
        """Intrinsic pKaH (base) or pKa (acid) [-]."""
        return sum_of(self.terms)


def sum_of(terms: Iterable[Term]) -> float:
    """Sum of some terms, in their order [pK units]."""
    return sum([term.descriptor * term.coefficient for term in terms])


@dataclass(frozen=True, slots=True)
class Coefficient:
    """One reaction constant or structural increment, prior and (where data refined it) posterior."""

    owner: str
    anchors: str
    term: str
    value: float
    prior: float
    sd: float
    source: str

    @property
    def key(self) -> tuple[str, str, str]:
        """Identity of the row: owner, anchors, term."""
        return (self.owner, self.anchors, self.term)


Descriptor = tuple[Label, tuple[int, ...], float]
Describe = Callable[["SiteWalks", int], Iterable[Descriptor]]
Sort = tuple[str, str]
"""What a ring atom is or carries, and at which position."""


class SiteWalks:
    """Walks from the anchors of one site, made on demand and shared by its terms."""

    __slots__ = ("_chain", "_direct", "_ring", "core", "graph", "substituents")

    def __init__(self, substituents: Substituents, site: Site) -> None:
        self.substituents = substituents
        self.graph: Graph = substituents.graph
        self.core = frozenset(site.core)
        self._chain: dict[int, list[ChainHit]] = {}
        self._ring: dict[int, dict[Sort, list[RingHit]]] = {}
        self._direct: dict[int, list[tuple[int, int]]] = {}

    def chain(self, anchor: int) -> list[ChainHit]:
        """Groups met along chains from the anchor."""
        hits = self._chain.get(anchor)
        if hits is None:
            hits = self._chain[anchor] = chain_walk(self.substituents, anchor, self.core)
        return hits

    def ring(self, anchor: int, feature: str, position: str) -> Sequence[RingHit]:
        """What of one sort the aromatic system carries at a position ("": all but ortho), by distance."""
        return self.around(anchor).get((feature, position), ())

    def around(self, anchor: int) -> dict[Sort, list[RingHit]]:
        """What the aromatic system of the anchor carries, by feature and position; empty for one in no such system."""
        hits = self._ring.get(anchor)
        if hits is None:
            hits = self._ring[anchor] = {}
            if self.graph.aromatic[anchor]:
                for hit in ring_walk(self.substituents, anchor, self.core):
                    hits.setdefault((hit.feature, hit.position), []).append(hit)
                    if hit.position != "ortho":
                        hits.setdefault((hit.feature, ""), []).append(hit)
        return hits

    def direct(self, anchor: int) -> list[tuple[int, int]]:
        """Atoms bound to the anchor outside the unit, aromatic bonds apart."""
        found = self._direct.get(anchor)
        if found is None:
            around = self.graph.neighbours[anchor]
            found = [(o, order) for o, order in around if order != AROMATIC and o not in self.core]
            self._direct[anchor] = found
        return found


def _sigma_star(walks: SiteWalks, anchor: int) -> list[Descriptor]:
    label = "sigma* of {0.group.name}, {0.distance} out"
    return [((label, hit), hit.atoms, hit.sigma_star) for hit in walks.chain(anchor)]


def _alkyl(walks: SiteWalks, anchor: int) -> Iterator[Descriptor]:
    for other, _ in walks.direct(anchor):
        if walks.graph.kind[other] == "C3":
            yield "alkyl group", (other,), 1.0


def _aryl(walks: SiteWalks, anchor: int) -> Iterator[Descriptor]:
    for other, _ in walks.direct(anchor):
        if walks.graph.aromatic[other]:
            yield "aryl group", (other,), 1.0


def _branch(walks: SiteWalks, anchor: int) -> Iterator[Descriptor]:
    """Carbon atoms on the alpha carbons beyond the first of each."""
    graph = walks.graph
    for other, _ in walks.direct(anchor):
        if graph.kind[other] == "C3":
            carbons = [a for a, _ in graph.neighbours[other] if a != anchor and graph.kind[a] == "C3"]
            if len(carbons) > 1:
                yield "branched alpha carbon", (other,), float(len(carbons) - 1)


def _methyl(walks: SiteWalks, anchor: int) -> Iterator[Descriptor]:
    for other, _ in walks.direct(anchor):
        if walks.graph.kind[other] == "C3" and walks.graph.hydrogens[other] == 3:
            yield "methyl on the site", (other,), 1.0


def _hydrogens(walks: SiteWalks, anchor: int) -> Iterator[Descriptor]:
    if walks.graph.hydrogens[anchor]:
        yield "hydrogen on the site", (anchor,), float(walks.graph.hydrogens[anchor])


def _ring_size(size: int) -> Describe:
    def descriptor(walks: SiteWalks, anchor: int) -> Iterator[Descriptor]:
        found = walks.graph.smallest_ring(anchor)
        if found == size or (size == 8 and found > 8):
            yield ("in a ring of {}", found), (anchor,), 1.0

    return descriptor


def _bicyclic(walks: SiteWalks, anchor: int) -> Iterator[Descriptor]:
    rings = len(walks.graph.atom_rings[anchor])
    if rings > 1:
        yield "shared by rings", (anchor,), float(rings - 1)


def _direct(constant: str, label: str) -> Describe:
    label += " of {0.name}"

    def descriptor(walks: SiteWalks, anchor: int) -> list[Descriptor]:
        group = walks.substituents.group
        groups = [(other, group(other, anchor, order)) for other, order in walks.direct(anchor)]
        return [((label, group), (other,), getattr(group, constant)) for other, group in groups]

    return descriptor


def _hammett(para: str) -> Describe:
    mesomeric = ("sigma-" if para == "sigma_minus" else "sigma_p") + " of {0.group.name} ({0.label})"
    field = "sigma_m of {0.group.name} ({0.label})"

    def descriptor(walks: SiteWalks, anchor: int) -> list[Descriptor]:
        return [
            ((mesomeric, hit), hit.atoms, getattr(hit, para))
            if hit.alternant
            else ((field, hit), hit.atoms, hit.sigma_meta)
            for hit in walks.ring(anchor, "group", "")
        ]

    return descriptor


def _ortho(constant: str, label: str) -> Describe:
    label += " of {0.group.name} (ortho)"

    def descriptor(walks: SiteWalks, anchor: int) -> list[Descriptor]:
        return [
            ((label, hit), hit.atoms, getattr(hit.group, constant) if constant else 1.0)
            for hit in walks.ring(anchor, "group", "ortho")
        ]

    return descriptor


def _resonance(walks: SiteWalks, anchor: int) -> Iterator[Descriptor]:
    yield "resonance of the groups (Hueckel)", (anchor,), resonance_of_groups(walks.graph, anchor, walks.core)


def _feature(feature: str, position: str, distance: int = 0) -> Describe:
    place = position if position != "far" else "fused ring, {0.distance} bonds away"
    label = f"{feature} ({place})"

    def descriptor(walks: SiteWalks, anchor: int) -> list[Descriptor]:
        return [
            ((label, hit), hit.atoms, 1.0 if distance else hit.fade)
            for hit in walks.ring(anchor, feature, position)
            if distance in (0, hit.distance)
        ]

    return descriptor


_FEATURES = {
    "aza": "aza",
    "pyrrolic": "pyrrole-type nitrogen",
    "chalcogen": "chalcogen",
    "oxo": "oxo",
    "thioxo": "thioxo",
    "fusion": "fusion",
    "azinium": "azinium",
}


def _feature_terms() -> Iterator[tuple[str, Sort, int]]:
    """Terms of what the ring atoms are: name, sort, and distance where only one counts."""
    for short, name in _FEATURES.items():
        for position in ("ortho", "meta", "para", "far"):
            yield f"{short}_{position}", (name, position), 0
    for short in ("aza", "pyrrolic"):
        for away in range(2, 7):
            yield f"{short}_far{away}", (_FEATURES[short], "far"), away


SORTS: dict[str, Sort] = {
    "hammett": ("group", ""),
    "hammett_minus": ("group", ""),
    **dict.fromkeys(("ortho_i", "ortho_r", "ortho", "ortho_n"), ("group", "ortho")),
    **{term: sort for term, sort, _ in _feature_terms()},
}
"""By term, the one sort of thing on an aromatic system that it asks for: where that is missing it comes to nothing."""

TERMS: dict[str, Describe] = {
    "sigma_star": _sigma_star,
    "alkyl": _alkyl,
    "aryl": _aryl,
    "branch": _branch,
    "methyl": _methyl,
    "hydrogens": _hydrogens,
    "bicyclic": _bicyclic,
    **{f"ring{size}": _ring_size(size) for size in range(3, 9)},
    "sigma_i": _direct("sigma_i", "sigma_I"),
    "sigma_r": _direct("sigma_r", "sigma_R"),
    "steric": _direct("steric", "bulk"),
    "hammett": _hammett("sigma_para"),
    "hammett_minus": _hammett("sigma_minus"),
    "ortho_i": _ortho("sigma_i", "sigma_I"),
    "ortho_r": _ortho("sigma_r", "sigma_R"),
    "ortho": _ortho("sigma_ortho", "ortho constant"),
    "ortho_n": _ortho("", "place"),
    **{term: _feature(*sort, away) for term, sort, away in _feature_terms()},
    "resonance": _resonance,
}
"""Every term that a row of `coefficients.csv` may name, with the descriptor it stands for."""


@cache
def coefficients() -> dict[str, tuple[Coefficient, ...]]:
    """Coefficients by owner (class or family): published or remembered priors, refined values where there are any."""
    refined = {
        (row["owner"], row["anchors"], row["term"]): row for row in read_model_table("coefficients.csv")
    }
    by_owner: dict[str, list[Coefficient]] = {}
    for row in read_table("coefficients.csv"):
        if row["term"] not in TERMS:
            raise ValueError(f"coefficients.csv: unknown term {row['term']!r} of {row['owner']!r}")
        key = (row["owner"], row["anchors"], row["term"])
        prior = float(row["coefficient"])
        value, source = prior, row["source"]
        if key in refined:
            value = float(refined[key]["value"])
            source = f"refined on measured rows from {prior:g}: {source}"
        coefficient = Coefficient(*key, value, prior, float(row["sd"]), source)
        by_owner.setdefault(row["owner"], []).append(coefficient)
    return {owner: tuple(rows) for owner, rows in by_owner.items()}


Step = tuple[Describe, Sort | None, Coefficient]
"""A term of a line: its descriptor, the sort of thing it asks for, its coefficient."""


@dataclass(frozen=True, slots=True)
class Line:
    """The linear free-energy relationship of one class: parent value and coefficients, ready to use."""

    parent: float
    parent_source: str
    steps: tuple[tuple[frozenset[int], Step], ...]
    plans: dict[tuple[int, ...], list[tuple[Step, tuple[int, ...]]]]

    def plan(self, roles: tuple[int, ...]) -> list[tuple[Step, tuple[int, ...]]]:
        """Steps that concern a site with anchors of these roles, and at which of them; remembered."""
        plan = self.plans.get(roles)
        if plan is None:
            plan = self.plans[roles] = []
            for wanted, step in self.steps:
                places = tuple(place for place, role in enumerate(roles) if role in wanted)
                if places:
                    plan.append((step, places))
        return plan


@cache
def _line(name: str, family: str, prior: float, source: str) -> Line:
    table = coefficients()
    refined = {row["owner"]: row for row in read_model_table("coefficients.csv") if row["term"] == "parent"}
    parent = prior
    if name in refined:
        parent = float(refined[name]["value"])
        source = f"refined on measured rows from {prior:g}: {source}"
    own = table.get(name, ())
    taken = {(c.anchors, c.term) for c in own}
    rows = own + tuple(c for c in table.get(family, ()) if (c.anchors, c.term) not in taken)
    steps = tuple(
        (frozenset(map(int, row.anchors.split())), (TERMS[row.term], SORTS.get(row.term), row))
        for row in rows
    )
    return Line(parent, source, steps, {})


def line_of(row: SiteClass) -> Line:
    """Line of a class: its own coefficients, then those of its family."""
    return _line(row.name, row.family, row.parent, row.source)


def site_terms(substituents: Substituents, site: Site) -> tuple[Term, ...]:
    """Itemised intrinsic constant of a site.

    Parameters
    ----------
    substituents : Substituents
        Groups of the molecule.
    site : Site
        The site, with its anchors.

    Returns
    -------
    tuple of Term
        Parent first; terms that come to nothing are left out. Their values sum to the intrinsic constant.
    """
    line = line_of(site.row)
    walks = SiteWalks(substituents, site)
    parent = ("parent: {}", site.site_class)
    terms = [Term(parent, site.core, 1.0, line.parent, line.parent_source, (site.site_class, "", "parent"))]
    anchors = [anchor for _, anchor in site.anchors]
    for (describe, sort, coefficient), places in line.plan(tuple([role for role, _ in site.anchors])):
        for place in places:
            if sort is not None and sort not in walks.around(anchors[place]):
                continue
            for label, atoms, descriptor in describe(walks, anchors[place]):
                if descriptor:
                    terms.append(
                        Term(label, atoms, descriptor, coefficient.value, coefficient.source, coefficient.key)
                    )
    return tuple(terms)
