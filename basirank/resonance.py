r"""Resonance: what the binding of a proton costs or gains a conjugated system, by simple Hueckel theory.

A proton on a lone pair in the plane (pyridine N, imine N, carbonyl O, thione S) raises the electronegativity of that
atom; the change of pi energy, in units of beta, says how well the electrons of the system follow. What the groups on a
ring add to that of the bare ring is a descriptor for classes whose resonance a sigma constant doesn't carry, with a
slope for each class, since across classes the order is only rough. (What a fused ring adds was tried as well: beside
the increments for ring nitrogens and fusion it explains nothing.)

References
----------
Longuet-Higgins 1950, J. Chem. Phys. 18, 275; Dewar 1952, J. Am. Chem. Soc. 74, 3357 (memory); parameters of
Van-Catledge 1980 and Streitwieser 1961 in `hueckel.csv`.
"""

from __future__ import annotations

from collections.abc import Collection
from functools import cache, lru_cache

import numpy as np

from .graph import AROMATIC, Graph, Star, star_parts
from .tables import read_table

System = tuple[tuple[tuple[str, int], ...], tuple[tuple[int, int], ...]]
"""Conjugated atoms as (kind, electrons), the site first, and the bonds between them by place."""

_PROTONATED = {"N1": "N+", "O1": "O+", "S1": "S+"}
_LONE_PAIR = {7: "N2", 8: "O2", 9: "F2", 16: "S2", 17: "Cl2", 34: "S2", 35: "Br2"}
_IN_PLANE = {6: "C1", 7: "N1", 8: "O1", 16: "S1", 34: "S1"}
MOST_ATOMS = 80
"""A larger conjugated system is cut at this many atoms around the site, nearest first."""
DECIMALS = 6
"""Energies are rounded, so that the order of the atoms doesn't show in the last bits."""


@cache
def _parameters() -> tuple[dict[str, float], dict[tuple[str, str], float]]:
    """Coulomb integrals h by kind of atom, and resonance integrals k by pair of kinds."""
    coulomb, resonance = {}, {}
    for row in read_table("hueckel.csv"):
        first, second, value = row["first"], row["second"], float(row["value"])
        if second:
            resonance[first, second] = resonance[second, first] = value
        else:
            coulomb[first] = value
    return coulomb, resonance


@lru_cache(maxsize=50_000)
def _conjugated(star: Star) -> tuple[str, int] | None:
    """Kind of an atom in the pi system and the electrons it brings, None for one outside it."""
    atom, around = star_parts(star)
    orders = [order for order, _ in around]
    if atom.element == 5 and all(order in (1, AROMATIC) for order in orders):
        return "B0", 0
    if atom.aromatic:
        if atom.element == 6:
            return "C1", 1
        if atom.element == 7:
            if atom.charge > 0:
                return "N+", 1
            return ("N2", 2) if atom.degree + atom.hydrogens > 2 else ("N1", 1)
        return ("O2", 2) if atom.element == 8 else ("S2", 2)
    doubles = [other for order, other in around if order == 2]
    if len(doubles) == 1 or 3 in orders:
        kind = _IN_PLANE.get(atom.element)
        if kind is None or (doubles and doubles[0].element not in _IN_PLANE):
            return None
        return ("N+", 1) if kind == "N1" and atom.charge > 0 else (kind, 1)
    if not doubles and atom.element in _LONE_PAIR and atom.charge <= 0:
        if atom.element in (16, 34) and atom.degree > 2:
            return None
        return _LONE_PAIR[atom.element], 2
    return None


def _system(graph: Graph, site: int, core: Collection[int], whole: bool) -> System:
    """The conjugated system around a site, or its ring system and own unit alone."""
    star, neighbours = graph.star, graph.neighbours
    place = {site: 0}
    order = [site]
    for inner in order:
        for other, bond in neighbours[inner]:
            if other in place or _conjugated(star[other]) is None:
                continue
            if whole or bond == AROMATIC or bond == 2 or (other in core and inner in core):
                place[other] = len(order)
                order.append(other)
        if len(order) >= MOST_ATOMS:
            break
    atoms = []
    for atom in order:
        kind = _conjugated(star[atom])
        assert kind is not None
        atoms.append(kind)
    bonds = [
        (here, place[other])
        for here, atom in enumerate(order)
        for other, _ in neighbours[atom]
        if place.get(other, -1) > here
    ]
    return tuple(atoms), tuple(sorted(bonds))


def _matrix(kinds: list[str], bonds: tuple[tuple[int, int], ...]) -> np.ndarray:
    coulomb, resonance = _parameters()
    matrix = np.diag([coulomb[kind] for kind in kinds])
    for first, second in bonds:
        integral = resonance.get((kinds[first], kinds[second]), resonance["other", "other"])
        matrix[first, second] = matrix[second, first] = integral
    return matrix


def pi_energy(levels: np.ndarray, electrons: int) -> float:
    """Sum of the energies of the electrons in their levels, two to a level, the most bonding filled first [beta]."""
    filled = levels[::-1]
    pairs, single = divmod(electrons, 2)
    return float(2.0 * filled[:pairs].sum() + (filled[pairs] if single else 0.0))


@lru_cache(maxsize=20_000)
def binding_energy(system: System) -> float:
    """Gain of pi energy when the first atom of a system binds a proton in its plane [beta].

    Examples
    --------
    Pyridine, then 4-aminopyridine, whose amino group adds to it:

    >>> ring = ((0, 1), (1, 2), (2, 3), (3, 4), (4, 5), (0, 5))
    >>> carbons = (("C1", 1),) * 5
    >>> pyridine = binding_energy(((("N1", 1), *carbons), ring))
    >>> amino = binding_energy(((("N1", 1), *carbons, ("N2", 2)), (*ring, (3, 6))))
    >>> bool(amino > pyridine)
    True
    """
    atoms, bonds = system
    kinds = [kind for kind, _ in atoms]
    electrons = sum(count for _, count in atoms)
    both = np.stack([_matrix(kinds, bonds), _matrix([_PROTONATED[kinds[0]], *kinds[1:]], bonds)])
    free, bound = np.linalg.eigvalsh(both)
    return round(pi_energy(bound, electrons) - pi_energy(free, electrons), DECIMALS)


def resonance_of_groups(graph: Graph, site: int, core: Collection[int]) -> float:
    """What the groups conjugated with a site's ring system add to its gain of pi energy [beta].

    Parameters
    ----------
    graph : Graph
        Plain arrays of the molecule.
    site : int
        The atom that takes the proton.
    core : collection of int
        Atoms of its own unit, which count as part of its ring system.

    Returns
    -------
    float
        Positive for a group that pushes electrons to the site; 0 for a site that binds its proton otherwise (an
        amine, a carbon) or carries no such group.
    """
    kind = _conjugated(graph.star[site])
    if kind is None or kind[0] not in _PROTONATED:
        return 0.0
    ring, whole = (_system(graph, site, core, whole) for whole in (False, True))
    if len(ring[0]) == len(whole[0]):
        return 0.0
    return round(binding_energy(whole) - binding_energy(ring), DECIMALS)
