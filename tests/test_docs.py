"""The documentation says what a user gets: every example is run, and every link leads somewhere."""

from __future__ import annotations

import re
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
sys.path.insert(0, str(ROOT / "scripts"))

from doc_examples import NOTEBOOKS, PAGES, renewed, renewed_notebook  # noqa: E402

RENEW = "run scripts/renew_docs if the change is meant"


def name(path: Path) -> str:
    return str(path.relative_to(ROOT))


@pytest.mark.parametrize("path", PAGES, ids=name)
def test_examples_print_what_the_page_shows(path: Path):
    text = path.read_text(encoding="utf-8")
    assert renewed(text) == text, RENEW


@pytest.mark.parametrize("path", NOTEBOOKS, ids=name)
def test_notebook_cells_give_the_outputs_that_it_holds(path: Path):
    text = path.read_text(encoding="utf-8")
    assert renewed_notebook(text) == text, RENEW


@pytest.mark.parametrize("path", PAGES, ids=name)
def test_links_lead_to_files_that_are_there(path: Path):
    text = re.sub(r"^```.*?^```$", "", path.read_text(encoding="utf-8"), flags=re.MULTILINE | re.DOTALL)
    for target in re.findall(r"\]\(([^)#]+)(?:#[^)]*)?\)", text):
        if not target.startswith("http"):
            assert (path.parent / target).exists(), target


def test_every_command_has_a_page():
    from basirank.cli import COMMANDS

    written = {path.stem for path in (ROOT / "docs" / "commands").glob("*.md")}
    assert {"rank", "annotate", "explain", "report"} <= written <= set(COMMANDS)


def test_renewal_shows_a_changed_output_and_keeps_what_is_left_out():
    page = "```console\n$ printf 'a\\nb\\nc\\nd\\n'\nold\n...\nold\n```\n\n```pycon\n>>> 1 + 1\n3\n```\n"
    assert renewed(page) == page.replace("old\n...\nold", "a\n...\nd").replace("3\n", "2\n")
    with pytest.raises(RuntimeError, match="exit code 2"):
        renewed("```sh\nbasirank rank missing.smi\n```\n")
