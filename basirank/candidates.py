"""Candidates: a structure, its nitrogen and what must stay; the products of edits near it, each with what it does.

All products are predicted in one batch; of several that are one compound the cheapest stays.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from .edit_pairs import Precedent, precedent
from .edits import NEW, Edit, Product, Workbench, combined, edits, marked_smiles
from .records import equivalent_carriers, reported, shown, site_atom, support
from .request import PLAIN, Request
from .residual import group_of
from .shifts import NINETY, Reason, SiteStep, reasons, shift_half_width, site_steps

if TYPE_CHECKING:
    from rdkit import Chem

REACH, MOST_REACH = 5, 12
"""Bonds from the nitrogen within which an edit may touch an atom: by default, and at most."""
SEEDS, SEEDS_OF_ONE = 12, 2
"""Single edits on which a second is tried, and how many of them may be the same edit at different places."""
MOST_PAIRED = 2000
"""Products of two edits that are predicted."""


@dataclass(frozen=True, slots=True)
class Candidate:
    """One changed structure and what it would do to the constant.

    Attributes
    ----------
    smiles : str
        Its neutral parent.
    edits, labels : tuple of str
        Names of the edits (one, or two), and what a chemist calls them.
    atoms : tuple of int
        Atoms of the input that they touch: exchanged, lost, or with a neighbour or hydrogen more or less.
    cost : int
        Heavy atoms added, removed or exchanged for another element.
    step : str
        Which constant of the product it is: `pKaH 1` if the nitrogen takes the first proton.
    value, low, high : float
        Macroscopic constant and its 90 % interval [-].
    support : str
        `supported` or `extrapolated`.
    site_class : str
        Class of the nitrogen now.
    shift, shift_low, shift_high : float
        Difference from the constant before, and its own 90 % interval [pK units].
    in_window : bool or None
        Whether the value lies in the window; None without one.
    probability : float or None
        Probability that the true constant lies there [-].
    reasons : tuple of Reason
        Parts of the shift, the largest first; they add up to it.
    log_p_change : float
        Change of log P of the neutral form, estimated from atom contributions (Wildman and Crippen 1999) [-].
    heavy_atom_change : int
        Heavy atoms more or less.
    precedents : tuple of (str, Precedent)
        For each edit what it did to measured compounds, where there are any.
    new_atoms : tuple of int
        Places in `smiles` of the atoms that are new or of another element; where there are none, of those with other
        bonds.
    input_atoms : tuple of int or None
        Number in the input of each atom of `smiles`, in the order in which they stand there; None for a new one.
    site : int
        Place in `smiles` of the nitrogen.
    """

    smiles: str
    edits: tuple[str, ...]
    labels: tuple[str, ...]
    atoms: tuple[int, ...]
    cost: int
    step: str
    value: float
    low: float
    high: float
    support: str
    site_class: str
    shift: float
    shift_low: float
    shift_high: float
    in_window: bool | None
    probability: float | None
    reasons: tuple[Reason, ...]
    log_p_change: float
    heavy_atom_change: int
    precedents: tuple[tuple[str, Precedent], ...]
    new_atoms: tuple[int, ...]
    input_atoms: tuple[int | None, ...]
    site: int


def order(one: Candidate, window: tuple[float, float]) -> tuple[object, ...]:
    """Sorting key: in the window by cost, then by probability; outside it by distance, then by cost."""
    away = 0.0 if one.in_window else distance(one.value, window)
    return (away, one.cost, -(one.probability or 0.0), one.smiles)


def distance(value: float, window: tuple[float, float]) -> float:
    """How far a constant lies from a window [pK units]; 0 inside."""
    return round(max(window[0] - value, value - window[1], 0.0), 6)


@dataclass(frozen=True, slots=True, eq=False)
class Start:
    """The structure before any edit: its nitrogen and constant, protected atoms, and what is asked for."""

    structure: str
    parent_smiles: str
    site: int
    keep: tuple[int, ...]
    reach: int
    step: SiteStep
    request: Request
    bench: Workbench

    @property
    def parent_atoms(self) -> tuple[int, ...]:
        """Number in the input of each atom of `parent_smiles`, in the order in which they stand there."""
        parent = self.step.prediction.parent
        assert parent is not None
        return tuple(parent.atom_index[atom] for atom in parent.output_order)

    def products(self, wanted: Sequence[Edit]) -> list[Product]:
        """Products of single edits, all ways to make each."""
        return [product for edit in wanted for product in self.bench.apply(edit)]

    def paired(self, found: Sequence[tuple[Product, Candidate]]) -> list[Product]:
        """Products of a second edit on those of the best single ones, bounded by `SEEDS` and `MOST_PAIRED`."""
        again: dict[str, Product] = {}
        for seed in self._seeds(found):
            keep = [n for n, source in enumerate(seed.origin) if source in self.bench.keep]
            bench = Workbench(seed.mol, seed.site, keep, self.reach)
            for edit in edits():
                for product in bench.apply(edit):
                    again.setdefault(marked_smiles(product.mol, product.site), combined(seed, product))
        ranked = sorted(again.items(), key=lambda item: (item[1].cost, item[0]))
        return [product for _, product in ranked[:MOST_PAIRED]]

    def _seeds(self, found: Sequence[tuple[Product, Candidate]]) -> list[Product]:
        """Single edits that bring the constant nearest to the window, few of one kind."""
        chosen: list[Product] = []
        for product, _ in found:
            if sum(other.edits == product.edits for other in chosen) < SEEDS_OF_ONE:
                chosen.append(product)
            if len(chosen) == SEEDS:
                break
        return chosen

    def told(
        self, products: Iterable[Product], window: tuple[float, float] | None
    ) -> list[tuple[Product, Candidate]]:
        """Different products with what is to be said of each, best first; the structure itself is left out.

        Of several products that are one compound the cheapest stays, then that of the earlier edit in the table.
        """
        different: dict[str, Product] = {}
        for product in products:
            marked = marked_smiles(product.mol, product.site)
            known = different.get(marked)
            if known is None or _preference(product) < _preference(known):
                different[marked] = product
        ordered = sorted(different.items(), key=lambda item: (_preference(item[1]), item[0]))
        found = [product for _, product in ordered]
        taken = {self.parent_smiles}
        kept = []
        for product, step in zip(found, self.steps(found), strict=True):
            if step is None or step.prediction.parent is None or reported(step.value) is None:
                continue
            if step.prediction.parent.smiles not in taken:
                taken.add(step.prediction.parent.smiles)
                kept.append((product, self._candidate(product, step, window)))
        return sorted(kept, key=lambda pair: order(pair[1], window)) if window else kept

    def steps(self, products: Sequence[Product]) -> list[SiteStep | None]:
        """The step of the nitrogen in each product, predicted in one batch."""
        from .prediction import predict

        predictions = predict(
            [product.mol for product in products],
            ph=(),
            conditions=self.request.conditions,
            local=self.request.local,
        )
        return site_steps(predictions, [product.site for product in products], self.request.local)

    def _candidate(self, product: Product, step: SiteStep, window: tuple[float, float] | None) -> Candidate:
        from rdkit.Chem import Crippen

        before, after = self.step.prediction.parent, step.prediction.parent
        assert before is not None and after is not None
        log_p = [float(Crippen.MolLogP(parent.mol)) for parent in (before, after)]  # type: ignore[attr-defined]
        heavy = [parent.mol.GetNumHeavyAtoms() for parent in (before, after)]
        shift, half = step.value - self.step.value, shift_half_width(self.step, step)
        written = [after.atom_index[atom] for atom in after.output_order]
        site = after.atom_index[step.estimate.site.atom]
        return Candidate(
            smiles=after.smiles,
            edits=tuple(edit.name for edit in product.edits),
            labels=tuple(edit.label for edit in product.edits),
            atoms=tuple(sorted(before.atom_index[atom] for atom in product.touched)),
            cost=product.cost,
            step=f"pKaH {step.number}",
            value=shown(step.value, "constant"),
            low=shown(step.value - step.half_width, "constant"),
            high=shown(step.value + step.half_width, "constant"),
            support=support(step.estimate),
            site_class=step.estimate.site.site_class,
            shift=shown(shift, "constant"),
            shift_low=shown(shift - half, "constant"),
            shift_high=shown(shift + half, "constant"),
            in_window=None if window is None else window[0] <= shown(step.value, "constant") <= window[1],
            probability=None if window is None else shown(share_inside(step, window), "fraction"),
            reasons=reasons(self.step, step),
            log_p_change=shown(log_p[1] - log_p[0], "constant"),
            heavy_atom_change=heavy[1] - heavy[0],
            precedents=self._precedents(product),
            new_atoms=tuple(n for n, atom in enumerate(written) if atom in product.changed),
            input_atoms=tuple(
                None if product.origin[atom] == NEW else before.atom_index[product.origin[atom]]
                for atom in written
            ),
            site=written.index(site),
        )

    def _precedents(self, product: Product) -> tuple[tuple[str, Precedent], ...]:
        """What single edits did where they were measured; the second of two starts from a compound of its own."""
        if len(product.edits) > 1:
            return ()
        path = self.bench.path_to(product.position)
        row = self.step.estimate.site.row
        group = group_of().get(row.family, "")
        found = ((edit.name, precedent(edit.name, row.name, group, path)) for edit in product.edits)
        return tuple((name, one) for name, one in found if one is not None)


def _preference(product: Product) -> tuple[int, tuple[int, ...]]:
    return product.cost, tuple(edit.place for edit in product.edits)


def share_inside(step: SiteStep, window: tuple[float, float]) -> float:
    """Probability that the true constant lies in a window, its error normal [-]."""
    spread = max(step.half_width / NINETY, 1e-6) * math.sqrt(2.0)
    low, high = ((end - step.value) / spread for end in window)
    return 0.5 * (math.erf(high) - math.erf(low))


def start_of(
    structure: str | Chem.Mol,
    *,
    site: int | None,
    keep: str | Iterable[int | str],
    reach: int,
    request: Request = PLAIN,
) -> Start:
    """The structure before any edit, checked.

    Raises
    ------
    ValueError
        As in `tune`.
    """
    from rdkit import Chem

    from .prediction import predict

    if isinstance(reach, bool) or not isinstance(reach, int) or not 0 <= reach <= MOST_REACH:
        raise ValueError(f"the number of bonds must be a whole number from 0 to {MOST_REACH}, not {reach!r}")
    if not isinstance(structure, str | Chem.Mol) or (isinstance(structure, str) and not structure.strip()):
        raise ValueError("no structure given")
    written = structure.strip() if isinstance(structure, str) else Chem.MolToSmiles(structure)
    (prediction,) = predict([structure], ph=(), conditions=request.conditions, local=request.local)
    parent, equilibrium = prediction.parent, prediction.equilibrium
    if parent is None or equilibrium is None:
        raise ValueError(f"refused: {prediction.message or 'cannot be computed'}")
    bases = [step for step in equilibrium.steps if step.kind == "base" and reported(step.value) is not None]
    if site is None:
        if not bases:
            raise ValueError("no basic site: no nitrogen takes a proton above pH -5")
        atom = site_atom(prediction, equivalent_carriers(prediction, bases[0])[0])
    else:
        atom = site
    (step,) = site_steps([prediction], [atom], request.local)
    if step is None or reported(step.value) is None:
        carriers = sorted(
            {
                site_atom(prediction, place)
                for base in bases
                for place in equivalent_carriers(prediction, base)
            }
        )
        told = (
            f"those that have one: {', '.join(map(str, carriers))}" if carriers else "no atom of it has one"
        )
        raise ValueError(f"atom {atom} has no pKaH from -5 to 16; {told}")
    place = parent.atom_index.index(atom)
    if parent.mol.GetAtomWithIdx(place).GetAtomicNum() != 7:
        raise ValueError(f"atom {atom} takes the proton, but is no nitrogen; the edits are for nitrogen")
    numbers = _kept(keep, parent.mol, parent.atom_index)
    bench = Workbench(parent.mol, place, [parent.atom_index.index(number) for number in numbers], reach)
    return Start(written, parent.smiles, atom, numbers, reach, step, request, bench)


def _kept(keep: str | Iterable[int | str], mol: Chem.Mol, atom_index: Sequence[int]) -> tuple[int, ...]:
    """Protected atoms as the input numbers them."""
    from rdkit import Chem, rdBase

    numbers: set[int] = set()
    for one in [keep] if isinstance(keep, str) else list(keep):
        text = str(one).strip()
        if not text:
            raise ValueError("--keep takes SMARTS or atom numbers, not nothing")
        if re.fullmatch(r"\d+(\s*,\s*\d+)*", text):
            wanted = {int(number) for number in text.split(",")}
            missing = sorted(wanted.difference(atom_index))
            if missing:
                raise ValueError(f"atom {missing[0]} to be kept is no heavy atom of the parent structure")
            numbers |= wanted
            continue
        with rdBase.BlockLogs():
            pattern = Chem.MolFromSmarts(text)
        if pattern is None:
            raise ValueError(f"cannot be read as SMARTS or atom numbers: {text!r}")
        matches = mol.GetSubstructMatches(pattern, maxMatches=10_000)
        if not matches:
            raise ValueError(f"nothing in the structure matches {text!r}, so nothing could be kept")
        numbers |= {atom_index[atom] for match in matches for atom in match}
    return tuple(sorted(numbers))
