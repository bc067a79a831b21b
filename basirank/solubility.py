r"""Solubility of a base, an acid or an ampholyte against pH, and the pH of maximum solubility of its salt.

While the free form is the solid, its molecules without net charge are saturated, and all charged forms come on top:
:math:`S = S_0 / f_0`. Where the salt is the solid, the product of its ions is constant. The two lines meet at the
pH of maximum solubility; below it (for a base) the salt is the stable solid, above it the free base.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .partition import Steps

Floats = NDArray[np.float64]

SOLUBILITY_RANGE = (1e-12, 1e2)  # mol/L
_AMOUNT = re.compile(r"\s*([0-9.eE+-]+)\s*([^\s\d]\S*)?\s*")
_MOLAR = {
    "mol/l": 1.0,
    "m": 1.0,
    "mmol/l": 1e-3,
    "mm": 1e-3,
    "umol/l": 1e-6,
    "um": 1e-6,
    "µmol/l": 1e-6,
    "µm": 1e-6,
}
_MASS = {
    "g/l": 1.0,
    "mg/ml": 1.0,
    "g/ml": 1e3,
    "mg/l": 1e-3,
    "ug/ml": 1e-3,
    "µg/ml": 1e-3,
    "ng/ml": 1e-6,
}  # g/L


def concentration(text: str | float, molar_mass: float, name: str = "solubility") -> float:
    """A solubility in mol/L from a number and its unit; mg/mL without one.

    Parameters
    ----------
    text : str or float
        Such as `0.05`, `0.05 mg/mL`, `50 ug/mL`, `2e-4 mol/L` or `0.2 mM`; masses are those of the free form.
    molar_mass : float
        Of the free form [g/mol].
    name : str
        What it is, for the message.

    Raises
    ------
    ValueError
        No number, an unknown unit, or not between 1e-12 and 100 mol/L.

    Examples
    --------
    >>> concentration("0.05 mg/mL", 250.0), concentration("0.2 mM", 250.0)
    (0.0002, 0.0002)
    """
    match = _AMOUNT.fullmatch(str(text))
    unit = (match.group(2) or "mg/mL").replace("\N{GREEK SMALL LETTER MU}", "µ").lower() if match else ""
    try:
        number = float(match.group(1)) if match else math.nan
    except ValueError:
        number = math.nan
    if math.isnan(number):
        raise ValueError(f"{name} must be a number with a unit such as mg/mL or mol/L, not {text!r}")
    if unit in _MOLAR:
        value = number * _MOLAR[unit]
    elif unit in _MASS:
        value = number * _MASS[unit] / molar_mass
    else:
        raise ValueError(f"{name}: unknown unit {unit!r}; known are mg/mL, ug/mL, g/L, mol/L, mM, uM")
    if not SOLUBILITY_RANGE[0] <= value <= SOLUBILITY_RANGE[1]:
        raise ValueError(f"{name} must lie between 1e-12 and 100 mol/L, not {value:.3g}")
    return value


def ph_of_maximum(constant: float, intrinsic: float, salt: float, charge: int) -> float:
    r"""pH of maximum solubility.

    .. math:: \mathrm{pH_{max}} = \mathrm{pK_{aH}} + \log_{10} \frac{S_0}{\sqrt{K_{sp}}}

    for the salt of a base, with the opposite sign of the logarithm for that of an acid.

    Parameters
    ----------
    constant : float
        Of the step between no net charge and the ion of the salt [-].
    intrinsic : float
        Solubility of the form without net charge [mol/L].
    salt : float
        Solubility of the salt, all of it ion: the square root of the solubility product of a 1:1 salt [mol/L].
    charge : {1, -1}
        Of the compound in its salt.

    Returns
    -------
    float
        [-].

    Examples
    --------
    >>> round(ph_of_maximum(9.0, 1e-5, 0.1, 1), 2), round(ph_of_maximum(4.5, 1e-4, 0.1, -1), 2)
    (5.0, 7.5)

    References
    ----------
    .. [1] Bogardus and Blackwood, J. Pharm. Sci. 68 (1979) 188 (memory).
    .. [2] Chowhan, J. Pharm. Sci. 67 (1978) 1257 (memory).
    """
    return constant + charge * math.log10(intrinsic / salt)


@dataclass(frozen=True, slots=True, eq=False)
class Dissolution:
    """Solubility of one compound against pH.

    Attributes
    ----------
    steps : Steps
    intrinsic : float
        Solubility of the form without net charge; 1 for solubilities relative to it [mol/L].
    salt : float or None
        Solubility of its 1:1 salt, all of it ion [mol/L].
    charge : {1, -1}
        Of the compound in its salt.
    molar_mass : float
        Of the free form [g/mol].
    water : float
        pKw at the conditions [-].

    Examples
    --------
    A base of pKaH 9 and 0.1 mmol/L: two units below pKaH a hundred times as much dissolves, and a bit.

    >>> base = Dissolution(Steps.exact([9.0], 0), 1e-4, None, 1, 200.0)
    >>> base.at([7.0]).round(5)
    array([0.0101])
    """

    steps: Steps
    intrinsic: float
    salt: float | None
    charge: int
    molar_mass: float
    water: float = 14.0

    def at(self, ph: ArrayLike) -> Floats:
        r"""Solubility at each pH [mol/L]: the smaller of those of the free form and of the salt.

        .. math:: S = \min\left(\frac{S_0}{f_0}, \frac{b}{f_1}\right), \quad
                  b\,(q\,b + [\mathrm{H^+}] - [\mathrm{OH^-}]) = S_s^2

        where b is the concentration of the singly charged ion and q the mean charge of the compound for each of it:
        the pH is set with the acid (or base) of the salt, whose ion holds the salt back (common ion).

        References
        ----------
        .. [1] Streng, Hsi, Helms and Tan, J. Pharm. Sci. 73 (1984) 1679 (memory).
        """
        at = np.asarray(ph, dtype=np.float64)
        shares = self.steps.ladder.shares(at)
        netless = -self.steps.ladder.bare_charge
        ion = np.maximum(shares[:, netless + self.charge], 1e-300)
        with np.errstate(divide="ignore", over="ignore"):
            free = self.intrinsic / shares[:, netless]
        if self.salt is None:
            return np.asarray(free)
        charge = self.charge * self.steps.ladder.charge(at) / ion
        excess = self.charge * (10.0**-at - 10.0 ** (at - self.water))
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            root = np.sqrt(excess**2 + 4.0 * charge * self.salt**2)
            # of the two forms of the root the one in which nothing cancels
            held = np.where(
                excess > 0.0, 2.0 * self.salt**2 / (root + excess), (root - excess) / (2.0 * charge)
            )
        return np.asarray(np.where(charge > 0.0, np.minimum(free, held / ion), free))

    @property
    def ph_max(self) -> tuple[float, float] | None:
        """pH of maximum solubility and half of its 90 % interval [-]; None without a salt."""
        step = self.steps.step(1 if self.charge > 0 else 0)
        if self.salt is None or step is None:
            return None
        return ph_of_maximum(step[0], self.intrinsic, self.salt, self.charge), step[1]
