"""The tautomer that rules in water, by a table of rewrites.

Three kinds of row: a hydrogen that goes from one atom to another (hydroxyazine to pyridone, enamine to
imine), ring nitrogens that hold the movable hydrogen of an azole or lactam, and the nitrogens of an amidine
or guanidine that hold the C=N. Of equals the choice is made by rank in the bare skeleton, never by atom
order, so that both drawings of a tautomeric pair give one answer.
"""

import re
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache

from rdkit import Chem

from basirank.conjugation import (
    apply_edit,
    drop_bond_stereo,
    finish,
    flip,
    isotopes_last,
    kekulised,
    move_hydrogen,
    skeleton_ranks,
)
from basirank.tables import read_table

# A compound is brought to its final form in a few rewrites; this many for each atom means that rows undo each
# other.
MAX_REWRITES_PER_ATOM = 2

_ALL_FEATURES = frozenset({"any", "n2", "nH", "C=N", "N=O", "OH+n", "OH+C=C", "N+C=C"})
_WRITTEN_HYDROGEN = re.compile(r"\[(?:\d|H)")
_NITROSO = re.compile(r"N=O|O=N")
# A ring-closure digit after "=" may close on anything, and ")=C" may belong to a nitrogen: both count.
_DOUBLE_BONDED_NITROGEN = re.compile(r"\)=[\\/]*\[?C|N[\d%()\]\\/]*=|=[\\/]*\[?\d*N|=[\\/]*[\d%]")
_HYDROXY_OR_MERCAPTO = re.compile(r"(?<!=)[OS](?:\)|$|\.)|^[OS]|\.[OS]|\[O|\[S")
_CARBON_CARBON_DOUBLE_BOND = re.compile(r"(?<![ON])=[\\/]*\[?\d*C|=[\\/]*[\d%]")


@dataclass(frozen=True, slots=True)
class _Row:
    name: str
    pattern: Chem.Mol
    first: int
    second: int
    edit: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class _Group:
    """Rows that share a cheap test."""

    stage: str
    written_with: frozenset[str]
    cheap_test: Chem.Mol
    rows: tuple[_Row, ...]


def _row(row: dict[str, str]) -> _Row:
    pattern = Chem.MolFromSmarts(row["smarts"])
    if pattern is None:
        raise ValueError(f"rewrites.csv: the SMARTS of {row['name']!r} cannot be read")
    place = {atom.GetAtomMapNum(): atom.GetIdx() for atom in pattern.GetAtoms()}
    return _Row(row["name"], pattern, place[1], place.get(2, place[1]), tuple(row["edit"].split()))


@cache
def _groups() -> tuple[_Group, ...]:
    """Rows of the table under their cheap tests, in the order of the table."""
    collected: dict[tuple[str, str, str], list[_Row]] = {}
    for row in read_table("rewrites.csv"):
        if row["stage"] != "drawn charge":
            collected.setdefault((row["stage"], row["written_with"], row["cheap_test"]), []).append(_row(row))
    return tuple(
        _Group(stage, frozenset(written.split()), Chem.MolFromSmarts(smarts), tuple(rows))
        for (stage, written, smarts), rows in collected.items()
    )


def written_features(text: str) -> frozenset[str]:
    """What a canonical SMILES shows of nitrogen and double bonds: the cheapest of the tests before a rewrite.

    Parameters
    ----------
    text : str
        Canonical SMILES, aromatic atoms in small letters. One with charges, isotopes or written hydrogen (which may
        stand between two neighbours) shows everything.

    Returns
    -------
    frozenset of str
        Of ``any``, ``n2`` (two aromatic nitrogens), ``nH``, ``C=N`` (or N=O), ``N=O``, ``OH+n`` (hydroxy or
        mercapto group, and aromatic nitrogen or C=N), ``OH+C=C`` (likewise, and C=C or C=N) and ``N+C=C``.

    Examples
    --------
    >>> sorted(written_features("Oc1ncccn1"))
    ['OH+n', 'any', 'n2']
    >>> sorted(written_features("CC(=N)N"))
    ['C=N', 'any']
    """
    if "+" in text or _WRITTEN_HYDROGEN.search(text):
        return _ALL_FEATURES
    found = ["any"]
    aromatic = text.count("n")
    if aromatic > 1:
        found.append("n2")
    if aromatic and "[nH" in text:
        found.append("nH")
    imine = _DOUBLE_BONDED_NITROGEN.search(text) is not None
    olefin = _CARBON_CARBON_DOUBLE_BOND.search(text) is not None
    if imine:
        found.append("C=N")
        if _NITROSO.search(text):
            found.append("N=O")
    olefin_and_nitrogen = olefin and "N" in text
    if (aromatic or imine or olefin) and _HYDROXY_OR_MERCAPTO.search(text):
        if aromatic or imine or olefin_and_nitrogen:
            found.append("OH+n")
        if imine or olefin:
            found.append("OH+C=C")
    if olefin_and_nitrogen:
        found.append("N+C=C")
    return frozenset(found)


def rewrite(mol: Chem.Mol, index: list[int], features: frozenset[str]) -> tuple[Chem.Mol, list[int]]:
    """Bring a neutral molecule to its ruling tautomer.

    Parameters
    ----------
    mol : Mol
        Sanitised molecule, never changed.
    index : list of int
        Input number of each atom. Where two nitrogens of an azole or amidine exchange roles, their numbers
        are exchanged too: the nitrogen that has no hydrogen keeps the number of the one that was drawn
        without.
    features : frozenset of str
        What its canonical SMILES shows, see `written_features`.

    Returns
    -------
    tuple of Mol and list of int
        The same two objects where nothing was to be done.
    """
    groups = [
        group
        for group in _groups()
        if group.written_with & features and mol.HasSubstructMatch(group.cheap_test)
    ]
    for _ in range(MAX_REWRITES_PER_ATOM * mol.GetNumAtoms() + 2):
        step = _one_rewrite(mol, index, groups)
        if step is None:
            break
        mol, index = step
        groups = [group for group in _groups() if mol.HasSubstructMatch(group.cheap_test)]
    return mol, index


def _one_rewrite(mol: Chem.Mol, index: list[int], groups: list[_Group]) -> tuple[Chem.Mol, list[int]] | None:
    """The first rewrite that applies, or None where the molecule is in its final form."""
    for group in groups:
        if group.stage == "tautomer":
            for row in group.rows:
                moved = _move_by_row(mol, row)
                if moved is not None:
                    return moved, index
        elif group.stage == "ring hydrogen":
            placed = _place_hydrogen(mol, index, group.rows)
            if placed is not None:
                return placed
        elif group.stage == "C=N nitrogen":
            placed = _place_double_bond(mol, index, group.rows)
            if placed is not None:
                return placed
        else:
            raise ValueError(f"rewrites.csv: stage {group.stage!r} isn't known")
    return None


def _drawn_ranks(mol: Chem.Mol) -> list[int]:
    """Rank of each atom in the form that was drawn: decides between atoms that the skeleton makes equal."""
    return isotopes_last(mol)


def _move_by_row(mol: Chem.Mol, row: _Row) -> Chem.Mol | None:
    matches = mol.GetSubstructMatches(row.pattern, uniquify=False)
    pairs = {(match[row.first], match[row.second]) for match in matches}
    if not matches:
        return None
    if row.edit:
        return _edited(mol, row, matches)
    ranks = skeleton_ranks(mol) if len(pairs) > 1 else range(mol.GetNumAtoms())
    drawn = _drawn_ranks(mol) if len(pairs) > 1 else ranks
    for donor, acceptor in sorted(
        pairs, key=lambda p: (ranks[p[0]], ranks[p[1]], drawn[p[0]], drawn[p[1]], p)
    ):
        moved = move_hydrogen(mol, donor, acceptor)
        if moved is not None:
            return moved
    return None


def _edited(mol: Chem.Mol, row: _Row, matches: tuple[tuple[int, ...], ...]) -> Chem.Mol | None:
    """The molecule after the edit cell of a row, on the match of lowest rank."""
    ranks = skeleton_ranks(mol) if len(matches) > 1 else range(mol.GetNumAtoms())
    drawn = _drawn_ranks(mol) if len(matches) > 1 else ranks
    match = min(matches, key=lambda atoms: ([ranks[a] for a in atoms], [drawn[a] for a in atoms], atoms))
    numbers = (atom.GetAtomMapNum() for atom in row.pattern.GetAtoms())
    edited = kekulised(mol)
    apply_edit(
        edited, row.edit, {number: atom for number, atom in zip(numbers, match, strict=True) if number}
    )
    try:
        finish(edited)
    except Chem.MolSanitizeException:
        return None
    return edited


def _keys(mol: Chem.Mol, pairs: set[tuple[int, int]], rows: tuple[_Row, ...]) -> dict[int, tuple[bool, ...]]:
    """Preference of each atom of some pairs, the smaller the better; rows are read until all pairs are
    decided.
    """
    keys: dict[int, tuple[bool, ...]] = {atom: () for pair in pairs for atom in pair}
    for row in rows:
        if all(keys[a] != keys[b] for a, b in pairs):
            break
        marked = {match[row.first] for match in mol.GetSubstructMatches(row.pattern, uniquify=False)}
        for atom in keys:
            keys[atom] = (*keys[atom], atom not in marked)
    return keys


def _ring_pairs(mol: Chem.Mol) -> Iterator[tuple[int, int]]:
    """Pairs of one N-H and one nitrogen without hydrogen in a common aromatic ring of five or six."""
    for ring in mol.GetRingInfo().AtomRings():
        if len(ring) not in (5, 6):
            continue
        atoms = [mol.GetAtomWithIdx(i) for i in ring]
        if not all(atom.GetIsAromatic() for atom in atoms):
            continue
        nitrogens = [
            a for a in atoms if a.GetAtomicNum() == 7 and a.GetDegree() == 2 and not a.GetFormalCharge()
        ]
        for donor in nitrogens:
            if donor.GetTotalNumHs():
                for acceptor in nitrogens:
                    if not acceptor.GetTotalNumHs():
                        yield donor.GetIdx(), acceptor.GetIdx()


def _place_hydrogen(
    mol: Chem.Mol, index: list[int], rows: tuple[_Row, ...]
) -> tuple[Chem.Mol, list[int]] | None:
    pairs = set(_ring_pairs(mol))
    if not pairs:
        return None
    keys = _keys(mol, pairs, rows)
    better = {pair for pair in pairs if keys[pair[1]] < keys[pair[0]]}
    level = {pair for pair in pairs if keys[pair[1]] == keys[pair[0]]}
    ranks = skeleton_ranks(mol) if level or len(better) > 1 else list(range(mol.GetNumAtoms()))
    better |= {pair for pair in level if ranks[pair[1]] < ranks[pair[0]]}
    drawn = _drawn_ranks(mol) if len(better) > 1 else ranks
    order = sorted(better, key=lambda p: (keys[p[1]], ranks[p[1]], ranks[p[0]], drawn[p[1]], drawn[p[0]], p))
    for donor, acceptor in order:
        moved = move_hydrogen(mol, donor, acceptor)
        if moved is not None:
            return moved, _exchanged(index, donor, acceptor)
    for donor, acceptor in sorted(p for p in level if ranks[p[1]] == ranks[p[0]]):
        moved = _smaller_smiles(mol, move_hydrogen(mol, donor, acceptor))
        if moved is not None:
            return moved, _exchanged(index, donor, acceptor)
    return None


def _place_double_bond(
    mol: Chem.Mol, index: list[int], rows: tuple[_Row, ...]
) -> tuple[Chem.Mol, list[int]] | None:
    units = sorted(set(mol.GetSubstructMatches(_amidine(), uniquify=False)))
    units = [unit for unit in units if not (_is_terminal(mol, unit[0]) and _is_terminal(mol, unit[2]))]
    if not units:
        return None
    keys = _keys(mol, {(unit[0], unit[2]) for unit in units}, rows)
    ranks: list[int] | None = None
    if any(keys[a] == keys[d] for a, _, d in units) or sum(keys[d] < keys[a] for a, _, d in units) > 1:
        ranks = skeleton_ranks(mol)

    def preference(atom: int) -> tuple[tuple[bool, ...], int]:
        return keys[atom], ranks[atom] if ranks else 0

    better = [unit for unit in units if preference(unit[2]) < preference(unit[0])]
    if better:
        drawn = _drawn_ranks(mol) if len(better) > 1 else range(mol.GetNumAtoms())
        better.sort(key=lambda u: (preference(u[2]), preference(u[0]), [drawn[atom] for atom in u], u))
        chosen = _disjoint(better)
        moved = _move_double_bonds(mol, chosen)
        if moved is not None:
            for acceptor, _, donor in chosen:
                index = _exchanged(index, donor, acceptor)
            return moved, index
    for acceptor, middle, donor in units:
        if preference(donor) == preference(acceptor):
            moved = _smaller_smiles(mol, _move_double_bonds(mol, [(acceptor, middle, donor)]))
            if moved is not None:
                return moved, _exchanged(index, donor, acceptor)
    marked = [unit for unit in units if _has_stereo(mol.GetBondBetweenAtoms(unit[0], unit[1]))]
    if marked:
        edited = Chem.RWMol(mol)
        for acceptor, middle, _ in marked:
            drop_bond_stereo(edited.GetBondBetweenAtoms(acceptor, middle))
        finish(edited)
        return edited, index
    return None


def _is_terminal(mol: Chem.Mol, atom: int) -> bool:
    """Whether a nitrogen has one neighbour: two such nitrogens of one carbon are equivalent."""
    return mol.GetAtomWithIdx(atom).GetDegree() == 1


@cache
def _amidine() -> Chem.Mol:
    return Chem.MolFromSmarts("[NX2;+0]=[CX3;+0]-[NX3;+0;!H0]")


def _has_stereo(bond: Chem.Bond) -> bool:
    return bool(bond.GetStereo() > Chem.BondStereo.STEREOANY)


def _disjoint(units: list[tuple[int, int, int]]) -> list[tuple[int, int, int]]:
    """The first unit and those after it that share no atom with one taken before."""
    taken: set[int] = set()
    chosen = []
    for unit in units:
        if taken.isdisjoint(unit):
            chosen.append(unit)
            taken.update(unit)
    return chosen


def _move_double_bonds(mol: Chem.Mol, units: list[tuple[int, int, int]]) -> Chem.RWMol | None:
    """Molecule with C=N moved in each unit (nitrogen that has it, carbon, nitrogen with hydrogen)."""
    edited = Chem.RWMol(mol)
    for acceptor, middle, donor in units:
        atom = mol.GetAtomWithIdx(donor)
        if not atom.GetNumExplicitHs() + atom.GetNumImplicitHs():
            return None
        flip(edited, (donor, middle, acceptor))
    try:
        finish(edited)
    except Chem.MolSanitizeException:
        return None
    return edited


def _smaller_smiles(mol: Chem.Mol, moved: Chem.Mol | None) -> Chem.Mol | None:
    """The moved form if it differs from the drawn one (in stereo, or by a C=C) and its text comes first.

    Nitrogens of equal rank in the skeleton are equivalent, but for these.
    """
    if moved is None or not (
        any(a.GetChiralTag() for a in mol.GetAtoms()) or mol.HasSubstructMatch(_olefin())
    ):
        return None
    return moved if _texts(moved) < _texts(mol) else None


def _texts(mol: Chem.Mol) -> tuple[str, str]:
    """Canonical SMILES without and with isotopes: the order of two forms, in which a label comes last."""
    plain = Chem.Mol(mol)
    for atom in plain.GetAtoms():
        atom.SetIsotope(0)
    return str(Chem.MolToSmiles(plain)), str(Chem.MolToSmiles(mol))


@cache
def _olefin() -> Chem.Mol:
    return Chem.MolFromSmarts("C=C")


def _exchanged(index: list[int], a: int, b: int) -> list[int]:
    index = list(index)
    index[a], index[b] = index[b], index[a]
    return index
