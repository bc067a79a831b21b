"""Workers: chunks through processes of this machine, results in order, none lost to a process that dies.

Each worker is an executor of one process, so that it is known which chunk it had when it died. That chunk is tried
once more; if it fails again, or takes too long, its rows are tried one by one, those that fail are refused, and it
is computed as a whole, so that its bytes don't depend on what happened on the way.
"""

from __future__ import annotations

import os
import signal
import time
from collections import deque
from collections.abc import Iterable, Iterator, Sequence
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from contextlib import contextmanager
from dataclasses import dataclass, field
from multiprocessing import active_children, get_context
from typing import Any

from ..readers import Row
from .chunks import Chunk
from .compute import Done
from .engines import Refuse, Work, check_faults, fault_reason, refused_in
from .interrupts import interrupt_held
from .plan import Plan

AHEAD = 4  # chunks a worker may be ahead of the one that is to be written next
ROW_ALLOWANCE = 0.1  # seconds a row of a chunk may take besides the patience with one of them
START_TRIES = 3  # workers that may die before they are ready

DIED = "its computation ended the process (out of memory, or a fault in compiled code)"

_THREADS = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "VECLIB_MAXIMUM_THREADS")


class WorkersFailed(RuntimeError):
    """Worker processes cannot be started."""


@contextmanager
def one_thread() -> Iterator[None]:
    """Processes started and libraries first loaded here use one thread for their linear algebra."""
    before = {name: os.environ.get(name) for name in _THREADS}
    os.environ.update(dict.fromkeys(_THREADS, "1"))
    try:
        yield
    finally:
        for name, value in before.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value


# in the worker

_Packed = list[tuple[Any, ...]]
_in_worker: dict[str, Any] = {}


def _begin(plan: Plan, work: Work) -> None:
    import threading

    signal.signal(signal.SIGINT, signal.SIG_IGN)
    if hasattr(signal, "pthread_sigmask"):
        signal.pthread_sigmask(signal.SIG_UNBLOCK, {signal.SIGTERM})
    threading.Thread(target=_end_with_parent, daemon=True).start()
    _in_worker.update(plan=plan, work=work)


def _end_with_parent() -> None:
    """End with the process that started this one, however that ends."""
    from multiprocessing import connection, parent_process

    parent = parent_process()
    if parent is not None:
        connection.wait([parent.sentinel])
        os._exit(1)


def _ready() -> None:
    """Load what the first chunk would wait for."""
    from rdkit import RDLogger

    RDLogger.DisableLog("rdApp.*")  # type: ignore[attr-defined]
    from ..annotation import records_of

    records_of(["CCN"], _in_worker["plan"].ph)


def _do(rows: _Packed) -> Done:
    done: Done = _in_worker["work"](_in_worker["plan"], [Row(*row) for row in rows])
    return done


def packed(rows: Sequence[Row]) -> _Packed:
    """Rows as plain tuples, which travel at less cost."""
    return [(row.cells, row.structure, row.problem, row.is_record, row.values) for row in rows]


# in the parent


@dataclass(slots=True, eq=False)
class _Ticket:
    """A chunk on its way: its rows, how often a worker died of it, and what single rows have shown."""

    chunk: Chunk
    rows: list[Row]
    deaths: int = 0
    unlimited: bool = False
    probes: int = 0
    bad: dict[int, str] = field(default_factory=dict)
    fault: BaseException | None = None
    done: Done | None = None


@dataclass(slots=True, eq=False)
class _Task:
    """What a worker is given: a chunk, or one row of it."""

    ticket: _Ticket
    row: int | None = None

    def rows(self) -> list[Row]:
        return self.ticket.rows if self.row is None else [self.ticket.rows[self.row]]


class _Worker:
    """A process, the task it has, and since when."""

    def __init__(self, plan: Plan, work: Work) -> None:
        self._given = (plan, work)
        self.task: _Task | None = None
        self.start()

    def start(self) -> None:
        self._executor = ProcessPoolExecutor(
            1, mp_context=get_context("spawn"), initializer=_begin, initargs=self._given
        )
        self.ready = False
        self.deadline: float | None = None
        self.late = False
        before = set(active_children())
        self.future: Future[Any] = self._submit(_ready)
        self._processes = set(active_children()) - before

    def _submit(self, function: Any, *arguments: Any) -> Future[Any]:
        with interrupt_held(signal.SIGTERM), one_thread():
            return self._executor.submit(function, *arguments)

    def give(self, task: _Task, patience: float) -> None:
        rows = task.rows()
        self.task = task
        self.future = self._submit(_do, packed(rows))
        limit = patience + (ROW_ALLOWANCE * len(rows) if task.row is None else 0.0)
        self.deadline = None if task.ticket.unlimited else time.monotonic() + limit

    def kill(self) -> None:
        for process in self._processes:
            process.kill()

    def end(self) -> None:
        self.kill()
        self._executor.shutdown(wait=False, cancel_futures=True)


def by_workers(
    plan: Plan,
    chunks: Iterable[Chunk],
    refuse: Refuse,
    work: Work,
    *,
    jobs: int,
    patience: float,
) -> Iterator[tuple[Chunk, Done]]:
    """Compute in worker processes.

    Parameters
    ----------
    plan, chunks, refuse, work
        As for every engine; `work` is a function that a worker can import.
    jobs : int
        Processes.
    patience : float
        Time after which a single row is refused [s].

    Raises
    ------
    WorkersFailed
        Workers die before they are ready.
    """
    run = _Run(plan, work, refuse, jobs, patience)
    try:
        yield from run.results(iter(chunks))
    finally:
        run.end()


class _Run:
    def __init__(self, plan: Plan, work: Work, refuse: Refuse, jobs: int, patience: float) -> None:
        self._plan, self._work, self._refuse = plan, work, refuse
        self._jobs, self._patience = jobs, patience
        self._workers: list[_Worker] = []
        self._window: deque[_Ticket] = deque()
        self._tasks: deque[_Task] = deque()
        self._failed_starts = 0

    def results(self, chunks: Iterator[Chunk]) -> Iterator[tuple[Chunk, Done]]:
        more = True
        while more or self._window:
            if more and len(self._tasks) < self._jobs and len(self._window) < AHEAD * self._jobs:
                chunk = next(chunks, None)
                if chunk is None:
                    more = False
                    continue
                ticket = _Ticket(chunk, chunk.rows)
                self._window.append(ticket)
                self._tasks.append(_Task(ticket))
                self._hand_out()
            else:
                self._wait()
            while self._window and (done := self._window[0].done) is not None:
                yield self._window.popleft().chunk, done

    def end(self) -> None:
        for worker in self._workers:
            worker.end()

    def _hand_out(self) -> None:
        """Give tasks to workers that wait for one; start another worker if there is work for it."""
        for worker in self._workers:
            if self._tasks and worker.ready and worker.task is None:
                worker.give(self._tasks.popleft(), self._patience)
        starting = sum(not worker.ready for worker in self._workers)
        if len(self._tasks) > starting and len(self._workers) < self._jobs:
            self._workers.append(_Worker(self._plan, self._work))

    def _wait(self) -> None:
        """Wait for something to happen, and deal with it."""
        busy = [worker for worker in self._workers if worker.task is not None or not worker.ready]
        now = time.monotonic()
        limits = [worker.deadline - now for worker in busy if worker.task and worker.deadline is not None]
        wait([worker.future for worker in busy], max(0.0, min(limits, default=60.0)), FIRST_COMPLETED)
        now = time.monotonic()
        for worker in busy:
            if worker.future.done():
                self._settle(worker)
            elif worker.task and worker.deadline is not None and now > worker.deadline:
                worker.late, worker.deadline = True, None
                worker.kill()
        self._hand_out()

    def _settle(self, worker: _Worker) -> None:
        try:
            result = worker.future.result()
        except BrokenProcessPool:
            self._died(worker)
        except Exception as fault:
            task, worker.task = worker.task, None
            if task is None:
                raise WorkersFailed(f"a worker process cannot begin: {fault}") from fault
            self._failed(task, fault)
        else:
            if not worker.ready:
                worker.ready, self._failed_starts = True, 0
                return
            task, worker.task = worker.task, None
            assert task is not None
            if task.row is None:
                task.ticket.done = result
            else:
                self._probed(task.ticket)

    def _died(self, worker: _Worker) -> None:
        task, late, ready = worker.task, worker.late, worker.ready
        worker.task = None
        worker.end()
        if not ready:
            self._failed_starts += 1
            if self._failed_starts >= START_TRIES:
                raise WorkersFailed("worker processes end before they are ready (too little memory?)")
        worker.start()
        if task is None:
            return
        ticket = task.ticket
        if task.row is not None:
            why = f"takes longer than {self._patience:g} s" if late else DIED
            ticket.bad[ticket.chunk.first + task.row] = why
            self._probed(ticket)
        elif late or ticket.deaths:
            self._take_apart(ticket)
        else:
            ticket.deaths += 1
            self._tasks.appendleft(task)

    def _failed(self, task: _Task, fault: Exception) -> None:
        """A fault of the program: of one row, it is refused; of a chunk, it is taken apart."""
        ticket = task.ticket
        if task.row is not None:
            ticket.bad[ticket.chunk.first + task.row] = fault_reason(fault)
            self._probed(ticket)
        elif ticket.fault is not None:
            raise fault
        else:
            ticket.fault = fault
            self._take_apart(ticket)

    def _take_apart(self, ticket: _Ticket) -> None:
        if ticket.unlimited or all(row.problem for row in ticket.rows):
            raise WorkersFailed(
                f"rows {ticket.chunk.first + 1:,} to {ticket.chunk.end:,} end the worker together, though"
                " none of them does so alone (too little memory?)"
            )
        tasks = [_Task(ticket, n) for n, row in enumerate(ticket.rows) if row.problem is None]
        ticket.probes = len(tasks)
        self._tasks.extendleft(reversed(tasks))

    def _probed(self, ticket: _Ticket) -> None:
        ticket.probes -= 1
        if ticket.probes:
            return
        if ticket.fault is not None:
            check_faults(ticket.chunk, ticket.bad, ticket.fault)
        ticket.rows = refused_in(ticket.chunk, ticket.bad, self._refuse)
        ticket.unlimited = True
        self._tasks.appendleft(_Task(ticket))
