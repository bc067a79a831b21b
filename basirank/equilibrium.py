"""From the sites of a molecule to what is measured and seen: macroscopic constants, charge and dominant form.

Each site comes with its intrinsic constant and feels the charge of the others through the coupling W; the
statistical factors of equivalent sites, the spread of the constants of a diamine and the zwitterion of an
amino acid all follow from the same sum over microstates. Up to 16 sites the sum is exact; past that it is cut
into clusters.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from .binding import (
    DEGENERATE,
    EXACT_SITES,
    LN10,
    BindingPolynomial,
    Booleans,
    Floats,
    Integers,
    binding_polynomial,
    microstates,
)
from .clusters import mean_field

STATES_AT_ONCE = 2**18  # microstates (of all molecules together) held in memory at a time

Kind = Literal["base", "acid"]


@dataclass(frozen=True, slots=True, eq=False)
class SiteSet:
    """Sites of one molecule as the equilibrium sees them, in one fixed (canonical) order.

    Parameters
    ----------
    kinds : sequence of "base" or "acid", length n
    pk : sequence of float, length n
        Intrinsic pKaH of bases, pKa of acids, every other site neutral [-].
    half_width : sequence of float, length n
        Half of the 90 % interval of each [-].
    coupling : ndarray, shape (n, n)
        W [pK units], symmetric.
    exclusive : ndarray of bool, shape (n, n), or None
        Pairs of a base and an acid of one tautomeric unit: that base protonated and that acid deprotonated is
        a tautomer of the neutral form and isn't counted again. None: no such pair.
    fixed_charge : int
        Formal charge of the parent, all sites neutral.
    law_half_width : float
        Half of the 90 % interval of the couplings as a share of them: errors of the law of interaction go together
        within a molecule [-].
    """

    kinds: Sequence[Kind]
    pk: Sequence[float] | Floats
    half_width: Sequence[float] | Floats
    coupling: Floats
    exclusive: Booleans | None = None
    fixed_charge: int = 0
    law_half_width: float = 0.0


@dataclass(frozen=True, slots=True)
class Step:
    """One macroscopic step."""

    kind: Kind
    value: float
    half_width: float  # of the 90 % interval, from those of the sites and of their interactions
    carrier: int  # index of the site that takes the proton


@dataclass(frozen=True, slots=True)
class State:
    """What the molecule looks like at one pH."""

    ph: float
    net_charge: float  # mean over all microstates, fixed charges included
    protonated_fraction: float  # share of molecules with at least one proton on a base site
    dominant: tuple[bool, ...]  # proton on each site in the most populated microstate
    dominant_fraction: float
    neutral_fraction: float  # share of molecules without any charge
    zwitterion_fraction: float  # share of molecules whose charges, fixed ones included, add up to none


@dataclass(frozen=True, slots=True)
class Equilibrium:
    """Macroscopic steps (bases from the highest, then acids from the lowest) and the state at each pH."""

    steps: tuple[Step, ...]
    states: tuple[State, ...]
    approximate: bool


def macroscopic_pkah(intrinsic: ArrayLike, coupling: ArrayLike) -> Floats:
    r"""Macroscopic constants of a molecule with several base sites.

    .. math:: \mathrm{pK}_N = \log_{10}\,(Z_N / Z_{N-1})

    Z_N being the sum over the microstates with N protons of their weights.

    Parameters
    ----------
    intrinsic : array_like, shape (n_sites,)
        Intrinsic pKaH of each site, others neutral [-].
    coupling : array_like, shape (n_sites, n_sites)
        Interaction W [pK units], symmetric, zero diagonal.

    Returns
    -------
    ndarray, shape (n_sites,)
        Constants for the first, second, ... proton, highest first [-].

    Raises
    ------
    ValueError
        More than 16 sites: use `mean_field`.

    Examples
    --------
    >>> macroscopic_pkah([9.63, 9.63], [[0, 2.48], [2.48, 0]]).round(2)
    array([9.93, 6.85])

    References
    ----------
    .. [1] Perrin 1965, entry of 1,2-diaminoethane (measured 9.93, 6.85).
    """
    pk = np.atleast_1d(np.asarray(intrinsic, dtype=np.float64))[None, :]
    w = np.asarray(coupling, dtype=np.float64).reshape(1, pk.shape[1], pk.shape[1])
    constants: Floats = binding_polynomial(pk, np.zeros(pk.shape, dtype=bool), w).constants[0]
    return constants


def equilibrate(batch: Sequence[SiteSet], ph: Sequence[float]) -> list[Equilibrium]:
    """Equilibria of many molecules; those with the same number of sites are computed together.

    The result for one molecule is the same, bit for bit, whatever it is batched with.

    Parameters
    ----------
    batch : sequence of SiteSet
    ph : sequence of float
        pH values [-].

    Returns
    -------
    list of Equilibrium
        In the order of `batch`.

    Raises
    ------
    ValueError
        A constant or a coupling that isn't a finite number.
    """
    ph_values = [float(value) for value in ph]
    by_size: dict[int, list[int]] = {}
    for index, sites in enumerate(batch):
        by_size.setdefault(len(sites.kinds), []).append(index)
    results: dict[int, Equilibrium] = {}
    for n, members in by_size.items():
        at_once = max(1, STATES_AT_ONCE >> min(n, EXACT_SITES))
        for start in range(0, len(members), at_once):
            part = members[start : start + at_once]
            sets = [batch[index] for index in part]
            if n == 0:
                done = [_without_sites(sites, ph_values) for sites in sets]
            elif n <= EXACT_SITES:
                done = _exact(sets, n, ph_values)
            else:
                done = [_clustered(sites, ph_values) for sites in sets]
            results.update(zip(part, done, strict=True))
    return [results[index] for index in range(len(batch))]


@dataclass(frozen=True, slots=True)
class Populations:
    """State of m molecules at each of h pH values."""

    charge: Floats  # (m, h): mean charge of the sites
    protonated: Floats  # (m, h): share of molecules with at least one proton on a base site
    dominant: Booleans  # (m, h, n): protons of the most populated microstate
    dominant_share: Floats  # (m, h)
    counts: Floats  # (m, h, n + 1): share of molecules with N protons
    neutral: Floats  # (m, h): share of molecules with every site neutral


def populations(polynomial: BindingPolynomial, ph: ArrayLike) -> Populations:
    """Populations at each pH from the binding polynomial, for all molecules and pH values at once.

    The charge of a microstate is its proton count less the number of acids, so only the n + 1 proton counts,
    not the 2^n microstates, are gone through at each pH.

    Parameters
    ----------
    polynomial : BindingPolynomial
        Of m molecules with n sites.
    ph : array_like, shape (h,)
        pH values [-].

    Returns
    -------
    Populations
    """
    ph = np.asarray(ph, dtype=np.float64)
    n = polynomial.is_acid.shape[1]
    m = len(polynomial.log_z)
    taken = np.arange(n + 1) * ph[:, None]  # (h, n + 1)
    logs = polynomial.log_z[:, None, :] - taken
    highest = logs.max(axis=2, keepdims=True)
    shares = np.exp(LN10 * (logs - highest))
    total = shares.sum(axis=2, keepdims=True)
    shares = shares / total
    charge = (shares * (np.arange(n + 1.0) - polynomial.is_acid.sum(axis=1)[:, None, None])).sum(axis=2)
    tops = polynomial.top_log[:, None, :] - taken
    best = n - np.argmax((tops >= tops.max(axis=2, keepdims=True) - DEGENERATE)[:, :, ::-1], axis=2)  # (m, h)
    row = np.arange(m)[:, None]
    share = np.take_along_axis(tops, best[:, :, None], axis=2) - highest
    return Populations(
        charge=charge,
        protonated=np.minimum((shares * polynomial.base_share[:, None, :]).sum(axis=2), 1.0),
        dominant=microstates(n).protons.T[polynomial.top[row, best]],
        dominant_share=np.minimum((np.exp(LN10 * share) / total)[:, :, 0], 1.0),
        counts=shares,
        neutral=np.exp(
            LN10
            * (
                polynomial.neutral_log[:, None]
                - polynomial.is_acid.sum(axis=1)[:, None] * ph
                - highest[:, :, 0]
            )
        )
        / total[:, :, 0],
    )


def uncharged(
    counts: Floats, neutral: Floats, acids: Integers, fixed_charge: Integers
) -> tuple[Floats, Floats]:
    """Shares of the neutral form and of the zwitterion.

    The net charge of N protons is N less the number of acids plus the fixed charge. Of the molecules without net
    charge those with every site neutral are the neutral form, unless a fixed charge is among them; the rest is
    zwitterion.

    Parameters
    ----------
    counts : ndarray, shape (m, h, n + 1)
        Share of molecules with N protons.
    neutral : ndarray, shape (m, h)
        Share of molecules with every site neutral.
    acids, fixed_charge : ndarray of int, shape (m,)
        Number of acid sites; formal charge with every site neutral.

    Returns
    -------
    tuple of ndarray, shape (m, h)
        Neutral form and zwitterion.
    """
    protons = acids - fixed_charge
    most = counts.shape[2] - 1
    found = np.take_along_axis(counts, np.clip(protons, 0, most)[:, None, None], axis=2)[:, :, 0]
    netless = np.where(((protons >= 0) & (protons <= most))[:, None], found, 0.0)
    form = np.where((fixed_charge == 0)[:, None], np.minimum(neutral, netless), 0.0)
    return form, netless - form


def base_steps(gain: Floats, is_acid: Booleans) -> Booleans:
    """Which macroscopic steps belong to the bases.

    Steps are ordered by the share of the proton that base sites take; the first N_base of them are base
    steps, N_base being the number of base sites. At equal shares the earlier proton is the base's.

    Parameters
    ----------
    gain : ndarray, shape (m, n, n)
        Share of each site (last axis) in each step.
    is_acid : ndarray of bool, shape (m, n)

    Returns
    -------
    ndarray of bool, shape (m, n)
        True for a base step, in the order of the proton count.
    """
    share = np.where(is_acid[:, None, :], 0.0, gain).sum(axis=2)
    rank = np.argsort(np.argsort(-share.round(9), axis=1, kind="stable"), axis=1, kind="stable")
    return np.asarray(rank < (~is_acid).sum(axis=1)[:, None])


def carriers(gain: Floats, top_protons: Booleans, is_acid: Booleans, base_step: Booleans) -> Integers:
    """Site that takes the proton in each macroscopic step.

    A site of the step's own kind that holds a proton in the most populated microstate reached; of several,
    one that did not hold it in the most populated microstate before; of several, the one whose occupancy
    gains most; at equal gain the first in site order. For the first base step every base site protonated in
    the microstate reached stands for choice, whatever the microstate before it was.

    Parameters
    ----------
    gain : ndarray, shape (m, n, n)
    top_protons : ndarray of bool, shape (m, n + 1, n)
        Protons of the most populated microstate of each proton count.
    is_acid, base_step : ndarray of bool, shape (m, n)

    Returns
    -------
    ndarray of int, shape (m, n)
        Site index for each step, in the order of the proton count.
    """
    after, before = top_protons[:, 1:], top_protons[:, :-1]
    first_base = base_step & (np.cumsum(base_step, axis=1) == 1)
    # gains lie between -1 and 1: the tiers are set apart by 4
    tier = 4.0 * after + np.where(first_base[:, :, None], False, 4.0 * (after & ~before))
    score = np.where(is_acid[:, None, :] == base_step[:, :, None], -np.inf, gain + tier)
    chosen = np.argmax(score >= score.max(axis=2, keepdims=True) - DEGENERATE, axis=2)
    return np.asarray(chosen, dtype=np.int64)


def _without_sites(sites: SiteSet, ph: list[float]) -> Equilibrium:
    charge = float(sites.fixed_charge)
    neutral = float(charge == 0.0)
    return Equilibrium((), tuple(State(value, charge, 0.0, (), 1.0, neutral, 0.0) for value in ph), False)


def _arrays(sets: list[SiteSet], n: int) -> tuple[Floats, Booleans, Floats, Booleans | None]:
    """Stacked constants, kinds, couplings and exclusions of molecules with n sites."""
    pk = np.array([sites.pk for sites in sets], dtype=np.float64).reshape(len(sets), n)
    acid = np.array([[kind == "acid" for kind in sites.kinds] for sites in sets], dtype=bool)
    coupling = np.array([sites.coupling for sites in sets], dtype=np.float64).reshape(len(sets), n, n)
    if not (np.isfinite(pk).all() and np.isfinite(coupling).all()):
        raise ValueError("intrinsic constants and couplings must be finite numbers")
    if all(sites.exclusive is None for sites in sets):
        return pk, acid, coupling, None
    none = np.zeros((n, n), dtype=bool)
    exclusive = np.array([none if sites.exclusive is None else sites.exclusive for sites in sets], dtype=bool)
    return pk, acid, coupling, exclusive


def _exact(sets: list[SiteSet], n: int, ph: list[float]) -> list[Equilibrium]:
    pk, acid, coupling, exclusive = _arrays(sets, n)
    polynomial = binding_polynomial(pk, acid, coupling, exclusive)
    gain = polynomial.gain
    base_step = base_steps(gain, acid)
    carrier = carriers(gain, polynomial.top_protons, acid, base_step)
    at = populations(polynomial, ph)
    steps = _steps(polynomial.constants, gain, polynomial.strain, base_step, carrier, sets)
    fixed = np.array([sites.fixed_charge for sites in sets], dtype=np.int64)
    neutral, zwitterion = uncharged(at.counts, at.neutral, acid.sum(axis=1), fixed)
    states = zip(
        at.charge.tolist(),
        at.protonated.tolist(),
        at.dominant.tolist(),
        at.dominant_share.tolist(),
        neutral.tolist(),
        zwitterion.tolist(),
        strict=True,
    )
    return [
        Equilibrium(
            ladder,
            tuple(
                State(value, charge + sites.fixed_charge, protonated, tuple(dominant), share, *netless)
                for value, charge, protonated, dominant, share, *netless in zip(ph, *state, strict=True)
            ),
            False,
        )
        for sites, ladder, state in zip(sets, steps, states, strict=True)
    ]


def _clustered(sites: SiteSet, ph: list[float]) -> Equilibrium:
    pk, acid, coupling, exclusive = _arrays([sites], len(sites.kinds))
    answer = mean_field(pk[0], acid[0], coupling[0], None if exclusive is None else exclusive[0], ph)
    base_step = base_steps(answer.gain[None], acid)
    no_state = np.zeros((1, len(sites.kinds) + 1, len(sites.kinds)), dtype=bool)  # the gain alone decides
    carrier = carriers(answer.gain[None], no_state, acid, base_step)
    ladder = _steps(
        answer.constants[None], answer.gain[None], answer.strain[None], base_step, carrier, [sites]
    )[0]
    neutral, zwitterion = uncharged(
        answer.counts[None], answer.neutral[None], acid.sum(axis=1), np.array([sites.fixed_charge])
    )
    states = tuple(
        State(value, charge + sites.fixed_charge, protonated, tuple(dominant), share, *netless)
        for value, charge, protonated, dominant, share, *netless in zip(
            ph,
            answer.charge.tolist(),
            answer.protonated.tolist(),
            answer.dominant.tolist(),
            answer.dominant_share.tolist(),
            neutral[0].tolist(),
            zwitterion[0].tolist(),
            strict=True,
        )
    )
    return Equilibrium(ladder, states, True)


def _steps(
    constants: Floats,
    gain: Floats,
    strain: Floats,
    base_step: Booleans,
    carrier: Integers,
    sets: list[SiteSet],
) -> list[tuple[Step, ...]]:
    """Steps of m molecules, bases from the highest constant down, then acids from the lowest up."""
    width = np.array([sites.half_width for sites in sets], dtype=np.float64)
    of_law = np.array([sites.law_half_width for sites in sets], dtype=np.float64)
    half_width = np.sqrt(((gain * width[:, None, :]) ** 2).sum(axis=2) + (strain * of_law[:, None]) ** 2)
    # bases first; equal constants stay in the order of the proton count
    order = np.lexsort((np.where(base_step, -constants, constants), ~base_step), axis=1).tolist()
    kinds = np.where(base_step, "base", "acid").tolist()
    rows = zip(kinds, constants.tolist(), half_width.tolist(), carrier.tolist(), order, strict=True)
    return [
        tuple(Step(kind[k], value[k], half[k], site[k]) for k in ranked)
        for kind, value, half, site, ranked in rows
    ]
