r"""Counter-ions for a salt: ranked by the difference of constants, with what is known of how often it makes a salt.

An acid gives its proton to a base for good, in the solid too, where the constant of the conjugate acid lies well
above that of the acid. What counts for a compound is the macroscopic step from no net charge to the ion of the salt,
whatever group takes or gives the proton: the hydrochloride of an amino acid is a matter of its carboxylate.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from functools import cache
from typing import TYPE_CHECKING, Any

from .conditions import pkw
from .partition import Steps, steps_of
from .prediction import Prediction, predict
from .request import STANDARD, Conditions, within
from .solubility import Dissolution, concentration
from .tables import read_table

if TYPE_CHECKING:
    from .conditioning import LocalModel

SLOPE, INTERCEPT = 0.17, 0.28
COCRYSTAL, SALT = -1.0, 4.0
"""Share of salts among crystals of an acid and a base of which both are there, P = 0.17 dpKa + 0.28 from -1 to 4; below
only cocrystals, above only salts: Cruz-Cabeza, CrystEngComm 14 (2012) 6362 (memory)."""
RULE = (2.0, 3.0)
"""Differences from which on a salt is commonly expected: common practice; Stahl and Wermuth 2002 (memory)."""
LEAST_BASE, MOST_ACID = (
    0.0,
    12.0,
)  # steps that are tried for a salt: constant of a cation at least, of an anion at most
LOW_PH_MAX, HIGH_PH_MAX = 5.0, 8.0
"""A salt of a base with a lower pH of maximum solubility, or of an acid with a higher one, may fall back to the free
form beside common excipients or in the gut: common practice."""
KSP_RANGE = (1e-20, 1e4)  # mol2/L2
WORDS = ("cocrystal or mixture", "salt or cocrystal", "salt")
MEDIA = (1.2, 4.5, 6.8)  # pH of the dissolution media of the pharmacopoeias


@dataclass(frozen=True, slots=True)
class CounterIon:
    """One acid or base of the tables.

    Attributes
    ----------
    name, salt, family : str
        Name, what the salt is called, chemical class.
    constants : tuple of float
        Of its steps from the molecule without net charge on [-].
    caution, source : str
    """

    name: str
    salt: str
    family: str
    constants: tuple[float, ...]
    caution: str
    source: str


@dataclass(frozen=True, slots=True)
class Candidate:
    """One counter-ion for one compound.

    Attributes
    ----------
    ion : CounterIon
    delta, low, high : float
        Constant of the conjugate acid of the base less that of the acid, with its 90 % interval [-].
    likelihood, least, most : float
        Share of salts at these differences [-]; at -1 and at 4 the ends of the published line.
    verdict : str
        `salt`, `salt or cocrystal`, `cocrystal or mixture`.
    sure : bool
        Whether that holds over the whole interval.
    second_ion : float or None
        Difference for a second counter-ion: 1:2, a dihydrochloride [-].
    second_proton : float or None
        Difference for the second proton of the counter-ion: 2:1, a hemisulfate [-].
    """

    ion: CounterIon
    delta: float
    low: float
    high: float
    likelihood: float
    least: float
    most: float
    verdict: str
    sure: bool
    second_ion: float | None
    second_proton: float | None

    @property
    def rule(self) -> str:
        """Whether the rule of 2 to 3 units is met: `yes`, `barely` or `no`."""
        return "yes" if self.delta >= RULE[1] else "barely" if self.delta >= RULE[0] else "no"


@dataclass(frozen=True, slots=True, eq=False)
class Side:
    """A compound as the base, or as the acid, of a salt.

    Attributes
    ----------
    charge : {1, -1}
        Of the compound in its salts.
    constant, half_width : float
        Of the step between no net charge and that ion, half of its 90 % interval [-].
    second : float or None
        Constant of the next step [-].
    candidates : tuple of Candidate
        By difference, the largest first.
    """

    charge: int
    constant: float
    half_width: float
    second: float | None
    candidates: tuple[Candidate, ...]


@dataclass(frozen=True, slots=True, eq=False)
class SaltSelection:
    """Counter-ions of one compound, and its solubility against pH; its text is what the terminal shows.

    Attributes
    ----------
    name, structure, message : str
        The message is the reason where `steps` is None.
    steps : Steps or None
    sides : tuple of Side
        As a base, as an acid, both or neither.
    dissolution : Dissolution or None
        Relative to the intrinsic solubility where that is not known.
    known : bool
        Whether the intrinsic solubility is.
    media : tuple of float
        pH values for which the solubility is told.
    conditions : Conditions
    """

    name: str
    structure: str
    message: str
    steps: Steps | None = None
    sides: tuple[Side, ...] = ()
    dissolution: Dissolution | None = None
    known: bool = False
    media: tuple[float, ...] = MEDIA
    conditions: Conditions = STANDARD

    def __str__(self) -> str:
        from .salt_text import selections_text

        return selections_text([self])


@cache
def listed(kind: str) -> tuple[CounterIon, ...]:
    """Acids or bases of the tables.

    Examples
    --------
    >>> listed("acid")[0].salt, listed("base")[0].salt
    ('hydrochloride', 'sodium')
    """
    return tuple(
        CounterIon(
            row["name"],
            row["salt"],
            row["class"],
            tuple(map(float, row["constants"].split())),
            row["caution"],
            row["source"],
        )
        for row in read_table(f"counter_{kind}s.csv")
    )


def salt_likelihood(delta: float) -> float:
    r"""Share of salts among crystals of an acid and a base, by the difference of their constants.

    .. math:: P = 0.17\,\Delta\mathrm{pK_a} + 0.28, \quad -1 \le \Delta\mathrm{pK_a} \le 4

    Parameters
    ----------
    delta : float
        Constant of the conjugate acid of the base less that of the acid [-].

    Returns
    -------
    float
        [-]; the end of the line beyond it, where all are cocrystals (11 %: at most) or salts (96 %: at least).

    Examples
    --------
    >>> [round(salt_likelihood(delta), 2) for delta in (-3.0, 0.0, 2.0, 6.0)]
    [0.11, 0.28, 0.62, 0.96]

    References
    ----------
    .. [1] Cruz-Cabeza, CrystEngComm 14 (2012) 6362 (memory).
    """
    return SLOPE * min(max(delta, COCRYSTAL), SALT) + INTERCEPT


def verdict(delta: float) -> str:
    """What a difference of constants leads to expect.

    Examples
    --------
    >>> verdict(5.0), verdict(1.0), verdict(-2.0)
    ('salt', 'salt or cocrystal', 'cocrystal or mixture')
    """
    return WORDS[(delta >= COCRYSTAL) + (delta > SALT)]


def side_of(steps: Steps, charge: int) -> Side | None:
    """A compound as the base (+1) or the acid (-1) of a salt; None where that step is out of reach.

    Parameters
    ----------
    steps : Steps
    charge : {1, -1}
    """
    step = steps.step(1 if charge > 0 else 0)
    if step is None or (step[0] < LEAST_BASE if charge > 0 else step[0] > MOST_ACID):
        return None
    constant, half_width = step
    next_step = steps.step(2 if charge > 0 else -1)
    second = None if next_step is None else next_step[0]
    found = [
        _candidate(ion, charge, constant, half_width, second)
        for ion in listed("acid" if charge > 0 else "base")
    ]
    found.sort(key=lambda one: -one.delta)
    return Side(charge, constant, half_width, second, tuple(found))


def _candidate(
    ion: CounterIon, charge: int, constant: float, half_width: float, second: float | None
) -> Candidate:
    def difference(own: float, other: float) -> float:
        return charge * (own - other)

    delta = difference(constant, ion.constants[0])
    low, high = delta - half_width, delta + half_width
    return Candidate(
        ion,
        delta,
        low,
        high,
        salt_likelihood(delta),
        salt_likelihood(low),
        salt_likelihood(high),
        verdict(delta),
        verdict(low) == verdict(high),
        None if second is None else difference(second, ion.constants[0]),
        difference(constant, ion.constants[1]) if len(ion.constants) > 1 else None,
    )


def counter_ions(
    structure: object,
    *,
    side: str | None = None,
    solubility: str | float | None = None,
    salt_solubility: str | float | None = None,
    ksp: float | None = None,
    ph: Iterable[float] = MEDIA,
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
    local: LocalModel | None = None,
) -> SaltSelection:
    """Counter-ions for the salt of a compound, and its solubility against pH.

    Parameters
    ----------
    structure : str or rdkit.Chem.Mol
    side : {"base", "acid"}, optional
        What the compound is in its salt; whatever it can be when not given.
    solubility : str or float, optional
        Intrinsic solubility of the form without net charge: a number and a unit, mg/mL without one.
    salt_solubility : str or float, optional
        Of a 1:1 salt at a pH where the compound is all ion, as mass of the free form.
    ksp : float, optional
        Solubility product of that salt instead [mol2/L2].
    ph : iterable of float
        pH values for which the solubility is told.
    temperature, ionic_strength : float
        [C], 0 to 60; [mol/L], 0 to 0.5. Constants of the counter-ions keep their value of 25 C.
    local : LocalModel, optional
        A user's own measured constants (`condition`).

    Returns
    -------
    SaltSelection

    Raises
    ------
    ValueError
        Something out of range, or a structure that cannot be computed.

    Examples
    --------
    >>> found = counter_ions("NCC(=O)O")
    >>> [(side.charge, round(side.constant)) for side in found.sides]
    [(1, 2), (-1, 10)]
    """
    (found,) = selections_of(
        [structure],
        [""],
        side=side,
        solubility=solubility,
        salt_solubility=salt_solubility,
        ksp=ksp,
        ph=tuple(ph),
        conditions=Conditions(temperature, ionic_strength),
        local=local,
    )
    if found.steps is None:
        raise ValueError(found.message)
    return found


def selections_of(
    structures: Sequence[Any],
    names: Sequence[str],
    *,
    side: str | None = None,
    solubility: str | float | None = None,
    salt_solubility: str | float | None = None,
    ksp: float | None = None,
    ph: tuple[float, ...] = MEDIA,
    conditions: Conditions = STANDARD,
    local: LocalModel | None = None,
) -> list[SaltSelection]:
    """The same for a list; one that cannot be computed has no steps and its reason in `message`."""
    if side not in (None, "base", "acid"):
        raise ValueError(f"side must be 'base' or 'acid', not {side!r}")
    if salt_solubility is not None and ksp is not None:
        raise ValueError("the solubility of the salt and its solubility product are one: give one of them")
    if solubility is None and (salt_solubility is not None or ksp is not None):
        raise ValueError("the salt needs the intrinsic solubility beside it")
    charges = {"base": (1,), "acid": (-1,)}.get(side or "", (1, -1))
    predictions = predict(structures, ph=(7.4,), conditions=conditions, local=local)
    out = []
    for found, name, structure in zip(predictions, names, structures, strict=True):
        text = structure if isinstance(structure, str) else ""
        if found.sites is None or found.equilibrium is None or found.parent is None:
            out.append(SaltSelection(name, text, found.message, media=ph, conditions=conditions))
            continue
        steps = steps_of(found.sites, found.equilibrium)
        sides = tuple(one for charge in charges if (one := side_of(steps, charge)) is not None)
        dissolution = None
        if sides:
            dissolution = replace(
                _dissolution(found, steps, sides[0].charge, solubility, salt_solubility, ksp),
                water=float(pkw(conditions.temperature, conditions.ionic_strength)),
            )
        out.append(
            SaltSelection(
                name, text, found.message, steps, sides, dissolution, solubility is not None, ph, conditions
            )
        )
    return out


def _dissolution(
    found: Prediction,
    steps: Steps,
    charge: int,
    solubility: str | float | None,
    salt_solubility: str | float | None,
    ksp: float | None,
) -> Dissolution:
    from rdkit.Chem import Descriptors

    assert found.parent is not None
    mass = float(Descriptors.MolWt(found.parent.mol))  # type: ignore[attr-defined]
    intrinsic = 1.0 if solubility is None else concentration(solubility, mass)
    salt = None
    if salt_solubility is not None:
        salt = concentration(salt_solubility, mass, "solubility of the salt")
    elif ksp is not None:
        salt = math.sqrt(within("solubility product", ksp, KSP_RANGE, "mol2/L2"))
    return Dissolution(steps, intrinsic, salt, charge, mass)
