r"""Microstates of one molecule: protomers of the same charge and the microscopic constants between them.

Protomers of one charge differ in which sites hold the protons; their ratio does not depend on pH. A titration sees
only their sum, spectroscopy sees each (which nitrogen is protonated, zwitterion against neutral form).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .binding import EXACT_SITES, LN10, log_weights, microstates
from .equilibrium import SiteSet
from .ladder import ladder_of

LEAST_SHARE = 0.01  # of its charge: a protomer below it is not listed, unless it is the neutral form
SEEN = np.arange(0.0, 14.01, 0.25)  # pH at which a charge must come to LEAST_SHARE somewhere to be listed


@dataclass(frozen=True, slots=True)
class Protomer:
    """One microstate: net charge, proton on each site, share among the molecules of that charge."""

    charge: int
    protons: tuple[bool, ...]
    share: float
    neutral: bool  # no site and no fixed group charged


@dataclass(frozen=True, slots=True)
class Microconstant:
    """Constant of one site with the others as they are in two protomers that differ by its proton."""

    site: int
    charged: tuple[int, ...]  # the other sites that carry a charge
    value: float


def protomers(sites: SiteSet) -> tuple[Protomer, ...]:
    """Protomers by net charge, highest first, and by share.

    Parameters
    ----------
    sites : SiteSet

    Returns
    -------
    tuple of Protomer
        Those of at least 1 % of their charge, and the neutral form, of the charges that come to 1 % of the
        molecules somewhere between pH 0 and 14. Empty for more than 16 sites, which are not enumerated.

    Examples
    --------
    A thiol of 8.53 beside an ammonium of 8.86, as in cysteine: of the molecules that have lost one proton of the two
    two thirds have lost that of the thiol.

    >>> cysteine = SiteSet(("base", "acid"), (8.86, 8.53), (0.5, 0.5), np.zeros((2, 2)))
    >>> [(one.protons, round(one.share, 2)) for one in protomers(cysteine) if one.charge == 0]
    [((True, False), 0.68), ((False, True), 0.32)]
    """
    n = len(sites.kinds)
    if not 0 < n <= EXACT_SITES:
        return ()
    acid, logs = _weights(sites)
    table = microstates(n)
    bare = sites.fixed_charge - int(acid.sum())
    seen = ladder_of(sites).shares(SEEN).max(axis=0) >= LEAST_SHARE
    neutral = (table.protons == acid[:, None]).all(axis=0) & (sites.fixed_charge == 0)
    found = []
    for count in np.flatnonzero(seen)[::-1].tolist():
        members = np.flatnonzero(table.count == count)
        weights = np.exp(LN10 * (logs[members] - logs[members].max()))
        shares = weights / weights.sum()
        for place in np.argsort(-shares, kind="stable"):
            state = members[place]
            if shares[place] >= LEAST_SHARE or (neutral[state] and np.isfinite(logs[state])):
                protons = tuple(table.protons[:, state].tolist())
                found.append(Protomer(bare + count, protons, float(shares[place]), bool(neutral[state])))
    return tuple(found)


def microconstants(sites: SiteSet, listed: tuple[Protomer, ...]) -> tuple[Microconstant, ...]:
    """Microscopic constants between the listed protomers, by site and by the number of charges beside it.

    Parameters
    ----------
    sites : SiteSet
    listed : tuple of Protomer
        As from `protomers`.
    """
    if not listed:
        return ()
    acid, logs = _weights(sites)
    table = microstates(len(acid))
    place = {tuple(protons): n for n, protons in enumerate(table.protons.T.tolist())}
    states = {one.protons for one in listed}
    found = []
    for with_it in states:
        for site in np.flatnonzero(with_it).tolist():
            without = (*with_it[:site], False, *with_it[site + 1 :])
            if without in states:
                charged = tuple(j for j, held in enumerate(with_it) if j != site and held != bool(acid[j]))
                value = float(logs[place[with_it]] - logs[place[without]])
                found.append(Microconstant(site, charged, value))
    return tuple(sorted(found, key=lambda one: (one.site, len(one.charged), one.charged)))


def _weights(sites: SiteSet) -> tuple[np.ndarray, np.ndarray]:
    """Acids among the sites, and log10 weight of each microstate at pH 0."""
    acid = np.array([kind == "acid" for kind in sites.kinds], dtype=bool)
    pk = np.asarray(sites.pk, dtype=np.float64)
    exclusive = None if sites.exclusive is None else sites.exclusive[None]
    coupling = np.asarray(sites.coupling, dtype=np.float64).reshape(1, len(acid), len(acid))
    return acid, log_weights(pk[None], acid[None], coupling, exclusive)[0]
