"""Protomers of one charge against spectroscopic work, and what must hold for any molecule."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from rdkit import Chem

import basirank
from basirank.equilibrium import SiteSet, equilibrate
from basirank.ladder import ladder_of
from basirank.microstates import microconstants, protomers

# compound, net charge, form, its share among the molecules of that charge
SHARES = [
    # thiol 8.53 and ammonium 8.86 with the other still protonated: Benesch and Benesch 1955 (memory)
    ("NC(CS)C(=O)O", -1, "[NH3+]C(C[S-])C(=O)[O-]", 0.68),
    # glutathione, thiol 8.93 and ammonium 9.13 by NMR: Rabenstein 1973 (memory)
    ("NC(CCC(=O)NC(CS)C(=O)NCC(=O)O)C(=O)O", -2,
     "[NH3+]C(CCC(=O)NC(C[S-])C(=O)NCC(=O)[O-])C(=O)[O-]", 0.61),
    # nicotinic acid, zwitterion to neutral form about 10: Green and Tong 1956 (memory)
    ("OC(=O)c1cccnc1", 0, "[O-]C(=O)c1ccc[nH+]c1", 0.91),
    # picolinic acid, about 15: Green and Tong 1956 (memory)
    ("OC(=O)c1ccccn1", 0, "[O-]C(=O)c1cccc[nH+]1", 0.94),
    # isonicotinic acid, about 25: Green and Tong 1956 (memory)
    ("OC(=O)c1ccncc1", 0, "[O-]C(=O)c1cc[nH+]cc1", 0.96),
    # 3-hydroxypyridine, 1.17: Metzler and Snell 1955 (memory)
    ("Oc1cccnc1", 0, "[O-]c1ccc[nH+]c1", 0.54),
    # pyridoxine, about 7: Metzler et al. 1973 (memory)
    ("Cc1ncc(CO)c(CO)c1O", 0, "Cc1[nH+]cc(CO)c(CO)c1[O-]", 0.88),
    # 3-aminobenzoic acid, 2.4: Serjeant 1969 (memory)
    ("Nc1cccc(C(=O)O)c1", 0, "[NH3+]c1cccc(C(=O)[O-])c1", 0.70),
    # tyrosine, the phenol gives its proton in a third: Martin et al. 1958 (memory)
    ("NC(Cc1ccc(O)cc1)C(=O)O", -1, "[NH3+]C(Cc1ccc([O-])cc1)C(=O)[O-]", 0.31),
    # niflumic acid, log Kz 1.2: Takacs-Novak et al. (memory)
    ("OC(=O)c1cccnc1Nc1cccc(C(F)(F)F)c1", 0, "[O-]C(=O)c1ccc[nH+]c1Nc1cccc(C(F)(F)F)c1", 0.94),
    # norfloxacin, the zwitterion outweighs the neutral form: Takacs-Novak et al. 1990 (memory)
    ("CCn1cc(C(=O)O)c(=O)c2cc(F)c(N3CCNCC3)cc12", 0,
     "CCn1cc(C(=O)[O-])c(=O)c2cc(F)c(N3CC[NH2+]CC3)cc12", 0.98),
    # 4-aminobenzoic acid, zwitterion about a tenth to a fifth: van de Graaf et al. 1981 (memory)
    ("Nc1ccc(C(=O)O)cc1", 0, "Nc1ccc(C(=O)O)cc1", 0.86),
    # histidine: the ammonium keeps its proton while the imidazolium loses its own: Tanokura 1983 (memory)
    ("NC(Cc1c[nH]cn1)C(=O)O", 0, "[NH3+]C(Cc1c[nH]cn1)C(=O)[O-]", 0.99),
]  # fmt: skip


@pytest.mark.parametrize("smiles, charge, form, share", SHARES, ids=[row[0] for row in SHARES])
def test_shares_of_protomers_are_the_spectroscopic_ones(smiles, charge, form, share):
    told = basirank.explain(smiles)
    wanted = Chem.CanonSmiles(form)
    said = sum(
        one.share for one in told.protomers if one.charge == charge and Chem.CanonSmiles(one.form) == wanted
    )
    assert said == pytest.approx(share, abs=0.15)


def test_glycine_is_a_zwitterion():
    """Zwitterion to neutral form 2.2e5 to 2.6e5: Edsall and Blanchard 1933 (memory)."""
    told = basirank.explain("NCC(=O)O")
    neutral = next(one.share for one in told.protomers if one.neutral)
    assert -np.log10(neutral) == pytest.approx(5.35, abs=0.6)
    assert "zwitterion" in str(told) and "neutral form" in str(told)


def test_an_amine_has_one_form_of_each_charge_and_no_list():
    told = basirank.explain("CCN")
    assert told.protomers == told.microconstants == ()
    assert "Protomers" not in str(told)


def test_a_symmetric_diamine_shares_its_first_proton_evenly():
    told = basirank.explain("NCCN")
    assert [one.share for one in told.protomers if one.charge == 1] == pytest.approx([0.5, 0.5])
    # microscopic constants: log10 2 above and below the macroscopic ones
    first, second = (step.value for step in told.steps)
    assert {round(one.value, 1) for one in told.microconstants} == {
        round(first - np.log10(2), 1),
        round(second + np.log10(2), 1),
    }


def test_explain_tells_of_the_buffer(run):
    """Half of a base is protonated at its pKaH, where 0.1 mol/L buffers 0.0576 mol/L per pH unit (Van Slyke 1922)."""
    told = basirank.explain("CCN")
    (buffer,) = told.buffers
    assert (buffer.low + buffer.high) / 2 == pytest.approx(told.steps[0].value, abs=0.011)
    assert buffer.capacity == pytest.approx(0.0576, abs=1e-4)
    assert [ph for ph, _ in told.protonated_at] == [2.0, 7.4, 10.0]
    assert told.protonated_at[0][1] == 1.0 > told.protonated_at[2][1]
    text = run("explain", "CCN", "--show-pkb", "--temperature", "37").stdout
    assert "As a buffer" in text and "pKb" in text and "the same at 37 C" in text
    assert "from 37" not in str(told) and "pKb" not in str(told)


@st.composite
def site_sets(draw) -> SiteSet:
    n = draw(st.integers(1, 5))
    kinds = draw(st.lists(st.sampled_from(["base", "acid"]), min_size=n, max_size=n))
    pk = draw(st.lists(st.floats(-2, 14), min_size=n, max_size=n))
    w = np.zeros((n, n))
    for i in range(n):
        for j in range(i):
            w[i, j] = w[j, i] = draw(st.floats(-0.5, 4))
    return SiteSet(kinds, pk, [0.5] * n, w, None, draw(st.integers(-1, 1)))


@given(site_sets())
def test_microscopic_constants_close_their_cycles(sites):
    """Two protons on by either way: k1 + k12 = k2 + k21, and each macroscopic constant is the sum of its parts."""
    listed = protomers(sites)
    by_charge: dict[int, float] = {}
    for one in listed:
        by_charge[one.charge] = by_charge.get(one.charge, 0.0) + one.share
    assert all(0.7 < total <= 1 + 1e-9 for total in by_charge.values())
    shares = {one.protons: one.share for one in listed}
    ladder = ladder_of(sites)
    for micro in microconstants(sites, listed):
        for protons, share in shares.items():
            before = (*protons[: micro.site], False, *protons[micro.site + 1 :])
            charged = tuple(
                j for j, held in enumerate(protons) if j != micro.site and held != (sites.kinds[j] == "acid")
            )
            if protons[micro.site] and before in shares and charged == micro.charged:
                macroscopic = ladder.constants[sum(protons) - 1]
                assert micro.value == pytest.approx(
                    macroscopic + np.log10(share) - np.log10(shares[before]), abs=1e-6
                )


@given(site_sets(), st.floats(-2, 16))
def test_shares_of_neutral_form_and_zwitterion_are_those_counted_one_by_one(sites, ph):
    (state,) = equilibrate([sites], [ph])[0].states
    n = len(sites.kinds)
    weights = {}
    for code in range(2**n):
        held = [bool(code >> i & 1) for i in range(n)]
        q = [h - (kind == "acid") for h, kind in zip(held, sites.kinds, strict=True)]
        energy = sum(h * (pk - ph) for h, pk in zip(held, sites.pk, strict=True))
        energy -= sum(sites.coupling[i][j] * q[i] * q[j] for i in range(n) for j in range(i))
        weights[tuple(q)] = 10.0**energy
    total = sum(weights.values())
    netless = sum(w for q, w in weights.items() if sum(q) + sites.fixed_charge == 0) / total
    neutral = weights[(0,) * n] / total if sites.fixed_charge == 0 else 0.0
    assert state.neutral_fraction == pytest.approx(neutral, abs=1e-9)
    assert state.zwitterion_fraction == pytest.approx(netless - neutral, abs=1e-9)


def test_neutral_form_and_zwitterion_of_many_sites():
    """Twenty independent sites: the neutral form is a product, exact even by clusters."""
    sites = SiteSet(["base", "acid"] * 10, [7.0] * 20, [0.5] * 20, np.zeros((20, 20)))
    state = equilibrate([sites], [7.0])[0].states[0]
    assert state.neutral_fraction == pytest.approx(0.5**20, rel=1e-6)
    # without net charge: as many bases protonated as acids ionised, C(20, 10) of 2^20
    assert state.neutral_fraction + state.zwitterion_fraction == pytest.approx(184756 / 2**20, rel=1e-6)
