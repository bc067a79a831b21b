"""Formats: the same compounds in every format, no field lost, and broken files that are said to be broken."""

from __future__ import annotations

import gzip
import json
import sys
import tracemalloc
from itertools import pairwise
from pathlib import Path

import pytest
from conftest import heading, table
from hypothesis import given
from hypothesis import strategies as st
from rdkit import Chem

from basirank.readers import open_table, sdf, streams
from basirank.readers.sdf import record_fields
from basirank.records import schema

NAMES = [column.name for column in schema()]
SMILES = ["CCN", "c1ccncc1", "OC(=O)CN", "NC(=N)N", "CCC"]


def record(smiles: str, name: str = "", *, hydrogen: bool = False, v3000: bool = False, **fields: str) -> str:
    mol = Chem.MolFromSmiles(smiles)
    mol = Chem.AddHs(mol) if hydrogen else mol
    mol.SetProp("_Name", name)
    block = Chem.MolToMolBlock(mol, forceV3000=v3000)
    return block + "".join(f"> <{key}>\n{value}\n\n" for key, value in fields.items()) + "$$$$\n"


def one_line(result) -> str:
    assert result.exit_code == 2, result.output
    assert result.stdout == "" and len(result.stderr.splitlines()) == 1, result.stderr
    return result.stderr


# SD files


@pytest.mark.parametrize("v3000", [False, True])
def test_an_sd_file_gives_the_numbers_of_its_smiles(run, folder, v3000):
    Path("in.sdf").write_text("".join(record(smiles, smiles, v3000=v3000) for smiles in SMILES))
    rows = table(run("annotate", "in.sdf").stdout)
    expected = table(run("annotate", *SMILES).stdout)
    assert [row["name"] for row in rows] == SMILES
    assert [{name: row[name] for name in NAMES} for row in rows] == [
        {name: row[name] for name in NAMES} for row in expected
    ]


@pytest.mark.parametrize("v3000", [False, True])
def test_atoms_are_counted_in_the_order_of_the_atom_block_with_explicit_hydrogen(run, folder, v3000):
    nitrogen_last = Chem.MolFromSmiles("CC")
    editable = Chem.RWMol(Chem.AddHs(nitrogen_last))  # two carbons, then six hydrogen atoms
    editable.RemoveBond(0, 2)
    editable.AddAtom(Chem.Atom(7))
    editable.AddBond(0, 8, Chem.BondType.SINGLE)
    editable.AddBond(8, 2, Chem.BondType.SINGLE)
    Path("in.sdf").write_text(Chem.MolToMolBlock(editable, forceV3000=v3000) + "$$$$\n")
    row = table(run("annotate", "in.sdf").stdout)[0]
    assert row["parent_smiles"] == "CCN" and row["pkah_1_atom"] == "8"


def test_a_broken_record_costs_itself_only(run, folder):
    sound = [record("CCN", f"sound {n}", id=str(n)) for n in range(4)]
    lines = record("CCN", "broken counts").splitlines(keepends=True)
    broken_counts = "".join([*lines[:3], "  x  y nonsense\n", *lines[4:]])
    no_end = record("CCN", "no end").replace("M  END\n", "")
    Path("in.sdf").write_text(
        sound[0] + broken_counts + sound[1] + no_end + sound[2] + "$$$$\n" + sound[3].replace("$$$$\n", "")
    )
    rows = table(run("annotate", "in.sdf").stdout)
    assert [row["status"] for row in rows] == ["ok", "refused", "ok", "refused", "ok", "refused", "ok"]
    assert [row["id"] for row in rows] == ["0", "", "1", "", "2", "", "3"]
    assert rows[1]["name"] == "broken counts" and "mol block" in rows[1]["message"]
    assert "no line 'M  END'" in rows[3]["message"] and "empty record" in rows[5]["message"]


def test_what_is_wrong_with_the_chemistry_of_a_record_is_said(run, folder):
    block = Chem.MolToMolBlock(Chem.MolFromSmiles("CN(C)(C)(C)C", sanitize=False), kekulize=False)
    Path("in.sdf").write_text(block + "$$$$\n" + record("CCN"))
    rows = table(run("annotate", "in.sdf").stdout)
    assert [row["status"] for row in rows] == ["refused", "ok"] and "valence of N" in rows[0]["message"]


def test_all_fields_of_a_file_are_columns(run, folder):
    Path("in.sdf").write_bytes(
        (record("CCN", "ethyl amine", id="007", note="two\nlines") + record("CN", status="old", id="8"))
        .replace("\n", "\r\n")
        .encode()
    )
    text = run("annotate", "in.sdf").stdout
    assert heading(text) == ["name", "id", "note", "input_status", *NAMES]
    rows = table(text)
    assert [(row["name"], row["id"], row["note"], row["input_status"]) for row in rows] == [
        ("ethyl amine", "007", "two\nlines", ""),
        ("", "8", "", "old"),
    ]


def test_late_fields_of_a_stream_go_into_one_column(run, monkeypatch):
    monkeypatch.setattr(sdf, "RECORDS_AHEAD", 2)
    records = [record("CCN", id="1"), record("CN", id="2"), record("CNC", id="3", late="x", later="é")]
    text = run("annotate", "-", "--format", "sdf", stdin="".join(records)).stdout
    assert heading(text) == ["name", "id", "other_fields", *NAMES]
    rows = table(text)
    assert [row["id"] for row in rows] == ["1", "2", "3"]
    assert json.loads(rows[2]["other_fields"]) == {"late": "x", "later": "é"}
    text = run("annotate", "-", "--format", "sdf", stdin="".join(records[:2])).stdout
    assert heading(text) == ["name", "id", *NAMES]


def test_a_field_that_is_called_name_keeps_its_name(run, folder):
    Path("in.sdf").write_text(record("CCN", "title", id="field").replace("<id>", "<name>"))
    row = table(run("annotate", "in.sdf").stdout)[0]
    assert (row["title_name"], row["name"]) == ("title", "field")


@given(
    st.dictionaries(
        st.text("abcXYZ 019_()", min_size=1, max_size=8).map(str.strip).filter(bool),
        st.lists(st.text("ab >$<0.", max_size=6).filter(lambda text: text.strip()), max_size=3).map(
            "\n".join
        ),
        max_size=4,
    )
)
def test_fields_of_a_record_come_back(fields):
    fields = {name: text for name, text in fields.items() if not text.startswith(">")}
    text = "M  END\n" + "".join(f">  <{name}>\n{value}\n\n" for name, value in fields.items())
    assert record_fields(text) == fields


def test_an_sd_file_written_from_an_sd_file_keeps_records_as_they_were(run, folder):
    source = record("C[C@H](N)O", "with name", id="007", status="old", note="two\nlines") + record("CN")
    Path("in.sdf").write_text(source)
    assert run("annotate", "in.sdf", "-o", "out.sdf").exit_code == 0
    text = Path("out.sdf").read_text()
    for one, other in zip(source.split("$$$$\n")[:2], text.split("$$$$\n")[:2], strict=True):
        assert other.startswith(one.replace("> <status>", ">  <input_status>"))
    first, second = Chem.SDMolSupplier("out.sdf", removeHs=False)
    assert first.GetProp("input_status") == "old" and first.GetProp("status") == "ok"
    assert first.GetProp("note") == "two\nlines" and first.GetProp("_Name") == "with name"
    expected = table(run("annotate", "in.sdf").stdout)
    for mol, row in zip((first, second), expected, strict=True):
        assert {name: mol.GetProp(name) for name in NAMES} == {name: row[name] for name in NAMES}


def test_an_sd_file_written_from_smiles_has_the_atoms_as_written(run, folder):
    Path("in.csv").write_text('id,smiles,note\n007,[H]N([H])CC,"a\n\nb"\n8,C1CC,x\n')
    assert run("annotate", "in.csv", "-o", "out.sdf").exit_code == 0
    first, second = Chem.SDMolSupplier("out.sdf", removeHs=False)
    assert [atom.GetSymbol() for atom in first.GetAtoms()] == ["H", "N", "H", "C", "C"]
    assert first.GetProp("_Name") == "007" and first.GetProp("pkah_1_atom") == "1"
    assert first.GetProp("note").split() == ["a", "b"] and first.GetProp("smiles") == "[H]N([H])CC"
    assert second.GetNumAtoms() == 0 and second.GetProp("status") == "refused"


# Parquet


@pytest.fixture
def arrow():
    return pytest.importorskip("pyarrow")


def write_parquet(arrow, name: str, **columns: object) -> None:
    import pyarrow.parquet

    Path(name).parent.mkdir(parents=True, exist_ok=True)
    pyarrow.parquet.write_table(arrow.table(columns), name, row_group_size=2)


def test_parquet_keeps_types_and_missing_cells(run, folder, arrow):
    import pyarrow.parquet

    moments = arrow.array([1, None, 3], arrow.timestamp("ns"))
    write_parquet(
        arrow, "in.parquet", id=arrow.array([7, 8, None], arrow.int32()), SMILES=["CCN", None, "CCC"],
        status=[True, False, None], when=moments, many=[[1.5], [], None],
    )  # fmt: skip
    assert run("annotate", "in.parquet", "-o", "out.parquet").exit_code == 0
    out = pyarrow.parquet.read_table("out.parquet")
    assert out.column_names == ["id", "SMILES", "input_status", "when", "many", *NAMES]
    before = pyarrow.parquet.read_table("in.parquet")
    assert out.select(range(5)).rename_columns(before.column_names).equals(before)
    types = {"text": "string", "integer": "int64", "constant": "double", "fraction": "double"}
    assert [str(out.schema.field(column.name).type) for column in schema()] == [
        types[column.kind] for column in schema()
    ]
    assert out["status"].to_pylist() == ["ok", "refused", "no_basic_site"]
    rows = table(run("annotate", "in.parquet").stdout)
    assert [row["id"] for row in rows] == ["7", "8", ""]
    assert [row["input_status"] for row in rows] == ["true", "false", ""]
    assert [row["many"] for row in rows] == ["[1.5]", "[]", ""]


def test_parquet_has_one_schema_even_where_all_rows_are_refused(run, folder, arrow):
    import pyarrow.parquet

    for name, text in (
        ("none", "smiles,id,id\n"),
        ("bad", "smiles,id,id\nx,1,2\n"),
        ("ok", "smiles,id,id\nCN,,\n"),
    ):
        Path(f"{name}.csv").write_text(text)
        assert run("annotate", f"{name}.csv", "-o", f"{name}.parquet").exit_code == 0
    schemas = [pyarrow.parquet.read_schema(f"{name}.parquet") for name in ("none", "bad", "ok")]
    assert schemas[0].equals(schemas[1]) and schemas[1].equals(schemas[2])
    assert schemas[0].names[:3] == ["smiles", "id", "id_2"]


def test_a_folder_and_a_pattern_are_one_library(run, folder, arrow):
    write_parquet(arrow, "library/b/2.parquet", smiles=["CNC", "CN"])
    write_parquet(arrow, "library/a/1.parquet", smiles=["CCN", "CCC", "C1CC"])
    write_parquet(arrow, "library/_notes/0.parquet", other=[1])
    for named in ("library", "library/*/*.parquet"):
        if named == "library/*/*.parquet":
            Path("library/_notes/0.parquet").unlink()
        rows = table(run("annotate", named).stdout)
        assert [row["smiles"] for row in rows] == ["CCN", "CCC", "C1CC", "CNC", "CN"]
    write_parquet(arrow, "library/c/3.parquet", smiles=["CN"], more=[1])
    assert "3.parquet has not the same columns" in one_line(run("annotate", "library"))


def test_a_pattern_of_text_files(run, folder):
    Path("part-1.csv").write_text("smiles,id\nCCN,1\n\n")
    Path("part-2.csv").write_text("smiles,id\nCN,2\n")
    assert [row["id"] for row in table(run("annotate", "part-*.csv").stdout)] == ["1", "2"]
    Path("a.sdf").write_text(record("CCN", x="1"))
    Path("b.sdf").write_text(record("CCN", y="2"))
    assert heading(run("annotate", "[ab].sdf").stdout)[:3] == ["name", "x", "y"]


# every command reads every format


@pytest.mark.parametrize("ending", ["sdf", "sdf.gz", "sdf.zst", "parquet", "smi.zst", "csv.zst"])
def test_rank_and_explain_read_them_too(run, folder, ending):
    pytest.importorskip({"zst": "zstandard", "parquet": "pyarrow"}.get(ending.rsplit(".")[-1], "csv"))
    Path("in.csv").write_text("smiles,name\nc1ccncc1,pyridine\nCCN,ethylamine\n")
    plain = {
        "sdf": record("c1ccncc1", "pyridine") + record("CCN", "ethylamine"),
        "smi": "c1ccncc1 pyridine\nCCN ethylamine\n",
        "csv": Path("in.csv").read_text(),
    }
    name = f"list.{ending}"
    if ending == "parquet":
        assert run("annotate", "in.csv", "-o", name).exit_code == 0
    else:
        kind, *packing = ending.split(".")
        data = plain[kind].encode()
        if packing == ["gz"]:
            data = gzip.compress(data)
        elif packing == ["zst"]:
            import zstandard

            half = len(data) // 2  # two frames, the second without its size
            pack = zstandard.ZstdCompressor()
            rest = pack.compressobj()
            data = pack.compress(data[:half]) + rest.compress(data[half:]) + rest.flush()
        Path(name).write_bytes(data)
    lines = run("rank", name).stdout.splitlines()
    assert lines[2].split()[:2] == ["1", "ethylamine"] and lines[3].split()[:2] == ["2", "pyridine"]
    told = run("explain", name).stdout
    assert "Compound   pyridine" in told and "Compound   ethylamine" in told
    assert table(run("curve", name, "--step", "5").stdout)[0]["smiles"] == "c1ccncc1"


def test_a_refused_record_in_explain_and_rank(run, folder):
    Path("in.sdf").write_text(record("CCN", "sound") + "name\n\n\nnonsense\nM  END\n$$$$\n")
    result = run("explain", "in.sdf")
    assert result.exit_code == 2 and "name: refused: cannot be read as a mol block" in result.stderr
    assert "name" in run("rank", "in.sdf").stdout.splitlines()[3]


def test_the_format_option_rules_over_the_ending(run, folder):
    Path("list.txt").write_text("smiles,id\nCCN,1\n")
    assert table(run("annotate", "list.txt", "--format", "csv").stdout)[0]["id"] == "1"
    assert "unknown ending" in one_line(run("annotate", "list.txt"))


# text that is not as it should be


def test_blank_rows_of_a_table_of_one_column_are_skipped_and_counted(run, folder):
    Path("in.csv").write_text('smiles\nCCN\n\n""\nCN\n   \n')
    result = run("annotate", "in.csv", "-o", "out.csv")
    assert [row["status"] for row in table(Path("out.csv").read_text())] == ["ok", "refused", "ok"]
    assert "3 rows: 2 ok" in result.stderr and "2 blank lines skipped" in result.stderr


@given(
    st.lists(st.sampled_from([b"CCN", b"", b"\r", b"\n", b"\r\n", b"x y", b"\n\n"]), max_size=12),
    st.integers(1, 5),
)
def test_lines_do_not_depend_on_how_the_text_comes_in(pieces, size):
    text = b"".join(pieces)
    blocks = [text[start : start + size] for start in range(0, len(text), size)]
    assert list(streams.byte_lines(blocks)) == text.splitlines(keepends=True)


@pytest.mark.parametrize("ending", ["smi", "csv", "tsv", "sdf"])
def test_a_line_without_an_end_costs_its_row_and_no_memory(folder, ending):
    size = 80_000_000
    sound = {"smi": "CN b", "csv": "CN,b", "tsv": "CN\tb", "sdf": record("CN", "b", id="b")}[ending]
    head = {"smi": "CCN a\n", "csv": "smiles,id\nCCN,a\n", "tsv": "smiles\tid\nCCN\ta\n", "sdf": ""}[ending]
    with open(f"in.{ending}", "w") as stream:
        stream.write(head)
        for _ in range(size // 1_000_000):
            stream.write("C" * 1_000_000)
        stream.write(("\n$$$$\n" if ending == "sdf" else "\n") + sound + "\n")
    tracemalloc.start()
    with open_table([f"in.{ending}"]) as found:
        rows = list(found.rows)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert "line of more than" in rows[-2].problem and len(rows[-2].structure) <= 1_001
    assert rows[-1].problem is None and "b" in rows[-1].cells
    assert peak < size / 8


def test_a_record_without_an_end_is_cut(folder, monkeypatch):
    monkeypatch.setattr(sdf, "RECORD_LIMIT", 10_000)
    Path("in.sdf").write_text("long\n" + "x\n" * 100_000 + "$$$$\n" + record("CCN", "next"))
    with open_table(["in.sdf"]) as found:
        first, second = found.rows
    assert "more than 10,000 characters" in first.problem and len(first.structure) <= 10_000
    assert first.cells[0] == "long" and second.cells[0] == "next" and second.problem is None


def test_a_long_cell_is_called_so(run, folder):
    Path("in.csv").write_text(f"smiles,note\nCCN,{'x' * 200_000}\nCN,b\n")
    rows = table_of_long_cells(run("annotate", "in.csv").stdout)
    assert [row["status"] for row in rows] == ["refused", "ok"]
    assert "more than 131,072 characters" in rows[0]["message"]


def table_of_long_cells(text: str) -> list[dict[str, str]]:
    import csv

    before = csv.field_size_limit(1_000_000)
    try:
        return table(text)
    finally:
        csv.field_size_limit(before)


# broken files


def test_files_that_end_too_early(run, folder, arrow):
    zstandard = pytest.importorskip("zstandard")
    text = "".join(f"{'C' * (n % 9 + 1)}N row{n * 7919 % 100_003}\n" for n in range(20_000)).encode()
    packed = {"gz": gzip.compress(text), "zst": zstandard.ZstdCompressor().compress(text)}
    for ending, data in packed.items():
        for kept in (len(data) - 3, len(data) // 2, 5):
            Path(f"in.smi.{ending}").write_bytes(data[:kept])
            with (
                pytest.raises(ValueError, match=f"in.smi.{ending}: broken"),
                open_table([f"in.smi.{ending}"]) as found,
            ):
                assert sum(1 for _ in found.rows) < 20_000
        Path(f"in.smi.{ending}").write_bytes(data[:20] + b"\0\1\2\3" + data[24:])
        result = run("annotate", f"in.smi.{ending}", "-o", "out.csv", "--jobs", "1")
        assert "broken" in result.stderr.splitlines()[-1] and not Path("out.csv").exists()
    write_parquet(arrow, "in.parquet", smiles=["CCN"] * 1_000, id=list(range(1_000)))
    data = Path("in.parquet").read_bytes()
    for broken in (data[:-9], data[: len(data) // 2], b"PAR1", b"", data[:8] + b"\xff" * 60 + data[68:]):
        Path("in.parquet").write_bytes(broken)
        assert "in.parquet: broken Parquet file" in one_line(run("annotate", "in.parquet", "-o", "out.csv"))
        assert [path.name for path in folder.iterdir() if "out" in path.name] == []


def test_a_packed_file_without_the_ending_is_called_so(run, folder):
    Path("in.smi").write_bytes(gzip.compress(b"CCN\n"))
    assert "in.smi is packed (gzip)" in one_line(run("annotate", "in.smi"))
    assert "standard input is packed" in one_line(run("annotate", "-", stdin=gzip.compress(b"CCN\n")))


@pytest.mark.parametrize(
    ("arguments", "package", "extra"),
    [
        (["in.parquet"], "pyarrow", "parquet"),
        (["in.smi", "-o", "out.parquet"], "pyarrow", "parquet"),
        (["in.smi.zst"], "zstandard", "zstd"),
        (["in.smi", "-o", "out.csv.zst"], "zstandard", "zstd"),
        (["in.smi", "--cluster", "tcp://127.0.0.1:1"], "distributed", "cluster"),
    ],
)
def test_a_missing_package_is_named_with_its_extra(run, folder, monkeypatch, arguments, package, extra):
    for name in ("in.parquet", "in.smi.zst"):
        Path(name).write_bytes(b"x")
    Path("in.smi").write_text("CCN\n")
    monkeypatch.setitem(sys.modules, package, None)
    assert f"pip install 'basirank[{extra}]'" in one_line(run("annotate", *arguments))
    assert sorted(path.name for path in folder.iterdir()) == ["in.parquet", "in.smi", "in.smi.zst"]


def test_parts_are_taken_in_the_order_of_their_names(folder):
    for n in (3, 1, 2):
        Path(f"{n}.smi").write_text(f"CN {n}\n")
    with open_table(["*.smi"]) as found:
        names = [row.cells[1] for row in found.rows]
        assert all(one < other for one, other in pairwise(names)) and found.done() is not None
