"""From structures to predictions: parent, sites, increments and equilibrium of a batch, in that order.

One bad structure never stops a batch: it becomes a `refused` prediction with its reason.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from rdkit import Chem

from .equilibrium import Equilibrium, SiteSet, equilibrate
from .forms import form_smiles
from .graph import build_graph
from .increments import Estimate, site_terms
from .interactions import Paths, coupling_matrix, find_paths, law
from .intervals import half_width
from .sites import find_sites
from .structures import Parent, Refusal, read_parent
from .substituents import Substituents

LOWEST, HIGHEST = -5.0, 16.0
"""Constants outside these are not reported."""

_MARGIN = 4.0
"""A site whose intrinsic constant lies further outside can't come back by interaction: it is left out."""


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
    coupling : ndarray, shape (n_sites, n_sites), or None
        Interaction W [pK units].
    equilibrium : Equilibrium or None
        Macroscopic constants and states.
    forms : tuple of str
        SMILES of the dominant form, one for each pH.
    """

    status: Literal["ok", "no_basic_site", "refused"]
    message: str
    parent: Parent | None
    estimates: tuple[Estimate, ...]
    coupling: np.ndarray | None
    equilibrium: Equilibrium | None
    forms: tuple[str, ...]


def estimate_sites(parent: Parent) -> tuple[tuple[Estimate, ...], Paths, SiteSet]:
    """Intrinsic constants of a parent and its sites as the equilibrium needs them.

    Parameters
    ----------
    parent : Parent
        Neutral parent.

    Returns
    -------
    estimates : tuple of Estimate
        One for each site within reach of the reported range, in canonical order.
    paths : Paths
        Shortest paths between the same sites.
    site_set : SiteSet
        The same sites with their couplings.
    """
    graph = build_graph(parent.mol)
    substituents = Substituents(graph)
    estimates = []
    for site in find_sites(parent.mol, graph, parent.output_order):
        estimate = Estimate(site, site_terms(substituents, site), half_width(site.row))
        beyond = estimate.value > HIGHEST + _MARGIN if site.kind == "acid" else estimate.value < LOWEST - _MARGIN
        if not beyond:
            estimates.append(estimate)
    sites = [estimate.site for estimate in estimates]
    paths, exclusive = find_paths(graph, sites)
    site_set = SiteSet(
        kinds=[site.kind for site in sites],
        pk=[estimate.value for estimate in estimates],
        half_width=[estimate.half_width for estimate in estimates],
        coupling=coupling_matrix(paths, law()),
        exclusive=exclusive,
        fixed_charge=sum(graph.charge),
    )
    return tuple(estimates), paths, site_set


def predict(structures: Sequence[str | Chem.Mol], *, ph: Sequence[float] = (7.4,)) -> list[Prediction]:
    """Predict a batch of structures.

    Parameters
    ----------
    structures : sequence of str or Chem.Mol
        SMILES or molecules.
    ph : sequence of float
        pH values at which the state is computed [-].

    Returns
    -------
    list of Prediction
        In the order of `structures`; a structure that can't be computed is `refused` with its reason.
    """
    refused: dict[int, str] = {}
    ready: list[tuple[int, Parent, tuple[Estimate, ...], SiteSet]] = []
    for index, structure in enumerate(structures):
        try:
            parent = read_parent(structure)
        except Refusal as reason:
            refused[index] = str(reason)
            continue
        estimates, _, site_set = estimate_sites(parent)
        ready.append((index, parent, estimates, site_set))
    equilibria = equilibrate([site_set for *_, site_set in ready], ph)
    predictions: dict[int, Prediction] = {
        index: Prediction("refused", reason, None, (), None, None, ()) for index, reason in refused.items()
    }
    for (index, parent, estimates, site_set), equilibrium in zip(ready, equilibria, strict=True):
        predictions[index] = _prediction(parent, estimates, site_set, equilibrium)
    return [predictions[index] for index in range(len(structures))]


def _prediction(
    parent: Parent, estimates: tuple[Estimate, ...], site_set: SiteSet, equilibrium: Equilibrium
) -> Prediction:
    sites = [estimate.site for estimate in estimates]
    basic = any(step.kind == "base" and step.value >= LOWEST for step in equilibrium.steps)
    notes = list(parent.notes)
    if not basic:
        notes.append("no nitrogen takes a proton above pH -5")
    if equilibrium.approximate:
        notes.append(f"{len(sites)} sites: constants by clusters, approximate")
    return Prediction(
        status="ok" if basic else "no_basic_site",
        message="; ".join(notes),
        parent=parent,
        estimates=estimates,
        coupling=np.asarray(site_set.coupling),
        equilibrium=equilibrium,
        forms=tuple(form_smiles(parent, sites, state.dominant) for state in equilibrium.states),
    )
