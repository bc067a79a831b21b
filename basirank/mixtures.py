"""Plan for a mixture: which washes of the organic solution, and at which pH the water of each is extracted back.

First the washes are chosen, over all sequences of a grid of pH; then, for the water of each wash, the pH values at
which what is in it comes back, one after another, over all sequences again. What no pH brings back is left in water.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from .separation import MOST_STEPS, SEPARATED, Floats, Mixture, Scheme, best_scheme

if TYPE_CHECKING:
    from .extraction import Compound, Setting

MOST_COMPOUNDS = 12
COARSE = 0.5  # step of the pH: what a meter and a drop of acid can set
RETURNS = 0.5  # a compound of which less comes back at its best pH is left in the water [-]
TOLD_APART = 0.9  # difference of the shares from which on one wash tells two compounds apart [-]


@dataclass(frozen=True, slots=True)
class Place:
    """Where a compound of a mixture is at the end.

    Attributes
    ----------
    compound : int
        Its place in the list.
    wash : int or None
        The wash, from 1, that takes it into water; None for what stays in the organic layer.
    ph : float or None
        Of that wash.
    back_ph : float or None
        pH at which it is brought back; None where it stays in water, or never left.
    recovery, purity : float
        At the end, by amount of substance [-].
    least_recovery : float
        At the least favourable ends of the intervals of its constants [-].
    why : str
        Why it is not separated; empty where it is.
    """

    compound: int
    wash: int | None
    ph: float | None
    back_ph: float | None
    recovery: float
    purity: float
    least_recovery: float
    why: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class Plan:
    """Separation of a mixture.

    Attributes
    ----------
    washes : tuple of float
        pH of the washes, in order.
    returns : tuple of tuple of float
        For each wash the pH values at which its water is extracted back, in order.
    places : tuple of Place
        By compound.
    """

    washes: tuple[float, ...]
    returns: tuple[tuple[float, ...], ...]
    places: tuple[Place, ...]

    @property
    def separated(self) -> int:
        """Number of compounds that the washes separate."""
        return sum(not one.why for one in self.places)

    @property
    def worst(self) -> float:
        """Recovery times purity of the compound that comes off worst [-]."""
        return min(one.recovery * one.purity for one in self.places)


def plan_of(compounds: Sequence[Compound], setting: Setting) -> Plan | None:
    """The washes that separate a mixture; None for fewer than 2 or more than 12 compounds that can be computed.

    Parameters
    ----------
    compounds : sequence of Compound
        Those without a partition are left out.
    setting : Setting

    Returns
    -------
    Plan or None
    """
    members = [n for n, one in enumerate(compounds) if one.partition is not None]
    if not 2 <= len(members) <= MOST_COMPOUNDS:
        return None
    ph = setting.grid(COARSE)
    parts = [compounds[n] for n in members]
    coefficients = [one.partition.coefficients(ph) for one in parts if one.partition is not None]
    amounts = np.array([one.amount for one in parts])
    hazards = np.array([[any(group.at(value) for group in one.hazards) for value in ph] for one in parts])
    every = np.ones(len(members), dtype=bool)
    washed = Mixture(ph, [setting.stays(d) for d in coefficients], amounts, hazards, every, every)
    scheme = best_scheme(washed, min(MOST_STEPS, len(members) - 1))
    kept = [1.0 - setting.returns(d) for d in coefficients]
    stubborn = np.array([1.0 - one[0].min() < RETURNS for one in kept])
    returned: list[Scheme | None] = []
    for layer in range(len(scheme.ph)):
        wanted = scheme.layer == layer
        there = Mixture(ph, kept, amounts * scheme.fractions[:, layer], hazards, wanted, stubborn)
        returned.append(best_scheme(there, int((wanted & ~stubborn).sum())) if wanted.any() else None)
    places = [_place(n, members[n], scheme, returned) for n in range(len(members))]
    told = tuple(
        one if one.recovery * one.purity >= SEPARATED else replace(one, why=_why(n, places, parts, washed))
        for n, one in enumerate(places)
    )
    return Plan(scheme.ph, tuple(() if one is None else one.ph for one in returned), told)


def _place(n: int, compound: int, scheme: Scheme, returned: Sequence[Scheme | None]) -> Place:
    layer = int(scheme.layer[n])
    recovery, least = float(scheme.recovery[n]), float(scheme.least_recovery[n])
    if layer == len(scheme.ph):
        return Place(compound, None, None, None, recovery, float(scheme.purity[n]), least)
    back = returned[layer]
    assert back is not None  # this compound is looked for there
    step = int(back.layer[n])
    return Place(
        compound,
        layer + 1,
        scheme.ph[layer],
        back.ph[step] if step < len(back.ph) else None,
        recovery * float(back.recovery[n]),
        float(back.purity[n]),
        least * float(back.least_recovery[n]),
    )


def _why(n: int, places: Sequence[Place], parts: Sequence[Compound], washed: Mixture) -> str:
    """Why a compound is not separated: its own log P, or another that goes as it does."""
    stay: Floats = washed.central
    apart = np.abs(stay - stay[n]).max(axis=1)
    apart[n] = np.inf
    beside = [
        k
        for k, one in enumerate(places)
        if k != n and (one.wash, one.back_ph) == (places[n].wash, places[n].back_ph)
    ]
    lost = 1.0 - float(stay[n].max())
    log_p = parts[n].partition.log_p  # type: ignore[union-attr]
    waits = places[n].wash != 1  # in the organic layer while the first wash takes its part
    if (
        waits
        and log_p is not None
        and 0.1 < lost < RETURNS
        and not any(apart[k] < TOLD_APART for k in beside)
    ):
        return f"the washes take {100 * lost:.0f} % of it at any pH (log P {log_p:.1f})"
    other = int(np.argmin(apart)) if not beside else min(beside, key=lambda k: float(apart[k]))
    name = parts[other].name or parts[other].structure
    if parts[n].kind == parts[other].kind == "neutral":
        return f"neither it nor {name} takes or gives a proton between the pH limits"
    if max(stay[n].max(), stay[other].max()) < 1.0 - TOLD_APART:
        return f"both it and {name} stay in water at any pH"
    where = f"{100 * apart[other]:.0f} % at pH {washed.ph[np.argmax(np.abs(stay[other] - stay[n]))]:g}"
    if apart[other] >= TOLD_APART:
        return f"with {name}: these two alone come apart ({where}), but not in one sequence with the others"
    return f"with {name}: their shares in the organic layer differ by no more than {where}"
