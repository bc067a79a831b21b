"""Text and plain data of a choice of counter-ions, as the terminal, a table and a JSON file show them."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from .bench_text import WIDTH, caution, own_remarks
from .request import STANDARD
from .salt_selection import COCRYSTAL, HIGH_PH_MAX, LOW_PH_MAX, RULE, SALT
from .solubility import ph_of_maximum
from .writers import aligned, printable

if TYPE_CHECKING:
    from .salt_selection import Candidate, SaltSelection, Side

NAME_WIDTH = 72
MOST_TOLD = 1_000_000  # ratio of solubilities beyond which the number means nothing
USUAL_SALTS = (
    1.0,
    10.0,
    100.0,
)  # solubilities of a salt for which the pH of maximum solubility is told [mg/mL]
NOTE = (
    "dpKa: constant of the conjugate acid of the base less that of the acid, for the step from no net charge to the "
    "ion of the salt; the interval is that of the compound's constant. A salt is commonly expected from 2 to 3 on. "
    "salt%: share of salts among crystals of both, 17 dpKa + 28 from -1 to 4, below only cocrystals, above only "
    "salts (Cruz-Cabeza 2012); ? where the interval crosses one of these ends. 1:2 and 2:1: difference for a second "
    "counter-ion, and for the second proton of the counter-ion, where at least 2. Constants of counter-ions are those "
    "of 25 C in water; in another solvent, and in the solid, the order may change. Nothing is said of hydrates, "
    "polymorphs, uptake of water by the compound, or toxicity."
)


def percent_of_salts(one: Candidate) -> str:
    """Share of salts in percent with its interval, bounded beyond the ends of the line."""

    def bounded(delta: float, share: float) -> str:
        return f"{'>=' if delta >= SALT else '<=' if delta <= COCRYSTAL else ''}{100 * share:.0f}"

    middle = bounded(one.delta, one.likelihood)
    ends = [bounded(one.low, one.least), bounded(one.high, one.most)]
    return middle if ends == [middle, middle] else f"{middle} ({ends[0]} to {ends[1]})"


def selections_text(found: Sequence[SaltSelection], top: int | None = None, family: str = "") -> str:
    """Choices for one or several compounds as the terminal shows them.

    Parameters
    ----------
    found : sequence of SaltSelection
    top : int, optional
        Counter-ions shown of each side; all when not given.
    family : str
        Only those whose class holds this text.
    """
    parts = []
    for one in found:
        name = printable(one.name or one.structure or "a structure", NAME_WIDTH)
        lines = [name]
        if one.steps is None:
            lines.append(f"refused: {one.message}")
        elif not one.sides:
            lines.append(no_salt(one))
        if one.steps is not None and (remarks := own_remarks(one.message)):
            lines += textwrap.wrap("; ".join(remarks), WIDTH)
        if one.conditions != STANDARD and one.steps is not None:
            lines.append(f"At {one.conditions}.")
        for side in one.sides:
            lines += ["", *_side_text(side, top, family)]
        lines += _dissolution_text(one)
        parts.append("\n".join(lines))
    rule = f"\n\n{'-' * 72}\n\n"
    return "\n".join([rule.join(parts), "", *textwrap.wrap(NOTE, WIDTH), *caution()])


def no_salt(one: SaltSelection) -> str:
    """Why a compound has no side."""
    assert one.steps is not None
    if one.steps.ladder.bare_charge > 0:
        return "a permanent charge: its counter-ion is exchanged, no proton makes the salt"
    return "no salt: it neither takes a proton at pH 0 or above nor gives one at pH 12 or below"


def chosen(side: Side, top: int | None = None, family: str = "") -> list[Candidate]:
    """The counter-ions to be shown."""
    fitting = [one for one in side.candidates if family.casefold() in one.ion.family.casefold()]
    return fitting[:top]


def _side_text(side: Side, top: int | None, family: str) -> list[str]:
    constant = f"{side.constant:.2f} ±{side.half_width:.2f}"
    if side.charge > 0:
        head = f"As a base, from no net charge to +1: {constant}"
    else:
        head = f"As an acid, from no net charge to -1: {constant}"
    if side.second is not None:
        head += f"; the next step: {side.second:.2f}"
    rows = [
        [
            "salt",
            "counter-ion",
            "class",
            "its pK",
            "dpKa",
            "90 %",
            "salt%",
            "rule",
            "expected",
            "1:2",
            "2:1",
        ]
    ]
    shown = chosen(side, top, family)
    for one in shown:
        rows.append(
            [
                one.ion.salt,
                one.ion.name,
                one.ion.family,
                f"{one.ion.constants[0]:.2f}",
                f"{one.delta:.1f}",
                f"{one.low:.1f} to {one.high:.1f}",
                percent_of_salts(one),
                one.rule,
                one.verdict + ("" if one.sure else "?"),
                _further(one.second_ion),
                _further(one.second_proton),
            ]
        )
    lines = [head, *aligned(rows, right=[3, 4, 5, 9, 10])]
    if not shown:
        lines = [head, "no counter-ion of this class"]
    minded: dict[str, list[str]] = {}
    for one in shown:
        if one.ion.caution:
            minded.setdefault(one.ion.caution, []).append(one.ion.salt)
    for text, salts in minded.items():
        lines += textwrap.wrap(
            f"{', '.join(salts)}: {text}", WIDTH, initial_indent="  ", subsequent_indent="    "
        )
    return lines


def _further(delta: float | None) -> str:
    return f"{delta:.1f}" if delta is not None and delta >= RULE[0] else ""


def _dissolution_text(one: SaltSelection) -> list[str]:
    solution = one.dissolution
    if solution is None:
        return []
    form = "base" if solution.charge > 0 else "acid"
    values = solution.at(one.media)
    lines = [""]
    if one.known:
        told = ", ".join(
            f"{value * solution.molar_mass:.3g} mg/mL at pH {ph:g}"
            for ph, value in zip(one.media, values, strict=True)
        )
        lines += textwrap.wrap(f"Solubility: {told}", WIDTH)
    else:
        told = ", ".join(
            f"{f'{value:.3g}' if value < MOST_TOLD else f'over {MOST_TOLD:,}'} at pH {ph:g}"
            for ph, value in zip(one.media, values, strict=True)
        )
        text = f"Solubility of the free form over that without net charge: {told}"
        lines += textwrap.wrap(f"{text} (as far as it is the solid; --solubility gives more)", WIDTH)
        return lines
    if solution.ph_max is not None:
        value, half = solution.ph_max
        lines.append(f"pH of maximum solubility: {value:.2f} ±{half:.2f}; {disproportionation(one)}")
        return lines
    step = one.sides[0]
    limits = [
        ph_of_maximum(step.constant, solution.intrinsic, salt / solution.molar_mass, solution.charge)
        for salt in USUAL_SALTS
    ]
    told = ", ".join(f"{ph:.1f} for {salt:g}" for ph, salt in zip(limits, USUAL_SALTS, strict=True))
    lines += textwrap.wrap(
        f"pH of maximum solubility of a salt of the {form}, by its solubility in mg/mL of free form: {told}",
        WIDTH,
    )
    return lines


def disproportionation(one: SaltSelection) -> str:
    """What the pH of maximum solubility means for the salt."""
    assert one.dissolution is not None and one.dissolution.ph_max is not None
    value, half = one.dissolution.ph_max
    if one.dissolution.charge > 0:
        if value - half < LOW_PH_MAX:
            which = "is" if value < LOW_PH_MAX else "may be"
            return f"above it the free base comes out, and it {which} low: disproportionation is a risk"
        return "below it the salt is the stable solid, above it the free base"
    if value + half > HIGH_PH_MAX:
        which = "is" if value > HIGH_PH_MAX else "may be"
        return f"below it the free acid comes out, and it {which} high: disproportionation is a risk"
    return "above it the salt is the stable solid, below it the free acid"


COLUMNS = (
    "status", "message", "side", "step_constant", "step_low", "step_high", "salt", "counter_ion", "class",
    "counter_ion_pk", "delta_pka", "delta_low", "delta_high", "salt_share", "salt_share_low", "salt_share_high",
    "rule_of_2_to_3", "expected", "expected_sure", "delta_second_ion", "delta_second_proton", "caution", "source",
    "ph_max", "ph_max_low", "ph_max_high",
)  # fmt: skip
"""Columns of the table, after structure and name."""


def selection_cells(one: SaltSelection, top: int | None = None, family: str = "") -> list[list[str]]:
    """Rows of text in the order of `COLUMNS`: one for each counter-ion, or one that says why there is none."""
    empty = len(COLUMNS) - 2
    if one.steps is None:
        return [["refused", one.message, *[""] * empty]]
    if not one.sides:
        return [["no_salt", no_salt(one), *[""] * empty]]
    rows = []
    for side in one.sides:
        limit = None
        if one.dissolution is not None and one.dissolution.charge == side.charge:
            limit = one.dissolution.ph_max
        ends = [""] * 3 if limit is None else [f"{limit[0] + k * limit[1]:.2f}" for k in (0, -1, 1)]
        step = [side.constant, side.constant - side.half_width, side.constant + side.half_width]
        for candidate in chosen(side, top, family):
            ion = candidate.ion
            numbers = [ion.constants[0], candidate.delta, candidate.low, candidate.high]
            shares = [candidate.likelihood, candidate.least, candidate.most]
            further = [candidate.second_ion, candidate.second_proton]
            rows.append(
                [
                    "ok",
                    "; ".join(own_remarks(one.message)),
                    "base" if side.charge > 0 else "acid",
                    *(f"{value:.2f}" for value in step),
                    ion.salt,
                    ion.name,
                    ion.family,
                    *(f"{value:.2f}" for value in numbers),
                    *(f"{value:.4f}" for value in shares),
                    candidate.rule,
                    candidate.verdict,
                    "yes" if candidate.sure else "no",
                    *("" if value is None else f"{value:.2f}" for value in further),
                    ion.caution,
                    ion.source,
                    *ends,
                ]
            )
    return rows


def selection_dict(one: SaltSelection, top: int | None = None, family: str = "") -> dict[str, Any]:
    """A choice as plain data for JSON."""
    told: dict[str, Any] = {
        "name": one.name,
        "structure": one.structure,
        "status": "refused" if one.steps is None else "ok" if one.sides else "no_salt",
        "message": one.message if one.sides or one.steps is None else no_salt(one),
        "temperature_c": one.conditions.temperature,
        "ionic_strength": one.conditions.ionic_strength,
        "sides": [
            {
                "side": "base" if side.charge > 0 else "acid",
                "constant": round(side.constant, 2),
                "half_width": round(side.half_width, 2),
                "next_constant": None if side.second is None else round(side.second, 2),
                "counter_ions": [_candidate_dict(candidate) for candidate in chosen(side, top, family)],
            }
            for side in one.sides
        ],
    }
    if one.dissolution is not None:
        values = one.dissolution.at(one.media)
        told["solubility"] = {
            "unit": "mol/L" if one.known else "relative to the form without net charge",
            "at_ph": [[ph, float(f"{value:.4g}")] for ph, value in zip(one.media, values, strict=True)],
        }
        limit = one.dissolution.ph_max
        if limit is not None:
            told["ph_max"] = {
                "value": round(limit[0], 2),
                "half_width": round(limit[1], 2),
                "remark": disproportionation(one),
            }
    return told


def _candidate_dict(one: Candidate) -> dict[str, Any]:
    return {
        "salt": one.ion.salt,
        "counter_ion": one.ion.name,
        "class": one.ion.family,
        "constants": list(one.ion.constants),
        "delta_pka": round(one.delta, 2),
        "delta_interval": [round(one.low, 2), round(one.high, 2)],
        "salt_share": round(one.likelihood, 4),
        "salt_share_interval": [round(one.least, 4), round(one.most, 4)],
        "rule_of_2_to_3": one.rule,
        "expected": one.verdict,
        "expected_sure": one.sure,
        "delta_second_ion": None if one.second_ion is None else round(one.second_ion, 2),
        "delta_second_proton": None if one.second_proton is None else round(one.second_proton, 2),
        "caution": one.ion.caution,
        "source": one.ion.source,
    }
