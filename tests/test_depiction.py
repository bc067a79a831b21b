"""Pictures: values stand beside their atoms over nothing else, and the parts of a site add up to its value."""

from __future__ import annotations

from itertools import combinations
from pathlib import Path
from xml.etree import ElementTree

import pytest
from hypothesis import given
from hypothesis import strategies as st
from rdkit import Chem

from basirank import explain
from basirank.depiction import MARK, _adding_up, explanation_svg, picture_of, shares, stacked_svg
from basirank.explanation import Explanation
from basirank.placement import Box, Label, place_labels

DEMO = Path(__file__).resolve().parent.parent / "data" / "demo.smi"
CROWDED = [
    "CN1CCN(CC1)c1nc(N)nc(N(C)CCN(C)C)n1",
    "NCCNCCNCCNCCN",
    "c1cnc2c(c1)ccc1cccnc12",
    "NC(CCCN=C(N)N)C(=O)NC(Cc1cnc[nH]1)C(=O)NC(CCCCN)C(=O)O",
]


@pytest.fixture(scope="module")
def explanations() -> list[Explanation]:
    demo = [line.split()[0] for line in DEMO.read_text().splitlines()]
    return [told for smiles in [*demo, *CROWDED] if (told := explain(smiles)).status != "refused"]


def test_no_value_lies_over_another_or_over_a_letter(explanations):
    for told in explanations:
        picture = picture_of(told)
        assert picture is not None and picture.marks
        for one, other in combinations(picture.marks, 2):
            assert not one.box.overlaps(other.box), told.structure
        for mark in picture.marks:
            for letter in picture.drawing.letters:
                assert not mark.box.overlaps(letter.box), (told.structure, mark.label, letter)


def test_a_value_stands_at_the_atom_it_belongs_to(explanations):
    for told in explanations:
        picture = picture_of(told)
        for mark in picture.marks:
            middle = ((mark.box.left + mark.box.right) / 2, (mark.box.top + mark.box.bottom) / 2)
            far = ((middle[0] - mark.x) ** 2 + (middle[1] - mark.y) ** 2) ** 0.5
            assert far < 130, told.structure
            assert any(abs(mark.x - x) + abs(mark.y - y) < 1e-6 for x, y in picture.drawing.atoms)


def test_marks_number_the_steps_in_the_order_of_protonation():
    told = explain("NCCCC(N)C(=O)O")
    labels = sorted(mark.label for mark in picture_of(told).marks)
    assert labels == [
        f"1: {told.steps[0].value:.2f}",
        f"2: {told.steps[1].value:.2f}",
        f"a1: {told.steps[2].value:.2f}",
    ]


def test_a_mark_lies_on_the_atom_of_the_input_whatever_the_writing():
    """The nitrogen of a hydrochloride written ion first is atom 1 of the input and the only N of the picture."""
    told = explain("[Cl-].[NH3+]CCc1ccccc1")
    picture = picture_of(told)
    (mark,) = picture.marks
    nitrogen = next(letter for letter in picture.drawing.letters if letter.text == "N")
    assert mark.atom == told.steps[0].atom == 1
    assert nitrogen.box.left - MARK < mark.x < nitrogen.box.right + MARK
    molecule = explain(Chem.MolFromSmiles("[Cl-].[NH3+]CCc1ccccc1"))
    assert picture_of(molecule).marks == picture.marks


def test_parent_atoms_are_input_atoms_of_the_same_element(explanations):
    for told in explanations:
        written, parent = Chem.MolFromSmiles(told.structure), Chem.MolFromSmiles(told.parent_smiles)
        assert [written.GetAtomWithIdx(n).GetSymbol() for n in told.parent_atoms] == [
            atom.GetSymbol() for atom in parent.GetAtoms()
        ]


def test_what_a_picture_of_increments_shows_adds_up_to_the_value(explanations):
    for told in explanations:
        for site in told.sites:
            parent, parts, rest = shares(site)
            hundredths = round(100 * (parent + sum(part.value for part in parts) + rest))
            assert hundredths == round(100 * round(site.value, 2)), (told.structure, site.number)
            if any(step.site == site.number and step.value is not None for step in told.steps):
                assert f"= parent {parent:.2f} " in explanation_svg(told)


@given(st.lists(st.floats(-20, 20), min_size=1, max_size=12))
def test_rounded_parts_add_up_and_stay_within_a_hundredth(values):
    total = round(sum(values), 2)
    parts = _adding_up(values, total)
    assert round(sum(parts), 2) == pytest.approx(total, abs=1e-9)
    assert all(abs(part - value) < 0.0151 for part, value in zip(parts, values, strict=True))


coordinates = st.floats(-60, 60)


@given(st.lists(st.tuples(coordinates, coordinates), min_size=1, max_size=8))
def test_labels_of_crowded_points_never_overlap(points):
    labels = [Label(x, y, 5.0, 30.0, 12.0) for x, y in points]
    placed = place_labels(labels, [], [])
    assert not any(one.overlaps(other) for one, other in combinations(placed, 2))


def test_a_label_keeps_off_a_box_and_a_line():
    (box,) = place_labels([Label(0, 0, 5, 20, 10)], [(-40, -10, 40, -10)], [Box(5, -5, 60, 40)])
    assert not box.overlaps(Box(5, -5, 60, 40))
    assert box.top > -10 or box.bottom < -10


def test_the_svg_is_sound_xml_and_names_stay_text():
    told = explain("CN(C)CC=C")
    svg = explanation_svg(told, "<script>&\x00")
    root = ElementTree.fromstring(svg)
    assert "script" not in {element.tag.rpartition("}")[2] for element in root.iter()}
    assert root[0].text == "<script>& "
    assert f"intrinsic pKaH {told.sites[0].value:.2f}" in svg


def test_what_cannot_be_drawn_is_no_picture():
    assert explanation_svg(explain("CC(")) is None
    assert stacked_svg([(explain("CC("), "broken")]) is None
    refused = explain("[Na+].[Cl-]")
    assert refused.status == "refused" and not picture_of(refused).marks


def test_in_a_notebook_an_explanation_shows_pictures_and_text():
    told = explain("CCN")
    assert told._repr_svg_().startswith("<svg")
    html = told._repr_html_()
    assert "<svg" in html and "<pre>Structure  CCN" in html
    assert (
        "&lt;" in explain("C<script>")._repr_html_() and "<script>" not in explain("C<script>")._repr_html_()
    )
