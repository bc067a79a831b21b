"""Substituents as a site sees them: walks from an anchor along saturated chains and around aromatic rings.

Along a chain the effect of a group fades by a constant factor for each carbon; around a ring it is passed on
by position, and in fused rings by distance and parity of the path. The constants are those of `groups`.
"""

from __future__ import annotations

from functools import cache, lru_cache
from typing import NamedTuple

from .graph import AROMATIC, Graph, Star, star_parts
from .groups import Group, Substituents, scales, spell

__all__ = ["ChainHit", "Group", "RingHit", "Substituents", "chain_walk", "ring_walk", "spell"]


@cache
def _walking() -> tuple[float, float, float]:
    """Attenuation by one bond, smallest share that is followed, and sigma* by sigma_I."""
    relation = scales()
    return relation["attenuation"], relation["smallest_share"], relation["sigma_star_per_sigma_i"]


class ChainHit(NamedTuple):
    """One group met on a walk along saturated carbon: its atoms, its distance and what is left of its effect.

    `on_ring` is the Hammett constant of a group that acts through an aromatic ring on the chain, else None.
    """

    carrier: Group
    atoms: tuple[int, ...]
    distance: int
    share: float
    on_ring: float | None = None

    @property
    def group(self) -> Group:
        """The group, with its constants as the ring passes them on if there is one between."""
        return self.carrier if self.on_ring is None else _as_star(self.carrier, self.on_ring)

    @property
    def sigma_star(self) -> float:
        """Polar constant at the anchor [-].

        Past the first bond the group acts by its inductive constant alone, on the sigma* scale (Charton 1981);
        sigma* of an amino group measured in direct contact is too small for that.
        """
        if self.on_ring is not None:
            return self.on_ring * self.share
        if self.distance == 1 or self.carrier.sigma_i == 0.0:
            return self.carrier.sigma_star * self.share
        return self.carrier.sigma_i * _walking()[2] * self.share


def chain_walk(substituents: Substituents, anchor: int, core: frozenset[int]) -> list[ChainHit]:
    """Groups met from an anchor outward, every simple path counted (a ring member is reached both ways).

    The effect of a group fades by `attenuation` for each saturated carbon between it and the anchor (Taft 1956).

    Parameters
    ----------
    substituents : Substituents
        Groups of the molecule.
    anchor : int
        Atom where the walk starts.
    core : frozenset of int
        Atoms of the site's own unit; no path enters them.

    Returns
    -------
    list of ChainHit
        Distance counts the bonds from the anchor to the group.
    """
    walk = _ChainWalk(substituents, core)
    for other, order in substituents.graph.neighbours[anchor]:
        if other not in core and order != AROMATIC:
            walk.follow(other, anchor, order, (other,), 1.0)
    return walk.hits


class _ChainWalk:
    """One walk along saturated carbon; `hits` is what it has met."""

    __slots__ = ("core", "fade", "graph", "hits", "kind", "neighbours", "reach", "substituents")

    def __init__(self, substituents: Substituents, core: frozenset[int]) -> None:
        self.substituents = substituents
        self.graph = substituents.graph
        self.kind, self.neighbours = self.graph.kind, self.graph.neighbours
        self.core = core
        self.fade, self.reach, _ = _walking()
        self.hits: list[ChainHit] = []

    def follow(self, atom: int, origin: int, order: int, path: tuple[int, ...], share: float) -> None:
        """From one atom on, the last of the path."""
        graph, kind = self.graph, self.kind
        if kind[atom] == "C3" and not _is_halocarbon(graph, atom, origin):
            share *= self.fade
            if share < self.reach:
                return
            at_end = share * self.fade < self.reach
            core, neighbours = self.core, self.neighbours
            for other, other_order in neighbours[atom]:
                if other == origin or other in path or other in core:
                    continue
                # a carbon past the end, too bare to be a halocarbon
                if at_end and kind[other] == "C3" and len(neighbours[other]) < 3:
                    continue
                self.follow(other, atom, other_order, (*path, other), share)
            return
        self.hits.append(ChainHit(self.substituents.group(atom, origin, order), (atom,), len(path), share))
        if graph.aromatic[atom]:
            self._through_ring(atom, origin, len(path), share)
        elif share * self.fade >= self.reach:
            self._beyond(atom, origin, path, share * self.fade)

    def _beyond(self, atom: int, origin: int, path: tuple[int, ...], share: float) -> None:
        """Past a functional group: its saturated neighbours, one bond weaker for each atom crossed."""
        graph = self.graph
        edge = [(atom, origin, share)]
        crossed = {atom, *path}
        while edge:
            inner, behind, left = edge.pop()
            if left < self.reach:
                continue
            for other, order in graph.neighbours[inner]:
                if other == behind or other in crossed or other in self.core:
                    continue
                if graph.kind[other] == "C3":
                    if not _is_halocarbon(graph, other, inner):
                        self.follow(other, inner, order, (*path, other), left)
                elif not graph.aromatic[other] and graph.element[inner] != 1:
                    crossed.add(other)
                    edge.append((other, inner, left * self.fade))

    def _through_ring(self, atom: int, origin: int, distance: int, share: float) -> None:
        """Substituents of an aromatic group, passed on to the chain by its transmission."""
        passed = share * scales()["ring_transmission"]
        for hit in ring_walk(self.substituents, atom, self.core | {origin}):
            if hit.group is None:
                continue
            if hit.position == "ortho":
                self.hits.append(ChainHit(hit.group, hit.atoms, distance + 1, passed, hit.group.sigma_para))
            else:
                sigma = hit.sigma_para if hit.alternant else hit.sigma_meta
                self.hits.append(ChainHit(hit.group, hit.atoms, distance + hit.distance, passed, sigma))


_HALOGENS = (9, 17, 35, 53)


@lru_cache(maxsize=50_000)
def _halogens(star: Star) -> int:
    """Halogens on an atom."""
    return sum(other.element in _HALOGENS for _, other in star_parts(star)[1])


def _is_halocarbon(graph: Graph, atom: int, origin: int) -> bool:
    """A carbon whose other neighbours are two or more halogens (CHF2, CF3, CCl3): one group, not a chain."""
    if len(graph.neighbours[atom]) < 3:
        return False
    return _halogens(graph.star[atom]) - (graph.element[origin] in _HALOGENS) >= 2


@lru_cache(maxsize=10_000)
def _as_star(group: Group, sigma: float) -> Group:
    """A ring substituent's Hammett constant, carried on the polar scale of the ring that passes it on."""
    return Group(
        f"{group.name} on the ring",
        sigma,
        sigma,
        sigma,
        sigma,
        0.0,
        0.0,
        group.steric,
        group.source,
        group.estimated,
    )


class RingHit(NamedTuple):
    """What an aromatic system carries at one of its atoms, seen from an anchor in it.

    `position` is ortho, meta, para or far; `feature` is "group", "aza", "pyrrole-type nitrogen", "chalcogen",
    "oxo", "thioxo" or "fusion"; `alternant` tells whether the atom stands an odd number of bonds away
    (in conjugation with the anchor).
    """

    feature: str
    group: Group | None
    atoms: tuple[int, ...]
    position: str
    distance: int
    alternant: bool
    fade: float

    @property
    def label(self) -> str:
        """Where it stands, in words."""
        return self.position if self.position != "far" else f"{self.distance} bonds round"

    @property
    def sigma_meta(self) -> float:
        return self.group.sigma_meta * self.fade if self.group else 0.0

    @property
    def sigma_para(self) -> float:
        return self.group.sigma_para * self.fade if self.group else 0.0

    @property
    def sigma_minus(self) -> float:
        return self.group.sigma_minus * self.fade if self.group else 0.0


def ring_walk(substituents: Substituents, anchor: int, core: frozenset[int]) -> list[RingHit]:
    """Walk the aromatic system from an anchor in it and report substituents, ring nitrogens and fusions.

    Positions of the anchor's own six-membered ring are ortho, meta and para; those of fused rings are `far` and act
    by distance and by the parity of the path (the idea of Dewar and Grisdale 1962, field effect by distance and
    mesomeric effect by alternation).

    Parameters
    ----------
    substituents : Substituents
        Groups of the molecule.
    anchor : int
        Aromatic atom where the walk starts.
    core : frozenset of int
        Atoms of the site's own unit: walked through, not reported; their own substituents aren't reported either.

    Returns
    -------
    list of RingHit
        In order of distance.
    """
    graph = substituents.graph
    own = {atom: len(graph.rings[ring]) for ring in graph.atom_rings[anchor] for atom in graph.rings[ring]}
    far_fade = scales()["far_fade"]
    hits: list[RingHit] = []
    reached = {anchor}
    edge = [anchor]
    away = 0
    while edge:
        away += 1
        alternant = away % 2 == 1
        following = []
        for inner in edge:
            for other, order in graph.neighbours[inner]:
                if order == AROMATIC and other not in reached:
                    reached.add(other)
                    following.append(other)
        for atom in following:
            if atom in core:
                continue
            if atom in own:
                position, fade = _POSITION.get(away, "para"), 1.0
                if own[atom] == 5 and away == 2:
                    position = "meta"
            else:
                position, fade = "far", far_fade ** (away - 2)
            feature = _ring_feature(graph.star[atom])
            if feature:
                hits.append(RingHit(feature, None, (atom,), position, away, alternant, fade))
            for other, order in graph.neighbours[atom]:
                if order == AROMATIC or other in core:
                    continue
                group = None
                if order == 2:
                    feature = "oxo" if graph.element[other] == 8 else "thioxo"
                else:
                    feature, group = "group", substituents.group(other, atom, order)
                hits.append(RingHit(feature, group, (other,), position, away, alternant, fade))
        edge = following
    return hits


_POSITION = {1: "ortho", 2: "meta", 3: "para"}


@lru_cache(maxsize=50_000)
def _ring_feature(star: Star) -> str:
    """What the ring atom itself is, apart from a plain aromatic C-H or C-R."""
    atom, around = star_parts(star)
    if atom.element == 7:
        if atom.charge > 0:
            return "azinium"
        return "pyrrole-type nitrogen" if atom.degree + atom.hydrogens > 2 else "aza"
    if atom.element in (8, 16, 34):
        return "chalcogen"
    if atom.element == 6 and len(around) == 3 and all(order == AROMATIC for order, _ in around):
        return "fusion"
    return ""
