"""Interrupts and requests to end, held back where they would do harm."""

from __future__ import annotations

import signal
from collections.abc import Iterator
from contextlib import contextmanager


@contextmanager
def interrupt_held(*others: signal.Signals) -> Iterator[None]:
    """Let an interrupt, and other signals, wait: RDKit's substructure search may swallow it.

    A process started in here inherits the mask, so that one key press doesn't end the workers before this process
    knows of it.
    """
    if not hasattr(signal, "pthread_sigmask"):
        yield
        return
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT, *others})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)
