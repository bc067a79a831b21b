"""Tuning: which small change of structure would bring the constant of one nitrogen into a window.

Edits of the table are made near the nitrogen, all products are predicted in one batch, and each is told with its
constant, its shift and what makes it. Those in the window come first, the least change first.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any, Literal

from .candidates import REACH, Candidate, order, start_of
from .edits import edits as edit_table
from .records import shown
from .request import STANDARD, Conditions, Request, within

if TYPE_CHECKING:
    import pandas as pd
    from rdkit import Chem

    from .conditioning import LocalModel
    from .scanning import Scan

WINDOW_RANGE = (-5.0, 16.0)
"""Constants that may be asked for [-]: those that are reported."""


@dataclass(frozen=True, slots=True)
class Tuning:
    """Changes of one structure, best first; `str()` gives the first ten as text, `frame()` all as a table.

    Attributes
    ----------
    structure, parent_smiles : str
        As given, and the neutral parent that the edits were made on.
    message : str
        Remarks on the structure and its constants.
    site : int
        The nitrogen, as the input numbers it.
    site_class, step : str
        Its class, and which constant of the compound is its own.
    value, low, high : float
        That constant and its 90 % interval [-].
    window : tuple of (float, float)
        Where it is to go [-].
    keep : tuple of int
        Protected atoms, as the input numbers them.
    reach : int
        Bonds from the nitrogen within which edits were made.
    most_edits : int
        Edits made one after another, 1 or 2.
    tried : int
        Edits of the table that could be made.
    candidates : tuple of Candidate
        In the window first, by cost, then by probability, the higher first; then the others, the nearest first.
    parent_atoms : tuple of int
        Number in the input of each atom of `parent_smiles`, in the order in which they stand there.
    conditions : Conditions
        Of all constants.
    """

    structure: str
    parent_smiles: str
    message: str
    site: int
    site_class: str
    step: str
    value: float
    low: float
    high: float
    window: tuple[float, float]
    keep: tuple[int, ...]
    reach: int
    most_edits: int
    tried: int
    candidates: tuple[Candidate, ...]
    parent_atoms: tuple[int, ...]
    conditions: Conditions = STANDARD

    def __str__(self) -> str:
        from .tuning_text import tuning_text

        return tuning_text(self)

    @property
    def hits(self) -> tuple[Candidate, ...]:
        """Those in the window."""
        return tuple(one for one in self.candidates if one.in_window)

    def frame(self) -> pd.DataFrame:
        """All candidates as a table, a row for each, in order."""
        import pandas as pd

        from .tuning_text import COLUMNS, row_of

        rows = [row_of(rank, one) for rank, one in enumerate(self.candidates, start=1)]
        return pd.DataFrame(rows, columns=list(COLUMNS))

    def _repr_html_(self) -> str:
        import html

        return f"<pre>{html.escape(str(self))}</pre>"


def tune(
    structure: str | Chem.Mol,
    to: str | Sequence[float],
    *,
    site: int | None = None,
    keep: str | Iterable[int | str] = (),
    edits: Literal[1, 2] = 1,
    reach: int = REACH,
    temperature: float = 25.0,
    ionic_strength: float = 0.0,
    local: LocalModel | None = None,
) -> Tuning:
    """Small changes of structure that would bring the constant of one nitrogen into a window.

    Parameters
    ----------
    structure : str or rdkit.Chem.Mol
        One compound; atoms are numbered from 0 as written in it.
    to : (float, float) or str
        Lower and upper end of the window [-], or ``"7.0:8.0"``.
    site : int, optional
        The nitrogen; that of the first proton by default.
    keep : str or iterable of int or str
        Atoms that stay as they are: SMARTS (every match), or numbers as written in the input, comma-separated in a
        text. Such an atom stays in every product with its element, charge, number of hydrogens, neighbours and
        their elements, and bonds; a neighbour itself may gain a substituent unless it is protected too.
    edits : {1, 2}
        How many edits are made one after another. With 2 a second is tried on the products of the best
        `SEEDS` single ones.
    reach : int
        Bonds from the nitrogen within which an edit may touch an atom that stays.
    temperature, ionic_strength : float
        Of the constants [C], 0 to 60, and [mol/L], 0 to 0.5.
    local : LocalModel, optional
        Corrections conditioned on measured constants, from `condition`.

    Returns
    -------
    Tuning

    Raises
    ------
    ValueError
        The structure cannot be computed; the site is no base; a protected atom or SMARTS isn't in it; an option is
        out of range.

    Examples
    --------
    >>> found = tune("C1CCCCN1Cc1ccccc1", (6.5, 7.0))
    >>> "piperidine-to-morpholine" in [one.edits[0] for one in found.hits]
    True
    """
    window = clean_window(to)
    if edits not in (1, 2):
        raise ValueError(f"edits must be 1 or 2, not {edits!r}")
    request = Request(Conditions(temperature, ionic_strength), local=local)
    start = start_of(structure, site=site, keep=keep, reach=reach, request=request)
    products = start.products(edit_table())
    found = start.told(products, window)
    if edits == 2:
        again = start.paired(found)
        found = start.told([*products, *again], window)
    candidates = sorted((one for _, one in found), key=lambda one: order(one, window))
    own = start.step
    return Tuning(
        structure=start.structure,
        parent_smiles=start.parent_smiles,
        message=own.prediction.message,
        site=start.site,
        site_class=own.estimate.site.site_class,
        step=f"pKaH {own.number}",
        value=shown(own.value, "constant"),
        low=shown(own.value - own.half_width, "constant"),
        high=shown(own.value + own.half_width, "constant"),
        window=window,
        keep=start.keep,
        reach=reach,
        most_edits=edits,
        tried=len({product.edits[0].name for product in products}),
        candidates=tuple(candidates),
        parent_atoms=start.parent_atoms,
        conditions=request.conditions,
    )


def clean_window(to: str | Sequence[float]) -> tuple[float, float]:
    """A window as two numbers, the lower first.

    Examples
    --------
    >>> clean_window("7:8")
    (7.0, 8.0)
    >>> clean_window((8, 7))
    Traceback (most recent call last):
    ValueError: the window's lower end comes first: 8:7 holds nothing
    """
    ends = to.split(":") if isinstance(to, str) else list(to)
    if len(ends) != 2:
        raise ValueError(f"the window is LOW:HIGH, such as 7.0:8.0, not {to!r}")
    low, high = (within("the window", end, WINDOW_RANGE, "") for end in ends)
    if not low < high:
        raise ValueError(f"the window's lower end comes first: {low:g}:{high:g} holds nothing")
    return low, high


def as_dict(found: Tuning | Scan) -> dict[str, Any]:
    """All that was found as plain lists and numbers, for JSON; the names are those of the attributes."""
    return asdict(found)
