r"""Acid-base extraction: the pH that takes a compound into water, and the pH that brings it back.

The organic layer is washed several times with fresh water of one pH; of a compound the share
:math:`1 / (1 + V_{aq} / (D V_{org}))^n` stays in it. From the water of all washes together it is brought back with as
many portions of solvent. The margin of a pH covers the 90 % intervals of all constants of a compound at once; the
error of log P comes on top.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from .curves import LOG_P_RANGE, estimated_log_p
from .hazards import Hazard, hazards_of
from .partition import ION_PAIRS, Partition, comes_out_of_water, stays_in_organic, steps_of
from .prediction import Prediction, predict
from .request import STANDARD, Conditions, within
from .separation import NEUTRAL

if TYPE_CHECKING:
    from .conditioning import LocalModel
    from .mixtures import Plan

Floats = NDArray[np.float64]

VOLUME_RANGE = (1e-3, 1e6)  # mL
WASHES_RANGE = (1, 20)
AIM_RANGE = (0.5, 0.99999)
PH_LIMITS = (0.0, 14.0)
ION_PAIR_RANGE = (0.0, 20.0)  # log P units below the neutral form
AMOUNT_RANGE = (1e-12, 1e12)
NO_ION_PAIRS = (20.0, 20.0)
FINE = 0.01  # step of the pH in the reach of one compound
VOLATILE = 6  # heavy atoms up to which a neutral form may go with the solvent: common practice


@dataclass(frozen=True, slots=True)
class Setting:
    """How the extraction is done.

    Attributes
    ----------
    aim : float
        Share that shall go over [-], 0.5 to 0.99999.
    aqueous, organic : float
        Volume of each portion of water, and of the organic layer [mL].
    washes : int
        Number of portions, 1 to 20.
    lowest, highest : float
        pH limits, 0 to 14.
    ion_pairs : tuple of float
        log P of the ion pair of a cation and of an anion below that of the neutral form [-].

    Raises
    ------
    ValueError
        Something out of range.
    """

    aim: float = 0.99
    aqueous: float = 50.0
    organic: float = 50.0
    washes: int = 2
    lowest: float = 1.0
    highest: float = 13.0
    ion_pairs: tuple[float, float] = ION_PAIRS

    def __post_init__(self) -> None:
        def set_field(name: str, label: str, limits: tuple[float, float], unit: str = "") -> None:
            object.__setattr__(self, name, within(label, getattr(self, name), limits, unit))

        set_field("aim", "aim", AIM_RANGE)
        set_field("aqueous", "volume of water", VOLUME_RANGE, "mL")
        set_field("organic", "volume of the organic layer", VOLUME_RANGE, "mL")
        set_field("lowest", "lowest pH", PH_LIMITS)
        set_field("highest", "highest pH", PH_LIMITS)
        object.__setattr__(self, "washes", int(within("number of washes", self.washes, WASHES_RANGE, "")))
        pairs = tuple(within("ion pair", value, ION_PAIR_RANGE, "") for value in self.ion_pairs)
        object.__setattr__(self, "ion_pairs", pairs)
        if self.lowest >= self.highest:
            raise ValueError(f"the pH limits must ascend, not go from {self.lowest:g} to {self.highest:g}")

    def grid(self, step: float) -> Floats:
        """pH values between the limits."""
        return np.round(np.arange(self.lowest, self.highest + 1e-9, step), 6)

    def stays(self, coefficient: Floats, washes: int | None = None) -> Floats:
        """Share that the washes leave in the organic layer."""
        times = self.washes if washes is None else washes
        return stays_in_organic(coefficient, aqueous=self.aqueous, organic=self.organic, times=times)

    def returns(self, coefficient: Floats, portions: int | None = None) -> Floats:
        """Share that goes out of the water of all washes into as many portions of solvent."""
        times = self.washes if portions is None else portions
        volume = self.aqueous * self.washes
        return comes_out_of_water(coefficient, aqueous=volume, organic=self.organic, times=times)


@dataclass(frozen=True, slots=True)
class Entry:
    """One structure of a list with what is known of it.

    Attributes
    ----------
    structure : str or rdkit.Chem.Mol
    name : str
    log_p : float or None
        Of the neutral form; None for the estimate [-].
    amount : float
        In any unit of amount of substance.
    problem : str
        Why it cannot be computed, where that is known beforehand.
    """

    structure: Any
    name: str = ""
    log_p: float | None = None
    amount: float = 1.0
    problem: str = ""


@dataclass(frozen=True, slots=True)
class Reach:
    """Where the aim is reached in one direction.

    Attributes
    ----------
    ranges : tuple of (float, float)
        pH ranges in which it is, with the constants as they are.
    sure : tuple of (float, float)
        The same at the least favourable ends of all intervals.
    ph : float or None
        The mildest pH with the margin, else without; None where the aim is out of reach.
    best, best_ph : float
        Highest share that goes over within the limits [-], and where.
    portions : int or None
        Portions that would do at that pH; None where more than 20 are needed.
    """

    ranges: tuple[tuple[float, float], ...]
    sure: tuple[tuple[float, float], ...]
    ph: float | None
    best: float
    best_ph: float
    portions: int | None


@dataclass(frozen=True, slots=True, eq=False)
class Compound:
    """One compound of a work-up.

    Attributes
    ----------
    name, structure, message : str
        The message is the reason where `partition` is None.
    kind : str
        `base`, `acid`, `amphoteric`, `neutral` or `permanent ion`, by the steps between the pH limits.
    constants : tuple of (str, float, float)
        `pKaH` or `pKa` between the limits or near them, value, half of its 90 % interval.
    partition : Partition or None
    estimated : bool
        Whether log P is the estimate of Wildman and Crippen.
    into_water, back : Reach or None
    hazards : tuple of Hazard
    cautions : tuple of str
    amount : float
    """

    name: str
    structure: str
    message: str
    kind: str = ""
    constants: tuple[tuple[str, float, float], ...] = ()
    partition: Partition | None = None
    estimated: bool = False
    into_water: Reach | None = None
    back: Reach | None = None
    hazards: tuple[Hazard, ...] = ()
    cautions: tuple[str, ...] = ()
    amount: float = 1.0


@dataclass(frozen=True, slots=True, eq=False)
class Workup:
    """Acid-base extraction of a list of compounds; its text is what the terminal shows."""

    compounds: tuple[Compound, ...]
    plan: Plan | None
    setting: Setting
    conditions: Conditions = field(default=STANDARD)

    def __str__(self) -> str:
        from .bench_text import workup_text

        return workup_text(self)


def workup(
    structures: Iterable[object],
    *,
    names: Sequence[str] | None = None,
    log_p: Sequence[float | None] | None = None,
    amounts: Sequence[float] | None = None,
    mixture: bool = True,
    aim: float = 0.99,
    aqueous: float = 50.0,
    organic: float = 50.0,
    washes: int = 2,
    ph_range: tuple[float, float] = (1.0, 13.0),
    ion_pairs: tuple[float, float] = ION_PAIRS,
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
    local: LocalModel | None = None,
) -> Workup:
    """Acid-base extraction of one or several compounds.

    Parameters
    ----------
    structures : iterable of str or rdkit.Chem.Mol
        A list, or one structure alone.
    names : sequence of str, optional
    log_p : sequence of float or None, optional
        log P of each neutral form [-]; estimated from atom contributions (Wildman and Crippen 1999) where not given.
    amounts : sequence of float, optional
        Amount of each in the mixture, in any unit of amount of substance; equal when not given.
    mixture : bool
        Whether to look for the washes that separate them (2 to 12 compounds).
    aim : float
        Share that shall go over [-], 0.5 to 0.99999.
    aqueous, organic : float
        Volume of each portion of water; of the organic layer and of each portion of solvent [mL].
    washes : int
        Number of portions, 1 to 20.
    ph_range : tuple of float
        pH limits, 0 to 14.
    ion_pairs : tuple of float
        log P of the ion pair of a cation and of an anion below that of the neutral form [-].
    temperature, ionic_strength : float
        [C], 0 to 60; [mol/L], 0 to 0.5.
    local : LocalModel, optional
        A user's own measured constants (`condition`).

    Returns
    -------
    Workup
        A structure that cannot be computed is a compound with its reason.

    Raises
    ------
    ValueError
        Something out of range, or lists of different lengths.

    Examples
    --------
    >>> done = workup(["OC(=O)c1ccccc1", "Nc1ccccc1", "c1ccc2ccccc2c1"])
    >>> [one.kind for one in done.compounds], len(done.plan.washes)
    (['acid', 'base', 'neutral'], 2)
    """
    from rdkit import Chem

    listed: list[Any] = [structures] if isinstance(structures, str | Chem.Mol) else list(structures)
    setting = Setting(aim, aqueous, organic, washes, *ph_range, ion_pairs)
    conditions = Conditions(temperature, ionic_strength)
    count = len(listed)
    for name, given in (("names", names), ("log P values", log_p), ("amounts", amounts)):
        if given is not None and len(given) != count:
            raise ValueError(f"{len(given)} {name} for {count} structures")
    entries = [
        Entry(
            structure,
            "" if names is None else names[n],
            None if log_p is None or log_p[n] is None else within("log P", log_p[n], LOG_P_RANGE, ""),
            1.0 if amounts is None else within("amount", amounts[n], AMOUNT_RANGE, ""),
        )
        for n, structure in enumerate(listed)
    ]
    return workup_of(entries, setting, mixture=mixture, conditions=conditions, local=local)


def workup_of(
    entries: Sequence[Entry],
    setting: Setting,
    *,
    mixture: bool = True,
    conditions: Conditions = STANDARD,
    local: LocalModel | None = None,
) -> Workup:
    """Acid-base extraction of a list; an entry with a problem is a compound with that reason."""
    found = predict([one.structure for one in entries], ph=(NEUTRAL,), conditions=conditions, local=local)
    compounds = tuple(_compound(one, entry, setting) for one, entry in zip(found, entries, strict=True))
    plan = None
    if mixture:
        from .mixtures import plan_of

        plan = plan_of(compounds, setting)
    return Workup(compounds, plan, setting, conditions)


def _compound(found: Prediction, entry: Entry, setting: Setting) -> Compound:
    structure = entry.structure if isinstance(entry.structure, str) else ""
    if entry.problem or found.sites is None or found.parent is None or found.equilibrium is None:
        return Compound(entry.name, structure, entry.problem or found.message)
    log_p = entry.log_p
    estimated = log_p is None and found.sites.fixed_charge == 0
    if estimated:
        log_p = estimated_log_p(found.parent.mol)
    partition = Partition(steps_of(found.sites, found.equilibrium), log_p, setting.ion_pairs)
    low, high = setting.lowest, setting.highest
    kinds = {
        step.kind
        for step in found.equilibrium.steps
        if (step.value >= low if step.kind == "base" else step.value <= high)
    }
    kind: str = "amphoteric" if len(kinds) == 2 else kinds.pop() if kinds else "neutral"
    if found.sites.fixed_charge and kind == "neutral":
        kind = "permanent ion"
    into_water = _into_water(partition, setting)
    cautions = _cautions(partition, kind, found.parent.mol.GetNumHeavyAtoms())
    if into_water.ph is None:
        bare = _into_water(replace(partition, ion_pairs=NO_ION_PAIRS), setting)
        if bare.ph is not None:
            cautions += (
                f"ion pairs hold it in the organic layer; without them (ether, toluene) pH {bare.ph:.1f} would do",
            )
    return Compound(
        name=entry.name,
        structure=structure,
        message=found.message,
        kind=kind,
        constants=tuple(
            ("pKaH" if step.kind == "base" else "pKa", step.value, step.half_width)
            for step in found.equilibrium.steps
            if low - 2.0 <= step.value <= high + 2.0
        ),
        partition=partition,
        estimated=estimated,
        into_water=into_water,
        back=reach(partition, setting, setting.returns),
        hazards=hazards_of(found.parent.mol, low, high),
        cautions=cautions,
        amount=entry.amount,
    )


def _into_water(partition: Partition, setting: Setting) -> Reach:
    return reach(partition, setting, lambda d, n: 1.0 - setting.stays(d, n))


def _cautions(partition: Partition, kind: str, heavy_atoms: int) -> tuple[str, ...]:
    said = []
    if kind == "amphoteric":
        part = partition.steps.neutral_part
        said.append(
            "amphoteric: charged on both sides of its isoelectric point"
            + (f", and {100 * (1 - part):.0f} % zwitterion there" if part < 0.995 else "")
        )
    if partition.log_p is None:
        said.append("a permanent charge: it stays in water, ion pairs apart; log P is not estimated")
    elif partition.log_p < 0.0:
        said.append("its neutral form prefers water (log P below 0)")
    if heavy_atoms <= VOLATILE and kind not in ("permanent ion", "amphoteric"):
        said.append("small: its neutral form may go with the solvent")
    return tuple(said)


def reach(partition: Partition, setting: Setting, goes: Callable[[Floats, int | None], Floats]) -> Reach:
    """Where the aim is reached within the limits.

    Parameters
    ----------
    partition : Partition
    setting : Setting
    goes : callable
        Share that goes over [-] from D and the number of portions (None: as set).
    """
    ph = setting.grid(FINE)
    coefficient = partition.coefficients(ph)
    share = goes(coefficient, None)
    central, least = share[0], share.min(axis=0)
    ranges, sure = _ranges(ph, central >= setting.aim), _ranges(ph, least >= setting.aim)
    near = np.flatnonzero(central >= central.max() - 1e-3)
    place = int(near[np.argmin(np.abs(ph[near] - NEUTRAL))])
    enough = (
        n
        for n in range(1, int(WASHES_RANGE[1]) + 1)
        if goes(coefficient[:1, place : place + 1], n)[0, 0] >= setting.aim
    )
    return Reach(
        ranges=ranges,
        sure=sure,
        ph=_mildest(sure or ranges),
        best=float(central[place]),
        best_ph=float(ph[place]),
        portions=next(enough, None),
    )


def _ranges(ph: Floats, good: NDArray[np.bool_]) -> tuple[tuple[float, float], ...]:
    edges = np.flatnonzero(np.diff(np.concatenate([[False], good, [False]]).astype(int)))
    return tuple((float(ph[a]), float(ph[b - 1])) for a, b in zip(edges[::2], edges[1::2], strict=True))


def _mildest(ranges: Sequence[tuple[float, float]]) -> float | None:
    ends = [min(max(NEUTRAL, low), high) for low, high in ranges]
    return min(ends, key=lambda value: abs(value - NEUTRAL), default=None)
