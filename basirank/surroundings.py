"""What surrounds a site, counted: kinds of atom by distance with the bond they hang on, paths to heteroatoms, nested shells.

The walk gives pieces (small tuples that repeat from molecule to molecule); a piece is spelled into its features only when
it is met for the first time, so that a long list costs no text.
"""

from __future__ import annotations

from collections.abc import Iterator
from functools import lru_cache

from .graph import Graph
from .sites import Site

REACH = 7
"""Bonds from the site within which atoms are counted."""

_HYDROGEN_REACH = 5
_PATH_REACH = 6
_NEST = 3

Path = tuple["Path", str, int] | None
"""Way from the site to an atom: the way so far, then the kind of atom and the bond order of one step."""

Piece = str | tuple[int, str] | tuple[int, str, Path] | tuple[int, str, str, int]
"""A feature itself (of the site), a ring closure (distance, kind), an atom's path (distance, kind, path), or an atom
(distance, label, kind it hangs on, bond order)."""


@lru_cache(maxsize=10_000)
def _label(kind: str, in_ring: bool, hydrogens: int, degree: int) -> str:
    """Label of an atom: its kind (`r` for a saturated ring), hydrogens and neighbours."""
    return f"{kind}{'r' if in_ring else ''} H{hydrogens} {degree}"


@lru_cache(maxsize=100_000)
def _shell(own: str, around: tuple[tuple[int, str], ...]) -> str:
    """Spelling of an atom with the spellings of its neighbours: one shell more."""
    return f"{own}({','.join(sorted(f'{order}{text}' for order, text in around))})"


class Surroundings:
    """Surroundings of the sites of one molecule; labels and shells of its atoms are made once for all of them.

    Parameters
    ----------
    graph : Graph
        Plain arrays of the molecule.
    """

    __slots__ = ("graph", "_labels", "_shells")

    def __init__(self, graph: Graph) -> None:
        self.graph = graph
        self._labels = [
            _label(kind, bool(rings) and not aromatic, hydrogens, len(neighbours))
            for kind, rings, aromatic, hydrogens, neighbours in zip(
                graph.kind, graph.atom_rings, graph.aromatic, graph.hydrogens, graph.neighbours, strict=True
            )
        ]
        self._shells: tuple[dict[int, str], ...] = tuple({} for _ in range(_NEST + 1))

    def _nested(self, atom: int, shells: int) -> str:
        """Spelling of an atom and so many shells around it."""
        known = self._shells[shells]
        text = known.get(atom)
        if text is None:
            if shells == 0:
                text = f"{self.graph.kind[atom]}H{self.graph.hydrogens[atom]}"
            else:
                inner = shells - 1
                around = tuple([(order, self._nested(other, inner)) for other, order in self.graph.neighbours[atom]])
                text = _shell(self._nested(atom, inner), around)
            known[atom] = text
        return text

    def pieces(self, start: int) -> list[Piece]:
        """Pieces of the surroundings of one atom, each as often as it occurs."""
        graph, labels = self.graph, self._labels
        kind, neighbours = graph.kind, graph.neighbours
        hydrogens = graph.hydrogens[start]
        found: list[Piece] = [
            f"0 {kind[start]} H{hydrogens}",
            f"0 degree {len(neighbours[start])} H{hydrogens}",
            f"0 ring {graph.smallest_ring(start)}",
        ]
        if len(graph.atom_rings[start]) > 1:
            found.append(f"0 rings {len(graph.atom_rings[start])}")
        distance = {start: 0}
        path: dict[int, Path] = {start: None}
        edge = [start]
        for away in range(1, REACH + 1):
            following = []
            for inner in edge:
                inner_kind = kind[inner]
                way = path[inner]
                for other, order in neighbours[inner]:
                    known = distance.get(other)
                    if known is not None:
                        if known == away:
                            found.append((away, inner_kind))
                        continue
                    distance[other] = away
                    following.append(other)
                    path[other] = step = (way, inner_kind, order)
                    found.append((away, labels[other], inner_kind, order))
                    other_kind = kind[other]
                    if other_kind != "C3" and other_kind != "c" and away <= _PATH_REACH:
                        found.append((away, other_kind, step))
            edge = following
        found += [f"0 nest {self._nested(start, shells)}" for shells in range(1, _NEST + 1)]
        return found


def spelled(piece: Piece) -> tuple[str, ...]:
    """Features of a piece; the first character of each is the distance in bonds (0 for the site itself)."""
    if isinstance(piece, str):
        return (piece,)
    if len(piece) == 2:
        away, kind = piece
        return (f"{away} closure {kind}",)
    if len(piece) == 3:
        away, kind, way = piece
        steps = []
        while way is not None:
            way, inner, order = way
            steps.append(f"{inner}{order}")
        return (f"{away} {kind} by {''.join(reversed(steps))}",)
    away, label, inner, order = piece
    token = label.split()[0]
    on = (f"{away} {token}", f"{away} {token} on {inner}{order}")
    return (*on, f"{away} {label} {order}") if away <= _HYDROGEN_REACH else on


def site_counts(graph: Graph, site: Site) -> dict[str, int]:
    """Counts of what surrounds a site.

    Parameters
    ----------
    graph : Graph
        Plain arrays of the molecule.
    site : Site
        The site.

    Returns
    -------
    dict of str to int
        Feature to count. The first character is the distance in bonds (0 for the site itself), by which the
        feature is weighted.
    """
    counts: dict[str, int] = {}
    for piece in Surroundings(graph).pieces(site.atom):
        for feature in spelled(piece):
            counts[feature] = counts.get(feature, 0) + 1
    return counts


def weighted(counts: dict[str, int], fade: float) -> Iterator[tuple[str, float]]:
    """Unary features with weights: a count of three is three features, so that shared counts add up to minima."""
    for feature, count in counts.items():
        weight = fade ** int(feature[0])
        for copy in range(count):
            yield (feature if copy == 0 else f"{feature} #{copy + 1}"), weight
