"""Display: a frame of results as a table with pictures in a notebook.

Every cell is escaped; only the pictures, which are drawn here, are markup.
"""

from __future__ import annotations

from collections.abc import Sequence
from html import escape
from typing import TYPE_CHECKING, Any

from .depiction import picture_svg
from .explanation import CAUTION, explain
from .records import structure_column

if TYPE_CHECKING:
    import pandas as pd

SHOWN_ROWS = 100
PICTURE_WIDTH = 240  # pixels
DEFAULT_COLUMNS = ("rank", "name", "pkah_1", "pkah_1_low", "pkah_1_high", "pkah_1_class", "pkah_1_support",
                   "net_charge", "status", "message")  # fmt: skip


class Shown:
    """A table that a notebook draws; `html` is its markup, `str()` the plain frame."""

    def __init__(self, html: str, frame: pd.DataFrame) -> None:
        self.html = html
        self._frame = frame

    def _repr_html_(self) -> str:
        return self.html

    def __repr__(self) -> str:
        return repr(self._frame)


def show(
    frame: pd.DataFrame,
    *,
    smiles_column: str = "smiles",
    columns: Sequence[str] | None = None,
    rows: int = SHOWN_ROWS,
) -> Shown:
    """Rows of a frame with a picture of each structure, its sites marked and valued.

    Parameters
    ----------
    frame : pandas.DataFrame
        As from `rank` or `annotate_frame`, or any frame with a column of structures; `parent_smiles` is taken where
        there is no `smiles_column`.
    smiles_column : str
        Column that holds the structures, in any letter case.
    columns : sequence of str, optional
        Columns to show beside the pictures; the usual ones of `rank` that are there when not given.
    rows : int
        Rows shown, from the top.

    Raises
    ------
    ValueError
        No column of structures.

    Examples
    --------
    >>> import pandas as pd
    >>> shown = show(pd.DataFrame({"smiles": ["CCN"], "name": ["<b>amine</b>"]}))
    >>> "&lt;b&gt;amine" in shown.html, shown.html.count("<svg")
    (True, 1)
    """
    names = [str(name) for name in frame.columns]
    try:
        place = structure_column(names, smiles_column)
    except ValueError:
        if "parent_smiles" not in names:
            raise
        place = names.index("parent_smiles")
    wanted = [name for name in (DEFAULT_COLUMNS if columns is None else columns) if name in names]
    top = frame.head(rows)
    heads = "".join(f"<th>{escape(name)}</th>" for name in ("", *wanted))
    lines = []
    for row in top.itertuples(index=False, name=None):
        texts = [row[names.index(name)] for name in wanted]
        cells = "".join(f'<td style="text-align:left">{escape(_text(value))}</td>' for value in texts)
        lines.append(f"<tr><td>{_picture(row[place])}</td>{cells}</tr>")
    left = len(frame) - len(top)
    more = f"<p>{left:,} more rows</p>" if left else ""
    html = f"<table><thead><tr>{heads}</tr></thead><tbody>{''.join(lines)}</tbody></table>{more}"
    return Shown(f"<div>{html}<p><small>{escape(CAUTION)}</small></p></div>", frame)


def _picture(structure: Any) -> str:
    return picture_svg(explain(structure), PICTURE_WIDTH) or escape(_text(structure))


def _text(value: Any) -> str:
    """A cell: floats with two decimals, a missing value empty."""
    if value is None or type(value).__name__ == "NAType" or value != value:
        return ""
    return f"{value:.2f}" if isinstance(value, float) else str(value)
