"""From structures to predictions: parent, sites, increments and equilibrium of a batch, in that order.

One bad structure never stops a batch: it becomes a `refused` prediction with its reason.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import islice
from typing import TYPE_CHECKING, Literal

import numpy as np
from rdkit import Chem, rdBase

from .conditions import sites_at
from .equilibrium import Equilibrium, SiteSet, equilibrate
from .forms import form_smiles
from .graph import Graph, build_graph
from .increments import Estimate, Term, site_terms, sum_of
from .interactions import couple
from .kinship import Standing, footprint
from .request import STANDARD, Conditions
from .residual import Correction, corrections, model
from .sites import Site, find_sites
from .structures import Parent, Refusal, read_parent
from .substituents import Substituents

if TYPE_CHECKING:
    from .conditioning import LocalModel

LOWEST, HIGHEST = -5.0, 16.0
"""Constants outside these are not reported."""

CORRECTION = "correction from measured neighbours"
"""Name of the term that the regression adds to a line."""
OWN_CORRECTION = "correction from own measurements"
"""Name of the term that a local model adds to it."""
OWN_NOTE = "own measurements taken into account"
"""What the message says of a compound that a local model moves."""

_MARGIN = 4.0
"""A site whose intrinsic constant lies further outside can't come back by interaction: it is left out."""


@dataclass(frozen=True, slots=True)
class Lines:
    """Sites of one parent with their itemised lines, before any correction.

    Attributes
    ----------
    graph : Graph
        Plain arrays of the parent.
    sites : tuple of Site
        Sites within reach of the reported range, in canonical order.
    terms : tuple of tuple of Term
        Terms of each site's line.
    values : tuple of float
        Line value of each site [-].
    """

    graph: Graph
    sites: tuple[Site, ...]
    terms: tuple[tuple[Term, ...], ...]
    values: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class Prediction:
    """Everything computed for one structure.

    Attributes
    ----------
    status : {"ok", "no_basic_site", "refused"}
        `ok` when some pKaH is at least -5.
    message : str
        Reason of a refusal, or remarks.
    parent : Parent or None
        The neutral parent.
    estimates : tuple of Estimate
        One for each site, in the order of the equilibrium.
    sites : SiteSet or None
        The sites as the equilibrium took them, at the conditions.
    equilibrium : Equilibrium or None
        Macroscopic constants and states.
    forms : tuple of str
        SMILES of the dominant form, one for each pH.
    lines : Lines or None
        Graph, sites and line values.
    standing : Standing or None
        What the order of a list needs to know of the first constant, when asked for.
    """

    status: Literal["ok", "no_basic_site", "refused"]
    message: str
    parent: Parent | None
    estimates: tuple[Estimate, ...]
    sites: SiteSet | None
    equilibrium: Equilibrium | None
    forms: tuple[str, ...]
    lines: Lines | None = None
    standing: Standing | None = None


def site_lines(parent: Parent) -> Lines:
    """Sites of a parent and what the linear free-energy lines say of each.

    Parameters
    ----------
    parent : Parent
        Neutral parent.
    """
    return lines_of([parent])[0]


def lines_of(parents: Sequence[Parent]) -> list[Lines]:
    """Sites and lines of many parents.

    Stage by stage, not parent by parent: the processor then has the code of one stage at hand at a time, which makes
    a list cheaper by a twentieth.
    """
    graphs = [build_graph(parent.mol, parent.smiles, parent.output_order) for parent in parents]
    found = [
        find_sites(parent.mol, graph, parent.output_order)
        for parent, graph in zip(parents, graphs, strict=True)
    ]
    return [_lines(graph, sites) for graph, sites in zip(graphs, found, strict=True)]


def _lines(graph: Graph, found: Sequence[Site]) -> Lines:
    """Lines of the sites of one parent that are within reach."""
    substituents = Substituents(graph)
    sites, itemised, values = [], [], []
    for site in found:
        terms = site_terms(substituents, site)
        value = sum_of(terms)
        if (value > HIGHEST + _MARGIN) if site.kind == "acid" else (value < LOWEST - _MARGIN):
            continue
        sites.append(site)
        itemised.append(terms)
        values.append(value)
    return Lines(graph, tuple(sites), tuple(itemised), tuple(values))


def corrections_of(batch: Sequence[Lines], local: LocalModel | None = None) -> list[tuple[Correction, ...]]:
    """Corrections from measured neighbours of the sites of many parents.

    Parameters
    ----------
    batch : sequence of Lines
        Lines of each parent.
    local : LocalModel, optional
        A user's own measured constants, by which they are moved.

    Returns
    -------
    list of tuple of Correction
        Corrections of each parent's sites.
    """
    graphs = [lines.graph for lines in batch for _ in lines.sites]
    sites = [site for lines in batch for site in lines.sites]
    values = [value for lines in batch for value in lines.values]
    trained = corrections(graphs, sites, values)
    if local is not None:
        trained = [local.moved(*of_site) for of_site in zip(graphs, sites, values, trained, strict=True)]
    found = iter(trained)
    return [tuple(islice(found, len(lines.sites))) for lines in batch]


def estimates_of(lines: Lines, found: Sequence[Correction]) -> tuple[Estimate, ...]:
    """Intrinsic constants of one parent: lines plus the corrections from measured neighbours."""
    estimates = []
    for site, terms, correction in zip(lines.sites, lines.terms, found, strict=True):
        trained = correction.value - correction.own
        added = [Term(CORRECTION, (), 1.0, trained, "regression on measured values, models/README.md")]
        if correction.own:
            added.append(
                Term(OWN_CORRECTION, (), 1.0, correction.own, "conditioned on the local model's values")
            )
        estimates.append(Estimate(site, (*terms, *added), correction.half_width, correction.support))
    return tuple(estimates)


def standing_of(lines: Lines, found: Sequence[Correction], equilibrium: Equilibrium) -> Standing | None:
    """What the order of a list needs to know of the first constant; None without one."""
    if not equilibrium.steps or equilibrium.steps[0].kind != "base":
        return None
    step = equilibrium.steps[0]
    place = step.carrier
    return Standing(
        step.value,
        step.half_width,
        footprint(lines.graph, lines.sites[place], lines.values[place], found[place]),
    )


def site_set(lines: Lines, estimates: Sequence[Estimate], conditions: Conditions = STANDARD) -> SiteSet:
    """Sites of one parent as the equilibrium takes them, with their couplings, at the conditions asked for."""
    coupling, exclusive = couple(lines.graph, lines.sites)
    fixed_charge = sum(lines.graph.charge)
    pk: list[float] = [estimate.value for estimate in estimates]
    if conditions != STANDARD:
        moved, coupling = sites_at(
            np.array(pk),
            coupling,
            is_acid=np.array([site.kind == "acid" for site in lines.sites], dtype=bool),
            families=[site.row.family for site in lines.sites],
            fixed_charge=fixed_charge,
            conditions=conditions,
        )
        pk = moved.tolist()
    return SiteSet(
        kinds=[site.kind for site in lines.sites],
        pk=pk,
        half_width=[estimate.half_width for estimate in estimates],
        coupling=coupling,
        exclusive=exclusive,
        fixed_charge=fixed_charge,
        law_half_width=model().law_half_width,
    )


def predict(
    structures: Sequence[str | Chem.Mol],
    *,
    ph: Sequence[float] = (7.4,),
    conditions: Conditions = STANDARD,
    standings: bool = False,
    local: LocalModel | None = None,
) -> list[Prediction]:
    """Predict a batch of structures.

    Parameters
    ----------
    structures : sequence of str or Chem.Mol
        SMILES or molecules.
    ph : sequence of float
        pH values at which the state is computed [-].
    conditions : Conditions
        Temperature and ionic strength of the constants and states.
    standings : bool
        Whether to keep what the order of a list needs (`kinship`).
    local : LocalModel, optional
        Corrections conditioned on a user's own measured constants (`conditioning`).

    Returns
    -------
    list of Prediction
        In the order of `structures`; a structure that can't be computed is `refused` with its reason.
    """
    predictions: dict[int, Prediction] = {}
    parents: dict[int, Parent] = {}
    for index, structure in enumerate(structures):
        try:
            parents[index] = read_parent(structure)
        except Refusal as reason:
            predictions[index] = Prediction("refused", str(reason), None, (), None, None, ())
    ready = lines_of(list(parents.values()))
    corrected = corrections_of(ready, local)
    estimates = [estimates_of(lines, found) for lines, found in zip(ready, corrected, strict=True)]
    sets = [site_set(lines, found, conditions) for lines, found in zip(ready, estimates, strict=True)]
    for (index, parent), lines, found, kept, sites, equilibrium in zip(
        parents.items(), ready, estimates, corrected, sets, equilibrate(sets, ph), strict=True
    ):
        standing = standing_of(lines, kept, equilibrium) if standings else None
        predictions[index] = _prediction(parent, lines, found, sites, equilibrium, standing, conditions)
    return [predictions[index] for index in range(len(structures))]


def _prediction(
    parent: Parent,
    lines: Lines,
    estimates: tuple[Estimate, ...],
    sites_in: SiteSet,
    equilibrium: Equilibrium,
    standing: Standing | None,
    conditions: Conditions,
) -> Prediction:
    sites = [estimate.site for estimate in estimates]
    basic = any(step.kind == "base" and step.value >= LOWEST for step in equilibrium.steps)
    notes = list(parent.notes)
    if conditions != STANDARD:
        notes.append(f"at {conditions}")
    if any(term.name == OWN_CORRECTION for estimate in estimates for term in estimate.terms[-1:]):
        notes.append(OWN_NOTE)
    if not basic:
        notes.append("no nitrogen takes a proton above pH -5")
    if equilibrium.approximate:
        notes.append(f"{len(sites)} sites: constants by clusters, approximate")
    try:
        with rdBase.BlockLogs():
            forms = tuple(form_smiles(parent, sites, state.dominant) for state in equilibrium.states)
    except ValueError as reason:
        return Prediction("refused", f"the dominant form can't be drawn: {reason}", None, (), None, None, ())
    return Prediction(
        status="ok" if basic else "no_basic_site",
        message="; ".join(notes),
        parent=parent,
        estimates=estimates,
        sites=sites_in,
        equilibrium=equilibrium,
        forms=forms,
        lines=lines,
        standing=standing,
    )
