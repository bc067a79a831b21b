r"""Conditioning: a user's own measured constants move the corrections of like compounds at once, exactly.

After training the corrections of all sites are a Gaussian process with a mean and a covariance (`kinship`). New
measured constants are linear in the corrections of their sites to first order, so the process given them has a
closed form; nothing is trained again, and a series of a few measured analogues moves its neighbours.

References
----------
Rasmussen and Williams 2006, Gaussian Processes for Machine Learning, MIT Press, section 2.2.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any, Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray

from .binding import EXACT_SITES, binding_polynomial
from .equilibrium import base_steps
from .graph import Graph
from .interactions import couple
from .kinship import Footprint, footprint, posterior_covariance
from .prediction import Lines, corrections_of, site_lines
from .residual import Correction, model
from .sites import Site
from .structures import Refusal, read_parent

Floats = NDArray[np.float64]

ROUNDS = 4
"""Steps of the Gauss-Newton iteration: the occupancies of the sites depend on the constants a little."""
MEASUREMENT_ERROR = 0.1
"""Standard deviation of a measured constant where none is given [pK units] (common practice)."""


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
    """

    structure: Any
    value: float
    kind: Literal["pkah", "pka"] = "pkah"
    step: int = 1
    error: float = MEASUREMENT_ERROR


@dataclass(frozen=True, slots=True, eq=False)
class LocalModel:
    """Corrections conditioned on measured constants; give it as `local` to `annotate`, `rank` or `explain`.

    Attributes
    ----------
    footprints : tuple of Footprint
        The s sites of the measured compounds.
    weights : ndarray, shape (s,)
        What each adds to the correction of a site, per unit of covariance [1/pK units].
    explained : ndarray, shape (s, s)
        Quadratic form of the covariances that the measurements take off a variance.
    """

    footprints: tuple[Footprint, ...]
    weights: Floats
    explained: Floats

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
        own = footprint(graph, site, value, correction)
        shared = np.array([posterior_covariance(own, other) for other in self.footprints])
        if not shared.any():
            return correction
        taken = float(shared @ self.explained @ shared)
        trained = model()
        scatter = trained.spread.get(site.site_class, trained.spread[f"all {site.kind}s"]) ** 2
        left = max(correction.variance - scatter - taken, 0.0)
        prior = trained.prior(own.group)
        support = "supported" if left < trained.threshold * prior else "extrapolated"
        variance = left + scatter
        half_width = trained.quantile[support] * math.sqrt(variance)
        return Correction(
            correction.value + float(shared @ self.weights),
            min(half_width, correction.half_width),
            support,
            variance,
            correction.explained,
        )


@dataclass(frozen=True, slots=True)
class _Observed:
    """A measured constant with the molecule it belongs to: corrected constants, coupling, which step it is."""

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
    observed, footprints = _observed([_checked(n, one) for n, one in enumerate(measurements, start=1)])
    count = len(footprints)
    covariance = np.array([[posterior_covariance(a, b) for b in footprints] for a in footprints])
    noise = np.array([one.measurement.error**2 + model().noise ** 2 for one in observed])
    moved = np.zeros(count)
    for _ in range(ROUNDS):
        gains, residual = np.zeros((len(observed), count)), np.zeros(len(observed))
        for row, one in enumerate(observed):
            constant, gain = one.through(moved[one.places])
            np.add.at(gains[row], one.places, gain)
            residual[row] = one.measurement.value - constant + gain @ moved[one.places]
        inner = gains @ covariance @ gains.T + np.diag(noise)
        weights = gains.T @ np.linalg.solve(inner, residual)
        moved = covariance @ weights
    explained = gains.T @ np.linalg.solve(inner, gains)
    return LocalModel(tuple(footprints), weights, explained)


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
    known: dict[str, tuple[Lines, tuple[Correction, ...], NDArray[np.int64]]] = {}
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
            known[parent.smiles] = lines, found, places
        lines, found, places = known[parent.smiles]
        steps = sum(site.kind == ("base" if one.kind == "pkah" else "acid") for site in lines.sites)
        if not 1 <= one.step <= steps:
            raise ValueError(
                f"measurement {number}: the compound has {steps} {one.kind} steps, not {one.step}"
            )
        coupling, exclusive = couple(lines.graph, lines.sites)
        pk = np.array([value + item.value for value, item in zip(lines.values, found, strict=True)])
        acid = np.array([site.kind == "acid" for site in lines.sites], dtype=bool)
        observed.append(_Observed(pk, acid, coupling, exclusive, one, places))
    return observed, footprints
