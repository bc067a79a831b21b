"""Training of the residual regression: a Gaussian process on site corrections, seen through the equilibrium.

A measured macroscopic constant is, to first order, the line's prediction plus the corrections of the molecule's sites
weighted by their gains. Exact regression serves for cross-validation; the shipped model keeps a few hundred basis
sites (chosen by pivoted Cholesky) and the matrices that mean and variance need.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from measured_rows import Row
from scipy import sparse

from basirank.residual import (
    COVARIANCE_BITS,
    DIRECTION_BITS,
    WEIGHT_BITS,
    Kernel,
    exact_steps,
    group_of,
    site_counts,
    weighted,
)

SCALE = {
    "aliphatic": 0.35,
    "carboxylic": 0.30,
    "arylamine": 0.50,
    "azole": 0.70,
    "amidine": 0.90,
    "amide": 0.90,
    "azine": 1.00,
    "phenol": 0.90,
    "nh_acid": 1.10,
}
"""Variance of the corrections by group, as a share of the kernel's: what the lines of the group miss."""
KERNEL = Kernel(same_class=0.85, same_family=1.2, same_group=0.8, fade=0.9, value_share=0.3, value_width=2.2)
"""Hyperparameters, chosen in cross-validation grouped by compound among a few dozen settings."""
NOISE = 0.20
"""Scatter of single compounds that no neighbour explains [pK units]."""
CLIP = 3.0
"""Residuals are cut here: past it a row is an error or chemistry of its own, not a trend."""
SUSPECT = 2.5
"""Rows farther than this from their line count with a threefold error."""


@dataclass(frozen=True, slots=True)
class SiteTable:
    """All sites of the measured molecules, their features and codes, and where each row finds its own."""

    features: sparse.csr_matrix
    vocabulary: list[str]
    total: np.ndarray
    site_class: np.ndarray
    family: np.ndarray
    group: np.ndarray
    classes: dict[str, int]
    families: dict[str, int]
    groups: dict[str, int]
    of_row: list[np.ndarray]


def site_table(rows: list[Row], fade: float) -> SiteTable:
    """Features of the sites of all molecules in the measured table, each molecule once."""
    vocabulary: dict[str, int] = {}
    classes: dict[str, int] = {}
    families: dict[str, int] = {}
    groups: dict[str, int] = {}
    entries: list[tuple[int, int, float]] = []
    codes: list[tuple[int, int, int]] = []
    known: dict[str, np.ndarray] = {}
    of_row = []
    for row in rows:
        if row.group not in known:
            members = []
            for site in row.lines.sites:
                place = len(codes)
                members.append(place)
                codes.append(
                    (
                        classes.setdefault(site.site_class, len(classes)),
                        families.setdefault(site.row.family, len(families)),
                        groups.setdefault(group_of()[site.row.family], len(groups)),
                    )
                )
                for feature, weight in weighted(site_counts(row.lines.graph, site), fade):
                    entries.append((place, vocabulary.setdefault(feature, len(vocabulary)), weight))
            known[row.group] = np.array(members, dtype=int)
        of_row.append(known[row.group])
    places, columns, weights = (np.array(part) for part in zip(*entries, strict=True))
    features = sparse.csr_matrix((np.sqrt(weights), (places, columns)), shape=(len(codes), len(vocabulary)))
    total = np.asarray(features.multiply(features).sum(axis=1)).ravel()
    code = np.array(codes)
    return SiteTable(
        features,
        list(vocabulary),
        total,
        code[:, 0],
        code[:, 1],
        code[:, 2],
        classes,
        families,
        groups,
        of_row,
    )


def covariance(table: SiteTable, value: np.ndarray, first: np.ndarray, second: np.ndarray) -> np.ndarray:
    """Covariance of the corrections of two sets of sites; zero between groups."""
    result = np.zeros((len(first), len(second)))
    for name, code in table.groups.items():
        rows = np.flatnonzero(table.group[first] == code)
        columns = np.flatnonzero(table.group[second] == code)
        if not (len(rows) and len(columns)):
            continue
        one, other = first[rows], second[columns]
        result[np.ix_(rows, columns)] = SCALE[name] * KERNEL.covariance(
            (table.features[one] @ table.features[other].T).toarray(),
            (table.total[one], table.total[other]),
            (value[one], value[other]),
            (table.site_class[one], table.site_class[other]),
            (table.family[one], table.family[other]),
        )
    return result


def gain_matrix(table: SiteTable, gains: list[np.ndarray], members: np.ndarray) -> sparse.csr_matrix:
    """Rows by sites: how much each site's correction moves each measured constant."""
    row_index = np.repeat(np.arange(len(members)), [len(gains[m]) for m in members])
    site_index = np.concatenate([table.of_row[m] for m in members])
    values = np.concatenate([gains[m] for m in members])
    return sparse.csr_matrix((values, (row_index, site_index)), shape=(len(members), len(table.total)))


def row_noise(rows: list[Row], residual: np.ndarray, members: np.ndarray) -> np.ndarray:
    """Variance of each measured value about its line and corrections [pK units squared]."""
    error = np.array([rows[m].error for m in members])
    return (NOISE**2 + error**2) * np.where(np.abs(residual) > SUSPECT, 9.0, 1.0)


def pivots(table: SiteTable, value: np.ndarray, candidates: np.ndarray, size: int) -> np.ndarray:
    """Basis sites by pivoted Cholesky: each step takes the site that the others explain least."""
    k = covariance(table, value, candidates, candidates)
    left = np.diag(k).copy()
    factor = np.zeros((size, len(candidates)))
    chosen: list[int] = []
    for step in range(size):
        pivot = int(np.argmax(left))
        if left[pivot] < 1e-6:
            break
        chosen.append(pivot)
        factor[step] = (k[pivot] - factor[:step, pivot] @ factor[:step]) / np.sqrt(left[pivot])
        left = np.maximum(left - factor[step] ** 2, 0.0)
        left[chosen] = 0.0
    return candidates[np.array(chosen)]


JITTER = 3e-3
"""Share of the variance of a basis site that its neighbours never explain."""


DIRECTIONS = 256
"""Directions of the explained variance that a group keeps; what is dropped counts as not explained."""


@dataclass(frozen=True, slots=True)
class Sparse:
    """Basis sites, their weights and, by code of group, the directions that explain variance.

    The explained variance of a site with covariances k to the basis sites of its group is the sum of squares of
    k times the directions. `pulls` (basis, training rows) says how much each measured value moves a weight.
    """

    basis: np.ndarray
    weights: np.ndarray
    directions: dict[int, np.ndarray]
    pulls: np.ndarray


def sparse_fit(
    rows: list[Row],
    table: SiteTable,
    value: np.ndarray,
    gains: list[np.ndarray],
    residual: np.ndarray,
    train: np.ndarray,
    size: int,
) -> Sparse:
    """Projected-process regression (Rasmussen and Williams 2006, section 8.3.4), at most `size` sites a group."""
    g = gain_matrix(table, gains, train)
    strong = np.unique(g.indices[np.abs(g.data) > 0.2])
    parts = [strong[table.group[strong] == code] for code in table.groups.values()]
    basis = np.concatenate([pivots(table, value, part, min(size, len(part))) for part in parts if len(part)])
    everything = np.arange(len(table.total))
    inner = covariance(table, value, basis, basis)
    # enough on the diagonal to keep the inverse small: its steps must fit into exact products
    inner[np.diag_indices_from(inner)] += JITTER * np.diag(inner)
    outer = np.asarray(g @ covariance(table, value, everything, basis))
    scaled = outer / row_noise(rows, residual[train], train)[:, None]
    information = inner + outer.T @ scaled
    pulls = np.linalg.solve(information, scaled.T)
    weights = pulls @ np.clip(residual[train], -CLIP, CLIP)
    explained = np.linalg.inv(inner) - np.linalg.inv(information)
    directions = {}
    for code in table.groups.values():
        members = np.flatnonzero(table.group[basis] == code)
        block = np.ix_(members, members)
        directions[code] = exact_steps(leading(inner[block], explained[block]), DIRECTION_BITS)
    return Sparse(basis, exact_steps(weights, WEIGHT_BITS), directions, pulls)


def leading(inner: np.ndarray, explained: np.ndarray) -> np.ndarray:
    """Directions u with k' E k ~ |k' u|^2 for covariances k: the leading ones of E as the kernel weighs them."""
    if not len(inner):
        return np.zeros((0, 1))
    lower = np.linalg.cholesky(inner)
    share, vectors = np.linalg.eigh(lower.T @ ((explained + explained.T) / 2) @ lower)
    kept = np.argsort(-share)[:DIRECTIONS]
    return np.linalg.solve(lower.T, vectors[:, kept]) * np.sqrt(np.maximum(share[kept], 0.0))


def sparse_prediction(
    table: SiteTable, value: np.ndarray, gains: list[np.ndarray], test: np.ndarray, trained: Sparse
) -> tuple[np.ndarray, np.ndarray]:
    """Mean and variance of the macroscopic residual of rows, as the shipped model gives them.

    The variances of the sites of a molecule are added by their gains squared, as the equilibrium stage does.
    """
    g = gain_matrix(table, gains, test)
    sites = np.unique(g.indices)
    cross = covariance(table, value, sites, trained.basis)
    mean, left = np.zeros(len(table.total)), np.zeros(len(table.total))
    mean[sites] = cross @ trained.weights
    scale = {code: SCALE[name] for name, code in table.groups.items()}
    prior = KERNEL.variance * np.array([scale[code] for code in table.group[sites]])
    explained = np.zeros(len(sites))
    for code, directions in trained.directions.items():
        members = np.flatnonzero(table.group[trained.basis] == code)
        explained += (exact_steps(cross[:, members] @ directions, COVARIANCE_BITS) ** 2).sum(axis=1)
    left[sites] = np.clip(prior - explained, 1e-3 * prior, prior)
    return g @ mean, g.multiply(g) @ left
