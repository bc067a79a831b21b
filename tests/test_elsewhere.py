"""Beyond one machine: the same table from a Dask cluster, a worker of which is killed, and from Spark."""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pandas as pd
import pytest
from conftest import table

import basirank

SMILES = ["CCN", "c1ccncc1", "NCCN", "OC(=O)CN", "C1CC", "CCC", "Cc1c[nH]cn1", "CN1CCOCC1"]


@contextmanager
def started(*command: str) -> Iterator[subprocess.Popen]:
    """A program that runs beside the test."""
    with open(f"{command[0]}-{time.monotonic_ns()}.log", "w") as log:
        process = subprocess.Popen(
            [sys.executable, "-m", "distributed.cli.dask_" + command[0], *command[1:]], stdout=log, stderr=log
        )
    try:
        yield process
    finally:
        process.terminate()
        process.wait(timeout=60)


@pytest.fixture
def cluster(folder: Path) -> Iterator[tuple[str, list[subprocess.Popen]]]:
    """A Dask scheduler and two workers on this machine: its address, and the workers."""
    pytest.importorskip("distributed", reason="needs the extra 'cluster'")
    with started("scheduler", "--host", "127.0.0.1", "--port", "0", "--no-dashboard") as scheduler:
        address = None
        while address is None:
            assert scheduler.poll() is None
            time.sleep(0.05)
            text = "".join(path.read_text() for path in folder.glob("scheduler-*.log"))
            address = re.search(r"tcp://127\.0\.0\.1:[1-9]\d+", text)
        options = (address[0], "--no-nanny", "--nthreads", "1", "--no-dashboard")
        with started("worker", *options) as one, started("worker", *options) as other:
            yield address[0], [one, other]


def test_a_dask_cluster_that_loses_a_worker_gives_the_same_bytes(run, cluster):
    address, workers = cluster
    Path("in.smi").write_text("".join(f"{SMILES[n % len(SMILES)]} row{n}\n" for n in range(4_000)))
    command = [
        sys.executable,
        "-m",
        "basirank",
        "annotate",
        "in.smi",
        "-o",
        "there.csv",
        "--cluster",
        address,
    ]
    running = subprocess.Popen(command, stderr=subprocess.PIPE, text=True)
    while not os.path.exists(".there.csv.part") or not os.path.getsize(".there.csv.part"):
        assert running.poll() is None, running.stderr.read()
        time.sleep(0.02)
    workers[0].kill()
    said = running.communicate(timeout=300)[1]
    assert running.returncode == 0, said
    assert run("annotate", "in.smi", "-o", "here.csv").exit_code == 0
    assert Path("there.csv").read_bytes() == Path("here.csv").read_bytes()
    assert len(table(Path("there.csv").read_text())) == 4_000


def test_a_scheduler_that_does_not_answer_is_one_line(run, folder, monkeypatch):
    pytest.importorskip("distributed", reason="needs the extra 'cluster'")
    monkeypatch.setattr("basirank.batch.cluster.CONNECT", 1)
    Path("in.smi").write_text("CCN\n")
    result = run("annotate", "in.smi", "-o", "out.csv", "--cluster", "tcp://127.0.0.1:1")
    assert result.exit_code == 2
    assert result.stderr.count("\n") == 1 and "no Dask scheduler answers" in result.stderr
    assert os.listdir() == ["in.smi"]


@pytest.mark.filterwarnings("default:::pyspark")
@pytest.mark.filterwarnings("default:PySpark:FutureWarning")
@pytest.mark.filterwarnings("default::ResourceWarning")
def test_spark_maps_partitions(folder):
    pyspark = pytest.importorskip("pyspark", reason="needs PySpark")
    if shutil.which("java") is None:
        pytest.skip("needs Java")
    from pyspark.sql import SparkSession

    assert pyspark.__version__
    os.environ["PYSPARK_PYTHON"] = sys.executable
    spark = SparkSession.builder.master("local[2]").config("spark.ui.enabled", "false").getOrCreate()
    try:
        frame = pd.DataFrame({"smiles": SMILES, "id": range(len(SMILES))})
        library = spark.createDataFrame(frame).repartition(3)
        schema = spark.createDataFrame(basirank.annotate_frame(frame.iloc[:1])).schema
        mapped = library.mapInPandas(lambda parts: map(basirank.annotate_frame, parts), schema)
        found = mapped.toPandas().sort_values("id", ignore_index=True)
    finally:
        spark.stop()
    expected = basirank.annotate_frame(frame)
    pd.testing.assert_frame_equal(
        found.astype(object).where(found.notna(), None),
        expected.astype(object).where(expected.notna(), None),
        check_dtype=False,
    )


def test_a_mapped_dask_frame_has_the_types_that_its_empty_part_says():
    frames = pytest.importorskip("dask.dataframe")
    frame = pd.DataFrame({"id": [1, 2, 3], "smiles": ["CCN", "nonsense(", "c1ccncc1"]})
    library = frames.from_pandas(frame, npartitions=2)
    meta = basirank.annotate_frame(library.head(0))
    mapped = library.map_partitions(basirank.annotate_frame, meta=meta)
    found = mapped.compute(scheduler="sync")
    assert meta.empty and found.dtypes.to_dict() == meta.dtypes.to_dict() == mapped.dtypes.to_dict()
    assert found["pkah_1"].equals(basirank.annotate_frame(frame)["pkah_1"])
