"""Cluster: the same chunks on the workers of a Dask scheduler.

The scheduler gives a chunk whose worker was lost to another one. A chunk that several workers were lost over is
tried row by row, as on one machine.
"""

from __future__ import annotations

import threading
from collections import deque
from collections.abc import Callable, Iterable, Iterator
from typing import Any

from ..extras import needed
from ..readers import InputError, Row
from .chunks import Chunk
from .compute import Done
from .engines import Refuse, Work, check_faults, fault_reason, refused_in
from .plan import Plan
from .workers import DIED, packed

AHEAD = 4  # chunks on their way for each thread of the cluster
CONNECT = 30  # seconds in which the scheduler must answer

_one_at_a_time = threading.Lock()


def _do(work: Work, plan: Plan, rows: list[tuple[Any, ...]]) -> Done:
    """One chunk at a time in a worker, whatever number of threads it has."""
    with _one_at_a_time:
        return work(plan, [Row(*row) for row in rows])


def by_cluster(
    plan: Plan, chunks: Iterable[Chunk], refuse: Refuse, work: Work, *, address: str
) -> Iterator[tuple[Chunk, Done]]:
    """Compute on a Dask cluster.

    Parameters
    ----------
    plan, chunks, refuse, work
        As for every engine.
    address : str
        Address of the scheduler (`tcp://host:8786`).

    Raises
    ------
    InputError
        No scheduler answers there, or its workers do not have this version.
    """
    distributed = needed("distributed", "cluster", "--cluster")
    try:
        client = distributed.Client(address, timeout=CONNECT, set_as_default=False)
    except (OSError, ValueError) as error:
        raise InputError(f"no Dask scheduler answers at {address}: {' '.join(str(error).split())}") from None
    with client:
        send = _sender(client, work, plan)
        waiting: deque[tuple[Chunk, Any]] = deque()
        for chunk in chunks:
            waiting.append((chunk, send(chunk.rows)))
            if len(waiting) >= AHEAD * max(1, sum(client.nthreads().values())):
                yield _result(waiting.popleft(), send, refuse, distributed)
        while waiting:
            yield _result(waiting.popleft(), send, refuse, distributed)


def _sender(client: Any, work: Work, plan: Plan) -> Callable[[list[Row]], Any]:
    return lambda rows: client.submit(_do, work, plan, packed(rows), pure=False)


def _result(
    sent: tuple[Chunk, Any], send: Callable[[list[Row]], Any], refuse: Refuse, distributed: Any
) -> tuple[Chunk, Done]:
    chunk, future = sent
    try:
        return chunk, future.result()
    except distributed.scheduler.KilledWorker as error:
        fault, lost = error, True
    except Exception as error:
        fault, lost = error, False
    bad = {}
    probes = [(n, send([row])) for n, row in enumerate(chunk.rows) if row.problem is None]
    for n, probe in probes:
        try:
            probe.result()
        except distributed.scheduler.KilledWorker:
            bad[chunk.first + n] = DIED
        except Exception as error:
            bad[chunk.first + n] = fault_reason(error)
    if not lost:
        check_faults(chunk, bad, fault)
    return chunk, send(refused_in(chunk, bad, refuse)).result()
