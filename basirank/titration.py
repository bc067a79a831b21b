r"""Titration: pH against the volume of titrant from the balance of charges, and the equivalence points.

At every volume the charges of all that was mixed add up to none,

.. math:: n_a Q_a(\mathrm{pH}) + n_t Q_t(\mathrm{pH})
          + V\,([\mathrm{H^+}] - [\mathrm{OH^-}]) = 0,

whose left side falls as pH rises, so that there is one answer. Temperature and ionic strength are constant throughout.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .composition import STRONG, Composition, compose
from .conditions import davies, pkw
from .ladder import Ladder
from .request import STANDARD, Conditions, within

if TYPE_CHECKING:
    from rdkit import Chem

    from .conditioning import LocalModel

Floats = NDArray[np.float64]

STRONG_ACID = Composition((Ladder(np.array([STRONG]), -1),), 0, ("a strong acid such as HCl",))
STRONG_BASE = Composition((), 1, ("a strong base such as NaOH",))
"""Of the base the cation is left: hydroxide is that of water."""

PH_SPAN = (-3.0, 17.0)  # within which the pH of any mixture is looked for
HALVINGS = 60  # of the pH interval
CONCENTRATION_RANGE = (1e-6, 10.0)  # mol/L
VOLUME_RANGE = (1e-3, 1e6)  # mL
POINTS_RANGE = (10, 5000)
CLOSE = (0.0, 0.0005, 0.001, 0.002, 0.004, 0.007, 0.012, 0.02)
"""Where the curve has further points on either side of an equivalence point, as parts of its volume [-]."""
SPREAD = 1.5  # the curve goes on to this multiple of the last equivalence volume
TITRATABLE = (-1.0, 15.0)  # steps with constants outside have no equivalence point in water [-]
NEUTRAL = 7.0  # a titrant's sites beyond it, pKa below or pKaH above, count as its equivalents [-]


@dataclass(frozen=True, slots=True)
class Equivalence:
    """One equivalence point.

    Attributes
    ----------
    volume : float
        [mL].
    ph : float
    jump : float
        Change of pH from 1 % before to 1 % after.
    visible : bool
        Whether the curve is steeper there than a tenth of the step before and after.
    """

    volume: float
    ph: float
    jump: float
    visible: bool


@dataclass(frozen=True, slots=True, eq=False)
class Titration:
    """A titration curve.

    Attributes
    ----------
    volume, ph : ndarray, shape (h,)
        Volume of titrant [mL] and pH; the equivalence points are among them, and more points around each.
    equivalences : tuple of Equivalence
        By volume.
    titrant : str
        `acid` or `base`: what is added.
    conditions : Conditions
    notes : tuple of str
        What was taken for what.
    """

    volume: Floats
    ph: Floats
    equivalences: tuple[Equivalence, ...]
    titrant: str
    conditions: Conditions
    notes: tuple[str, ...] = ()


def mixture_ph(
    parts: list[tuple[Composition, Floats]], volume: Floats, conditions: Conditions = STANDARD
) -> Floats:
    """pH of mixtures from the balance of charges.

    Parameters
    ----------
    parts : list of (Composition, ndarray of shape (h,))
        What is in them, and how much of each [mmol].
    volume : ndarray, shape (h,)
        Whole volume of each [mL].
    conditions : Conditions

    Returns
    -------
    ndarray, shape (h,)
        pH [-], as a meter reads it.

    Examples
    --------
    Acetic acid, 0.1 mol/L, Ka = 1.75e-5:

    >>> acetic = Composition((Ladder(np.array([4.757]), -1),))
    >>> mixture_ph([(acetic, np.array([5.0]))], np.array([50.0])).round(2)
    array([2.88])
    """
    low, high = (np.full(len(volume), end) for end in PH_SPAN)
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        above = imbalance(parts, volume, middle, conditions) > 0.0  # too little base: the pH is higher
        low, high = np.where(above, middle, low), np.where(above, high, middle)
    return np.asarray((low + high) / 2)


def imbalance(
    parts: list[tuple[Composition, Floats]], volume: Floats, ph: Floats, conditions: Conditions = STANDARD
) -> Floats:
    """Charge of everything in each mixture at a supposed pH [mmol]; none at the right one, falling with pH."""
    single = davies(conditions.ionic_strength, conditions.temperature)  # -log10 of the activity coefficient
    water = pkw(conditions.temperature, conditions.ionic_strength)
    total = volume * (10.0 ** (single - ph) - 10.0 ** (ph - water))
    for composition, amount in parts:
        total = total + amount * composition.charge(ph)
    return np.asarray(total)


def equivalents(titrant: Composition, kind: str) -> int:
    """Protons that one formula unit of a titrant gives (`acid`) or takes (`base`)."""
    constants, held = titrant.constants, titrant.protons
    if kind == "acid":
        return int((constants[:held] < NEUTRAL).sum())
    open_sites = int((constants[held:] > NEUTRAL).sum()) if held >= 0 else 0
    return open_sites + max(0, -held)


def titration(
    analyte: Composition,
    *,
    concentration: float,
    volume: float,
    titrant: Composition,
    kind: str,
    titrant_concentration: float,
    last_volume: float | None = None,
    points: int = 301,
    conditions: Conditions = STANDARD,
) -> Titration:
    """Titration curve of a solution.

    Parameters
    ----------
    analyte : Composition
    concentration, volume : float
        Of the solution [mol/L of formula units, mL].
    titrant : Composition
        `STRONG_ACID`, `STRONG_BASE` or anything else.
    kind : {"acid", "base"}
        What the titrant is.
    titrant_concentration : float
        [mol/L].
    last_volume : float, optional
        Where the curve ends [mL]; half as much again as the last equivalence point when not given.
    points : int
        Volumes of the curve, equally spaced; each equivalence point and some around it come to them.
    conditions : Conditions

    Returns
    -------
    Titration

    Raises
    ------
    ValueError
        The titrant neither gives nor takes protons.

    Examples
    --------
    Acetic acid with sodium hydroxide, both 0.1 mol/L:

    >>> acetic = Composition((Ladder(np.array([4.757]), -1),))
    >>> done = titration(acetic, concentration=0.1, volume=50.0, titrant=STRONG_BASE, kind="base",
    ...                  titrant_concentration=0.1)
    >>> [(one.volume, round(one.ph, 2)) for one in done.equivalences]
    [(50.0, 8.73)]
    """
    each = equivalents(titrant, kind)
    if each < 1:
        raise ValueError(
            f"this titrant has no proton to {'give' if kind == 'acid' else 'take'}: it is no {kind}"
        )
    amount = concentration * volume
    one = amount / (titrant_concentration * each)  # volume for one proton of each formula unit

    def ph_at(added: ArrayLike) -> Floats:
        at = np.atleast_1d(np.asarray(added, dtype=np.float64))
        parts = [(analyte, np.full(len(at), amount)), (titrant, at * titrant_concentration)]
        return mixture_ph(parts, volume + at, conditions)

    steps = _steps(analyte, kind)
    found = tuple(_equivalence(ph_at, step * one, one) for step in steps)
    seen = [point.volume for point in found if point.visible] or [point.volume for point in found]
    end = last_volume if last_volume is not None else SPREAD * max(seen, default=one)
    found = tuple(point for point in found if point.volume <= end)
    around = [point.volume * (1.0 + side * part) for point in found for part in CLOSE for side in (-1, 1)]
    volumes = np.union1d(np.linspace(0.0, end, points), [added for added in around if added <= end])
    return Titration(volumes, ph_at(volumes), found, kind, conditions, analyte.notes)


def _steps(analyte: Composition, kind: str) -> list[int]:
    """Protons given or taken by a formula unit at each equivalence point: 1, 2, ... within reach of water."""
    constants, held = analyte.constants, analyte.protons
    taken = constants[max(held, 0) :] if kind == "acid" else constants[: max(held, 0)][::-1]
    reachable = (taken >= TITRATABLE[0]) if kind == "acid" else (taken <= TITRATABLE[1])
    steps = [n + 1 for n, good in enumerate(reachable) if good]
    if held < 0 and kind == "acid":  # a base stronger than water, such as hydroxide, comes first
        steps = [-held, *(step - held for step in steps)]
    return steps


def _equivalence(ph_at: Any, volume: float, one: float) -> Equivalence:
    near = volume + np.array([-0.01 * volume, 0.0, 0.01 * volume])
    before, ph, after = ph_at(near)
    slopes = np.abs(np.diff(ph_at(volume + one * np.array([-0.101, -0.099, -0.001, 0.001, 0.099, 0.101]))))[
        ::2
    ]
    return Equivalence(
        float(volume),
        float(ph),
        float(abs(after - before)),
        bool(slopes[1] > slopes[0] and slopes[1] > slopes[2]),
    )


def titrate(
    structure: str | Chem.Mol,
    *,
    concentration: float = 0.1,
    volume: float = 25.0,
    titrant: str | None = None,
    titrant_concentration: float = 0.1,
    last_volume: float | None = None,
    points: int = 301,
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
    local: LocalModel | None = None,
) -> Titration:
    """Titration curve of a compound, its counter-ions included.

    Parameters
    ----------
    structure : str or rdkit.Chem.Mol
        The compound or its salt.
    concentration, volume : float
        Of its solution [mol/L of formula units as drawn, mL].
    titrant : str, optional
        `acid`, `base` (strong ones) or the SMILES of a weak one; when not given a strong acid for a solution
        above pH 7, else a strong base.
    titrant_concentration : float
        [mol/L].
    last_volume : float, optional
        Where the curve ends [mL].
    points : int
        Volumes of the curve.
    temperature, ionic_strength : float
        [C], 0 to 60; [mol/L], 0 to 0.5, constant throughout (a background salt).
    local : LocalModel, optional
        A user's own measurements (`condition`).

    Returns
    -------
    Titration

    Raises
    ------
    ValueError
        Something out of range, or a structure that cannot be computed.

    Examples
    --------
    >>> salt = titrate("CCN.Cl")
    >>> salt.titrant, round(salt.equivalences[0].volume, 2), salt.notes
    ('base', 25.0, ('with hydrogen chloride',))
    """
    concentration = within("concentration", concentration, CONCENTRATION_RANGE, "mol/L")
    strength = within("concentration of the titrant", titrant_concentration, CONCENTRATION_RANGE, "mol/L")
    volume = within("volume", volume, VOLUME_RANGE, "mL")
    if last_volume is not None:
        last_volume = within("last volume", last_volume, VOLUME_RANGE, "mL")
    count = within("number of points", points, POINTS_RANGE, "")
    conditions = Conditions(temperature, ionic_strength)
    analyte = compose(structure, conditions, local)
    own = _start(analyte, concentration, conditions)
    kind = titrant if titrant in ("acid", "base") else ""
    if titrant is None:
        kind = "acid" if own > NEUTRAL else "base"
    if kind:
        added = STRONG_ACID if kind == "acid" else STRONG_BASE
    else:
        assert titrant is not None
        added = compose(titrant, conditions, local)
        kind = "acid" if _start(added, strength, conditions) < NEUTRAL else "base"
    done = titration(
        analyte,
        concentration=concentration,
        volume=volume,
        titrant=added,
        kind=kind,
        titrant_concentration=strength,
        last_volume=last_volume,
        points=int(count),
        conditions=conditions,
    )
    return done


def _start(composition: Composition, concentration: float, conditions: Conditions) -> float:
    """pH of a solution by itself."""
    parts = [(composition, np.array([concentration]))]
    return float(mixture_ph(parts, np.array([1.0]), conditions)[0])
