"""Substituents: groups are known however they are written; walks fade and count as Taft and Hammett say."""

from __future__ import annotations

from collections import defaultdict

import pytest
from rdkit import Chem

from basirank.graph import build_graph
from basirank.sites import find_sites
from basirank.structures import read_parent
from basirank.substituents import ChainHit, Group, RingHit, Substituents, chain_walk, ring_walk, spell
from basirank.tables import read_table, read_toml

HANSCH = "Hansch, Leo and Taft 1991 (memory)"
PERRIN = "Perrin, Dempsey and Serjeant 1981 (memory)"
TAFT = "Taft 1956 (memory)"

ATTENUATION = read_toml("scales.toml")["attenuation"]["value"]
STAR_PER_I = read_toml("scales.toml")["sigma_star_per_sigma_i"]["value"]


def seen(smiles: str, anchor: int = 0, first: int = 1) -> Group:
    """Group that starts at atom `first`, seen from `anchor`."""
    graph = build_graph(Chem.MolFromSmiles(smiles))
    return Substituents(graph).group(first, anchor)


def on_carbon(group: str) -> Group:
    """The group, as written from its point of attachment, bound to carbon."""
    return seen(f"C{group}")


# (group written from its point of attachment, sigma meta, sigma para, source)
HAMMETT = [
    ("[N+](=O)[O-]", 0.71, 0.78, HANSCH),
    ("C#N", 0.56, 0.66, HANSCH),
    ("C(F)(F)F", 0.43, 0.54, HANSCH),
    ("OC(F)(F)F", 0.38, 0.35, HANSCH),
    ("F", 0.34, 0.06, HANSCH),
    ("Cl", 0.37, 0.23, HANSCH),
    ("Br", 0.39, 0.23, HANSCH),
    ("I", 0.35, 0.18, HANSCH),
    ("C", -0.07, -0.17, HANSCH),
    ("CC", -0.07, -0.15, HANSCH),
    ("C(C)C", -0.04, -0.15, HANSCH),
    ("C1CC1", -0.07, -0.21, HANSCH),
    ("C(C)(C)C", -0.10, -0.20, HANSCH),
    ("c1ccccc1", 0.06, -0.01, HANSCH),
    ("c1ccccn1", 0.33, 0.17, HANSCH),
    ("c1cccnc1", 0.23, 0.25, HANSCH),
    ("c1ccncc1", 0.27, 0.44, HANSCH),
    ("C=C", 0.06, -0.04, HANSCH),
    ("C#C", 0.21, 0.23, HANSCH),
    ("O", 0.12, -0.37, HANSCH),
    ("OC", 0.12, -0.27, HANSCH),
    ("OCC", 0.10, -0.24, HANSCH),
    ("Oc1ccccc1", 0.25, -0.03, HANSCH),
    ("OC(C)=O", 0.39, 0.31, HANSCH),
    ("N", -0.16, -0.66, HANSCH),
    ("N(C)C", -0.16, -0.83, HANSCH),
    ("NC(C)=O", 0.21, 0.00, HANSCH),
    ("NS(C)(=O)=O", 0.20, 0.03, HANSCH),
    ("[N+](C)(C)C", 0.88, 0.82, HANSCH),
    ("N=[N+]=[N-]", 0.37, 0.08, HANSCH),
    ("N=Nc1ccccc1", 0.32, 0.39, HANSCH),
    ("SC", 0.15, 0.00, HANSCH),
    ("S(C)=O", 0.52, 0.49, HANSCH),
    ("S(C)(=O)=O", 0.60, 0.72, HANSCH),
    ("C=O", 0.35, 0.42, HANSCH),
    ("C(C)=O", 0.38, 0.50, HANSCH),
    ("C(=O)c1ccccc1", 0.34, 0.43, HANSCH),
    ("C(=O)O", 0.37, 0.45, HANSCH),
    ("C(=O)OCC", 0.37, 0.45, HANSCH),
    ("C(N)=O", 0.28, 0.36, HANSCH),
    ("[Si](C)(C)C", -0.04, -0.07, HANSCH),
]


@pytest.mark.parametrize(("group", "meta", "para", "source"), HAMMETT)
def test_the_hammett_constants_of(group, meta, para, source):
    found = on_carbon(group)
    assert not found.estimated
    assert found.sigma_meta == pytest.approx(meta, abs=0.02), source
    assert found.sigma_para == pytest.approx(para, abs=0.02), source


@pytest.mark.parametrize(
    ("group", "star", "source"),
    [
        ("C", 0.00, TAFT),
        ("CC", -0.10, TAFT),
        ("C(C)C", -0.19, TAFT),
        ("C(C)(C)C", -0.30, TAFT),
        ("c1ccccc1", 0.60, TAFT),
        ("Cc1ccccc1", 0.22, TAFT),
        ("C(F)(F)F", 2.61, TAFT),
        ("C(C)=O", 1.65, TAFT),
        ("C(=O)OC", 2.00, TAFT),
        ("C#N", 3.30, PERRIN),
        ("O", 1.34, PERRIN),
        ("OC", 1.81, PERRIN),
        ("Cl", 2.96, PERRIN),
        ("F", 3.21, PERRIN),
    ],
)
def test_the_polar_constants_of(group, star, source):
    assert on_carbon(group).sigma_star == pytest.approx(star, abs=0.05), source


@pytest.mark.parametrize(
    ("group", "minus"),
    [("[N+](=O)[O-]", 1.27), ("C#N", 1.00), ("C(C)=O", 0.84), ("S(C)(=O)=O", 1.13), ("C=O", 1.03)],
)
def test_an_acceptor_in_conjugation_with_an_amine_counts_more(group, minus):
    """sigma-: Hansch, Leo and Taft 1991 (memory)."""
    found = on_carbon(group)
    assert found.sigma_minus == pytest.approx(minus, abs=0.02)
    assert found.sigma_minus > found.sigma_para


@pytest.mark.parametrize(
    ("one", "other", "carrier", "first"),
    [
        ("CC(=O)OCC", "O(CC)C(C)=O", 4, 3),
        ("CC(=O)NC", "CNC(=O)C", 4, 2),
        ("C[N+](=O)[O-]", "[O-][N+](C)=O", 2, 1),
        ("Cc1ncccc1", "n1c(C)cccc1", 2, 1),
        ("CS(=O)(=O)N", "NS(C)(=O)=O", 2, 1),
        ("CC(F)(F)F", "FC(F)(F)C", 4, 1),
        ("CC1=CC=CC=C1", "c1(C)ccccc1", 1, 0),
        ("CC1CC1", "C1CC1C", 3, 2),
    ],
)
def test_a_group_is_the_same_however_it_is_spelled(one, other, carrier, first):
    assert seen(one) == seen(other, carrier, first)


@pytest.mark.parametrize(
    ("one", "other"),
    [
        ("C1CC1", "C(C)C"),  # three-membered ring, and open
        ("C(=O)OC", "OC(C)=O"),  # ester from its acid's and from its alcohol's side
        ("C(=O)NC", "NC(C)=O"),
        ("S(=O)(=O)NC", "NS(C)(=O)=O"),
        ("c1ccccn1", "c1ccncc1"),
        ("SC#N", "N=C=S"),
        ("OC", "O"),
        ("C(F)(F)F", "C(Cl)(Cl)Cl"),
    ],
)
def test_groups_that_look_alike_are_kept_apart(one, other):
    assert on_carbon(one).name != on_carbon(other).name
    assert on_carbon(one) != on_carbon(other)


def test_an_isotope_does_not_change_a_group():
    assert seen("CO[2H]") == seen("CO")
    assert seen("C[13CH3]") == seen("CC")


# the table


def keys() -> dict[tuple[int, str], list[str]]:
    """Names of the rows by depth and spelling."""
    found = defaultdict(list)
    for row in read_table("substituents.csv"):
        graph = build_graph(Chem.MolFromSmiles(row["smiles"]))
        ((first, order),) = graph.neighbours[0]
        depth = int(row["depth"])
        found[depth, spell(graph, first, 0, order, depth)].append(row["name"])
    return found


def test_no_two_rows_of_the_table_mean_the_same_group():
    doubled = {tuple(names) for names in keys().values() if len(names) > 1}
    assert doubled == set()


@pytest.mark.parametrize(
    ("group", "name"),
    [
        ("C1CCCC1", "cyclopentyl or cyclohexyl"),
        ("N1CCCC1", "pyrrolidino or piperidino"),
        ("n1cccc1", "1-pyrrolyl"),
        ("C1CC1", "cyclopropyl"),
    ],
)
def test_rings_that_act_alike_share_a_row_and_small_rings_have_their_own(group, name):
    assert on_carbon(group).name == name


def test_a_deeper_row_for_the_same_group_differs_little_from_the_shallower():
    """What a row of few bonds says of a group may not be far from what its own detailed row says."""
    for row in read_table("substituents.csv"):
        graph = build_graph(Chem.MolFromSmiles(row["smiles"]))
        ((first, order),) = graph.neighbours[0]
        found = Substituents(graph).group(first, 0, order)
        assert not found.estimated, row["name"]
        for column, value in (("sigma_m", found.sigma_meta), ("sigma_p", found.sigma_para)):
            if row[column]:
                assert float(row[column]) == pytest.approx(value, abs=0.25), (row["name"], found.name, column)
        assert row["source"], row["name"]


# groups that are in no table


@pytest.mark.parametrize(
    ("group", "of"),
    [
        ("C1(F)CC1", "a fluorinated cyclopropane draws electrons"),
        ("[Te]C", "a tellurium ether"),
        ("[As](C)C", "an arsine"),
    ],
)
def test_a_group_in_no_table_says_that_it_was_estimated(group, of):
    found = on_carbon(group)
    assert found.estimated, of
    assert "estimated" in found.name
    assert found.source.startswith("derived")
    assert 0.0 < found.sigma_i < 0.7
    assert found.sigma_star == pytest.approx(STAR_PER_I * found.sigma_i)


def test_the_estimate_grows_with_each_fluorine_and_fades_along_the_chain():
    names = ("[As](C)C", "[As](C)CCF", "[As](C)CF", "[As](CF)CF")
    arsines = [on_carbon(group) for group in names]
    assert all(group.estimated for group in arsines)
    constants = [group.sigma_i for group in arsines]
    assert constants == sorted(constants)
    assert len(set(constants)) == len(constants)


# walks along saturated chains


def chain(smiles: str, anchor: int = 0) -> list[ChainHit]:
    return list(
        chain_walk(Substituents(build_graph(Chem.MolFromSmiles(smiles))), anchor, frozenset({anchor}))
    )


def test_an_effect_fades_by_the_same_factor_for_each_methylene():
    """Taft 1956: sigma*(CH2X) = sigma*(X) / 2.8; 0.4 to 0.45 for amines."""
    assert 0.35 <= ATTENUATION <= 0.46
    shares = []
    for smiles in ("NCCl", "NCCCl", "NCCCCl", "NCCCCCl"):
        (hit,) = chain(smiles)
        assert hit.group.name == "chloro"
        shares.append(hit.share)
    assert shares == pytest.approx([ATTENUATION**k for k in (1, 2, 3, 4)])


def test_the_distance_is_counted_in_bonds_from_the_nitrogen():
    assert [(hit.group.name, hit.distance) for hit in chain("NCCO")] == [("hydroxy", 3)]
    assert [(hit.group.name, hit.distance) for hit in chain("NCC(F)(F)F")] == [("trifluoromethyl", 2)]


def test_the_oxygen_of_morpholine_is_met_on_both_sides_of_the_ring():
    hits = chain("N1CCOCC1")
    assert [(hit.group.name, hit.distance) for hit in hits] == [(hits[0].group.name, 3)] * 2
    assert {hit.atoms for hit in hits} == {(3,)}
    (open_chain,) = chain("NCCOC")
    assert sum(hit.sigma_star for hit in hits) == pytest.approx(2 * open_chain.sigma_star, rel=0.1)


def test_the_bridge_of_quinuclidine_is_met_on_all_three():
    assert len(chain("N12CCC(O)(CC1)CC2")) == 3


def test_two_groups_on_one_carbon_are_two_hits():
    assert sorted(hit.group.name for hit in chain("NCC(O)Cl")) == ["chloro", "hydroxy"]


def test_trifluoromethyl_is_one_group_and_a_single_fluorine_on_a_chain_another():
    (one,) = chain("NCC(F)(F)F")
    (two,) = chain("NCCF")
    assert (one.group.name, two.group.name) == ("trifluoromethyl", "fluoro")
    assert one.sigma_star > two.sigma_star > 0


def test_an_amine_without_groups_has_none():
    assert chain("NCCCCC") == []
    assert chain("N1CCCCC1") == []


def test_past_the_first_bond_a_group_acts_by_its_inductive_constant():
    (hit,) = chain("NCCOC")
    assert hit.sigma_star == pytest.approx(hit.group.sigma_i * STAR_PER_I * hit.share)
    (direct,) = [hit for hit in chain("NC(C)=O") if hit.distance == 1]
    assert direct.sigma_star == direct.group.sigma_star


def test_a_nitro_group_across_the_ring_of_benzylamine_is_felt_through_the_ring():
    names = {hit.group.name: hit for hit in chain("NCc1ccc([N+](=O)[O-])cc1")}
    through = names["nitro on the ring"]
    assert through.atoms == (6,)
    assert (
        0
        < through.sigma_star
        < 0.5 * names["phenyl" if "phenyl" in names else "4-nitrophenyl"].sigma_star + 0.5
    )


def test_what_stands_beyond_an_ether_oxygen_is_felt_more_weakly():
    hits = {hit.group.name: hit for hit in chain("NCCOCCCl")}
    assert hits["chloro"].share < 0.2 * next(h for n, h in hits.items() if n != "chloro").share


@pytest.mark.parametrize(
    "smiles",
    [
        "NC(=N)NCCO",
        "CC(=O)NCCN",
        "OCCn1ccnc1",
        "NCc1ccc(O)cc1",
        "C1CN2CCC1CC2",
        "CN1C2CCC1CC(C2)O",
        "NCC1CCC(CO)CC1",
    ],
)
def test_no_walk_enters_the_unit_of_the_site(smiles):
    parent = read_parent(smiles)
    graph = build_graph(parent.mol)
    substituents = Substituents(graph)
    for site in find_sites(parent.mol, graph, parent.output_order):
        core = frozenset(site.core)
        for _, anchor in site.anchors:
            met = [atom for hit in chain_walk(substituents, anchor, core) for atom in hit.atoms]
            if graph.aromatic[anchor]:
                met += [atom for hit in ring_walk(substituents, anchor, core) for atom in hit.atoms]
            assert core.isdisjoint(met)


def test_the_unit_of_a_guanidine_is_not_a_substituent_of_itself():
    parent = read_parent("NC(=N)NCCO")
    graph = build_graph(parent.mol)
    (site,) = [s for s in find_sites(parent.mol, graph, parent.output_order) if s.kind == "base"]
    assert site.site_class == "guanidine"
    names = [
        hit.group.name
        for _, anchor in site.anchors
        for hit in chain_walk(Substituents(graph), anchor, frozenset(site.core))
    ]
    assert names == ["hydroxy"]


# walks round aromatic rings


def ring(smiles: str, anchor: int) -> list[RingHit]:
    return list(ring_walk(Substituents(build_graph(Chem.MolFromSmiles(smiles))), anchor, frozenset({anchor})))


@pytest.mark.parametrize(
    ("compound", "smiles", "position"),
    [
        ("2-chloropyridine", "n1c(Cl)cccc1", "ortho"),
        ("3-chloropyridine", "n1cc(Cl)ccc1", "meta"),
        ("4-chloropyridine", "n1ccc(Cl)cc1", "para"),
        ("5-chloroquinoline", "n1cccc2c(Cl)cccc12", "far"),
        ("6-chloroquinoline", "n1cccc2cc(Cl)ccc12", "far"),
        ("7-chloroquinoline", "n1cccc2ccc(Cl)cc12", "far"),
        ("8-chloroquinoline", "n1cccc2cccc(Cl)c12", "far"),
        ("2-chloroimidazole, from N3", "n1c(Cl)[nH]cc1", "ortho"),
        ("4-chloroimidazole, from N3", "n1cc(Cl)[nH]c1", "meta"),
    ],
)
def test_the_position_of_the_chlorine_of(compound, smiles, position):
    (hit,) = [hit for hit in ring(smiles, 0) if hit.feature == "group"]
    assert hit.group.name == "chloro"
    assert hit.position == position


def test_from_the_nitrogen_of_aniline_the_ring_is_read_from_its_carbon():
    (hit,) = [
        hit for hit in ring("c1(N)ccc(Cl)cc1", 0) if hit.feature == "group" and hit.group.name == "chloro"
    ]
    assert hit.position == "para"
    assert hit.sigma_para == pytest.approx(0.23)


def test_only_alternate_atoms_are_in_conjugation_with_the_nitrogen():
    """2- and 4-substituents of pyridine act by resonance, 3-substituents do not."""
    alternant = {
        smiles: next(hit for hit in ring(smiles, 0) if hit.feature == "group").alternant
        for smiles in ("n1c(Cl)cccc1", "n1cc(Cl)ccc1", "n1ccc(Cl)cc1")
    }
    assert list(alternant.values()) == [True, False, True]


def test_in_quinoline_positions_5_and_7_conjugate_with_the_nitrogen_and_6_and_8_do_not():
    found = {}
    for place, smiles in enumerate(
        ("n1cccc2c(N)cccc12", "n1cccc2cc(N)ccc12", "n1cccc2ccc(N)cc12", "n1cccc2cccc(N)c12"), 5
    ):
        (hit,) = [hit for hit in ring(smiles, 0) if hit.feature == "group"]
        found[place] = hit.alternant
    assert found == {5: True, 6: False, 7: True, 8: False}


def test_a_group_on_a_fused_ring_fades_with_distance():
    near, far = (
        next(hit for hit in ring(smiles, 0) if hit.feature == "group")
        for smiles in ("n1cccc2cccc(Cl)c12", "n1cccc2cc(Cl)ccc12")
    )
    assert near.fade > far.fade > 0
    own = next(hit for hit in ring("n1ccc(Cl)cc1", 0) if hit.feature == "group")
    assert own.fade == 1.0


@pytest.mark.parametrize(
    ("compound", "smiles", "position"),
    [
        ("pyridazine", "n1ncccc1", "ortho"),
        ("pyrimidine", "n1cnccc1", "meta"),
        ("pyrazine", "n1ccncc1", "para"),
    ],
)
def test_the_second_nitrogen_of(compound, smiles, position):
    assert [hit.position for hit in ring(smiles, 0) if hit.feature == "aza"] == [position]


def test_each_fused_carbon_is_reported_as_fusion():
    assert [hit.position for hit in ring("n1cccc2ccccc12", 0) if hit.feature == "fusion"] == ["ortho", "meta"]
    assert ring("n1ccccc1", 0) == []


def test_imidazole_and_thiazole_show_their_other_heteroatom():
    assert [hit.feature for hit in ring("n1c[nH]cc1", 0)] == ["pyrrole-type nitrogen"]
    assert [hit.feature for hit in ring("n1cscc1", 0)] == ["chalcogen"]
