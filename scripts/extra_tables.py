"""Tables that a user brings to the training: the layout of the IUPAC digitised pKa compilation, and its rules.

The compilation numbers constants along the ladder of charges, for amphoteric compounds too: pKaHn is that of the n-th
proton on the neutral form, pKan that of the n-th proton off it. So a step is named by the net charge of its protonated
form, and the model says which site gives or takes the proton there. What isn't an equilibrium constant in water near
25 C is left out, doubtful values count less, and compounds that are kept for scoring never come in; all is counted.
"""

from __future__ import annotations

import csv
import re
from collections import Counter, defaultdict
from dataclasses import dataclass, field
from itertools import pairwise
from pathlib import Path
from statistics import median

from compounds import held_out, only_scores, skeleton
from measured_rows import Row, rows_of
from rdkit import Chem, rdBase

from basirank.prediction import Prediction, predict
from basirank.scoring import along_ladder

NEEDED = ("smiles", "pka_type", "pka_value")
TEMPERATURES = (15.0, 35.0)
"""Temperatures that are taken [C]; within them the training brings values to 25 C."""
AGREEMENT = 0.3
"""Repeated values of a step that spread further count as uncertain [pK units]."""
QUALITIES = ("reliable", "approximate", "uncertain")
"""Words of the measured table for the compilation's assessments, best first."""
LADDER_SLACK = 0.05
"""A later proton may be bound more tightly by no more than this [pK units]."""

_STEP = re.compile(r"pka(?P<base>h?)_?(?P<number>\d*)", re.IGNORECASE)
_NUMBER = re.compile(r"[-+]?\d+(?:\.\d+)?")
_STRENGTH = re.compile(r"\bI\s*=\s*(\d*\.?\d+)")
_OTHER_SOLVENT = re.compile(
    r"ethanol|methanol|propanol|etoh|meoh|dioxan|acetone|acetonitrile|mecn|dmso|dimethyl ?sulfoxide|"
    r"mixed solvent|co-?solvent|aq(?:ueous)?\.? organic",
    re.IGNORECASE,
)
_REMARKS = ("remarks", "ref_remarks", "entry_remarks", "method")


class TableError(ValueError):
    """The table can't be used at all; the message is one plain line."""


@dataclass(slots=True)
class ExtraTable:
    """Rows in the columns of `data/measured.csv`, and what became of the others, by reason."""

    records: list[dict[str, str]] = field(default_factory=list)
    counts: Counter[str] = field(default_factory=Counter)


@dataclass(frozen=True, slots=True)
class Entry:
    """One usable row of the compilation."""

    name: str
    number: str
    smiles: str
    acid_charge: int
    value: float
    temperature: float | None
    strength: str
    quality: str


def quality_of(assessment: str) -> str | None:
    """The measured table's word for an assessment; None for one that is not to be used."""
    word = assessment.strip().lower()
    if word.startswith(("very uncertain", "v. uncert", "v.uncert", "doubtful")):
        return None
    if word.startswith("reliable"):
        return "reliable"
    return "approximate" if word.startswith("approx") else "uncertain"


def entry_of(cells: dict[str, str]) -> Entry | str:
    """A row as an entry, or why it is left out."""
    step = _STEP.fullmatch(cells["pka_type"])
    if step is None:
        return f"constant of another type ({cells['pka_type'] or 'none given'})"
    number = int(step["number"] or 1)
    text = cells["pka_value"]
    about = text.lstrip("~").removeprefix("ca.").strip()
    if not _NUMBER.fullmatch(about):
        return "value that is no single number"
    if any(
        cells[name].strip().lower() not in ("", "water", "none", "no") for name in cells if "solvent" in name
    ):
        return "other solvent than water"
    if any(_OTHER_SOLVENT.search(cells.get(name, "")) for name in _REMARKS):
        return "other solvent than water"
    if cells.get("pressure", "").lower() not in ("", "1", "1 atm", "1 bar", "1.0"):
        return "under pressure"
    degrees = _NUMBER.findall(cells.get("t", ""))
    temperature = sum(map(float, degrees[:2])) / len(degrees[:2]) if degrees else None
    if temperature is not None and not TEMPERATURES[0] <= temperature <= TEMPERATURES[1]:
        return f"outside {TEMPERATURES[0]:g} to {TEMPERATURES[1]:g} C"
    quality = quality_of(cells.get("assessment", ""))
    if quality is None:
        return "assessed as very uncertain"
    if about != text or temperature is None:
        quality = "uncertain"
    strength = next((m[1] for name in _REMARKS if (m := _STRENGTH.search(cells.get(name, "")))), "")
    return Entry(
        name=cells.get("original_iupac_names", "") or cells.get("unique_id", ""),
        number=cells.get("unique_id", ""),
        smiles=cells["smiles"],
        acid_charge=number if step["base"] else 1 - number,
        value=float(about),
        temperature=temperature,
        strength=strength,
        quality=quality,
    )


def merged(entries: list[Entry]) -> Entry:
    """One entry for a step measured several times: the best assessed, of these the one nearest the median."""
    best = min(QUALITIES.index(entry.quality) for entry in entries)
    chosen = [entry for entry in entries if QUALITIES.index(entry.quality) == best]
    middle = median(entry.value for entry in chosen)
    one = min(chosen, key=lambda entry: (abs(entry.value - middle), abs((entry.temperature or 40) - 25)))
    spread = max(entry.value for entry in chosen) - min(entry.value for entry in chosen)
    quality = "uncertain" if spread > AGREEMENT else one.quality
    return Entry(
        one.name, one.number, one.smiles, one.acid_charge, one.value, one.temperature, one.strength, quality
    )


def descends(steps: dict[int, float]) -> bool:
    """Whether each further proton on a compound is bound less tightly, as a ladder must be."""
    values = [steps[charge] for charge in sorted(steps)]
    return all(later <= earlier + LADDER_SLACK for earlier, later in pairwise(values))


def record_of(entry: Entry, prediction: Prediction, source: str) -> dict[str, str] | None:
    """The entry in the columns of the measured table, its site the one that carries the model's step; None without."""
    step = along_ladder(prediction, entry.acid_charge)
    if step is None:
        return None
    return {
        "name": entry.name,
        "smiles": entry.smiles,
        "kind": "pkah" if step.kind == "base" else "pka",
        "acid_charge": str(entry.acid_charge),
        "value": f"{entry.value:g}",
        "temperature_c": "" if entry.temperature is None else f"{entry.temperature:g}",
        "ionic_strength": entry.strength,
        "class": prediction.estimates[step.carrier].site.site_class,
        "source": f"{source}, entry {entry.number}",
        "taken": "published",
        "quality": entry.quality,
        "note": "",
    }


def read_iupac(
    path: Path, known: set[tuple[str, int]], source: str = "IUPAC Digitized pKa Dataset"
) -> ExtraTable:
    """Rows of a table in the layout of the IUPAC digitised pKa compilation that the training may use.

    Parameters
    ----------
    path : Path
        CSV file with columns `SMILES`, `pka_type` and `pka_value`, in any letter case, and further ones of the
        layout (`unique_ID`, `T`, `remarks`, `method`, `assessment`, `cosolvent`, `pressure`, ...) as far as present.
    known : set of (key, acid_charge)
        Steps that the project's own table has; they are not taken a second time.
    source : str
        Named in each row.

    Returns
    -------
    ExtraTable

    Raises
    ------
    TableError
        No such file, no text, or a column is missing.
    """
    table = ExtraTable()
    found: dict[tuple[str, int], list[Entry]] = defaultdict(list)
    keys: dict[str, str | None] = {}
    apart = held_out()
    for cells in _cells(path):
        entry = entry_of(cells)
        if isinstance(entry, str):
            table.counts[entry] += 1
            continue
        if entry.smiles not in keys:
            keys[entry.smiles] = _key(entry.smiles)
        key = keys[entry.smiles]
        if key is None:
            table.counts["structure that can't be read"] += 1
        elif only_scores(key) or key in apart:
            table.counts["compound kept for scoring or held out"] += 1
        else:
            found[key, entry.acid_charge].append(entry)
    ladders: dict[str, dict[int, Entry]] = defaultdict(dict)
    for (key, charge), entries in found.items():
        table.counts["repeated value of a step"] += len(entries) - 1
        ladders[key][charge] = merged(entries)
    chosen: list[tuple[str, Entry]] = []
    for key, steps in ladders.items():
        if descends({charge: entry.value for charge, entry in steps.items()}):
            chosen += [(key, entry) for entry in steps.values()]
        else:
            table.counts["ladder out of order"] += len(steps)
    _place(table, chosen, known, apart, source)
    return table


def extra_rows(paths: list[Path], rows: list[Row]) -> list[Row]:
    """Rows of the tables that `rows` doesn't have yet; what became of each table's entries is printed.

    Raises
    ------
    TableError
        A table can't be used at all.
    """
    added: list[Row] = []
    for path in paths:
        known = {(skeleton(row.group), int(row.record["acid_charge"])) for row in rows + added}
        table = read_iupac(path, known)
        print(f"{path}: {len(table.records)} values taken")
        for reason, count in sorted(table.counts.items()):
            if count:
                print(f"  {count:6d}  {reason}")
        added += rows_of(table.records)
    return added


def _cells(path: Path) -> list[dict[str, str]]:
    """Cells of all rows by column name in small letters."""
    try:
        with path.open(encoding="utf-8-sig", newline="") as handle:
            reader = csv.DictReader(handle)
            names = [name.strip().lower() for name in reader.fieldnames or ()]
            if missing := [name for name in NEEDED if name not in names]:
                raise TableError(f"{path}: no column {', '.join(missing)}")
            return [
                {
                    name.strip().lower(): (value or "").strip()
                    for name, value in row.items()
                    if isinstance(name, str)
                }
                for row in reader
            ]
    except (OSError, UnicodeDecodeError, csv.Error) as reason:
        raise TableError(f"{path}: {reason}") from None


def _key(smiles: str) -> str | None:
    """Key of a structure; None where there is none."""
    with rdBase.BlockLogs():
        return None if not smiles or Chem.MolFromSmiles(smiles) is None else skeleton(smiles)


def _place(
    table: ExtraTable,
    chosen: list[tuple[str, Entry]],
    known: set[tuple[str, int]],
    apart: set[str],
    source: str,
) -> None:
    """Find the sites of the chosen entries and add what fits."""
    for (_, entry), prediction in zip(chosen, predict([entry.smiles for _, entry in chosen]), strict=True):
        if prediction.equilibrium is None or prediction.parent is None:
            table.counts["structure that can't be computed"] += 1
            continue
        key = skeleton(prediction.parent.smiles)
        if only_scores(key) or key in apart:
            table.counts["compound kept for scoring or held out"] += 1
        elif (key, entry.acid_charge) in known:
            table.counts["step that the measured table has"] += 1
        elif (record := record_of(entry, prediction, source)) is None:
            table.counts["no such step"] += 1
        else:
            table.records.append(record)
            table.counts[f"taken, {entry.quality}"] += 1
