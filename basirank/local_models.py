"""Local models as files: what a user's own measured constants say, in arrays and JSON, to be used again.

A local model goes with the shipped model that it was conditioned on, and no other one reads it.
"""

from __future__ import annotations

import io
import json
import os
from pathlib import Path
from typing import Any

import numpy as np

from .conditioning import LocalModel, Measurement
from .kinship import Footprint
from .readers.rows import InputError
from .tables import tables_digest
from .writers import check_output, open_bytes

ENDING = ".npz"
FORMAT = 1
"""Version of the layout."""
LARGEST = 500_000_000
"""Longest file that is read [bytes]."""

_SCALARS = ("total", "value", "site_class", "family", "variance")
_RAGGED = {"features": np.uint32, "weights": np.float32, "explained": np.float32}
_MATRICES = ("pulls", "residuals", "explained_form")


def save_local(local: LocalModel, path: str | os.PathLike[str]) -> None:
    """Write a local model to a file that appears when whole.

    Parameters
    ----------
    local : LocalModel
        From `condition` or `calibrate`.
    path : str or path
        Its name, ending in `.npz`.

    Raises
    ------
    OutputError
        Another ending, or a place that cannot be written to.
    """
    name = os.fspath(path)
    check_output(name, (), (ENDING,))
    arrays: dict[str, Any] = {
        "pulls": local.pulls,
        "residuals": local.residuals,
        "explained_form": local.explained,
        **{field: np.array([getattr(one, field) for one in local.footprints]) for field in _SCALARS},
    }
    for field, kind in _RAGGED.items():
        parts = [getattr(one, field) for one in local.footprints]
        arrays[field] = np.concatenate(parts).astype(kind)
        arrays[f"{field}_lengths"] = np.array([len(part) for part in parts])
    about = {
        "format": FORMAT,
        "model": tables_digest(),
        "measurements": [list(one) for one in local.measurements],
        "groups": [one.group for one in local.footprints],
    }
    arrays["about"] = np.array(json.dumps(about, ensure_ascii=False))
    packed = io.BytesIO()
    np.savez_compressed(packed, **arrays)
    with open_bytes(name) as stream:
        stream.write(packed.getvalue())


def read_local(path: str | os.PathLike[str]) -> LocalModel:
    """Read a local model.

    Raises
    ------
    InputError
        No such file, not a local model, damaged, of another layout, or made on another version of the shipped model.
    """
    name = os.fspath(path)
    try:
        if Path(name).stat().st_size > LARGEST:
            raise InputError(f"{name} is no local model: it is too large")
        with open(name, "rb") as stream, np.load(stream, allow_pickle=False) as stored:
            about = json.loads(str(stored["about"]))
            if about["format"] != FORMAT:
                raise InputError(
                    f"{name}: a local model of another layout ({about['format']}); calibrate again"
                )
            if about["model"] != tables_digest():
                raise InputError(f"{name}: made on another version of the shipped model; calibrate again")
            return _checked(about, {key: stored[key] for key in stored.files if key != "about"})
    except InputError:
        raise
    except OSError as error:
        raise InputError(f"{name}: {(error.strerror or str(error)).lower()}") from None
    except (
        Exception
    ):  # a damaged archive fails in many ways: in its directory, in deflate, in the head of an array
        raise InputError(f"{name} is no local model, or is damaged") from None


def _checked(about: dict[str, Any], arrays: dict[str, Any]) -> LocalModel:
    """The local model in the arrays of a file; ValueError where they don't go together."""
    measurements = tuple(
        Measurement(str(smiles), float(value), kind, int(step), float(error), str(called))
        for smiles, value, kind, step, error, called in about["measurements"]
    )
    groups = [str(group) for group in about["groups"]]
    sites, rows = len(groups), len(measurements)
    shapes = {"pulls": (sites, rows), "residuals": (rows,), "explained_form": (sites, sites)}
    shapes |= dict.fromkeys(_SCALARS, (sites,))
    for field, shape in shapes.items():
        if arrays[field].shape != shape or not np.isfinite(arrays[field]).all():
            raise ValueError(field)
    ragged = {}
    for field, kind in _RAGGED.items():
        lengths = arrays[f"{field}_lengths"]
        if lengths.shape != (sites,) or arrays[field].dtype != kind or lengths.sum() != len(arrays[field]):
            raise ValueError(field)
        ragged[field] = np.split(arrays[field], np.cumsum(lengths)[:-1])
    footprints = tuple(
        Footprint(
            groups[place],
            ragged["features"][place],
            ragged["weights"][place],
            float(arrays["total"][place]),
            float(arrays["value"][place]),
            int(arrays["site_class"][place]),
            int(arrays["family"][place]),
            ragged["explained"][place],
            float(arrays["variance"][place]),
        )
        for place in range(sites)
    )
    return LocalModel(measurements, footprints, *(arrays[field] for field in _MATRICES))
