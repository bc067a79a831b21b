"""Features: basicity and protonation state as numbers for a scikit-learn pipeline.

A transformer without anything to fit: structures in, one row of numbers out for each, the same numbers that
`annotate` gives, whatever the number of processes. This is the one module that needs scikit-learn.
"""

from __future__ import annotations

import math
import warnings
from collections.abc import Sequence
from typing import Any, Literal

import numpy as np
import pandas as pd
from joblib import Parallel, delayed
from numpy.typing import NDArray
from rdkit import Chem, rdBase
from sklearn.base import BaseEstimator, TransformerMixin
from threadpoolctl import threadpool_limits

from .annotation import CHUNK, why_unread
from .conditioning import LocalModel
from .prediction import Prediction, predict
from .records import clean_ph, column_positions, record, schema
from .request import Conditions, Request

Floats = NDArray[np.float64]

STEPS = 4
"""Most constants of each kind that have features of their own."""
LEAST_NEUTRAL = 1e-10
"""Share of the neutral form below which its logarithm goes no further [-]."""


class BasicityFeatures(TransformerMixin, BaseEstimator):  # type: ignore[misc]
    """Basicity and protonation state of structures as numbers.

    Parameters
    ----------
    ph : float or sequence of float
        pH of the state features [-], -2 to 16; several give features with `_at_<pH>`.
    steps : int
        How many pKaH and pKa values, 1 to 4.
    temperature, ionic_strength : float
        [C], 0 to 60; [mol/L], 0 to 0.5.
    missing : "nan" or float
        What stands for a value that there is none of: a compound without a second base has no `pkah_2`, a refused
        structure has nothing at all. Most estimators need a number.
    local : LocalModel, optional
        Corrections conditioned on measured constants, from `condition`.
    n_jobs : int, optional
        Processes, as in scikit-learn (-1: one for each core). The numbers are the same, bit for bit, for any.

    Attributes
    ----------
    n_features_in_ : int
        1: the column of structures.
    feature_names_in_ : ndarray of str
        Name of that column, where a frame was given to `fit`.

    Notes
    -----
    Features, in this order: for n = 1 to `steps` `pkah_n`, `pkah_n_low` and `pkah_n_high` (90 % interval); `pka_n`;
    `base_steps` and `acid_steps`, the constants from -5 to 16 among the first four; `pkah_1_supported`, 1 where
    measured neighbours stand behind the first constant, else 0; and for each pH `net_charge`, `protonated_fraction`,
    `neutral_fraction`, `zwitterion_fraction` and `log_neutral`, the common logarithm of the share without any charge:
    how far log D lies below log P where ions stay in water (0 down to -10).

    A structure that is refused is missing in all features, and a warning says how many are and why the first is.

    Examples
    --------
    >>> from sklearn.pipeline import make_pipeline
    >>> features = BasicityFeatures(steps=1, ph=7.4).set_output(transform="pandas")
    >>> features.fit_transform(["CCN", "c1ccncc1"])[["pkah_1", "net_charge"]].round(1)
       pkah_1  net_charge
    0    10.7         1.0
    1     5.2         0.0
    """

    def __init__(
        self,
        ph: float | Sequence[float] = 7.4,
        *,
        steps: int = 2,
        temperature: float = 25.0,
        ionic_strength: float = 0.0,
        missing: Literal["nan"] | float = "nan",
        local: LocalModel | None = None,
        n_jobs: int | None = None,
    ) -> None:
        self.ph = ph
        self.steps = steps
        self.temperature = temperature
        self.ionic_strength = ionic_strength
        self.missing = missing
        self.local = local
        self.n_jobs = n_jobs

    def fit(self, X: Any, y: Any = None) -> BasicityFeatures:
        """Check parameters and the shape of the structures; nothing is learnt.

        Parameters
        ----------
        X : sequence of str or rdkit.Chem.Mol
            A list, an array of one dimension or one column, a pandas Series, or a frame of one column.
        y : ignored

        Raises
        ------
        ValueError
            A parameter out of range, several columns, or no structure at all.
        TypeError
            One structure alone.
        """
        self._settings()
        _, name = _structures(X)
        self.n_features_in_ = 1
        if name is not None:
            self.feature_names_in_ = np.array([name], dtype=object)
        elif hasattr(self, "feature_names_in_"):
            del self.feature_names_in_
        return self

    def transform(self, X: Any) -> Floats:
        """Features of each structure.

        Parameters
        ----------
        X : as for `fit`

        Returns
        -------
        ndarray, shape (n, len(self.get_feature_names_out()))
            Or a frame, if `set_output` says so.
        """
        ph, request, missing = self._settings()
        items, _ = _structures(X)
        blocks = [items[start : start + CHUNK] for start in range(0, len(items), CHUNK)]
        done = Parallel(n_jobs=self.n_jobs)(
            delayed(_block)(block, ph, request, self.steps) for block in blocks
        )
        values = np.concatenate([block for block, _ in done])
        refused = [(CHUNK * n + place, why) for n, (_, bad) in enumerate(done) for place, why in bad]
        if refused:
            place, why = refused[0]
            warnings.warn(
                f"{len(refused):,} of {len(items):,} structures are refused and missing in all features; "
                f"the first stands at {place}: {why}",
                UserWarning,
                stacklevel=2,
            )
        return values if math.isnan(missing) else np.where(np.isnan(values), missing, values)

    def get_feature_names_out(self, input_features: Any = None) -> NDArray[np.object_]:
        """Names of the features.

        Parameters
        ----------
        input_features : ignored
        """
        ph, _, _ = self._settings()
        return np.array(_names(ph, self.steps), dtype=object)

    def _settings(self) -> tuple[tuple[float, ...], Request, float]:
        """The parameters, checked."""
        steps = self.steps
        if isinstance(steps, bool) or not isinstance(steps, int | np.integer) or not 1 <= steps <= STEPS:
            raise ValueError(f"steps must be a whole number from 1 to {STEPS}, not {steps!r}")
        if isinstance(self.missing, str):
            if self.missing != "nan":
                raise ValueError(f"missing must be 'nan' or a number, not {self.missing!r}")
            missing = math.nan
        else:
            missing = float(self.missing)
        conditions = Conditions(self.temperature, self.ionic_strength)
        return clean_ph(self.ph), Request(conditions, forms=True, local=self.local), missing

    def __sklearn_is_fitted__(self) -> bool:
        return True

    def __sklearn_tags__(self) -> Any:  # scikit-learn 1.6 and later
        tags = super().__sklearn_tags__()
        tags.input_tags.string = True
        tags.input_tags.one_d_array = True
        tags.input_tags.two_d_array = False
        tags.input_tags.allow_nan = True
        tags.requires_fit = False
        tags.no_validation = True
        return tags

    def _more_tags(self) -> dict[str, Any]:  # scikit-learn before 1.6
        return {
            "X_types": ["string"],
            "requires_fit": False,
            "no_validation": True,
            "allow_nan": True,
            "stateless": True,
        }


def _structures(given: Any) -> tuple[list[Any], str | None]:
    """The structures as a list, and the name of their column where they have one."""
    if isinstance(given, str | Chem.Mol):
        raise TypeError("one structure alone: give a list of structures")
    name = None
    if isinstance(given, pd.DataFrame):
        if given.shape[1] != 1:
            raise ValueError(f"one column of structures is needed, not {given.shape[1]}")
        name = str(given.columns[0])
        given = given.iloc[:, 0]
    elif isinstance(given, pd.Series) and isinstance(given.name, str):
        name = given.name
    shape = getattr(given, "shape", None)
    if shape is not None and len(shape) != 1:
        if len(shape) != 2 or shape[1] != 1:
            raise ValueError(f"one column of structures is needed, not an array of shape {tuple(shape)}")
        given = np.asarray(given)[:, 0]
    items = given.tolist() if isinstance(given, pd.Series | np.ndarray) else list(given)
    if any(isinstance(item, list | tuple | np.ndarray) for item in items):
        if not all(isinstance(item, list | tuple | np.ndarray) and len(item) == 1 for item in items):
            raise ValueError("one column of structures is needed")
        items = [item[0] for item in items]
    if not items:
        raise ValueError("no structure given (0 samples)")
    return items, name


def _state_names(ph: Sequence[float]) -> list[str]:
    kept = ("net_charge", "protonated_fraction", "neutral_fraction", "zwitterion_fraction", "log_neutral")
    return [f"{name}{end}" for end in _ends(ph) for name in kept]


def _ends(ph: Sequence[float]) -> list[str]:
    return [""] if len(ph) == 1 else [f"_at_{value:g}" for value in ph]


def _names(ph: Sequence[float], steps: int) -> list[str]:
    pkah = [f"pkah_{n}{end}" for n in range(1, steps + 1) for end in ("", "_low", "_high")]
    pka = [f"pka_{n}" for n in range(1, steps + 1)]
    return [*pkah, *pka, "base_steps", "acid_steps", "pkah_1_supported", *_state_names(ph)]


def _block(
    items: list[Any], ph: tuple[float, ...], request: Request, steps: int
) -> tuple[Floats, list[tuple[int, str]]]:
    """Features of one block, and the places of refused structures with their reasons.

    Blocks are cut the same way whatever the number of processes, and are computed in one thread.
    """
    reasons = [why_unread(item) for item in items]
    readable: list[Any] = [item for item, reason in zip(items, reasons, strict=True) if reason is None]
    with rdBase.BlockLogs(), threadpool_limits(1):
        found = iter(predict(readable, ph=ph, conditions=request.conditions, local=request.local))
    names = _names(ph, steps)
    values = np.full((len(items), len(names)), math.nan)
    refused = []
    for n, reason in enumerate(reasons):
        if reason is None:
            prediction = next(found)
            if prediction.status != "refused":
                values[n] = _row(prediction, ph, request, names)
                continue
            reason = prediction.message
        refused.append((n, reason))
    return values, refused


def _row(
    prediction: Prediction, ph: tuple[float, ...], request: Request, names: Sequence[str]
) -> list[float]:
    """Features of one structure, by name."""
    assert prediction.equilibrium is not None
    places = column_positions(schema(ph, request=request))
    shown = record(prediction, ph, request)

    def number(name: str) -> float:
        value = shown[places[name]]
        return math.nan if value is None or isinstance(value, str) else float(value)

    support = shown[places["pkah_1_support"]]
    known = {
        f"{kind}_steps": float(sum(not math.isnan(number(f"{column}_{n}")) for n in range(1, STEPS + 1)))
        for kind, column in (("base", "pkah"), ("acid", "pka"))
    }
    known["pkah_1_supported"] = math.nan if support is None else float(support == "supported")
    for state, end in zip(prediction.equilibrium.states, _ends(ph), strict=True):
        known[f"log_neutral{end}"] = round(math.log10(max(state.neutral_fraction, LEAST_NEUTRAL)), 4) + 0.0
    return [known[name] if name in known else number(name) for name in names]
