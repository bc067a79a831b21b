"""A user's own measured values: placed on their steps, brought to standard conditions, worth what they are worth."""

from __future__ import annotations

import json
import subprocess
import sys
import zipfile
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import basirank
from basirank import calibrate, condition, read_local, save_local
from basirank.calibration import COSOLVENT_ERROR, FAR
from basirank.conditioning import left_out
from basirank.conditions import ionic_strength_shift
from basirank.prediction import OWN_CORRECTION, OWN_NOTE
from basirank.readers import InputError

# 4-substituted quinuclidines at 25 C: Grob and Schlageter 1976 (memory)
QUINUCLIDINES = {
    "C": 11.01,
    "O": 9.44,
    "F": 8.55,
    "Cl": 8.61,
    "Br": 8.47,
    "C#N": 8.08,
    "OC": 9.31,
    "N": 10.14,
}
SERIES = [f"{group}c1ccc(CN2CCN3CCOC3C2)cc1" for group in ("F", "Cl", "Br", "C", "CO", "N#C")]
"""An invented series that nobody has measured."""


def quinuclidine(group: str) -> str:
    return f"C12({group})CCN(CC1)CC2"


def table(**columns: list[object]) -> pd.DataFrame:
    return pd.DataFrame(columns)


def first(smiles: str, local: basirank.LocalModel | None = None, **at: float) -> float:
    return float(basirank.annotate([smiles], local=local, **at).loc[0, "pkah_1"])


@pytest.fixture(scope="module")
def local() -> basirank.LocalModel:
    return condition([(smiles, first(smiles) + 1.0) for smiles in SERIES[:3]])


# what the table is worth


def test_each_compound_left_out_is_the_model_conditioned_without_it():
    measured = [(smiles, first(smiles) + 0.2 * n) for n, smiles in enumerate(SERIES)]
    for n, said in enumerate(left_out(measured)):
        others = condition(measured[:n] + measured[n + 1 :])
        assert said == pytest.approx(first(SERIES[n], others), abs=0.02)


def test_all_values_of_a_compound_are_left_out_together():
    diamine = "NCCN1CCOC2(C1)CC2"
    row = basirank.annotate([diamine]).loc[0]
    alone = left_out([(diamine, row["pkah_1"] + 1), (diamine, row["pkah_2"] + 1, "pkah", 2)])
    assert alone == pytest.approx([row["pkah_1"], row["pkah_2"]], abs=0.011)


def test_a_shifted_series_is_learnt_and_the_figures_show_it():
    values = [first(smiles) + 1.0 for smiles in SERIES]
    found = calibrate(table(smiles=SERIES, pkah=values))
    before, after = found.errors()
    assert np.abs(before).mean() == pytest.approx(1.0, abs=0.01)
    assert np.abs(after).mean() < 0.5
    assert found.compounds == 6 and not any(row.trained for row in found.rows)


@settings(max_examples=8, deadline=None)
@given(st.permutations(range(5)))
def test_the_order_of_the_rows_does_not_matter(order):
    values = [first(smiles) + 0.3 * n for n, smiles in enumerate(SERIES)]
    straight = calibrate(table(smiles=SERIES[:5], pkah=values[:5]))
    mixed = calibrate(table(smiles=[SERIES[n] for n in order], pkah=[values[n] for n in order]))
    said = {row.compound: row.after for row in mixed.rows}
    assert {row.compound: pytest.approx(row.after, abs=1e-6) for row in straight.rows} == said


def test_quinuclidines_tell_of_each_other():
    found = calibrate(
        table(smiles=[quinuclidine(group) for group in QUINUCLIDINES], pkah=list(QUINUCLIDINES.values()))
    )
    _, after = found.errors()
    assert np.abs(after).mean() < 0.3
    assert all(row.trained for row in found.rows)


# conditions


def test_a_warm_value_in_salt_is_the_one_brought_to_standard_conditions():
    smiles = SERIES[0]
    warm = first(smiles, temperature=37.0, ionic_strength=0.1)
    (row,) = calibrate(table(smiles=[smiles], pkah=[warm], temperature=[37], ionic_strength=[0.1])).rows
    assert row.value == pytest.approx(first(smiles), abs=0.011)


def test_a_concentration_constant_differs_from_a_mixed_one_by_the_activity_of_the_proton():
    values = {}
    for constant in ("mixed", "concentration", "thermodynamic"):
        (row,) = calibrate(
            table(smiles=[SERIES[0]], pkah=[7.0], ionic_strength=[0.1], constant=[constant])
        ).rows
        values[constant] = row.value
    activity = float(ionic_strength_shift(1, 0.1, kind="mixed"))
    assert values["concentration"] - values["mixed"] == pytest.approx(activity, abs=1e-9)
    assert values["thermodynamic"] == pytest.approx(7.0)


def test_a_mixture_with_methanol_counts_less_and_is_not_refused():
    water, mixture = calibrate(
        table(
            smiles=[SERIES[0], SERIES[1]],
            pkah=[7.0, 7.0],
            method=["potentiometry"] * 2,
            cosolvent=["", "50 % MeOH"],
        )
    ).rows
    assert water.error == 0.05
    assert mixture.error == pytest.approx(np.hypot(0.05, COSOLVENT_ERROR))
    assert "50 % MeOH" in " ".join(mixture.remarks)


# steps and contradictions


def test_a_value_without_a_kind_goes_to_the_nearest_step_and_says_when_another_would_do():
    glycine, amine, between = calibrate(table(smiles=["NCC(=O)O", "CCN", "NCCN"], pKa=[2.35, 10.6, 8.4])).rows
    assert (glycine.kind, glycine.step) == ("pka", 1)
    assert (amine.kind, amine.step) == ("pkah", 1)
    assert "ambiguous" in " ".join(between.remarks)


def test_a_stated_step_is_kept_and_a_nearer_one_named():
    (row,) = calibrate(table(smiles=["NCCN"], pkah=[6.9])).rows
    assert (row.kind, row.step) == ("pkah", 1)
    assert "pkah_2" in " ".join(row.remarks)


def test_a_slip_is_named_and_does_not_move_its_neighbours():
    values = [first(smiles) for smiles in SERIES]
    values[0] -= FAR + 2.0
    found = calibrate(table(smiles=SERIES, pkah=values))
    assert "over 3 units" in " ".join(found.rows[0].remarks)
    for smiles, value in zip(SERIES[1:], values[1:], strict=True):
        assert first(smiles, found.local) == pytest.approx(value, abs=0.15)


def test_values_of_one_step_that_disagree_are_named():
    rows = calibrate(table(smiles=["CCN1CCOCC1", "C1COCCN1CC"], pkah=[7.7, 7.2])).rows
    assert all("disagree by 0.50" in " ".join(row.remarks) for row in rows)


def test_rows_that_cannot_be_used_are_kept_with_their_reason():
    found = calibrate(table(smiles=["CCN", "xx", "CCCN", None], pkah=[10.6, 3, "high", 5]))
    assert len(found.rows) == 1
    assert [one.number for one in found.unused] == [2, 3, 4]
    with pytest.raises(ValueError, match="no row can be used: cannot be read as SMILES"):
        calibrate(table(smiles=["xx"], pkah=[3]))


# the file


def test_a_saved_model_comes_back_bit_for_bit(local, tmp_path):
    save_local(local, tmp_path / "own.npz")
    back = read_local(tmp_path / "own.npz")
    assert back.digest == local.digest
    assert back.measurements == local.measurements
    frame = basirank.annotate(SERIES, local=local)
    pd.testing.assert_frame_equal(frame, basirank.annotate(SERIES, local=back))
    save_local(back, tmp_path / "again.npz")
    assert (tmp_path / "own.npz").read_bytes() == (tmp_path / "again.npz").read_bytes()


def damaged(path: Path, how: str) -> None:
    data = path.read_bytes()
    if how == "cut short":
        path.write_bytes(data[: len(data) // 2])
    elif how == "empty":
        path.write_bytes(b"")
    elif how == "text":
        path.write_text("smiles,pkah\nCCN,10.6\n")
    else:
        with np.load(path) as stored:
            arrays = {name: stored[name] for name in stored.files}
        about = json.loads(str(arrays["about"]))
        if how == "other model":
            about["model"] = "0"
        elif how == "other layout":
            about["format"] = 99
        elif how == "missing array":
            del arrays["weights"]
        elif how == "wrong shape":
            arrays["pulls"] = arrays["pulls"][:-1]
        elif how == "not finite":
            arrays["residuals"] = arrays["residuals"] * np.nan
        arrays["about"] = np.array(json.dumps(about))
        np.savez(path, **arrays)


@pytest.mark.parametrize(
    "how",
    [
        "cut short",
        "empty",
        "text",
        "missing array",
        "wrong shape",
        "not finite",
        "other model",
        "other layout",
    ],
)
def test_a_file_that_is_not_sound_is_refused_in_one_line(local, folder, run, how):
    path = folder / "own.npz"
    save_local(local, path)
    damaged(path, how)
    with pytest.raises(InputError, match="calibrate again" if "other" in how else "no local model"):
        read_local(path)
    done = run("rank", "CCN", "--local", "own.npz")
    assert done.exit_code == 2 and len(done.stderr.splitlines()) == 1


@settings(max_examples=150, deadline=None)
@given(st.lists(st.tuples(st.floats(0, 1, exclude_max=True), st.integers(0, 255)), min_size=1, max_size=20))
def test_bytes_that_changed_on_the_way_are_refused_or_change_nothing(local, tmp_path_factory, changes):
    path = tmp_path_factory.getbasetemp() / "bytes.npz"
    save_local(local, path)
    data = bytearray(path.read_bytes())
    for share, byte in changes:
        data[int(share * len(data))] = byte
    path.write_bytes(data)
    try:
        back = read_local(path)
    except InputError as error:
        assert "\n" not in str(error)
    else:
        assert back.digest == local.digest


def test_the_file_holds_nothing_that_could_run(local, tmp_path):
    save_local(local, tmp_path / "own.npz")
    with zipfile.ZipFile(tmp_path / "own.npz") as packed:
        for name in packed.namelist():
            with packed.open(name) as stream:
                version = np.lib.format.read_magic(stream)
                read = getattr(np.lib.format, f"read_array_header_{version[0]}_0")
                assert not read(stream)[2].hasobject


# its use


def test_explanations_add_up_and_name_the_own_measurements(local):
    told = basirank.explain(SERIES[4], local=local)
    moved = [site for site in told.sites if any(term.name == OWN_CORRECTION for term in site.terms)]
    assert moved
    for site in told.sites:
        assert sum(term.value for term in site.terms) == pytest.approx(site.value, abs=1e-6)
    named = [one for site in moved for one in site.evidence if one.source == "own measurement"]
    assert named and all(one.kind == "pkah" for one in named)
    assert OWN_NOTE in told.message
    assert OWN_NOTE not in basirank.explain("c1ccncc1", local=local).message


def test_every_command_takes_it_and_the_runs_of_annotate_agree(local, folder, run):
    save_local(local, "own.npz")
    Path("in.smi").write_text("".join(f"{smiles} c{n}\n" for n, smiles in enumerate(SERIES * 150)))
    assert run("annotate", "in.smi", "-o", "one.csv", "--local", "own.npz", "--jobs", "1").exit_code == 0
    done = subprocess.run(
        [sys.executable, "-m", "basirank", "annotate", "in.smi", "-o", "two.csv", "--local", "own.npz", "--jobs", "2"],
        capture_output=True, check=False,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert Path("one.csv").read_bytes() == Path("two.csv").read_bytes()
    frame = pd.read_csv("one.csv")
    assert frame.pkah_1[4] == pytest.approx(first(SERIES[4], local), abs=1e-9)
    for words in (["rank"], ["report", "-o", "r.html"], ["curve"], ["titrate"]):
        assert run(words[0], SERIES[4], "--local", "own.npz", *words[1:]).exit_code == 0
    assert "own measurement" in run("explain", SERIES[4], "--local", "own.npz").stdout
    assert "own measurements taken into account" in Path("r.html").read_text(encoding="utf-8")


def test_a_run_with_another_local_model_does_not_go_on_with_the_first(local):
    from basirank.batch.plan import Plan, fingerprint
    from basirank.request import Request

    plans = [Plan((7.4,), "csv", "", (), request=Request(local=one)) for one in (None, local)]
    other = condition([(SERIES[0], 5.0)])
    plans.append(Plan((7.4,), "csv", "", (), request=Request(local=other)))
    assert len({json.dumps(fingerprint(plan, 500), sort_keys=True) for plan in plans}) == 3


def test_the_command_shows_before_and_after_and_writes_both_files(folder, run):
    lines = [f"q{n},{quinuclidine(group)},{value}" for n, (group, value) in enumerate(QUINUCLIDINES.items())]
    Path("own.csv").write_text("\n".join(["name,smiles,pkah", *lines, "bad,xx,3"]) + "\n")
    told = run("calibrate", "own.csv", "-o", "own.npz", "--table", "rows.csv")
    assert told.exit_code == 0
    assert "each compound left out" in told.stdout and "stand in the training table" in told.stdout
    assert told.stdout.count("no basis for dosing") == 1
    assert "row 9 (bad) not used: cannot be read as SMILES" in told.stderr
    rows = pd.read_csv("rows.csv")
    assert len(rows) == 9 and list(rows.status).count("unused") == 1
    assert run("rank", quinuclidine("I"), "--local", "own.npz").exit_code == 0


@pytest.mark.parametrize(
    ("words", "reason"),
    [
        (["own.csv", "-o", "own.csv"], "unknown ending"),
        (["own.csv", "--value-column", "x"], "no column named 'x'"),
        (["own.csv", "--temperature", "99"], "temperature must lie between"),
        (["none.csv"], "none.csv"),
        (["bad.csv"], "no row can be used"),
    ],
)
def test_a_wrong_call_stops_with_one_line(words, reason, folder, run):
    Path("own.csv").write_text("smiles,pkah\nCCN,10.6\n")
    Path("bad.csv").write_text("smiles,pkah\nxx,10.6\n")
    done = run("calibrate", *words)
    error = done.stderr.splitlines()
    assert done.exit_code == 2 and len(error) == 1 and reason in error[0]
