"""Run commands, each in a process of its own, with a standard output or a file system that fails.

    python faulty_outputs.py closed|full|small CASES

Run by a test in the folder of its input files, with one thread, so that each command can be forked off with everything
loaded. CASES is a JSON list of argument lists; prints a JSON list of [exit code, standard error]. `closed`: nobody
reads standard output any more. `full`: standard output is a full device. `small`: no file may grow past 100 bytes.
"""

from __future__ import annotations

import json
import os
import resource
import sys

os.environ["OMP_NUM_THREADS"] = os.environ["OPENBLAS_NUM_THREADS"] = "1"

from basirank.annotation import annotate
from basirank.cli import main

LARGEST = 100  # bytes of a file with `small`


def fail(how: str) -> None:
    """Make what this process writes to fail."""
    if how == "small":
        resource.setrlimit(resource.RLIMIT_FSIZE, (LARGEST, LARGEST))
        os.dup2(os.open(os.devnull, os.O_WRONLY), 1)
    elif how == "full":
        os.dup2(os.open("/dev/full", os.O_WRONLY), 1)
    else:
        reading, writing = os.pipe()
        os.dup2(writing, 1)
        os.close(writing)
        os.close(reading)


def ended(how: str, arguments: list[str]) -> tuple[int, str] | None:
    """Exit code and standard error of a command; None in the process that is to be that command."""
    reading, writing = os.pipe()
    process = os.fork()
    if not process:
        os.close(reading)
        os.dup2(writing, 2)
        os.close(writing)
        fail(how)
        sys.argv = ["basirank", *arguments]
        return None
    os.close(writing)
    with open(reading, encoding="utf-8") as stream:
        said = stream.read()
    return os.waitstatus_to_exitcode(os.waitpid(process, 0)[1]), said


if __name__ == "__main__":
    annotate(["CCN"])
    results = []
    for case in json.loads(sys.argv[2]):
        result = ended(sys.argv[1], case)
        if result is None:
            main()
        results.append(result)
    json.dump(results, sys.stdout)
