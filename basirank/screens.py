"""Screens: which patterns of a table can match a molecule at all, told from its atoms and their neighbours.

A SMARTS pattern is asked, atom by atom, for what it says of the atom and of the bonds and atoms beside it
(element, aromaticity, charge, hydrogens, connections, bond orders); recursive parts, rings and anything else
count as "perhaps". So a screen never excludes a match, and it is made from the patterns themselves: a new row
of a table needs no care. What a star can satisfy is remembered, since stars repeat among molecules.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass
from functools import reduce
from itertools import pairwise
from operator import or_
from typing import Any

from rdkit import Chem

from .graph import AROMATIC, AtomType, Graph, Star, star_parts

_MOST_REMEMBERED = 50_000

_ATOM_TESTS: dict[str, Callable[[Any, int], bool]] = {
    "AtomType": lambda atom, value: atom.element == value % 1000 and atom.aromatic == (value > 1000),
    "AtomAtomicNum": lambda atom, value: atom.element == value,
    "AtomIsAromatic": lambda atom, value: atom.aromatic == bool(value),
    "AtomIsAliphatic": lambda atom, value: atom.aromatic != bool(value),
    "AtomFormalCharge": lambda atom, value: atom.charge == value,
    "AtomHCount": lambda atom, value: atom.hydrogens == value,
    "AtomTotalDegree": lambda atom, value: atom.degree + atom.hydrogens == value,
}
_BOND_TESTS: dict[str, Callable[[Any, int], bool]] = {
    "BondOrder": lambda order, value: order == (AROMATIC if value == 12 else value),
    "SingleOrAromaticBond": lambda order, _: order in (1, AROMATIC),
}


Arm = tuple[str, str]
"""What a pattern says of a bond and of the atom beyond it: descriptions of the queries."""

Tests = dict[str, Callable[[Any, int], bool]]


def _truth(lines: Sequence[str], subject: AtomType | int, tests: Tests) -> bool | None:
    """Truth of a query as RDKit describes it, a node a line, inner ones set in by two; None: unknown."""
    words = lines[0].split()
    if words[0] in ("AtomAnd", "AtomOr", "BondAnd", "BondOr") and len(words) == 1:
        depth = len(lines[0]) - len(lines[0].lstrip()) + 2
        starts = [n for n, line in enumerate(lines) if len(line) - len(line.lstrip()) == depth]
        parts = [lines[start:end] for start, end in pairwise([*starts, len(lines)])]
        inner = [_truth(part, subject, tests) for part in parts]
        decisive = words[0].endswith("Or")
        return decisive if decisive in inner else None if None in inner else not decisive
    if words[0] not in tests or len(words) != 4 or words[2] not in ("=", "!=") or words[3] != "val":
        return None
    return tests[words[0]](subject, int(words[1])) == (words[2] == "=")


def _may(description: str, subject: AtomType | int, tests: Tests) -> bool:
    """Whether an atom or bond may satisfy a query; what isn't understood may be so."""
    return _truth([line for line in description.splitlines() if line.strip()], subject, tests) is not False


@dataclass(frozen=True, slots=True)
class _Demand:
    """What a pattern says of one of its atoms and its neighbours: descriptions of the queries."""

    atom: str
    arms: tuple[tuple[Arm, int], ...]  # with the number of neighbours that each asks for


def _demand(atom: Chem.Atom) -> _Demand:
    bonds = atom.GetBonds()
    arms = Counter((bond.DescribeQuery(), bond.GetOtherAtom(atom).DescribeQuery()) for bond in bonds)
    return _Demand(atom.DescribeQuery(), tuple(sorted(arms.items())))


def _seated(arms: Sequence[int], around: Sequence[int]) -> bool:
    """Whether each arm (a bit) finds a neighbour of its own among those that may be it."""
    return not arms or any(
        arms[0] & may_be and _seated(arms[1:], [*around[:place], *around[place + 1 :]])
        for place, may_be in enumerate(around)
    )


class Screen:
    """Screen of a list of patterns.

    Parameters
    ----------
    patterns : sequence of Chem.Mol
        SMARTS patterns.
    centres : sequence of collection of int
        For each pattern the atoms that matter to the caller: `shortlist` tells where they may lie.
    """

    def __init__(self, patterns: Sequence[Chem.Mol], centres: Sequence[Collection[int]]) -> None:
        demands: dict[_Demand, int] = {}
        self._needed: list[int] = []  # for each pattern, its demands as bits
        self._of_centre: dict[int, int] = {}  # for each demand, the patterns (bits) of which it is a centre
        for place, (pattern, chosen) in enumerate(zip(patterns, centres, strict=True)):
            bits = 0
            for atom in pattern.GetAtoms():
                number = demands.setdefault(_demand(atom), len(demands))
                bits |= 1 << number
                if atom.GetIdx() in chosen:
                    self._of_centre[number] = self._of_centre.get(number, 0) | 1 << place
            self._needed.append(bits)
        self._demands = tuple(demands)
        self._arms = tuple(dict.fromkeys(arm for demand in demands for arm, _ in demand.arms))
        # by numbers of types, neighbours and stars: what each may be
        self._of_type: dict[int, list[tuple[int, int, list[int]]]] = {}
        self._of_neighbour: dict[int, int] = {}
        self._known: dict[Star, tuple[int, int]] = {}

    def _likely(self, star: Star) -> list[tuple[int, int, list[int]]]:
        """Demands that an atom of this type may meet: number, arms as bits, arms one by one (as bits)."""
        likely = self._of_type.get(star[0])
        if likely is None:
            likely = self._of_type[star[0]] = []
            own, _ = star_parts(star)
            for number, demand in enumerate(self._demands):
                if _may(demand.atom, own, _ATOM_TESTS):
                    arms = [1 << self._arms.index(arm) for arm, times in demand.arms for _ in range(times)]
                    likely.append((number, reduce(or_, arms, 0), arms))
        return likely

    def _arms_met(self, neighbour: int) -> int:
        """Arms that a neighbour (a number of a star) may be, as bits."""
        bits = self._of_neighbour.get(neighbour)
        if bits is None:
            _, ((order, other),) = star_parts((0, neighbour))
            bits = 0
            for arm, (bond, atom) in enumerate(self._arms):
                if _may(bond, order, _BOND_TESTS) and _may(atom, other, _ATOM_TESTS):
                    bits |= 1 << arm
            self._of_neighbour[neighbour] = bits
        return bits

    def _look_up(self, star: Star) -> tuple[int, int]:
        """Demands that an atom of this star may meet, and patterns of which it may be a centre, as bits."""
        around = [self._arms_met(neighbour) for neighbour in star[1:]]
        union = reduce(or_, around, 0)
        met = centre = 0
        for number, all_arms, arms in self._likely(star):
            if all_arms & union == all_arms and _seated(arms, around):
                met |= 1 << number
                centre |= self._of_centre.get(number, 0)
        if len(self._known) >= _MOST_REMEMBERED:
            self._known.clear()
        self._known[star] = (met, centre)
        return met, centre

    def shortlist(self, graph: Graph) -> tuple[list[int], list[int]]:
        """Patterns that may match a molecule.

        Parameters
        ----------
        graph : Graph
            Plain arrays of the molecule.

        Returns
        -------
        places : list of int
            Places of the patterns that may match, ascending.
        centres : list of int
            For each atom, the patterns (bits) of which it may be a centre; minus one: any.
        """
        if 1 in graph.element:  # isotopic hydrogen isn't among the neighbours, but a pattern may mean it
            return list(range(len(self._needed))), [-1] * len(graph.element)
        known = self._known
        met = any_centre = 0
        centres = []
        for star in graph.star:
            bits, centre = known.get(star) or self._look_up(star)
            met |= bits
            any_centre |= centre
            centres.append(centre)
        places = []
        while any_centre:
            place = any_centre.bit_length() - 1
            any_centre ^= 1 << place
            needed = self._needed[place]
            if needed & met == needed:
                places.append(place)
        places.reverse()
        return places, centres
