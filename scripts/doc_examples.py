"""Examples of the documentation: run where they stand, so that what a page shows is what a user gets.

A page is renewed by running its fenced blocks in order in a folder of its own, which holds the demo list as
`data/demo.smi`, `list.smi`, `list.csv`, `library.csv.gz` and (twenty of them) `library.sdf`, and `parts/`,
and forty rows of the check values as `measured.csv`:

- ```console: lines after `$ ` are run, and what they print takes the place of what stood there. A line `...` in an
  output stands for lines left out: as many lines as before it and after it are kept.
- ```pycon: the same for Python statements after `>>> `.
- ```sh and ```python: run, must not fail, and stay as they are.

Anything else (indented blocks, other fences) is text. A notebook is renewed cell by cell.
"""

from __future__ import annotations

import ast
import doctest
import gzip
import io
import json
import os
import re
import shlex
import shutil
import subprocess
import sys
from collections.abc import Iterator
from contextlib import chdir, contextmanager, redirect_stdout
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import pandas as pd
from command_runner import runner
from rdkit import Chem

from basirank.cli import commands

ROOT = Path(__file__).resolve().parent.parent
PAGES = (ROOT / "README.md", *sorted((ROOT / "docs").rglob("*.md")))
NOTEBOOKS = tuple(sorted((ROOT / "docs").rglob("*.ipynb")))

_BLOCK = re.compile(r"^```(console|pycon|sh|python)\n(.*?)^```$", re.MULTILINE | re.DOTALL)
_SHELL = re.compile(r"[|<>;&$*]")


@contextmanager
def workplace() -> Iterator[Path]:
    """A folder with the demo list in the forms that the pages use; the current one while it lasts."""
    with TemporaryDirectory() as name:
        folder = Path(name)
        (folder / "data").mkdir()
        demo = ROOT / "data" / "demo.smi"
        shutil.copy(demo, folder / "data")
        shutil.copy(demo, folder / "list.smi")
        rows = [line.split(maxsplit=1) for line in demo.read_text(encoding="utf-8").splitlines()]
        text = "compound,SMILES\n" + "".join(f"{label},{smiles}\n" for smiles, label in rows)
        (folder / "list.csv").write_text(text, encoding="utf-8")
        (folder / "library.csv.gz").write_bytes(gzip.compress(text.encode()))
        with Chem.SDWriter(str(folder / "library.sdf")) as writer:
            for smiles, label in rows[:20]:
                mol = Chem.MolFromSmiles(smiles)
                mol.SetProp("_Name", label)
                writer.write(mol)
        values = (ROOT / "data" / "check_values.csv").read_text(encoding="utf-8").splitlines(True)[:41]
        (folder / "measured.csv").write_text("".join(values), encoding="utf-8")
        (folder / "parts").mkdir()
        pd.DataFrame(rows, columns=["smiles", "name"]).to_parquet(folder / "parts" / "part-0.parquet")
        with chdir(folder):
            yield folder


def renewed(text: str) -> str:
    """A page with its examples run anew.

    Raises
    ------
    RuntimeError
        An example of a `sh` or `python` block fails.
    """
    names: dict[str, Any] = {}
    with workplace():
        return _BLOCK.sub(lambda found: f"```{found[1]}\n{_block(found[1], found[2], names)}```", text)


def _block(kind: str, body: str, names: dict[str, Any]) -> str:
    if kind == "console":
        return "".join(_session(part) for part in re.split(r"(?=^\$ )", body, flags=re.MULTILINE) if part)
    if kind == "pycon":
        return _python_session(body, names)
    if kind == "python":
        with redirect_stdout(io.StringIO()):
            exec(compile(body, "example", "exec"), names)
    else:
        for line in filter(None, map(str.strip, body.splitlines())):
            told, code = printed(line)
            if code:
                raise RuntimeError(f"{line}: exit code {code}: {told}")
    return body


def _session(part: str) -> str:
    """A command and what it prints; continued lines end in a backslash."""
    lines = part.splitlines()
    count = next(n for n, line in enumerate(lines, start=1) if not line.endswith("\\"))
    command = "\n".join([lines[0][2:], *lines[1:count]])
    told = printed(command)[0].rstrip("\n").splitlines()
    before = lines[count:]
    while before and not before[-1]:
        before.pop()
    if "..." in before:
        cut = before.index("...")
        rest = len(before) - cut - 1
        told = [*told[:cut], "...", *(told[-rest:] if rest else [])]
    blank = "\n" if part.endswith("\n\n") else ""
    return "\n".join([*lines[:count], *told]) + "\n" + blank


def printed(command: str) -> tuple[str, int]:
    """What a command prints, standard error last, and its exit code; `basirank` alone runs in this process."""
    if command.startswith("basirank ") and not _SHELL.search(re.sub(r"\"[^\"]*\"|'[^']*'", "", command)):
        result = runner(env={"COLUMNS": "100"}).invoke(
            commands, shlex.split(command, comments=True)[1:], prog_name="basirank"
        )
        return result.stdout + result.stderr, result.exit_code
    path = os.pathsep.join([str(Path(sys.executable).parent), os.environ.get("PATH", "")])
    done = subprocess.run(
        ["bash", "-o", "pipefail", "-c", command],
        capture_output=True,
        text=True,
        env={**os.environ, "PATH": path},
    )
    return done.stdout + done.stderr, done.returncode


def _python_session(body: str, names: dict[str, Any]) -> str:
    lines = []
    for example in doctest.DocTestParser().get_examples(body):
        source = example.source.rstrip("\n").splitlines()
        lines += [f"{'>>>' if n == 0 else '...'} {line}".rstrip() for n, line in enumerate(source)]
        output = io.StringIO()
        with redirect_stdout(output):
            exec(compile(example.source, "example", "single"), names)
        lines += [line.rstrip() for line in output.getvalue().splitlines()]
    return "\n".join(lines) + "\n"


def renewed_notebook(text: str) -> str:
    """A notebook with its code cells run anew and their outputs stored."""
    book = json.loads(text)
    names: dict[str, Any] = {}
    with workplace():
        cells = [cell for cell in book["cells"] if cell["cell_type"] == "code"]
        for n, cell in enumerate(cells, start=1):
            cell["execution_count"] = n
            cell["outputs"] = _cell_outputs("".join(cell["source"]), names, n)
    return json.dumps(book, ensure_ascii=False, indent=1) + "\n"


def _cell_outputs(source: str, names: dict[str, Any], count: int) -> list[dict[str, Any]]:
    """What a cell prints, and its last expression as text and as the markup it offers."""
    tree = ast.parse(source)
    last = tree.body.pop() if tree.body and isinstance(tree.body[-1], ast.Expr) else None
    output, value = io.StringIO(), None
    with redirect_stdout(output):
        exec(compile(tree, "cell", "exec"), names)
        if isinstance(last, ast.Expr):
            value = eval(compile(ast.Expression(last.value), "cell", "eval"), names)
    outputs: list[dict[str, Any]] = []
    if output.getvalue():
        outputs.append(
            {"name": "stdout", "output_type": "stream", "text": output.getvalue().splitlines(True)}
        )
    if value is not None:
        data = {"text/plain": repr(value).splitlines(True)}
        if hasattr(value, "_repr_html_"):
            data = {"text/html": value._repr_html_().splitlines(True), **data}
        outputs.append(
            {"data": data, "execution_count": count, "metadata": {}, "output_type": "execute_result"}
        )
    return outputs
