"""Scorecard: a score as terminal text, rows, JSON, Markdown and a page with pictures of the farthest rows."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import asdict
from html import escape
from typing import Any

from .depiction import picture_svg
from .explanation import CAUTION, INTERVAL_NOTE, Explanation, explanation_of
from .markdown import code, plain, table
from .parity import parity_svg
from .prediction import predict
from .request import PLAIN, Request
from .scoring import APART, KNOWN, Figures, Group, Score, Scored
from .writers import aligned_table

COLUMNS = ("row", "name", "smiles", "status", "message", "kind", "step", "measured", "predicted", "error", "low",
           "high", "inside", "class", "family", "support", "in_training", "remark")  # fmt: skip
HEADING = ("values", "n", "MAE", "RMSE", "bias", "median", "≤ 0.5", "≤ 1.0", "90 % holds", "± mean")
CLASS_HEADING = ("class of the site", "n", "MAE", "bias", "≤ 1.0", "n new", "MAE new")
FARTHEST = ("error", "measured", "predicted", "row", "compound", "structure", "class", "support", "remark")
TITLES = {"pkah": "Bases (pKaH)", "pka": "Acids (pKa)"}
PICTURE_WIDTH = 320.0


def text_of(structure: Any) -> str:
    """A structure as SMILES."""
    if isinstance(structure, str):
        return structure.strip()
    from rdkit import Chem

    return Chem.MolToSmiles(structure) if isinstance(structure, Chem.Mol) else ""


def score_rows(score: Score) -> list[list[str]]:
    """A row for each row of the table, in order, in the columns of `COLUMNS`; none is lost."""
    rows: dict[int, list[str]] = {}
    for one in score.unused:
        lead = [str(one.number), one.name, text_of(one.structure), "unused", one.told]
        rows[one.number] = lead + [""] * (len(COLUMNS) - len(lead))
    for row in score.rows:
        of = row.measured
        step = str(of.step) if of.acid_charge is None else ""
        ends = (row.predicted - row.half_width, row.predicted + row.half_width)
        rows[of.number] = [
            str(of.number), of.name, text_of(of.structure), "scored", "", of.kind, step, f"{of.value:g}",
            f"{row.predicted:z.2f}", f"{row.error:z.2f}", *(f"{end:z.2f}" for end in ends),
            _yes(row.inside), row.site_class, row.family, row.support, _yes(bool(row.known)), row.remark,
        ]  # fmt: skip
    return [rows[number] for number in sorted(rows)]


def _yes(value: bool) -> str:
    return "yes" if value else "no"


def score_dict(score: Score) -> dict[str, Any]:
    """A score as plain lists and numbers, for JSON; a figure that there is none of is None."""
    return {
        "value_column": score.value_column,
        "assumed": score.assumed or None,
        "local": score.local,
        "groups": [
            {"kind": one.kind, "by": one.by, "label": one.label, **_figures(one.figures),
             "not_in_training": _figures(one.new)}
            for one in score.groups
        ],
        "rows": [dict(zip(COLUMNS, row, strict=True)) for row in score_rows(score)],
    }  # fmt: skip


def _figures(figures: Figures) -> dict[str, float | None]:
    return {name: None if math.isnan(value) else value for name, value in asdict(figures).items()}


def _line(label: str, found: Figures) -> list[str]:
    return [
        label, f"{found.n:,}", f"{found.mae:.2f}", f"{found.rmse:.2f}", f"{found.bias:+z.2f}", f"{found.median:.2f}",
        _percent(found.within_half), _percent(found.within_one), _percent(found.coverage), f"{found.half_width:.2f}",
    ]  # fmt: skip


def _percent(share: float) -> str:
    return "" if math.isnan(share) else f"{100 * share:.0f} %"


def _tables(score: Score, kind: str) -> tuple[list[list[str]], list[list[str]], list[list[str]]]:
    """Lines of the figures, of the classes and of the table's own classes."""
    groups = [group for group in score.groups if group.kind == kind]
    main = [_line("all" if one.by == "all" else one.label, one.figures)
            for one in groups if one.by in ("all", "training", "support")]  # fmt: skip
    of_class = [_class_line(one) for one in groups if one.by == "class"]
    own = [_class_line(one) for one in groups if one.by == "own class"]
    return main, of_class, own


def _class_line(one: Group) -> list[str]:
    found, new = one.figures, one.new
    return [
        one.label, f"{found.n:,}", f"{found.mae:.2f}", f"{found.bias:+z.2f}", _percent(found.within_one),
        f"{new.n:,}", "" if new.n == 0 else f"{new.mae:.2f}",
    ]  # fmt: skip


def remarks(score: Score) -> list[str]:
    """What a reader must know of the figures."""
    lines = []
    for one in score.groups:
        if one.by == "all":
            for words, found in (("", one.figures), (", not in the training table", one.new)):
                if found.pairs:
                    lines.append(
                        f"order of {one.label}{words}: {100 * found.order:.1f} % of {found.pairs:,} pairs measured "
                        f"more than {APART} apart (first constants, n {found.first:,})"
                    )
    trained = sum(row.known == "training" for row in score.rows)
    if trained:
        lines.append(
            f"in the training table: compounds of {trained:,} of {len(score.rows):,} values ('new' leaves them out)"
        )
    if score.local:
        own = sum(row.known == "local" for row in score.rows)
        lines.append(
            f"local corrections took part; {own:,} values belong to compounds they come from: no test"
        )
    if score.assumed:
        lines.append(f"the column {score.value_column!r} was taken as {score.assumed}")
    nearer = sum("lies nearer" in row.remark for row in score.rows)
    if nearer:
        lines.append(f"much nearer to another step than to the stated one: {nearer:,} (see the remarks)")
    return lines


def score_text(score: Score, worst: int = 10) -> str:
    """A score as text for the terminal."""
    blocks = []
    for kind, title in TITLES.items():
        main, of_class, own = _tables(score, kind)
        if main:
            blocks.append(f"{title}\n" + aligned_table(HEADING, main))
            blocks.append(aligned_table(CLASS_HEADING, of_class))
            if own:
                blocks.append(aligned_table(("class in the table", *CLASS_HEADING[1:]), own))
    if not score.rows:
        blocks.append("No row could be used.")
    if lines := remarks(score):
        blocks.append("\n".join(lines))
    if worst and score.rows:
        heading = ("error", "measured", "predicted", "±90%", "row", "compound", "class", "support", "remark")
        rows = [_worst_line(row) for row in score.worst(worst)]
        blocks.append(f"Farthest {len(rows)}\n" + aligned_table(heading, rows, text=(5, 6, 7, 8)))
    blocks.append(f"{INTERVAL_NOTE}\n{CAUTION}")
    return "\n\n".join(blocks)


def _worst_line(row: Scored) -> list[str]:
    of = row.measured
    notes = [row.remark] if row.remark else []
    if row.known:
        notes.insert(0, KNOWN[row.known])
    return [
        f"{row.error:+z.2f}", f"{of.value:.2f}", f"{row.predicted:.2f}", f"{row.half_width:.2f}", str(of.number),
        of.name or text_of(of.structure), row.site_class, row.support, "; ".join(notes),
    ]  # fmt: skip


def score_markdown(score: Score, worst: int = 10) -> str:
    """A score as Markdown."""
    blocks = ["# Measured against predicted"]
    numbers = range(1, len(HEADING))
    for kind, title in TITLES.items():
        main, of_class, own = _tables(score, kind)
        if main:
            blocks += [f"## {title}", table(HEADING, _plain(main), list(numbers))]
            blocks.append(table(CLASS_HEADING, _plain(of_class), list(range(1, len(CLASS_HEADING)))))
            if own:
                heading = ("class in the table", *CLASS_HEADING[1:])
                blocks.append(table(heading, _plain(own), list(range(1, len(heading)))))
    blocks += [f"- {plain(line)}" for line in remarks(score)]
    if worst and score.rows:
        rows = []
        for row in score.worst(worst):
            shown = _worst_line(row)
            cells = [plain(cell) for cell in shown[4:]]
            rows.append([*shown[:3], *cells[:2], code(text_of(row.measured.structure)), *cells[2:]])
        blocks += ["## Farthest", table(FARTHEST, rows, [0, 1, 2, 3])]
    if score.unused:
        rows = [
            [str(one.number), plain(one.name or text_of(one.structure)), plain(one.told)]
            for one in score.unused
        ]
        blocks += ["## Not used", table(("row", "compound", "reason"), rows, [0])]
    return "\n\n".join([*blocks, f"{INTERVAL_NOTE}\n{CAUTION}"]) + "\n"


def _plain(rows: Sequence[Sequence[str]]) -> list[list[str]]:
    return [[plain(row[0]), *row[1:]] for row in rows]


_STYLE = """
:root{color-scheme:light dark}
body{font:16px/1.45 system-ui,sans-serif;max-width:64rem;margin:2rem auto;padding:0 1rem}
table{border-collapse:collapse;margin:1rem 0;display:block;overflow-x:auto}
th,td{padding:.2rem .7rem;text-align:right;border-bottom:1px solid #8884;white-space:nowrap}
th:first-child,td:first-child,td.t{text-align:left;white-space:normal}
.plot svg{max-width:100%;height:auto}
.cases{display:grid;grid-template-columns:repeat(auto-fill,minmax(20rem,1fr));gap:1rem}
.cases article{border:1px solid #8886;border-radius:.5rem;padding:.8rem;overflow-wrap:anywhere}
.cases svg{max-width:100%;height:auto;display:block;margin:0 auto .5rem}
.cases h3{margin:.2rem 0;font-size:1rem}.cases p{margin:.2rem 0}
"""


def score_html(score: Score, request: Request = PLAIN, worst: int = 10) -> str:
    """A score as a page that opens from disk: figures, plot, and the farthest rows with their pictures.

    Nothing in it runs, and nothing is loaded; text of the table is escaped.
    """
    body = ["<h1>Measured against predicted</h1>"]
    if score.rows:
        body.append(f'<div class="plot">{parity_svg(score)}</div>')
    for kind, title in TITLES.items():
        main, of_class, own = _tables(score, kind)
        if main:
            body += [f"<h2>{title}</h2>", _html_table(HEADING, main), _html_table(CLASS_HEADING, of_class)]
            if own:
                body.append(_html_table(("class in the table", *CLASS_HEADING[1:]), own))
    body.append("<ul>" + "".join(f"<li>{_escaped(line)}</li>" for line in remarks(score)) + "</ul>")
    if cases := score.worst(worst):
        drawn = zip(cases, _explained(cases, request), strict=True)
        body.append('<h2>Farthest</h2><div class="cases">' + "".join(_case(*one) for one in drawn) + "</div>")
    if score.unused:
        rows = [[str(one.number), one.name or text_of(one.structure), one.told] for one in score.unused]
        body += ["<h2>Not used</h2>", _html_table(("row", "compound", "reason"), rows, text=True)]
    body.append(f"<p><small>{_escaped(INTERVAL_NOTE)} {_escaped(CAUTION)}</small></p>")
    return (
        '<!doctype html><html lang="en"><head><meta charset="utf-8">'
        "<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; style-src 'unsafe-inline'\">"
        '<meta name="viewport" content="width=device-width,initial-scale=1">'
        f"<title>Measured against predicted</title><style>{_STYLE}</style></head><body>"
        + "\n".join(body)
        + "</body></html>\n"
    )


def _explained(cases: Sequence[Scored], request: Request) -> list[Explanation]:
    found = []
    for row in cases:
        of = row.measured
        (one,) = predict([of.structure], conditions=of.conditions, local=request.local)
        found.append(explanation_of(text_of(of.structure), one, Request(of.conditions, local=request.local)))
    return found


def _case(row: Scored, told: Explanation) -> str:
    of = row.measured
    low, high = row.predicted - row.half_width, row.predicted + row.half_width
    where = f"{of.wanted} on atom {row.atom}: {row.site_class}, {row.support}"
    known = f", {KNOWN[row.known]}" if row.known else ""
    lines = [
        f"<b>{row.error:+z.2f}</b>: measured {of.value:.2f}, predicted {row.predicted:.2f} ({low:.2f} to {high:.2f})",
        _escaped(where + known),
        *([_escaped(row.remark)] if row.remark else []),
        f"<small>{_escaped(text_of(of.structure))}</small>",
    ]
    heading = _escaped(of.name) or f"row {of.number}"
    return (
        f"<article>{picture_svg(told, PICTURE_WIDTH) or ''}<h3>{heading}</h3>"
        + "".join(f"<p>{line}</p>" for line in lines)
        + "</article>"
    )


def _html_table(heading: Sequence[str], rows: Sequence[Sequence[str]], text: bool = False) -> str:
    kind = ' class="t"' if text else ""
    heads = "".join(f"<th>{_escaped(cell)}</th>" for cell in heading)
    lines = "".join(f"<tr>{''.join(f'<td{kind}>{_escaped(cell)}</td>' for cell in row)}</tr>" for row in rows)
    return f"<table><thead><tr>{heads}</tr></thead><tbody>{lines}</tbody></table>"


def _escaped(text: str) -> str:
    return escape("".join(letter if letter.isprintable() else " " for letter in text))
