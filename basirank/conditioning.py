r"""Conditioning: a user's own measured constants move the corrections of like compounds at once, exactly.

After training the corrections of all sites are a Gaussian process with a mean and a covariance (`kinship`). New
measured constants are linear in the corrections of their sites to first order, so the process given them has a
closed form; nothing is trained again, and a series of a few measured analogues moves its neighbours.

References
----------
Rasmussen and Williams 2006, Gaussian Processes for Machine Learning, MIT Press, section 2.2.
"""

from __future__ import annotations

import hashlib
import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray
from rdkit import Chem

from .binding import EXACT_SITES, binding_polynomial
from .equilibrium import base_steps
from .evidence import LEAST_WEIGHT, SHOWN, Analogue
from .graph import Graph
from .interactions import couple
from .kinship import Footprint, Kindred, footprint
from .prediction import Lines, corrections_of, site_lines
from .residual import Correction, corrections, model
from .sites import Site
from .structures import Parent, Refusal, read_parent

Floats = NDArray[np.float64]

ROUNDS = 4
"""Steps of the Gauss-Newton iteration: the occupancies of the sites depend on the constants a little."""
MEASUREMENT_ERROR = 0.1
"""Standard deviation of a measured constant where none is given [pK units] (common practice)."""
OWN = "own measurement"
"""Source of a user's own value where evidence is shown."""


class Measurement(NamedTuple):
    """One measured constant of one compound, at 25 C and ionic strength 0.

    Attributes
    ----------
    structure : str or rdkit.Chem.Mol
        The compound.
    value : float
        Measured constant [-].
    kind : {"pkah", "pka"}
        Whether it is that of a base or of an acid group.
    step : int
        Which of them, as the columns are numbered: 1 is the highest pKaH or the lowest pKa.
    error : float
        Standard deviation of the measurement [pK units].
    name : str
        What the compound is called.
    """

    structure: Any
    value: float
    kind: Literal["pkah", "pka"] = "pkah"
    step: int = 1
    error: float = MEASUREMENT_ERROR
    name: str = ""


@dataclass(frozen=True, eq=False)
class LocalModel:
    """Corrections conditioned on measured constants; give it as `local` to `annotate`, `rank` or `explain`.

    Attributes
    ----------
    measurements : tuple of Measurement
        The m measured constants, structures as SMILES with the site marked by atom map 1.
    footprints : tuple of Footprint
        The s sites of the measured compounds.
    pulls : ndarray, shape (s, m)
        How much each measured residual moves the weight of each site [1/pK units squared].
    residuals : ndarray, shape (m,)
        Measured constants less what the trained model says of them [pK units].
    explained : ndarray, shape (s, s)
        Quadratic form of the covariances that the measurements take off a variance.
    """

    measurements: tuple[Measurement, ...]
    footprints: tuple[Footprint, ...]
    pulls: Floats
    residuals: Floats
    explained: Floats

    @cached_property
    def weights(self) -> Floats:
        """What each site adds to the correction of another, per unit of covariance, shape (s,) [1/pK units]."""
        return np.asarray((self.pulls * self.residuals).sum(axis=1))

    @cached_property
    def digest(self) -> str:
        """By which two local models are told apart."""
        told = hashlib.blake2b(repr([one[1:] for one in self.measurements]).encode(), digest_size=16)
        for array in (self.pulls, self.residuals, self.explained):
            told.update(np.ascontiguousarray(array).tobytes())
        for one in self.footprints:
            told.update(one.features.tobytes() + one.weights.tobytes() + one.explained.tobytes())
        return told.hexdigest()

    @cached_property
    def _kindred(self) -> Kindred:
        return Kindred(self.footprints)

    def __reduce__(self) -> tuple[Any, ...]:
        fields = (self.measurements, self.footprints, self.pulls, self.residuals, self.explained)
        return LocalModel, fields

    def moved(self, graph: Graph, site: Site, value: float, correction: Correction) -> Correction:
        """Correction of a site given the measurements as well.

        Parameters
        ----------
        graph : Graph
            Molecule of the site.
        site : Site
            The site.
        value : float
            Its line value [-].
        correction : Correction
            That of the trained model alone.
        """
        shared = self._kindred.covariances(footprint(graph, site, value, correction))
        if not shared.any():
            return correction
        taken = float((shared * (shared * self.explained).sum(axis=1)).sum())
        trained = model()
        scatter = trained.spread.get(site.site_class, trained.spread[f"all {site.kind}s"]) ** 2
        left = max(correction.variance - scatter - taken, 0.0)
        prior = trained.prior_of(site)
        support = "supported" if left < trained.threshold * prior else "extrapolated"
        variance = left + scatter
        half_width = trained.quantile[support] * math.sqrt(variance)
        own = float((shared * self.weights).sum())
        return Correction(
            correction.value + own,
            min(half_width, correction.half_width),
            support,
            variance,
            correction.explained,
            own,
        )

    def analogues(self, graph: Graph, site: Site, value: float) -> tuple[Analogue, ...]:
        """The measurements that weigh most in what is added to a site, the heaviest first.

        The arguments are those of `evidence.analogues`.
        """
        (correction,) = corrections([graph], [site], [value])
        shared = self._kindred.covariances(footprint(graph, site, value, correction))
        weights = (shared[:, None] * self.pulls).sum(axis=0)
        heaviest: list[int] = np.argsort(-np.abs(weights), kind="stable")[:SHOWN].tolist()
        found = []
        for place in heaviest:
            weight, one = float(weights[place]), self.measurements[place]
            if abs(weight) >= LEAST_WEIGHT:
                pull = round(weight * float(self.residuals[place]), 3)
                found.append(
                    Analogue(one.name, one.structure, one.kind, one.value, OWN, round(weight, 3), pull)
                )
        return tuple(found)


@dataclass(frozen=True, slots=True)
class _Observed:
    """A measured constant with the molecule it belongs to: corrected constants, coupling, places of its sites."""

    measurement: Measurement
    compound: str
    pk: Floats
    acid: NDArray[np.bool_]
    coupling: Floats
    exclusive: NDArray[np.bool_]
    places: NDArray[np.int64]


class _Molecules:
    """Molecules of measured constants with the same number of sites, stacked."""

    def __init__(self, rows: Sequence[int], observed: Sequence[_Observed]) -> None:
        self.rows = np.array(rows)
        chosen = [observed[row] for row in rows]
        self.pk, self.acid, self.coupling, self.exclusive, self.places = (
            np.array([getattr(one, name) for one in chosen])
            for name in ("pk", "acid", "coupling", "exclusive", "places")
        )
        self.is_base = np.array([one.measurement.kind == "pkah" for one in chosen])
        self.step = np.array([one.measurement.step - 1 for one in chosen])

    def through(self, moved: Floats) -> tuple[Floats, Floats]:
        """Macroscopic constants with the corrections moved, and their derivatives by those of the sites."""
        exclusive = self.exclusive if self.exclusive.any() else None
        polynomial = binding_polynomial(self.pk + moved[self.places], self.acid, self.coupling, exclusive)
        of_base = base_steps(polynomial.gain, self.acid)
        order = np.where(self.is_base[:, None], -1.0, 1.0) * polynomial.constants
        order = np.where(of_base == self.is_base[:, None], order, np.inf)
        each = np.arange(len(self.rows))
        step = np.argsort(order, axis=1, kind="stable")[each, self.step]
        return polynomial.constants[each, step], polynomial.gain[each, step]


class _Conditioning:
    """Measured constants with the covariance of their sites, and the closed form for any part of them."""

    def __init__(self, measurements: Iterable[Measurement | Sequence[Any]]) -> None:
        checked = [_checked(n, one) for n, one in enumerate(measurements, start=1)]
        self.observed, self.marks, self.footprints = _observed(checked)
        self.compound = np.array([one.compound for one in self.observed])
        kindred = Kindred(self.footprints)
        self.covariance = np.array([kindred.covariances(one) for one in self.footprints])
        self.noise = np.array([one.measurement.error**2 + model().noise ** 2 for one in self.observed])
        self.value = np.array([one.measurement.value for one in self.observed])
        by_size: dict[int, list[int]] = {}
        for row, one in enumerate(self.observed):
            by_size.setdefault(len(one.pk), []).append(row)
        self._stacks = [_Molecules(rows, self.observed) for rows in by_size.values()]

    def through(self, moved: Floats) -> tuple[Floats, Floats]:
        """Constants of all rows with the corrections moved, and their derivatives by those of all sites."""
        constants = np.zeros(len(self.observed))
        gains = np.zeros((len(self.observed), len(self.footprints)))
        for stack in self._stacks:
            constants[stack.rows], gain = stack.through(moved)
            gains[stack.rows[:, None], stack.places] = gain
        return constants, gains

    def _across(self, gains: Floats) -> Floats:
        """Gains times the covariance of the sites: few gains of a row differ from zero."""
        across = np.zeros_like(gains)
        for stack in self._stacks:
            own = gains[stack.rows[:, None], stack.places]
            across[stack.rows] = (own[:, :, None] * self.covariance[stack.places]).sum(axis=1)
        return across

    def _between(self, gains: Floats, across: Floats) -> Floats:
        """Covariance of the measured constants without their noise."""
        between = np.zeros((len(gains), len(gains)))
        for stack in self._stacks:
            own = gains[stack.rows[:, None], stack.places]
            between[:, stack.rows] = (across[:, stack.places] * own).sum(axis=2)
        return between

    def solved(self, rows: NDArray[np.int64]) -> _Solved:
        """What some of the measured constants say."""
        moved = np.zeros(len(self.footprints))
        for _ in range(ROUNDS):
            constants, gains = self.through(moved)
            across = self._across(gains)
            inner = (self._between(gains, across) + np.diag(self.noise))[np.ix_(rows, rows)]
            residuals = self.value[rows] - constants[rows] + gains[rows] @ moved
            moved = np.linalg.solve(inner, residuals) @ across[rows]
        return _Solved(inner, residuals, gains[rows], moved)


class _Solved(NamedTuple):
    """Covariance of some measured constants with their noise, residuals, gains, and what all sites are moved by."""

    inner: Floats
    residuals: Floats
    gains: Floats
    moved: Floats

    @property
    def pulls(self) -> Floats:
        """How much each residual moves the weight of each site."""
        return np.asarray(np.linalg.solve(self.inner, self.gains).T)


def condition(measurements: Iterable[Measurement | Sequence[Any]]) -> LocalModel:
    """Condition the trained corrections on measured constants, exactly and without training.

    Parameters
    ----------
    measurements : iterable of Measurement
        Or tuples in the order of its fields, e.g. ``("NCc1ccccc1", 9.35)``.

    Returns
    -------
    LocalModel

    Raises
    ------
    ValueError
        A structure that cannot be computed or has more than 16 sites, a step that it doesn't have, a value or an
        error that is no sound number, an unknown kind, or no measurement at all. The message names the row.

    Examples
    --------
    >>> from basirank import annotate
    >>> series = condition([("Fc1ccc(CN2CCN3CCOC3C2)cc1", 7.0), ("Clc1ccc(CN2CCN3CCOC3C2)cc1", 6.9)])
    >>> analogue = ["Brc1ccc(CN2CCN3CCOC3C2)cc1"]
    >>> before, after = annotate(analogue).pkah_1[0], annotate(analogue, local=series).pkah_1[0]
    >>> bool(abs(after - 6.95) < abs(before - 6.95))
    True
    """
    found = _Conditioning(measurements)
    solved = found.solved(np.arange(len(found.observed)))
    pulls = solved.pulls
    kept = tuple(
        one.measurement._replace(structure=mark)
        for one, mark in zip(found.observed, found.marks, strict=True)
    )
    return LocalModel(kept, tuple(found.footprints), pulls, solved.residuals, pulls @ solved.gains)


def left_out(measurements: Iterable[Measurement | Sequence[Any]]) -> list[float]:
    """What is said of each measured constant when all values of its compound are left out and the others kept.

    Parameters
    ----------
    measurements : iterable of Measurement
        As for `condition`.

    Returns
    -------
    list of float
        Macroscopic constants [-], in the order given.

    Raises
    ------
    ValueError
        As for `condition`.
    """
    found = _Conditioning(measurements)
    said = np.zeros(len(found.observed))
    for compound in dict.fromkeys(found.compound.tolist()):
        own, others = (np.flatnonzero((found.compound == compound) == here) for here in (True, False))
        moved = found.solved(others).moved if len(others) else np.zeros(len(found.footprints))
        said[own] = found.through(moved)[0][own]
    return said.tolist()  # type: ignore[no-any-return]


def _checked(number: int, given: Measurement | Sequence[Any]) -> Measurement:
    """A measurement with sound fields; the message of a failure names its place."""
    try:
        one = Measurement(*given)
        one = one._replace(value=float(one.value), step=int(one.step), error=float(one.error))
    except (TypeError, ValueError) as error:
        raise ValueError(f"measurement {number}: {error}") from None
    if one.kind not in ("pkah", "pka"):
        raise ValueError(f"measurement {number}: kind must be 'pkah' or 'pka', not {one.kind!r}")
    if not math.isfinite(one.value) or not (math.isfinite(one.error) and one.error > 0):
        raise ValueError(f"measurement {number}: value and error must be finite numbers, the error above 0")
    return one


def _observed(measurements: list[Measurement]) -> tuple[list[_Observed], list[str], list[Footprint]]:
    """Molecules of the measurements with their marked SMILES; sites of one structure given twice are the same sites."""
    if not measurements:
        raise ValueError("no measurement given")
    parents: list[Parent] = []
    lines_of: dict[str, Lines] = {}
    for number, one in enumerate(measurements, start=1):
        try:
            parent = read_parent(one.structure)
        except Refusal as reason:
            raise ValueError(f"measurement {number}: {reason}") from None
        parents.append(parent)
        if parent.smiles not in lines_of:
            lines_of[parent.smiles] = site_lines(parent)
        sites = lines_of[parent.smiles].sites
        if len(sites) > EXACT_SITES:
            raise ValueError(f"measurement {number}: more than {EXACT_SITES} sites")
        steps = sum(site.kind == ("base" if one.kind == "pkah" else "acid") for site in sites)
        if not 1 <= one.step <= steps:
            raise ValueError(
                f"measurement {number}: the compound has {steps} {one.kind} steps, not {one.step}"
            )
    footprints: list[Footprint] = []
    arrays: dict[str, tuple[Any, ...]] = {}
    corrected = corrections_of(list(lines_of.values()))
    for (smiles, lines), found in zip(lines_of.items(), corrected, strict=True):
        places = np.arange(len(footprints), len(footprints) + len(lines.sites))
        arrays[smiles] = (*_arrays(lines, found), places)
        for site, value, correction in zip(lines.sites, lines.values, found, strict=True):
            footprints.append(footprint(lines.graph, site, value, correction))
    observed, marks = [], []
    for parent, one in zip(parents, measurements, strict=True):
        row = _Observed(one, parent.smiles, *arrays[parent.smiles])
        _, gain = _Molecules([0], [row]).through(np.zeros(len(footprints)))
        observed.append(row)
        site = lines_of[parent.smiles].sites[int(np.argmax(gain[0]))]
        marks.append(_marked(parent.mol, site.atom))
    return observed, marks, footprints


def _arrays(lines: Lines, found: Sequence[Correction]) -> tuple[Any, ...]:
    """Corrected constants, acids, coupling and tautomeric pairs of a molecule."""
    coupling, exclusive = couple(lines.graph, lines.sites)
    pk = np.array([value + item.value for value, item in zip(lines.values, found, strict=True)])
    acid = np.array([site.kind == "acid" for site in lines.sites], dtype=bool)
    return pk, acid, coupling, np.zeros(coupling.shape, dtype=bool) if exclusive is None else exclusive


def _marked(mol: Chem.Mol, atom: int) -> str:
    """SMILES with an atom marked by map number 1."""
    copy = Chem.Mol(mol)
    copy.GetAtomWithIdx(atom).SetAtomMapNum(1)
    return str(Chem.MolToSmiles(copy))
