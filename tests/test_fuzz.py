"""The fuzz run itself: it runs, it can be repeated, and it fails where something that must hold does not."""

from __future__ import annotations

import random
import subprocess
import sys
from pathlib import Path

import pytest
from rdkit import Chem, rdBase

ROOT = Path(__file__).resolve().parent.parent
sys.path.insert(0, str(ROOT / "scripts"))

from mutations import damaged_file, damaged_structure  # noqa: E402

REAL = ["CCN(CC)CC", "c1ccncc1", "OC(=O)CN", "Cn1cnc2c1c(=O)n(C)c(=O)n2C", "NC(=N)NCCC[C@H](N)C(=O)O.Cl"]


def fuzz(*arguments: str | Path) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, str(ROOT / "scripts" / "fuzz"), *map(str, arguments)],
        capture_output=True,
        text=True,
        timeout=240,
    )


def test_a_run_of_two_seconds_finds_nothing_and_leaves_nothing(folder):
    (folder / "real.smi").write_text("\n".join(REAL) + "\n")
    result = fuzz("real.smi", "--seconds", "2", "--seed", "5")
    assert result.returncode == 0, result.stdout + result.stderr
    assert [line.split(":")[0] for line in result.stdout.splitlines()] == ["structures", "files"]
    assert "ok" in result.stdout and "exit code 0" in result.stdout
    assert [path.name for path in folder.iterdir()] == ["real.smi"]


def test_a_case_is_the_same_each_time_and_most_are_still_molecules():
    cases = [[damaged_structure(random.Random(f"{n}"), REAL) for n in range(300)] for _ in range(2)]
    assert cases[0] == cases[1]
    with rdBase.BlockLogs():
        read = sum(Chem.MolFromSmiles(text) is not None for text in cases[0])
    assert 100 < read < 290
    assert len(set(cases[0])) > 270


def test_files_of_every_format_are_damaged_the_same_way_each_time(folder):
    pytest.importorskip("pyarrow")
    pytest.importorskip("zstandard")
    endings, contents = set(), []
    for n in range(120):
        path = damaged_file(random.Random(f"{n}"), REAL, folder)
        endings.add(path.name)
        contents.append(path.read_bytes())
        again = damaged_file(random.Random(f"{n}"), REAL, folder)
        assert again == path
        assert (
            path.suffix == ".zst"
            or path.name.endswith((".gz", ".parquet"))
            or again.read_bytes() == contents[-1]
        )
    assert {"in.smi", "in.csv", "in.tsv", "in.sdf", "in.parquet", "in.smi.gz", "in.sdf.zst"} <= endings
    assert any(len(data) > 1_000_000 for data in contents)


def test_what_must_not_be_is_found(monkeypatch, folder, capsys):
    from importlib.machinery import SourceFileLoader
    from importlib.util import module_from_spec, spec_from_loader

    loader = SourceFileLoader("fuzz_script", str(ROOT / "scripts" / "fuzz"))
    spec = spec_from_loader("fuzz_script", loader)
    module = module_from_spec(spec)
    loader.exec_module(module)
    for name, value in (
        ("pkah_1", 16.5),
        ("pka_2", -5.1),
        ("dominant_fraction", 1.01),
        ("net_charge", float("nan")),
    ):
        with pytest.raises(module.Broken):
            module.check_value(name, value)
    for code, said in ((1, "basirank: x\n"), (2, ""), (0, "Traceback\n"), (0, "warning\n")):
        with pytest.raises(module.Broken):
            module.check_call(code, said, None, None if code == 2 else 3)
    (folder / "out.csv").write_text("status,pkah_1\nok,9.80\n")
    module.check_call(0, "", folder / "out.csv", 1)
    with pytest.raises(module.Broken, match="1 rows out, 2 in"):
        module.check_call(0, "", folder / "out.csv", 2)
    real = module.records_of
    monkeypatch.setattr(
        module, "records_of", lambda batch, *rest: [(*row[:-1], 7.0) for row in real(batch, *rest)]
    )
    assert (
        module.run("structures", iter([0]), float("inf"), 1, [ROOT / "data" / "demo.smi"], folder / "kept")[1]
        > 0
    )
    assert "FAILED --seed 1 --only structures --case 0" in capsys.readouterr().out
    assert (folder / "kept" / "structures-1-0.smi").exists()
