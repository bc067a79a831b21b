"""Residual: what measured neighbours add to a line; the same in any order or batch, none far from data."""

from __future__ import annotations

import csv
import random
from importlib.resources import as_file, files
from pathlib import Path

import numpy as np
import pytest
from rdkit import Chem

from basirank.prediction import CORRECTION, Lines, predict, site_lines
from basirank.residual import BLOCK, Correction, corrections, group_of, model, site_counts, weighted
from basirank.sites import site_classes
from basirank.structures import Refusal, read_parent
from basirank.tables import read_table

DATA = Path(__file__).resolve().parent.parent / "data"

DRUGS = [
    "CC(C)NCC(O)COc1cccc2ccccc12",  # propranolol
    "CN1CCCC1c1cccnc1",  # nicotine
    "CN(C)C(=N)NC(N)=N",  # metformin
    "NC(Cc1c[nH]cn1)C(=O)O",  # histidine
    "COc1cc(Cc2cnc(N)nc2N)cc(OC)c1OC",  # trimethoprim
    "CCN(CC)CCCC(C)Nc1ccnc2cc(Cl)ccc12",  # chloroquine
    "CNC(NCCSCc1nc[nH]c1C)=NC#N",  # cimetidine
    "Nc1ccc(cc1)S(=O)(=O)Nc1ccccn1",  # sulfapyridine
    "OC(=O)c1ccccc1O",  # salicylic acid
    "Cn1c(=O)c2[nH]cnc2n(C)c1=O",  # theophylline
]


def rows_of(name: str) -> list[dict[str, str]]:
    with (DATA / name).open(encoding="utf-8", newline="") as handle:
        return list(csv.DictReader(handle))


def lines_of(structures: list[str]) -> list[Lines]:
    found = []
    for smiles in structures:
        try:
            found.append(site_lines(read_parent(smiles)))
        except Refusal:
            continue
    return found


def flat(batch: list[Lines]) -> tuple[list, list, list]:
    """Graph, site and line value of every site, as `corrections` takes them."""
    graphs = [lines.graph for lines in batch for _ in lines.sites]
    sites = [site for lines in batch for site in lines.sites]
    return graphs, sites, [value for lines in batch for value in lines.values]


@pytest.fixture(scope="module")
def batch() -> tuple[list, list, list]:
    """Some three hundred sites of known compounds."""
    return flat(lines_of(DRUGS + [row["smiles"] for row in rows_of("check_values.csv")[::5]]))


@pytest.fixture(scope="module")
def corrected(batch) -> list[Correction]:
    return corrections(*batch)


# features


def respelled(smiles: str, seed: int) -> str:
    """The same compound with its atoms written in another order."""
    mol = Chem.MolFromSmiles(smiles)
    order = list(range(mol.GetNumAtoms()))
    random.Random(seed).shuffle(order)
    return Chem.MolToSmiles(Chem.RenumberAtoms(mol, order), canonical=False)


def surroundings(smiles: str) -> list:
    """Class and counts of each site, in an order of their own."""
    lines = site_lines(read_parent(smiles))
    return sorted((site.site_class, sorted(site_counts(lines.graph, site).items())) for site in lines.sites)


@pytest.mark.parametrize("smiles", DRUGS)
def test_the_surroundings_of_a_site_do_not_depend_on_the_spelling(smiles):
    expected = surroundings(smiles)
    for seed in range(12):
        assert surroundings(respelled(smiles, seed)) == expected


def test_what_lies_beyond_seven_bonds_is_not_looked_at():
    near, far = (lines_of([smiles])[0] for smiles in ("NCCCCCCCCCCCC", "NCCCCCCCCCCCCF"))
    assert site_counts(near.graph, near.sites[0]) == site_counts(far.graph, far.sites[0])
    close = lines_of(["NCCCCF"])[0]
    assert site_counts(close.graph, close.sites[0]) != site_counts(near.graph, near.sites[0])


def test_a_feature_weighs_less_with_each_bond_and_counts_as_often_as_it_stands():
    lines = lines_of(["CC(C)(C)CN"])[0]
    counts = site_counts(lines.graph, lines.sites[0])
    features = list(weighted(counts, 0.5))
    assert len(features) == sum(counts.values())
    assert all(weight == 0.5 ** int(name[0]) for name, weight in features)
    assert len({name for name, _ in features}) == len(features)


def test_an_isotope_changes_nothing():
    plain, heavy = (lines_of([smiles])[0] for smiles in ("CCN", "[2H]C([2H])([2H])C[15N]([2H])[2H]"))
    assert site_counts(plain.graph, plain.sites[0]) == site_counts(heavy.graph, heavy.sites[0])


# one site alone and in a batch


def alone(batch, places: range) -> list[Correction]:
    graphs, sites, values = batch
    return [corrections([graphs[p]], [sites[p]], [values[p]])[0] for p in places]


def test_a_site_alone_and_in_a_batch_get_the_same_correction_to_the_last_bit(batch, corrected):
    places = range(0, len(corrected), 9)
    for one, place in zip(alone(batch, places), places, strict=True):
        assert one.value == corrected[place].value
        assert one.support == corrected[place].support
        assert one.half_width == pytest.approx(corrected[place].half_width, rel=1e-4)


def test_a_site_alone_and_in_a_batch_get_the_same_interval_to_the_last_bit(batch, corrected):
    places = range(0, len(corrected), 9)
    assert [one.half_width for one in alone(batch, places)] == [corrected[p].half_width for p in places]


def test_the_order_of_the_batch_changes_no_correction_and_neither_do_blocks(batch, corrected):
    graphs, sites, values = batch
    assert len(sites) > 2 * BLOCK
    expected = [one.value for one in corrected]
    backward = corrections(graphs[::-1], sites[::-1], values[::-1])
    assert [one.value for one in backward[::-1]] == expected
    for size in (BLOCK - 1, BLOCK, BLOCK + 1):
        part = corrections(graphs[:size], sites[:size], values[:size])
        assert [one.value for one in part] == expected[:size]


def test_no_sites_give_no_corrections():
    assert corrections([], [], []) == []


# near data and far from them


def test_a_correction_is_finite_and_its_interval_positive(corrected):
    for one in corrected:
        assert np.isfinite(one.value)
        assert 0.05 < one.half_width < 6.0
        assert one.support in ("supported", "extrapolated")


UNLIKE = [
    # nothing of their kind has been measured in water
    "CN(C)P(N(C)C)N(C)C",
    "C[Si](C)(C)N[Si](C)(C)C",
    "FC(F)(F)C(F)(F)C(F)(F)N(C(F)(F)C(F)(F)F)C(F)(F)C(F)(F)F",
    "CC(C)=C=NC(C)(C)C",
    "CN(C)[Se]c1ccccc1",
]


def test_far_from_everything_measured_the_correction_fades_and_says_so():
    near = [c for p in lines_of(DRUGS[:2]) for c in corrections(*flat([p]))]
    far = [c for p in lines_of(UNLIKE) for c in corrections(*flat([p]))]
    assert far
    assert all(one.support == "extrapolated" for one in far)
    assert all(abs(one.value) < 0.6 for one in far)
    assert np.median([one.half_width for one in far]) > np.median([one.half_width for one in near])


def test_known_compounds_are_supported():
    (nicotine,) = predict(["CN1CCCC1c1cccnc1"])
    amine = max(nicotine.estimates, key=lambda estimate: estimate.value)
    assert amine.support == "supported"


def test_a_longer_chain_brings_the_same_correction_to_the_amine():
    one, other = (corrections(*flat(lines_of([smiles])))[0] for smiles in ("CCCCCCCCN", "CCCCCCCCCCCCN"))
    assert one.value == pytest.approx(other.value, abs=0.05)


def test_the_correction_brings_predictions_nearer_to_measured_values_than_the_line_alone():
    """First constants of the bases of the check values that have one site only: intrinsic is macroscopic."""
    rows = [row for row in rows_of("check_values.csv") if row["kind"] == "pkah" and row["step"] == "1"]
    with_correction, line_alone = [], []
    for row, prediction in zip(rows, predict([row["smiles"] for row in rows]), strict=True):
        if len(prediction.estimates) != 1:
            continue
        (estimate,) = prediction.estimates
        value = float(row["value"])
        with_correction.append(abs(estimate.value - value))
        line_alone.append(abs(sum(t.value for t in estimate.terms if t.name != CORRECTION) - value))
    assert len(with_correction) > 150
    assert np.mean(with_correction) < 0.75 * np.mean(line_alone)
    assert np.mean(line_alone) < 0.8


# the model


def test_the_kernel_is_symmetric_and_positive_semi_definite():
    trained = model()
    for name, group in trained.groups.items():
        some = slice(None, None, max(1, len(group.total) // 40))
        dense = group.features[:, some].astype(float)
        scale = np.where(dense > 0, dense, 0.0)
        overlap = np.minimum(scale.T[:, None, :], scale.T[None, :, :]).sum(axis=2)
        k = trained.kernel.covariance(
            overlap,
            (group.total[some], group.total[some]),
            (group.value[some], group.value[some]),
            (group.site_class[some], group.site_class[some]),
            (group.family[some], group.family[some]),
        )
        assert np.allclose(k, k.T), name
        assert np.linalg.eigvalsh(k).min() > -1e-8 * trained.kernel.variance * len(k), name
        assert np.all(k <= trained.kernel.variance * (1 + 1e-6)), name


def test_a_site_is_as_like_itself_as_can_be_and_less_like_any_other(batch):
    trained = model()
    one = np.array([3.0, 5.0])
    code = np.array([0, 0])
    overlap = np.array([[3.0, 2.0], [2.0, 5.0]])
    k = trained.kernel.covariance(overlap, (one, one), (one, one), (code, code), (code, code))
    assert np.diag(k) == pytest.approx([trained.kernel.variance] * 2)
    assert k[0, 1] < k[0, 0]


def test_the_trained_arrays_hold_no_objects():
    place = files("basirank.models").joinpath("residual.npz")
    with as_file(place) as path, np.load(path, allow_pickle=False) as arrays:
        assert len(arrays.files) > 0
        for name in arrays.files:
            assert arrays[name].dtype.kind in "fiuUb", name
            if arrays[name].dtype.kind == "f":
                assert np.isfinite(arrays[name]).all(), name


def test_every_family_has_a_group_and_the_model_knows_the_classes_of_the_table():
    trained = model()
    families = {row["family"] for row in read_table("families.csv")}
    assert set(group_of()) == families
    assert set(trained.groups) <= set(group_of().values())
    known = {row.name for row in site_classes() if row.kind != "none"}
    assert set(trained.classes) - known == set(), "classes in the model that the table no longer has"
    assert set(trained.families) - families == set()
    assert {"all bases", "all acids"} <= set(trained.spread)
    assert trained.quantile["extrapolated"] > 0 < trained.quantile["supported"]
