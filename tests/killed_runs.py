"""Annotate a list again and again, each time killed at a random moment, until a run comes to its end.

    python killed_runs.py INPUT OUTPUT SEED

Run by a test, in a process of its own with one thread, so that each run can be forked off with everything loaded.
Prints how many runs were killed and how many of the next ones went on from where they stood.
"""

from __future__ import annotations

import os
import random
import signal
import sys
import time
from collections.abc import Callable
from functools import partial

os.environ["OMP_NUM_THREADS"] = os.environ["OPENBLAS_NUM_THREADS"] = "1"

from basirank.annotation import annotate
from basirank.batch import journal, run
from basirank.readers import open_table
from basirank.request import PLAIN

CHUNK = 10
FIRST = (0.35, 0.35)  # moments of the first kills, as a share of a whole run
LATER = 0.5  # longest share until a later run is killed
GROWTH = 1.1  # of that share with each kill: a run spends some time on its start, and must get beyond it in the end


def one_run(source: str, target: str, say: Callable[[str], None]) -> None:
    """A whole run, journalled after each chunk."""
    run.CHUNK, journal.SAVE_EVERY = CHUNK, 0.0
    opener = partial(open_table, [source], typed=target.endswith(".parquet"))
    engine = run.engine_for()
    run.SMALL = 10**9
    run.to_file(opener, (7.4,), PLAIN, target, engine, lambda rows, share: None, say)


def tell(pipe: int, message: str) -> None:
    """Send a remark to the process that counts."""
    os.write(pipe, message.encode())


def time_of_one_run(source: str, target: str) -> float:
    """Seconds of a run that is left alone; what it wrote is taken away."""
    start = time.monotonic()
    child = os.fork()
    if not child:
        one_run(source, target, lambda message: None)
        os._exit(0)
    os.waitpid(child, 0)
    os.unlink(target)
    return time.monotonic() - start


def main() -> None:
    """Kill and run again until a run ends by itself."""
    source, target, seed = sys.argv[1:]
    moments = random.Random(int(seed))
    annotate(["CCN"])
    whole = time_of_one_run(source, f"timed.{target}")
    killed = resumed = 0
    while True:
        longest = LATER * GROWTH**killed
        share = FIRST[killed] if killed < len(FIRST) else moments.uniform(0.0, longest)
        reading, writing = os.pipe()
        child = os.fork()
        if not child:
            one_run(source, target, partial(tell, writing))
            os._exit(0)
        os.close(writing)
        time.sleep(share * whole)
        ended, _ = os.waitpid(child, os.WNOHANG)
        if not ended:
            os.kill(child, signal.SIGKILL)
            _, status = os.waitpid(child, 0)
            ended = not os.WIFSIGNALED(status)
        resumed += b"going on after" in os.read(reading, 10_000)
        os.close(reading)
        if ended:
            break
        killed += 1
    print(killed, resumed)


if __name__ == "__main__":
    main()
