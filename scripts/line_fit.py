"""Refining of parents, reaction constants and interactions on measured values, with the tables as prior.

Measured constants are macroscopic, so the fit goes through the equilibrium: each value depends on the intrinsic
constants of all sites of its molecule by the change of their occupancy over the step, and on their interactions.
A Bayesian linear regression (Gauss-Newton around the equilibrium) with the published value as prior.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from measured_rows import Row

from basirank.binding import LN10, binding_polynomial, log_weights, microstates
from basirank.increments import coefficients
from basirank.interactions import Law, Paths, coupling_matrix, prior_law
from basirank.sites import site_classes

if TYPE_CHECKING:
    from residual_fit import SiteTable

MODEL_ERROR = 0.45
"""Error of a linear free-energy line itself [pK units]: what is left for well-behaved series."""
ROBUST_SCALE = 2.5
"""Residuals past this many standard deviations lose weight (Student-like), so that odd rows don't steer."""


def priors() -> dict[tuple[str, str, str], tuple[float, float, str]]:
    """Prior value, standard deviation and source of every parameter."""
    table = {}
    for row in site_classes():
        if row.kind != "none":
            table.setdefault((row.name, "", "parent"), (row.parent, row.sd, row.source))
    for group in coefficients().values():
        for c in group:
            table[c.key] = (c.prior, c.sd, c.source)
    return table


LAW_SD = 0.3
"""Plausible relative error of each interaction, by its logarithm."""
STEP = 0.02
"""Step of the numerical derivative by the logarithm of an interaction."""


@dataclass(frozen=True, slots=True)
class Through:
    """Macroscopic constants of rows, and what they depend on.

    `gains` holds for each row the derivatives by the intrinsic constants of its molecule's sites, `strain` what
    interaction takes off the constant (its derivative by a common factor of all W, with the sign changed).
    """

    predicted: np.ndarray
    jacobian: np.ndarray
    gains: list[np.ndarray]
    strain: np.ndarray


def balance(row: Row, pk: np.ndarray, coupling: np.ndarray) -> tuple[float, np.ndarray]:
    """Logarithm of the ratio of two protomers of a row, and its derivatives by the intrinsic constants.

    All microstates of the row's number of protons count that hold the proton on the first site of the pair and not
    on the second, against those of the reverse.
    """
    assert row.pair is not None
    table = microstates(len(pk))
    weights = log_weights(pk[None], row.acid[None], coupling[None], row.exclusive[None])[0]
    sums, means = [], []
    for holder, other in (row.pair, row.pair[::-1]):
        members = np.flatnonzero((table.count == row.index) & table.protons[holder] & ~table.protons[other])
        top = weights[members].max()
        share = np.exp(LN10 * (weights[members] - top))
        sums.append(float(top + np.log10(share.sum())))
        means.append(table.protons[:, members] @ share / share.sum())
    return sums[0] - sums[1], means[0] - means[1]


def _moved(theta: np.ndarray, parameter: int) -> np.ndarray:
    """Parameters with one of them a step on."""
    moved = theta.copy()
    moved[parameter] += STEP
    return moved


class Fit:
    """Gauss-Newton fit of lines and interactions to macroscopic values, with priors.

    The parameters are the coefficients of the lines (first) and the logarithms of the interactions (last).
    """

    def __init__(self, rows: list[Row], prior: dict[tuple[str, str, str], tuple[float, float, str]]) -> None:
        self.names = list(prior)
        self.column = {key: position for position, key in enumerate(self.names)}
        rule = prior_law()
        self.law_names = (
            [("saturated", bonds + 1) for bonds in range(len(rule.saturated))]
            + [("conjugated", bonds + 1) for bonds in range(len(rule.conjugated))]
            + [("ring", bonds + 1) for bonds in range(len(rule.ring))]
            + [("parallel", 0), ("acid share", 0), ("hydrogen bond", 0)]
        )
        law_start = np.log(
            [
                *rule.saturated,
                *rule.conjugated,
                *rule.ring,
                rule.parallel_paths,
                rule.acid_share,
                rule.hydrogen_bond,
            ]
        )
        self.lines = len(self.names)
        self.mean = np.concatenate([[prior[key][0] for key in self.names], law_start])
        self.sd = np.concatenate([[prior[key][1] for key in self.names], np.full(len(law_start), LAW_SD)])
        self.sd[-2] = 0.08  # of the acid share, a factor near one
        self.rows = rows
        self.design = []
        for row in rows:
            x = np.zeros((len(row.keys), self.lines))
            for site, terms in enumerate(row.keys):
                for key, descriptor in terms:
                    x[site, self.column[key]] += descriptor
            self.design.append(x)
        self.value = np.array([row.value for row in rows])
        self.noise = np.array([row.error**2 + MODEL_ERROR**2 for row in rows])

    def law(self, theta: np.ndarray) -> Law:
        """Interaction law of a parameter vector."""
        prior = prior_law()
        values = np.exp(theta[self.lines :])
        n = len(prior.saturated)
        saturated = np.minimum.accumulate(values[:n])  # never more repulsion from farther away
        return Law(
            saturated,
            np.maximum(values[n : 2 * n], saturated),  # nor less along a conjugated path than along a chain
            prior.beyond,
            float(values[-3]),
            float(values[-2]),
            values[2 * n : -3],
            float(values[-1]),
            prior.shared_proton,
        )

    def law_values(self, theta: np.ndarray) -> list[float]:
        """Values of the law in the order of `law_names`."""
        rule = self.law(theta)
        return [
            *rule.saturated,
            *rule.conjugated,
            *rule.ring,
            rule.parallel_paths,
            rule.acid_share,
            rule.hydrogen_bond,
        ]

    def macroscopic(self, theta: np.ndarray, members: np.ndarray, by_law: bool = True) -> Through:
        """Predicted constants of rows and their derivatives by the parameters and by the intrinsic constants."""
        predicted = np.empty(len(members))
        jacobian = np.zeros((len(members), len(theta)))
        gains: list[np.ndarray] = [np.empty(0)] * len(members)
        strain = np.zeros(len(members))
        rule = self.law(theta)
        by_size: dict[int, list[int]] = defaultdict(list)
        for place, member in enumerate(members):
            row = self.rows[member]
            if row.pair is None:
                by_size[len(row.keys)].append(place)
                continue
            design = self.design[member]
            pk = design @ theta[: self.lines]
            predicted[place], gains[place] = balance(row, pk, coupling_matrix(row.paths, rule))
            jacobian[place, : self.lines] = gains[place] @ design
            strain[place] = float(gains[place] @ pk) - predicted[place]
            for parameter in range(self.lines, len(theta)) if by_law else ():
                coupling = coupling_matrix(row.paths, self.law(_moved(theta, parameter)))
                jacobian[place, parameter] = (balance(row, pk, coupling)[0] - predicted[place]) / STEP
        for n, places in by_size.items():
            for start in range(0, len(places), 64):
                part = places[start : start + 64]
                chosen = [self.rows[members[place]] for place in part]
                index = np.array([row.index for row in chosen])
                pk = np.array([self.design[members[place]] @ theta[: self.lines] for place in part])
                acid = np.array([row.acid for row in chosen])
                exclusive = np.array([row.exclusive for row in chosen])
                stacked = Paths(*(np.array([getattr(r.paths, f) for r in chosen]) for f in Paths.__slots__))
                step = np.arange(len(part))
                polynomial = binding_polynomial(pk, acid, coupling_matrix(stacked, rule), exclusive)
                predicted[part] = polynomial.constants[step, index]
                strain[part] = polynomial.strain[step, index]
                gain = polynomial.gain[step, index]
                for k, place in enumerate(part):
                    gains[place] = gain[k]
                    jacobian[place, : self.lines] = gain[k] @ self.design[members[place]]
                for parameter in range(self.lines, len(theta)) if n > 1 and by_law else ():
                    coupling = coupling_matrix(stacked, self.law(_moved(theta, parameter)))
                    other = binding_polynomial(pk, acid, coupling, exclusive).constants[step, index]
                    jacobian[part, parameter] = (other - predicted[part]) / STEP
        return Through(predicted, jacobian, gains, strain)

    def solve(self, members: np.ndarray, start: np.ndarray | None = None, rounds: int = 6) -> np.ndarray:
        """Posterior mean on the given rows."""
        theta = self.mean.copy() if start is None else start.copy()
        for _ in range(rounds):
            through = self.macroscopic(theta, members)
            predicted, jacobian = through.predicted, through.jacobian
            residual = self.value[members] - predicted
            noise = self.noise[members]
            weight = 1.0 / (1.0 + residual**2 / (ROBUST_SCALE**2 * noise)) / noise
            hessian = (jacobian * weight[:, None]).T @ jacobian + np.diag(1.0 / self.sd**2)
            gradient = jacobian.T @ (weight * residual) + (self.mean - theta) / self.sd**2
            theta = theta + np.clip(np.linalg.solve(hessian, gradient), -2.0, 2.0)
        return theta

    def site_values(self, theta: np.ndarray, table: SiteTable) -> np.ndarray:
        """Line values of all sites of the table."""
        values = np.empty(len(table.total))
        for members, design in zip(table.of_row, self.design, strict=True):
            values[members] = design @ theta[: self.lines]
        return values
