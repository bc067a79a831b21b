"""Shifts: how far the constant of one site moves from one structure to another, how sure that is, and by which terms.

Two structures that differ by a small edit share most of what the lines and the measured neighbours get wrong, so the
shift is surer than either constant: its variance is that of the difference of two estimates (`kinship`).
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from .explanation import LEAST_SHOWN
from .increments import Estimate
from .kinship import NINETY, Standing, difference_sd, footprint
from .prediction import Lines, Prediction, corrections_of
from .records import equivalent_carriers

if TYPE_CHECKING:
    from .conditioning import LocalModel
    from .equilibrium import Step

OTHERS = "other sites and equal sites"
"""Reason of what the macroscopic constants shift more than the intrinsic ones."""


@dataclass(frozen=True, slots=True, eq=False)
class SiteStep:
    """The macroscopic step at which one nitrogen takes its proton.

    Attributes
    ----------
    prediction : Prediction
        The compound.
    place : int
        The site among its estimates.
    number : int
        1 for the first proton on a base, 2 for the next, ...
    standing : Standing
        Constant, half of its 90 % interval, and what its error has in common with others.
    """

    prediction: Prediction
    place: int
    number: int
    standing: Standing

    @property
    def value(self) -> float:
        """Macroscopic constant [-]."""
        return self.standing.value

    @property
    def half_width(self) -> float:
        """Half of its 90 % interval [pK units]."""
        return self.standing.half_width

    @property
    def estimate(self) -> Estimate:
        """Itemised intrinsic constant of the site."""
        return self.prediction.estimates[self.place]


@dataclass(frozen=True, slots=True)
class Reason:
    """One part of a shift: a term of the increments, what it comes to before and after, and adds [pK units]."""

    name: str
    before: float
    after: float
    value: float


def site_steps(
    predictions: Sequence[Prediction], atoms: Sequence[int], local: LocalModel | None = None
) -> list[SiteStep | None]:
    """The step of one nitrogen in each of many predictions.

    Parameters
    ----------
    predictions : sequence of Prediction
        The compounds.
    atoms : sequence of int
        The nitrogen in each, as the input numbers it.
    local : LocalModel, optional
        That of the predictions.

    Returns
    -------
    list of SiteStep or None
        None where the nitrogen takes no proton, as when it has become that of an amide. Where several
        nitrogens make one unit (an amidine) it is the step of the unit.
    """
    found = [_step_of(prediction, atom) for prediction, atom in zip(predictions, atoms, strict=True)]
    alone = []
    for prediction, one in zip(predictions, found, strict=True):
        if one is not None and prediction.lines is not None:
            lines, place = prediction.lines, one[2]
            alone.append(
                Lines(lines.graph, (lines.sites[place],), (lines.terms[place],), (lines.values[place],))
            )
    corrections = iter(corrections_of(alone, local))
    lines_of = iter(alone)
    steps: list[SiteStep | None] = []
    for prediction, one in zip(predictions, found, strict=True):
        if one is None:
            steps.append(None)
            continue
        number, step, place = one
        lines, (correction,) = next(lines_of), next(corrections)
        own = footprint(lines.graph, lines.sites[0], lines.values[0], correction)
        steps.append(SiteStep(prediction, place, number, Standing(step.value, step.half_width, own)))
    return steps


def _step_of(prediction: Prediction, atom: int) -> tuple[int, Step, int] | None:
    """Number, step and place of the site of an atom."""
    parent, equilibrium = prediction.parent, prediction.equilibrium
    if parent is None or equilibrium is None or atom not in parent.atom_index:
        return None
    wanted = parent.atom_index.index(atom)
    bases = [step for step in equilibrium.steps if step.kind == "base"]
    for number, step in enumerate(bases, start=1):
        for place in equivalent_carriers(prediction, step):
            if prediction.estimates[place].site.atom == wanted:
                return number, step, place
    for number, step in enumerate(bases, start=1):
        site = prediction.estimates[step.carrier].site
        if wanted in site.core and parent.mol.GetAtomWithIdx(site.atom).GetAtomicNum() == 7:
            return number, step, step.carrier
    return None


def shift_half_width(before: SiteStep, after: SiteStep) -> float:
    """Half of the 90 % interval of the shift between two structures [pK units]."""
    return NINETY * difference_sd(before.standing, after.standing)


def reasons(before: SiteStep, after: SiteStep) -> tuple[Reason, ...]:
    """What makes the shift, term by term, the largest first; the parts add up to it.

    Terms of the same name are added. What is left is the work of other sites (their charge, and the number of equal
    ones), and of conditions other than 25 C.

    Examples
    --------
    >>> from basirank.prediction import predict
    >>> amine, ether = site_steps(predict(["C1CCCCN1", "C1COCCN1"], ph=()), [5, 5])
    >>> reasons(amine, ether)[0].name
    'sigma* of ethoxy, 3 out'
    """
    sums = [_by_name(before.estimate), _by_name(after.estimate)]
    found = [
        (name, sums[0].get(name, 0.0), sums[1].get(name, 0.0)) for name in dict.fromkeys([*sums[0], *sums[1]])
    ]
    classes = [step.estimate.site.site_class for step in (before, after)]
    values = [step.estimate.terms[0].value for step in (before, after)]
    if classes[0] != classes[1]:
        found.append((f"class: {classes[0]} to {classes[1]}", values[0], values[1]))
    found.append((OTHERS, before.value - before.estimate.value, after.value - after.estimate.value))
    parts = (Reason(name, old, new, new - old) for name, old, new in found)
    told = [part for part in parts if abs(part.value) >= LEAST_SHOWN]
    return tuple(sorted(told, key=lambda part: (-round(abs(part.value), 6), part.name)))


def _by_name(estimate: Estimate) -> dict[str, float]:
    sums: dict[str, float] = defaultdict(float)
    for term in estimate.terms[1:]:
        sums[term.name] += term.value
    return sums
