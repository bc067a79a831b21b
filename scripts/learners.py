"""Learners for what the lines miss, each given the same sites, features and residuals.

A learner takes a setting and the places of the training and test rows, and returns the residual that it expects of the
test rows. Those that are linear in the corrections see each measured value through the gains of all sites of its
molecule, as the shipped regression does. Trees can't: there the residual is assigned to the main site of the row,
divided by its gain, and what is foretold of the main site counts with that gain.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass

import numpy as np
from measured_rows import Row
from residual_fit import (
    CLIP,
    SiteTable,
    covariance,
    gain_matrix,
    row_noise,
    sparse_fit,
    sparse_prediction,
)
from scipy import linalg

BASIS = 900
"""Basis sites of a group in the sparse process, as `scripts/train` has it."""
RARE = 10
"""Trees see the features that at least so many training sites have."""
CLASS_SHARE, FAMILY_SHARE = 10.0, 5.0
"""Weight of class and family in the linear kernel, in units of one feature beside the site."""
RIDGE_SCALES = (0.0001, 0.0003, 0.001, 0.003, 0.01)
KERNEL_RIDGE_NOISE = (0.1, 0.2, 0.4, 0.8, 1.6)
"""Strengths from which an inner split chooses."""


@dataclass(frozen=True, slots=True)
class Setting:
    """All rows with their sites, and what the lines of the current fold leave of them.

    `inner` marks the training rows that an inner split may leave out to choose a strength.
    """

    rows: list[Row]
    table: SiteTable
    value: np.ndarray
    gains: list[np.ndarray]
    residual: np.ndarray
    inner: np.ndarray

    @property
    def target(self) -> np.ndarray:
        return np.clip(self.residual, -CLIP, CLIP)


Learner = Callable[[Setting, np.ndarray, np.ndarray], np.ndarray]


def nothing(setting: Setting, train: np.ndarray, test: np.ndarray) -> np.ndarray:
    """No correction: the lines alone."""
    return np.zeros(len(test))


def sparse_process(setting: Setting, train: np.ndarray, test: np.ndarray) -> np.ndarray:
    """The regression that is shipped."""
    s = setting
    trained = sparse_fit(s.rows, s.table, s.value, s.gains, s.residual, train, BASIS)
    return sparse_prediction(s.table, s.value, s.gains, test, trained)[0]


def row_kernel(setting: Setting, of_sites: Callable[[np.ndarray], np.ndarray]) -> np.ndarray:
    """Covariance of all rows through the gains, from that of the sites of each group."""
    g = gain_matrix(setting.table, setting.gains, np.arange(len(setting.rows))).tocsc()
    result = np.zeros((len(setting.rows), len(setting.rows)))
    for code in setting.table.groups.values():
        members = np.flatnonzero(setting.table.group == code)
        part = g[:, members]
        touched = np.flatnonzero(np.diff(part.tocsr().indptr))
        part = part[touched]
        result[np.ix_(touched, touched)] += part @ (part @ of_sites(members)).T
    return result


def kernel_mean(
    kernel: np.ndarray, noise: np.ndarray, target: np.ndarray, train: np.ndarray, test: np.ndarray
) -> np.ndarray:
    """Mean of a Gaussian process: noise is a variance for each row."""
    inner = kernel[np.ix_(train, train)]
    inner[np.diag_indices_from(inner)] += noise[train]
    return kernel[np.ix_(test, train)] @ linalg.solve(inner, target[train], assume_a="pos", overwrite_a=True)


def site_covariance(setting: Setting) -> Callable[[np.ndarray], np.ndarray]:
    """The kernel of the shipped regression."""
    return lambda members: covariance(setting.table, setting.value, members, members)


def exact_process(setting: Setting, train: np.ndarray, test: np.ndarray) -> np.ndarray:
    """The same Gaussian process without the projection on basis sites."""
    noise = row_noise(setting.rows, setting.residual, np.arange(len(setting.rows)))
    return kernel_mean(row_kernel(setting, site_covariance(setting)), noise, setting.target, train, test)


def best_of(
    choices: Iterable[float],
    predict: Callable[[float, np.ndarray, np.ndarray], np.ndarray],
    setting: Setting,
    train: np.ndarray,
) -> float:
    """The choice of smallest mean absolute error on the inner split of the training rows."""
    held = setting.inner[train]
    fitted, tried = train[~held], train[held]

    def error(choice: float) -> float:
        return float(np.abs(predict(choice, fitted, tried) - setting.residual[tried]).mean())

    return min(choices, key=error)


def kernel_ridge(setting: Setting, train: np.ndarray, test: np.ndarray) -> np.ndarray:
    """Same kernel, one noise for all rows, chosen on an inner split."""
    kernel = row_kernel(setting, site_covariance(setting))

    def predict(noise: float, fitted: np.ndarray, asked: np.ndarray) -> np.ndarray:
        return kernel_mean(kernel, np.full(len(setting.rows), noise), setting.target, fitted, asked)

    return predict(best_of(KERNEL_RIDGE_NOISE, predict, setting, train), train, test)


def ridge(setting: Setting, train: np.ndarray, test: np.ndarray) -> np.ndarray:
    """Linear in the weighted counts, a set of coefficients for each group, and an offset for each class and family."""
    table = setting.table

    def linear(members: np.ndarray) -> np.ndarray:
        overlap = (table.features[members] @ table.features[members].T).toarray()
        for share, code in ((CLASS_SHARE, table.site_class), (FAMILY_SHARE, table.family)):
            overlap += share * (code[members][:, None] == code[members][None, :])
        return overlap

    kernel = row_kernel(setting, linear)
    noise = row_noise(setting.rows, setting.residual, np.arange(len(setting.rows)))

    def predict(scale: float, fitted: np.ndarray, asked: np.ndarray) -> np.ndarray:
        return kernel_mean(kernel, noise / scale, setting.target, fitted, asked)

    return predict(best_of(RIDGE_SCALES, predict, setting, train), train, test)


def main_sites(setting: Setting) -> tuple[np.ndarray, np.ndarray]:
    """Site of the largest gain of each row, and that gain."""
    place = [int(np.argmax(np.abs(gain))) for gain in setting.gains]
    sites = np.array([setting.table.of_row[m][p] for m, p in enumerate(place)])
    return sites, np.array([setting.gains[m][p] for m, p in enumerate(place)])


def tree_columns(setting: Setting, sites: np.ndarray, train: np.ndarray) -> np.ndarray:
    """Class, family, group and line value of sites, then their weighted counts of features that aren't rare."""
    table = setting.table
    features = table.features[sites]
    kept = np.flatnonzero(np.asarray((features[train] > 0).sum(axis=0)).ravel() >= RARE)
    codes = np.column_stack(
        [table.site_class[sites], table.family[sites], table.group[sites], setting.value[sites]]
    )
    return np.hstack([codes, features[:, kept].toarray()]).astype(np.float32)


def boosted_trees(setting: Setting, train: np.ndarray, test: np.ndarray) -> np.ndarray:
    """Gradient-boosted trees on the main site."""
    from sklearn.ensemble import HistGradientBoostingRegressor

    sites, gain = main_sites(setting)
    columns = tree_columns(setting, sites, train)
    noise = row_noise(setting.rows, setting.residual[train], train)
    trees = HistGradientBoostingRegressor(
        learning_rate=0.05, max_iter=150, max_leaf_nodes=15, min_samples_leaf=8, l2_regularization=5.0,
        max_features=0.1, categorical_features=[0, 1, 2], early_stopping=False, random_state=7,
    )  # fmt: skip
    trees.fit(columns[train], setting.target[train] / gain[train], sample_weight=gain[train] ** 2 / noise)
    return trees.predict(columns[test]) * gain[test]


def random_forest(setting: Setting, train: np.ndarray, test: np.ndarray) -> np.ndarray:
    """Random forest on the main site."""
    from sklearn.ensemble import RandomForestRegressor

    sites, gain = main_sites(setting)
    columns = tree_columns(setting, sites, train)
    noise = row_noise(setting.rows, setting.residual[train], train)
    forest = RandomForestRegressor(
        n_estimators=150, min_samples_leaf=1, max_features=0.2, n_jobs=2, random_state=7
    )
    forest.fit(columns[train], setting.target[train] / gain[train], sample_weight=gain[train] ** 2 / noise)
    return forest.predict(columns[test]) * gain[test]


LEARNERS: dict[str, Learner] = {
    "no correction, lines alone": nothing,
    "sparse Gaussian process (shipped)": sparse_process,
    "exact Gaussian process": exact_process,
    "kernel ridge, same kernel": kernel_ridge,
    "ridge": ridge,
    "gradient-boosted trees": boosted_trees,
    "random forest": random_forest,
}
