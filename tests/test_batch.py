"""Long lists: the same bytes whatever computed them, gone on with after any end, no row lost to a bad one."""

from __future__ import annotations

import csv
import gzip
import io
import json
import os
import signal
import subprocess
import sys
import time
from functools import partial
from pathlib import Path

import pytest
from conftest import table

from basirank.batch import journal, run, workers
from basirank.batch.chunks import chunks_of
from basirank.batch.compute import Done, compute
from basirank.batch.encoding import heading
from basirank.batch.engines import here
from basirank.batch.plan import Plan, plan_for
from basirank.batch.workers import by_workers
from basirank.readers import Row, open_table
from basirank.request import PLAIN
from basirank.writers import OutputError

BASES = ["CCN", "c1ccncc1", "NCCN", "OC(=O)CN", "C1CC", "CCC", "NC(=N)N", "Cc1c[nH]cn1", "CN1CCOCC1"]


def write_list(path: Path, rows: int) -> list[str]:
    lines = [f"{BASES[n % len(BASES)]} row {n}" for n in range(rows)]
    path.write_text("\n".join(lines) + "\n")
    return lines


def ignore(row: int, reason: str) -> None:
    """Take no note of a refused row."""


def whole(plan: Plan, results) -> bytes:
    return heading(plan) + b"".join(done.data for _, done in results)


def annotated(source: str, target: str, size: int = 500, **options) -> bytes:
    """Bytes of an output made in this process or by the engine given."""
    opener = partial(open_table, [source], typed=target.endswith(".parquet"))
    run.to_file(
        opener, (7.4,), PLAIN, target, run.engine_for(**options), lambda n, share: None, lambda text: None
    )
    return Path(target).read_bytes()


# one result, whatever computes it


def test_the_result_depends_neither_on_chunks_nor_on_processes(folder):
    write_list(Path("in.smi"), 60)
    made = {}
    for name, size, engine in (
        ("one chunk", 500, partial(here, work=compute)),
        ("many chunks", 7, partial(here, work=compute)),
        ("two processes", 7, partial(by_workers, work=compute, jobs=2, patience=600.0)),
    ):
        with open_table(["in.smi"]) as found:
            plan = plan_for(found, (5.5, 7.4), "out.csv")
            made[name] = whole(plan, engine(plan, chunks_of(found.rows, size, {}), ignore))
    assert len(table(made["one chunk"].decode())) == 60
    assert made["one chunk"] == made["many chunks"] == made["two processes"]


def test_parquet_is_the_same_whatever_the_chunks(folder, monkeypatch):
    pytest.importorskip("pyarrow")
    write_list(Path("in.smi"), 30)
    monkeypatch.setattr("basirank.batch.packing.ROW_GROUP", 12)
    made = []
    for size in (500, 7, 12):
        monkeypatch.setattr(run, "CHUNK", size)
        made.append(annotated("in.smi", f"out{size}.parquet"))
    assert made[0] == made[1] == made[2]
    import pyarrow.parquet

    groups = pyarrow.parquet.ParquetFile("out7.parquet").metadata
    assert [groups.row_group(n).num_rows for n in range(groups.num_row_groups)] == [12, 12, 6]


def test_jobs_on_the_command_line(run, folder):
    write_list(Path("in.smi"), 20)
    assert run("annotate", "in.smi", "-o", "here.csv").exit_code == 0
    assert run("annotate", "in.smi", "-o", "there.csv", "--jobs", "1").exit_code == 0
    assert Path("here.csv").read_bytes() == Path("there.csv").read_bytes()


# rows that end a worker, hang or meet a fault


def dangerous(plan: Plan, rows: list[Row]) -> Done:
    """Work at which some rows do what bad molecules do to compiled code."""
    for row in rows:
        if row.problem is None:
            if row.structure == "kill":
                os.kill(os.getpid(), signal.SIGKILL)
            if row.structure == "hang":
                time.sleep(600)
            if row.structure == "fault":
                raise TypeError("no such thing")
            if row.structure == "once" and not os.path.exists("once"):
                Path("once").touch()
                os.kill(os.getpid(), signal.SIGKILL)
    text = "".join(f"{row.structure},{row.problem or 'ok'}\n" for row in rows)
    return Done(text.encode(), {"ok": len(rows)}, {})


def test_a_row_that_ends_a_worker_hangs_or_meets_a_fault_costs_itself_only(folder):
    names = ["a", "b", "once", "c", "kill", "d", "e", "hang", "f", "g", "fault", "h", "i", "j", "k"]
    rows = [Row((name,), name) for name in names]
    plan, refused = Plan((7.4,), "csv", "", ("smiles",)), {}
    results = by_workers(plan, chunks_of(rows, 3, {}), refused.__setitem__, dangerous, jobs=2, patience=2.0)
    lines = b"".join(done.data for _, done in results).decode().splitlines()
    told = dict(line.split(",", 1) for line in lines)
    assert [line.split(",")[0] for line in lines] == names
    assert told.pop("kill") == workers.DIED
    assert told.pop("hang") == "takes longer than 2 s"
    assert "TypeError: no such thing" in told.pop("fault")
    assert set(told.values()) == {"ok"}
    assert sorted(refused) == [4, 7, 10]
    # a run that goes on says the same of these rows, without trying them
    again = here(plan, chunks_of(rows, 3, refused), ignore, dangerous)
    assert b"".join(done.data for _, done in again).decode().splitlines() == lines


def test_a_fault_at_every_row_is_no_matter_of_rows(folder):
    rows = [Row(("fault",), "fault")] * 3
    with pytest.raises(TypeError, match="no such thing"):
        list(here(Plan((7.4,), "csv", "", ("smiles",)), chunks_of(rows, 3, {}), ignore, dangerous))


def test_workers_end_with_the_process_that_started_them(folder):
    write_list(Path("in.smi"), 20_000)
    started = subprocess.Popen(
        [sys.executable, "-m", "basirank", "annotate", "in.smi", "-o", "out.csv", "--jobs", "1"],
        stderr=subprocess.DEVNULL,
    )
    while not Path(".out.csv.journal").exists():
        assert started.poll() is None
        time.sleep(0.05)
    family = children_of(started.pid)
    assert family
    started.kill()
    started.wait()
    until = time.monotonic() + 60
    while any(map(is_running, family)) and time.monotonic() < until:
        time.sleep(0.05)
    assert not any(map(is_running, family))


def children_of(process: int) -> list[int]:
    if not Path("/proc").is_dir():
        pytest.skip("needs /proc")
    found = []
    for entry in Path("/proc").iterdir():
        try:
            if entry.name.isdigit() and f"PPid:\t{process}\n" in (entry / "status").read_text():
                found.append(int(entry.name))
        except OSError:
            pass
    return found


def is_running(process: int) -> bool:
    try:
        return "State:\tZ" not in Path(f"/proc/{process}/status").read_text()
    except OSError:
        return False


# resuming


@pytest.mark.skipif(not hasattr(os, "fork"), reason="needs fork")
@pytest.mark.parametrize("ending", ["csv.gz", "csv.zst", "parquet"])
def test_killed_at_any_moment_it_goes_on_to_the_same_bytes(folder, ending):
    pytest.importorskip({"parquet": "pyarrow", "csv.zst": "zstandard"}.get(ending, "csv"))
    write_list(Path("in.smi"), 200)
    script = Path(__file__).with_name("killed_runs.py")

    done = subprocess.run(
        [sys.executable, script, "in.smi", f"killed.{ending}", "7"],
        capture_output=True,
        text=True,
        check=True,
    )
    killed, resumed = map(int, done.stdout.split())
    assert killed >= 1 and resumed >= 1
    expected = subprocess.run(
        [sys.executable, "-c",
         "import sys, killed_runs as k; k.one_run(sys.argv[1], sys.argv[2], print)",
         "in.smi", f"whole.{ending}"],
        capture_output=True, text=True, check=True, env={**os.environ, "PYTHONPATH": str(script.parent)},
    )  # fmt: skip
    assert expected.stdout == ""
    assert Path(f"killed.{ending}").read_bytes() == Path(f"whole.{ending}").read_bytes()
    assert sorted(os.listdir()) == ["in.smi", f"killed.{ending}", f"whole.{ending}"]


class Stop(Exception):
    """What a test stops a run with."""


def interrupted(after: int, source: str = "in.smi", target: str = "out.csv", ph=(7.4,)) -> None:
    """A run that is stopped after some chunks."""

    def show(done: int, share: float | None) -> None:
        nonlocal after
        after -= 1
        if not after:
            raise Stop

    with pytest.raises(Stop):
        run.to_file(
            partial(open_table, [source]), ph, PLAIN, target, run.engine_for(), show, lambda text: None
        )


def gone_on(source: str = "in.smi", target: str = "out.csv", ph=(7.4,)) -> list[str]:
    said: list[str] = []
    run.to_file(
        partial(open_table, [source]), ph, PLAIN, target, run.engine_for(), lambda n, share: None, said.append
    )
    return said


@pytest.fixture
def small_chunks(folder, monkeypatch):
    """Chunks of five rows, computed in this process."""
    monkeypatch.setattr(run, "CHUNK", 5)
    monkeypatch.setattr(run, "SMALL", 1000)
    write_list(Path("in.smi"), 40)


def test_what_is_left_is_gone_on_with_and_said(small_chunks):
    interrupted(3)
    assert not Path("out.csv").exists()
    assert gone_on() == ["out.csv: going on after 15 rows of an interrupted run"]
    assert [row["name"] for row in table(Path("out.csv").read_text())] == [f"row {n}" for n in range(40)]
    assert sorted(os.listdir()) == ["in.smi", "out.csv"]


@pytest.mark.parametrize(
    ("change", "said"),
    [
        (
            lambda: Path("in.smi").write_text("CN changed\n" + Path("in.smi").read_text()),
            "its input has changed",
        ),
        (lambda: Path("in.smi").write_text("CN all\n"), "its input has changed"),
        (lambda: Path(".out.csv.part").write_bytes(b"x" * 100_000), "its part file is not what"),
        (lambda: Path(".out.csv.part").unlink(), "its part file is not what"),
        (lambda: Path(".out.csv.journal").write_text('{"fingerprint": '), "its journal cannot be read"),
        (lambda: Path(".out.csv.journal").write_text("[]"), "its journal cannot be read"),
    ],
)
def test_what_does_not_match_begins_anew_and_says_so(small_chunks, change, said):
    interrupted(3)
    change()
    told = gone_on()
    assert len(told) == 1 and said in told[0] and "beginning anew" in told[0]
    made = Path("out.csv").read_bytes()
    Path("out.csv").unlink()
    assert gone_on() == [] and Path("out.csv").read_bytes() == made


def test_other_options_and_versions_begin_anew(small_chunks):
    interrupted(3)
    assert "its options differ" in gone_on(ph=(5.5, 7.4))[0]
    Path("out.csv").unlink()
    interrupted(3)
    kept = json.loads(Path(".out.csv.journal").read_text())
    kept["fingerprint"]["versions"]["rdkit"] = "1.0"
    Path(".out.csv.journal").write_text(json.dumps(kept))
    assert "its versions differ" in gone_on()[0]


def test_rows_added_to_the_end_of_the_list_are_done_too(small_chunks):
    interrupted(3)
    with open("in.smi", "a") as stream:
        stream.write("CCN added\n")
    assert "going on after 15 rows" in gone_on()[0]
    assert table(Path("out.csv").read_text())[-1]["name"] == "added"


def test_standard_input_into_a_file_is_gone_on_with(small_chunks, run, monkeypatch):
    text = Path("in.smi").read_text()
    interrupted(3)
    result = run("annotate", "-", "-o", "out.csv", stdin=text)
    assert result.exit_code == 0 and "going on after 15 rows" in result.stderr
    Path("out.csv").unlink()
    interrupted(3)
    result = run("annotate", "-", "-o", "out.csv", stdin="CN\n" + text)
    assert result.exit_code == 2 and "run the command again" in result.stderr
    assert os.listdir() == ["in.smi"]


def test_a_second_run_at_the_same_output_says_so_and_stops(run, folder):
    write_list(Path("in.smi"), 5)
    with journal.journal("out.csv"):
        result = run("annotate", "in.smi", "-o", "out.csv")
        assert result.exit_code == 2 and "another run is writing out.csv" in result.stderr
        with pytest.raises(OutputError, match="another run"), journal.journal(str(folder / "out.csv")):
            pass
    assert run("annotate", "in.smi", "-o", "out.csv").exit_code == 0
    assert sorted(os.listdir()) == ["in.smi", "out.csv"]


# the summary


def test_the_summary_counts_rows_and_reasons(run, folder):
    Path("in.smi").write_text("CCN a\n\nC1CC b\nCC( c\nF[C](F)(F)(F)F d\n[CH2]C e\nCCC f\n")
    result = run("annotate", "in.smi", "-o", "out.csv", "--summary", "out.json")
    assert result.exit_code == 0
    told = json.loads(Path("out.json").read_text())
    assert (told["rows"], told["ok"], told["no_basic_site"], told["refused"]) == (6, 1, 1, 4)
    assert told["blank_lines"] == 1 and sum(told["refusals"].values()) == 4
    assert all("atom" not in reason for reason in told["refusals"])
    assert told["seconds"] > 0 and told["output"] == "out.csv"
    assert "1 blank line skipped" in result.stderr and "refused 1 row: " in result.stderr
    assert "known are .json" in run("annotate", "in.smi", "--summary", "out.txt").stderr


def test_reasons_are_bounded():
    progress = journal.Progress()
    for n in range(1_000):
        progress.add(Done(b"", {"refused": 1}, {f"reason {n}": 1}))
    assert progress.refusals.total() == 1_000 and len(progress.refusals) <= journal.REASONS_KEPT + 1


# what goes wrong while writing


def test_a_full_disk_is_one_line_and_the_run_goes_on_when_there_is_room(run, folder):
    disk = folder / "disk"
    disk.mkdir()
    mounted = subprocess.run(["mount", "-t", "tmpfs", "-o", "size=64k", "tmpfs", disk], capture_output=True)
    if mounted.returncode:
        pytest.skip("no small disk can be mounted here")
    try:
        write_list(Path("in.smi"), 1_200)
        result = run("annotate", "in.smi", "-o", "disk/out.csv")
        assert result.exit_code == 2
        assert result.stderr == "basirank: cannot write disk/out.csv: no space left on device\n"
        assert not Path("disk/out.csv").exists()
        subprocess.run(["mount", "-o", "remount,size=4m", disk], check=True)
        assert run("annotate", "in.smi", "-o", "disk/out.csv").exit_code == 0
        assert len(table(Path("disk/out.csv").read_text())) == 1_200
    finally:
        subprocess.run(["umount", disk], check=True)


def test_a_folder_that_may_not_be_written_to(run, folder):
    write_list(Path("in.smi"), 2)
    Path("sub").mkdir()
    Path("sub").chmod(0o500)
    mounted = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", "ro", "tmpfs", folder / "sub"], capture_output=True
    )
    try:
        if os.access("sub", os.W_OK):
            pytest.skip("this user may write everywhere")
        result = run("annotate", "in.smi", "-o", "sub/out.csv")
        assert result.exit_code == 2
        assert result.stderr == "basirank: the output folder may not be written to: sub\n"
    finally:
        if not mounted.returncode:
            subprocess.run(["umount", folder / "sub"], check=True)


def test_packed_outputs_hold_the_same_table(run, folder):
    zstandard = pytest.importorskip("zstandard")
    write_list(Path("in.smi"), 12)
    for ending in ("csv", "csv.gz", "csv.zst"):
        assert run("annotate", "in.smi", "-o", f"out.{ending}").exit_code == 0
    plain = Path("out.csv").read_bytes()
    assert gzip.decompress(Path("out.csv.gz").read_bytes()) == plain
    packed = Path("out.csv.zst").read_bytes()
    assert zstandard.ZstdDecompressor().decompress(packed, 10_000_000) == plain
    assert len(list(csv.reader(io.StringIO(plain.decode())))) == 13
