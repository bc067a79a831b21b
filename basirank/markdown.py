"""Markdown: explanations and ranked lists as text that a notebook, a wiki or a lab journal shows as tables.

Text from outside (names, SMILES, messages) is escaped, so that it stands there as it was written.
"""

from __future__ import annotations

import re
from collections.abc import Sequence

from .explanation import CAUTION, INTERVAL_NOTE, LEAST_SHOWN, Explanation, SiteLine
from .records import Column, Record, column_positions, shown
from .request import STANDARD, Conditions

_SPECIAL = re.compile(r"([\\`*_\[\]<>#|~&$])")


def plain(text: object) -> str:
    r"""A text as Markdown shows it unchanged, on one line.

    Examples
    --------
    >>> plain("<b>|x_1")
    '\\<b\\>\\|x\\_1'
    """
    line = "".join(letter if letter.isprintable() else " " for letter in str(text))
    return _SPECIAL.sub(r"\\\1", line)


def code(text: str) -> str:
    """A text set as code (a SMILES), also within a table."""
    line = "".join(letter if letter.isprintable() else " " for letter in text).replace("|", "\\|")
    fence = "`" * (max((len(run) for run in re.findall("`+", line)), default=0) + 1)
    return (
        f"{fence}{line}{fence}"
        if not line.startswith("`") and not line.endswith("`")
        else f"{fence} {line} {fence}"
    )


def table(heading: Sequence[str], rows: Sequence[Sequence[str]], numbers: Sequence[int] = ()) -> str:
    """A table; the columns in `numbers` are set to the right.

    Examples
    --------
    >>> print(table(["name", "pKaH"], [["aniline", "4.60"]], [1]))
    | name | pKaH |
    | --- | ---: |
    | aniline | 4.60 |
    """
    rule = ["---:" if n in numbers else "---" for n in range(len(heading))]
    return "\n".join(f"| {' | '.join(cells)} |" for cells in (heading, rule, *rows))


def explanation_markdown(told: Explanation, name: str = "") -> str:
    """An explanation as Markdown: constants, state, and the terms of each site with their sources."""
    lines = [f"## {plain(name) if name else code(told.structure)}", ""]
    if name:
        lines += [f"Structure {code(told.structure)}", ""]
    if told.status == "refused":
        return "\n".join([*lines, f"Refused: {plain(told.message)}"])
    if told.parent_smiles != told.structure:
        lines += [f"Computed as {code(told.parent_smiles)}", ""]
    if told.message:
        lines += [f"Note: {plain(told.message)}", ""]
    if told.conditions != STANDARD:
        lines += [f"At {told.conditions}; the sums of the sites are at 25 C and ionic strength 0.", ""]
    sites = {site.number: site for site in told.sites}
    if told.steps:
        rows = []
        for step in told.steps:
            site, ends = (
                sites[step.site],
                ["…" if end is None else f"{end:.2f}" for end in (step.low, step.high)],
            )
            value = (
                ("outside", "") if step.value is None else (f"{step.value:.2f}", f"{ends[0]} to {ends[1]}")
            )
            rows.append([step.name, *value, f"{site.symbol} atom {step.atom}", plain(site.site_class)])
        lines += [table(["constant", "value", "90 % interval", "proton on", "class"], rows, [1]), ""]
    if told.states:
        rows = [
            [f"{state.ph:g}", f"{shown(state.net_charge, 'constant'):+.2f}", f"{100 * state.protonated_fraction:.1f} %",
             code(state.dominant_form), f"{100 * state.dominant_fraction:.1f} %"]
            for state in told.states
        ]  # fmt: skip
        lines += [
            table(["pH", "net charge", "protonated", "dominant form", "its share"], rows, [0, 1, 2, 4]),
            "",
        ]
    for site in told.sites:
        lines += [*_site(site), ""]
    if told.interactions:
        rows = [[f"{a}, {b}", f"{w:+.2f}"] for a, b, w in told.interactions]
        lines += ["### Interaction between sites", "", table(["sites", "W, pK units"], rows, [1]), ""]
    return "\n".join(lines).rstrip()


def _site(site: SiteLine) -> list[str]:
    quantity = "pKaH" if site.kind == "base" else "pKa"
    rows = [
        [
            plain(term.name),
            ", ".join(map(str, term.atoms)),
            f"{shown(term.value, 'constant'):+.2f}",
            plain(term.source),
        ]
        for n, term in enumerate(site.terms)
        if n == 0 or abs(term.value) >= LEAST_SHOWN
    ]
    total = f"± {site.half_width:.2f}, {site.support}"
    rows.append(
        [f"**intrinsic {quantity}**", str(site.atom), f"**{shown(site.value, 'constant'):.2f}**", total]
    )
    lines = [f"### Site {site.number}: {plain(site.site_class)}, {site.symbol} atom {site.atom}", ""]
    lines.append(table(["term", "atoms", "adds", "source"], rows, [2]))
    if site.evidence:
        rows = [
            [
                plain(one.name),
                code(one.smiles),
                f"{one.quantity} {one.value:.2f}",
                f"{one.weight:.2f}",
                f"{one.pull:+z.2f}",
                plain(one.source),
            ]
            for one in site.evidence
        ]
        heading = ["measured analogue", "structure", "value", "weight", "adds", "source"]
        lines += ["", table(heading, rows, [2, 3, 4])]
    return lines


def ranked_markdown(
    ranks: Sequence[int | None],
    labels: Sequence[str],
    structures: Sequence[str],
    records: Sequence[Record],
    above: Sequence[float | None],
    columns: Sequence[Column],
    ph: Sequence[float],
    conditions: Conditions = STANDARD,
) -> str:
    """A ranked list as a Markdown table, with what its intervals mean and the caution under it."""
    places = column_positions(columns)
    rows = []
    for rank, label, structure, row, sure in zip(ranks, labels, structures, records, above, strict=True):
        value, low, high = (row[places[name]] for name in ("pkah_1", "pkah_1_low", "pkah_1_high"))
        states = []
        for value_of_ph in ph:
            end = "" if len(ph) == 1 else f"_at_{value_of_ph:g}"
            charge, share = row[places[f"net_charge{end}"]], row[places[f"protonated_fraction{end}"]]
            states.append("" if charge is None else f"{shown(float(charge), 'constant'):+.2f}")
            states.append("" if share is None else f"{100 * float(share):.1f} %")
        ends = ["…" if end is None else f"{end:.2f}" for end in (low, high)]
        remark = row[places["message"]] or ""
        rows.append([
            "" if rank is None else str(rank),
            plain(label),
            code(structure),
            "" if value is None else f"{value:.2f}",
            "" if value is None else f"{ends[0]} to {ends[1]}",
            "" if sure is None else f"{100 * sure:.0f} %",
            plain(row[places["pkah_1_class"]] or (f"{row[0]}: {remark}" if value is None else "")),
            *states,
            str(row[places["pkah_1_support"]] or ""),
        ])  # fmt: skip
    heads = [text for value in ph for text in (f"charge at pH {value:g}", f"protonated at pH {value:g}")]
    heading = [
        "rank",
        "compound",
        "structure",
        "pKaH",
        "90 % interval",
        "above next",
        "class",
        *heads,
        "support",
    ]
    numbers = [0, 3, 5, *range(7, 7 + len(heads))]
    stated = "" if conditions == STANDARD else f"At {conditions}.\n\n"
    return f"{table(heading, rows, numbers)}\n\n{stated}{note()}\n"


def note() -> str:
    """What the intervals mean, and the caution."""
    return f"{INTERVAL_NOTE}\n{CAUTION}"
