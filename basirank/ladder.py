r"""Ladder of macroscopic constants: what a curve, a buffer or a titration needs to know of a molecule.

The share of molecules with N protons follows from the macroscopic constants alone, and with it the mean charge and
the buffer capacity. Constants may come from the sites of a structure or straight from a publication.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from .binding import EXACT_SITES, LN10, Floats, binding_polynomial
from .clusters import mean_field
from .equilibrium import SiteSet


@dataclass(frozen=True, slots=True, eq=False)
class Ladder:
    """Macroscopic constants of a molecule in the order of its protons, and its charge without any of them.

    Attributes
    ----------
    constants : ndarray, shape (n,)
        Constants of the 1st, 2nd, ... proton to go on [-]; mixed ones where there is an ionic strength.
    bare_charge : int
        Net charge with no proton on any site.

    Examples
    --------
    Carbonate with the constants of carbonic acid at 25 C: at pH 8.34 the mean charge is -1.

    >>> carbonate = Ladder(np.array([10.33, 6.35]), -2)
    >>> carbonate.charge([8.34]).round(2)
    array([-1.])
    """

    constants: Floats
    bare_charge: int

    def shares(self, ph: ArrayLike) -> Floats:
        """Share of molecules with 0, 1, ... n protons at each pH, shape (h, n + 1)."""
        ph = np.asarray(ph, dtype=np.float64)
        sums = np.concatenate([[0.0], np.cumsum(self.constants)])
        logs = sums - np.arange(len(sums)) * ph[:, None]
        weights = np.exp(LN10 * (logs - logs.max(axis=1, keepdims=True)))
        return np.asarray(weights / weights.sum(axis=1, keepdims=True))

    def charge(self, ph: ArrayLike) -> Floats:
        """Mean net charge at each pH, shape (h,)."""
        shares = self.shares(ph)
        return np.asarray(shares @ np.arange(shares.shape[1]) + self.bare_charge)

    def capacity(self, ph: ArrayLike) -> Floats:
        r"""Buffer capacity of 1 mol/L at each pH [mol/L per pH unit], water itself apart, shape (h,).

        .. math:: \beta = -\frac{dQ}{d\mathrm{pH}} = \ln 10\,(\langle N^2\rangle - \langle N\rangle^2)

        References
        ----------
        .. [1] Van Slyke, J. Biol. Chem. 52 (1922) 525 (memory).
        """
        shares = self.shares(ph)
        count = np.arange(shares.shape[1])
        return np.asarray(LN10 * (shares @ count**2 - (shares @ count) ** 2))


def ladder_of(sites: SiteSet) -> Ladder:
    """Ladder of a molecule from its sites: exact up to 16 of them, by clusters past that."""
    n = len(sites.kinds)
    acid = np.array([kind == "acid" for kind in sites.kinds], dtype=bool)
    pk = np.asarray(sites.pk, dtype=np.float64)
    coupling = np.asarray(sites.coupling, dtype=np.float64).reshape(n, n)
    if n == 0:
        constants = np.zeros(0)
    elif n <= EXACT_SITES:
        exclusive = None if sites.exclusive is None else sites.exclusive[None]
        constants = binding_polynomial(pk[None], acid[None], coupling[None], exclusive).constants[0]
    else:
        constants = mean_field(pk, acid, coupling, sites.exclusive, ()).constants
    return Ladder(constants, sites.fixed_charge - int(acid.sum()))
