"""The text of a tuning: what the terminal shows of each candidate, and the columns of a table of all of them."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .candidates import Candidate
    from .edit_pairs import Precedent
    from .scanning import Scan
    from .shifts import Reason
    from .tuning import Tuning

WIDTH = 110
TOP = 10
"""Candidates that are shown where no number is given."""
NEAREST = 5
"""Candidates that are shown where none reaches the window."""
REASONS_TOLD = 4
"""Parts of a shift that are told one by one; the rest is added up."""
CAUTION = (
    "Estimates for triage, not measurements, and no basis for dosing; whether a structure can be made or is\n"
    "wanted for anything else is not judged. In the laboratory follow local rules and qualified practice."
)

COLUMNS = (
    "rank",
    "smiles",
    "edit",
    "change",
    "atoms",
    "step",
    "pkah",
    "pkah_low",
    "pkah_high",
    "support",
    "class",
    "shift",
    "shift_low",
    "shift_high",
    "in_window",
    "probability",
    "cost",
    "log_p_change",
    "heavy_atom_change",
    "reasons",
    "pairs",
    "pairs_shift",
    "pair_examples",
)
"""Columns of the table of candidates."""


def row_of(rank: int, one: Candidate) -> tuple[Any, ...]:
    """One candidate as a row of the table."""
    known = one.precedents[0][1] if one.precedents else None
    return (
        rank,
        one.smiles,
        " + ".join(one.edits),
        " + ".join(one.labels),
        " ".join(map(str, one.atoms)),
        one.step,
        one.value,
        one.low,
        one.high,
        one.support,
        one.site_class,
        one.shift,
        one.shift_low,
        one.shift_high,
        one.in_window,
        one.probability,
        one.cost,
        one.log_p_change,
        one.heavy_atom_change,
        reasons_text(one.reasons),
        known.count if known else None,
        known.mean if known else None,
        examples_text(known, "; ") if known else None,
    )


def reasons_text(parts: tuple[Reason, ...]) -> str:
    """The largest parts of a shift, each with what it adds, and the rest as one number.

    Examples
    --------
    >>> from basirank.shifts import Reason
    >>> reasons_text((Reason("sigma* of fluoro, 3 out", 0.0, -1.7, -1.7), Reason("branch", 0.0, 0.1, 0.1)))
    'sigma* of fluoro, 3 out -1.70; branch +0.10'
    """
    told = [f"{_with_end(part)} {part.value:+.2f}" for part in parts[:REASONS_TOLD]]
    rest = sum(part.value for part in parts[REASONS_TOLD:])
    if len(parts) > REASONS_TOLD:
        told.append(f"the rest {rest:+z.2f}")
    return "; ".join(told) or "no term changes"


def _with_end(part: Reason) -> str:
    """Name of a term, and whether it has gone or grown less where the name alone would mislead."""
    if part.before and not part.after:
        return f"{part.name} gone"
    return part.name


def examples_text(known: Precedent, between: str) -> str:
    """Measured pairs: SMILES, constants, source."""
    return between.join(
        f"{pair.before} {pair.value_before:.2f} -> {pair.after} {pair.value_after:.2f} ({pair.source})"
        for pair in known.examples
    )


def _opening(found: Tuning | Scan) -> list[str]:
    """Structure, remarks, and the nitrogen with its constant."""
    lines = [f"Structure  {found.structure}"]
    if found.parent_smiles != found.structure:
        lines.append(f"Parent     {found.parent_smiles}")
    if found.message:
        lines += textwrap.wrap(f"Note       {found.message}", WIDTH, subsequent_indent=" " * 11)
    lines.append(
        f"Site       N atom {found.site}, {found.site_class}: {found.step} {found.value:.2f} "
        f"({found.low:.2f} to {found.high:.2f})"
    )
    return lines


def heading(found: Tuning) -> list[str]:
    """What was asked for, and how much of it was found."""
    lines = _opening(found)
    if found.keep:
        lines += textwrap.wrap(
            f"Kept       atoms {', '.join(map(str, found.keep))}", WIDTH, subsequent_indent=" " * 11
        )
    number = f"{len(found.candidates)} structures by {found.tried} edits within {found.reach} bonds"
    if found.most_edits == 2:
        number += ", one or two of them"
    low, high = found.window
    there = " (where it is already)" if low <= found.value <= high else ""
    lines.append(f"Wanted     {low:g} to {high:g}{there}: {len(found.hits)} of {number}")
    return lines


def tuning_text(found: Tuning, top: int | None = None) -> str:
    """A tuning as text: heading, the first candidates, the caution.

    Parameters
    ----------
    found : Tuning
        From `tune`.
    top : int, optional
        Candidates shown; by default the first `TOP` in the window, or the `NEAREST` where none is.
    """
    lines = heading(found)
    if not found.candidates:
        lines += ["", "No edit can be made there: more bonds (--near) or fewer protected atoms leave more."]
    elif not found.hits:
        lines += ["", "No edit reaches the window; the nearest are"]
    if found.hits:
        shown = found.candidates[: TOP if top is None else top]
        shown = tuple(one for one in shown if one.in_window or top is not None)
    else:
        shown = found.candidates[: NEAREST if top is None else top]
    for rank, one in enumerate(shown, start=1):
        lines += ["", *candidate_lines(rank, one, found)]
    if found.hits and len(found.hits) > len(shown):
        lines += ["", f"and {len(found.hits) - len(shown)} more in the window (--top, or -o for all)"]
    lines += [
        "",
        "Order: in the window first, the least change first, then the likeliest; after these the nearest.",
        CAUTION,
    ]
    return "\n".join(line.rstrip() for line in lines)


def candidate_lines(rank: int, one: Candidate, found: Tuning) -> list[str]:
    """One candidate: what is done, the structure, its constant and shift, reasons, measured pairs."""
    atoms = f"atom{'s' if len(one.atoms) > 1 else ''} {', '.join(map(str, one.atoms))}"
    low, high = found.window
    which = "pKaH" if one.step == "pKaH 1" else one.step
    told = [
        f"{which} {one.value:.2f} ({one.low:.2f} to {one.high:.2f}, {one.support}), "
        f"{100 * (one.probability or 0.0):.0f} % in {low:g} to {high:g}",
        f"shift {one.shift:+z.2f} ({one.shift_low:+z.2f} to {one.shift_high:+z.2f}), size {one.cost}, "
        f"log P {one.log_p_change:+z.2f}, heavy atoms {one.heavy_atom_change:+d}"
        + ("" if one.site_class == found.site_class else f", now {one.site_class}"),
        f"because {reasons_text(one.reasons)}",
    ]
    for _, known in one.precedents:
        told.append(_precedent_text(known))
    heading = f"{rank:>3}  {' + '.join(one.labels)} ({atoms})"
    lines = [*textwrap.wrap(heading, WIDTH, subsequent_indent=" " * 5), f"     {one.smiles}"]
    for text in told:
        lines += textwrap.wrap(
            text, WIDTH, initial_indent=" " * 5, subsequent_indent=" " * 7, break_long_words=False,
            break_on_hyphens=False,
        )  # fmt: skip
    return lines


def _precedent_text(known: Precedent) -> str:
    kind = "" if known.same_class else " with a nitrogen of another class"
    pairs = f"in 1 pair{kind}"
    if known.count > 1:
        pairs = f"in the mean of {known.count} pairs{kind}, {known.least:+z.2f} to {known.greatest:+z.2f}"
    return f"measured: {known.mean:+z.2f} {pairs}: {examples_text(known, '; ')}"


SCAN_COLUMNS = (
    "atom",
    "edit",
    "change",
    "smiles",
    "step",
    "pkah",
    "pkah_low",
    "pkah_high",
    "shift",
    "shift_low",
    "shift_high",
)
"""Columns of a scan's table."""


def scan_text(found: Scan) -> str:
    """A scan as an aligned table: atom, edit, shift and its interval, constant."""
    lines = _opening(found)
    if found.points:
        lines.append(f"Scan       {len(found.points)} shifts within {found.reach} bonds")
    else:
        lines.append(f"Scan       it can be made nowhere within {found.reach} bonds")
    if found.points:
        width = min(max(len(point.label) for point in found.points), 64)
        lines += ["", f"atom  {'edit':<{width}}   shift  90 %            pKaH"]
    for point in found.points:
        label = textwrap.shorten(point.label, width, placeholder="...")
        ends = f"{point.shift_low:+z.2f} to {point.shift_high:+z.2f}"
        lines.append(f"{point.atom:>4}  {label:<{width}}  {point.shift:+z6.2f}  {ends}  {point.value:6.2f}")
    lines += ["", CAUTION]
    return "\n".join(line.rstrip() for line in lines)
