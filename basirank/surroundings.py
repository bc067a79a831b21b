"""What surrounds a site, counted: atoms by distance with the bond they hang on, paths to heteroatoms, nested shells.

The walk gives pieces (small tuples that repeat from molecule to molecule); a piece is spelled into its features only
when it is met for the first time, so that a long list costs no text.
"""

from __future__ import annotations

from collections.abc import Iterator
from functools import lru_cache

from .graph import Graph, Star, star_parts, type_of
from .sites import Site

REACH = 7
"""Bonds from the site within which atoms are counted."""

_HYDROGEN_REACH = 5
_PATH_REACH = 6
_SATURATED_REACH = 4
"""Saturated carbon farther away is not counted: a longer chain moves nothing."""


Piece = str | tuple[int, str] | tuple[int, str, str] | tuple[int, str, str, int]
"""A feature itself (of the site), a ring closure (distance, kind), an atom's path (distance, kind, kinds of atom and
bond orders on the way), or an atom (distance, label, kind it hangs on, bond order)."""


@lru_cache(maxsize=10_000)
def _label(type_number: int, in_ring: bool) -> str:
    """Label of an atom: its kind (`r` for a saturated ring), hydrogens and neighbours."""
    atom = type_of(type_number)
    return f"{atom.kind}{'r' if in_ring else ''} H{atom.hydrogens} {atom.degree}"


@lru_cache(maxsize=100_000)
def _shell(own: str, around: tuple[tuple[int, str], ...]) -> str:
    """Spelling of an atom with the spellings of its neighbours: one shell more."""
    return f"{own}({','.join(sorted(f'{order}{text}' for order, text in around))})"


@lru_cache(maxsize=100_000)
def _first_shell(star: Star) -> str:
    """Spelling of an atom with its neighbours."""
    own, around = star_parts(star)
    return _shell(
        f"{own.kind}H{own.hydrogens}", tuple([(order, f"{o.kind}H{o.hydrogens}") for order, o in around])
    )


class Surroundings:
    """Surroundings of the sites of one molecule; labels and shells of its atoms are made once for all of them.

    Parameters
    ----------
    graph : Graph
        Plain arrays of the molecule.
    """

    __slots__ = ("_labels", "_second", "graph")

    def __init__(self, graph: Graph) -> None:
        self.graph = graph
        self._labels = [
            _label(star[0], size > 0 and not aromatic)
            for star, size, aromatic in zip(graph.star, graph.ring_size, graph.aromatic, strict=True)
        ]
        self._second: dict[int, str] = {}

    def _second_shell(self, atom: int) -> str:
        text = self._second.get(atom)
        if text is None:
            star = self.graph.star
            around = tuple(
                [(order, _first_shell(star[other])) for other, order in self.graph.neighbours[atom]]
            )
            text = self._second[atom] = _shell(_first_shell(star[atom]), around)
        return text

    def _nests(self, atom: int) -> tuple[str, str, str]:
        """Spellings of an atom with one, two and three shells around it."""
        second = self._second_shell(atom)
        around = tuple([(order, self._second_shell(other)) for other, order in self.graph.neighbours[atom]])
        return _first_shell(self.graph.star[atom]), second, _shell(second, around)

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
        reached = [0] * len(kind)  # the distance of an atom, 0 before it is met
        reached[start] = -1
        edge = [(start, "")]  # the shell reached last, and the path to each of its atoms
        for away in range(1, REACH + 1):
            # an atom met from several sides hangs on the one that spells first, whatever the order of the atoms
            hung: dict[int, tuple[str, int, str]] = {}
            for inner, way in edge:
                inner_kind = kind[inner]
                for other, order in neighbours[inner]:
                    if not reached[other]:
                        reached[other] = away
                        hung[other] = (inner_kind, order, way)
                    elif reached[other] == away:
                        found.append((away, kind[other]))
                        hung[other] = min(hung[other], (inner_kind, order, way))
            if not hung:
                break
            edge = []
            for other, (inner_kind, order, way) in hung.items():
                other_kind = kind[other]
                if away <= _PATH_REACH:
                    way = f"{way}{inner_kind}{order}"
                    if other_kind != "C3" and other_kind != "c":
                        found.append((away, other_kind, way))
                edge.append((other, way))
                if other_kind != "C3" or away <= _SATURATED_REACH:
                    found.append((away, labels[other], inner_kind, order))
        found += [f"0 nest {text}" for text in self._nests(start)]
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
        return (f"{away} {kind} by {way}",)
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


def feature_weight(fade: float, away: int) -> float:
    """Weight of a feature by its distance in bonds, in steps of 2^-12 so that sums of weights are exact."""
    return round(fade**away * 4096) / 4096


def weighted(counts: dict[str, int], fade: float) -> Iterator[tuple[str, float]]:
    """Unary features with weights: a count of three is three features, so that shared counts add up to minima."""
    for feature, count in counts.items():
        weight = feature_weight(fade, int(feature[0]))
        for copy in range(count):
            yield (feature if copy == 0 else f"{feature} #{copy + 1}"), weight
