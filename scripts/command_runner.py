"""Commands run in this process, with standard output and standard error apart in every version of click allowed."""

from __future__ import annotations

import inspect
from typing import Any

from click.testing import CliRunner


def runner(**options: Any) -> CliRunner:
    """A runner of commands: click before 8.2 mixes the two streams unless it is told not to."""
    apart = {"mix_stderr": False} if "mix_stderr" in inspect.signature(CliRunner).parameters else {}
    return CliRunner(**apart, **options)
