r"""Binding polynomial of molecules with several proton sites, as pure array arithmetic.

A microstate says for every site whether it holds its proton; its weight follows from the intrinsic constants
and from the interaction of the charges. Summed by proton count, the weights are the coefficients of the
binding polynomial, and their ratios the macroscopic constants that a titration measures.

The exact sums are done with element-wise operations and sums along the last axis, never with a matrix
product, so that a molecule has the same result, bit for bit, alone and in a batch. Past 16 sites `clusters` takes over.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Booleans = NDArray[np.bool_]

LN10 = float(np.log(10.0))
EXACT_SITES = 16  # past this the 2^n microstates are not enumerated
DEGENERATE = (
    1e-9  # log10 units or protons: closer than this counts as equal, the first in site order is taken
)


@dataclass(frozen=True, slots=True)
class Microstates:
    """All 2^n microstates by proton count; within a count the first sites are the first to be protonated."""

    protons: Booleans  # (n, 2^n): proton on site i in state s
    bits: Integers  # (2^n,): bit i is set when site i holds its proton
    count: Integers  # (2^n,): number of protons
    first: Integers  # (n + 1,): first state with 0, 1, ... n protons
    order: Integers  # (2^n,): position of each state in the order in which log_weights builds them


@lru_cache(maxsize=EXACT_SITES + 1)
def microstates(n_sites: int) -> Microstates:
    """Table of the microstates of `n_sites` sites (cached).

    Parameters
    ----------
    n_sites : int
        Number of sites, 0 to 16.

    Returns
    -------
    Microstates

    Raises
    ------
    ValueError
        More than 16 sites: use `clusters.mean_field`.

    Examples
    --------
    >>> microstates(2).protons.T.astype(int).tolist()
    [[0, 0], [1, 0], [0, 1], [1, 1]]
    """
    if n_sites > EXACT_SITES:
        raise ValueError(f"{n_sites} sites: microstates are enumerated up to {EXACT_SITES}, use mean_field")
    built = np.arange(2**n_sites)
    # log_weights doubles its array from the last site to the first, the protonated half in front
    protons = np.array([(built >> (n_sites - 1 - i)) & 1 == 0 for i in range(n_sites)]).reshape(n_sites, -1)
    count = protons.sum(axis=0) if n_sites else np.zeros(1, dtype=np.int64)
    order = np.argsort(count, kind="stable")
    protons, count = np.ascontiguousarray(protons[:, order]), count[order]
    bits = sum(
        (protons[i].astype(np.int64) << i for i in range(n_sites)), np.zeros(len(order), dtype=np.int64)
    )
    table = Microstates(protons, bits, count, np.searchsorted(count, np.arange(n_sites + 1)), order)
    for array in (table.protons, table.bits, table.count, table.first, table.order):
        array.setflags(write=False)
    return table


@dataclass(frozen=True, slots=True)
class BindingPolynomial:
    """Binding polynomials of m molecules with n sites each; index N is the number of protons held."""

    is_acid: Booleans  # (m, n)
    log_z: Floats  # (m, n + 1): log10 of the coefficient of N protons
    occupancy: Floats  # (m, n + 1, n): mean proton on each site among the microstates with N protons
    base_share: Floats  # (m, n + 1): share of those with at least one proton on a base site
    neutral_log: Floats  # (m,): log10 of the weight of the microstate with every site neutral
    top: Integers  # (m, n + 1): the most populated microstate with N protons (index into microstates(n))
    top_log: Floats  # (m, n + 1): log10 of its weight
    interaction: Floats  # (m, n + 1): mean of sum W q q among the microstates with N protons [pK units]

    @property
    def constants(self) -> Floats:
        """Macroscopic constants of the 1st, 2nd, ... proton, shape (m, n) [-]."""
        return self.log_z[:, 1:] - self.log_z[:, :-1]

    @property
    def gain(self) -> Floats:
        r"""Share of each site in each step, shape (m, n steps, n sites); each step sums to one.

        It is the derivative of the macroscopic constant with respect to the intrinsic ones,
        :math:`\partial pK_N / \partial pK_i = \langle p_i \rangle_N - \langle p_i \rangle_{N-1}`.
        """
        return self.occupancy[:, 1:] - self.occupancy[:, :-1]

    @property
    def strain(self) -> Floats:
        r"""What interaction takes off each macroscopic constant to first order, shape (m, n) [pK units].

        If all W of a molecule grew by the factor s, :math:`\partial pK_N / \partial \ln s = -` this:
        :math:`\langle \sum W q q \rangle_N - \langle \sum W q q \rangle_{N-1}`.
        """
        return self.interaction[:, 1:] - self.interaction[:, :-1]

    @property
    def top_protons(self) -> Booleans:
        """Protons of the most populated microstate of each count, shape (m, n + 1, n)."""
        return microstates(self.is_acid.shape[1]).protons.T[self.top]


def log_weights(pk: Floats, is_acid: Booleans, coupling: Floats, exclusive: Booleans | None = None) -> Floats:
    r"""log10 weight of every microstate at pH 0.

    .. math:: \log_{10} w(p) = \sum_i p_i\,\mathrm{pK}_i - \sum_{i<j} W_{ij} q_i q_j

    with q_i = p_i for a base and p_i - 1 for an acid. With all other sites neutral (q = 0) the coupling
    vanishes, so the intrinsic constant of each site is the ratio of two of these weights. The array is
    doubled site by site, which costs a few operations for each microstate, whatever the number of pairs.

    Parameters
    ----------
    pk : ndarray, shape (m, n)
        Intrinsic pKaH of bases, pKa of acids, all others neutral [-].
    is_acid : ndarray of bool, shape (m, n)
        True for an acid.
    coupling : ndarray, shape (m, n, n)
        W [pK units], symmetric; the diagonal is not read.
    exclusive : ndarray of bool, shape (m, n, n), optional
        Pairs of a base and an acid of one tautomeric unit (either order): a microstate with that base
        protonated and that acid deprotonated is only a tautomer of the neutral form and has no weight of its
        own.

    Returns
    -------
    ndarray, shape (m, 2^n)
        In the order of `microstates`; minus infinity where excluded.
    """
    m, n = pk.shape
    table = microstates(n)
    acid = is_acid.astype(np.float64)
    base = 1.0 - acid
    weight = np.zeros((m, 1))
    for i in reversed(range(n)):
        field = np.zeros((m, 1))  # sum_j W_ij q_j over the later sites, one value for each of their states
        for j in reversed(range(i + 1, n)):
            w = coupling[:, i, j]
            field = np.concatenate(
                [field + (w * base[:, j])[:, None], field - (w * acid[:, j])[:, None]], axis=1
            )
        held = weight + (pk[:, i, None] - base[:, i, None] * field)
        weight = np.concatenate([held, weight + acid[:, i, None] * field], axis=1)
    weight = np.take(weight, table.order, axis=1)
    if exclusive is not None and exclusive.any():
        pairs = (exclusive | exclusive.transpose(0, 2, 1)) & ~is_acid[:, :, None] & is_acid[:, None, :]
        for i, j in np.argwhere(pairs.any(axis=0)):
            states = np.flatnonzero(table.protons[i] & ~table.protons[j])
            weight[np.ix_(np.flatnonzero(pairs[:, i, j]), states)] = -np.inf
    return weight


def binding_polynomial(
    pk: Floats, is_acid: Booleans, coupling: Floats, exclusive: Booleans | None = None
) -> BindingPolynomial:
    """Coefficients, occupancies and most populated microstates by proton count, over all 2^n microstates.

    Parameters
    ----------
    pk, is_acid, coupling, exclusive
        As for `log_weights`.

    Returns
    -------
    BindingPolynomial

    Raises
    ------
    ValueError
        More than 16 sites: use `clusters.mean_field`.

    Examples
    --------
    Glycine: an amine of 7.55 and a carboxylic acid of 4.59 with neutral neighbour, W = 2.2.

    >>> glycine = binding_polynomial(np.array([[7.55, 4.59]]), np.array([[False, True]]),
    ...                              np.array([[[0.0, 2.2], [2.2, 0.0]]]))
    >>> glycine.constants.round(2)
    array([[9.75, 2.39]])
    """
    table = microstates(pk.shape[1])
    logs = log_weights(pk, is_acid, coupling, exclusive)
    top_log = np.maximum.reduceat(logs, table.first, axis=1)
    below = logs - np.take(top_log, table.count, axis=1)
    weight = np.exp(LN10 * below)
    total = np.add.reduceat(weight, table.first, axis=1)
    occupancy = np.empty((*total.shape, pk.shape[1]))
    for i, held in enumerate(table.protons):
        occupancy[:, :, i] = np.add.reduceat(weight * held, table.first, axis=1) / total
    # log weight = sum p pK - sum W q q, so the mean of the interaction follows from those of the other two
    mean_log = (
        top_log + np.add.reduceat(weight * np.where(weight > 0.0, below, 0.0), table.first, axis=1) / total
    )
    interaction = (occupancy * pk[:, None, :]).sum(axis=2) - mean_log
    base_bits = np.zeros(len(pk), dtype=np.int64)
    for i in range(pk.shape[1]):
        base_bits |= np.where(is_acid[:, i], 0, 1 << i)
    on_base = weight * ((table.bits & base_bits[:, None]) != 0)
    candidates = np.where(below >= -DEGENERATE, np.arange(len(table.bits)), len(table.bits))
    return BindingPolynomial(
        is_acid=is_acid,
        log_z=top_log + np.log10(total),
        occupancy=occupancy,
        base_share=np.add.reduceat(on_base, table.first, axis=1) / total,
        neutral_log=np.where(is_acid, pk, 0.0).sum(axis=1),
        top=np.minimum.reduceat(candidates, table.first, axis=1),
        top_log=top_log,
        interaction=interaction,
    )
