"""What is written besides tables: explanations as Markdown, JSON and pictures, lists as Markdown and as a page."""

from __future__ import annotations

import json
from pathlib import Path
from xml.etree import ElementTree

import pandas as pd
import pytest

import basirank
from basirank.markdown import code, plain, table


def test_explain_writes_json_whose_terms_sum_to_each_site(run):
    result = run("explain", "OC(=O)CN glycine", "c1ccncc1", "--as", "json")
    assert result.exit_code == 0, result.stderr
    told = json.loads(result.stdout)
    assert [one["name"] for one in told["compounds"]] == ["glycine", ""]
    for one in told["compounds"]:
        for site in one["sites"]:
            assert sum(term["value"] for term in site["terms"]) == pytest.approx(site["value"], abs=1e-9)
    glycine = told["compounds"][0]
    assert [step["name"] for step in glycine["steps"]] == ["pKaH 1", "pKa 1"]
    assert glycine["steps"][0]["value"] == basirank.explain("OC(=O)CN").steps[0].value
    assert "no basis for dosing" in told["note"]


def test_explain_writes_markdown_with_sources(run):
    result = run("explain", "OC(=O)CN glycine|x", "--as", "md", "--ph", "2", "--ph", "7.4")
    assert "## glycine\\|x" in result.stdout
    assert "| pKaH 1 | 9." in result.stdout and "Hall 1957" in result.stdout
    assert result.stdout.count("no basis for dosing") == 1
    widths = {
        line.replace("\\|", "").count("|") for line in result.stdout.splitlines() if line.startswith("| 2 |")
    }
    assert widths == {6}
    assert "-0.00" not in result.stdout


@pytest.mark.parametrize(
    ("ending", "start"), [(".txt", "Structure  CCN"), (".md", "## `CCN`"), (".json", "{"), (".svg", "<svg")]
)
def test_the_ending_of_the_output_says_what_is_written(run, folder, ending, start):
    assert run("explain", "CCN", "-o", f"told{ending}").exit_code == 0
    assert Path(f"told{ending}").read_text(encoding="utf-8").startswith(start)


def test_several_compounds_are_one_picture_file(run):
    result = run("explain", "CCN ethylamine", "c1ccncc1 pyridine", "--as", "svg")
    root = ElementTree.fromstring(result.stdout)
    assert root[0].text == "ethylamine; pyridine"


def test_a_form_that_contradicts_the_ending_is_an_error(run, folder):
    result = run("explain", "CCN", "--as", "svg", "-o", "told.json")
    assert (result.exit_code, result.stderr) == (
        2,
        "basirank: --as svg does not go with the ending of told.json\n",
    )
    assert not Path("told.json").exists()


def test_markdown_shows_text_as_it_was_written():
    assert plain("a_b*c|<d>\n") == "a\\_b\\*c\\|\\<d\\> "
    assert code("C`C|C") == "``C`C\\|C``"
    assert table(["a"], [["b"]]).splitlines() == ["| a |", "| --- |", "| b |"]


LIST = "NCCN a-10\nCCN a-2\nc1ccncc1 b\nCC(N)=N c\nCCO d\nC( e\nOC(=O)CN <f>\n"


@pytest.fixture
def series(folder) -> str:
    Path("list.smi").write_text(LIST)
    return "list.smi"


def ranked(run, *arguments: str) -> list[list[str]]:
    """Rank and name of the rows that `rank` writes."""
    result = run("rank", *arguments, "-o", "-")
    assert result.exit_code == 0, result.stderr
    lines = [line.split(",") for line in result.stdout.splitlines()]
    return [[line[0], line[2]] for line in lines[1:]]


def test_rank_keeps_the_top_with_the_ranks_of_the_whole_list(run, series):
    assert [name for _, name in ranked(run, series, "--top", "2")] == ["c", "a-2"]
    assert ranked(run, series, "--between", "4", "7") == [["5", "b"]]
    assert [name for _, name in ranked(run, series, "--class", "PRIMARY")] == ["a-2", "a-10", "<f>"]
    assert {name for _, name in ranked(run, series, "--between", "-5", "16")} == {
        "a-10",
        "a-2",
        "b",
        "c",
        "<f>",
    }


def test_rank_sorts_by_what_is_asked_and_missing_values_stay_last(run, series):
    assert [name for _, name in ranked(run, series, "--sort", "name")] == [
        "<f>",
        "a-2",
        "a-10",
        "b",
        "c",
        "d",
        "e",
    ]
    assert [name for _, name in ranked(run, series, "--sort", "input")] == [
        "a-10",
        "a-2",
        "b",
        "c",
        "d",
        "e",
        "<f>",
    ]
    rising = [name for _, name in ranked(run, series, "--reverse")]
    assert rising == ["b", "<f>", "a-10", "a-2", "c", "d", "e"]
    charged = [name for _, name in ranked(run, series, "--sort", "charge")]
    assert charged[3] == "b" and charged[-1] == "e"


def test_support_divides_the_list(run, series):
    halves = [
        {name for _, name in ranked(run, series, "--support", kind)} for kind in ("supported", "extrapolated")
    ]
    assert halves[0] | halves[1] == {"a-10", "a-2", "b", "c", "<f>"} and not halves[0] & halves[1]


def test_filters_that_fit_nothing_say_so_and_wrong_ones_are_one_line(run, series):
    result = run("rank", series, "--between", "15", "16", "-o", "none.csv")
    assert result.exit_code == 0 and "no row of 7 fits the filters" in result.stderr
    assert len(Path("none.csv").read_text().splitlines()) == 1
    for wrong in (["--between", "9", "6"], ["--top", "0"], ["--sort", "colour"], ["--support", "yes"]):
        result = run("rank", series, *wrong)
        assert result.exit_code == 2 and len(result.stderr.splitlines()) == 1


def test_rank_writes_a_markdown_table(run, series):
    assert run("rank", series, "-o", "list.md", "--ph", "5", "--ph", "7.4").exit_code == 0
    lines = Path("list.md").read_text().splitlines()
    assert lines[0].startswith(
        "| rank | compound | structure | pKaH | 90 % interval | above next | class | charge at pH 5 |"
    )
    assert {line.replace("\\|", "").count("|") for line in lines[:9]} == {13}
    assert lines[2].startswith("| 1 | c | `CC(N)=N` | 12.")
    assert any("\\<f\\>" in line for line in lines) and any(
        "refused: cannot be read" in line for line in lines
    )


def test_rank_and_report_write_the_same_page(run, series):
    assert run("rank", series, "-o", "a.html", "--top", "3").exit_code == 0
    result = run("report", series, "-o", "b.html", "--top", "3")
    assert result.exit_code == 0 and "7 rows: 5 ok" in result.stderr and "3 kept" in result.stderr
    assert Path("a.html").read_bytes() == Path("b.html").read_bytes()
    assert "3 compounds" in Path("a.html").read_text(encoding="utf-8")


def test_report_has_a_name_of_its_own_and_refuses_other_endings(run, series):
    assert run("report", series).exit_code == 0
    assert Path("report.html").exists()
    result = run("report", series, "-o", "report.pdf")
    assert result.exit_code == 2 and "known are .html" in result.stderr


def test_report_of_a_frame_shows_its_columns_and_refuses_a_wrong_one():
    frame = pd.DataFrame({"SMILES": ["CCN", None], "name": ["a", "b"], "plate": ["P1-A01", "P1-A02"]})
    page = basirank.report_html(frame, ph=[5.5, 7.4], title="Plate <1>")
    assert "Plate &lt;1&gt;" in page and "P1-A02" in page and "no structure given" in page
    with pytest.raises(ValueError, match="no column named"):
        basirank.report_html(frame, smiles_column="structure")
    with pytest.raises(ValueError, match="2 structures but 1 names"):
        basirank.report_html(["CCN", "CCO"], names=["a"])


def test_a_frame_is_shown_with_pictures_and_escaped_text():
    frame = pd.DataFrame({"smiles": ["CCN", "C(", "c1ccncc1"], "name": ["<b>", "x", "y"]})
    shown = basirank.show(basirank.rank(frame), rows=2)
    assert (
        shown.html.count("<svg") == 2 and "&lt;b&gt;" in shown._repr_html_() and "1 more rows" in shown.html
    )
    assert "rank" in repr(shown)
    with pytest.raises(ValueError, match="no column named"):
        basirank.show(pd.DataFrame({"x": [1]}))


def test_conditions_and_further_columns_go_through_selection_and_documents(run, series):
    """At 60 C an amine is weaker; with pKb and forms asked for, filters still look at the right columns."""
    further = ["--show-pkb", "--forms", "--ph", "5", "--ph", "7.4"]
    assert ranked(run, series, "--between", "4", "7", *further) == [["5", "b"]]
    assert [name for _, name in ranked(run, series, "--sort", "charge", *further)][-1] == "e"
    assert run("rank", series, "-o", "warm.md", "--temperature", "60", *further).exit_code == 0
    warm = Path("warm.md").read_text(encoding="utf-8")
    assert "At 60 C, ionic strength 0 mol/L." in warm
    amine = next(line.split(" | ") for line in warm.splitlines() if "| a-2 |" in line)
    assert float(amine[3]) < basirank.explain("CCN").steps[0].value - 0.5
    assert run("report", series, "-o", "warm.html", "--temperature", "60").exit_code == 0
    page = Path("warm.html").read_text(encoding="utf-8")
    assert "60 C, ionic strength 0 mol/L" in page
    assert (
        float(amine[3]) in json.loads(page.split('id="list-data">')[1].split("</script>")[0])["rows"]["pkah"]
    )
