"""Measured constants of amines and azines that other packages hold, as checks from outside.

Nothing of them is copied into the project: the values are read in place from the installed packages, under their own
licences, and names become structures by the identifiers of the package `chemicals` (MIT).

* `ionize` (GPL 2) and `electrolytes` (GPL 3): ions for electrophoresis at 25 C and ionic strength 0, both after the
  tables of T. Hirokawa et al. (J. Chromatogr. 271 (1983) D1 and later parts), the second by way of B. Gas and
  P. Bravenec, Electrophoresis 42 (2021) 1291.
* `IPhreeqcPy` (LGPL 3): its `minteq.v4.dat` holds protonation constants at 25 C and ionic strength 0, most from NIST
  Standard Reference Database 46 (Critically Selected Stability Constants of Metal Complexes); each row says which.
"""

from __future__ import annotations

import csv
import json
import re
from dataclasses import dataclass, field
from importlib.util import find_spec
from pathlib import Path

from rdkit import Chem, rdBase
from rdkit.Chem import Descriptors

from basirank.prediction import predict
from basirank.scoring import along_ladder
from basirank.structures import Refusal, read_parent

ROOT = Path(__file__).resolve().parent.parent
PACKAGES = ("chemicals", "ionize", "electrolytes", "IPhreeqcPy")
"""Distributions that the sets are read from."""
ASSUMED = {0.0, 11.0, 14.0, 100.0}
"""Round values that the tables of ions give strong acids, strong amines (forty alkylamines have 11) and cations
without a proton to lose: not measured."""
AGREEMENT = 0.3
"""The two packages hold one compilation; where they differ by more, one is a slip [pK units]."""
DOUBTFUL = {
    (
        "gamma-aminobutyric acid",
        4.02,
    ): "constant of the cation (4.03 in Perrin 1965, memory), filed as the anion's",
    ("gaba", 4.02): "the same",
    (
        "o-sulfanilic acid",
        7.488,
    ): "2.46 in Serjeant and Dempsey 1979 (memory), meta and para acid here 3.7, 3.2",
    ("taurine", 1.5): "a sulfonic acid is stronger; handbooks repeat 1.5 without a measurement (memory)",
    ("rhodamine 6g", 12.0): "a round value for a dye cation",
}
"""Values that chemistry gainsays, with the reason: kept out of the figures, but shown beside the prediction."""
BASIC = [
    Chem.MolFromSmarts(smarts)
    for smarts in (
        "[NX3+0;!$(N-C=[O,S,N]);!$(N-S(=O)=O);!$(N-[N,O]=,-*);!$(N#*)]",  # amines
        "[NH4+]",
        "[nX2]",  # azines and azoles
        "[NX3][CX3]=[NX2]",  # amidines and guanidines
    )
]


@dataclass(frozen=True, slots=True)
class Measured:
    """One constant of a compilation.

    `acid_charge` is the net charge of the protonated form of the step; `known` says whether the compound, by the first
    block of the InChIKey of its parent, stands in `data/measured.csv`; `doubt` why the value is none to be measured by.
    """

    name: str
    smiles: str
    acid_charge: int
    value: float
    known: bool
    doubt: str = ""


@dataclass(slots=True)
class OutsideSet:
    """Constants of one package, and what could not be used, by reason."""

    package: str
    compilation: str
    rows: list[Measured] = field(default_factory=list)
    left_out: dict[str, list[str]] = field(default_factory=dict)

    def leave_out(self, reason: str, name: str) -> None:
        self.left_out.setdefault(reason, []).append(name)


def missing() -> list[str]:
    """Packages that are not installed."""
    return [name for name in PACKAGES if find_spec(name) is None]


def folder(package: str) -> Path:
    """Where a package lies; it is not imported."""
    spec = find_spec(package)
    assert spec is not None and spec.submodule_search_locations
    return Path(spec.submodule_search_locations[0])


def compound_key(smiles: str) -> str:
    """First block of the InChIKey of the parent: the compound without stereo, isotopes and counter-ions."""
    return str(Chem.MolToInchiKey(Chem.MolFromSmiles(read_parent(smiles).smiles))[:14])


def trained_compounds() -> set[str]:
    """Keys of the compounds in the project's measured table."""
    with (ROOT / "data" / "measured.csv").open(encoding="utf-8", newline="") as handle:
        return {compound_key(smiles) for smiles in {row["smiles"] for row in csv.DictReader(handle)}}


def structure_of(name: str) -> str | None:
    """SMILES for a name, by the identifiers of `chemicals`; None where it knows none."""
    from chemicals.identifiers import search_chemical

    try:
        return str(search_chemical(name).smiles)
    except ValueError:
        return None


def use(
    found: OutsideSet, name: str, steps: list[tuple[int, float]], known: set[str], weight: float | None = None
) -> None:
    """Add the steps of one named compound, or say why not."""
    smiles = structure_of(name)
    if smiles is None:
        found.leave_out("no structure for the name", name)
        return
    with rdBase.BlockLogs():  # metals come as hydrides
        mol = Chem.MolFromSmiles(smiles)
    if mol is None:
        found.leave_out("structure can't be read", name)
        return
    if not any(mol.HasSubstructMatch(pattern) for pattern in BASIC):
        found.leave_out("no amine or azine nitrogen", name)
        return
    if weight is not None and abs(Descriptors.MolWt(mol) - weight) > 1.5:
        found.leave_out("structure of another molecular weight", name)
        return
    measured = [(charge, value) for charge, value in steps if value not in ASSUMED]
    if len(measured) < len(steps):
        found.leave_out("assumed value", name)
        if any(value in ASSUMED for charge, value in steps if charge == 1):
            return  # the second constant of a diamine whose first is assumed stands on it
    try:
        key = compound_key(smiles)
    except Refusal:
        found.leave_out("refused", name)
        return
    found.rows += [
        Measured(name, smiles, charge, value, key in known, DOUBTFUL.get((name, value), ""))
        for charge, value in measured
    ]


def of_ionize(known: set[str]) -> OutsideSet:
    """Constants in `ionize`: valences of the states and the constant that each has with the next one."""
    found = OutsideSet("ionize", "Hirokawa et al., ionic strength 0, 25 C")
    text = (folder("ionize") / "Database" / "ion_data.json").read_text(encoding="utf-8")
    for name, ion in sorted(json.loads(text).items()):
        if "valence" in ion:
            steps = [
                (charge if charge > 0 else charge + 1, round(float(value), 3))
                for charge, value in zip(ion["valence"], ion["reference_pKa"], strict=True)
            ]
            use(found, name, steps, known, ion["molecular_weight"])
    return found


def of_electrolytes(known: set[str]) -> OutsideSet:
    """Constants in `electrolytes`: of cations from the highest constant down to charge 1, of anions likewise."""
    found = OutsideSet("electrolytes", "Hirokawa et al. by way of Gas and Bravenec, ionic strength 0, 25 C")
    text = (folder("electrolytes") / "db1.json").read_text(encoding="utf-8")
    for ion in json.loads(text)["constituents"]:
        name = re.sub(r"(?<=\d)\.(?=\d)", ",", ion["name"].lower())
        steps = [(n + 1, float(value)) for n, value in enumerate(sorted(ion["pKaPos"], reverse=True))]
        steps += [(-n, float(value)) for n, value in enumerate(sorted(ion["pKaNeg"]))]
        use(found, name, steps, known)
    return found


_PROTONATION = re.compile(
    r"^(?P<protons>\d*)H\+ \+ (?P<ligand>[A-Z][A-Za-z_]+)(?:-(?P<charge>\d*))? = \S+\s+log_k\s+(?P<log_k>\S+)"
    r".*?log K source:\s+(?P<source>\S+)",
    re.MULTILINE | re.DOTALL,
)
_NUMBERS = {"One": "1", "Two": "2", "Three": "3", "Four": "4"}


def of_minteq(known: set[str]) -> OutsideSet:
    """Protonation constants in `minteq.v4.dat`: overall constants of n protons, turned into those of single steps."""
    found = OutsideSet("IPhreeqcPy", "NIST SRD 46 by way of minteq.v4.dat, ionic strength 0, 25 C")
    text = (folder("IPhreeqcPy") / "databases" / "minteq.v4.dat").read_text(encoding="latin-1")
    overall: dict[tuple[str, int], dict[int, float]] = {}
    for match in _PROTONATION.finditer(text):
        charge = int(match["charge"] or 1) if match["charge"] is not None else 0
        if match["source"].startswith("NIST"):
            overall.setdefault((match["ligand"], charge), {0: 0.0})[int(match["protons"] or 1)] = float(
                match["log_k"]
            )
    for (ligand, charge), beta in overall.items():
        number, _, rest = ligand.partition("_")
        name = f"{_NUMBERS[number]}-{rest}" if number in _NUMBERS else ligand.lower()
        if name.endswith("ate"):
            name = f"{name[:-3]}ic acid"
        steps = [(n - charge, round(beta[n] - beta[n - 1], 3)) for n in beta if n - 1 in beta]
        use(found, name, steps, known)
    return found


def outside_sets() -> list[OutsideSet]:
    """All sets. Steps on which the two packages of one compilation disagree are left out of both."""
    known = trained_compounds()
    ionize, electrolytes = of_ionize(known), of_electrolytes(known)
    tables = [{(row.smiles, row.acid_charge): row.value for row in s.rows} for s in (ionize, electrolytes)]
    differ = {
        step
        for step in tables[0].keys() & tables[1].keys()
        if abs(tables[0][step] - tables[1][step]) > AGREEMENT
    }
    for s in (ionize, electrolytes):
        for row in s.rows:
            if (row.smiles, row.acid_charge) in differ:
                s.leave_out("the two packages disagree", f"{row.name} {row.value:g}")
        s.rows = [row for row in s.rows if (row.smiles, row.acid_charge) not in differ]
    return [ionize, electrolytes, of_minteq(known)]


@dataclass(frozen=True, slots=True)
class Checked:
    """One measured constant beside its prediction."""

    row: Measured
    predicted: float
    half_width: float

    @property
    def error(self) -> float:
        return self.predicted - self.row.value


def check(found: OutsideSet) -> list[Checked]:
    """Predict the rows of a set; those without such a step are left out by that reason."""
    checked = []
    for row, prediction in zip(found.rows, predict([row.smiles for row in found.rows]), strict=True):
        step = None if prediction.equilibrium is None else along_ladder(prediction, row.acid_charge)
        if step is None:
            found.leave_out("no such step", f"{row.name} {row.value:g}")
        else:
            checked.append(Checked(row, step.value, step.half_width))
    return checked
