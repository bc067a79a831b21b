"""Edits: small changes of structure that a chemist would make near a site, as reaction SMARTS in a table.

A row of `edits.csv` is one edit. Atom map 1 in it is the nitrogen whose constant is to be moved; a row without it acts
anywhere near that nitrogen. Each product keeps the way back to the atoms of the structure it was made from, so that
the nitrogen is followed, protected atoms stay as they are, and a picture shows what is new.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Sequence
from dataclasses import dataclass
from functools import cache

from rdkit import Chem, rdBase
from rdkit.Chem import rdChemReactions

from .tables import read_table

SITE_MAP = 1
"""Atom map number of the site in a reaction."""
MOST_MATCHES = 400
"""Ways to apply one edit to one structure that are tried."""
_BOND = {Chem.BondType.DOUBLE: "=", Chem.BondType.TRIPLE: "#"}
NEW = -1
"""Origin of an atom that an edit has added."""


@dataclass(frozen=True, slots=True, eq=False)
class Edit:
    """One row of the table of edits.

    Attributes
    ----------
    name, family, label : str
        Its name, the family it belongs to, and what a chemist calls it.
    cost : int
        Heavy atoms added, removed or exchanged for another element; 1 where only bonds change.
    anchored : bool
        Whether the reaction names the site itself.
    place : int
        Place in the table.
    reaction : ChemicalReaction
        The reaction, one structure to one.
    lost : int
        Atoms that it takes away.
    note, source : str
        Remark, and where the edit is known from.
    """

    name: str
    family: str
    label: str
    cost: int
    anchored: bool
    place: int
    reaction: rdChemReactions.ChemicalReaction
    lost: int
    note: str
    source: str


@dataclass(frozen=True, slots=True, eq=False)
class Product:
    """What one edit, or one after another, makes of a structure.

    Attributes
    ----------
    mol : Mol
        Sanitised product.
    site : int
        Atom that was the site.
    origin : tuple of int
        For each atom the atom of the first structure that it was, or `NEW`.
    edits : tuple of Edit
        What was done, in order.
    changed : frozenset of int
        Atoms of the product that are new or of another element; where there are none, those with other bonds.
    touched : frozenset of int
        Atoms of the first structure that were exchanged, lost, or gained or lost a neighbour or hydrogen.
    position : int
        The one of these where the edit is said to be: an exchanged or lost atom before others, the nearest to the
        site.
    """

    mol: Chem.Mol
    site: int
    origin: tuple[int, ...]
    edits: tuple[Edit, ...]
    changed: frozenset[int]
    touched: frozenset[int]
    position: int

    @property
    def cost(self) -> int:
        """Sum of the costs of its edits."""
        return sum(edit.cost for edit in self.edits)


@cache
def edits() -> tuple[Edit, ...]:
    """Rows of `edits.csv` in order, reactions parsed.

    Examples
    --------
    >>> [edit.label for edit in edits() if edit.name == "beta-fluoro"]
    ['a fluorine beta to the nitrogen']
    """
    return tuple(_edit(place, row) for place, row in enumerate(read_table("edits.csv")))


def _edit(place: int, row: dict[str, str]) -> Edit:
    reaction = rdChemReactions.ReactionFromSmarts(row["smarts"])
    reaction.Initialize()
    if reaction.GetNumReactantTemplates() != 1 or reaction.GetNumProductTemplates() != 1:
        raise ValueError(f"edits.csv: {row['name']!r} must make one structure of one")
    before = [atom.GetAtomMapNum() for atom in reaction.GetReactantTemplate(0).GetAtoms()]
    after = {atom.GetAtomMapNum() for atom in reaction.GetProductTemplate(0).GetAtoms()} - {0}
    return Edit(
        name=row["name"],
        family=row["family"],
        label=row["label"],
        cost=int(row["cost"]),
        anchored=SITE_MAP in before,
        place=place,
        reaction=reaction,
        lost=sum(number not in after for number in before),
        note=row["note"],
        source=row["source"],
    )


def chosen_edits(wanted: str) -> tuple[Edit, ...]:
    """Edits whose name or family has a text in it; all of them for "all".

    Raises
    ------
    ValueError
        None has.

    Examples
    --------
    >>> sorted({edit.family for edit in chosen_edits("ring size")})
    ['ring size']
    """
    text = wanted.strip().casefold()
    if text == "all":
        return edits()
    exact = tuple(edit for edit in edits() if text in (edit.name.casefold(), edit.family.casefold()))
    found = exact or tuple(
        edit for edit in edits() if text and (text in edit.name.casefold() or text in edit.family.casefold())
    )
    if not found:
        families = ", ".join(dict.fromkeys(edit.family for edit in edits()))
        raise ValueError(f"no edit is called {wanted.strip()!r}; the families are: {families}")
    return found


@cache
def _refusals() -> tuple[Chem.Mol, ...]:
    """Groups that an edit must not make."""
    patterns = []
    for row in read_table("edit_refusals.csv"):
        pattern = Chem.MolFromSmarts(row["smarts"])
        if pattern is None:
            raise ValueError(f"edit_refusals.csv: cannot read SMARTS {row['smarts']!r}")
        patterns.append(pattern)
    return tuple(patterns)


def refused_groups(mol: Chem.Mol) -> tuple[int, ...]:
    """How many times a structure has each of the groups that an edit must not make."""
    return tuple(len(mol.GetSubstructMatches(pattern)) for pattern in _refusals())


Signature = tuple[int, int, int, frozenset[tuple[int, int, Chem.BondType]]]
"""Element, charge, hydrogens, and (neighbour, its element, bond) of an atom, atoms by their origin."""


def _signature(atom: Chem.Atom, origin: Sequence[int]) -> Signature:
    around = []
    for bond in atom.GetBonds():
        other = bond.GetOtherAtom(atom)
        around.append((origin[other.GetIdx()], other.GetAtomicNum(), bond.GetBondType()))
    return atom.GetAtomicNum(), atom.GetFormalCharge(), atom.GetTotalNumHs(), frozenset(around)


def _bare(signature: Signature) -> tuple[object, ...]:
    """A signature without the elements of the neighbours: what changes where the atom itself is touched."""
    *own, around = signature
    return (*own, frozenset((other, bond) for other, _, bond in around))


def _ready(mol: Chem.Mol) -> Chem.Mol:
    """A copy whose hydrogens are implicit wherever they can be, so that a reaction may take them."""
    copy = Chem.RWMol(mol)
    for atom in copy.GetAtoms():
        if not atom.GetIsAromatic() and atom.GetNumExplicitHs() and not atom.GetFormalCharge():
            count = atom.GetTotalNumHs()
            atom.SetNumExplicitHs(0)
            atom.SetNoImplicit(False)
            atom.UpdatePropertyCache(strict=False)
            if atom.GetTotalNumHs() != count:
                atom.SetNumExplicitHs(count)
                atom.SetNoImplicit(True)
                atom.UpdatePropertyCache(strict=False)
    return copy.GetMol()


class Workbench:
    """One structure, its site and what must stay, ready for edits.

    Parameters
    ----------
    mol : Mol
        The structure, sanitised, neutral where it can be.
    site : int
        The nitrogen whose constant is to be moved.
    keep : collection of int
        Protected atoms: each stays with its element, charge, hydrogens, neighbours and their elements, and bonds.
    reach : int
        Bonds from the site within which an edit may touch an atom that stays.
    """

    def __init__(self, mol: Chem.Mol, site: int, keep: Collection[int] = (), reach: int = 5) -> None:
        self.mol = _ready(mol)
        self.site = site
        self.keep = frozenset(keep)
        self._distance: list[float] = Chem.GetDistanceMatrix(self.mol)[site].tolist()
        self._near = frozenset(n for n, bonds in enumerate(self._distance) if bonds <= reach)
        own = range(mol.GetNumAtoms())
        self._signatures = [_signature(atom, own) for atom in self.mol.GetAtoms()]
        self._bare = [_bare(signature) for signature in self._signatures]
        self._groups = refused_groups(self.mol)

    def path_to(self, atom: int) -> str:
        """Elements on the shortest way from the site to an atom, aromatic ones small, multiple bonds marked.

        Of several ways the first by the alphabet.

        Examples
        --------
        >>> Workbench(Chem.MolFromSmiles("NCc1ccccc1"), 0).path_to(3)
        'NCcc'
        """
        here = self.mol.GetAtomWithIdx(atom)
        symbol = here.GetSymbol().lower() if here.GetIsAromatic() else here.GetSymbol()
        if atom == self.site:
            return symbol
        ways = []
        for bond in here.GetBonds():
            before = bond.GetOtherAtomIdx(atom)
            if self._distance[before] < self._distance[atom]:
                ways.append(self.path_to(before) + _BOND.get(bond.GetBondType(), ""))
        return min(ways) + symbol

    def apply(self, edit: Edit) -> list[Product]:
        """Every product of an edit, one for each way to apply it; those that are equal by symmetry too."""
        with rdBase.BlockLogs():
            raw = edit.reaction.RunReactants((self.mol,), maxProducts=MOST_MATCHES)
            found = [self._product(edit, mol) for (mol,) in raw]
        return [product for product in found if product is not None]

    def _product(self, edit: Edit, mol: Chem.Mol) -> Product | None:
        origin = [
            atom.GetIntProp("react_atom_idx") if atom.HasProp("react_atom_idx") else NEW
            for atom in mol.GetAtoms()
        ]
        if self.site not in origin:
            return None
        site = origin.index(self.site)
        tracked = mol.GetAtomWithIdx(site)
        if tracked.GetAtomicNum() != 7 or (edit.anchored and _old_map(tracked) != SITE_MAP):
            return None
        lost = set(range(self.mol.GetNumAtoms())).difference(origin)
        if len(lost) != edit.lost or len(Chem.GetMolFrags(mol)) != 1:
            return None
        if Chem.SanitizeMol(mol, catchErrors=True) != Chem.SanitizeFlags.SANITIZE_NONE:
            return None
        signatures = {
            source: _signature(atom, origin)
            for atom, source in zip(mol.GetAtoms(), origin, strict=True)
            if source != NEW
        }
        if any(signatures.get(atom) != self._signatures[atom] for atom in self.keep):
            return None
        touched = {atom for atom, one in signatures.items() if _bare(one) != self._bare[atom]}
        if not touched or not touched <= self._near or self._makes_refused(mol):
            return None
        exchanged = {atom for atom in touched if signatures[atom][0] != self._signatures[atom][0]}
        changed = [n for n, source in enumerate(origin) if source == NEW or source in exchanged]
        if not changed:
            changed = [n for n, source in enumerate(origin) if source in touched]
        self._forget_stereo(mol, origin, touched)
        position = min(exchanged or lost or touched, key=lambda atom: (self._distance[atom], atom))
        return Product(
            mol,
            site,
            tuple(origin),
            (edit,),
            frozenset(changed),
            frozenset(touched | lost),
            position,
        )

    def _makes_refused(self, mol: Chem.Mol) -> bool:
        return any(
            mol.HasSubstructMatch(pattern) and len(mol.GetSubstructMatches(pattern)) > before
            for pattern, before in zip(_refusals(), self._groups, strict=True)
        )

    @staticmethod
    def _forget_stereo(mol: Chem.Mol, origin: Sequence[int], touched: Iterable[int]) -> None:
        """Leave open the configuration of an atom that got or lost a neighbour; clear what a reaction noted."""
        for atom, source in zip(mol.GetAtoms(), origin, strict=True):
            if source in touched:
                atom.SetChiralTag(Chem.ChiralType.CHI_UNSPECIFIED)
            for name in atom.GetPropsAsDict(includePrivate=False, includeComputed=False):
                atom.ClearProp(name)
            atom.SetAtomMapNum(0)
        Chem.AssignStereochemistry(mol, cleanIt=True, force=True)


def _old_map(atom: Chem.Atom) -> int:
    return atom.GetIntProp("old_mapno") if atom.HasProp("old_mapno") else 0


def marked_smiles(mol: Chem.Mol, site: int) -> str:
    """Canonical SMILES with a site marked by atom map 1.

    Examples
    --------
    >>> marked_smiles(Chem.MolFromSmiles("NCC"), 0)
    'CC[NH2:1]'
    """
    copy = Chem.Mol(mol)
    copy.GetAtomWithIdx(site).SetAtomMapNum(SITE_MAP)
    return Chem.MolToSmiles(copy)


def combined(first: Product, second: Product) -> Product:
    """Two edits as one: the second was applied to the product of the first."""
    origin = tuple(NEW if source == NEW else first.origin[source] for source in second.origin)
    earlier = {n for n, source in enumerate(second.origin) if source in first.changed}
    back = {first.origin[atom] for atom in second.touched} - {NEW}
    return Product(
        second.mol,
        second.site,
        origin,
        (*first.edits, *second.edits),
        second.changed | earlier,
        first.touched | frozenset(back),
        first.position,
    )
