"""The text of an explanation, line by line, as the terminal shows it."""

from __future__ import annotations

import textwrap
from itertools import zip_longest
from typing import TYPE_CHECKING

from .explanation import BUFFER_CONCENTRATION, LEAST_SHOWN
from .records import shown
from .request import STANDARD, Conditions

if TYPE_CHECKING:
    from .evidence import Analogue
    from .explanation import Explanation, SiteLine, TermLine

TEXT_WIDTH = 110
NAME_WIDTH = 56
LINES_LISTED = 24  # protomers, and microscopic constants, that are shown; the rest is counted


def lines_of(told: Explanation) -> list[str]:
    """The whole as lines of text, no line wider than its SMILES or `TEXT_WIDTH`."""
    lines = [f"Structure  {told.structure}"]
    if told.status == "refused":
        return [*lines, f"Refused    {told.message}"]
    if told.parent_smiles != told.structure:
        lines.append(f"Parent     {told.parent_smiles}")
    if told.message:
        lines += textwrap.wrap(f"Note       {told.message}", TEXT_WIDTH, subsequent_indent=" " * 11)
    for site in told.sites:
        lines += ["", *_site_text(site, told.conditions)]
    if told.interactions:
        lines += [
            "",
            "Interaction W between sites, pK units (like charges repel by W, unlike ones attract)",
        ]
        lines += [f"  site {i} - site {j}  {w:+7.2f}" for i, j, w in told.interactions]
    lines += _steps_text(told)
    lines += _protomers_text(told)
    if told.approximate:
        lines.append(
            "  Too many sites to count every microstate: these constants and states are approximate."
        )
    for state in told.states:
        lines += [
            "",
            f"At pH {state.ph:g}",
            f"  mean net charge      {state.net_charge:+z.2f}",
            f"  base protonated      {100 * state.protonated_fraction:.1f} %",
            f"  dominant form        {state.dominant_form}  ({100 * state.dominant_fraction:.1f} %)",
        ]
    return lines + _buffers_text(told)


def _site_text(site: SiteLine, conditions: Conditions) -> list[str]:
    """Heading of a site, its terms with their sources beside them, and their sum."""
    total = f"intrinsic {'pKaH' if site.kind == 'base' else 'pKa'}, other sites neutral"
    told = [term for n, term in enumerate(site.terms) if n == 0 or abs(term.value) >= LEAST_SHOWN]
    names = [_term_name(term) for term in told]
    width = min(max(map(len, (*names, total))), NAME_WIDTH)
    lines = [f"Site {site.number}: {site.site_class}, {site.kind}, on {site.symbol} atom {site.atom}"]
    for name, term in zip(names, told, strict=True):
        left = textwrap.wrap(name, width)
        right = textwrap.wrap(term.source, TEXT_WIDTH - width - 13) or [""]
        for n, (text, source) in enumerate(zip_longest(left, right, fillvalue="")):
            value = f"{shown(term.value, 'constant'):+7.2f}" if n == 0 else ""
            lines.append(f"  {text:<{width}}  {value:7}  {source}")
    if len(told) < len(site.terms):
        lines.append(f"  ({len(site.terms) - len(told)} more that add nothing)")
    low, high = site.value - site.half_width, site.value + site.half_width
    lines.append(f"  {total:<{width}}  {site.value:7.2f}  ({low:.2f} to {high:.2f}, {site.support})")
    if site.at_conditions is not None:
        lines.append(f"  {f'the same at {conditions}':<{width}}  {site.at_conditions:7.2f}")
    return lines + _evidence_text(site.evidence)


def _evidence_text(evidence: tuple[Analogue, ...]) -> list[str]:
    """The measured values behind a correction, each with what it adds and its source."""
    if not evidence:
        return []
    lines = ["  carried most by these measured values, each with its weight and what it adds:"]
    for one in evidence:
        text = f"    {f'{one.name}, ' if one.name else ''}{one.smiles}: {one.quantity} {one.value:.2f}"
        text += f"  ({one.weight:.2f}, {one.pull:+z.2f})  {one.source}"
        lines += textwrap.wrap(text, TEXT_WIDTH, subsequent_indent=" " * 6, break_long_words=False)
    return lines


def _term_name(term: TermLine) -> str:
    """Name of a term with its atoms, and the product behind its value where there is one to show."""
    name = term.name
    if term.atoms:
        name += f" [atom{'s' if len(term.atoms) > 1 else ''} {', '.join(map(str, term.atoms))}]"
    if term.descriptor != 1.0 and term.coefficient != 1.0:
        name += f" ({term.coefficient:+.3g} x {term.descriptor:.3g})"
    return name


def _steps_text(told: Explanation) -> list[str]:
    if not told.steps:
        return []
    by_number = {site.number: site for site in told.sites}
    at = "" if told.conditions == STANDARD else f", at {told.conditions}"
    lines = ["", f"Macroscopic constants, in the order of protonation{at}"]
    for step in told.steps:
        site = by_number[step.site]
        if step.value is None:
            value = "   not within -5 to 16"
        else:
            ends = ["..." if end is None else f"{end:.2f}" for end in (step.low, step.high)]
            value = f"{step.value:6.2f}  ({ends[0]} to {ends[1]})"
        beside = "" if step.pkb is None else f"pKb {step.pkb:.2f}"
        beside = f"{beside:<11}" if any(other.pkb is not None for other in told.steps) else ""
        verb = "goes on" if step.name.startswith("pKaH") else "comes off"
        lines.append(
            f"  {step.name:<7} {value:<26}  {beside}proton {verb} {site.symbol} atom {step.atom}, {site.site_class}"
        )
    return lines


def _protomers_text(told: Explanation) -> list[str]:
    """Protomers of each charge with their shares, then the constants between them."""
    if not told.protomers:
        return []
    lines = ["", "Protomers, and the share of each among those of the same net charge"]
    for one in told.protomers[:LINES_LISTED]:
        share = f"{100 * one.share:.1f}" if one.share >= 0.001 else f"{100 * one.share:.1g}"
        kind = "  neutral form" if one.neutral else "  zwitterion" if one.charge == 0 else ""
        charge = f"{one.charge:+d}" if one.charge else "0"
        lines.append(f"  {charge:>3}  {share:>6} %  {one.form}{kind}")
    lines += _more(len(told.protomers))
    lines += ["", "Microscopic constants between them"]
    for micro in told.microconstants[:LINES_LISTED]:
        if micro.charged:
            number = "s" if len(micro.charged) > 1 else ""
            beside = f"site{number} {', '.join(map(str, micro.charged))} charged"
        else:
            beside = "no other site charged"
        lines.append(f"  site {micro.site}  {micro.value:6.2f}  {beside}")
    return lines + _more(len(told.microconstants))


def _more(count: int) -> list[str]:
    return [f"  and {count - LINES_LISTED} more"] if count > LINES_LISTED else []


def _buffers_text(told: Explanation) -> list[str]:
    if not told.buffers:
        return []
    lines = ["", f"As a buffer (capacity at {BUFFER_CONCENTRATION:g} mol/L, in mol/L per pH unit)"]
    lines += [
        f"  {one.name:<7} from pH {one.low:.2f} to {one.high:.2f}, capacity {one.capacity:.3f}"
        for one in told.buffers
    ]
    if told.protonated_at:
        shares = ", ".join(f"{100 * share:.1f} % at pH {ph:g}" for ph, share in told.protonated_at)
        lines.append(f"  base protonated {shares}")
    return lines
