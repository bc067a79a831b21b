"""Annotation: lists, series and frames of structures in, one record for each out, in order, none lost.

These are the calls that other programs use. The numbers are those of `prediction`, the columns those of
`records`; a structure that cannot be computed is a row with status `refused` and its reason, never an
exception.
"""

from __future__ import annotations

import gc
from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from .records import (
    PANDAS_TYPES,
    Column,
    Record,
    Value,
    clean_ph,
    ranking,
    record,
    refused_record,
    schema,
    structure_column,
    unclashed,
)
from .request import PLAIN, Conditions, Request

if TYPE_CHECKING:
    import pandas as pd

    from .conditioning import LocalModel
    from .kinship import Standing

CHUNK = 1000  # structures that go through the stages together: enough to fill the blocks of the regression


def records_of(structures: Sequence[object], ph: Sequence[float], request: Request = PLAIN) -> list[Record]:
    """One record for each structure of a batch.

    Parameters
    ----------
    structures : sequence
        SMILES or RDKit molecules; anything else (None, NaN, a number) becomes a refused record.
    ph : sequence of float
        pH values [-], checked already.
    request : Request
        Conditions and further columns.
    """
    return [found for found, _ in _computed(structures, ph, request, standings=False)]


def standings_of(
    structures: Sequence[object], ph: Sequence[float], request: Request = PLAIN
) -> list[tuple[Record, Standing | None]]:
    """The same records, each with what the order of a list needs to know of its first constant (`kinship`)."""
    return _computed(structures, ph, request, standings=True)


def _computed(
    structures: Sequence[object], ph: Sequence[float], request: Request, standings: bool
) -> list[tuple[Record, Standing | None]]:
    reasons = [why_unread(item) for item in structures]
    readable = [n for n, reason in enumerate(reasons) if reason is None]
    found: dict[int, tuple[Record, Standing | None]] = {}
    for start in range(0, len(readable), CHUNK):
        part = readable[start : start + CHUNK]
        batch: list[Any] = [structures[n] for n in part]
        with _collector_at_rest():
            found.update(zip(part, _of_chunk(batch, ph, request, standings), strict=True))
    return [
        (refused_record(reason, ph, request), None) if reason is not None else found[n]
        for n, reason in enumerate(reasons)
    ]


def _of_chunk(
    batch: list[Any], ph: Sequence[float], request: Request, standings: bool
) -> list[tuple[Record, Standing | None]]:
    """Records of a chunk; what they were made from is gone when this returns, before the collector wakes."""
    from .prediction import predict

    predictions = predict(
        batch, ph=ph, conditions=request.conditions, standings=standings, local=request.local
    )
    return [(record(one, ph, request), one.standing) for one in predictions]


@contextmanager
def _collector_at_rest() -> Iterator[None]:
    """No search for reference cycles in here: a chunk makes none, and looking at its objects costs time."""
    running = gc.isenabled()
    gc.disable()
    try:
        yield
    finally:
        if running:
            gc.enable()


def why_unread(item: object) -> str | None:
    """Why something is neither a SMILES nor a molecule; None for one that is.

    Examples
    --------
    >>> why_unread("CCN"), why_unread(" "), why_unread(7)
    (None, 'no structure given', 'neither a SMILES nor a molecule: int')
    """
    from rdkit import Chem

    if isinstance(item, Chem.Mol) or (isinstance(item, str) and item.strip()):
        return None
    missing = item is None or isinstance(item, str) or type(item).__name__ in ("NAType", "NaTType")
    missing = missing or (isinstance(item, float) and item != item)
    return "no structure given" if missing else f"neither a SMILES nor a molecule: {type(item).__name__}"


def annotate(
    structures: Iterable[object],
    *,
    ph: float | Iterable[float] = 7.4,
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
    forms: bool = False,
    show_pkb: bool = False,
    local: LocalModel | None = None,
) -> pd.DataFrame:
    """Constants, first site and protonation state of each structure.

    Parameters
    ----------
    structures : iterable of str or rdkit.Chem.Mol
        A list, array, pandas Series or one structure alone. Missing and unreadable entries are rows too.
    ph : float or iterable of float
        pH of the state columns [-], -2 to 16; several give columns with `_at_<pH>`.
    temperature, ionic_strength : float
        Of the constants and states [C], 0 to 60, and [mol/L], 0 to 0.5; `message` states them when used.
    forms : bool
        Add the shares of the neutral form and of the zwitterion.
    show_pkb : bool
        Add pKb beside pKaH.
    local : LocalModel, optional
        Corrections conditioned on measured constants, from `condition`.

    Returns
    -------
    pandas.DataFrame
        One row for each structure, in order, columns of `records.schema`; a Series' index is kept.

    Raises
    ------
    ValueError
        pH outside -2 to 16 or not a number.
    """
    items, index = _listed(structures)
    values = clean_ph(ph)
    request = Request(Conditions(temperature, ionic_strength), forms, show_pkb, local)
    return _frame(records_of(items, values, request), schema(values, request=request), index)


def annotate_frame(
    frame: pd.DataFrame,
    *,
    smiles_column: str = "smiles",
    ph: float | Iterable[float] = 7.4,
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
    forms: bool = False,
    show_pkb: bool = False,
    local: LocalModel | None = None,
) -> pd.DataFrame:
    """The rows of a frame with the columns of `annotate` after their own.

    Pure and without state, so that any engine that maps partitions can call it; an empty partition gives the
    same columns and types.

    Parameters
    ----------
    frame : pandas.DataFrame
        Any columns; one that clashes with a result column gains `input_`.
    smiles_column : str
        Column that holds the structures, in any letter case.
    ph : float or iterable of float
        pH of the state columns [-], -2 to 16.
    temperature, ionic_strength, forms, show_pkb, local
        As for `annotate`.

    Raises
    ------
    ValueError
        No such column (the message lists those there are), a wrong pH or wrong conditions.
    """
    values = clean_ph(ph)
    request = Request(Conditions(temperature, ionic_strength), forms, show_pkb, local)
    records = records_of(_structures_of(frame, smiles_column), values, request)
    return _beside(frame, records, schema(values, request=request))


def rank(
    structures: Iterable[object] | pd.DataFrame,
    *,
    smiles_column: str = "smiles",
    ph: float | Iterable[float] = 7.4,
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
    forms: bool = False,
    show_pkb: bool = False,
    local: LocalModel | None = None,
) -> pd.DataFrame:
    """The same rows sorted by the first pKaH, strongest base first, with their `rank` in front.

    The last column, `above_next`, is the probability that a compound is truly more basic than the next.

    Parameters
    ----------
    structures : iterable of str or rdkit.Chem.Mol, or pandas.DataFrame
        As for `annotate`, or a frame as for `annotate_frame`.
    smiles_column : str
        Column that holds the structures when a frame is given.
    ph : float or iterable of float
        pH of the state columns [-], -2 to 16.
    temperature, ionic_strength, forms, show_pkb, local
        As for `annotate`.

    Returns
    -------
    pandas.DataFrame
        Rows without a first pKaH come last, without a rank. The index tells where a row stood in the input.

    Raises
    ------
    ValueError
        A wrong pH, wrong conditions, or a frame without such a column.
    """
    import pandas as pd

    from .kinship import above_next

    values = clean_ph(ph)
    request = Request(Conditions(temperature, ionic_strength), forms, show_pkb, local)
    columns = schema(values, ranked=True, request=request)
    frame = structures if isinstance(structures, pd.DataFrame) else None
    index: pd.Index | None
    if frame is not None:
        items, index = _structures_of(frame, smiles_column), frame.index
    else:
        items, index = _listed(structures)
    found = standings_of(items, values, request)
    order = ranking([row for row, _ in found])
    positions = [n for _, n in order]
    surer = above_next([found[n][1] for n in positions])
    rows: list[tuple[Value, ...]] = [
        (place, *found[n][0], sure) for (place, n), sure in zip(order, surer, strict=True)
    ]
    if index is None:
        index = pd.RangeIndex(len(items))
    ranked = _frame(rows, columns, index.take(positions))
    if frame is None:
        return ranked
    own = frame.iloc[positions]
    own = own.set_axis(unclashed(list(frame.columns), columns), axis=1)
    return pd.concat([ranked[["rank"]], own, ranked.drop(columns="rank")], axis=1)


def _listed(structures: Any) -> tuple[list[object], pd.Index | None]:
    """The structures as a list, and their index where they have one."""
    from rdkit import Chem

    if isinstance(structures, str | Chem.Mol):
        return [structures], None
    if hasattr(structures, "columns"):
        raise TypeError("a frame has several columns: use annotate_frame, or give one of its columns")
    index = structures.index if hasattr(structures, "index") and hasattr(structures, "iloc") else None
    return list(structures), index


def _structures_of(frame: pd.DataFrame, smiles_column: str) -> list[object]:
    try:
        place = structure_column(list(frame.columns), smiles_column)
    except ValueError as error:
        raise ValueError(f"the frame: {error}") from None
    return frame.iloc[:, place].tolist()


def _beside(frame: pd.DataFrame, records: Sequence[Record], columns: Sequence[Column]) -> pd.DataFrame:
    import pandas as pd

    own = frame.set_axis(unclashed(list(frame.columns), columns), axis=1)
    return pd.concat([own, _frame(records, columns, frame.index)], axis=1)


def _frame(rows: Sequence[Record], columns: Sequence[Column], index: pd.Index | None) -> pd.DataFrame:
    """Records as a frame whose types follow from the schema, whatever the values are."""
    import pandas as pd

    if index is None:
        index = pd.RangeIndex(len(rows))
    by_column = list(zip(*rows, strict=True)) if rows else [()] * len(columns)
    return pd.DataFrame(
        {
            column.name: pd.Series(list(values), index=index, dtype=PANDAS_TYPES[column.kind])
            for column, values in zip(columns, by_column, strict=True)
        },
        index=index,
    )
