"""Curves against pH and their pictures: shares, charge, log D; what a chemist sees and can read."""

from __future__ import annotations

import re
import struct
import sys
from itertools import combinations
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest
from conftest import heading, table
from hypothesis import given, settings
from hypothesis import strategies as st

import basirank
from basirank.curves import curves_of, log_d, ph_grid
from basirank.figures import curve_figure
from basirank.plots import COLOURS, Line, Mark, Panel, svg
from basirank.request import Conditions

HISTIDINE = "NC(Cc1c[nH]cn1)C(=O)O"


@settings(deadline=None, max_examples=25)
@given(
    smiles=st.sampled_from(
        [HISTIDINE, "NCCNCCN", "C[N+](C)(C)CC(=O)O", "Oc1cccnc1", "CC(=O)O", "NCC(N)C(=O)O"]
    ),
    temperature=st.floats(0, 60),
    ionic_strength=st.floats(0, 0.5),
)
def test_shares_sum_to_one_and_charge_falls_at_any_conditions(smiles, temperature, ionic_strength):
    ph = ph_grid(-2, 16, 0.25)
    (curve,) = curves_of([smiles], [""], ph, conditions=Conditions(temperature, ionic_strength))
    assert curve.shares.sum(axis=1) == pytest.approx(np.ones(len(ph)), abs=2e-3)  # forms below 0.1 % left out
    assert (np.diff(curve.net_charge) <= 1e-12).all()
    mean = curve.shares @ np.array(curve.charges)
    assert curve.net_charge == pytest.approx(mean, abs=5e-3)
    if 0 in curve.charges:
        netless = curve.shares[:, curve.charges.index(0)]
        assert curve.neutral + curve.zwitterion == pytest.approx(netless, abs=1e-9)


def test_half_of_a_base_is_neutral_at_its_pkah():
    frame = basirank.curve("CCN")
    pkah = basirank.annotate(["CCN"]).pkah_1[0]
    assert np.interp(0.5, frame["share_0"], frame["ph"]) == pytest.approx(pkah, abs=0.02)
    assert list(frame.columns[-2:]) == ["share_+1", "share_0"]


def test_log_d_of_a_base_falls_by_one_for_each_ph_unit_below_its_pkah():
    """Propranolol, pKaH 9.5, log P 3.48: log D at 7.4 is 1.4 (Avdeef 2003, memory)."""
    fraction = 1 / (1 + 10 ** (9.5 - 7.4))
    assert log_d(3.48, np.array(fraction), np.array(1 - fraction), np.array(0.0)) == pytest.approx(
        1.4, abs=0.1
    )
    frame = basirank.curve("CCN", log_p=0.5)
    # levels off three units lower, where the ion pair takes over
    assert frame["log_d"].iloc[0] == pytest.approx(-2.5, abs=0.01)
    assert frame["log_d"].iloc[-1] == pytest.approx(0.5, abs=0.01)


def test_a_fixed_charge_has_no_log_p_and_says_so_in_a_picture(run):
    assert table(run("curve", "C[N+](C)(C)CCN").stdout)[0]["log_d"] == ""
    result = run("curve", "C[N+](C)(C)CCN", "--show", "logd", "-o", "x.svg")
    assert result.exit_code == 2 and "--logp" in result.stderr and not Path("x.svg").exists()


def test_curve_writes_a_row_for_each_compound_and_ph(run):
    result = run("curve", "NCC(=O)O glycine", "c1ccncc1 pyridine", "--from", "2", "--to", "8", "--step", "2")
    rows = table(result.stdout)
    assert heading(result.stdout) == [
        *(
            "smiles",
            "name",
            "ph",
            "net_charge",
            "protonated_fraction",
            "neutral_fraction",
            "zwitterion_fraction",
        ),
        *("log_p", "log_d", "share_+1", "share_0", "share_-1"),
    ]
    assert [(row["name"], row["ph"]) for row in rows] == [
        (name, ph) for name in ("glycine", "pyridine") for ph in ("2", "4", "6", "8")
    ]
    assert rows[0]["share_-1"] == "0.0000" and rows[4]["share_-1"] == ""
    assert "estimate" in result.stderr


@pytest.mark.parametrize(
    "arguments, words",
    [
        (("CCN", "--from", "9", "--to", "3"), "must ascend"),
        (("CCN", "--step", "0"), "pH step must lie between"),
        (("CCN", "--step", "0.001"), "take a larger step"),
        (("CCN", "CNC", "--logp", "1"), "for one compound"),
        (("CCN", "--logp", "high"), "log P must be a number"),
        (("CCN", "-o", "curve.pdf"), "unknown ending"),
        (("CCN", "--ionic-strength", "1"), "between 0 and 0.5 mol/L"),
        (("C", "CN", "CCN", "CCCN", "CCCCN", "CNC", "CCNC", "-o", "x.svg"), "takes fewer"),
        (("C1CC",), "refused"),
    ],
)
def test_a_wrong_call_of_curve_is_one_line(run, folder, arguments, words):
    result = run("curve", *arguments)
    assert result.exit_code == 2 and result.stdout == ""
    assert result.stderr.count("\n") == 1 and words in result.stderr
    assert list(folder.iterdir()) == []


def texts(document: str) -> list[str]:
    root = ElementTree.fromstring(document)
    return [element.text or "" for element in root.iter("{http://www.w3.org/2000/svg}text")]


def test_a_picture_names_its_axes_forms_and_constants(run, folder):
    result = run("curve", f"{HISTIDINE} L-histidine <&>", "-o", "h.svg", "--temperature", "37")
    assert result.exit_code == 0, result.stderr
    seen = texts(Path("h.svg").read_text())
    assert "L-histidine <&>" in seen  # user text is escaped
    for text in ("share / %", "net charge", "log D", "zwitterion", "charge +1", "charge −1"):
        assert text in seen
    assert any("pH" in text and "37 C" in text for text in seen)
    assert sum(bool(re.fullmatch(r"pKaH \d+\.\d\d", text)) for text in seen) == 2


def boxes(document: str) -> list[tuple[float, float, float, float]]:
    """Boxes of all upright texts, by mean letter width."""
    found = []
    for element in ElementTree.fromstring(document).iter("{http://www.w3.org/2000/svg}text"):
        if "transform" in element.attrib:
            continue
        size, width = (
            float(element.get("font-size")),
            len(element.text or "") * float(element.get("font-size")) * 0.5,
        )
        x, y = float(element.get("x")), float(element.get("y"))
        x -= {"start": 0.0, "middle": width / 2, "end": width}[element.get("text-anchor")]
        found.append((x, y - 0.7 * size, x + width, y))
    return found


@pytest.mark.parametrize(
    "compounds",
    [[HISTIDINE], ["NCCNCCNCCN"], ["CCN", "CCCN", "CCCCN", "CCCCCN", "NCCCN", "c1ccncc1"], ["NCCCCNCCCN", "CC(=O)O"],
     ["C[N+](C)(C)CC(=O)O"]],
    ids=["histidine", "tetramine", "six", "two", "betaine"],
)  # fmt: skip
def test_texts_of_a_picture_neither_overlap_nor_leave_the_page(compounds):
    curves = curves_of(compounds, [f"compound {n}" for n in range(len(compounds))], ph_grid())
    document = curve_figure(curves)
    root = ElementTree.fromstring(document)
    width, height = float(root.get("width")), float(root.get("height"))
    placed = boxes(document)
    assert all(min(box) >= 0 and box[2] <= width and box[3] <= height for box in placed)
    for one, other in combinations(placed, 2):
        apart = one[2] <= other[0] or other[2] <= one[0] or one[3] <= other[1] or other[3] <= one[1]
        assert apart, (one, other)


def test_a_line_without_room_is_named_in_a_legend():
    x = np.linspace(0, 1, 50)
    crowd = [Line(f"line {n}", x, np.full(50, 0.5 + 0.001 * n), n) for n in range(8)]
    document = svg(
        [Panel("", "y", crowd, (0.0, 1.0), [Mark(0.5, "middle")], 60.0)], x_label="x", x_range=(0.0, 1.0)
    )
    seen = texts(document)
    assert all(f"line {n}" in seen for n in range(8))


def test_colours_stay_apart_for_those_who_do_not_see_red_or_green():
    """Simulation of Machado, Oliveira and Fernandes 2009 (severity 1, memory); distance in CIELAB."""
    protan = [
        [0.152286, 1.052583, -0.204868],
        [0.114503, 0.786281, 0.099216],
        [-0.003882, -0.048116, 1.051998],
    ]
    deutan = [
        [0.367322, 0.860646, -0.227968],
        [0.280085, 0.672501, 0.047413],
        [-0.011820, 0.042940, 0.968881],
    ]
    to_xyz = np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]])

    def lab(colour: str, sight: np.ndarray) -> np.ndarray:
        rgb = np.array([int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)])
        linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
        f = np.cbrt(to_xyz @ np.clip(sight @ linear, 0, 1) / np.array([0.9505, 1.0, 1.089]))
        return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])

    for sight in (np.eye(3), np.array(protan), np.array(deutan)):
        for one, other in combinations(COLOURS[:6], 2):
            assert np.linalg.norm(lab(one, sight) - lab(other, sight)) > 15, (one, other)


def test_a_png_is_drawn_whole_or_not_at_all(run, folder, monkeypatch):
    assert run("curve", "CCN", "-o", "c.png").exit_code == 0
    data = Path("c.png").read_bytes()
    assert data[:8] == b"\x89PNG\r\n\x1a\n" and struct.unpack(">I", data[16:20])[0] == 1920
    monkeypatch.setitem(sys.modules, "resvg_py", None)
    for command in ("curve", "titrate"):
        result = run(command, "CCN", "-o", "d.png")
        assert result.exit_code == 2 and "resvg-py" in result.stderr and result.stderr.count("\n") == 1
    assert [path.name for path in folder.iterdir()] == ["c.png"]


def test_a_titration_picture_marks_its_equivalence_points(run, folder):
    result = run("titrate", "NCCN", "-o", "t.svg", "--ionic-strength", "0.1")
    assert result.exit_code == 0, result.stderr
    seen = texts(Path("t.svg").read_text())
    assert "pH" in seen and any(
        text.startswith("volume of titrant / mL") and "0.1 mol/L" in text for text in seen
    )
    assert [text.split(",")[0] for text in seen if " mL, pH" in text] == ["25.00 mL", "50.00 mL"]
