"""Explanation: why one compound has the pKaH it has, site by site and term by term.

Each site's intrinsic constant is a parent value plus increments that belong to atoms and add up; the
interaction W between sites turns intrinsic constants into the macroscopic ones that a titration measures, and
those into the state at a pH. `Explanation` keeps these numbers as they are; its text is what the terminal
shows.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterable
from dataclasses import dataclass
from itertools import zip_longest
from typing import TYPE_CHECKING, Literal

from .records import clean_ph, equivalent_carriers, interval, reported, shown, site_atom, support

if TYPE_CHECKING:
    from rdkit import Chem

    from .evidence import Analogue
    from .prediction import Prediction

CAUTION = (
    "Estimates for triage, not measurements, and no basis for dosing;\n"
    "in the laboratory follow local rules and qualified practice."
)
INTERVAL_NOTE = (
    "Intervals (90 %) are calibrated on measured compounds left out in turn;\n"
    "a value is supported where measured neighbours stand behind it, else extrapolated."
)
TEXT_WIDTH = 110
NAME_WIDTH = 56
LEAST_SHOWN = 0.005  # a W or a term that would show as 0.00 is not listed [pK units]


@dataclass(frozen=True, slots=True)
class TermLine:
    """One term of an intrinsic constant: name, atoms it comes from (input numbering), value [-], source."""

    name: str
    atoms: tuple[int, ...]
    descriptor: float
    coefficient: float
    value: float
    source: str


@dataclass(frozen=True, slots=True)
class SiteLine:
    """One site: its number here, atom (input numbering), class, intrinsic constant [-], terms, measured analogues."""

    number: int
    kind: Literal["base", "acid"]
    atom: int
    symbol: str
    site_class: str
    value: float
    half_width: float
    support: str
    terms: tuple[TermLine, ...]
    evidence: tuple[Analogue, ...] = ()


@dataclass(frozen=True, slots=True)
class StepLine:
    """One macroscopic step: `pKaH n` or `pKa n`, value and 90 % interval [-], the site that has the proton.

    `value` is None, and so is an end of the interval, where it lies outside -5 to 16 and so is not reported.
    """

    name: str
    value: float | None
    low: float | None
    high: float | None
    site: int
    atom: int


@dataclass(frozen=True, slots=True)
class StateLine:
    """The compound at one pH: mean net charge, share with a proton on a base site, most populated form."""

    ph: float
    net_charge: float
    protonated_fraction: float
    dominant_form: str
    dominant_fraction: float


@dataclass(frozen=True, slots=True)
class Explanation:
    """All that stands behind the numbers of one compound; `str()` gives it as text.

    Attributes
    ----------
    structure, parent_smiles : str
        As given, and the neutral parent that was computed.
    status, message : str
        `ok`, `no_basic_site` or `refused`, and remarks (the reason when refused).
    sites : tuple of SiteLine
        Bases and acids, numbered from 1.
    interactions : tuple of (int, int, float)
        Pairs of site numbers and their W [pK units], largest first.
    steps : tuple of StepLine
        Macroscopic constants in the order of protonation, then those of the acid groups.
    states : tuple of StateLine
        One for each pH.
    approximate : bool
        Whether there were too many sites for exact populations.
    """

    structure: str
    parent_smiles: str
    status: str
    message: str
    sites: tuple[SiteLine, ...] = ()
    interactions: tuple[tuple[int, int, float], ...] = ()
    steps: tuple[StepLine, ...] = ()
    states: tuple[StateLine, ...] = ()
    approximate: bool = False

    def __str__(self) -> str:
        return "\n".join(line.rstrip() for line in _text(self))


def explain(structure: str | Chem.Mol, *, ph: float | Iterable[float] = 7.4) -> Explanation:
    """The sites, terms, interactions, constants and states of one compound.

    Parameters
    ----------
    structure : str or rdkit.Chem.Mol
        One compound; atoms are numbered from 0 as written in it.
    ph : float or iterable of float
        pH of the states [-], -2 to 16.

    Returns
    -------
    Explanation
        With status `refused` and the reason in `message` when the structure cannot be computed.

    Raises
    ------
    ValueError
        pH outside -2 to 16 or not a number.
    """
    values = clean_ph(ph)
    from rdkit import Chem

    from .prediction import predict

    if not isinstance(structure, str | Chem.Mol) or (isinstance(structure, str) and not structure.strip()):
        return Explanation(str(structure), "", "refused", "no structure given")
    written = structure.strip() if isinstance(structure, str) else Chem.MolToSmiles(structure)
    return explanation_of(written, predict([structure], ph=values)[0], values)


def explanation_of(structure: str, prediction: Prediction, ph: tuple[float, ...]) -> Explanation:
    """An `Explanation` from a prediction made at the same pH values."""
    parent, equilibrium = prediction.parent, prediction.equilibrium
    if prediction.status == "refused" or parent is None:
        return Explanation(structure, "", "refused", prediction.message or "cannot be computed")
    states: tuple[StateLine, ...] = ()
    if equilibrium is not None:
        states = tuple(
            StateLine(
                state.ph,
                shown(state.net_charge, "fraction"),
                shown(state.protonated_fraction, "fraction"),
                form,
                shown(state.dominant_fraction, "fraction"),
            )
            for state, form in zip(equilibrium.states, prediction.forms, strict=True)
        )
    return Explanation(
        structure,
        parent.smiles,
        prediction.status,
        prediction.message,
        tuple(_site_line(prediction, place) for place in range(len(prediction.estimates))),
        _interactions(prediction),
        _step_lines(prediction),
        states,
        equilibrium is not None and equilibrium.approximate,
    )


def _site_line(prediction: Prediction, place: int) -> SiteLine:
    parent, estimate = prediction.parent, prediction.estimates[place]
    assert parent is not None
    terms = tuple(
        TermLine(
            term.name,
            tuple(sorted(parent.atom_index[atom] for atom in term.atoms)),
            term.descriptor,
            term.coefficient,
            term.value,
            term.source,
        )
        for term in estimate.terms
    )
    site = estimate.site
    return SiteLine(
        place + 1,
        site.kind,
        site_atom(prediction, place),
        parent.mol.GetAtomWithIdx(site.atom).GetSymbol(),
        site.site_class,
        estimate.value,
        estimate.half_width,
        support(estimate),
        terms,
        _evidence(prediction, place),
    )


def _evidence(prediction: Prediction, place: int) -> tuple[Analogue, ...]:
    from .evidence import analogues

    lines = prediction.lines
    return () if lines is None else analogues(lines.graph, lines.sites[place], lines.values[place])


def _interactions(prediction: Prediction) -> tuple[tuple[int, int, float], ...]:
    """Pairs of site numbers with their W, largest first; pairs too far apart to matter are left out."""
    if prediction.sites is None:
        return ()
    coupling = prediction.sites.coupling
    count = len(prediction.estimates)
    pairs = ((i + 1, j + 1, float(coupling[i, j])) for i in range(count) for j in range(i + 1, count))
    felt = (pair for pair in pairs if abs(pair[2]) >= LEAST_SHOWN)
    return tuple(sorted(felt, key=lambda pair: (-abs(pair[2]), pair[:2])))


def _step_lines(prediction: Prediction) -> tuple[StepLine, ...]:
    """The macroscopic steps; equivalent sites take their protons in the order of their atoms in the input."""
    lines: list[StepLine] = []
    counts = {"base": 0, "acid": 0}
    taken: set[int] = set()
    for step in prediction.equilibrium.steps if prediction.equilibrium is not None else ():
        counts[step.kind] += 1
        alike = equivalent_carriers(prediction, step)
        place = next((place for place in alike if place not in taken), step.carrier)
        taken.add(place)
        value = reported(step.value)
        low, high = interval(step) if value is not None else (None, None)
        name = f"{'pKaH' if step.kind == 'base' else 'pKa'} {counts[step.kind]}"
        lines.append(StepLine(name, value, low, high, place + 1, site_atom(prediction, place)))
    return tuple(lines)


def _text(told: Explanation) -> list[str]:
    """The whole as lines of text, no line wider than its SMILES or `TEXT_WIDTH`."""
    lines = [f"Structure  {told.structure}"]
    if told.status == "refused":
        return [*lines, f"Refused    {told.message}"]
    if told.parent_smiles != told.structure:
        lines.append(f"Parent     {told.parent_smiles}")
    if told.message:
        lines += textwrap.wrap(f"Note       {told.message}", TEXT_WIDTH, subsequent_indent=" " * 11)
    for site in told.sites:
        lines += ["", *_site_text(site)]
    if told.interactions:
        lines += [
            "",
            "Interaction W between sites, pK units (like charges repel by W, unlike ones attract)",
        ]
        lines += [f"  site {i} - site {j}  {w:+7.2f}" for i, j, w in told.interactions]
    lines += _steps_text(told)
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
    return lines


def _site_text(site: SiteLine) -> list[str]:
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
    return lines + _evidence_text(site.evidence)


def _evidence_text(evidence: tuple[Analogue, ...]) -> list[str]:
    """The measured values behind a correction, each with what it adds and its source."""
    if not evidence:
        return []
    lines = ["  carried most by these measured values, each with its weight and what it adds:"]
    for one in evidence:
        constant = "pKaH" if one.kind == "pkah" else "pKa"
        text = f"    {f'{one.name}, ' if one.name else ''}{one.smiles}: {constant} {one.value:.2f}"
        text += f"  ({one.weight:.2f}, {one.pull:+.2f})  {one.source}"
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
    lines = ["", "Macroscopic constants, in the order of protonation"]
    for step in told.steps:
        site = by_number[step.site]
        if step.value is None:
            value = "   not within -5 to 16"
        else:
            ends = ["..." if end is None else f"{end:.2f}" for end in (step.low, step.high)]
            value = f"{step.value:6.2f}  ({ends[0]} to {ends[1]})"
        verb = "goes on" if step.name.startswith("pKaH") else "comes off"
        lines.append(
            f"  {step.name:<7} {value:<26}  proton {verb} {site.symbol} atom {step.atom}, {site.site_class}"
        )
    return lines
