"""Text and plain data of a work-up, as the terminal, a table and a JSON file show them."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from .explanation import CAUTION
from .request import STANDARD
from .writers import aligned, printable

if TYPE_CHECKING:
    from .extraction import Compound, Reach, Setting, Workup
    from .mixtures import Place, Plan

WIDTH = 110
NAME_WIDTH = 28
LIMITS = (
    "Margins (in brackets) cover the 90 % intervals of all constants of a compound at once; log P comes on top: an "
    "estimate is good to about 0.7 (one standard deviation, Wildman and Crippen 1999) and holds for octanol, not "
    "for your solvent. Zwitterions and multiply charged ions count as staying in water, ion pairs {0:g} (cation) "
    "and {1:g} (anion) log P units below the neutral form. Not considered: emulsions, salting out, buffers that run "
    "short, solubility of the salt, rate. Hazards are rules of thumb for a short wash at room temperature."
)


def caution() -> list[str]:
    """The usual caution, as lines."""
    return CAUTION.splitlines()


def ph_ranges(ranges: Sequence[tuple[float, float]], setting: Setting) -> str:
    """pH ranges in words, rounded inwards to one decimal.

    Examples
    --------
    >>> from basirank.extraction import Setting
    >>> ph_ranges([(1.0, 2.26), (9.11, 13.0)], Setting()), ph_ranges([(5.01, 6.2)], Setting())
    ('<= 2.2 or >= 9.2', '5.1 to 6.2')
    """
    said = []
    for low, high in ranges:
        first, last = -int(-round(low * 100) // 10) / 10, int(round(high * 100) // 10) / 10
        if low <= setting.lowest and high >= setting.highest:
            said.append("any")
        elif low <= setting.lowest:
            said.append(f"<= {last:.1f}")
        elif high >= setting.highest:
            said.append(f">= {first:.1f}")
        elif first <= last:
            said.append(f"{first:.1f} to {last:.1f}")
        else:  # narrower than a tenth
            said.append(f"{(low + high) / 2:.2f}")
    return " or ".join(said)


def _reach_text(reach: Reach | None, setting: Setting) -> str:
    if reach is None:
        return ""
    if reach.ranges:
        nominal, sure = ph_ranges(reach.ranges, setting), ph_ranges(reach.sure, setting)
        return nominal if sure == nominal else f"{nominal}  ({sure or 'not sure of any'})"
    said = f"no: at best {percent(reach.best)} at pH {reach.best_ph:.1f}"
    return said + (f", {reach.portions} portions needed" if reach.portions else "")


def percent(share: float) -> str:
    """A share in percent, never 100 where something is missing.

    Examples
    --------
    >>> percent(0.5), percent(0.98765), percent(0.99999), percent(1.0)
    ('50 %', '98.8 %', '> 99.9 %', '100 %')
    """
    if share >= 1.0:
        return "100 %"
    if share > 0.999:
        return "> 99.9 %"
    return f"{100 * share:.1f} %" if share >= 0.9 or share < 0.1 else f"{100 * share:.0f} %"


def _constants(one: Compound) -> str:
    return ", ".join(f"{name} {value:.2f} ±{half:.2f}" for name, value, half in one.constants)


def label(one: Compound) -> str:
    """What a compound is called."""
    return one.name or one.structure or "a structure"


def workup_text(done: Workup) -> str:
    """The whole as the terminal shows it."""
    setting = done.setting
    washed = f"Organic layer {setting.organic:g} mL, {setting.washes} x {setting.aqueous:g} mL of water"
    lines = [
        f"{washed}; at least {100 * setting.aim:g} % to go over; pH {setting.lowest:g} to {setting.highest:g}"
    ]
    if done.conditions != STANDARD:
        lines.append(f"At {done.conditions}.")
    sound = [one for one in done.compounds if one.partition is not None]
    rows = [["compound", "kind", "log P", "into water at pH", "back at pH", "constants"]]
    for one in sound:
        assert one.partition is not None
        log_p = one.partition.log_p
        rows.append(
            [
                printable(label(one), NAME_WIDTH),
                one.kind,
                "" if log_p is None else f"{log_p:.2f}{'*' if one.estimated else ' '}",
                _reach_text(one.into_water, setting),
                _reach_text(one.back, setting),
                _constants(one),
            ]
        )
    lines += ["", *aligned(rows, right=[2])]
    if any(one.estimated for one in sound):
        lines.append("* estimated from atom contributions (Wildman and Crippen 1999)")
    for one in done.compounds:
        if one.partition is None:
            lines.append(f"{printable(label(one), NAME_WIDTH)}: refused: {one.message}")
    lines += _remarks(sound)
    if done.plan is not None:
        lines += ["", *_plan_text(done.plan, done.compounds)]
    note = LIMITS.format(*setting.ion_pairs)
    return "\n".join([*lines, "", *textwrap.wrap(note, WIDTH), *caution()])


def _remarks(sound: Sequence[Compound]) -> list[str]:
    """What there is to say of each compound, a paragraph for each."""
    lines = []
    for one in sound:
        said = [*own_remarks(one.message), *one.cautions]
        said += map(str, one.hazards)
        if said:
            text = f"{printable(label(one), NAME_WIDTH)}: {'; '.join(said)}"
            lines += textwrap.wrap(text, WIDTH, subsequent_indent="    ")
    return ["", *lines] if lines else []


def own_remarks(message: str) -> list[str]:
    """The remarks that are about the compound, not about the call or what stands beside them anyway."""
    return [
        part for part in message.split("; ") if part and not part.startswith(("at ", "no nitrogen takes"))
    ]


def _plan_text(plan: Plan, compounds: Sequence[Compound]) -> list[str]:
    steps = len(plan.washes) + sum(map(len, plan.returns))
    lines = [
        f"Separation in {steps} step{'' if steps == 1 else 's'}"
        if steps
        else "No wash separates anything: all stay together in the organic layer"
    ]
    if steps:
        lines[0] += f": {plan.separated} of {len(plan.places)} compounds separated"
        lines[0] += f"; worst recovery x purity {plan.worst:.2f}"
    rows = []
    for wash, (ph, returns) in enumerate(zip(plan.washes, plan.returns, strict=True), start=1):
        rows.append([f"{wash}.", f"wash with water of pH {ph:g}", "", "", ""])
        found = [one for one in plan.places if one.wash == wash]
        for back in returns:
            rows += _placed(f"  its water, extracted at pH {back:g}", found, back, compounds)
        rows += _placed("  what stays in its water", found, None, compounds)
    left = [one for one in plan.places if one.wash is None]
    rows.append([f"{len(plan.washes) + 1}.", "the organic layer that is left", "", "", ""])
    rows += _placed("", left, None, compounds)
    lines += aligned(rows, right=[3])
    poor = [one for one in plan.places if one.why]
    if poor:
        lines += ["", "Not separated by pH alone (recovery or purity under about nine tenths):"]
        for one in poor:
            text = f"  {printable(label(compounds[one.compound]), NAME_WIDTH)}: {one.why}"
            lines += textwrap.wrap(text, WIDTH, subsequent_indent="    ")
    for one in plan.places:
        met = [*plan.washes[: one.wash], *(() if one.back_ph is None else (one.back_ph,))]
        for group in compounds[one.compound].hazards:
            if reacts := [f"{ph:g}" for ph in met if group.at(ph)]:
                name = printable(label(compounds[one.compound]), NAME_WIDTH)
                text = f"Mind: {name} meets pH {' and '.join(reacts)}; {group}"
                lines += textwrap.wrap(text, WIDTH, initial_indent="  ", subsequent_indent="    ")
    return lines


def _placed(
    where: str, found: Sequence[Place], back: float | None, compounds: Sequence[Compound]
) -> list[list[str]]:
    rows = []
    for one in found:
        if one.back_ph == back:
            sure = f"({percent(one.least_recovery)} with margin)"
            share = f"recovery {percent(one.recovery)} {sure}"
            rows.append(
                [
                    "",
                    where,
                    printable(label(compounds[one.compound]), NAME_WIDTH),
                    share,
                    f"purity {percent(one.purity)}",
                ]
            )
            where = ""
    return rows


COLUMNS = (
    "status", "message", "kind", "log_p", "log_p_source", "into_water_ph", "into_water_ph_sure", "into_water_best",
    "into_water_portions", "back_ph", "back_ph_sure", "back_best", "back_portions", "hazards", "wash", "wash_ph",
    "return_ph", "recovery", "least_recovery", "purity", "not_separated",
)  # fmt: skip
"""Columns of the table, after the input's own."""


def workup_cells(done: Workup) -> list[list[str]]:
    """A row of text for each compound, in the order of `COLUMNS`."""
    places = {} if done.plan is None else {one.compound: one for one in done.plan.places}
    rows = []
    for n, one in enumerate(done.compounds):
        if one.partition is None:
            rows.append(["refused", one.message, *[""] * (len(COLUMNS) - 2)])
            continue
        log_p = one.partition.log_p
        row = ["ok", "; ".join([*own_remarks(one.message), *one.cautions]), one.kind]
        row += ["", ""] if log_p is None else [f"{log_p:.2f}", "estimated" if one.estimated else "given"]
        for reach in (one.into_water, one.back):
            assert reach is not None
            row += [ph_ranges(reach.ranges, done.setting), ph_ranges(reach.sure, done.setting)]
            row += [f"{reach.best:.4f}", "" if reach.portions is None else str(reach.portions)]
        row.append("; ".join(map(str, one.hazards)))
        row += _place_cells(places.get(n))
        rows.append(row)
    return rows


def _place_cells(place: Place | None) -> list[str]:
    if place is None:
        return [""] * 7
    return [
        "" if place.wash is None else str(place.wash),
        "" if place.ph is None else f"{place.ph:g}",
        "" if place.back_ph is None else f"{place.back_ph:g}",
        f"{place.recovery:.4f}",
        f"{place.least_recovery:.4f}",
        f"{place.purity:.4f}",
        place.why,
    ]


def workup_dict(done: Workup) -> dict[str, Any]:
    """The whole as plain data for JSON."""
    setting = done.setting
    compounds = []
    for one in done.compounds:
        told: dict[str, Any] = {"name": one.name, "structure": one.structure, "message": one.message}
        told["status"] = "refused" if one.partition is None else "ok"
        if one.partition is not None:
            told |= {
                "kind": one.kind,
                "constants": [
                    {"name": name, "value": round(value, 2), "half_width": round(half, 2)}
                    for name, value, half in one.constants
                ],
                "log_p": None if one.partition.log_p is None else round(one.partition.log_p, 2),
                "log_p_estimated": one.estimated,
                "into_water": _reach_dict(one.into_water),
                "back": _reach_dict(one.back),
                "hazards": [
                    {"group": group.name, "below": group.below, "above": group.above, "what": group.what,
                     "source": group.source}
                    for group in one.hazards
                ],
                "cautions": list(one.cautions),
                "amount": one.amount,
            }  # fmt: skip
        compounds.append(told)
    return {
        "setting": {
            "aim": setting.aim,
            "aqueous_ml": setting.aqueous,
            "organic_ml": setting.organic,
            "washes": setting.washes,
            "ph_limits": [setting.lowest, setting.highest],
            "ion_pairs": list(setting.ion_pairs),
            "temperature_c": done.conditions.temperature,
            "ionic_strength": done.conditions.ionic_strength,
        },
        "compounds": compounds,
        "plan": None if done.plan is None else _plan_dict(done.plan, done.compounds),
        "note": " ".join([LIMITS.format(*setting.ion_pairs), *caution()]),
    }


def _reach_dict(reach: Reach | None) -> dict[str, Any] | None:
    if reach is None:
        return None
    return {
        "ph_ranges": [list(one) for one in reach.ranges],
        "ph_ranges_sure": [list(one) for one in reach.sure],
        "ph": reach.ph,
        "best": round(reach.best, 4),
        "best_ph": reach.best_ph,
        "portions": reach.portions,
    }


def _plan_dict(plan: Plan, compounds: Sequence[Compound]) -> dict[str, Any]:
    return {
        "washes": [
            {"ph": ph, "return_ph": list(back)} for ph, back in zip(plan.washes, plan.returns, strict=True)
        ],
        "separated": plan.separated,
        "worst_recovery_x_purity": round(plan.worst, 4),
        "compounds": [
            {
                "name": label(compounds[one.compound]),
                "wash": one.wash,
                "wash_ph": one.ph,
                "return_ph": one.back_ph,
                "recovery": round(one.recovery, 4),
                "least_recovery": round(one.least_recovery, 4),
                "purity": round(one.purity, 4),
                "not_separated": one.why,
            }
            for one in plan.places
        ],
    }
