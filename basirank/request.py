"""What a user may ask for beside the pH: conditions other than 25 C and ionic strength 0, and further columns.

Nothing here needs numpy, so that the command line can check a call before anything heavy is loaded.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from .conditioning import LocalModel

STANDARD_TEMPERATURE = 25.0
"""Temperature of the constants of this package [C]."""
TEMPERATURE_RANGE = (0.0, 60.0)
"""Temperatures that may be asked for [C]: those of the laws of water in `conditions`."""
IONIC_STRENGTH_RANGE = (0.0, 0.5)
"""Ionic strengths that may be asked for [mol/L]: where the Davies equation holds."""


def within(name: str, value: object, limits: tuple[float, float], unit: str) -> float:
    """A number that lies between limits.

    Raises
    ------
    ValueError
        Not a number, or outside.

    Examples
    --------
    >>> within("temperature", "70", TEMPERATURE_RANGE, "C")
    Traceback (most recent call last):
    ValueError: temperature must lie between 0 and 60 C, not 70
    """
    try:
        number = math.nan if isinstance(value, bool) else float(value)  # type: ignore[arg-type]
    except (TypeError, ValueError):
        number = math.nan
    if math.isnan(number):
        raise ValueError(f"{name} must be a number, not {value!r}")
    if not limits[0] <= number <= limits[1]:
        raise ValueError(f"{name} must lie between {limits[0]:g} and {limits[1]:g} {unit}, not {number:g}")
    return number + 0.0


@dataclass(frozen=True, slots=True)
class Conditions:
    """Temperature [C], 0 to 60, and ionic strength [mol/L], 0 to 0.5.

    Raises
    ------
    ValueError
        Outside these ranges, or not a number.

    Examples
    --------
    >>> str(Conditions(37.0, 0.15))
    '37 C, ionic strength 0.15 mol/L'
    """

    temperature: float = STANDARD_TEMPERATURE
    ionic_strength: float = 0.0

    def __post_init__(self) -> None:
        set_field = object.__setattr__
        set_field(self, "temperature", within("temperature", self.temperature, TEMPERATURE_RANGE, "C"))
        strength = within("ionic strength", self.ionic_strength, IONIC_STRENGTH_RANGE, "mol/L")
        set_field(self, "ionic_strength", strength)

    def __str__(self) -> str:
        return f"{self.temperature:g} C, ionic strength {self.ionic_strength:g} mol/L"


STANDARD = Conditions()
"""Where the constants of this package hold: 25 C, ionic strength 0."""


@dataclass(frozen=True, slots=True)
class Request:
    """Conditions of the constants and states, and the columns that are there on request.

    Attributes
    ----------
    conditions : Conditions
    forms : bool
        Shares of the neutral form and of the zwitterion at each pH.
    pkb : bool
        pKb beside each pKaH.
    local : LocalModel or None
        Corrections conditioned on a user's own measured constants (`conditioning`).
    """

    conditions: Conditions = STANDARD
    forms: bool = False
    pkb: bool = False
    local: LocalModel | None = None


PLAIN = Request()
"""Nothing beside the fixed columns, at 25 C and ionic strength 0."""
