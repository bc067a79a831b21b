r"""Separation of a mixture by extracting its solution at one pH after another.

Every sequence of up to four pH values of a grid is followed from beginning to end: what each step takes, what stays.
A compound is looked for in the layer where its recovery times the purity there is highest, and counts as separated
from a value on; the plan is the shortest that separates as many compounds as any does, the worst of them as well.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]

MOST_STEPS = 4
TOLERANCE = 0.01  # recovery x purity that is given up for a shorter, milder or surer sequence [-]
MEAN_TOLERANCE = 0.03  # the same of the mean of all compounds [-]
SAME_PH = 0.001  # two pH values at which no share differs by more are one to the search [-]
SEPARATED = 0.81  # recovery x purity from which on a compound counts as separated: nine tenths of either [-]
AT_ONCE = 20_000  # sequences followed at a time
NEUTRAL = 7.0  # of several equal pH values the one nearest to it is taken


@dataclass(frozen=True, slots=True, eq=False)
class Mixture:
    """What is known of the compounds of a solution before any sequence is chosen.

    Attributes
    ----------
    ph : ndarray, shape (g,)
        pH values that a step may have [-].
    stays : sequence of ndarray, each of shape (c, g)
        Share of each compound that a step at that pH leaves in the solution [-]; first row with the constants
        as they are, the others at the ends of their intervals.
    amounts : ndarray, shape (n,)
        Amount of each compound, in any unit.
    hazards : ndarray of bool, shape (n, g)
        Whether a group of the compound reacts at that pH.
    wanted : ndarray of bool, shape (n,)
        Whether the compound is looked for here; the others only soil it.
    may_stay : ndarray of bool, shape (n,)
        Whether it may be looked for in what remains of the solution.
    """

    ph: Floats
    stays: Sequence[Floats]
    amounts: Floats
    hazards: NDArray[np.bool_]
    wanted: NDArray[np.bool_]
    may_stay: NDArray[np.bool_]

    @property
    def central(self) -> Floats:
        """Shares with the constants as they are, shape (n, g)."""
        return np.array([stay[0] for stay in self.stays])


@dataclass(frozen=True, slots=True, eq=False)
class Scheme:
    """A sequence of steps and what it does.

    Attributes
    ----------
    ph : tuple of float
        Of the steps, in order.
    fractions : ndarray, shape (n, m + 1)
        Share of each compound that each step takes, and last that stays in the solution [-].
    layer : ndarray of int, shape (n,)
        Layer where each compound is looked for.
    recovery, purity : ndarray, shape (n,)
        Of each compound in that layer [-].
    least_recovery, least_purity : ndarray, shape (n,)
        The same at the least favourable ends of all intervals [-].
    """

    ph: tuple[float, ...]
    fractions: Floats
    layer: Integers
    recovery: Floats
    purity: Floats
    least_recovery: Floats
    least_purity: Floats


def shares(stay: Floats, sequences: Integers) -> Floats:
    """Share that each step takes, and last that stays in the solution.

    Parameters
    ----------
    stay : ndarray, shape (..., g)
        Share that a step at each pH of the grid leaves in the solution [-].
    sequences : ndarray of int, shape (s, m)
        Places on the grid.

    Returns
    -------
    ndarray, shape (..., s, m + 1)
        Adds up to 1.

    Examples
    --------
    >>> shares(np.array([0.25, 0.5]), np.array([[0, 1]])).tolist()
    [[0.75, 0.125, 0.125]]
    """
    kept = stay[..., sequences]
    left = np.concatenate([np.ones((*kept.shape[:-1], 1)), np.cumprod(kept, axis=-1)], axis=-1)
    return np.concatenate([left[..., :-1] * (1.0 - kept), left[..., -1:]], axis=-1)


def scores(fractions: Floats, mixture: Mixture) -> Floats:
    """Recovery times purity of each compound in each layer, shape of `fractions`: (n, s, layers)."""
    found = fractions * _purity(fractions, mixture.amounts)
    found[~mixture.may_stay, :, -1] = 0.0
    return found


def _purity(fractions: Floats, amounts: Floats) -> Floats:
    held = amounts[:, None, None] * fractions
    return held / np.maximum(held.sum(axis=0), 1e-300)


def best_scheme(mixture: Mixture, most: int) -> Scheme:
    """The sequence of at most so many steps that separates a mixture best.

    Of all sequences those count that separate most compounds; of these those whose worst recovery x purity of a
    separated compound, then whose mean of all, comes close to the best; of these the shortest, then the
    one that lets fewest groups react, then the one with the highest mean at the ends of the intervals, then the
    mildest.

    Parameters
    ----------
    mixture : Mixture
    most : int
        Steps, at most 4.

    Returns
    -------
    Scheme

    Examples
    --------
    A base that goes into water at pH 2 and a neutral compound: one acid wash.

    >>> ph = np.array([2.0, 7.0, 12.0])
    >>> stays = [np.array([[0.0, 0.9, 1.0]]), np.array([[1.0, 1.0, 1.0]])]
    >>> yes = np.ones(2, dtype=bool)
    >>> found = best_scheme(Mixture(ph, stays, np.ones(2), np.zeros((2, 3), dtype=bool), yes, yes), 1)
    >>> found.ph, found.layer.tolist()
    ((2.0,), [0, 1])
    """
    grid = _distinct(mixture)
    most = min(MOST_STEPS, most)
    found = [_standing(mixture, grid, length) for length in range(most + 1)]
    sequences = [_sequences(grid, length) for length in range(most + 1)]
    for quality, given_up in ((0, 0.0), (1, TOLERANCE), (2, MEAN_TOLERANCE)):
        best = max(float(standing[quality].max()) for standing in found if standing.shape[1])
        near = [standing[quality] >= best - given_up for standing in found]
        found = [standing[:, kept] for standing, kept in zip(found, near, strict=True)]
        sequences = [these[kept] for these, kept in zip(sequences, near, strict=True)]
    return _choice(mixture, next(these for these in sequences if len(these)))


def _distinct(mixture: Mixture) -> Integers:
    """Places on the grid that differ for some compound, each plateau by its ends and the pH nearest to neutral."""
    table = np.concatenate([*mixture.stays, mixture.hazards.astype(np.float64)])
    kept: list[int] = []
    for place in np.argsort(np.abs(mixture.ph - NEUTRAL), kind="stable").tolist():
        if not any(np.abs(table[:, place] - table[:, other]).max() <= SAME_PH for other in kept):
            kept.append(place)
    return np.array(sorted(kept), dtype=np.int64)


def _sequences(grid: Integers, length: int) -> Integers:
    if not length:
        return np.zeros((1, 0), dtype=np.int64)
    return grid[np.indices((len(grid),) * length).reshape(length, -1).T]


def _parts(count: int) -> Iterator[slice]:
    return (slice(start, start + AT_ONCE) for start in range(0, count, AT_ONCE))


def _standing(mixture: Mixture, grid: Integers, length: int) -> Floats:
    """Of every sequence of one length: compounds separated, the worst recovery x purity of these, and the mean of all.

    Shape (3, s); where none is separated the worst is that of all.
    """
    stay, sequences = mixture.central, _sequences(grid, length)
    standing = np.zeros((3, len(sequences)))
    for part in _parts(len(sequences)):
        found = scores(shares(stay, sequences[part]), mixture)[mixture.wanted].max(axis=2)
        apart = found >= SEPARATED
        worst = np.where(apart | ~apart.any(axis=0), found, np.inf).min(axis=0)
        standing[:, part] = apart.sum(axis=0), worst, found.mean(axis=0)
    return standing


def _choice(mixture: Mixture, sequences: Integers) -> Scheme:
    """Of sequences that are equally good that with fewest reacting groups, then the surest, then the mildest."""
    reacting = mixture.hazards[:, sequences].sum(axis=(0, 2))
    sequences = sequences[reacting == reacting.min()]
    surety = np.concatenate([_surety(mixture, sequences[part]) for part in _parts(len(sequences))])
    strain = np.abs(mixture.ph[sequences] - NEUTRAL).sum(axis=1)
    near = np.flatnonzero(surety >= surety.max() - TOLERANCE)
    chosen = sequences[near[np.argmin(strain[near])]][None]
    fractions = shares(mixture.central, chosen)
    layer = scores(fractions, mixture).argmax(axis=2)
    least, least_purity = _at_ends(mixture, chosen, layer)
    purity = _purity(fractions, mixture.amounts)
    rows = np.arange(len(layer))
    return Scheme(
        ph=tuple(mixture.ph[chosen[0]].tolist()),
        fractions=fractions[:, 0],
        layer=layer[:, 0],
        recovery=fractions[rows, 0, layer[:, 0]],
        purity=purity[rows, 0, layer[:, 0]],
        least_recovery=least[:, 0],
        least_purity=least_purity[:, 0],
    )


def _surety(mixture: Mixture, sequences: Integers) -> Floats:
    """Mean recovery x purity of each sequence at the least favourable ends of the intervals."""
    layer = scores(shares(mixture.central, sequences), mixture).argmax(axis=2)
    recovery, purity = _at_ends(mixture, sequences, layer)
    return np.asarray((recovery * purity)[mixture.wanted].mean(axis=0))


def _at_ends(mixture: Mixture, sequences: Integers, layer: Integers) -> tuple[Floats, Floats]:
    """Least recovery and purity of each compound in its layer, every constant at its least favourable end."""
    ends = [shares(stay, sequences) for stay in mixture.stays]
    low = np.array([end.min(axis=0) for end in ends])  # (n, s, layers)
    most = mixture.amounts[:, None, None] * np.array([end.max(axis=0) for end in ends])
    recovery = np.take_along_axis(low, layer[:, :, None], axis=2)[:, :, 0]
    own = mixture.amounts[:, None] * recovery
    of_all = np.take_along_axis(most.sum(axis=0)[None], layer[:, :, None], axis=2)[:, :, 0]
    others = of_all - np.take_along_axis(most, layer[:, :, None], axis=2)[:, :, 0]
    return recovery, own / np.maximum(own + others, 1e-300)
