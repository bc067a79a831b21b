"""Substituent constants: a group is spelled by walking the graph out from its point of attachment, then looked up.

The table holds Hammett, Taft and Charton constants by group. A group that is not in the table gets constants
built from its atoms (an additive estimate that fades along the chain), and says so: no substituent ever counts as
hydrogen in silence.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

from rdkit import Chem

from .graph import Graph, Star, build_graph
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
    sigma_ortho : float
        Apparent ortho constant at an azine nitrogen, on the scale 5.25 - 5.90 sigma [-].
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
    sigma_ortho: float = 0.0


@cache
def scales() -> dict[str, float]:
    """Relations between the scales of substituent constants."""
    return {name: row["value"] for name, row in read_toml("scales.toml").items()}


def _small_ring(graph: Graph, atom: int) -> int:
    """Ring size that a spelling shows: three or four, at a saturated atom."""
    size = graph.ring_size[atom]
    return size if 0 < size < 5 and graph.kind[atom].endswith("3") else 0


def spell(graph: Graph, atom: int, origin: int, order: int, depth: int) -> str:
    """Spell a substituent: kind of atom, hydrogen, bond orders and neighbours, `depth` bonds out.

    The last layer holds only the kind of atom, so that a row of the table stands for all its homologues.
    Saturated atoms of three- and four-membered rings carry the size of their ring: a cyclopropyl isn't an isopropyl.
    """
    kind = graph.kind[atom]
    if depth == 1:
        return _ORDER_MARK[order] + kind
    if _small_ring(graph, atom):
        kind += f"/{_small_ring(graph, atom)}"
    branches = sorted(
        spell(graph, other, atom, other_order, depth - 1)
        for other, other_order in graph.neighbours[atom]
        if other != origin
    )
    return f"{_ORDER_MARK[order]}{kind}H{graph.hydrogens[atom]}({','.join(branches)})"


def _complete(row: dict[str, str]) -> Group:
    """Fill a row's empty cells from the relations between the scales."""
    known = {name: float(text) for name, text in row.items() if text and name.startswith(("sigma", "steric"))}
    relation = scales()
    meta, para, star = known.get("sigma_m"), known.get("sigma_p"), known.get("sigma_star")
    inductive, resonance = known.get("sigma_i"), known.get("sigma_r")
    share = relation["meta_resonance_share"]
    if inductive is None:
        if meta is not None and para is not None:
            inductive = (meta - share * para) / (1.0 - share)
        elif star is not None:
            inductive = star / relation["sigma_star_per_sigma_i"]
        else:
            inductive = meta if meta is not None else 0.0
    if resonance is None:
        resonance = para - inductive if para is not None else 0.0
    if meta is None:
        meta = inductive + share * resonance
    if para is None:
        para = inductive + resonance
    if star is None:
        star = inductive * relation["sigma_star_per_sigma_i"]
    # only an acceptor is in stronger conjugation with an amino or oxido group than sigma_para says
    minus = known.get("sigma_minus", para) if resonance >= 0.0 else para
    steric = known.get("steric", 0.6)
    ortho = known.get("sigma_o", ortho_constant(inductive, resonance))
    return Group(
        row["name"], meta, para, minus, star, inductive, resonance, steric, row["source"], False, ortho
    )


def ortho_constant(inductive: float, resonance: float) -> float:
    """Apparent ortho constant at an azine nitrogen from sigma_I and sigma_R (Charton 1971) [-]."""
    return scales()["ortho_inductive"] * inductive + scales()["ortho_resonance"] * resonance


@cache
def group_table() -> tuple[dict[str, Group], ...]:
    """Table of groups by depth of their spelling, deepest first."""
    by_depth: dict[int, dict[str, Group]] = {}
    for row in read_table("substituents.csv"):
        mol = Chem.MolFromSmiles(row["smiles"])
        graph = build_graph(mol)
        (first, order), *more = graph.neighbours[0]
        if more or mol.GetAtomWithIdx(0).GetAtomicNum() != 0:
            raise ValueError(
                f"substituents.csv: {row['smiles']!r} must start at one point of attachment, `*`"
            )
        key = spell(graph, first, 0, order, int(row["depth"]))
        same_depth = by_depth.setdefault(int(row["depth"]), {})
        if key in same_depth:
            raise ValueError(f"substituents.csv: {row['name']!r} is spelled like {same_depth[key].name!r}")
        same_depth[key] = _complete(row)
    return tuple(by_depth.get(depth, {}) for depth in range(max(by_depth), 0, -1))


@cache
def _atom_constants() -> dict[str, tuple[float, float]]:
    """sigma_I and sigma_R by kind of the first atom, for groups that are not in the table."""
    return {
        row["kind"]: (float(row["sigma_i"]), float(row["sigma_r"]))
        for row in read_table("atom_constants.csv")
    }


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
    relation = scales()
    inductive, resonance = _atom_constant(graph, atom)
    shell, seen, fade = [(atom, origin)], {atom, origin}, 1.0
    for _ in range(3):
        fade *= relation["attenuation"]
        following = []
        for inner, behind in shell:
            for other, _order in graph.neighbours[inner]:
                if other != behind and other not in seen:
                    seen.add(other)
                    following.append((other, inner))
                    inductive += fade * _atom_constant(graph, other)[0]
        shell = following
    meta = inductive + relation["meta_resonance_share"] * resonance
    para = inductive + resonance
    star = inductive * relation["sigma_star_per_sigma_i"]
    name = f"{spell(graph, atom, origin, order, 2)[1:]} (estimated from its atoms)"
    ortho = ortho_constant(inductive, resonance)
    return Group(
        name, meta, para, para, star, inductive, resonance, 0.6, "derived: from its atoms", True, ortho
    )


class Substituents:
    """Groups of one molecule, recognised on demand and remembered.

    Parameters
    ----------
    graph : Graph
        Plain arrays of the molecule.
    """

    __slots__ = ("_groups", "graph")

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


@cache
def _spelled_further() -> tuple[frozenset[str], ...]:
    """By depth (0 unused), the spellings to which some deeper row of the table belongs: it pays to go on."""
    further: list[set[str]] = [set() for _ in range(len(group_table()) + 1)]
    for row in read_table("substituents.csv"):
        graph = build_graph(Chem.MolFromSmiles(row["smiles"]))
        first, order = graph.neighbours[0][0]
        for depth in range(1, int(row["depth"])):
            further[depth].add(spell(graph, first, 0, order, depth))
    return tuple(map(frozenset, further))


Arms = tuple[tuple[int, Star, int], ...]
Near = tuple[Star, int, int, Arms, tuple[Arms, ...]]
"""Star of the first atom, the bond into it, its small ring; the same of the atoms one and two bonds on."""

_NEAR: dict[Near, tuple[Group | None, int]] = {}
"""By what lies near, the row of the table so far and the depth from which deeper rows may follow (0: none).

Emptied when it grows past a bound."""


def _search(graph: Graph, atom: int, origin: int, order: int, last: int) -> tuple[Group | None, int]:
    """Deepest row that spells the group, down to `last`, and the depth at which to go on (0: nowhere)."""
    tables, further = group_table(), _spelled_further()
    found = None
    for depth in range(1, last + 1):
        spelling = spell(graph, atom, origin, order, depth)
        found = tables[-depth].get(spelling, found)
        if spelling not in further[depth]:
            return found, 0
    return found, last + 1


def _lookup(graph: Graph, atom: int, origin: int, order: int) -> Group:
    """Deepest row of the table that spells the group, else an estimate from its atoms.

    Spelled from the shallow end: few groups have rows deeper than two or three bonds, and so far the answer
    is remembered by the stars of the atoms (which decide the spelling).
    """
    star = graph.star[atom]
    way_in, ring = graph.star[origin][0] << 3 | order, _small_ring(graph, atom)
    near: Near = (star, way_in, ring, (), ())
    answer = _NEAR.get(near) or _remember(near, _search(graph, atom, origin, order, 2))
    if answer[1]:
        arms = _arms(graph, atom, origin)
        near = (star, way_in, ring, arms, ())
        answer = _NEAR.get(near) or _remember(near, _search(graph, atom, origin, order, 3))
        if answer[1]:
            beyond = [other for other, _ in graph.neighbours[atom] if other != origin]
            near = (star, way_in, ring, arms, tuple([_arms(graph, other, atom) for other in beyond]))
            answer = _NEAR.get(near) or _remember(near, _search(graph, atom, origin, order, 4))
            if answer[1]:
                answer = _search(graph, atom, origin, order, len(group_table()))
    return answer[0] if answer[0] is not None else _estimate(graph, atom, origin, order)


def _arms(graph: Graph, atom: int, origin: int) -> Arms:
    """Bond, star and small ring of each neighbour but the one that the walk came from."""
    star = graph.star
    return tuple(
        [
            (o, star[other], _small_ring(graph, other))
            for other, o in graph.neighbours[atom]
            if other != origin
        ]
    )


def _remember(near: Near, answer: tuple[Group | None, int]) -> tuple[Group | None, int]:
    if len(_NEAR) > 50_000:
        _NEAR.clear()
    _NEAR[near] = answer
    return answer
