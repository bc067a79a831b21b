r"""Curves against pH: share of each form, mean net charge and log D.

Forms are told apart by net charge, that without any net charge into neutral form and zwitterion. The distribution
coefficient counts the neutral form with log P and singly charged ions as ion pairs some units below it.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from .equilibrium import equilibrate
from .ladder import ladder_of
from .prediction import Prediction, predict
from .records import PH_RANGE, shown
from .request import STANDARD, Conditions, within

if TYPE_CHECKING:
    import pandas as pd
    from rdkit import Chem

    from .conditioning import LocalModel

Floats = NDArray[np.float64]

CATION_BELOW, ANION_BELOW = 3.0, 4.0
"""log P of an ion pair below that of the neutral form, for a cation and an anion: Avdeef 2003, Absorption and Drug
Development, Wiley, section 4.2 ("diff 3-4", memory) [-]."""
LOG_P_RANGE = (-10.0, 20.0)
LOWEST_LOG_D = -10.0
"""log D below it is left out: nothing of the kind has been measured, and higher charged ions take part long before."""
POINTS = 2001  # most points of a curve
LEAST_SHARE = 0.001  # a form that nowhere comes to it is left out


@dataclass(frozen=True, slots=True, eq=False)
class Curve:
    """One compound along the pH.

    Attributes
    ----------
    name, structure : str
    message : str
        Remarks; the reason when `ph` is empty.
    ph : ndarray, shape (h,)
    net_charge, protonated, neutral, zwitterion : ndarray, shape (h,)
        Mean net charge; share with a proton on a base site, of the neutral form, of the zwitterion.
    charges : tuple of int
        Net charges that occur, highest first.
    shares : ndarray, shape (h, len(charges))
        Share of molecules with each of them.
    constants : tuple of (str, float)
        Macroscopic constants: `pKaH` or `pKa`, and value [-].
    log_p : float or None
        Given or estimated; None where there is no neutral form.
    log_d : ndarray, shape (h,), or None
    estimated : bool
        Whether log P is the estimate of Wildman and Crippen.
    """

    name: str
    structure: str
    message: str
    ph: Floats
    net_charge: Floats
    protonated: Floats
    neutral: Floats
    zwitterion: Floats
    charges: tuple[int, ...]
    shares: Floats
    constants: tuple[tuple[str, float], ...]
    log_p: float | None
    log_d: Floats | None
    estimated: bool


def ph_grid(low: float = 0.0, high: float = 14.0, step: float = 0.1) -> Floats:
    """pH values from one end to the other.

    Raises
    ------
    ValueError
        Ends outside -2 to 16 or in the wrong order, a step that is not positive, or more than 2,001 points.

    Examples
    --------
    >>> ph_grid(6.0, 8.0, 0.5)
    array([6. , 6.5, 7. , 7.5, 8. ])
    """
    low, high = within("pH", low, PH_RANGE, ""), within("pH", high, PH_RANGE, "")
    step = within("pH step", step, (0.001, 5.0), "")
    if low >= high:
        raise ValueError(f"the pH range must ascend, not go from {low:g} to {high:g}")
    count = int((high - low) / step + 1e-9) + 1
    if count > POINTS:
        raise ValueError(f"{count:,} points are more than {POINTS:,}: take a larger step")
    return np.round(low + step * np.arange(count), 6)


def estimated_log_p(mol: Chem.Mol) -> float:
    """log P of a neutral form from atom contributions [-]: Wildman and Crippen 1999, as in RDKit."""
    from rdkit.Chem import Crippen

    return float(Crippen.MolLogP(mol))  # type: ignore[attr-defined]


def log_d(
    log_p: float,
    neutral: Floats,
    cation: Floats,
    anion: Floats,
    *,
    cation_below: float = CATION_BELOW,
    anion_below: float = ANION_BELOW,
) -> Floats:
    r"""Logarithm of the distribution coefficient.

    .. math:: D = P\,(f_0 + 10^{-3} f_{+} + 10^{-4} f_{-})

    Parameters
    ----------
    log_p : float
        log P of the neutral form [-].
    neutral, cation, anion : ndarray
        Shares of the neutral form, of molecules of net charge +1 and of net charge -1. The zwitterion and ions
        of higher charge count as staying in water.
    cation_below, anion_below : float
        log P of an ion pair below that of the neutral form [-].

    Returns
    -------
    ndarray
        log D [-]; not a number below -10.

    Examples
    --------
    A base of pKaH 9.4 and log P 3.0 at pH 7.4: two units below log P.

    >>> float(log_d(3.0, np.array(0.0099), np.array(0.9901), np.array(0.0)).round(1))
    1.0

    References
    ----------
    .. [1] Avdeef, Absorption and Drug Development, Wiley 2003, chapter 4 (memory).
    """
    free = neutral + 10.0**-cation_below * cation + 10.0**-anion_below * anion
    value = log_p + np.log10(np.maximum(free, 1e-30))
    return np.asarray(np.where(value < LOWEST_LOG_D, np.nan, value))


def curves_of(
    structures: Sequence[Any],
    names: Sequence[str],
    ph: Floats,
    *,
    log_p: float | None = None,
    conditions: Conditions = STANDARD,
    local: LocalModel | None = None,
) -> list[Curve]:
    """A curve for each structure; one that cannot be computed has an empty `ph` and its reason in `message`."""
    predictions = predict(structures, ph=(7.4,), conditions=conditions, local=local)
    return [
        _curve(found, name, structure if isinstance(structure, str) else "", ph, log_p)
        for found, name, structure in zip(predictions, names, structures, strict=True)
    ]


def _curve(found: Prediction, name: str, structure: str, ph: Floats, log_p: float | None) -> Curve:
    if found.sites is None or found.parent is None or found.equilibrium is None:
        none = np.zeros(0)
        return Curve(
            name,
            structure,
            found.message,
            none,
            none,
            none,
            none,
            none,
            (),
            none[:, None],
            (),
            None,
            None,
            False,
        )
    states = equilibrate([found.sites], ph.tolist())[0].states
    ladder = ladder_of(found.sites)
    by_charge = ladder.shares(ph)
    kept = [n for n in reversed(range(by_charge.shape[1])) if by_charge[:, n].max() >= LEAST_SHARE]
    neutral = np.array([state.neutral_fraction for state in states])
    estimated = log_p is None and found.sites.fixed_charge == 0
    if estimated:
        log_p = estimated_log_p(found.parent.mol)
    along = {n + ladder.bare_charge: by_charge[:, n] for n in range(by_charge.shape[1])}
    nothing = np.zeros(len(ph))
    return Curve(
        name=name,
        structure=structure,
        message=found.message,
        ph=ph,
        net_charge=np.array([state.net_charge for state in states]),
        protonated=np.array([state.protonated_fraction for state in states]),
        neutral=neutral,
        zwitterion=np.array([state.zwitterion_fraction for state in states]),
        charges=tuple(n + ladder.bare_charge for n in kept),
        shares=by_charge[:, kept],
        constants=tuple(
            ("pKaH" if step.kind == "base" else "pKa", step.value) for step in found.equilibrium.steps
        ),
        log_p=log_p,
        log_d=None if log_p is None else log_d(log_p, neutral, along.get(1, nothing), along.get(-1, nothing)),
        estimated=estimated,
    )


COLUMNS = (
    "ph",
    "net_charge",
    "protonated_fraction",
    "neutral_fraction",
    "zwitterion_fraction",
    "log_p",
    "log_d",
)


def curve_table(curves: Sequence[Curve]) -> tuple[list[str], list[list[float | None]], list[int]]:
    """Curves as a table: a row for each compound and pH.

    Returns
    -------
    tuple
        Column names (`COLUMNS`, then `share_+1` and so on for every net charge that occurs, highest first), rows
        of numbers, fractions and charges with four decimals, and the curve of each row.
    """
    charges = sorted({charge for curve in curves for charge in curve.charges}, reverse=True)
    names = [*COLUMNS, *(f"share_{charge:+d}" if charge else "share_0" for charge in charges)]
    rows: list[list[float | None]] = []
    owners = []
    for owner, curve in enumerate(curves):
        place = {charge: n for n, charge in enumerate(curve.charges)}
        for k, ph in enumerate(curve.ph.tolist()):
            row: list[float | None] = [ph]
            row += (
                shown(column[k], "fraction")
                for column in (curve.net_charge, curve.protonated, curve.neutral, curve.zwitterion)
            )
            row.append(None if curve.log_p is None else shown(curve.log_p, "constant"))
            distribution = np.nan if curve.log_d is None else curve.log_d[k]
            row.append(None if np.isnan(distribution) else shown(distribution, "constant"))
            row += (
                shown(curve.shares[k, place[charge]], "fraction") if charge in place else None
                for charge in charges
            )
            rows.append(row)
            owners.append(owner)
    return names, rows, owners


def curve(
    structures: Iterable[object],
    *,
    ph_range: tuple[float, float] = (0.0, 14.0),
    step: float = 0.1,
    log_p: float | None = None,
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
    local: LocalModel | None = None,
) -> pd.DataFrame:
    """Share of each form, mean charge and log D of one or several compounds against pH.

    Parameters
    ----------
    structures : iterable of str or rdkit.Chem.Mol
        A list, or one structure alone.
    ph_range, step : float
        Ends and step of the pH [-], -2 to 16, at most 2,001 points.
    log_p : float, optional
        log P of the neutral form, of one compound [-]; estimated from atom contributions (Wildman and Crippen
        1999, as in RDKit) when not given.
    temperature, ionic_strength : float
        [C], 0 to 60; [mol/L], 0 to 0.5.
    local : LocalModel, optional
        A user's own measurements (`condition`).

    Returns
    -------
    pandas.DataFrame
        `compound` (place in the list, from 0), the columns of `COLUMNS` and `share_<charge>` for each net charge.

    Raises
    ------
    ValueError
        Something out of range, log P for several compounds, or a structure that cannot be computed.
    """
    import pandas as pd
    from rdkit import Chem

    listed: list[Any] = [structures] if isinstance(structures, str | Chem.Mol) else list(structures)
    ph = ph_grid(*ph_range, step)
    if log_p is not None:
        log_p = within("log P", log_p, LOG_P_RANGE, "")
        if len(listed) != 1:
            raise ValueError(f"log P can be given for one compound, not for {len(listed)}")
    conditions = Conditions(temperature, ionic_strength)
    found = curves_of(listed, [""] * len(listed), ph, log_p=log_p, conditions=conditions, local=local)
    for n, one in enumerate(found):
        if not len(one.ph):
            raise ValueError(f"structure {n}: {one.message}")
    names, rows, owners = curve_table(found)
    frame = pd.DataFrame(rows, columns=names, dtype="float64")
    frame.insert(0, "compound", owners)
    return frame
