"""Packages that only some formats and ways of running need, asked for when they are needed."""

from __future__ import annotations

from importlib import import_module
from typing import Any


class MissingExtra(ValueError):
    """A package that is not installed; the message is one plain line that names the extra."""


def needed(package: str, extra: str, purpose: str) -> Any:
    """A package of an extra.

    Parameters
    ----------
    package : str
        Name to import.
    extra : str
        Extra of this project that installs it.
    purpose : str
        What it is needed for, as a message begins with it.

    Raises
    ------
    MissingExtra
        It is not installed.
    """
    try:
        return import_module(package)
    except ImportError:
        distribution = package.partition(".")[0]
        raise MissingExtra(
            f"{purpose}: needs the package {distribution}: pip install 'basirank[{extra}]'"
        ) from None
