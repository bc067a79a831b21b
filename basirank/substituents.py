"""Substituent constants: a group is spelled by walking the graph out from its point of attachment, then looked up.

The table holds Hammett, Taft and Charton constants by group. A group that is not in the table gets constants
built from its atoms (an additive estimate that fades along the chain), and says so: no substituent ever counts as
hydrogen in silence.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache

from rdkit import Chem

from .graph import Graph, build_graph
from .tables import read_table, read_toml

_ORDER_MARK = {1: "-", 2: "=", 3: "#", 4: ":"}


@dataclass(frozen=True, slots=True)
class Group:
    """Constants of one substituent.

    Attributes
    ----------
    name : str
        Name in the table, or the spelling of the group with the word "estimated".
    sigma_meta, sigma_para, sigma_minus : float
        Hammett constants; `sigma_minus` is the para constant in conjugation with an amino or oxido group [-].
    sigma_star : float
        Taft's polar constant of the group attached directly (CH3 = 0) [-].
    sigma_i, sigma_r : float
        Inductive and resonance constants [-].
    steric : float
        Charton's steric parameter [-].
    source : str
        Where the constants were taken from.
    estimated : bool
        Built from atoms, not found in the table.
    """

    name: str
    sigma_meta: float
    sigma_para: float
    sigma_minus: float
    sigma_star: float
    sigma_i: float
    sigma_r: float
    steric: float
    source: str
    estimated: bool = False


@cache
def _scales() -> dict[str, float]:
    """Relations between the scales of substituent constants."""
    return {name: row["value"] for name, row in read_toml("scales.toml").items()}


def spell(graph: Graph, atom: int, origin: int, order: int, depth: int) -> str:
    """Spell a substituent: kind of atom, hydrogen, bond orders and neighbours, `depth` bonds out.

    The last layer holds only the kind of atom, so that a row of the table stands for all its homologues. Atoms of
    three- and four-membered rings carry the size of their ring: a cyclopropyl isn't an isopropyl.
    """
    kind = graph.kind[atom]
    if depth == 1:
        return _ORDER_MARK[order] + kind
    if graph.atom_rings[atom] and graph.smallest_ring(atom) < 5:
        kind += f"/{graph.smallest_ring(atom)}"
    branches = sorted(
        spell(graph, other, atom, other_order, depth - 1)
        for other, other_order in graph.neighbours[atom]
        if other != origin
    )
    return f"{_ORDER_MARK[order]}{kind}H{graph.hydrogens[atom]}({','.join(branches)})"


def _complete(row: dict[str, str]) -> Group:
    """Fill a row's empty cells from the relations between the scales."""
    known = {name: float(text) for name, text in row.items() if text and name.startswith(("sigma", "steric"))}
    scales = _scales()
    meta, para, star = known.get("sigma_m"), known.get("sigma_p"), known.get("sigma_star")
    inductive, resonance = known.get("sigma_i"), known.get("sigma_r")
    share = scales["meta_resonance_share"]
    if inductive is None:
        if meta is not None and para is not None:
            inductive = (meta - share * para) / (1.0 - share)
        elif star is not None:
            inductive = star / scales["sigma_star_per_sigma_i"]
        else:
            inductive = meta if meta is not None else 0.0
    if resonance is None:
        resonance = para - inductive if para is not None else 0.0
    if meta is None:
        meta = inductive + share * resonance
    if para is None:
        para = inductive + resonance
    if star is None:
        star = inductive * scales["sigma_star_per_sigma_i"]
    minus = known.get("sigma_minus", para)
    steric = known.get("steric", 0.6)
    return Group(row["name"], meta, para, minus, star, inductive, resonance, steric, row["source"])


@cache
def group_table() -> tuple[dict[str, Group], ...]:
    """Table of groups by depth of their spelling, deepest first."""
    by_depth: dict[int, dict[str, Group]] = {}
    for row in read_table("substituents.csv"):
        mol = Chem.MolFromSmiles(row["smiles"])
        graph = build_graph(mol)
        (first, order), *more = graph.neighbours[0]
        if more or mol.GetAtomWithIdx(0).GetAtomicNum() != 0:
            raise ValueError(f"substituents.csv: {row['smiles']!r} must start at one point of attachment, `*`")
        key = spell(graph, first, 0, order, int(row["depth"]))
        by_depth.setdefault(int(row["depth"]), {})[key] = _complete(row)
    return tuple(by_depth.get(depth, {}) for depth in range(max(by_depth), 0, -1))


@cache
def _atom_constants() -> dict[str, tuple[float, float]]:
    """sigma_I and sigma_R by kind of the first atom, for groups that are not in the table."""
    return {row["kind"]: (float(row["sigma_i"]), float(row["sigma_r"])) for row in read_table("atom_constants.csv")}


def _atom_constant(graph: Graph, atom: int) -> tuple[float, float]:
    """Constants of one kind of atom; an unlisted kind takes those of its element without the marks."""
    table = _atom_constants()
    kind = graph.kind[atom]
    for name in (kind, kind.rstrip("+-"), "+" if "+" in kind else "other"):
        if name in table:
            return table[name]
    return table["other"]


def _estimate(graph: Graph, atom: int, origin: int, order: int) -> Group:
    """Constants of an unlisted group from its atoms, each shell fading by the attenuation of one bond."""
    scales = _scales()
    inductive, resonance = _atom_constant(graph, atom)
    shell, seen, fade = [(atom, origin)], {atom, origin}, 1.0
    for _ in range(3):
        fade *= scales["attenuation"]
        following = []
        for inner, behind in shell:
            for other, _order in graph.neighbours[inner]:
                if other != behind and other not in seen:
                    seen.add(other)
                    following.append((other, inner))
                    inductive += fade * _atom_constant(graph, other)[0]
        shell = following
    meta = inductive + scales["meta_resonance_share"] * resonance
    para = inductive + resonance
    star = inductive * scales["sigma_star_per_sigma_i"]
    name = f"{spell(graph, atom, origin, order, 2)[1:]} (estimated from its atoms)"
    return Group(name, meta, para, para, star, inductive, resonance, 0.6, "derived: from its atoms", True)


class Substituents:
    """Groups of one molecule, recognised on demand and remembered.

    Parameters
    ----------
    graph : Graph
        Plain arrays of the molecule.
    """

    __slots__ = ("graph", "_groups")

    def __init__(self, graph: Graph) -> None:
        self.graph = graph
        self._groups: dict[tuple[int, int], Group] = {}

    def group(self, atom: int, origin: int, order: int = 1) -> Group:
        """Group that starts at `atom`, seen from `origin`."""
        found = self._groups.get((atom, origin))
        if found is None:
            found = _lookup(self.graph, atom, origin, order)
            self._groups[atom, origin] = found
        return found


_SPELLED: dict[str, Group | None] = {}
"""Groups already met, by their deepest spelling; emptied when it grows past a bound."""


def _lookup(graph: Graph, atom: int, origin: int, order: int) -> Group:
    tables = group_table()
    deepest = spell(graph, atom, origin, order, len(tables))
    if deepest in _SPELLED:
        found = _SPELLED[deepest]
    else:
        found = None
        for shallower, table in enumerate(tables):
            depth = len(tables) - shallower
            found = table.get(deepest if not shallower else spell(graph, atom, origin, order, depth))
            if found is not None:
                break
        if len(_SPELLED) > 50_000:
            _SPELLED.clear()
        _SPELLED[deepest] = found
    return found if found is not None else _estimate(graph, atom, origin, order)


@dataclass(frozen=True, slots=True)
class ChainHit:
    """One group met on a walk along saturated carbon: its atoms, its distance and what is left of its effect."""

    group: Group
    atoms: tuple[int, ...]
    distance: int
    share: float

    @property
    def sigma_star(self) -> float:
        """Polar constant at the anchor [-].

        Past the first bond the group acts by its inductive constant alone, on the sigma* scale (Charton 1981);
        sigma* of an amino group measured in direct contact is too small for that.
        """
        if self.distance == 1 or self.group.sigma_i == 0.0:
            return self.group.sigma_star * self.share
        return self.group.sigma_i * _scales()["sigma_star_per_sigma_i"] * self.share


def chain_walk(substituents: Substituents, anchor: int, core: frozenset[int]) -> Iterator[ChainHit]:
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

    Yields
    ------
    ChainHit
        Distance counts the bonds from the anchor to the group.
    """
    graph = substituents.graph
    fade = _scales()["attenuation"]
    reach = _scales()["smallest_share"]

    def follow(atom: int, origin: int, order: int, path: tuple[int, ...], share: float) -> Iterator[ChainHit]:
        if graph.kind[atom] == "C3" and not _is_halocarbon(graph, atom, origin):
            share *= fade
            if share < reach:
                return
            for other, other_order in graph.neighbours[atom]:
                if other != origin and other not in path and other not in core:
                    yield from follow(other, atom, other_order, (*path, other), share)
            return
        group = substituents.group(atom, origin, order)
        yield ChainHit(group, (atom,), len(path), share)
        if graph.aromatic[atom]:
            yield from _through_ring(substituents, atom, origin, core, len(path), share)
        elif share * fade >= reach:
            yield from _beyond(atom, origin, path, share * fade)

    def _beyond(atom: int, origin: int, path: tuple[int, ...], share: float) -> Iterator[ChainHit]:
        """Past a functional group: its saturated neighbours, one bond weaker for each atom crossed."""
        edge = [(atom, origin, share)]
        crossed = {atom, *path}
        while edge:
            inner, behind, left = edge.pop()
            for other, order in graph.neighbours[inner]:
                if other == behind or other in crossed or other in core or left < reach:
                    continue
                if graph.kind[other] == "C3":
                    if not _is_halocarbon(graph, other, inner):
                        yield from follow(other, inner, order, (*path, other), left)
                elif not graph.aromatic[other] and graph.element[inner] != 1:
                    crossed.add(other)
                    edge.append((other, inner, left * fade))

    for other, order in graph.neighbours[anchor]:
        if other not in core:
            yield from follow(other, anchor, order, (other,), 1.0)


def _is_halocarbon(graph: Graph, atom: int, origin: int) -> bool:
    """A carbon whose other neighbours are two or more halogens (CHF2, CF3, CCl3): one group, not a chain."""
    halogens = sum(graph.element[other] in (9, 17, 35, 53) for other, _ in graph.neighbours[atom] if other != origin)
    return halogens >= 2


def _through_ring(
    substituents: Substituents, atom: int, origin: int, core: frozenset[int], distance: int, share: float
) -> Iterator[ChainHit]:
    """Substituents of an aromatic group, passed on to the chain by its transmission."""
    passed = share * _scales()["ring_transmission"]
    for hit in ring_walk(substituents, atom, core | {origin}):
        if hit.group is not None and hit.position != "ortho":
            sigma = hit.sigma_para if hit.alternant else hit.sigma_meta
            yield ChainHit(_as_star(hit.group, sigma), hit.atoms, distance + hit.distance, passed)
        elif hit.group is not None:
            yield ChainHit(_as_star(hit.group, hit.group.sigma_para), hit.atoms, distance + 1, passed)


@cache
def _as_star(group: Group, sigma: float) -> Group:
    """A ring substituent's Hammett constant, carried on the polar scale of the ring that passes it on."""
    return Group(
        f"{group.name} on the ring", sigma, sigma, sigma, sigma, 0.0, 0.0, group.steric, group.source, group.estimated
    )


@dataclass(frozen=True, slots=True)
class RingHit:
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
    def sigma_meta(self) -> float:
        return self.group.sigma_meta * self.fade if self.group else 0.0

    @property
    def sigma_para(self) -> float:
        return self.group.sigma_para * self.fade if self.group else 0.0

    @property
    def sigma_minus(self) -> float:
        return self.group.sigma_minus * self.fade if self.group else 0.0


def ring_walk(substituents: Substituents, anchor: int, core: frozenset[int]) -> Iterator[RingHit]:
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

    Yields
    ------
    RingHit
        In order of distance.
    """
    graph = substituents.graph
    own = {atom: len(graph.rings[ring]) for ring in graph.atom_rings[anchor] for atom in graph.rings[ring]}
    far_fade = _scales()["far_fade"]
    distance = {anchor: 0}
    edge = [anchor]
    while edge:
        following = []
        for inner in edge:
            for other, order in graph.neighbours[inner]:
                if order == 4 and other not in distance:
                    distance[other] = distance[inner] + 1
                    following.append(other)
        for atom in following:
            away = distance[atom]
            if atom in own:
                position, fade = _POSITION.get(away, "para"), 1.0
                if own[atom] == 5 and away == 2:
                    position = "meta"
            else:
                position, fade = "far", far_fade ** (away - 2)
            alternant = away % 2 == 1
            if atom in core:
                continue
            feature = _ring_feature(graph, atom)
            if feature:
                yield RingHit(feature, None, (atom,), position, away, alternant, fade)
            for other, order in graph.neighbours[atom]:
                if order == 4 or other in core:
                    continue
                if order == 2:
                    yield RingHit(
                        "oxo" if graph.element[other] == 8 else "thioxo", None, (other,), position, away, alternant, fade
                    )
                else:
                    group = substituents.group(other, atom, order)
                    yield RingHit("group", group, (other,), position, away, alternant, fade)
        edge = following


_POSITION = {1: "ortho", 2: "meta", 3: "para"}


def _ring_feature(graph: Graph, atom: int) -> str:
    """What the ring atom itself is, apart from a plain aromatic C-H or C-R."""
    element = graph.element[atom]
    if element == 7:
        if graph.charge[atom] > 0:
            return "azinium"
        return "pyrrole-type nitrogen" if len(graph.neighbours[atom]) + graph.hydrogens[atom] > 2 else "aza"
    if element in (8, 16, 34):
        return "chalcogen"
    if element == 6 and len(graph.neighbours[atom]) == 3 and all(order == 4 for _, order in graph.neighbours[atom]):
        return "fusion"
    return ""
