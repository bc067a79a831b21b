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
from .structures import Refusal, read_parent

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
    """A measured constant with the molecule it belongs to: corrected constants, coupling, which step it is."""

    compound: str
    marked: str
    pk: Floats
    acid: NDArray[np.bool_]
    coupling: Floats
    exclusive: NDArray[np.bool_] | None
    measurement: Measurement
    places: NDArray[np.int64]

    def through(self, moved: Floats) -> tuple[float, Floats]:
        """Macroscopic constant with the corrections moved, and its derivative by those of the sites."""
        exclusive = None if self.exclusive is None else self.exclusive[None]
        polynomial = binding_polynomial(
            (self.pk + moved)[None], self.acid[None], self.coupling[None], exclusive
        )
        of_base = base_steps(polynomial.gain, self.acid[None])[0]
        constants = polynomial.constants[0]
        is_base = self.measurement.kind == "pkah"
        steps = np.flatnonzero(of_base == is_base)
        steps = steps[np.argsort(-constants[steps] if is_base else constants[steps], kind="stable")]
        step = int(steps[self.measurement.step - 1])
        return float(constants[step]), polynomial.gain[0, step]


class _Conditioning:
    """Measured constants with the covariance of their sites, and the closed form for any part of them."""

    def __init__(self, measurements: Iterable[Measurement | Sequence[Any]]) -> None:
        checked = [_checked(n, one) for n, one in enumerate(measurements, start=1)]
        self.observed, self.footprints = _observed(checked)
        kindred = Kindred(self.footprints)
        self.covariance = np.array([kindred.covariances(one) for one in self.footprints])
        self.noise = np.array([one.measurement.error**2 + model().noise ** 2 for one in self.observed])
        self.gains = np.zeros((len(self.observed), len(self.footprints)))
        self.residuals = np.zeros(len(self.observed))
        moved = np.zeros(len(self.footprints))
        for _ in range(ROUNDS):
            self.gains[:] = 0.0
            for row, one in enumerate(self.observed):
                constant, gain = one.through(moved[one.places])
                np.add.at(self.gains[row], one.places, gain)
                self.residuals[row] = one.measurement.value - constant + gain @ moved[one.places]
            moved = self.moved(np.arange(len(self.observed)))

    def pulls(self, rows: NDArray[np.int64]) -> Floats:
        """How much the residuals of some of the measured constants move the weights of all sites."""
        gains = self.gains[rows]
        inner = gains @ self.covariance @ gains.T + np.diag(self.noise[rows])
        return np.linalg.solve(inner, gains).T

    def moved(self, rows: NDArray[np.int64]) -> Floats:
        """What some of the measured constants add to the corrections of all sites [pK units]."""
        return np.asarray(self.covariance @ (self.pulls(rows) @ self.residuals[rows]))


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
    pulls = found.pulls(np.arange(len(found.observed)))
    kept = tuple(one.measurement._replace(structure=one.marked) for one in found.observed)
    return LocalModel(kept, tuple(found.footprints), pulls, found.residuals, pulls @ found.gains)


def left_out(measurements: Iterable[Measurement | Sequence[Any]]) -> list[float]:
    """What is said of each measured constant when all values of its compound are left out and the others kept.

    To first order: the shares of the sites in each step are those with all values in.

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
    compounds = np.array([one.compound for one in found.observed])
    said = np.zeros(len(compounds))
    for compound in dict.fromkeys(compounds.tolist()):
        moved = found.moved(np.flatnonzero(compounds != compound))
        for row in np.flatnonzero(compounds == compound).tolist():
            one = found.observed[row]
            said[row] = one.through(moved[one.places])[0]
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


def _observed(measurements: list[Measurement]) -> tuple[list[_Observed], list[Footprint]]:
    """Molecules of the measurements; sites of one structure given several times are the same sites."""
    if not measurements:
        raise ValueError("no measurement given")
    observed: list[_Observed] = []
    footprints: list[Footprint] = []
    known: dict[str, tuple[Chem.Mol, Lines, tuple[Correction, ...], NDArray[np.int64]]] = {}
    for number, one in enumerate(measurements, start=1):
        try:
            parent = read_parent(one.structure)
        except Refusal as reason:
            raise ValueError(f"measurement {number}: {reason}") from None
        if parent.smiles not in known:
            lines = site_lines(parent)
            (found,) = corrections_of([lines])
            if len(lines.sites) > EXACT_SITES:
                raise ValueError(f"measurement {number}: more than {EXACT_SITES} sites")
            places = np.arange(len(footprints), len(footprints) + len(lines.sites))
            for site, value, correction in zip(lines.sites, lines.values, found, strict=True):
                footprints.append(footprint(lines.graph, site, value, correction))
            known[parent.smiles] = parent.mol, lines, found, places
        mol, lines, found, places = known[parent.smiles]
        steps = sum(site.kind == ("base" if one.kind == "pkah" else "acid") for site in lines.sites)
        if not 1 <= one.step <= steps:
            raise ValueError(
                f"measurement {number}: the compound has {steps} {one.kind} steps, not {one.step}"
            )
        coupling, exclusive = couple(lines.graph, lines.sites)
        pk = np.array([value + item.value for value, item in zip(lines.values, found, strict=True)])
        acid = np.array([site.kind == "acid" for site in lines.sites], dtype=bool)
        row = _Observed(parent.smiles, "", pk, acid, coupling, exclusive, one, places)
        carrier = int(np.argmax(row.through(np.zeros(len(pk)))[1]))
        marked = _marked(mol, lines.sites[carrier].atom)
        observed.append(_Observed(parent.smiles, marked, pk, acid, coupling, exclusive, one, places))
    return observed, footprints


def _marked(mol: Chem.Mol, atom: int) -> str:
    """SMILES with an atom marked by map number 1."""
    copy = Chem.Mol(mol)
    copy.GetAtomWithIdx(atom).SetAtomMapNum(1)
    return str(Chem.MolToSmiles(copy))
