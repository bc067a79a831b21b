"""What the tests of the command line share: a runner in an empty folder, and a reader of its tables."""

from __future__ import annotations

import csv
import inspect
import io
from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from basirank.cli import commands


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An empty folder that is also the current one."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def run(folder: Path) -> Callable[..., Result]:
    """Run `basirank` with arguments in the empty folder."""
    apart = {"mix_stderr": False} if "mix_stderr" in inspect.signature(CliRunner).parameters else {}
    runner = CliRunner(**apart)

    def call(*arguments: str, stdin: str | bytes | None = None) -> Result:
        return runner.invoke(commands, list(arguments), input=stdin, prog_name="basirank")

    return call


def table(text: str, delimiter: str = ",") -> list[dict[str, str]]:
    """Rows of a table by column name."""
    return list(csv.DictReader(io.StringIO(text), delimiter=delimiter))


def heading(text: str, delimiter: str = ",") -> list[str]:
    """Column names of a table."""
    return next(csv.reader(io.StringIO(text), delimiter=delimiter))
