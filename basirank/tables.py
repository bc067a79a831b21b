"""Reading of the parameter tables: the chemistry of the package stands in CSV and TOML files beside the code.

A line that opens with `#` is a remark. Tables are read once and kept.
"""

import csv
import hashlib
import tomllib
from functools import cache
from importlib.resources import files
from typing import Any


def _text(name: str) -> str:
    return files("basirank").joinpath("parameters", name).read_text(encoding="utf-8")


def _parse(name: str, text: str) -> tuple[dict[str, str], ...]:
    header: list[str] = []
    rows: list[dict[str, str]] = []
    # A remark line is blanked, not dropped, so that line numbers in messages are those of the file.
    lines = ["" if line.lstrip().startswith("#") else line for line in text.splitlines()]
    reader = csv.reader(lines, strict=True)
    for cells in reader:
        if not cells:
            continue
        if not header:
            header = [cell.strip() for cell in cells]
            continue
        if len(cells) != len(header):
            raise ValueError(
                f"{name}, line {reader.line_num}: {len(cells)} cells where the header has {len(header)}"
            )
        rows.append({column: cell.strip() for column, cell in zip(header, cells, strict=True)})
    return tuple(rows)


@cache
def read_table(name: str) -> tuple[dict[str, str], ...]:
    """Rows of a CSV parameter table, each a mapping of column name to the text of its cell.

    Parameters
    ----------
    name : str
        File name in `basirank/parameters`, such as ``"counterions.csv"``.

    Returns
    -------
    tuple of dict
        One for each row, in the order of the file; cells stripped of white space, never converted.

    Raises
    ------
    FileNotFoundError
        No table of that name.
    ValueError
        A row has more or fewer cells than the header; the message names file and line.

    Examples
    --------
    >>> read_table("counterions.csv")[0]["kind"]
    'acid'
    """
    return _parse(name, _text(name))


@cache
def read_toml(name: str) -> dict[str, Any]:
    """Contents of a TOML parameter table (shared between callers: not to be changed).

    Parameters
    ----------
    name : str
        File name in `basirank/parameters`.

    Raises
    ------
    FileNotFoundError
        No table of that name.
    ValueError
        The file is not TOML; the message names it.
    """
    try:
        return tomllib.loads(_text(name))
    except tomllib.TOMLDecodeError as error:
        raise ValueError(f"{name}: {error}") from error


@cache
def read_model_table(name: str) -> tuple[dict[str, str], ...]:
    """Rows of a CSV table in `models` (fitted values); empty when the table has not been made yet.

    Parameters
    ----------
    name : str
        File name in the `models` folder, such as ``"coefficients.csv"``.
    """
    resource = files("basirank.models").joinpath(name)
    if not resource.is_file():
        return ()
    return _parse(name, resource.read_text(encoding="utf-8"))


@cache
def tables_digest() -> str:
    """Digest of the parameter tables and the trained arrays: which shipped model this is."""
    digest = hashlib.blake2b(digest_size=16)
    for package in ("basirank.parameters", "basirank.models"):
        for path in sorted(files(package).iterdir(), key=lambda one: one.name):
            if path.is_file():
                digest.update(path.name.encode() + b"\0" + path.read_bytes())
    return digest.hexdigest()
