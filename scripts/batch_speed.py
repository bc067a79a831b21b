"""Memory and scaling of `basirank annotate` on long lists, and cost by size of molecule and number of sites.

Part of `scripts/speed`. Runs are those of the command, in processes of their own; memory is the resident set of all
of them added up (Linux), pages that they share counted in each.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Sequence
from itertools import cycle, islice
from pathlib import Path

SAMPLE_EVERY = 0.1  # seconds between two looks at the memory
HEAVY_ATOMS = (20, 50, 100, 200, 400)
SITES = (1, 2, 4, 8, 12, 16, 20)
SAME = 20  # molecules of one size in a round


def write_list(path: Path, smiles: Sequence[str], rows: int) -> None:
    """A list of that many rows, the given one over and over."""
    with path.open("w", encoding="utf-8") as stream:
        stream.writelines(f"{text} row{n}\n" for n, text in enumerate(islice(cycle(smiles), rows)))


def family(process: int) -> list[int]:
    """A process and its children."""
    found = [process]
    for task in Path(f"/proc/{process}/task").iterdir():
        found += [int(word) for word in (task / "children").read_text().split()]
    return found


def resident(process: int) -> int:
    """Resident memory of a process and its children [bytes]."""
    total = 0
    for one in family(process):
        try:
            total += int(Path(f"/proc/{one}/statm").read_text().split()[1])
        except OSError:
            pass
    return total * os.sysconf("SC_PAGE_SIZE")


def annotated(smiles: Sequence[str], rows: int, jobs: int, ending: str = "csv") -> tuple[float, float, int]:
    """Seconds, rows per second and peak memory of one run of the command."""
    with tempfile.TemporaryDirectory() as folder:
        source, target, told = (Path(folder, name) for name in ("in.smi", f"out.{ending}", "told.json"))
        write_list(source, smiles, rows)
        start, peak = time.perf_counter(), 0
        running = subprocess.Popen(
            [sys.executable, "-m", "basirank", "annotate", source, "-o", target, "--jobs", str(jobs),
             "--summary", told],
            stderr=subprocess.DEVNULL,
        )  # fmt: skip
        while running.poll() is None:
            try:
                peak = max(peak, resident(running.pid))
            except OSError:
                pass
            time.sleep(SAMPLE_EVERY)
        seconds = time.perf_counter() - start
        if running.returncode:
            sys.exit("speed: annotate failed")
        counted = json.loads(told.read_text())
        if counted["rows"] != rows:
            sys.exit(f"speed: {counted['rows']} rows came out of {rows}")
        return seconds, rows / seconds, peak


def report_memory(smiles: Sequence[str], lengths: Sequence[int], jobs: int) -> None:
    """Peak memory for lists of several lengths."""
    print(f"list of {len(smiles):,} repeated, {jobs} processes")
    print(f"{'rows':>12} {'seconds':>9} {'rows/s':>8} {'peak memory of all processes':>30}")
    for rows in lengths:
        seconds, rate, peak = annotated(smiles, rows, jobs)
        print(f"{rows:>12,} {seconds:>9.1f} {rate:>8,.0f} {peak / 1e6:>27,.0f} MB", flush=True)


def report_processes(smiles: Sequence[str], rows: int, rounds: int) -> None:
    """One against two processes, interleaved, the best of each."""
    best = {1: float("inf"), 2: float("inf")}
    for _ in range(rounds):
        for jobs in best:
            best[jobs] = min(best[jobs], annotated(smiles, rows, jobs)[0])
    print(f"{rows:,} rows, best of {rounds} interleaved rounds, start-up included")
    for jobs, seconds in best.items():
        print(f"{jobs} process{'es' if jobs > 1 else ''}: {seconds:.1f} s, {rows / seconds:,.0f} rows/s")
    print(f"two processes: {best[1] / best[2]:.2f} x one")


def report_sizes(rounds: int) -> None:
    """Cost by number of heavy atoms (a polyether with one amine) and of sites (a polyamine)."""
    from rdkit import Chem

    from basirank.annotation import records_of

    series = {
        f"{atoms} heavy atoms, 1 site": "N" + "CCO" * ((atoms - 2) // 3) + "C" * (1 + (atoms - 2) % 3)
        for atoms in HEAVY_ATOMS
    }
    series |= {f"{sites} sites, {4 * sites} heavy atoms": "NCCC" * sites for sites in SITES}
    print(f"{'':<26} {'us/row':>9} {'x parsing':>10}   best of {rounds} rounds")
    for name, text in series.items():
        batch = [text] * SAME
        records_of(batch, (7.4,))
        whole = parsing = float("inf")
        for _ in range(rounds):
            start = time.perf_counter()
            records_of(batch, (7.4,))
            whole = min(whole, time.perf_counter() - start)
            start = time.perf_counter()
            for one in batch:
                Chem.MolFromSmiles(one)
            parsing = min(parsing, time.perf_counter() - start)
        print(f"{name:<26} {1e6 * whole / SAME:>9,.0f} {whole / parsing:>10.1f}")
