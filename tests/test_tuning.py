"""Tuning: published effects of edits, what is in the window and in which order, shifts with their reasons, pictures."""

from __future__ import annotations

import json
import math
import re
import subprocess
import sys
from itertools import pairwise
from pathlib import Path
from xml.etree import ElementTree

import pytest
from conftest import heading, table
from hypothesis import given, settings
from hypothesis import strategies as st
from rdkit import Chem

import basirank
from basirank import annotate, condition, scan, tune
from basirank.candidates import MOST_PAIRED
from basirank.drawing import draw
from basirank.edit_pairs import precedent
from basirank.placement import Box
from basirank.tuning import Tuning, clean_window
from basirank.tuning_figures import MOST_MAPS, colour, scan_figure, tuning_figure
from basirank.tuning_text import COLUMNS, SCAN_COLUMNS

ROOT = Path(__file__).resolve().parent.parent
GEFITINIB = "COc1cc2ncnc(Nc3ccc(F)c(Cl)c3)c2cc1OCCCN1CCOCC1"
BENZYLPIPERIDINE = "C1CCCCN1Cc1ccccc1"


@pytest.fixture(scope="module")
def benzylpiperidine() -> Tuning:
    return tune(BENZYLPIPERIDINE, (6.5, 7.5))


@pytest.fixture(scope="module")
def butylamine() -> Tuning:
    return tune("CCCCN", (3.5, 4.5), edits=2)


@pytest.fixture(scope="module")
def gefitinib() -> Tuning:
    return tune(GEFITINIB, "5.5:6.5")


def shifts(smiles: str, edit: str, **options: object) -> dict[str, tuple[float, float]]:
    """Value and shift of each product of an edit."""
    return {point.smiles: (point.value, point.shift) for point in scan(smiles, edit, **options).points}


@pytest.mark.parametrize(
    ("edit", "product", "measured"),
    # ethylamine 10.7 with one, two and three fluorines: Morgenthaler et al. 2007, ChemMedChem 2, 1100 (memory)
    [("beta-fluoro", "NCCF", 9.0), ("beta-difluoro", "NCC(F)F", 7.3), ("beta-trifluoro", "NCC(F)(F)F", 5.7)],
)
def test_each_fluorine_beta_to_the_nitrogen_takes_a_unit_and_a_half(edit, product, measured):
    value, shift = shifts("CCN", edit)[product]
    assert value == pytest.approx(measured, abs=0.5)
    assert shift == pytest.approx(measured - 10.7, abs=0.5)


def test_a_fluorine_shifts_less_the_further_away_it_is():
    # per fluorine -1.7 beta, -0.7 gamma, -0.3 delta: Morgenthaler et al. 2007, ChemMedChem 2, 1100 (memory)
    found = [shifts("CCCCN", f"{place}-fluoro") for place in ("beta", "gamma", "delta")]
    (beta,), (gamma,), (delta,) = ([shift for _, shift in one.values()] for one in found)
    assert beta == pytest.approx(-1.7, abs=0.5)
    assert gamma == pytest.approx(-0.7, abs=0.4)
    assert delta == pytest.approx(-0.3, abs=0.3)


def test_piperidine_falls_to_morpholine_and_halfway_to_fluoropiperidine():
    # piperidine 11.1, morpholine 8.4: Perrin 1965 (memory)
    six = shifts("C1CCCCN1", "six-membered ring")
    assert six["C1COCCN1"][1] == pytest.approx(8.4 - 11.1, abs=0.5)
    # 4,4-difluoro falls further than 4-fluoro: Morgenthaler et al. 2007 (memory)
    assert -2.5 < six["FC1CCNCC1"][1] < -0.8
    assert six["FC1(F)CCNCC1"][1] < six["FC1CCNCC1"][1] - 0.5


def test_an_oxetane_lowers_the_constant_most_beside_the_nitrogen():
    # order alpha, beta, gamma: Wuitschik et al. 2010, J. Med. Chem. 53, 3227 (memory)
    amine = "CN(C)CCCCc1ccc(C(C)(C)C)cc1"
    found = [shifts(amine, f"{place}-oxetane") for place in ("alpha", "beta", "gamma")]
    alpha, beta, gamma = (min(shift for _, shift in one.values()) for one in found)
    assert alpha < beta < gamma < 0.1 and alpha < -1.0
    # an N-methyl for an N-oxetan-3-yl, which has the oxygen at the same place
    assert shifts(amine, "N-methyl-to-oxetan-3-yl").popitem()[1][1] < -1.0


def test_an_aza_walk_through_benzylamine_costs_a_unit():
    # benzylamine 9.35, 2- and 3- and 4-picolylamine 8.6, 8.0, 8.3 (nearly): Perrin 1972 (memory)
    walk = shifts("NCc1ccccc1", "phenyl-to-pyridyl")
    assert set(walk) == {"NCc1ccccn1", "NCc1cccnc1", "NCc1ccncc1"}
    assert all(-1.8 < shift < -0.4 for _, shift in walk.values())


def test_aza_walks_through_pyridine_give_the_diazines():
    # pyridazine 2.24, pyrimidine 1.23, pyrazine 0.65: Albert, Goldacre and Phillips 1948 (memory)
    for edit, product, measured in (
        ("pyridine-to-pyridazine", "c1ccnnc1", 2.24),
        ("pyridine-to-pyrimidine", "c1cncnc1", 1.23),
        ("pyridine-to-pyrazine", "c1cnccn1", 0.65),
    ):
        assert shifts("c1ccncc1", edit)[product][0] == pytest.approx(measured, abs=0.6)


def test_groups_on_aniline_work_through_the_ring():
    # 4-nitroaniline 1.0, 4-methoxyaniline 5.34, 3-methoxyaniline 4.2: Perrin 1965 (memory)
    assert shifts("Nc1ccccc1", "aryl-nitro")["Nc1ccc([N+](=O)[O-])cc1"][0] == pytest.approx(1.0, abs=0.4)
    methoxy = shifts("Nc1ccccc1", "aryl-methoxy")
    assert methoxy["COc1ccc(N)cc1"][0] == pytest.approx(5.34, abs=0.4)
    assert methoxy["COc1cccc(N)c1"][0] == pytest.approx(4.2, abs=0.4)


def test_an_acylated_guanidine_is_a_base_of_another_kind():
    # guanidines 13 to 14, acylguanidines near 8: Perrin 1965 (memory)
    value, shift = shifts("CCNC(N)=N", "guanidine-N-acetyl").popitem()[1]
    assert value == pytest.approx(8.0, abs=1.0) and shift < -3.5


def test_those_in_the_window_come_first_by_change_then_by_probability(benzylpiperidine):
    hits = benzylpiperidine.hits
    assert len(hits) > 3 and all(6.5 <= one.value <= 7.5 for one in hits)
    assert benzylpiperidine.candidates[: len(hits)] == hits
    keys = [(one.cost, -one.probability) for one in hits]
    assert keys == sorted(keys)
    away = [max(6.5 - one.value, one.value - 7.5) for one in benzylpiperidine.candidates[len(hits) :]]
    assert away == sorted(away) and all(one > 0 for one in away)
    assert "piperidine-to-morpholine" in [one.edits[0] for one in hits]


def test_a_product_is_there_once_and_never_the_structure_itself(benzylpiperidine, gefitinib, butylamine):
    for found in (benzylpiperidine, gefitinib, butylamine):
        smiles = [one.smiles for one in found.candidates]
        assert len(set(smiles)) == len(smiles) and found.parent_smiles not in smiles


def test_the_value_is_that_of_annotate_and_the_probability_that_of_its_interval(gefitinib):
    some = gefitinib.candidates[::9]
    frame = annotate([one.smiles for one in some])
    for one, row in zip(some, frame.itertuples(), strict=True):
        constant = getattr(row, f"pkah_{one.step[-1]}")
        assert one.value == pytest.approx(constant, abs=0.011)
        spread = (one.high - one.low) / 2 / 1.645
        share = 0.5 * (
            math.erf((6.5 - one.value) / spread / 2**0.5) - math.erf((5.5 - one.value) / spread / 2**0.5)
        )
        assert one.probability == pytest.approx(share, abs=0.02)


def test_reasons_add_up_to_the_shift_the_largest_first(gefitinib):
    for one in gefitinib.candidates:
        assert sum(part.value for part in one.reasons) == pytest.approx(one.shift, abs=0.05)
        sizes = [abs(part.value) for part in one.reasons]
        assert sizes == sorted(sizes, reverse=True)
        assert all(part.value == pytest.approx(part.after - part.before) for part in one.reasons)


def test_a_shift_is_no_less_sure_than_two_estimates_without_anything_in_common(gefitinib):
    own = (gefitinib.high - gefitinib.low) / 2
    surer = []
    for one in gefitinib.candidates:
        half, apart = (one.shift_high - one.shift_low) / 2, math.hypot(own, (one.high - one.low) / 2)
        assert 0 < half < 1.15 * apart, one.smiles
        surer.append(half < 0.9 * apart)
        assert one.shift == pytest.approx(one.value - gefitinib.value, abs=0.011)
    assert sum(surer) > len(surer) / 2  # analogues of one drug share much of what is not known


def test_sizes_and_log_p_follow_the_structures(benzylpiperidine):
    by_edit = {one.edits[0]: one for one in benzylpiperidine.candidates}
    morpholine, methyl = by_edit["piperidine-to-morpholine"], by_edit["aryl-methyl"]
    assert morpholine.heavy_atom_change == 0 and morpholine.cost == 1 and morpholine.log_p_change < -0.5
    assert methyl.heavy_atom_change == 1 and methyl.log_p_change == pytest.approx(
        0.31, abs=0.02
    )  # one CH2 more


def test_new_atoms_and_the_way_back_to_the_input(benzylpiperidine):
    for one in benzylpiperidine.candidates:
        mol = Chem.MolFromSmiles(one.smiles)
        assert mol.GetAtomWithIdx(one.site).GetSymbol() == "N"
        assert one.input_atoms[one.site] == benzylpiperidine.site == 5
        assert len(one.input_atoms) == mol.GetNumAtoms() and one.new_atoms
        kept = [number for number in one.input_atoms if number is not None]
        assert len(set(kept)) == len(kept) and max(kept) < 13
    (oxygen,) = (one for one in benzylpiperidine.candidates if one.edits == ("piperidine-to-morpholine",))
    (place,) = oxygen.new_atoms
    assert Chem.MolFromSmiles(oxygen.smiles).GetAtomWithIdx(place).GetSymbol() == "O"
    assert oxygen.input_atoms[place] == 2 and oxygen.atoms == (2,)


def test_measured_pairs_stand_beside_an_edit(benzylpiperidine):
    (amine,) = (one for one in tune("CCCN", (7, 8)).candidates if one.edits == ("N-methyl",))
    ((name, known),) = amine.precedents
    assert name == "N-methyl" and known.same_class and known.count >= 5
    assert known.least <= known.mean <= known.greatest and 1 <= len(known.examples) <= 3
    for pair in known.examples:
        assert pair.shift == pytest.approx(pair.value_after - pair.value_before, abs=0.011) and pair.source
    # piperidine 11.12 and morpholine 8.49 are measured: Perrin 1965, Perrin 1972
    ring = precedent("piperidine-to-morpholine", "cyclic secondary amine", "aliphatic", "NCCC")
    assert ring is not None and ring.mean == pytest.approx(-2.6, abs=0.2)
    assert precedent("piperidine-to-morpholine", "cyclic secondary amine", "aliphatic", "Ncc") is None


def test_the_file_of_measured_pairs_is_of_the_present_table_and_edits():
    done = subprocess.run(
        [sys.executable, str(ROOT / "scripts" / "pair_edits"), "--check", "12"],
        capture_output=True,
        text=True,
        check=False,
        timeout=240,
    )
    assert done.returncode == 0, f"run scripts/pair_edits\n{done.stdout}{done.stderr}"


@settings(max_examples=4, deadline=None)
@given(
    seed=st.integers(1, 10_000),
    name=st.sampled_from([BENZYLPIPERIDINE, "CC(C)NCC(O)COc1ccccc1", "NCCc1c[nH]cn1"]),
)
def test_neither_spelling_nor_order_of_the_atoms_matters(seed, name):
    mol = Chem.MolFromSmiles(name)
    other = Chem.MolToRandomSmilesVect(mol, 1, randomSeed=seed)[0]
    one, same = tune(name, (6, 8)), tune(other, (6, 8))
    assert {(c.smiles, c.edits, c.value, c.shift, c.cost) for c in one.candidates} == {
        (c.smiles, c.edits, c.value, c.shift, c.cost) for c in same.candidates
    }


def test_twice_the_same_call_gives_the_same(benzylpiperidine):
    assert tune(BENZYLPIPERIDINE, (6.5, 7.5)) == benzylpiperidine


def test_a_salt_and_a_charged_drawing_are_edited_as_the_base():
    plain = {one.smiles for one in tune("CCCN", (7, 8)).candidates}
    salt = tune("[Cl-].CCC[NH3+]", (7, 8))
    assert {one.smiles for one in salt.candidates} == plain and salt.site == 4
    assert all(set(one.atoms) <= {1, 2, 3, 4} for one in salt.candidates)


@settings(max_examples=4, deadline=None)
@given(data=st.data())
def test_kept_atoms_are_in_every_product_with_their_neighbours(data):
    mol = Chem.MolFromSmiles(GEFITINIB)
    keep = data.draw(st.sets(st.integers(0, mol.GetNumAtoms() - 1), min_size=1, max_size=12))
    found = tune(GEFITINIB, (5, 6), keep=sorted(keep), reach=8)
    assert found.keep == tuple(sorted(keep))
    for one in found.candidates:
        product = Chem.MolFromSmiles(one.smiles)
        for number in keep:
            here, there = mol.GetAtomWithIdx(number), product.GetAtomWithIdx(one.input_atoms.index(number))
            assert here.GetSymbol() == there.GetSymbol() and here.GetTotalNumHs() == there.GetTotalNumHs()
            around = sorted((other.GetIdx(), other.GetSymbol()) for other in here.GetNeighbors())
            assert around == sorted(
                (one.input_atoms[other.GetIdx()], other.GetSymbol()) for other in there.GetNeighbors()
            )


def test_smarts_protect_every_match():
    found = tune(GEFITINIB, (5, 6), keep="c", reach=12)
    drug = Chem.MolFromSmiles(GEFITINIB)
    assert found.keep == tuple(match[0] for match in drug.GetSubstructMatches(Chem.MolFromSmarts("c")))
    assert not any(
        edit in ("aryl-fluoro", "phenyl-to-pyridyl") for one in found.candidates for edit in one.edits
    )
    free = tune(GEFITINIB, (5, 6), reach=12)
    assert {"aryl-fluoro", "phenyl-to-pyridyl"} <= {one.edits[0] for one in free.candidates}


def test_the_other_nitrogen_can_be_asked_for():
    # in 1-(pyridin-4-ylmethyl)piperazine the NH takes the first proton; the pyridine is atom 2
    found = tune("c1cnccc1CN1CCNCC1", (1, 3), site=2)
    assert found.site == 2 and found.site_class == "pyridine" and found.step != "pKaH 1"
    assert all(
        Chem.MolFromSmiles(one.smiles).GetAtomWithIdx(one.site).GetIsAromatic() for one in found.candidates
    )


def test_an_edit_that_takes_the_basic_nitrogen_away_is_no_candidate():
    # acylated piperazine: only the nitrogen that is left a base counts; dibutylamine can't become the ether
    acylated = {one.smiles for one in tune("C1CNCCN1Cc1ccccc1", (7, 8), site=2).candidates}
    assert not any("C(=O)N1CCN(Cc2ccccc2)CC1" in smiles for smiles in acylated)
    assert "CCCCOCCCC" not in {one.smiles for one in tune("CCCCNCCCC", (7, 8)).candidates}


def test_two_edits_reach_what_one_does_not(butylamine):
    single, double = tune("CCCCN", (3.5, 4.5)), butylamine
    assert len(double.hits) > len(single.hits)
    pairs = [one for one in double.candidates if len(one.edits) == 2]
    assert 0 < len(pairs) <= MOST_PAIRED
    assert {one.smiles for one in single.candidates} <= {one.smiles for one in double.candidates}
    names = {edit.name: edit.cost for edit in basirank.edits.edits()}
    assert all(one.cost == sum(names[edit] for edit in one.edits) for one in pairs)


def test_where_no_edit_reaches_the_window_the_nearest_come_first():
    found = tune("CCN", (14, 15))
    assert not found.hits and found.candidates
    text = str(found)
    assert "No edit reaches the window; the nearest are" in text
    assert found.candidates[0].value == max(one.value for one in found.candidates)
    assert str(tune("CCN", (7, 8), keep="[*]")).count("No edit can be made there") == 1


def test_measured_constants_of_a_user_move_the_candidates(benzylpiperidine):
    series = condition([("C1CCCCN1Cc1ccc(C)cc1", 9.9), ("C1CCCCN1Cc1ccc(CC)cc1", 9.9)])
    moved = tune(BENZYLPIPERIDINE, (6.5, 7.5), local=series)
    assert moved.value > benzylpiperidine.value + 0.2
    assert {one.smiles for one in moved.candidates} == {one.smiles for one in benzylpiperidine.candidates}


def test_conditions_move_parent_and_products_alike(benzylpiperidine):
    warm = tune(BENZYLPIPERIDINE, (6.5, 7.5), temperature=37)
    assert warm.value < benzylpiperidine.value - 0.1
    assert "at 37 C" in str(warm)
    cold = {one.smiles: one.shift for one in benzylpiperidine.candidates}
    assert all(
        abs(cold[one.smiles] - one.shift) < 0.4 for one in warm.candidates if one.support == "supported"
    )


@pytest.mark.parametrize(
    ("window", "reason"),
    [
        ("8:7", "8:7 holds nothing"),
        ("7:7", "7:7 holds nothing"),
        ("7", "LOW:HIGH"),
        ("a:b", "must be a number"),
        ("7:80", "between -5 and 16"),
        ((1, 2, 3), "LOW:HIGH"),
        ("nan:8", "must be a number"),
    ],
)
def test_a_window_that_is_none_is_said_so(window, reason):
    with pytest.raises(ValueError, match=reason):
        clean_window(window)


@pytest.mark.parametrize(
    ("smiles", "options", "reason"),
    [
        ("CCN", {"site": 0}, "atom 0 has no pKaH from -5 to 16; those that have one: 2"),
        ("CCN", {"keep": "[F]"}, "nothing in the structure matches"),
        ("CCN", {"keep": "[F"}, "cannot be read as SMARTS"),
        ("CCN", {"keep": "9"}, "atom 9 to be kept"),
        ("CCN", {"keep": " "}, "not nothing"),
        ("CCN", {"edits": 3}, "edits must be 1 or 2"),
        ("CCN", {"reach": 40}, "from 0 to 12"),
        ("CCCC", {}, "no basic site"),
        ("CC(C", {}, "parentheses do not pair"),
        ("", {}, "no structure given"),
        ("CC(=O)N(C)C", {}, "takes the proton, but is no nitrogen"),
    ],
)
def test_what_cannot_be_tuned_is_said_so(smiles, options, reason):
    with pytest.raises(ValueError, match=re.escape(reason)):
        tune(smiles, (7, 8), **options)


def test_equal_atoms_have_their_own_points_in_a_scan():
    ring = scan("NCc1ccccc1", "aryl-fluoro")
    assert [point.atom for point in ring.points] == [3, 4, 5, 6, 7]
    by_atom = {point.atom: point for point in ring.points}
    for one, other in ((3, 7), (4, 6)):
        assert by_atom[one].shift == by_atom[other].shift and by_atom[one].smiles == by_atom[other].smiles
    near = scan("NCc1ccccc1", "aryl-fluoro", reach=3).points
    assert near == tuple(point for point in ring.points if point.atom in (3, 7))
    assert not scan("CCN", "aryl-fluoro").points


def boxes_of_text(svg: str) -> list[Box]:
    root = ElementTree.fromstring(svg)
    found = []
    for element in root.iter("{http://www.w3.org/2000/svg}text"):
        if element.get("class") == "b-part" and element.text:
            x, y = float(element.get("x")), float(element.get("y"))
            half = 3.0 * len(element.text)
            found.append(Box(x - half, y - 9.0, x + half, y + 1.0))
    return found


def test_the_map_of_a_scan_writes_each_shift_once_and_over_nothing():
    found = scan(GEFITINIB, "aryl-fluoro", reach=12)
    svg = scan_figure(found)
    root = ElementTree.fromstring(svg)
    texts = [element.text for element in root.iter("{http://www.w3.org/2000/svg}text") if element.text]
    for point in found.points:
        assert texts.count(f"{point.shift:+.2f}") == sum(p.shift == point.shift for p in found.points)
    inside = boxes_of_text(svg)[: len(found.points)]
    for n, one in enumerate(inside):
        assert not any(one.overlaps(other) for other in inside[n + 1 :])
        for letter in draw(found.parent_smiles).letters:
            assert not one.overlaps(letter.box)


def test_the_scale_of_shifts_is_white_at_none_and_differs_in_lightness_and_hue():
    assert colour(0.0, 2.0) == "#ffffff" and colour(3.0, 2.0) == colour(2.0, 2.0) != colour(-2.0, 2.0)

    def light(text: str) -> float:
        red, green, blue = (int(text[n : n + 2], 16) for n in (1, 3, 5))
        return 0.299 * red + 0.587 * green + 0.114 * blue

    for sign in (1, -1):
        steps = [light(colour(sign * shift, 2.0)) for shift in (0.0, 0.5, 1.0, 1.5, 2.0)]
        assert all(one - other > 15 for one, other in pairwise(steps))


def test_the_grid_shows_value_and_shift_under_each_and_marks_what_is_new(benzylpiperidine):
    root = ElementTree.fromstring(tuning_figure(benzylpiperidine, 3))
    texts = [element.text or "" for element in root.iter("{http://www.w3.org/2000/svg}text")]
    for rank, one in enumerate(benzylpiperidine.candidates[:3], start=1):
        assert any(text.startswith(f"{rank}  {one.value:.2f} (") for text in texts)
        assert any(text.startswith(f"shift {one.shift:+.2f} (") for text in texts)
    circles = [c.get("class") for c in root.iter("{http://www.w3.org/2000/svg}circle")]
    assert circles.count("b-mark") == 4
    assert circles.count("b-down") == sum(len(one.new_atoms) for one in benzylpiperidine.candidates[:3])


def test_the_frame_has_a_row_for_each_candidate(benzylpiperidine):
    frame = benzylpiperidine.frame()
    assert tuple(frame.columns) == COLUMNS and len(frame) == len(benzylpiperidine.candidates)
    assert list(frame["rank"]) == list(range(1, len(frame) + 1))
    points = scan("CCCCN", "fluorine").frame()
    assert tuple(points.columns) == SCAN_COLUMNS and (points["shift"] < 0).all()


def test_on_the_terminal_each_candidate_has_its_numbers_and_the_caution_stands_once(run, benzylpiperidine):
    done = run("tune", BENZYLPIPERIDINE, "--to", "6.5:7.5", "--top", "2")
    assert done.exit_code == 0 and not done.stderr
    assert done.stdout == basirank.tuning_text.tuning_text(benzylpiperidine, 2) + "\n"
    assert done.stdout.count("Estimates for triage") == 1
    for one in benzylpiperidine.candidates[:2]:
        assert one.smiles in done.stdout and f"shift {one.shift:+.2f}" in done.stdout
    assert "because" in done.stdout and "measured:" in done.stdout


def test_files_hold_all_candidates(run, folder, benzylpiperidine):
    done = run("tune", BENZYLPIPERIDINE, "--to", "6.5:7.5", "-o", "out.tsv")
    assert done.exit_code == 0 and "written to out.tsv" in done.stderr
    text = (folder / "out.tsv").read_text()
    assert heading(text, "\t") == list(COLUMNS)
    rows = table(text, "\t")
    assert [row["smiles"] for row in rows] == [one.smiles for one in benzylpiperidine.candidates]
    assert rows[0]["in_window"] == "yes" and rows[0]["pkah"] == f"{benzylpiperidine.candidates[0].value:.2f}"
    run("tune", BENZYLPIPERIDINE, "--to", "6.5:7.5", "-o", "out.json")
    told = json.loads((folder / "out.json").read_text())
    assert [one["smiles"] for one in told["candidates"]] == [
        one.smiles for one in benzylpiperidine.candidates
    ]
    assert told["window"] == [6.5, 7.5] and "Estimates for triage" in told["note"]


def test_pictures_are_written_by_their_endings(run, folder):
    pytest.importorskip("resvg_py")
    assert run("tune", "CCN", "--to", "7:8", "-o", "out.svg").exit_code == 0
    assert run("tune", "CCN", "--to", "7:8", "-o", "out.png").exit_code == 0
    assert run("tune", "CCCCN", "--scan", "fluorine", "-o", "map.svg").exit_code == 0
    assert (folder / "out.png").read_bytes().startswith(b"\x89PNG")
    for name in ("out.svg", "map.svg"):
        assert ElementTree.fromstring((folder / name).read_text()).tag.endswith("svg")


def test_a_scan_is_a_table_too(run):
    done = run("tune", "CCCCN", "--scan", "beta-fluoro")
    assert done.exit_code == 0 and "a fluorine beta to the nitrogen" in done.stdout
    run("tune", "CCCCN", "--scan", "all", "-o", "scan.csv")
    rows = table(Path("scan.csv").read_text())
    assert {"beta-fluoro", "N-methyl"} <= {row["edit"] for row in rows}
    assert all(float(row["shift_low"]) <= float(row["shift"]) <= float(row["shift_high"]) for row in rows)


@pytest.mark.parametrize(
    ("arguments", "reason"),
    [
        (("CCN",), "give either --to LOW:HIGH or --scan NAME"),
        (("CCN", "--to", "7:8", "--scan", "all"), "give either --to"),
        (("CCN", "--scan", "all", "--edits", "2"), "--edits and --top go with --to"),
        (("CCN", "CCCN", "--to", "7:8"), "takes one compound, not several"),
        (("CCN", "--to", "8:7"), "holds nothing"),
        (("CCN", "--scan", "unobtainium"), "no edit is called 'unobtainium'"),
        (("CCN", "--to", "7:8", "--near", "99"), "99 is not in the range"),
        (("CCN", "--to", "7:8", "-o", "x.pdf"), "unknown ending"),
        (("CCCCN", "--scan", "all", "-o", "x.svg"), f"a picture shows {MOST_MAPS}"),
        (("CC(C", "--to", "7:8"), "parentheses do not pair"),
        (("CCN", "--to", "7:8", "--keep", "[F]"), "nothing in the structure matches"),
    ],
)
def test_an_error_in_the_call_is_one_line(run, folder, arguments, reason):
    done = run("tune", *arguments)
    assert done.exit_code == 2 and not done.stdout
    assert reason in done.stderr and len(done.stderr.splitlines()) == 1
    assert not list(folder.iterdir())


def test_a_record_of_an_sd_file_is_tuned_by_its_own_numbers(run, folder):
    mol = Chem.MolFromSmiles("CCCN")
    with Chem.SDWriter("one.sdf") as writer:
        writer.write(Chem.AddHs(mol))
    done = run("tune", "one.sdf", "--to", "7:8")
    assert done.exit_code == 0 and "N atom 3" in done.stdout


def test_a_file_of_own_measurements_moves_what_the_command_says(run):
    basirank.save_local(condition([("C1CCCCN1Cc1ccc(C)cc1", 9.9), ("C1CCCCN1Cc1ccc(CC)cc1", 9.9)]), "own.npz")
    plain = run("tune", BENZYLPIPERIDINE, "--to", "6.5:7.5", "--top", "1").stdout
    done = run("tune", BENZYLPIPERIDINE, "--to", "6.5:7.5", "--top", "1", "--local", "own.npz")
    assert done.exit_code == 0 and done.stdout != plain

    def constant(text: str) -> float:
        return float(re.search(r"pKaH 1 (\S+)", text)[1])

    assert constant(done.stdout) > constant(plain) + 0.2


def test_remarks_on_the_structure_are_shown():
    # pteridine: its constants may be those of a hydrate (Albert and Armarego 1965)
    assert "Note       pteridine: water may add" in str(tune("c1cnc2ncncc2n1", (2, 3)))
