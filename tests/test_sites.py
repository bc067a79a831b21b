"""Sites: every class has compounds that belong to it, every nitrogen one class, and the table is sound."""

from __future__ import annotations

import csv
from collections import Counter, defaultdict
from pathlib import Path

import pytest
from rdkit import Chem

from basirank import sites
from basirank.graph import Graph, build_graph
from basirank.sites import SiteClass, acid_sites, classify_nitrogens, find_sites, site_classes
from basirank.structures import Parent, Refusal, read_parent
from basirank.tables import read_table

DATA = Path(__file__).resolve().parent.parent / "data"
KINDS = {"base", "acid", "none"}
LAST_RESORT = "other "

UNREACHABLE = {"other amine nitrogen"}
"""Rows of last resort behind rows that leave nothing over: no compound can show them."""


def rows_of(name: str) -> list[dict[str, str]]:
    with (DATA / name).open(encoding="utf-8", newline="") as handle:
        return list(csv.DictReader(line for line in handle if not line.startswith("#")))


EXAMPLES = rows_of("class_examples.csv")

GAPS = {
    # oxadiazoline with a fixed imino group: its ring nitrogen, hardly basic, has no row of its own
    "Cn1nc(-c2ccccc2)oc1=Nc1ccccc1",
}


def examples() -> list:
    """Examples as parameters."""
    return [pytest.param(row, id=f"{row['compound']}: {row['name']}") for row in EXAMPLES]


OUTSIDE_THE_CHEAP_TEST = {
    # a nitrilium ion: the pattern of `iminium` would take it, its cheap test (a trigonal N+) keeps it out
    "CC#[N+]C.[O-]S(=O)(=O)C(F)(F)F",
}


def project_structures() -> dict[str, str]:
    """SMILES of every structure in the project's tables, and the table it stands in."""
    found: dict[str, str] = {}
    for table in ("check_values.csv", "first_site.csv", "charge_states.csv", "class_examples.csv"):
        for row in rows_of(table):
            found.setdefault(row["smiles"], table)
    for line in (DATA / "demo.smi").read_text(encoding="utf-8").splitlines():
        found.setdefault(line.split()[0], "demo.smi")
    return found


@pytest.fixture(scope="module")
def project() -> list[tuple[str, str, Parent, Graph]]:
    """Structure, table, parent and graph of every structure of the project that can be read."""
    found = []
    for smiles, table in project_structures().items():
        try:
            parent = read_parent(smiles)
        except Refusal:
            continue
        found.append((smiles, table, parent, build_graph(parent.mol)))
    return found


def alike(parent: Parent, atom: int) -> set[int]:
    """The atom with this number in the input and those that symmetry makes equivalent to it."""
    ranks = list(Chem.CanonicalRankAtoms(parent.mol, breakTies=False, includeChirality=False))
    wanted = ranks[parent.atom_index.index(atom)]
    return {index for index, rank in enumerate(ranks) if rank == wanted}


@pytest.mark.parametrize("row", examples())
def test_the_example_ends_in_its_class_at_its_atom(row):
    parent = read_parent(row["smiles"])
    graph = build_graph(parent.mol)
    places = alike(parent, int(row["atom"]))
    classes, bases = classify_nitrogens(parent.mol, graph)
    if row["kind"] == "none":
        assert {classes.get(atom) for atom in places} == {row["name"]}
    else:
        found = bases if row["kind"] == "base" else acid_sites(parent.mol, graph)
        assert row["name"] in {site.site_class for site in found if site.atom in places}
        assert all(site.kind == row["kind"] for site in found)


def test_every_class_of_the_table_has_an_example():
    shown = {(row["name"], row["kind"]) for row in EXAMPLES}
    rows = {(row.name, row.kind) for row in site_classes() if row.name not in UNREACHABLE}
    assert rows - shown == set()
    assert shown - rows == set()


def test_every_nitrogen_of_every_structure_has_exactly_one_class(project):
    for smiles, _, parent, graph in project:
        classes, _ = classify_nitrogens(parent.mol, graph)
        nitrogens = {atom for atom, element in enumerate(graph.element) if element == 7}
        assert set(classes) == nitrogens, smiles


def test_no_nitrogen_of_known_compounds_falls_to_a_row_of_last_resort(project):
    meant = {row["smiles"] for row in EXAMPLES if row["name"].startswith(LAST_RESORT)}
    found = {}
    for smiles, _, parent, graph in project:
        classes = set(classify_nitrogens(parent.mol, graph)[0].values())
        if smiles not in meant | GAPS and any(name.startswith(LAST_RESORT) for name in classes):
            found[smiles] = classes
    assert found == {}


def test_sites_lie_on_different_atoms_within_each_kind_and_their_core_holds_them(project):
    for smiles, _, parent, graph in project:
        found = find_sites(parent.mol, graph, parent.output_order)
        counted = Counter((site.atom, site.kind) for site in found)
        assert set(counted.values()) <= {1}, smiles
        for site in found:
            assert site.atom in site.core
            assert (1, site.atom) in site.anchors
            assert {atom for _, atom in site.anchors} <= set(site.core)
            if site.kind == "acid":
                assert graph.hydrogens[site.atom] > 0, (smiles, site.site_class)


def test_the_order_of_atoms_does_not_change_the_classes(project):
    for smiles, _, parent, _graph in project[::7]:
        size = parent.mol.GetNumAtoms()
        order = [(7 * k + 3) % size for k in range(size)] if size % 7 else list(range(size))[::-1]
        mixed = Chem.RenumberAtoms(parent.mol, order)
        classes, bases = classify_nitrogens(parent.mol, build_graph(parent.mol))
        again, bases_again = classify_nitrogens(mixed, build_graph(mixed))
        assert Counter(again.values()) == Counter(classes.values()), smiles
        assert Counter(s.site_class for s in bases_again) == Counter(s.site_class for s in bases), smiles


@pytest.mark.parametrize(
    ("compound", "smiles"),
    [
        ("4-phenylmorpholine", "c1ccccc1N1CCOCC1"),
        ("1-phenylpiperidine", "c1ccccc1N1CCCCC1"),
        ("1-phenylpyrrolidine", "c1ccccc1N1CCCC1"),
    ],
)
def test_a_ring_amine_that_bears_an_aryl_group_is_not_fused_to_it(compound, smiles):
    parent = read_parent(smiles)
    classes, _ = classify_nitrogens(parent.mol, build_graph(parent.mol))
    assert set(classes.values()) == {"tertiary arylamine"}


# the table


def values_of(rows: list[SiteClass]) -> set[tuple[str, str, str, str]]:
    return {(row.kind, row.family, f"{row.parent:g}", f"{row.sd:g}") for row in rows}


def by_name() -> dict[str, list[SiteClass]]:
    found: dict[str, list[SiteClass]] = defaultdict(list)
    for row in site_classes():
        if row.kind != "none":
            found[row.name].append(row)
    return found


def test_all_rows_of_one_class_share_kind_family_and_parent_value():
    assert {name: values for name, rows in by_name().items() if len(values := values_of(rows)) > 1} == {}


def test_one_name_stands_for_one_kind():
    kinds: dict[str, set[str]] = defaultdict(set)
    for row in site_classes():
        kinds[row.name].add(row.kind)
    assert {name for name, found in kinds.items() if len(found) > 1} == set()


def test_a_row_has_a_kind_a_note_a_source_and_marks_its_atoms():
    for row in site_classes():
        assert row.kind in KINDS
        assert row.source
        assert row.note or row.kind == "none", row.name
        roles = [role for _, role in row.roles]
        assert roles.count(1) == (0 if row.kind == "none" else 1), row.name
        assert set(roles) <= set(range(1, 10)), row.name
        if row.kind == "none":
            assert any(2 <= role <= 4 for role in roles), row.name


def test_the_families_of_bases_and_acids_are_known_and_have_a_parent_value():
    families = {row["family"] for row in read_table("families.csv")}
    for row in site_classes():
        if row.kind == "none":
            assert row.family == "", row.name
        else:
            assert row.family in families, row.name
            assert -12.0 < row.parent < 17.0, row.name
            assert 0.0 < row.sd <= 4.0, row.name


def test_the_parent_value_lies_near_the_one_that_its_note_names():
    """The parent of a class is the compound that its note names, with its measured constant."""
    parents = {name: rows[0].parent for name, rows in by_name().items()}
    named = {
        "trimethylamine N-oxide": ("amine N-oxide", 4.65),
        "pyridine": ("pyridine", 5.2),
        "imidazole": ("imidazole", 7.0),
        "aniline": ("primary arylamine", 4.6),
        "quinoline": ("quinoline", 4.9),
        "piperidine": ("cyclic secondary amine", 11.1),
        "guanidine": ("guanidine", 13.6),
        "acetic acid": ("carboxylic acid", 4.76),
        "phenol": ("naphthol or phenol", 9.99),
        "benzoic acid": ("benzoic acid", 4.20),
    }
    for compound, (name, value) in named.items():
        assert parents[name] == pytest.approx(value, abs=0.15), compound


def forget_the_table() -> None:
    """Empty what the module has kept of the table."""
    for kept in vars(sites).values():
        if hasattr(kept, "cache_clear"):
            kept.cache_clear()


def found_in(project: list[tuple[str, str, Parent, Graph]]) -> dict[str, tuple[set, set]]:
    found = {}
    for smiles, _, parent, graph in project:
        classes, bases = classify_nitrogens(parent.mol, graph)
        both = bases + acid_sites(parent.mol, graph)
        found[smiles] = (set(classes.items()), {(site.atom, site.kind, site.site_class) for site in both})
    return found


def test_the_screen_lets_through_whatever_matches(project):
    """A row that is not on the shortlist of a molecule, or not for an atom, matches nowhere there."""
    for smiles, _, parent, graph in project[::3]:
        shortlist, centres = sites._screen().shortlist(graph)
        for place, row in enumerate(site_classes()):
            last = 1 if row.kind == "acid" else 4
            for match in parent.mol.GetSubstructMatches(row.pattern, uniquify=False):
                assert place in shortlist, (smiles, row.name)
                for query, role in row.roles:
                    assert role > last or centres[match[query]] >> place & 1, (smiles, row.name)


def test_the_cheap_test_of_a_row_changes_nothing(project, monkeypatch):
    """`needs` is a shortcut: with it left out every atom ends in the same class."""
    project = [one for one in project if one[0] not in OUTSIDE_THE_CHEAP_TEST]
    quick = found_in(project)
    bare = tuple({**row, "needs": ""} for row in read_table("site_classes.csv"))
    monkeypatch.setattr(sites, "read_table", lambda name: bare)
    forget_the_table()
    try:
        assert not any(row.needs for row in site_classes())
        thorough = found_in(project)
    finally:
        monkeypatch.undo()
        forget_the_table()
    assert {smiles: thorough[smiles] for smiles in quick if quick[smiles] != thorough[smiles]} == {}
