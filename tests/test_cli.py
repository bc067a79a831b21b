"""The command line: what goes in comes out, in order; whatever is wrong is one line and exit code 2."""

from __future__ import annotations

import gzip
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from conftest import heading, table

import basirank.annotation
import basirank.commands.rank
import basirank.commands.shared
import basirank.readers
from basirank.records import schema
from basirank.writers import ranked_table

NAMES = [column.name for column in schema()]


def one_line(result) -> str:
    """The one line on standard error of a run that ended with exit code 2 and wrote nothing."""
    assert result.exit_code == 2, result.output
    assert result.stdout == ""
    lines = result.stderr.splitlines()
    assert len(lines) == 1, result.stderr
    assert lines[0].startswith("basirank: ")
    return lines[0]


# what comes out


def test_annotate_keeps_rows_and_order(run, folder):
    Path("list.smi").write_text(
        "c1ccncc1 pyridine\n\nCCN\tethyl amine, neat\nCCC\nC1CC broken ring\nCCN again\n"
    )
    result = run("annotate", "list.smi", "-o", "out.csv")
    assert result.exit_code == 0, result.stderr
    text = Path("out.csv").read_text()
    assert heading(text) == ["smiles", "name", *NAMES]
    rows = table(text)
    assert [row["name"] for row in rows] == ["pyridine", "ethyl amine, neat", "", "broken ring", "again"]
    assert [row["status"] for row in rows] == ["ok", "ok", "no_basic_site", "refused", "ok"]
    assert rows[3]["message"] and not rows[3]["parent_smiles"]
    assert {name: rows[1][name] for name in NAMES} == {name: rows[4][name] for name in NAMES}
    assert result.stderr.count("\n") == 2 and "refused 1 row: cannot be read as SMILES" in result.stderr
    assert "5 rows: 3 ok, 1 without a basic site, 1 refused; 1 blank line skipped" in result.stderr


def test_annotate_without_a_file_writes_csv_to_standard_output(run):
    result = run("annotate", "CCN", "c1ccncc1 pyridine")
    assert result.exit_code == 0
    assert [(row["smiles"], row["name"]) for row in table(result.stdout)] == [
        ("CCN", ""),
        ("c1ccncc1", "pyridine"),
    ]
    assert result.stderr == ""


def test_tables_stay_text(run, folder):
    Path("in.csv").write_text('id,SMILES,status,note\n007,CCN,old,NA\n1e5,CCO,,"two\nlines, quoted ""so"""\n')
    assert run("annotate", "in.csv", "-o", "out.csv").exit_code == 0
    text = Path("out.csv").read_text()
    assert heading(text) == ["id", "SMILES", "input_status", "note", *NAMES]
    rows = table(text)
    assert [row["id"] for row in rows] == ["007", "1e5"]
    assert [row["note"] for row in rows] == ["NA", 'two\nlines, quoted "so"']
    assert [row["input_status"] for row in rows] == ["old", ""]


def test_tsv_in_and_out(run, folder):
    Path("in.tsv").write_text("name\tsmiles\nx, y\tCCN\n")
    assert run("annotate", "in.tsv", "-o", "out.tsv").exit_code == 0
    assert table(Path("out.tsv").read_text(), "\t")[0]["name"] == "x, y"


def test_zipped_lists(run, folder):
    Path("a.smi.gz").write_bytes(gzip.compress(b"CCN a\n"))
    Path("b.csv.gz").write_bytes(gzip.compress(b"smiles\nCCN\n"))
    Path("c.tsv.gz").write_bytes(gzip.compress(b"smiles\tid\nCCN\t1\n"))
    for name in ("a.smi.gz", "b.csv.gz", "c.tsv.gz"):
        assert table(run("annotate", name).stdout)[0]["status"] == "ok"


@pytest.mark.parametrize(
    ("given", "arguments"),
    [
        ("CCN ethylamine\n", []),
        ("name,smiles\nethylamine,CCN\n", ["--format", "csv"]),
        ("name\tsmiles\nethylamine\tCCN\n", ["--format", "tsv"]),
    ],
)
def test_standard_input(run, given, arguments):
    result = run("annotate", "-", *arguments, stdin=given)
    assert table(result.stdout)[0]["name"] == "ethylamine"
    assert table(result.stdout)[0]["status"] == "ok"


def test_another_smiles_column(run, folder):
    Path("in.csv").write_text("smiles,salt free\nCCO,CCN\n")
    assert table(run("annotate", "in.csv").stdout)[0]["status"] == "no_basic_site"
    assert table(run("annotate", "in.csv", "--smiles-column", "Salt free").stdout)[0]["status"] == "ok"


def test_several_ph(run):
    result = run("annotate", "CCN", "--ph", "2", "--ph", "12.50", "--ph", "2")
    names = heading(result.stdout)
    assert names[-8:] == [f"{name}_at_{ph}" for ph in ("2", "12.5") for name in NAMES[-4:]]
    row = table(result.stdout)[0]
    assert float(row["net_charge_at_2"]) > 0.99 and float(row["net_charge_at_12.5"]) < 0.1


def test_rank_writes_a_sorted_table(run, folder):
    Path("in.csv").write_text("rank,smiles\na,CCC\nb,c1ccncc1\nc,CCN\nd,x\ne,CCN\n")
    assert run("rank", "in.csv", "-o", "out.csv").exit_code == 0
    text = Path("out.csv").read_text()
    assert heading(text) == ["rank", "input_rank", "smiles", *NAMES, "above_next"]
    assert [(row["rank"], row["input_rank"]) for row in table(text)] == [
        ("1", "c"), ("2", "e"), ("3", "b"), ("", "a"), ("", "d"),
    ]  # fmt: skip
    assert run("rank", "in.csv", "-o", "-").stdout == text


def test_rank_shows_an_aligned_table(run):
    result = run("rank", "c1ccncc1 pyridine", "CCN", "CCC", "C1CC")
    assert result.exit_code == 0
    lines = result.stdout.splitlines()
    assert lines[0].split()[:3] == ["rank", "compound", "pKaH"]
    assert lines[2].split()[:2] == ["1", "CCN"] and lines[3].split()[:2] == ["2", "pyridine"]
    assert "no basic site" in lines[4] and "refused" in lines[5]
    assert result.stdout.count("not measurements") == 1
    assert "calibrated on measured compounds" in result.stdout


@pytest.mark.parametrize("width", [40, 60, 80, 120, 200])
def test_the_table_fits_the_width(width):
    from basirank.annotation import records_of

    smiles = ["CCN", "CCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCCN(C)CCCCCCCCCCCC", "Xx"]
    text = ranked_table(
        [1, 2, None],
        smiles,
        records_of(smiles, (2.0, 7.4)),
        [0.75, None, None],
        schema((2.0, 7.4)),
        (2.0, 7.4),
        width,
    )
    lines = text.splitlines()
    assert max(map(len, lines)) <= width
    assert lines[2].split()[1] == "CCN"
    assert "…" in lines[3] or width >= 200


def test_explain_shows_the_sum(run):
    result = run("explain", "OC(=O)CN", "--ph", "2", "--ph", "7.4")
    assert result.exit_code == 0
    for wanted in ("Site 1", "Site 2", "intrinsic pKaH", "intrinsic pKa,", "Interaction W", "pKaH 1", "pKa 1",
                   "At pH 2", "At pH 7.4", "dominant form", "not measurements"):  # fmt: skip
        assert wanted in result.stdout


def test_explain_several_and_to_a_file(run, folder):
    assert run("explain", "CCN first", "CNC second", "-o", "out.txt").exit_code == 0
    text = Path("out.txt").read_text()
    assert "first" in text and "second" in text and text.count("Structure  ") == 2


def test_a_list_with_a_heading_only_gives_a_table_with_a_heading_only(run, folder):
    Path("in.csv").write_text("smiles,id\n")
    result = run("annotate", "in.csv")
    assert result.exit_code == 0
    assert heading(result.stdout) == ["smiles", "id", *NAMES] and table(result.stdout) == []
    assert run("rank", "in.csv").exit_code == 0


@pytest.mark.parametrize("command", ["rank", "annotate", "explain"])
def test_each_command_has_help(run, command):
    result = run(command, "--help")
    assert result.exit_code == 0
    for wanted in ("--ph", "--output", "--smiles-column", "--format", "INPUT"):
        assert wanted in result.stdout


def test_help_and_version_of_the_whole(run):
    for arguments in ([], ["--help"], ["-h"]):
        result = run(*arguments)
        assert result.exit_code == 0
        assert all(command in result.stdout for command in ("rank", "annotate", "explain"))
    assert run("--version").stdout.strip() == f"basirank, version {basirank.__version__}"


# rows that break the rules of their format


def test_a_byte_order_mark_windows_line_ends_and_blank_lines(run, folder):
    Path("in.csv").write_bytes(b"\xef\xbb\xbfsmiles,id\r\nCCN,1\r\n\r\nCN,2\r\n")
    result = run("annotate", "in.csv")
    assert [(row["smiles"], row["id"]) for row in table(result.stdout)] == [("CCN", "1"), ("CN", "2")]
    Path("in.smi").write_bytes(b"\xef\xbb\xbfCCN a\r\n\r\nCN b\rCNC c")
    assert [row["name"] for row in table(run("annotate", "in.smi").stdout)] == ["a", "b", "c"]


def test_text_that_is_not_utf8_is_read_as_latin1_and_said_once(run, folder):
    Path("in.csv").write_bytes("smiles,name\nCCN,Éthylamine\nCN,Méthylamine\n".encode("latin-1"))
    result = run("annotate", "in.csv")
    assert [row["name"] for row in table(result.stdout)] == ["Éthylamine", "Méthylamine"]
    assert result.exit_code == 0
    assert result.stderr.count("Latin-1") == 1 and "line 2" in result.stderr


def test_rows_with_too_few_and_too_many_cells_are_kept(run, folder):
    Path("in.csv").write_text("smiles,id,note\nCCN\nCN,1,a,b,c\nCNC,2,x,,\nCCO,3,y\n")
    rows = table(run("annotate", "in.csv").stdout)
    assert [row["status"] for row in rows] == ["ok", "refused", "ok", "no_basic_site"]
    assert (rows[0]["id"], rows[0]["note"]) == ("", "")
    assert rows[1]["note"] == "a,b,c" and "5 cells" in rows[1]["message"]
    assert rows[2]["note"] == "x"


def test_a_quote_that_is_never_closed_costs_its_own_row_only(run, folder):
    Path("in.csv").write_text('smiles,note\nCCN,"open\nCN,b\nCNC,"closed, here"\nCCCN,d\n')
    rows = table(run("annotate", "in.csv").stdout)
    assert [row["smiles"] for row in rows] == ["CCN", "CN", "CNC", "CCCN"]
    assert [row["status"] for row in rows] == ["refused", "ok", "ok", "ok"]
    assert "quote" in rows[0]["message"]
    many = "".join(f"CCN,row {n}\n" for n in range(20_000))
    Path("big.csv").write_text('smiles,note\nCN,"open\n' + many)
    with basirank.readers.open_table(["big.csv"]) as found:
        assert sum(1 for _ in found.rows) == 20_001


def test_a_quoted_newline_at_the_end_of_the_file(run, folder):
    Path("in.csv").write_text('note,smiles\n"a\nb",CCN')
    assert table(run("annotate", "in.csv").stdout)[0]["note"] == "a\nb"


def test_a_nul_byte_is_a_refused_row(run, folder):
    Path("in.smi").write_bytes(b"CCN a\nC\0N b\nCN c\n")
    assert [row["status"] for row in table(run("annotate", "in.smi").stdout)] == ["ok", "refused", "ok"]
    Path("in.csv").write_bytes(b"smiles,id\nCCN,\0\nCN,2\n")
    assert [row["status"] for row in table(run("annotate", "in.csv").stdout)] == ["refused", "ok"]


def test_empty_cells_and_odd_text_are_refused_rows(run, folder):
    Path("in.csv").write_text("id,smiles\n1,\n2,  \n3,ethylamine\n4,CCN\n5,=1+1\n,\n")
    rows = table(run("annotate", "in.csv").stdout)
    assert [row["status"] for row in rows] == ["refused"] * 3 + ["ok", "refused", "refused"]
    assert all(row["message"] for row in rows if row["status"] == "refused")


def test_a_heading_line_of_a_smiles_list_is_skipped_and_said(run, folder):
    Path("in.smi").write_text("SMILES Name\nCCN a\n")
    result = run("annotate", "in.smi")
    assert [row["name"] for row in table(result.stdout)] == ["a"]
    assert "heading" in result.stderr


def test_more_rows_than_a_chunk_stay_in_order(run, folder):
    lines = [f"{'C' * (n % 7 + 1)}N row{n}" for n in range(2 * basirank.annotation.CHUNK + 5)]
    Path("in.smi").write_text("\n".join(lines))
    rows = table(run("annotate", "in.smi").stdout)
    assert [f"{row['smiles']} {row['name']}" for row in rows] == lines


# what is one line and exit code 2


@pytest.mark.parametrize("command", ["rank", "annotate", "explain"])
@pytest.mark.parametrize(
    ("arguments", "wanted"),
    [
        (["missing.smi"], "no such file: missing.smi"),
        (["no/such/file"], "no such file"),
        (["list.xlsx"], "unknown ending"),
        (["sub"], "is a folder"),
        (["."], "is a folder"),
        (["CCN", "--ph", "16.5"], "between -2 and 16"),
        (["CCN", "--ph", "-2.5"], "between -2 and 16"),
        (["CCN", "--ph", "acid"], "pH must be a number"),
        (["CCN", "--ph", "nan"], "pH must be a number"),
        (["CCN", "-o", "nowhere/out.csv"], ""),
        (["CCN", "-o", "out.xlsx"], "unknown ending"),
        (["CCN", "-o", "out"], "unknown ending"),
        (["CCN", "-o", "sub"], "is a folder"),
        ([], "no input"),
        (["CCN", "missing.smi"], "one file or any number of SMILES"),
        (["empty.smi"], "empty"),
        (["blank.smi"], "empty"),
        (["empty.csv"], "empty"),
        (["empty.tsv"], "empty"),
        (["other.csv"], "its columns are: id, structure, note"),
        (["good.csv", "--smiles-column", "mol"], "its columns are: smiles, id"),
        (["twice.csv"], "twice.csv: 2 columns are named"),
        (["utf16.csv"], "UTF-16"),
        (["broken.smi.gz"], "broken gzip"),
        (["short.smi.gz"], "broken gzip"),
        (["CCN", "--unknown"], "--unknown"),
        (["-", "--format", "xls"], "xls"),
        (["-", "--format", "parquet"], "standard input"),
        (["missing"], "missing: no such file, and not a SMILES"),
        (["CCN", "ethylamine"], "ethylamine: no such file, and not a SMILES"),
        (["parts/*.csv"], "no such file: parts/*.csv"),
        (["CCN", "--smiles-column", "x"], "--smiles-column"),
        (["good.smi", "--smiles-column", "x"], "--smiles-column"),
    ],
)
def test_what_is_wrong_is_one_line(run, folder, command, arguments, wanted):
    Path("sub").mkdir()
    Path("list.xlsx").write_bytes(b"PK")
    Path("empty.smi").write_text("")
    Path("blank.smi").write_text("\n  \n")
    Path("empty.csv").write_text("")
    Path("empty.tsv").write_text("\n")
    Path("other.csv").write_text("id,structure,note\n1,CCN,x\n")
    Path("good.csv").write_text("smiles,id\nCCN,1\n")
    Path("good.smi").write_text("CCN\n")
    Path("twice.csv").write_text("smiles,smiles\nCCN,CN\n")
    Path("utf16.csv").write_bytes("smiles\nCCN\n".encode("utf-16"))
    Path("broken.smi.gz").write_bytes(b"CCN\n")
    Path("short.smi.gz").write_bytes(gzip.compress(b"CCN\n" * 100)[:-12])
    before = sorted(os.listdir())
    assert wanted in one_line(run(command, *arguments))
    if "-o" not in arguments:
        ending = ".txt" if command == "explain" else ".csv"
        one_line(run(command, *arguments, "-o", f"result{ending}"))
    assert sorted(os.listdir()) == before


def test_a_command_that_does_not_exist(run):
    assert "nonsense" in one_line(run("nonsense"))


def test_an_unreadable_file(run, folder, monkeypatch):
    Path("in.smi").write_text("CCN\n")
    Path("in.smi").chmod(0)
    if os.access("in.smi", os.R_OK):
        pytest.skip("this user may read every file")
    assert "permission denied" in one_line(run("rank", "in.smi"))


def test_the_input_is_never_overwritten(run, folder):
    Path("in.csv").write_text("smiles\nCCN\n")
    Path("link.csv").symlink_to("in.csv")
    for name in ("in.csv", "./in.csv", "link.csv"):
        assert "the output is the input" in one_line(run("annotate", "in.csv", "-o", name))
    assert Path("in.csv").read_text() == "smiles\nCCN\n"


def test_a_bad_smiles_in_explain(run):
    line = one_line(run("explain", "C1CC"))
    assert "C1CC" in line and "refused" in line


def test_rank_of_too_many_rows_names_annotate(run, folder, monkeypatch):
    monkeypatch.setattr(basirank.commands.rank, "RANK_LIMIT", 3)
    Path("in.smi").write_text("CCN\n" * 3)
    assert run("rank", "in.smi").exit_code == 0
    Path("in.smi").write_text("CCN\n" * 4)
    assert "annotate" in one_line(run("rank", "in.smi", "-o", "out.csv"))
    assert os.listdir() == ["in.smi"]


def test_rank_takes_a_million_rows():
    assert basirank.commands.rank.RANK_LIMIT == 1_000_000


# what is a file and what is a SMILES


@pytest.mark.parametrize(
    "smiles",
    ["CCN", "C/C=C/CN", "F/C=C\\CN", "[NH4+]", "C[C@@H](N)C(=O)O", "c1cc[nH]c1", "CN.Cl", "C%10CCN%10", "N"],
)
def test_an_argument_made_of_smiles_symbols_is_a_smiles(run, folder, smiles):
    (folder / "N").mkdir()
    assert table(run("annotate", smiles).stdout)[0]["smiles"] == smiles


def test_a_smiles_that_cannot_be_parsed_is_a_refused_row(run):
    result = run("annotate", "CCN", "C1CC", "CC(")
    assert result.exit_code == 0
    assert [row["status"] for row in table(result.stdout)] == ["ok", "refused", "refused"]


def test_an_empty_argument_is_a_refused_row(run):
    rows = table(run("annotate", "CCN", "", " ", "CN").stdout)
    assert [row["status"] for row in rows] == ["ok", "refused", "refused", "ok"]


# runs that fail or are stopped


def test_a_run_that_fails_leaves_the_old_file_and_what_the_next_one_needs(run, folder, monkeypatch):
    Path("in.smi").write_text("CCN\n" * (basirank.annotation.CHUNK + 1))
    Path("out.csv").write_text("old\n")
    real, calls = basirank.annotation.records_of, []

    def failing(*arguments):
        calls.append(1)
        if len(calls) > 1:
            raise OSError(28, "No space left on device")
        return real(*arguments)

    monkeypatch.setattr(basirank.annotation, "records_of", failing)
    assert "No space left" in one_line(run("annotate", "in.smi", "-o", "out.csv"))
    assert Path("out.csv").read_text() == "old\n"
    monkeypatch.undo()
    os.chdir(folder)
    result = run("annotate", "in.smi", "-o", "out.csv")
    assert f"going on after {basirank.annotation.CHUNK:,} rows" in result.stderr
    assert len(table(Path("out.csv").read_text())) == basirank.annotation.CHUNK + 1
    assert sorted(os.listdir()) == ["in.smi", "out.csv"]


@pytest.mark.parametrize(
    ("error", "code", "said"), [(KeyboardInterrupt, 130, "interrupted"), (RuntimeError, 1, "fault")]
)
def test_an_interrupt_and_a_fault_are_one_line(run, folder, monkeypatch, error, code, said):
    def failing(*arguments):
        raise error("x")

    monkeypatch.setattr(basirank.annotation, "records_of", failing)
    result = run("annotate", "CCN", "-o", "out.csv")
    assert result.exit_code == code
    assert len(result.stderr.splitlines()) == 1 and said in result.stderr
    assert os.listdir() == []


def long_list(folder: Path) -> Path:
    path = folder / "long.smi"
    path.write_text("".join(f"{'C' * (n % 20 + 1)}N row{n}\n" for n in range(200_000)))
    return path


@pytest.mark.parametrize(("stop", "code"), [(signal.SIGTERM, 143), (signal.SIGINT, 130)])
def test_a_stopped_run_leaves_no_output_and_no_complaint(folder, stop, code):
    long_list(folder)
    command = [sys.executable, "-m", "basirank", "annotate", "long.smi", "-o", "out.csv"]
    running = subprocess.Popen(command, stderr=subprocess.PIPE, text=True)
    while not list(folder.glob(".out.csv*.part")):
        assert running.poll() is None
        time.sleep(0.05)
    running.send_signal(stop)
    said = running.communicate(timeout=60)[1]
    assert running.returncode == code
    assert "Traceback" not in said and len(said.splitlines()) <= 1
    assert set(os.listdir()) <= {"long.smi", ".out.csv.part", ".out.csv.journal"}


def test_a_closed_pipe_is_quiet(folder):
    long_list(folder)
    running = subprocess.Popen(
        [sys.executable, "-m", "basirank", "annotate", "long.smi"],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    )
    assert running.stdout.readline().startswith(b"smiles,name,status")
    running.stdout.close()
    assert running.stderr.read() == b""
    running.stderr.close()
    assert running.wait(timeout=60) != 0


def test_progress_shows_rate_share_and_time_left(capsys, monkeypatch):
    clock = iter([100.0, 110.0, 111.0, 111.1, 120.0])
    monkeypatch.setattr(basirank.commands.shared.time, "monotonic", lambda: next(clock))
    progress = basirank.commands.shared.Progress(True)
    progress.show(50_000, True, 0.2)  # where an earlier run stopped
    progress.show(51_000, True)
    progress.show(51_100, True, 0.21)  # too soon after the last
    progress.show(60_000, True, 0.25)
    progress.clear()
    shown = capsys.readouterr().err.split("\r")
    assert shown[1] == "51,000 rows, 1,000 rows/s"
    assert shown[2].startswith("[#####               ]  25 %  60,000 rows, 1,000 rows/s, 2 min 30 s left")
    assert set(shown[3]) == {" "} and shown[4] == ""
