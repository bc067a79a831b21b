r"""Where a compound is: the share in water and in an organic layer against pH, after one or several washes.

The neutral form takes part with P, ions of one charge as ion pairs some units below it, zwitterions and ions of
higher charge stay in water. Shares of the forms come from the ladder of macroscopic constants, so that constants
from a structure and from a publication serve alike, and their intervals move the curve.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import product

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .curves import log_d
from .equilibrium import Equilibrium, SiteSet, equilibrate
from .ladder import Ladder, ladder_of

Floats = NDArray[np.float64]

WHOLE_SCALE = np.arange(
    -2.0, 16.01, 0.25
)  # pH at one of which most molecules have no net charge, if any have
ION_PAIRS = (5.0, 6.0)
"""log P of an ion pair below that of the neutral form, for a cation and an anion, between water and a usual solvent of
extraction such as ether, ethyl acetate or toluene: common practice takes it for nothing there; octanol keeps 3 and 4
(`curves`), chlorinated solvents lie between [-]."""


@dataclass(frozen=True, slots=True, eq=False)
class Steps:
    """Ladder of a molecule with the interval of each constant.

    Attributes
    ----------
    ladder : Ladder
    half_width : ndarray, shape (n,)
        Half of the 90 % interval of each constant of the ladder [-].
    is_acid : ndarray of bool, shape (n,)
        Whether the step is that of an acid site.
    neutral_part : float
        Share of the neutral form among the molecules without net charge, at any pH; the rest is zwitterion [-].
    """

    ladder: Ladder
    half_width: Floats
    is_acid: NDArray[np.bool_]
    neutral_part: float = 1.0

    @classmethod
    def exact(cls, constants: ArrayLike, bare_charge: int, neutral_part: float = 1.0) -> Steps:
        """Steps with measured constants, in the order of the protons [-], the net charge without any of them.

        Examples
        --------
        >>> acetic = Steps.exact([4.76], -1)
        >>> acetic.step(0)
        (4.76, 0.0)
        """
        values = np.asarray(constants, dtype=np.float64)
        acid = np.arange(len(values)) < -bare_charge
        return cls(Ladder(values, bare_charge), np.zeros(len(values)), acid, neutral_part)

    def step(self, charge: int) -> tuple[float, float] | None:
        """Constant of the proton that goes on a molecule of net charge `charge - 1`, and half of its interval.

        None where there is no such step. The constant of the cation made from a molecule without net charge is
        `step(1)`, that of the anion made from it `step(0)`, whatever group takes or gives the proton.
        """
        place = charge - 1 - self.ladder.bare_charge
        if not 0 <= place < len(self.ladder.constants):
            return None
        return float(self.ladder.constants[place]), float(self.half_width[place])

    def shifted(self, of_bases: float, of_acids: float) -> Ladder:
        """The ladder with its base and acid steps moved by so many half widths."""
        moved = self.ladder.constants + np.where(self.is_acid, of_acids, of_bases) * self.half_width
        return Ladder(moved, self.ladder.bare_charge)

    def ladders(self) -> list[Ladder]:
        """The ladder, and those at all ends of the intervals: base steps low or high, acid steps low or high."""
        bases = (-1.0, 1.0) if (~self.is_acid).any() else (0.0,)
        acids = (-1.0, 1.0) if self.is_acid.any() else (0.0,)
        return [self.ladder, *(self.shifted(*ends) for ends in product(bases, acids))]


def steps_of(sites: SiteSet, equilibrium: Equilibrium) -> Steps:
    """Steps of a prediction, with the intervals of its macroscopic constants."""
    ladder = ladder_of(sites)
    places = np.argsort(-ladder.constants, kind="stable")
    half_width, is_acid = np.zeros(len(places)), np.zeros(len(places), dtype=bool)
    for place, step in zip(places, sorted(equilibrium.steps, key=lambda step: -step.value), strict=True):
        half_width[place], is_acid[place] = step.half_width, step.kind == "acid"
    netless = -ladder.bare_charge
    part = 1.0
    if 0 <= netless <= len(places):
        best = float(WHOLE_SCALE[np.argmax(ladder.shares(WHOLE_SCALE)[:, netless])])
        state = equilibrate([sites], [best])[0].states[0]
        part = state.neutral_fraction / (state.neutral_fraction + state.zwitterion_fraction)
    return Steps(ladder, half_width, is_acid, part)


@dataclass(frozen=True, slots=True, eq=False)
class Partition:
    """Distribution of one compound between water and an organic layer.

    Attributes
    ----------
    steps : Steps
    log_p : float or None
        Of the neutral form [-]; None for a compound without one, which then stays in water.
    ion_pairs : tuple of float
        log P of the ion pair of a cation and of an anion below that of the neutral form [-].

    Examples
    --------
    Benzoic acid, pKa 4.20 and log P 1.87, at pH 4.20: half of it is neutral, D = P / 2.

    >>> benzoic = Partition(Steps.exact([4.20], -1), 1.87)
    >>> round(float(benzoic.coefficients([4.20])[0, 0]), 1), round(10**1.87 / 2, 1)
    (37.1, 37.1)
    """

    steps: Steps
    log_p: float | None
    ion_pairs: tuple[float, float] = field(default=ION_PAIRS)

    def coefficients(self, ph: ArrayLike) -> Floats:
        """Distribution coefficient D at each pH, shape (c, h).

        The first row has the constants as they are, the others the ends of their intervals.
        """
        at = np.asarray(ph, dtype=np.float64)
        return np.array([self._coefficient(ladder, at) for ladder in self.steps.ladders()])

    def _coefficient(self, ladder: Ladder, ph: Floats) -> Floats:
        if self.log_p is None:
            return np.zeros(len(ph))
        shares = ladder.shares(ph)

        def share(charge: int) -> Floats:
            place = charge - ladder.bare_charge
            return shares[:, place] if 0 <= place < shares.shape[1] else np.zeros(len(ph))

        value = log_d(
            self.log_p,
            self.steps.neutral_part * share(0),
            share(1),
            share(-1),
            cation_below=self.ion_pairs[0],
            anion_below=self.ion_pairs[1],
        )
        return np.asarray(np.nan_to_num(10.0**value, nan=0.0))


def remaining(ratio: ArrayLike, times: int) -> Floats:
    r"""Share that stays in a layer after it has been extracted several times with fresh portions.

    .. math:: q = \frac{1}{(1 + D V_2 / V_1)^n}

    Parameters
    ----------
    ratio : array_like
        Amount in the extracting layer over that in the extracted one at equilibrium, D V2 / V1 [-].
    times : int
        Number of portions n, each of volume V2.

    Returns
    -------
    ndarray
        [-].

    Examples
    --------
    Iodine, D = 85, in 50.0 mL of water of 1.00e-3 mol/L with one portion of 50.0 mL, with two of 25.0 and with five of
    10.0: 1.16e-5, 5.28e-7 and 5.29e-10 mol/L stay [1]_.

    >>> [f"{1e-3 * remaining(85 / n, n):.2e}" for n in (1, 2, 5)]
    ['1.16e-05', '5.28e-07', '5.29e-10']

    References
    ----------
    .. [1] Skoog, West, Holler and Crouch, Fundamentals of Analytical Chemistry, chapter on separations (memory);
           Harris, Quantitative Chemical Analysis, chapter on chromatography and extraction (memory).
    """
    return np.asarray((1.0 + np.asarray(ratio, dtype=np.float64)) ** -float(times))


def stays_in_organic(coefficient: Floats, *, aqueous: float, organic: float, times: int) -> Floats:
    """Share that stays in the organic layer [-] after washes with water.

    Parameters
    ----------
    coefficient : ndarray
        D [-].
    aqueous, organic : float
        Volume of each portion of water, and of the organic layer [mL].
    times : int
        Number of washes.
    """
    with np.errstate(divide="ignore"):
        return remaining(aqueous / (coefficient * organic), times)


def comes_out_of_water(coefficient: Floats, *, aqueous: float, organic: float, times: int) -> Floats:
    """Share that goes out of water [-] into several portions of an organic solvent.

    Parameters
    ----------
    coefficient : ndarray
        D [-].
    aqueous, organic : float
        Volume of the water, and of each portion of solvent [mL].
    times : int
        Number of portions.
    """
    return 1.0 - remaining(coefficient * organic / aqueous, times)
