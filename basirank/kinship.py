r"""Kinship: how far the errors of two estimates go together, and what that says of their order.

Compounds of one series share what the lines and the measured neighbours get wrong, so the order of two analogues is
surer than their intervals suggest. The covariance of two corrections after training is that of the kernel less what
the measured values explain of both.
"""

from __future__ import annotations

import math
import zlib
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .graph import Graph
from .residual import Correction, group_of, model, site_counts, weighted
from .sites import Site

Floats = NDArray[np.float64]

NINETY = 1.6448536269514722
"""Half of the 90 % interval of a normal distribution in standard deviations."""


@dataclass(frozen=True, slots=True, eq=False)
class Footprint:
    """What a site's covariance with any other site follows from.

    Attributes
    ----------
    group : str
        Group of families; sites of two groups have no covariance.
    features : ndarray of int, shape (f,)
        Codes of its weighted features, each copy of its own, ascending.
    weights : ndarray, shape (f,)
        Their weights [-].
    total : float
        Sum of the weights of all features [-].
    value : float
        Line value [-].
    site_class, family : int
        Codes of class and family, -1 for one that was not in training.
    explained : ndarray, shape (d,)
        Coordinates along the directions that the measured values explain [pK units].
    variance : float
        What is left of the correction's variance, with the scatter of its class [pK units squared].
    """

    group: str
    features: NDArray[np.uint32]
    weights: NDArray[np.float32]
    total: float
    value: float
    site_class: int
    family: int
    explained: NDArray[np.float32]
    variance: float


def footprint(graph: Graph, site: Site, value: float, correction: Correction) -> Footprint:
    """Footprint of a site from its line value and its correction.

    Parameters
    ----------
    graph : Graph
        Plain arrays of the molecule.
    site : Site
        The site.
    value : float
        Line value [-].
    correction : Correction
        As `residual.corrections` gives it for this site.
    """
    trained = model()
    features = sorted(
        (zlib.crc32(feature.encode()), weight)
        for feature, weight in weighted(site_counts(graph, site), trained.kernel.fade)
    )
    weights = np.array([weight for _, weight in features])
    return Footprint(
        group=group_of()[site.row.family],
        features=np.array([code for code, _ in features], dtype=np.uint32),
        weights=weights.astype(np.float32),
        total=float(weights.sum()),
        value=value,
        site_class=trained.classes.get(site.site_class, -1),
        family=trained.families.get(site.row.family, -1),
        explained=correction.explained.astype(np.float32),
        variance=correction.variance,
    )


def overlap(first: Footprint, second: Footprint) -> float:
    """Sum of the weights of the features that two sites share."""
    _, here, _ = np.intersect1d(first.features, second.features, return_indices=True)
    return float(first.weights[here].sum(dtype=np.float64))


def posterior_covariance(first: Footprint, second: Footprint) -> float:
    """Covariance of the corrections of two sites, given the measured values [pK units squared].

    Without the scatter of single compounds, which two compounds don't share.
    """
    if first.group != second.group:
        return 0.0
    trained = model()
    pair = (first, second)
    prior = trained.kernel.covariance(
        np.array([[overlap(first, second)]]),
        *(
            (np.array([getattr(pair[0], name)]), np.array([getattr(pair[1], name)]))
            for name in ("total", "value", "site_class", "family")
        ),
    )
    scale = trained.groups[first.group].scale if first.group in trained.groups else 1.0
    along = first.explained.astype(np.float64) @ second.explained.astype(np.float64)
    return scale * float(prior[0, 0]) - float(along)


class Kindred:
    """Many sites, for their covariances with one more at once.

    Parameters
    ----------
    members : sequence of Footprint
        The n sites.
    """

    def __init__(self, members: Sequence[Footprint]) -> None:
        self.members = tuple(members)
        by_group: dict[str, list[int]] = {}
        for place, one in enumerate(self.members):
            by_group.setdefault(one.group, []).append(place)
        self._groups = {name: _Kin([self.members[place] for place in places], np.array(places))
                        for name, places in by_group.items()}  # fmt: skip

    def covariances(self, own: Footprint) -> Floats:
        """`posterior_covariance` with each member, shape (n,) [pK units squared]."""
        shared = np.zeros(len(self.members))
        if own.group in self._groups:
            kin = self._groups[own.group]
            shared[kin.places] = kin.covariances(own)
        return shared


class _Kin:
    """The members of one group as arrays."""

    def __init__(self, members: Sequence[Footprint], places: NDArray[np.int64]) -> None:
        self.places = places
        self.total, self.value, self.site_class, self.family = (
            np.array([getattr(one, name) for one in members])
            for name in ("total", "value", "site_class", "family")
        )
        self.explained = np.array([one.explained for one in members], dtype=np.float64)
        codes = sorted({code for one in members for code in one.features.tolist()})
        self.row = {code: number for number, code in enumerate(codes)}
        self.shown = np.zeros((len(codes), len(members)))
        for column, one in enumerate(members):
            self.shown[[self.row[code] for code in one.features.tolist()], column] = 1.0

    def covariances(self, own: Footprint) -> Floats:
        common = [(self.row[code], weight) for code, weight in
                  zip(own.features.tolist(), own.weights.tolist(), strict=True) if code in self.row]  # fmt: skip
        rows = [row for row, _ in common]
        weights = np.array([weight for _, weight in common])
        # sums along an axis, not a matrix product: the same bits whatever the processor makes of the shape
        overlaps = (weights[:, None] * self.shown[rows]).sum(axis=0) if common else np.zeros(len(self.places))
        trained = model()
        prior = trained.kernel.covariance(
            overlaps[None],
            (np.array([own.total]), self.total),
            (np.array([own.value]), self.value),
            (np.array([own.site_class]), self.site_class),
            (np.array([own.family]), self.family),
        )[0]
        scale = trained.groups[own.group].scale if own.group in trained.groups else 1.0
        return scale * prior - (self.explained * own.explained.astype(np.float64)).sum(axis=1)


@dataclass(frozen=True, slots=True)
class Standing:
    """One constant of a compound beside that of another: value [-], half of its 90 % interval, carrier."""

    value: float
    half_width: float
    footprint: Footprint


def difference_sd(first: Standing, second: Standing) -> float:
    r"""Standard deviation of the difference of two constants [pK units].

    .. math:: \sigma = \sqrt{\sigma_a^2 + \sigma_b^2 - 2 \rho \sigma_a \sigma_b}

    with the correlation of the corrections of the two carriers as rho.
    """
    one, other = first.half_width / NINETY, second.half_width / NINETY
    shared = posterior_covariance(first.footprint, second.footprint)
    correlation = shared / math.sqrt(first.footprint.variance * second.footprint.variance)
    variance = one**2 + other**2 - 2.0 * min(max(correlation, -1.0), 1.0) * one * other
    return math.sqrt(max(variance, 0.0))


def above(first: Standing, second: Standing) -> float:
    r"""Probability that the first compound is truly more basic than the second.

    .. math:: P = \Phi\left(\frac{a - b}{\sigma}\right)

    with `difference_sd` as sigma.

    Parameters
    ----------
    first, second : Standing
        The two compounds.

    Returns
    -------
    float
        0 to 1; one half for equal constants.
    """
    difference, spread = first.value - second.value, difference_sd(first, second)
    if spread <= 1e-6:
        return 0.5 if abs(difference) < 1e-9 else float(difference > 0)
    return 0.5 * math.erfc(-difference / (math.sqrt(2.0) * spread))


def above_next(standings: Sequence[Standing | None]) -> list[float | None]:
    """For each compound of a ranked list the probability that it is truly more basic than the next.

    Parameters
    ----------
    standings : sequence of Standing or None
        In the order of the rank; None for a compound without a first constant.

    Returns
    -------
    list of float or None
        None for the last compound, and where either has no constant.
    """
    pairs = zip(standings, [*standings[1:], None], strict=False)
    return [None if one is None or other is None else above(one, other) for one, other in pairs]
