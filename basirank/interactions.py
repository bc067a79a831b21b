"""Interactions: how much the charge of one site moves the constant of another, and which pairs are one tautomer.

The same W lowers the second constant of a diamine, raises the amine of an amino acid and lowers its acid. It falls
with the number of bonds between the sites, more slowly along a conjugated path, and grows with parallel paths.
"""

from __future__ import annotations

from collections.abc import Collection, Sequence
from dataclasses import dataclass
from functools import cache, lru_cache

import numpy as np
from numpy.typing import NDArray

from .graph import Graph
from .sites import Site
from .tables import read_model_table, read_toml

_ACCEPTORS = frozenset({"n", "N2", "O2", "S2"})
"""Kinds of base that take a proton without giving up conjugation: with an acid N-H, O-H or S-H they are tautomers."""

_SHIFTING = frozenset({"azinone_nh", "azole_nh", "phenol", "thiol", "enol", "nh_acid", "sulfonamide_acid"})
"""Families of acids whose anion shares its charge with a ring or a double bond, so that the proton can move there."""

_LONGEST_SHIFT = 4
"""Bonds over which such a shift is one tautomeric unit (para or 1,5); farther apart it is a zwitterion of its own."""


@dataclass(frozen=True, slots=True)
class Law:
    """Parameters of the interaction law.

    Attributes
    ----------
    saturated, conjugated : ndarray, shape (n,)
        W by number of bonds, from one bond up [pK units].
    beyond : float
        Scale of W past n bonds [pK units].
    parallel_paths : float
        Share that each further shortest path adds [-].
    acid_share : float
        Factor for each acid whose anion is shared by its oxygens or a ring [-].
    ring : ndarray, shape (3,)
        W of two nitrogens of one aromatic ring, neighbours, 1,3 and 1,4 [pK units].
    hydrogen_bond : float
        Added where the anion of one acid holds the proton of the other: salicylic acid, peri-dihydroxynaphthalene
        [pK units].
    shared_proton : float
        Added where geometry holds one proton between the two sites [pK units].
    """

    saturated: NDArray[np.float64]
    conjugated: NDArray[np.float64]
    beyond: float
    parallel_paths: float
    acid_share: float
    ring: NDArray[np.float64]
    hydrogen_bond: float
    shared_proton: float


@cache
def prior_law() -> Law:
    """The law as `interactions.toml` has it, before any refinement."""
    table = read_toml("interactions.toml")
    return Law(
        np.array(table["saturated"]["values"]),
        np.array(table["conjugated"]["values"]),
        table["beyond"]["value"],
        table["parallel_paths"]["value"],
        table["delocalised_acid"]["value"],
        np.array(table["same_ring"]["values"]),
        table["hydrogen_bond"]["value"],
        table["shared_proton"]["value"],
    )


@cache
def law() -> Law:
    """The law in use: the prior, with refined values where `models/interactions.csv` has them."""
    prior = prior_law()
    refined = {
        (row["path"], int(row["bonds"])): float(row["value"]) for row in read_model_table("interactions.csv")
    }

    def updated(path: str, values: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.array([refined.get((path, bonds), value) for bonds, value in enumerate(values.tolist(), 1)])

    return Law(
        updated("saturated", prior.saturated),
        updated("conjugated", prior.conjugated),
        prior.beyond,
        refined.get(("parallel", 0), prior.parallel_paths),
        refined.get(("acid share", 0), prior.acid_share),
        updated("ring", prior.ring),
        refined.get(("hydrogen bond", 0), prior.hydrogen_bond),
        prior.shared_proton,
    )


@dataclass(frozen=True, slots=True)
class Paths:
    """Shortest paths between all pairs of n sites.

    Attributes
    ----------
    bonds, conjugated, count : ndarray of int, shape (n, n)
        Bonds on a shortest path (0: the same atom), how many of them are conjugated, number of shortest paths.
    acids : ndarray of int, shape (n, n)
        Number of sites of the pair whose anion is shared by its oxygens or a ring.
    special : ndarray of int, shape (n, n)
        1 for two nitrogens of one aromatic ring, 2 for two sites with one proton or one lone pair between them, 3 for
        two acids with a hydrogen bond between them, else 0.
    """

    bonds: NDArray[np.int64]
    conjugated: NDArray[np.int64]
    count: NDArray[np.int64]
    acids: NDArray[np.int64]
    special: NDArray[np.int64]


def coupling_matrix(paths: Paths, rule: Law) -> NDArray[np.float64]:
    """Interactions of all pairs of sites under a law.

    Parameters
    ----------
    paths : Paths
        Shortest paths between n sites (arrays of shape (m, n, n) give the couplings of m molecules).
    rule : Law
        Parameters.

    Returns
    -------
    ndarray, shape (n, n) or (m, n, n)
        W [pK units], symmetric, zero diagonal.

    Examples
    --------
    >>> one = np.array([[0, 3], [3, 0]])
    >>> none = np.zeros((2, 2), dtype=int)
    >>> float(coupling_matrix(Paths(one, none, none + 1, none, none), prior_law())[0, 1])  # 1,2-diaminoethane
    2.5
    """
    listed = len(rule.saturated)
    index = np.clip(paths.bonds, 1, listed) - 1
    share = paths.conjugated / np.maximum(paths.bonds, 1)
    single = rule.saturated[index] ** (1.0 - share) * rule.conjugated[index] ** share
    near = single * (1.0 + rule.parallel_paths * (1.0 - share) * (paths.count - 1))
    far = rule.beyond * (listed / np.maximum(paths.bonds, 1)) ** 2
    coupling = np.where(paths.bonds > listed, far, near) * rule.acid_share**paths.acids
    in_ring = rule.ring[np.clip(paths.bonds, 1, len(rule.ring)) - 1]
    coupling = np.where(paths.special == SAME_RING, in_ring, coupling)
    coupling = coupling + np.where(paths.special == SHARED_PROTON, rule.shared_proton, 0.0)
    coupling = coupling + np.where(paths.special == HYDROGEN_BOND, rule.hydrogen_bond, 0.0)
    return coupling * (1.0 - np.eye(paths.bonds.shape[-1]))


@cache
def _classes(section: str) -> frozenset[str]:
    return frozenset(read_toml("interactions.toml")[section]["classes"])


@cache
def _families(section: str) -> frozenset[str]:
    return frozenset(read_toml("interactions.toml")[section]["families"])


def _centre(site: Site) -> int:
    """Atom that stands for the charge of a site."""
    if site.row.family in _families("unit_centre"):
        return next((atom for role, atom in site.anchors if role == 2), site.atom)
    return site.atom


def _paths_from(graph: Graph, start: int, ends: Collection[int]) -> tuple[list[int], list[int], list[int]]:
    """Shortest distance, number of shortest paths and most conjugated bonds on one, out to the last end.

    For each atom; a distance of -1 marks those that lie farther away than all ends.
    """
    neighbours = graph.neighbours
    unsaturated = [kind != "C3" for kind in graph.kind]
    distance, count, conjugated = [-1] * len(unsaturated), [0] * len(unsaturated), [0] * len(unsaturated)
    distance[start], count[start] = 0, 1
    edge, sought = [start], {*ends} - {start}
    away = 0
    while edge and sought:
        away += 1
        following: list[int] = []
        for inner in edge:
            conjugable, number, along = unsaturated[inner], count[inner], conjugated[inner]
            for other, _ in neighbours[inner]:
                if distance[other] < 0:
                    distance[other] = away
                    count[other] = number
                    conjugated[other] = along + 1 if conjugable and unsaturated[other] else along
                    following.append(other)
                elif distance[other] == away:
                    count[other] += number
                    step = along + 1 if conjugable and unsaturated[other] else along
                    if step > conjugated[other]:
                        conjugated[other] = step
        sought.difference_update(following)
        edge = following
    return distance, count, conjugated


Pair = tuple[int, int, int, int, int]
"""Bonds, conjugated bonds, number of shortest paths, acids and special relation of two sites, as in `Paths`."""

SAME_RING, SHARED_PROTON, HYDROGEN_BOND = 1, 2, 3

_BOND_RING = 4
"""Bonds between the two oxygens of a hydrogen bond that closes a six-membered ring."""


def _one_azole(graph: Graph, first: int, second: int) -> bool:
    """Whether two atoms stand in one five-membered ring, or side by side in one ring: its hydrogen moves freely."""
    shared = [ring for ring in graph.atom_rings[first] if ring in graph.atom_rings[second]]
    beside = any(other == second for other, _ in graph.neighbours[first])
    return any(beside or len(graph.rings[ring]) == 5 for ring in shared)


def _hydrogen_bond(graph: Graph, first: Site, second: Site) -> bool:
    """Whether two acids four bonds apart stand ortho (hydroxyl and carboxyl or sulfo) or peri (two hydroxyls)."""
    families = {first.row.family, second.row.family}
    if "phenol" not in families:
        return False
    if families & _families("hydrogen_bond"):
        return True
    (one, _), *_ = graph.neighbours[first.atom]
    (other, _), *_ = graph.neighbours[second.atom]
    return families == {"phenol"} and not graph.ring_bond(one, other)


def _special(graph: Graph, first: Site, second: Site, distance: int) -> int:
    """What relation two sites have beside their distance: see `Paths.special`."""
    if first.kind == second.kind == "acid":
        bonded = distance == _BOND_RING and _hydrogen_bond(graph, first, second)
        return HYDROGEN_BOND if bonded else 0
    if graph.element[first.atom] == 6 == graph.element[second.atom]:
        feeding = {atom for atom in first.core if graph.element[atom] == 7}
        if first.kind == second.kind == "base" and not feeding.isdisjoint(second.core):
            return SHARED_PROTON
    if first.site_class in _classes("shared_proton") and second.site_class in _classes("shared_proton"):
        return SHARED_PROTON
    if graph.kind[first.atom] == "n" == graph.kind[second.atom] and graph.ring_bond(first.atom, second.atom):
        return SAME_RING
    return 0


def site_pairs(graph: Graph, sites: Sequence[Site]) -> dict[tuple[int, int], tuple[Pair, bool]]:
    """Path between the sites of each pair i < j, and whether they are one tautomeric unit (see `find_paths`)."""
    centres = [_centre(site) for site in sites]
    shared = [site.row.family in _families("delocalised_acid") for site in sites]
    pairs = {}
    for i, first in enumerate(sites[:-1]):
        distance, number, along = _paths_from(graph, centres[i], centres[i + 1 :])
        for j in range(i + 1, len(sites)):
            second, other = sites[j], centres[j]
            exclusive = False
            if first.kind != second.kind:
                base, acid = (first, second) if first.kind == "base" else (second, first)
                shift = (
                    0 < distance[other] <= _LONGEST_SHIFT
                    and distance[other] % 2 == 0
                    and along[other] == distance[other]
                    and graph.kind[base.atom] in _ACCEPTORS
                    and acid.row.family in _SHIFTING
                )
                in_ring = graph.kind[base.atom] == "n" == graph.kind[acid.atom]
                shift = shift or (in_ring and _one_azole(graph, base.atom, acid.atom))
                exclusive = shift or acid.atom in base.core
            acids = shared[i] + shared[j]
            special = _special(graph, first, second, distance[other])
            pairs[i, j] = (distance[other], along[other], number[other], acids, special), exclusive
    return pairs


@lru_cache(maxsize=10_000)
def _pair_coupling(pair: Pair) -> float:
    """Interaction of two sites under the law in use; paths repeat, and small arrays are dear."""
    paths = Paths(*[np.array([[0, number], [number, 0]]) for number in pair])
    return float(coupling_matrix(paths, law())[0, 1])


def couple(graph: Graph, sites: Sequence[Site]) -> tuple[NDArray[np.float64], NDArray[np.bool_] | None]:
    """Interactions of all pairs of sites under the law in use, and the tautomeric pairs.

    Parameters
    ----------
    graph : Graph
        Plain arrays of the molecule.
    sites : sequence of Site
        Its n sites.

    Returns
    -------
    coupling : ndarray, shape (n, n)
        W [pK units].
    exclusive : ndarray of bool, shape (n, n), or None
        Tautomeric pairs; None when there is none.
    """
    coupling = np.zeros((len(sites), len(sites)))
    exclusive: NDArray[np.bool_] | None = None
    for (i, j), (pair, one_unit) in site_pairs(graph, sites).items():
        coupling[i, j] = coupling[j, i] = _pair_coupling(pair)
        if one_unit:
            if exclusive is None:
                exclusive = np.zeros(coupling.shape, dtype=bool)
            exclusive[i, j] = exclusive[j, i] = True
    return coupling, exclusive


def find_paths(graph: Graph, sites: Sequence[Site]) -> tuple[Paths, NDArray[np.bool_] | None]:
    """Paths between all pairs of sites, and the pairs that are one tautomeric unit.

    A base and an acid are one unit when moving the acid's proton to the base gives a neutral tautomer: an acceptor
    (:n, =N, =O, =S) and an N-H, O-H or S-H two or four conjugated bonds apart (imidazole, pyridone, amidine), ring
    nitrogens of one azole or side by side, or an acid atom that belongs to the base's own unit. Their doubly charged
    state is then the neutral form again and isn't counted a second time.

    Parameters
    ----------
    graph : Graph
        Plain arrays of the molecule.
    sites : sequence of Site
        Its n sites.

    Returns
    -------
    paths : Paths
        Shortest paths.
    exclusive : ndarray of bool, shape (n, n), or None
        Tautomeric pairs; None when there is none.
    """
    n = len(sites)
    bonds = np.zeros((n, n), dtype=np.int64)
    conjugated, acids, special = bonds.copy(), bonds.copy(), bonds.copy()
    count = np.ones((n, n), dtype=np.int64)
    exclusive = np.zeros((n, n), dtype=bool)
    for (i, j), (pair, one_unit) in site_pairs(graph, sites).items():
        for array, number in zip((bonds, conjugated, count, acids, special), pair, strict=True):
            array[i, j] = array[j, i] = number
        exclusive[i, j] = exclusive[j, i] = one_unit
    return Paths(bonds, conjugated, count, acids, special), exclusive if exclusive.any() else None
