"""Features for scikit-learn: the numbers of `annotate`, for every shape of input and number of processes."""

from __future__ import annotations

import math
import pickle
import subprocess
import sys
import warnings

import numpy as np
import pandas as pd
import pytest
from rdkit import Chem
from sklearn.base import clone
from sklearn.compose import ColumnTransformer
from sklearn.linear_model import Ridge
from sklearn.model_selection import GridSearchCV, KFold
from sklearn.pipeline import make_pipeline
from sklearn.utils import estimator_checks

import basirank
from basirank import BasicityFeatures

AMINES = ["CCN", "c1ccncc1", "NCC(=O)O", "NCCN", "Nc1ccccc1", "CCCC", "C[N+](C)(C)C"]

# The checks that send no matrix of numbers. The others do, so scikit-learn itself leaves them out for a transformer
# whose tags say that it takes one-dimensional text (`two_d_array` false).
CHECKS = (
    "check_estimator_cloneable",
    "check_estimator_tags_renamed",
    "check_valid_tag_types",
    "check_estimator_repr",
    "check_no_attributes_set_in_init",
    "check_do_not_raise_errors_in_init_or_set_params",
    "check_mixin_order",
    "check_parameters_default_constructible",
    "check_get_params_invariance",
    "check_set_params",
)


def features(structures: object, **given: object) -> pd.DataFrame:
    return BasicityFeatures(**given).set_output(transform="pandas").fit_transform(structures)


def test_features_are_the_numbers_of_annotate():
    found = features(AMINES, steps=4, ph=[2, 7.4])
    frame = basirank.annotate(AMINES, ph=[2, 7.4], forms=True)
    shared = [name for name in found.columns if name in frame.columns]
    assert len(shared) == 16 + 2 * 4
    pd.testing.assert_frame_equal(found[shared], frame[shared].astype("float64"))
    assert (
        found["base_steps"].tolist() == frame[[f"pkah_{n}" for n in range(1, 5)]].notna().sum(axis=1).tolist()
    )
    assert (
        found["acid_steps"].tolist() == frame[[f"pka_{n}" for n in range(1, 5)]].notna().sum(axis=1).tolist()
    )
    supported = frame["pkah_1_support"].eq("supported").astype("float64").where(frame["pkah_1"].notna())
    assert found["pkah_1_supported"].equals(supported.astype("float64"))


def test_share_of_the_neutral_form_keeps_its_logarithm_where_it_is_small():
    # of one base log10 of the neutral share is -log10(1 + 10^(pKaH - pH)) (Henderson-Hasselbalch)
    found = features(["CCN"], ph=[4, 7.4, 12])
    pkah = found.loc[0, "pkah_1"]
    for ph in (4, 7.4, 12):
        assert found.loc[0, f"log_neutral_at_{ph:g}"] == pytest.approx(
            -math.log10(1 + 10 ** (pkah - ph)), abs=0.006
        )
    # tetramethylammonium is never neutral
    assert features(["C[N+](C)(C)C"]).loc[0, "log_neutral"] == -10


@pytest.mark.parametrize("kind", ["list", "tuple", "array", "column", "rows", "series", "frame", "molecules"])
def test_every_shape_of_one_column_gives_the_same(kind: str):
    given = {
        "list": AMINES,
        "tuple": tuple(AMINES),
        "array": np.array(AMINES),
        "column": np.array(AMINES, dtype=object)[:, None],
        "rows": [[one] for one in AMINES],
        "series": pd.Series(AMINES),
        "frame": pd.DataFrame({"smiles": AMINES}),
        "molecules": [Chem.MolFromSmiles(one) for one in AMINES],
    }[kind]
    expected = BasicityFeatures().fit_transform(AMINES)
    np.testing.assert_array_equal(BasicityFeatures().fit_transform(given), expected)


def test_frame_output_keeps_the_index_and_has_the_names_of_get_feature_names_out():
    transformer = BasicityFeatures(ph=[5.5, 7.4], steps=1).set_output(transform="pandas")
    found = transformer.fit_transform(pd.DataFrame({"structure": AMINES[:2]}, index=["a", "b"]))
    assert found.index.tolist() == ["a", "b"]
    assert found.columns.tolist() == transformer.get_feature_names_out().tolist()
    assert transformer.feature_names_in_.tolist() == ["structure"] and transformer.n_features_in_ == 1
    assert found.dtypes.eq("float64").all()
    assert not hasattr(transformer.fit(AMINES), "feature_names_in_")


def test_numbers_are_the_same_bit_for_bit_for_any_number_of_processes():
    chains = [f"{'C' * (n % 23 + 1)}N{'C' * (n % 7)}O{'C' * (n % 5)}c1ccnc(N)c1" for n in range(1100)]
    one, two = (BasicityFeatures(n_jobs=n).fit_transform(chains) for n in (1, 2))
    assert one.tobytes() == two.tobytes() and one.shape[0] == 1100
    alone = BasicityFeatures().fit_transform(chains[700:701])
    assert alone.tobytes() == one[700:701].tobytes()


def test_refused_structures_are_missing_in_all_features_with_one_warning():
    given = ["CCN", "nonsense(", None, float("nan"), "", 7, "NCCN"]
    with pytest.warns(
        UserWarning, match=r"5 of 7 structures are refused.*stands at 1: cannot be read"
    ) as told:
        found = BasicityFeatures().fit_transform(given)
    assert len(told) == 1
    assert np.isnan(found[1:6]).all() and not np.isnan(found[[0, 6]]).all()


def test_missing_values_become_the_number_asked_for():
    plain = BasicityFeatures().fit_transform(AMINES)
    filled = BasicityFeatures(missing=-10).fit_transform(AMINES)
    assert np.isnan(plain).any()
    assert np.array_equal(filled, np.where(np.isnan(plain), -10.0, plain))


def test_nothing_is_warned_of_when_all_can_be_computed():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        BasicityFeatures().fit_transform(AMINES)


def test_local_corrections_move_the_features_and_pass_to_clones_and_processes():
    series = basirank.condition([("Fc1ccc(CN2CCN3CCOC3C2)cc1", 7.0), ("Clc1ccc(CN2CCN3CCOC3C2)cc1", 6.9)])
    analogue = ["Brc1ccc(CN2CCN3CCOC3C2)cc1"] * 600
    moved = clone(BasicityFeatures(local=series, n_jobs=2)).fit_transform(analogue)
    assert moved[0, 0] == basirank.annotate(analogue[:1], local=series).pkah_1[0]
    assert moved[0, 0] != BasicityFeatures().fit_transform(analogue[:1])[0, 0]


def test_conditions_are_those_asked_for():
    warm = features(["CCN"], temperature=37, ionic_strength=0.15)
    assert warm.loc[0, "pkah_1"] == basirank.annotate(["CCN"], temperature=37, ionic_strength=0.15).pkah_1[0]


def test_it_stands_in_a_pipeline_in_a_column_transformer_and_in_a_grid_search():
    # log P of the alkylamines grows with the chain, and so does the answer here: what is tested is the plumbing
    frame = pd.DataFrame({"smiles": ["C" * n + "N" for n in range(1, 13)], "carbons": range(1, 13)})
    target = np.arange(12.0)
    both = ColumnTransformer(
        [("basicity", BasicityFeatures(missing=-10), "smiles"), ("size", "passthrough", ["carbons"])]
    )
    pipeline = make_pipeline(both, Ridge(alpha=1e-6)).fit(frame, target)
    assert pipeline.predict(frame) == pytest.approx(target, abs=0.01)
    assert "basicity__pkah_1" in pipeline[0].get_feature_names_out()
    search = GridSearchCV(
        make_pipeline(BasicityFeatures(missing=-10), Ridge()),
        {"basicityfeatures__ph": [2.0, 7.4]},
        cv=KFold(3),
    )
    assert search.fit(frame["smiles"], target).best_params_["basicityfeatures__ph"] in (2.0, 7.4)


def test_it_needs_no_fitting_and_survives_pickling():
    transformer = BasicityFeatures(steps=1, ph=5.5)
    again = pickle.loads(pickle.dumps(transformer))
    np.testing.assert_array_equal(transformer.transform(["CCN"]), again.transform(["CCN"]))


@pytest.mark.parametrize(
    ("given", "message"),
    [
        ({"ph": 99}, "pH must lie between"),
        ({"steps": 0}, "steps must be a whole number from 1 to 4"),
        ({"steps": True}, "steps must be"),
        ({"missing": "zero"}, "missing must be 'nan' or a number"),
        ({"temperature": 99}, "temperature must lie between"),
    ],
)
def test_wrong_parameters_are_told_when_fitting(given, message):
    transformer = BasicityFeatures(**given)
    with pytest.raises(ValueError, match=message):
        transformer.fit(["CCN"])


@pytest.mark.parametrize(
    ("given", "error"),
    [
        ("CCN", TypeError),
        ([], ValueError),
        (np.array([["CCN", "CCO"]]), ValueError),
        ([["CCN", "CCO"]], ValueError),
        (pd.DataFrame({"a": ["CCN"], "b": ["CCN"]}), ValueError),
        (np.zeros((2, 2, 2)), ValueError),
    ],
)
def test_what_is_no_column_of_structures_is_an_error(given, error):
    with pytest.raises(error, match=r"one column|no structure given|one structure alone"):
        BasicityFeatures().fit(given)


@pytest.mark.parametrize("name", CHECKS)
def test_checks_of_scikit_learn_that_send_no_numbers_pass(name: str):
    check = getattr(estimator_checks, name, None)
    if check is None:
        pytest.skip("this scikit-learn has no such check")
    if name == "check_parameters_default_constructible":
        try:
            check("BasicityFeatures", BasicityFeatures())
        except TypeError:  # before 1.6 it takes the class
            check("BasicityFeatures", BasicityFeatures)
        return
    check("BasicityFeatures", BasicityFeatures())


def test_scikit_learn_leaves_out_its_checks_on_matrices_of_numbers():
    with warnings.catch_warnings(record=True) as told:
        warnings.simplefilter("always")
        estimator_checks.check_estimator(BasicityFeatures())
    assert any("Can't test estimator BasicityFeatures" in str(one.message) for one in told)


def test_the_package_imports_scikit_learn_only_for_the_features():
    code = (
        "import sys, basirank; basirank.annotate(['CCN']); assert 'sklearn' not in sys.modules; "
        "basirank.BasicityFeatures; assert 'sklearn' in sys.modules"
    )
    subprocess.run([sys.executable, "-c", code], check=True)
