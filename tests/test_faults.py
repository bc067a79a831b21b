"""What a machine does to a program: outputs that nobody reads, full disks, folders without leave, no home, company."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

import pytest

from basirank.cli import COMMANDS

DRIVER = Path(__file__).with_name("faulty_outputs.py")

MIXTURE = "OC(=O)c1ccccc1 benzoic\nNc1ccccc1 aniline\nc1ccc2ccccc2c1 naphthalene\n"
MEASURED = "smiles,pkah\nCCN,10.7\nCCCN,10.6\nc1ccncc1,5.2\nNc1ccccc1,4.6\n"

TO_STANDARD_OUTPUT = {
    "rank": [["rank", "list.smi"], ["rank", "list.smi", "-o", "-"]],
    "annotate": [["annotate", "list.smi"]],
    "explain": [["explain", "CCN"]],
    "report": [],
    "curve": [["curve", "CCN"]],
    "calibrate": [["calibrate", "measured.csv"]],
    "score": [["score", "measured.csv"]],
    "titrate": [["titrate", "CCN.Cl"]],
    "workup": [["workup", "mixture.smi"]],
    "salts": [["salts", "CCN"]],
    "tune": [["tune", "Fc1ccc(CN2CCCCC2)cc1", "--to", "7:8"]],
}
TO_A_FILE = {
    "rank": ["out.csv", "out.md"],
    "annotate": ["out.csv", "out.sdf", "out.parquet"],
    "explain": ["out.svg", "out.json"],
    "report": ["out.html"],
    "curve": ["out.csv", "out.svg"],
    "calibrate": ["out.npz"],
    "score": ["out.csv", "out.html"],
    "titrate": ["out.csv"],
    "workup": ["out.json"],
    "salts": ["out.csv"],
    "tune": ["out.svg"],
}


@pytest.fixture
def lists(folder: Path) -> Path:
    """A folder with a list, a mixture and a table of measured values."""
    (folder / "list.smi").write_text("CCN ethylamine\nc1ccncc1 pyridine\nC1CC broken\n")
    (folder / "mixture.smi").write_text(MIXTURE)
    (folder / "measured.csv").write_text(MEASURED)
    return folder


def faulty(how: str, cases: list[list[str]]) -> list[tuple[int, str]]:
    done = subprocess.run(
        [sys.executable, str(DRIVER), how, json.dumps(cases)], capture_output=True, text=True, check=True
    )
    return [(code, said) for code, said in json.loads(done.stdout)]


def names() -> list[str]:
    return sorted(os.listdir())


def test_every_command_is_in_these_tests():
    assert set(TO_STANDARD_OUTPUT) == set(TO_A_FILE) == set(COMMANDS)


def test_an_output_that_nobody_reads_any_more_ends_every_command_quietly(lists):
    cases = [case for cases in TO_STANDARD_OUTPUT.values() for case in cases]
    before = names()
    for case, (code, said) in zip(cases, faulty("closed", cases), strict=True):
        assert code == 141, (case, code, said)
        assert all(line.startswith("basirank: ") for line in said.splitlines()), (case, said)
        assert "pipe" not in said.lower() and "Traceback" not in said, (case, said)
    assert names() == before


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="no full device here")
def test_a_full_standard_output_is_one_line_from_every_command(lists):
    cases = [case for cases in TO_STANDARD_OUTPUT.values() for case in cases]
    for case, (code, said) in zip(cases, faulty("full", cases), strict=True):
        last = said.splitlines()[-1] if said else ""
        assert (code, last) == (2, "basirank: cannot write standard output: no space left on device"), (
            case,
            said,
        )
        assert all(line.startswith("basirank: ") for line in said.splitlines()), (case, said)


def test_a_file_that_finds_no_room_is_one_line_and_leaves_nothing(lists):
    pytest.importorskip("pyarrow")
    cases = [
        [*(TO_STANDARD_OUTPUT[command] or [["report", "list.smi"]])[0], "-o", output]
        for command, outputs in TO_A_FILE.items()
        for output in outputs
    ]
    before = names()
    for case, (code, said) in zip(cases, faulty("small", cases), strict=True):
        last = said.splitlines()[-1] if said else ""
        assert (code, last) == (2, f"basirank: cannot write {case[-1]}: file too large"), (case, said)
        assert all(line.startswith("basirank: ") for line in said.splitlines()), (case, said)
    left = [name for name in names() if name not in before]
    assert left == [] or all(name.startswith(".out.") for name in left)
    assert not [name for name in left if name.startswith("out")]


def command(*arguments: str | Path) -> list[str]:
    return [sys.executable, "-m", "basirank", *map(str, arguments)]


def test_neither_home_nor_a_temporary_folder_nor_a_place_to_write_is_needed(lists):
    bare = {
        "PATH": os.environ.get("PATH", ""),
        "TMPDIR": "/nonexistent",
        "TEMP": "/nonexistent",
        "TMP": "/nonexistent",
    }
    nowhere = "/proc" if os.path.isdir("/proc") else "/"
    results = [
        subprocess.run(
            command(*arguments),
            capture_output=True,
            text=True,
            env=bare,
            cwd=nowhere,
            stdin=subprocess.DEVNULL,
        )
        for arguments in (["rank", "CCN", "c1ccncc1"], ["annotate", lists / "list.smi", "--jobs", "2"])
    ]
    for result in results:
        assert result.returncode == 0, result.stderr
    assert "primary aliphatic amine" in results[0].stdout
    assert results[1].stdout.count("\n") == 4


@pytest.fixture
def nobody() -> list[str]:
    """What runs a command as a user without rights, who can read the interpreter and the package."""
    if os.geteuid() != 0 or shutil.which("setpriv") is None:
        pytest.skip("needs root and setpriv")
    prefix = ["setpriv", "--reuid=65534", "--regid=65534", "--clear-groups"]
    tried = subprocess.run([*prefix, sys.executable, "-c", "import basirank"], capture_output=True, cwd="/")
    if tried.returncode:
        pytest.skip("that user may not read the interpreter or the package")
    return prefix


def test_a_user_without_rights_can_work_and_is_told_where_he_may_not(folder, nobody, monkeypatch):
    with tempfile.TemporaryDirectory() as open_to_read:  # pytest's own folders are closed to others
        lists = Path(open_to_read)
        lists.chmod(0o755)
        monkeypatch.chdir(lists)
        (lists / "list.smi").write_text("CCN ethylamine\n")
        work_without_rights(lists, nobody)
        monkeypatch.chdir(folder)


def work_without_rights(lists: Path, nobody: list[str]) -> None:

    def run(*arguments: str) -> subprocess.CompletedProcess[str]:
        return subprocess.run([*nobody, *command(*arguments)], capture_output=True, text=True, cwd=lists)

    assert run("rank", "list.smi").returncode == 0
    before = names()
    for arguments in (["annotate", "list.smi", "-o", "out.csv"], ["report", "list.smi"]):
        result = run(*arguments)
        assert (result.returncode, result.stderr) == (
            2,
            "basirank: the output folder may not be written to: .\n",
        )
    assert names() == before
    (lists / "list.smi").chmod(0o600)
    result = run("rank", "list.smi")
    assert (result.returncode, result.stderr) == (2, "basirank: cannot read list.smi: permission denied\n")


def test_several_runs_at_once_in_one_folder_do_not_meet(lists):
    cases = [
        ("annotate", "list.smi", "-o", "one.csv", "--jobs", "1"),
        ("annotate", "list.smi", "-o", "two.csv"),
        ("rank", "list.smi", "-o", "same.csv"),
        ("rank", "list.smi", "-o", "same.csv"),
    ]
    running = [subprocess.Popen(command(*case), stderr=subprocess.PIPE) for case in cases]
    for process in running:
        said = process.communicate(timeout=300)[1]
        assert process.returncode == 0, said
    assert Path("one.csv").read_bytes() == Path("two.csv").read_bytes()
    assert len(Path("same.csv").read_text().splitlines()) == 4
    assert names() == sorted(["list.smi", "measured.csv", "mixture.smi", "one.csv", "same.csv", "two.csv"])
