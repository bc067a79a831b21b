"""Refining of parents, reaction constants and interactions on measured values, with the tables as prior.

Measured constants are macroscopic, so the fit goes through the equilibrium: each value depends on the intrinsic
constants of all sites of its molecule by the change of their occupancy over the step, and on their interactions.
A Bayesian linear regression (Gauss-Newton around the equilibrium) with the published value as prior.
"""

from __future__ import annotations

import csv
import sys
from collections import defaultdict
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from basirank.binding import binding_polynomial
from basirank.conditions import (
    IONIC_STRENGTH_RANGE,
    STANDARD_TEMPERATURE,
    TEMPERATURE_RANGE,
    to_standard,
)
from basirank.increments import coefficients
from basirank.interactions import Law, Paths, coupling_matrix, find_paths, prior_law
from basirank.prediction import Lines, site_lines
from basirank.sites import site_classes
from basirank.structures import Refusal, read_parent

if TYPE_CHECKING:
    from residual_fit import SiteTable

QUALITY_ERROR = {"reliable": 0.05, "approximate": 0.10, "uncertain": 0.20, "": 0.20}
"""Error of a measured value by the compilation's own judgement [pK units] (common practice)."""
MODEL_ERROR = 0.45
"""Error of a linear free-energy line itself [pK units]: what is left for well-behaved series."""
MOST_SITES = 12
"""Molecules with more sites are left out of the fit."""
ROBUST_SCALE = 2.5
"""Residuals past this many standard deviations lose weight (Student-like), so that odd rows don't steer."""


@dataclass(slots=True)
class Row:
    """One measured value with the sites of its molecule."""

    record: dict[str, str]
    group: str
    value: float
    error: float
    index: int
    keys: list[list[tuple[tuple[str, str, str], float]]]
    lines: Lines
    paths: Paths
    exclusive: np.ndarray
    acid: np.ndarray
    main_site: int = 0


def load(path: Path) -> list[Row]:
    """Read a table in the columns of `data/measured.csv`."""
    with path.open(encoding="utf-8", newline="") as handle:
        return rows_of(csv.DictReader(handle))


def rows_of(records: Iterable[dict[str, str]]) -> list[Row]:
    """Find the macroscopic step that each value belongs to."""
    rows: list[Row] = []
    parents: dict[str, tuple[str, Lines, Paths, np.ndarray] | None] = {}
    for record in records:
        smiles = record["smiles"]
        if smiles not in parents:
            try:
                parent = read_parent(smiles)
            except Refusal as reason:
                print(f"skipped {smiles}: {reason}", file=sys.stderr)
                parents[smiles] = None
                continue
            lines = site_lines(parent)
            paths, exclusive = find_paths(lines.graph, lines.sites)
            none = np.zeros((len(lines.sites), len(lines.sites)), dtype=bool)
            parents[smiles] = (parent.smiles, lines, paths, none if exclusive is None else exclusive)
        known = parents[smiles]
        if known is None:
            continue
        group, lines, paths, exclusive = known
        acid = np.array([site.kind == "acid" for site in lines.sites], dtype=bool)
        index = int(acid.sum()) + int(record["acid_charge"]) - 1
        if not 0 <= index < len(acid) or len(acid) > MOST_SITES:
            print(f"skipped {record['name']}, {smiles}: no such step", file=sys.stderr)
            continue
        value = at_standard(record, sum(lines.graph.charge))
        keys = [[(term.key, term.descriptor) for term in terms] for terms in lines.terms]
        error = QUALITY_ERROR.get(record["quality"].lower(), 0.3)
        rows.append(Row(record, group, value, error, index, keys, lines, paths, exclusive, acid))
    return rows


def at_standard(record: dict[str, str], fixed_charge: int) -> float:
    """Measured value brought to 25 C and ionic strength 0; what isn't stated is taken as these.

    A value at a stated ionic strength is a concentration constant unless its note says mixed: such are those of the
    polyamines and chelators (1,2-diaminoethane 7.08 at 0.1 mol/L against 6.85, Martell and Smith, memory). A value
    at a temperature or an ionic strength out of reach of the laws stays as it is in that respect.
    """
    family = next(row.family for row in site_classes() if row.name == record["class"] and row.kind != "none")
    temperature = float(record["temperature_c"] or STANDARD_TEMPERATURE)
    strength = float(record["ionic_strength"] or 0.0)
    return float(
        to_standard(
            float(record["value"]),
            family=family,
            acid_charge=int(record["acid_charge"]) + fixed_charge,
            temperature=temperature if _within(temperature, TEMPERATURE_RANGE) else STANDARD_TEMPERATURE,
            ionic_strength=strength if _within(strength, IONIC_STRENGTH_RANGE) else 0.0,
            kind="mixed" if "mixed constant" in record["note"] else "concentration",
        )
    )


def _within(value: float, ends: tuple[float, float]) -> bool:
    return ends[0] <= value <= ends[1]


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
            by_size[len(self.rows[member].keys)].append(place)
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
                    moved = theta.copy()
                    moved[parameter] += STEP
                    coupling = coupling_matrix(stacked, self.law(moved))
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
