"""The wheel, built and installed in a fresh environment away from the source tree, does the job there."""

from __future__ import annotations

import csv
import os
import shutil
import subprocess
import sys
import venv
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
PARTS = ("basirank", "data", "models", "pyproject.toml", "README.md", "LICENSE")


def clean_environment() -> dict[str, str]:
    """The environment without what could lead Python back to the source tree."""
    return {name: value for name, value in os.environ.items() if name not in ("PYTHONPATH", "VIRTUAL_ENV")}


def call(*command: str | Path, cwd: Path) -> str:
    done = subprocess.run(
        [str(part) for part in command], cwd=cwd, capture_output=True, text=True, env=clean_environment()
    )
    assert done.returncode == 0, f"{command}: {done.stdout[-2000:]}{done.stderr[-2000:]}"
    return done.stdout


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A wheel built from a copy of the source, so that the tree stays as it is."""
    source = tmp_path_factory.mktemp("source")
    for part in PARTS:
        if (ROOT / part).is_dir():
            shutil.copytree(ROOT / part, source / part, ignore=shutil.ignore_patterns("__pycache__"))
        else:
            shutil.copy(ROOT / part, source)
    call(sys.executable, "-m", "build", "--wheel", "--outdir", source / "dist", cwd=source)
    (built,) = (source / "dist").glob("*.whl")
    return built


DEVELOPERS_ONLY = ("holdout.csv", "guard.csv")


def test_the_wheel_holds_the_tables_and_no_holdout(wheel: Path):
    with zipfile.ZipFile(wheel) as archive:
        names = set(archive.namelist())
    homes = {"parameters": ROOT / "basirank/parameters", "data": ROOT / "data", "models": ROOT / "models"}
    for package, folder in homes.items():
        tables = [path.name for path in folder.iterdir() if path.suffix in (".csv", ".toml", ".smi", ".json")]
        for name in tables:
            assert (f"basirank/{package}/{name}" in names) == (name not in DEVELOPERS_ONLY), (
                f"{package}/{name}"
            )
    assert "basirank/py.typed" in names
    assert not any(name.endswith(DEVELOPERS_ONLY) or name.startswith("tests/") for name in names)
    for part in (ROOT / "basirank/page").iterdir():
        assert f"basirank/page/{part.name}" in names


def test_the_installed_command_ranks_far_from_the_source(wheel: Path, tmp_path: Path):
    venv.create(tmp_path / "fresh", with_pip=True)
    scripts = tmp_path / "fresh" / ("Scripts" if os.name == "nt" else "bin")
    call(scripts / "python", "-m", "pip", "install", "--quiet", wheel, cwd=tmp_path)
    call(scripts / "basirank", "rank", "CCN", "c1ccncc1", "CCO", "-o", "out.csv", cwd=tmp_path)
    with (tmp_path / "out.csv").open(encoding="utf-8", newline="") as stream:
        rows = list(csv.DictReader(stream))
    assert [(row["rank"], row["smiles"], row["status"]) for row in rows] == [
        ("1", "CCN", "ok"),
        ("2", "c1ccncc1", "ok"),
        ("", "CCO", "no_basic_site"),
    ]
    assert float(rows[0]["pkah_1"]) > float(rows[1]["pkah_1"]) > 0
    where = call(scripts / "python", "-c", "import basirank; print(basirank.__file__)", cwd=tmp_path)
    assert Path(where.strip()).is_relative_to(tmp_path.resolve()) or str(tmp_path) in where
    call(scripts / "basirank", "report", "CCN", "-o", "report.html", cwd=tmp_path)
    assert "<table" in (tmp_path / "report.html").read_text(encoding="utf-8")
    assert "Site 1" in call(scripts / "basirank", "explain", "CCN", cwd=tmp_path)
