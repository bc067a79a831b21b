r"""Conditions: what temperature and ionic strength do to an acid constant, and to the ion product of water.

A constant of water at 25 C and ionic strength 0 is moved to another temperature by the entropy and heat capacity of
its family (van 't Hoff), and to another ionic strength by the Davies equation, which asks for the charge of the acid
form alone. Both steps can be undone, so that measured values come back to 25 C and ionic strength 0.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cache
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .request import IONIC_STRENGTH_RANGE, STANDARD_TEMPERATURE, TEMPERATURE_RANGE, Conditions, within
from .tables import read_table

Floats = NDArray[np.float64]
Kind = Literal["mixed", "concentration"]

PKW = 14.00
"""Ion product of water at 25 C and ionic strength 0, as used in pKb = 14.00 - pKaH [-]; measured 13.995."""

_ZERO_CELSIUS = 273.15  # K
_GAS_LN10 = 8.314462618 * float(np.log(10.0))  # R ln 10 [J/(mol K)]
_DEBYE_HUECKEL = 0.509  # A in water at 25 C, decimal logarithms [(L/mol)^0.5], Robinson and Stokes 1959
_DAVIES = 0.3  # coefficient of the linear term [L/mol], Davies 1962


@dataclass(frozen=True, slots=True)
class Thermodynamics:
    """Dissociation of the sites of one family at 25 C: entropy and heat capacity [J/(mol K)]."""

    entropy: float
    heat_capacity: float


@cache
def family_thermodynamics() -> dict[str, Thermodynamics]:
    """Entropy and heat capacity of each family of sites (`conditions.csv`)."""
    return {
        row["family"]: Thermodynamics(float(row["entropy"]), float(row["heat_capacity"]))
        for row in read_table("conditions.csv")
    }


def check_conditions(temperature: ArrayLike, ionic_strength: ArrayLike) -> None:
    """Refuse conditions that the laws here do not cover.

    Raises
    ------
    ValueError
        Temperature outside 0 to 60 C, ionic strength outside 0 to 0.5 mol/L, or not a number.

    Examples
    --------
    >>> check_conditions(70.0, 0.0)
    Traceback (most recent call last):
    ValueError: temperature must lie between 0 and 60 C, not 70
    """
    for name, value, limits, unit in (
        ("temperature", temperature, TEMPERATURE_RANGE, "C"),
        ("ionic strength", ionic_strength, IONIC_STRENGTH_RANGE, "mol/L"),
    ):
        for number in np.asarray(value).ravel().tolist():
            within(name, number, limits, unit)


def relative_permittivity(temperature: ArrayLike) -> Floats:
    """Relative permittivity of water, 0 to 100 C.

    Parameters
    ----------
    temperature : array_like
        [C].

    Examples
    --------
    >>> float(relative_permittivity(25.0).round(2))
    78.3

    References
    ----------
    .. [1] Malmberg and Maryott, J. Res. Natl. Bur. Stand. 56 (1956) 1 (memory).
    """
    t = np.asarray(temperature, dtype=np.float64)
    return np.asarray(87.740 - 0.40008 * t + 9.398e-4 * t**2 - 1.410e-6 * t**3)


def davies(ionic_strength: ArrayLike, temperature: ArrayLike = STANDARD_TEMPERATURE) -> Floats:
    r"""The term A f(I) of the Davies equation: -log10 of the activity coefficient of a singly charged ion.

    .. math:: -\log_{10}\gamma_z = z^2 A f(I), \quad
              f(I) = \frac{\sqrt I}{1 + \sqrt I} - 0.3\,I, \quad
              A(T) = 0.509 \left(\frac{\varepsilon_{25} T_{25}}{\varepsilon T}\right)^{3/2}

    Parameters
    ----------
    ionic_strength : array_like
        [mol/L], 0 to 0.5.
    temperature : array_like
        [C], 0 to 60.

    Returns
    -------
    ndarray
        A f(I) [-], 0.11 at 0.1 mol/L.

    Raises
    ------
    ValueError
        Outside these ranges.

    Examples
    --------
    >>> davies([0.0, 0.1, 0.5]).round(3)
    array([0.   , 0.107, 0.134])

    References
    ----------
    .. [1] C. W. Davies, Ion Association, Butterworths, London 1962, p. 41 (memory).
    """
    check_conditions(temperature, ionic_strength)
    root = np.sqrt(np.asarray(ionic_strength, dtype=np.float64))
    here = relative_permittivity(temperature) * (np.asarray(temperature) + _ZERO_CELSIUS)
    standard = relative_permittivity(STANDARD_TEMPERATURE) * (STANDARD_TEMPERATURE + _ZERO_CELSIUS)
    slope = _DEBYE_HUECKEL * (standard / here) ** 1.5
    return np.asarray(slope * (root / (1.0 + root) - _DAVIES * root**2))


def ionic_strength_shift(
    acid_charge: ArrayLike,
    ionic_strength: ArrayLike,
    *,
    temperature: ArrayLike = STANDARD_TEMPERATURE,
    kind: Kind = "mixed",
) -> Floats:
    r"""What an ionic strength adds to a constant.

    .. math:: \Delta\mathrm{pK} = (2z - 1)\,A f(I) \text{ (mixed)}, \qquad
              \Delta\mathrm{pK} = (2z - 2)\,A f(I) \text{ (concentration)}

    with z the charge of the acid form.

    Parameters
    ----------
    acid_charge : array_like of int
        Net charge of the form with the proton: 1 for the cation of a base, 0 for a neutral acid.
    ionic_strength : array_like
        [mol/L], 0 to 0.5.
    temperature : array_like
        [C], 0 to 60.
    kind : {"mixed", "concentration"}
        A mixed ("practical") constant has the activity of H+ that a pH meter reads and concentrations of the
        rest; a concentration constant has concentrations throughout.

    Returns
    -------
    ndarray
        Shift [pK units], to be added to the constant at ionic strength 0.

    Raises
    ------
    ValueError
        Conditions out of range, or an unknown kind.

    Examples
    --------
    >>> ionic_strength_shift([1, 0, 2], 0.1).round(2)
    array([ 0.11, -0.11,  0.32])

    References
    ----------
    .. [1] Albert and Serjeant, The Determination of Ionization Constants, 3rd ed., Chapman and Hall 1984,
       chapter 3 (memory).
    """
    if kind not in ("mixed", "concentration"):
        raise ValueError(f"a constant is 'mixed' or 'concentration', not {kind!r}")
    charge = np.asarray(acid_charge, dtype=np.float64)
    return np.asarray(
        (2.0 * charge - (1.0 if kind == "mixed" else 2.0)) * davies(ionic_strength, temperature)
    )


def _warmed(family: str | Iterable[str], temperature: ArrayLike) -> tuple[Floats, Floats]:
    """Factor and shift that bring a constant from 25 C to a temperature: pK(T) = factor pK + shift."""
    check_conditions(temperature, 0.0)
    names = np.asarray(family if isinstance(family, str) else list(family), dtype=object)
    known = family_thermodynamics()
    for name in names.flat:
        if name not in known:
            raise ValueError(f"no family of sites named {name!r}; known are: {', '.join(known)}")
    entropy = np.array([known[name].entropy for name in names.flat]).reshape(names.shape)
    heat_capacity = np.array([known[name].heat_capacity for name in names.flat]).reshape(names.shape)
    t0 = STANDARD_TEMPERATURE + _ZERO_CELSIUS
    t = np.asarray(temperature, dtype=np.float64) + _ZERO_CELSIUS
    free = entropy * (t0 - t) + heat_capacity * (
        t - t0 - t * np.log(t / t0)
    )  # J/mol beside that of pK itself
    return np.asarray(t0 / t), np.asarray(free / (_GAS_LN10 * t))


def at_temperature(
    pk: ArrayLike, family: str | Iterable[str], temperature: ArrayLike, *, interaction: ArrayLike = 0.0
) -> Any:
    r"""An acid constant at another temperature.

    .. math:: R T \ln 10\;\mathrm{pK}(T) = R T_0 \ln 10\;\mathrm{pK} - \Delta S\,(T - T_0)
              + \Delta C_p \left(T - T_0 - T \ln\frac{T}{T_0}\right)

    the integrated van 't Hoff equation with the enthalpy :math:`R T_0 \ln 10\;\mathrm{pK} + T_0 \Delta S`.

    Parameters
    ----------
    pk : array_like
        Constant at 25 C [-].
    family : str or iterable of str
        Family of the site (`families.csv`), one or one for each constant.
    temperature : array_like
        [C], 0 to 60.
    interaction : array_like
        What other charges and statistical factors have added to an intrinsic constant [pK units]. It is kept
        as it is: the energy of two charges goes as 1 / (permittivity x T), which changes by 0.1 % per degree
        in water.

    Returns
    -------
    ndarray or float
        Constant at that temperature [-].

    Raises
    ------
    ValueError
        Temperature out of range, or no such family.

    Examples
    --------
    >>> float(at_temperature(9.25, "aliphatic", 37.0).round(2))  # ammonia, measured 8.89
    8.9

    References
    ----------
    .. [1] Perrin, Aust. J. Chem. 17 (1964) 484 (memory).
    """
    factor, shift = _warmed(family, temperature)
    constant = np.asarray(pk, dtype=np.float64) - np.asarray(interaction)
    return (factor * constant + shift + np.asarray(interaction))[()]


def from_standard(
    pk: ArrayLike,
    *,
    family: str | Iterable[str],
    acid_charge: ArrayLike,
    temperature: ArrayLike = STANDARD_TEMPERATURE,
    ionic_strength: ArrayLike = 0.0,
    kind: Kind = "mixed",
    interaction: ArrayLike = 0.0,
) -> Any:
    """A constant at given conditions from that at 25 C and ionic strength 0.

    Parameters
    ----------
    pk : array_like
        Constant at 25 C and ionic strength 0 [-].
    family, temperature, interaction
        As for `at_temperature`.
    acid_charge, ionic_strength, kind
        As for `ionic_strength_shift`.

    Returns
    -------
    ndarray or float
        Constant at the conditions [-].

    Raises
    ------
    ValueError
        Conditions out of range, no such family, or an unknown kind.

    Examples
    --------
    >>> float(from_standard(10.64, family="primary", acid_charge=1, temperature=37.0, ionic_strength=0.15).round(2))
    10.37
    """
    warmed = at_temperature(pk, family, temperature, interaction=interaction)
    return (warmed + ionic_strength_shift(acid_charge, ionic_strength, temperature=temperature, kind=kind))[
        ()
    ]


def to_standard(
    pk: ArrayLike,
    *,
    family: str | Iterable[str],
    acid_charge: ArrayLike,
    temperature: ArrayLike = STANDARD_TEMPERATURE,
    ionic_strength: ArrayLike = 0.0,
    kind: Kind = "mixed",
    interaction: ArrayLike = 0.0,
) -> Any:
    """The constant at 25 C and ionic strength 0 behind one measured at given conditions: undoes `from_standard`.

    Parameters
    ----------
    pk : array_like
        Measured constant [-].
    family, temperature, interaction
        As for `at_temperature`.
    acid_charge, ionic_strength, kind
        As for `ionic_strength_shift`.

    Returns
    -------
    ndarray or float
        Constant at 25 C and ionic strength 0 [-].

    Raises
    ------
    ValueError
        Conditions out of range, no such family, or an unknown kind.

    Examples
    --------
    >>> to_standard([9.40, 4.62], family=["aliphatic", "carboxylic"], acid_charge=[1, 0],
    ...             temperature=[20.0, 25.0], ionic_strength=[0.0, 0.1]).round(2)
    array([9.25, 4.73])
    """
    measured = np.asarray(pk, dtype=np.float64)
    charged = measured - ionic_strength_shift(acid_charge, ionic_strength, temperature=temperature, kind=kind)
    factor, shift = _warmed(family, temperature)
    return ((charged - np.asarray(interaction) - shift) / factor + np.asarray(interaction))[()]


def sites_at(
    pk: Floats,
    coupling: Floats,
    *,
    is_acid: NDArray[np.bool_],
    families: Iterable[str],
    fixed_charge: int,
    conditions: Conditions,
) -> tuple[Floats, Floats]:
    r"""Intrinsic constants and couplings of the sites of one molecule at given conditions.

    Temperature moves each intrinsic constant by the law of its family; the coupling, the energy of two charges,
    stays (see `at_temperature`). In the Davies equation a microstate of net charge Q = f + sum q_i (f the fixed
    charge) gains the weight A f(I) Q^2, which is the same as

    .. math:: \Delta\mathrm{pK}_i = (\pm 1 + 2f)\,A f(I), \qquad \Delta W_{ij} = -2 A f(I)

    with + for a base and - for an acid. Each macroscopic constant is then shifted by (2z - 1) A f(I), z the
    charge of its acid form: a mixed constant, to be read against the pH of a meter.

    Parameters
    ----------
    pk : ndarray, shape (n,)
        Intrinsic constants at 25 C and ionic strength 0 [-].
    coupling : ndarray, shape (n, n)
        W [pK units], symmetric.
    is_acid : ndarray of bool, shape (n,)
    families : iterable of str, length n
    fixed_charge : int
        Formal charge of the parent, all sites neutral.
    conditions : Conditions

    Returns
    -------
    tuple of ndarray
        The constants and the couplings at the conditions.

    Examples
    --------
    1,2-Diaminoethane at 0.1 mol/L: 9.93 and 6.85 become 10.04 and 7.17.

    >>> pk, w = sites_at(np.array([9.63, 9.63]), np.array([[0.0, 2.48], [2.48, 0.0]]),
    ...                  is_acid=np.array([False, False]), families=["primary", "primary"], fixed_charge=0,
    ...                  conditions=Conditions(ionic_strength=0.1))
    >>> pk.round(2), w.round(2)
    (array([9.74, 9.74]), array([[0.  , 2.27],
           [2.27, 0.  ]]))
    """
    warmed = at_temperature(pk, families, conditions.temperature)
    unit = davies(conditions.ionic_strength, conditions.temperature)
    own = np.where(is_acid, -1.0, 1.0) + 2.0 * fixed_charge
    return warmed + own * unit, coupling - 2.0 * unit * (1.0 - np.eye(len(pk)))


def pkw(temperature: ArrayLike = STANDARD_TEMPERATURE, ionic_strength: ArrayLike = 0.0) -> Any:
    r"""Ion product of water, [OH-] as concentration and H+ as activity.

    .. math:: \mathrm{pK_w} = 14.00 + w(T) - w(298.15) - A f(I), \quad
              w(T) = \frac{4470.99}{T} - 6.0875 + 0.01706\,T

    Parameters
    ----------
    temperature : array_like
        [C], 0 to 60.
    ionic_strength : array_like
        [mol/L], 0 to 0.5.

    Returns
    -------
    ndarray or float
        pKw [-]; 14.00 at 25 C and ionic strength 0, as the trade counts (measured 13.995).

    Raises
    ------
    ValueError
        Conditions out of range.

    Examples
    --------
    >>> pkw([0.0, 25.0, 60.0]).round(2)
    array([14.95, 14.  , 13.02])

    References
    ----------
    .. [1] Harned and Owen, The Physical Chemistry of Electrolytic Solutions, 3rd ed., Reinhold 1958, p. 645
       (memory).
    """
    t = np.asarray(temperature, dtype=np.float64) + _ZERO_CELSIUS
    t0 = STANDARD_TEMPERATURE + _ZERO_CELSIUS
    change = 4470.99 * (1.0 / t - 1.0 / t0) + 0.01706 * (t - t0)
    return (PKW + change - davies(ionic_strength, temperature))[()]
