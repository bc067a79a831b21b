"""Explanation: why one compound has the pKaH it has, site by site and term by term.

Each site's intrinsic constant is a parent value plus increments that belong to atoms and add up; the
interaction W between sites turns intrinsic constants into the macroscopic ones that a titration measures, and
those into the state at a pH. `Explanation` keeps these numbers as they are; its text is what the terminal
shows.
"""

from __future__ import annotations

import html
from collections.abc import Iterable
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any, Literal

from .records import clean_ph, equivalent_carriers, interval, pkb, reported, shown, site_atom, support
from .request import PLAIN, STANDARD, Conditions, Request

if TYPE_CHECKING:
    from rdkit import Chem

    from .conditioning import LocalModel
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
LEAST_SHOWN = 0.005  # a W or a term that would show as 0.00 is not listed [pK units]
WORKED_AT = (2.0, 7.4, 10.0)  # pH of an acid wash, of blood and of an alkaline extraction
BUFFER_REACH = 1.0  # a buffer is useful this far on either side of its constant [pH units]
BUFFER_LIMITS = (0.0, 14.0)  # constants outside are not listed as buffers [pH]
BUFFER_CONCENTRATION = 0.1  # for which the capacity is given [mol/L]


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
    """One site: its number here, atom (input numbering), class, intrinsic constant [-], terms, measured analogues.

    `at_conditions` is the intrinsic constant at the temperature and ionic strength asked for, None at 25 C and 0.
    """

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
    at_conditions: float | None = None


@dataclass(frozen=True, slots=True)
class StepLine:
    """One macroscopic step: `pKaH n` or `pKa n`, value and 90 % interval [-], the site that has the proton.

    `value` is None, and so is an end of the interval, where it lies outside -5 to 16 and so is not reported. `pkb`
    is there when asked for.
    """

    name: str
    value: float | None
    low: float | None
    high: float | None
    site: int
    atom: int
    pkb: float | None = None


@dataclass(frozen=True, slots=True)
class ProtomerLine:
    """One protomer: net charge, SMILES, share among the molecules of that charge, whether it is the neutral form."""

    charge: int
    form: str
    share: float
    neutral: bool


@dataclass(frozen=True, slots=True)
class MicroconstantLine:
    """Constant [-] of a site (its number) beside those other sites that carry a charge (their numbers)."""

    site: int
    charged: tuple[int, ...]
    value: float


@dataclass(frozen=True, slots=True)
class BufferLine:
    """One step as a buffer: its name, useful pH range, capacity of 0.1 mol/L at its middle [mol/L per pH unit]."""

    name: str
    low: float
    high: float
    capacity: float


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
    protomers : tuple of ProtomerLine
        Protomers of each net charge, where some charge has more than one.
    microconstants : tuple of MicroconstantLine
        Microscopic constants between them.
    buffers : tuple of BufferLine
        Steps between pH 0 and 14 as buffers.
    protonated_at : tuple of (float, float)
        Share of molecules with a proton on a base site at pH 2, 7.4 and 10.
    conditions : Conditions
        Temperature and ionic strength of everything but the sums of the sites, which are at 25 C and 0.
    parent_atoms : tuple of int
        Number in the input of each atom of `parent_smiles`, in the order in which they stand there.
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
    protomers: tuple[ProtomerLine, ...] = ()
    microconstants: tuple[MicroconstantLine, ...] = ()
    buffers: tuple[BufferLine, ...] = ()
    protonated_at: tuple[tuple[float, float], ...] = ()
    conditions: Conditions = STANDARD
    parent_atoms: tuple[int, ...] = ()

    def __str__(self) -> str:
        from .wording import lines_of

        return "\n".join(line.rstrip() for line in lines_of(self))

    def _repr_svg_(self) -> str | None:
        """The pictures, for a notebook; None where the structure cannot be drawn."""
        from .depiction import explanation_svg

        return explanation_svg(self)

    def _repr_html_(self) -> str:
        """Pictures and text, for a notebook."""
        from .depiction import explanation_svg

        return f"<div>{explanation_svg(self) or ''}<pre>{html.escape(str(self))}</pre></div>"


def explain(
    structure: str | Chem.Mol,
    *,
    ph: float | Iterable[float] = 7.4,
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
    show_pkb: bool = False,
    local: LocalModel | None = None,
) -> Explanation:
    """The sites, terms, interactions, constants and states of one compound.

    Parameters
    ----------
    structure : str or rdkit.Chem.Mol
        One compound; atoms are numbered from 0 as written in it.
    ph : float or iterable of float
        pH of the states [-], -2 to 16.
    temperature, ionic_strength : float
        Of the constants and states [C], 0 to 60, and [mol/L], 0 to 0.5.
    show_pkb : bool
        Give pKb beside each pKaH.
    local : LocalModel, optional
        Corrections conditioned on measured constants, from `condition`.

    Returns
    -------
    Explanation
        With status `refused` and the reason in `message` when the structure cannot be computed.

    Raises
    ------
    ValueError
        pH, temperature or ionic strength out of range or not a number.
    """
    values = clean_ph(ph)
    request = Request(Conditions(temperature, ionic_strength), pkb=show_pkb, local=local)
    from rdkit import Chem

    if not isinstance(structure, str | Chem.Mol) or (isinstance(structure, str) and not structure.strip()):
        return Explanation(str(structure), "", "refused", "no structure given")
    written = structure.strip() if isinstance(structure, str) else Chem.MolToSmiles(structure)
    return explanation_of(written, _predicted(structure, values, request), request)


def _predicted(structure: str | Chem.Mol, ph: tuple[float, ...], request: Request) -> Prediction:
    from .prediction import predict

    return predict([structure], ph=ph, conditions=request.conditions, local=request.local)[0]


def explanation_of(structure: str, prediction: Prediction, request: Request = PLAIN) -> Explanation:
    """An `Explanation` from a prediction made at the conditions of the request."""
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
    steps = _step_lines(prediction, request)
    protomers, microconstants = _protomer_lines(prediction)
    return Explanation(
        structure,
        parent.smiles,
        prediction.status,
        prediction.message,
        tuple(_site_line(prediction, place, request) for place in range(len(prediction.estimates))),
        _interactions(prediction),
        steps,
        states,
        equilibrium is not None and equilibrium.approximate,
        protomers,
        microconstants,
        _buffer_lines(prediction, steps),
        _protonated_at(prediction),
        request.conditions,
        tuple(parent.atom_index[atom] for atom in parent.output_order),
    )


def as_dict(told: Explanation) -> dict[str, Any]:
    """An explanation as plain lists and numbers, for JSON; the names are those of the attributes.

    Values of a site are as computed, and its terms sum to them; constants and shares are rounded as they are
    shown.

    Examples
    --------
    >>> as_dict(explain("CCN"))["steps"][0]["name"]
    'pKaH 1'
    """
    return asdict(told)


def _site_line(prediction: Prediction, place: int, request: Request) -> SiteLine:
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
        _evidence(prediction, place, request.local),
        None
        if prediction.sites is None or request.conditions == STANDARD
        else float(prediction.sites.pk[place]),
    )


def _evidence(prediction: Prediction, place: int, local: LocalModel | None) -> tuple[Analogue, ...]:
    """Own measurements first, then those of the shipped table."""
    from .evidence import analogues

    lines = prediction.lines
    if lines is None:
        return ()
    subject = lines.graph, lines.sites[place], lines.values[place]
    own = () if local is None else local.analogues(*subject)
    return (*own, *analogues(*subject))


def _interactions(prediction: Prediction) -> tuple[tuple[int, int, float], ...]:
    """Pairs of site numbers with their W, largest first; pairs too far apart to matter are left out."""
    if prediction.sites is None:
        return ()
    coupling = prediction.sites.coupling
    count = len(prediction.estimates)
    pairs = ((i + 1, j + 1, float(coupling[i, j])) for i in range(count) for j in range(i + 1, count))
    felt = (pair for pair in pairs if abs(pair[2]) >= LEAST_SHOWN)
    return tuple(sorted(felt, key=lambda pair: (-abs(pair[2]), pair[:2])))


def _step_lines(prediction: Prediction, request: Request) -> tuple[StepLine, ...]:
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
        beside = pkb(value, request) if request.pkb and step.kind == "base" and value is not None else None
        lines.append(StepLine(name, value, low, high, place + 1, site_atom(prediction, place), beside))
    return tuple(lines)


def _protomer_lines(
    prediction: Prediction,
) -> tuple[tuple[ProtomerLine, ...], tuple[MicroconstantLine, ...]]:
    """Protomers and the constants between them; nothing where each charge has one protomer only."""
    from .forms import form_smiles
    from .microstates import microconstants, protomers

    if prediction.sites is None or prediction.parent is None:
        return (), ()
    found = protomers(prediction.sites)
    if len(found) == len({one.charge for one in found}):
        return (), ()
    parent, sites = prediction.parent, [estimate.site for estimate in prediction.estimates]
    lines = []
    for one in found:
        try:
            form = form_smiles(parent, sites, one.protons)
        except ValueError:
            form = "(cannot be drawn)"
        lines.append(ProtomerLine(one.charge, form, one.share, one.neutral))
    between = (
        MicroconstantLine(one.site + 1, tuple(other + 1 for other in one.charged), one.value)
        for one in microconstants(prediction.sites, found)
    )
    return tuple(lines), tuple(between)


def _buffer_lines(prediction: Prediction, steps: tuple[StepLine, ...]) -> tuple[BufferLine, ...]:
    from .ladder import ladder_of

    if prediction.sites is None:
        return ()
    ladder = ladder_of(prediction.sites)
    return tuple(
        BufferLine(
            step.name,
            shown(step.value - BUFFER_REACH, "constant"),
            shown(step.value + BUFFER_REACH, "constant"),
            BUFFER_CONCENTRATION * float(ladder.capacity([step.value])[0]),
        )
        for step in steps
        if step.value is not None and BUFFER_LIMITS[0] <= step.value <= BUFFER_LIMITS[1]
    )


def _protonated_at(prediction: Prediction) -> tuple[tuple[float, float], ...]:
    from .equilibrium import equilibrate

    if prediction.sites is None or prediction.status != "ok":
        return ()
    states = equilibrate([prediction.sites], WORKED_AT)[0].states
    return tuple((state.ph, shown(state.protonated_fraction, "fraction")) for state in states)
