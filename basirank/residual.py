r"""Residual: what the lines miss, regressed on measured values with a sparse Gaussian process.

The surroundings of a site are counted (`surroundings`); two sites are alike as far as their counts overlap (the
min-max kernel), more so when they share class or family; only sites of one group (amines, azines, azoles, ...) speak
to each other. The correction fades to zero where nothing measured is alike, and its variance says how far
that is. Training goes through the equilibrium (`scripts/train`); this module only predicts.
"""

from __future__ import annotations

import json
import math
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache
from importlib.resources import as_file, files
from itertools import chain
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from .graph import Graph
from .sites import Site
from .surroundings import Piece, Surroundings, feature_weight, site_counts, spelled, weighted
from .tables import read_table

__all__ = [
    "BLOCK", "Correction", "Kernel", "corrections", "covariances", "group_of", "model", "site_counts", "weighted"
]  # fmt: skip

BLOCK = 64
"""Sites in one matrix product at most."""

_VECTOR = 8
"""Elements that a processor handles together at most (64-bit numbers)."""

Floats = NDArray[np.float64]
Codes = NDArray[np.int64]


def exact_steps(values: Floats, bits: int) -> Floats:
    """Values rounded to steps of 2^-bits.

    A product of two such matrices has an exact result in double precision as long as the bits of a sum stay below 53,
    whatever the order of summation: so a site's numbers don't depend on the batch it came in.
    """
    steps: Floats = values * 2.0**bits
    np.rint(steps, out=steps)
    steps *= 2.0**-bits
    return steps


COVARIANCE_BITS = 18
WEIGHT_BITS = 15
DIRECTION_BITS = 10
"""Steps of covariances, weights and directions of the variance; with sums over at most 2^10 sites they are exact."""


@dataclass(frozen=True, slots=True)
class Kernel:
    """Hyperparameters of the covariance of two corrections.

    Attributes
    ----------
    same_class, same_family, same_group : float
        Standard deviations of the shares that two sites have in common by class, by family and by group of
        families [pK units].
    fade : float
        Weight of a feature per bond of distance [-].
    value_share : float
        Share of the covariance that also asks for similar line values [-].
    value_width : float
        Width of that comparison [pK units].
    """

    same_class: float
    same_family: float
    same_group: float
    fade: float
    value_share: float
    value_width: float

    @property
    def variance(self) -> float:
        """Prior variance of a correction [pK units squared]."""
        return self.same_class**2 + self.same_family**2 + self.same_group**2

    def covariance(
        self,
        overlap: Floats,
        total: tuple[Floats, Floats],
        value: tuple[Floats, Floats],
        site_class: tuple[Codes, Codes],
        family: tuple[Codes, Codes],
    ) -> Floats:
        r"""Covariance of the corrections of two sets of sites of one group.

        .. math:: k(a, b) = (s_c^2 [c_a = c_b] + s_f^2 [f_a = f_b] + s_g^2)\,m(a, b)\,
                  (1 - v + v e^{-(x_a - x_b)^2 / 2 w^2}), \quad m = \frac{\sum \min}{\sum \max}

        Parameters
        ----------
        overlap : ndarray, shape (a, b)
            Sum of the minima of the weighted counts.
        total, value, site_class, family : pairs of ndarray, shapes (a,) and (b,)
            Sum of the weighted counts, line value, and codes of class and family.

        Returns
        -------
        ndarray, shape (a, b)
            Covariance [pK units squared].
        """
        # in place where it can be: a fresh array for each operation costs more than the arithmetic
        result = self.same_class**2 * (site_class[0][:, None] == site_class[1][None, :])
        result += self.same_family**2 * (family[0][:, None] == family[1][None, :])
        result += self.same_group**2
        union = total[0][:, None] + total[1][None, :]
        union -= overlap
        result *= np.divide(overlap, union, out=union)
        near = value[0][:, None] - value[1][None, :]
        near /= self.value_width
        near *= near
        near *= -0.5
        np.exp(near, out=near)
        near *= self.value_share
        near += 1.0 - self.value_share
        result *= near
        return result


@cache
def group_of() -> dict[str, str]:
    """Group of each family (`families.csv`)."""
    return {row["family"]: row["group"] for row in read_table("families.csv")}


class Correction(NamedTuple):
    """Correction of one site.

    Attributes
    ----------
    value : float
        To be added to the line's value [pK units].
    half_width : float
        Half of the 90 % interval of the corrected intrinsic constant [pK units].
    support : {"supported", "extrapolated"}
        Whether measured neighbours stand behind it.
    variance : float
        What is left of the correction's variance, with the scatter of its class [pK units squared].
    explained : ndarray, shape (d,)
        Coordinates along the directions that the measured values of the group explain: the product of those of two
        sites is what the measured values take off their covariance [pK units].
    own : float
        The part of `value` that a user's own measured constants add (`conditioning`) [pK units].
    """

    value: float
    half_width: float
    support: str
    variance: float
    explained: Floats
    own: float = 0.0


_MOST_READ = 50_000
"""Pieces that a group remembers at most."""


Shown = tuple[list[int], float]
"""Rows of the features that a site shows to its group, and the weight of all its features."""


@dataclass(frozen=True, slots=True)
class Group:
    """Trained arrays of one group: its basis sites, their weights and the directions that explain variance.

    `features` has a row for each feature known in the group and a column for each basis site; `copies` gives for the
    row of a feature those of its second, third, ... copy. `fade` is the weight of a feature per bond; `read` remembers
    pieces met before.
    """

    vocabulary: dict[str, int]
    copies: dict[int, tuple[int, ...]]
    fade: float
    read: dict[Piece, tuple[float, tuple[int, ...]]]
    features: NDArray[np.float32]
    total: Floats
    value: Floats
    site_class: Codes
    family: Codes
    weights: Floats
    directions: Floats
    scale: float

    def look_up(self, piece: Piece) -> tuple[float, tuple[int, ...]]:
        """Weight of the features of a piece and rows of those that are known, remembered."""
        if len(self.read) >= _MOST_READ:
            self.read.clear()
        features = spelled(piece)
        known = tuple(self.vocabulary[feature] for feature in features if feature in self.vocabulary)
        self.read[piece] = found = (len(features) * feature_weight(self.fade, int(features[0][0])), known)
        return found

    def rows(self, pieces: Sequence[Piece]) -> Shown:
        """Rows of the features that pieces show, copies included, and the weight of all features."""
        read, copies = self.read, self.copies
        found = [read.get(piece) or self.look_up(piece) for piece in pieces]
        counts = Counter(chain.from_iterable([known for _, known in found]))
        rows = list(counts)
        for row, count in [item for item in counts.items() if item[1] > 1]:
            rows += copies.get(row, ())[: count - 1]
        return rows, sum([weight for weight, _ in found])


def _copies(vocabulary: dict[str, int]) -> dict[int, tuple[int, ...]]:
    """Rows of the second, third, ... copy of each feature, as far as they follow without a gap."""
    found = {}
    for feature, row in vocabulary.items():
        more: list[int] = []
        while (again := vocabulary.get(f"{feature} #{len(more) + 2}")) is not None:
            more.append(again)
        if more:
            found[row] = tuple(more)
    return found


@dataclass(frozen=True, slots=True)
class Model:
    """The trained regression (`models/residual.npz`, `models/residual.json`)."""

    kernel: Kernel
    groups: dict[str, Group]
    classes: dict[str, int]
    families: dict[str, int]
    spread: dict[str, float]
    quantile: dict[str, float]
    threshold: float
    law_error: float
    noise: float

    @property
    def law_half_width(self) -> float:
        """Half of the 90 % interval of the interactions of a molecule, as a share of them [-]."""
        return self.quantile["supported"] * self.law_error

    def prior(self, group: str) -> float:
        """Prior variance of a correction in a group [pK units squared]."""
        return self.kernel.variance * (self.groups[group].scale if group in self.groups else 1.0)

    def prior_of(self, site: Site) -> float:
        """Prior variance of the correction of a site [pK units squared]."""
        return self.prior(group_of()[site.row.family])


@cache
def model() -> Model:
    """The trained model.

    Raises
    ------
    FileNotFoundError
        The package was built without it.
    """
    folder = files("basirank.models")
    settings = json.loads(folder.joinpath("residual.json").read_text(encoding="utf-8"))
    groups = {}
    with as_file(folder.joinpath("residual.npz")) as path, np.load(path, allow_pickle=False) as arrays:
        for name in settings["groups"]:
            part = {field: arrays[f"{name}/{field}"] for field in GROUP_ARRAYS}
            features = np.zeros((len(part["vocabulary"]), len(part["total"])), dtype=np.float32)
            features[part["rows"], part["columns"]] = part["feature_weight"]
            vocabulary = {feature: place for place, feature in enumerate(part["vocabulary"].tolist())}
            groups[name] = Group(
                vocabulary=vocabulary,
                copies=_copies(vocabulary),
                fade=settings["kernel"]["fade"],
                read={},
                features=features,
                total=part["total"],
                value=part["value"],
                site_class=part["site_class"],
                family=part["family"],
                weights=part["weights"],
                directions=part["directions"].astype(np.float64),
                scale=settings["scale"][name],
            )
    return Model(
        kernel=Kernel(**settings["kernel"]),
        groups=groups,
        **{field: settings[field] for field in _SETTINGS},
    )


_SETTINGS = ("classes", "families", "spread", "quantile", "threshold", "law_error", "noise")

GROUP_ARRAYS = (
    "vocabulary", "rows", "columns", "feature_weight", "total", "value",
    "site_class", "family", "weights", "directions",
)  # fmt: skip
"""Arrays stored for each group, under `<group>/<name>`."""


def corrections(graphs: Sequence[Graph], sites: Sequence[Site], values: Sequence[float]) -> list[Correction]:
    """Corrections of a batch of sites.

    Parameters
    ----------
    graphs : sequence of Graph
        Molecule of each site.
    sites : sequence of Site
        The sites.
    values : sequence of float
        Line value of each [-].

    Returns
    -------
    list of Correction
        One for each site.
    """
    trained, groups = model(), group_of()
    by_group: dict[str, list[int]] = {}
    shown: list[Shown] = []
    around: Surroundings | None = None
    for place, (graph, site) in enumerate(zip(graphs, sites, strict=True)):
        name = groups[site.row.family]
        by_group.setdefault(name, []).append(place)
        # sites of one molecule follow each other and share what is made of its atoms
        if around is None or around.graph is not graph:
            around = Surroundings(graph)
        group = trained.groups.get(name)
        shown.append(group.rows(around.pieces(site.atom)) if group is not None else ([], 0.0))
    results: dict[int, Correction] = {}
    for name, places in by_group.items():
        prior = trained.prior(name)
        for start in range(0, len(places), BLOCK):
            part = places[start : start + BLOCK]
            mean, left, explained = _block(
                trained, name, [shown[p] for p in part], [sites[p] for p in part], [values[p] for p in part]
            )
            found = zip(part, mean.tolist(), left.tolist(), explained, strict=False)
            for place, one, variance, coordinates in found:
                results[place] = _correction(trained, sites[place], prior, one, variance, coordinates)
    return [results[place] for place in range(len(sites))]


def _correction(
    trained: Model, site: Site, prior: float, mean: float, left: float, explained: Floats
) -> Correction:
    """Correction of one site from the prior variance of its group, its mean and the variance that is left."""
    support = "supported" if left < trained.threshold * prior else "extrapolated"
    spread = trained.spread
    noise = spread[site.site_class if site.site_class in spread else f"all {site.kind}s"]
    variance = left + noise**2
    return Correction(mean, trained.quantile[support] * math.sqrt(variance), support, variance, explained)


def _block(
    trained: Model, name: str, shown: Sequence[Shown], sites: Sequence[Site], values: Sequence[float]
) -> tuple[Floats, Floats, Floats]:
    """Mean, remaining variance and explained coordinates of at most `BLOCK` sites of one group, and the padding."""
    prior = trained.prior(name)
    group = trained.groups.get(name)
    if group is None:
        return np.zeros(len(sites)), np.full(len(sites), prior), np.zeros((len(sites), 1))
    covariance = _covariances(trained, group, shown, sites, values)
    mean = covariance @ group.weights
    explained = exact_steps(covariance @ group.directions, COVARIANCE_BITS)
    return mean, np.clip(prior - (explained**2).sum(axis=1), 1e-3 * prior, prior), explained


def _covariances(
    trained: Model,
    group: Group,
    shown: Sequence[Shown],
    sites: Sequence[Site],
    values: Sequence[float],
) -> Floats:
    """Covariances of at most `BLOCK` sites of one group with its basis sites, and some rows of padding."""
    # whole vectors of the processor, so that no element is computed by other means for standing last
    filled = -(-len(sites) // _VECTOR) * _VECTOR
    overlap = np.zeros((filled, len(group.total)), dtype=np.float32)
    total, value = np.ones(filled), np.zeros(filled)
    site_class, family = np.full(filled, -1), np.full(filled, -1)
    for row, ((rows, total[row]), site) in enumerate(zip(shown, sites, strict=True)):
        if rows:
            np.add.reduce(group.features.take(rows, axis=0), axis=0, out=overlap[row])
        site_class[row] = trained.classes.get(site.site_class, -1)
        family[row] = trained.families.get(site.row.family, -1)
    value[: len(values)] = values
    covariance = trained.kernel.covariance(
        overlap.astype(np.float64),
        (total, group.total),
        (value, group.value),
        (site_class, group.site_class),
        (family, group.family),
    )
    covariance *= group.scale
    return exact_steps(covariance, COVARIANCE_BITS)


def covariances(graph: Graph, site: Site, value: float) -> Floats:
    """Covariances of the correction of one site with those of the basis sites of its group.

    Parameters
    ----------
    graph : Graph
        Molecule of the site.
    site : Site
        The site.
    value : float
        Its line value [-].

    Returns
    -------
    ndarray, shape (basis,)
        [pK units squared]; empty for a group without measured values.
    """
    trained = model()
    group = trained.groups.get(group_of()[site.row.family])
    if group is None:
        return np.zeros(0)
    shown = group.rows(Surroundings(graph).pieces(site.atom))
    found: Floats = _covariances(trained, group, [shown], [site], [value])[0]
    return found
