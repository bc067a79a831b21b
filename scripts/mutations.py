"""Damage done to structures and files on purpose, for `scripts/fuzz`: every case follows from a seed and its number.

Structures are real SMILES, edited as text (so that most of them are no SMILES any more) or as molecules (so that they
still are, with atoms and bonds that no chemist would draw). Files are sound lists in every format, damaged as disks,
transfers, editors and people with bad intentions damage them.
"""

from __future__ import annotations

import gzip
import io
import random
from collections.abc import Callable, Sequence
from pathlib import Path

from rdkit import Chem, rdBase

TOKENS = (
    *"CNOSFBPIHncospb()[]=#-+:$123456789@/\\.%*",
    "Cl", "Br", "[NH3+]", "[O-]", "[nH]", "[n+]", "[N+](=O)[O-]", "N(C)C", "C(=O)O", "c1ccccc1", "P(=O)(O)O", "B(O)O",
    ".Cl", ".[Na+]", "[2H]", "[H]", "[15NH2]", "[Xx]", "[Fe+2]", "[C@@H]", "%10", "%99", "[N-]=[N+]=", "S(=O)(=O)",
    "[CH2:7]", "[U]", "[NH5+3]", "[999C]", "->", ">>", "|", " ", "\t", "\0", "é", "\u2212", "🙂",
)  # fmt: skip
ELEMENTS = (1, 5, 6, 7, 7, 7, 8, 9, 14, 15, 16, 17, 26, 34, 35, 53, 0)
BONDS = (Chem.BondType.SINGLE, Chem.BondType.DOUBLE, Chem.BondType.TRIPLE, Chem.BondType.AROMATIC,
         Chem.BondType.DATIVE, Chem.BondType.ZERO)  # fmt: skip
LONGEST = 2_000  # letters of a damaged structure, those made long on purpose apart
HOSTILE_NAMES = (
    "<script>alert(1)</script>", "</script><img src=x onerror=alert(1)>", '"quoted", and a comma', "it's",
    "=cmd|' /C calc'!A0", "+1+1", "@SUM(A1)", "-2", "tab\there", "NUL\0", "bell\a\x1b[31mred", "", " ",
    "\u202eright to left", "\ufeffmark", "e\u0301\u0301", "🙂" * 40, "a" * 1_000_000, "$$$$", "> <field>", "M  END",
    "%s%n{0}{x}", "../../etc/passwd", "--output=x", "NaN", "1e999", "\u2028line\u2029",
)  # fmt: skip
FORMATS = ("smi", "csv", "tsv", "sdf", "parquet")
ENCODINGS = ("utf-8", "latin-1", "utf-16", "utf-16-le", "utf-32", "cp1252", "utf-8-sig", "cp037")


def damaged_structure(rng: random.Random, real: Sequence[str]) -> str:
    """A structure made from real ones by a few random edits."""
    text = rng.choice(real)
    kind = rng.random()
    if kind < 0.30:
        return _text_edits(rng, text, real)[:LONGEST]
    if kind < 0.90:
        edited = _molecule_edits(rng, text)
        return edited if rng.random() < 0.9 else _text_edits(rng, edited, real)[:LONGEST]
    if kind < 0.97:
        return ".".join(rng.choice(real) for _ in range(rng.randint(2, 5)))
    return _long(rng, text)


def _text_edits(rng: random.Random, text: str, real: Sequence[str]) -> str:
    for _ in range(rng.randint(1, 4)):
        place = rng.randrange(len(text) + 1)
        kind = rng.random()
        if kind < 0.4:
            text = text[:place] + rng.choice(TOKENS) + text[place:]
        elif kind < 0.6:
            text = text[:place] + text[place + 1 :]
        elif kind < 0.8:
            other = rng.choice(real)
            text = text[:place] + other[rng.randrange(len(other)) :]
        elif kind < 0.9:
            end = min(len(text), place + rng.randint(1, 8))
            text = text[:place] + text[place:end] * rng.randint(2, 4) + text[end:]
        else:
            text = text[:place].swapcase() + text[place:]
    return text


def _molecule_edits(rng: random.Random, text: str) -> str:
    """Edits of atoms, bonds, rings, charges and isotopes, mostly tried again where RDKit could not read the result."""
    with rdBase.BlockLogs():
        mol = Chem.MolFromSmiles(text)
        if mol is None or not mol.GetNumAtoms():
            return text
        edited = Chem.RWMol(mol)
        for _ in range(rng.randint(1, 6)):
            before = Chem.RWMol(edited)
            _one_edit(rng, edited)
            if rng.random() < 0.9 and Chem.SanitizeMol(Chem.RWMol(edited), catchErrors=True):
                edited = before
        try:
            if rng.random() < 0.2:
                edited = Chem.RWMol(Chem.AddHs(edited, onlyOnAtoms=[rng.randrange(edited.GetNumAtoms())]))
            return str(
                Chem.MolToSmiles(edited, canonical=False, doRandom=False, allBondsExplicit=rng.random() < 0.1)
            )
        except Exception:  # whatever RDKit will not write is no case
            return text


def _one_edit(rng: random.Random, mol: Chem.RWMol) -> None:
    size = mol.GetNumAtoms()
    one, other = rng.randrange(size), rng.randrange(size)
    atom = mol.GetAtomWithIdx(one)
    kind = rng.randrange(8)
    if kind == 0:
        atom.SetAtomicNum(rng.choice(ELEMENTS))
    elif kind == 1:
        atom.SetFormalCharge(rng.choice((-2, -1, 0, 1, 1, 2)))
    elif kind == 2:
        atom.SetIsotope(rng.choice((0, 2, 3, 13, 15, 18, 999)))
    elif kind == 3:
        added = mol.AddAtom(Chem.Atom(rng.choice(ELEMENTS)))
        mol.AddBond(one, added, rng.choice(BONDS[:3]))
    elif kind == 4 and one != other and mol.GetBondBetweenAtoms(one, other) is None:
        mol.AddBond(one, other, rng.choice(BONDS))
    elif kind == 5 and mol.GetNumBonds():
        mol.GetBondWithIdx(rng.randrange(mol.GetNumBonds())).SetBondType(rng.choice(BONDS))
    elif kind == 6 and size > 2:
        mol.RemoveAtom(one)
    else:
        atom.SetNoImplicit(rng.random() < 0.5)
        atom.SetNumExplicitHs(rng.randint(0, 4))
        atom.SetNumRadicalElectrons(rng.choice((0, 0, 1, 2)))


def _long(rng: random.Random, text: str) -> str:
    """Giant rings, long chains, deep branches, many sites, many components."""
    size = int(10 ** rng.uniform(1.0, 2.8))
    return rng.choice(
        (
            lambda: "C1" + "C" * size + "N1",
            lambda: "N" + "C" * size + "N",
            lambda: "C" * size + text,
            lambda: "CCN" * (size // 3 + 1),
            lambda: "NC(C(=O)" * (size // 8 + 1) + "O" + ")" * (size // 8 + 1),
            lambda: "C(" * size + "N" + ")" * size,
            lambda: ".".join([text] * (size // 20 + 1)),
            lambda: "c1cc2nc(" + "C=C" * (size // 4) + "N)ccc2cc1",
            lambda: "[" * size + text,
            lambda: "[" + "1" * size + "CH3]N",
            lambda: "C" + "=N" * size,
            lambda: "O=C(O)c1nc(N)ccc1" + "c1ccncc1" * min(size // 10, 30),
        )
    )()


def sound_file(rng: random.Random, form: str, real: Sequence[str]) -> bytes:
    """A sound list in one of the formats, with names from which a careless program suffers."""
    structures = [rng.choice(real) for _ in range(rng.randint(1, 6))]
    names = [rng.choice(HOSTILE_NAMES) if rng.random() < 0.5 else f"row {n}" for n in range(len(structures))]
    if form == "sdf":
        return "".join(
            _record(rng, smiles, name) for smiles, name in zip(structures, names, strict=True)
        ).encode()
    if form == "parquet":
        import pyarrow
        import pyarrow.parquet

        held = io.BytesIO()
        columns = {
            "smiles": pyarrow.array(structures),
            rng.choice(("name", "pkah_1", "status")): pyarrow.array(names),
        }
        if rng.random() < 0.3:
            columns["number"] = pyarrow.array([rng.choice((None, float("nan"), 1e308)) for _ in structures])
        pyarrow.parquet.write_table(pyarrow.table(columns), held)
        return held.getvalue()
    if form == "smi":
        return "".join(f"{a} {b}\n" for a, b in zip(structures, names, strict=True)).encode()
    mark = "," if form == "csv" else "\t"
    heading = rng.choice((["smiles", "name"], ["SMILES", "status", "pkah_1"], ["id", "smiles", "id"],
                          ["smiles", "smiles"], ["smiles"], ["name", "structure"]))  # fmt: skip
    lines = [heading]
    for smiles, name in zip(structures, names, strict=True):
        quoted = f'"{name.replace(chr(34), chr(34) * 2)}"' if rng.random() < 0.7 else name
        lines.append([smiles if title.lower() == "smiles" else quoted for title in heading])
    return "".join(mark.join(line) + rng.choice(("\n", "\n", "\r\n", "\r")) for line in lines).encode()


def _record(rng: random.Random, smiles: str, name: str) -> str:
    with rdBase.BlockLogs():
        mol = Chem.MolFromSmiles(smiles) or Chem.MolFromSmiles("CCN")
    block = Chem.MolToMolBlock(mol, forceV3000=rng.random() < 0.3)
    fields = (
        f"> <{rng.choice(('note', 'pkah_1', 'name', '>', ''))}>\n{name}\n\n" if rng.random() < 0.6 else ""
    )
    return f"{name}\n{block.partition(chr(10))[2]}{fields}$$$$\n"


def damaged_bytes(rng: random.Random, data: bytes) -> bytes:
    """What disks, transfers and editors do to a file; sometimes nothing."""
    for _ in range(rng.choice((0, 1, 1, 1, 2, 3))):
        data = rng.choice(_DAMAGES)(rng, data)
    return data


def _flipped(rng: random.Random, data: bytes) -> bytes:
    held = bytearray(data)
    for _ in range(min(len(held), rng.randint(1, 20))):
        held[rng.randrange(len(held))] = rng.randrange(256)
    return bytes(held)


def _recoded(rng: random.Random, data: bytes) -> bytes:
    return data.decode("utf-8", "replace").encode(rng.choice(ENCODINGS), "replace")


def _spliced(rng: random.Random, data: bytes) -> bytes:
    one, other = sorted((rng.randrange(len(data) + 1), rng.randrange(len(data) + 1)))
    return rng.choice((data[:one] + data[other:], data[:other] + data[one:], data[other:] + data[:one]))


def _head_again(rng: random.Random, data: bytes) -> bytes:
    head = data.split(b"\n", 1)[0] + b"\n"
    return head * rng.randint(1, 3) + data


def _inserted(rng: random.Random, data: bytes) -> bytes:
    place = rng.randrange(len(data) + 1)
    piece = rng.choice((
        b"\0", b'"', b"\n\n\n", b"\r", b"$$$$\n", b"\xff\xfe", b"\xef\xbb\xbf", b"M  END\n", b"> <x>\n", b"\t\t,,,,",
        b"C" * 1_500_000, b"," * 200_000, b"\n" * 20_000, rng.randbytes(rng.randint(1, 4_000)),
    ))  # fmt: skip
    return data[:place] + piece + data[place:]


_DAMAGES: tuple[Callable[[random.Random, bytes], bytes], ...] = (
    _flipped,
    _flipped,
    lambda rng, data: data[: rng.randrange(len(data) + 1)],
    _recoded,
    _spliced,
    _head_again,
    _inserted,
    _inserted,
    lambda rng, data: rng.randbytes(rng.randint(0, 5_000)),
)


def damaged_file(rng: random.Random, real: Sequence[str], folder: Path) -> Path:
    """A damaged list in the folder, under an ending that it may or may not deserve."""
    form = rng.choice(FORMATS)
    content = rng.choice(FORMATS) if rng.random() < 0.05 else form
    data = damaged_bytes(rng, sound_file(rng, content, real))
    ending = f".{form}"
    if form != "parquet" and rng.random() < 0.3:
        packing = rng.choice((".gz", ".zst"))
        if rng.random() < 0.9:
            data = _packed(data, packing)
        if rng.random() < 0.5:
            data = damaged_bytes(rng, data)
        ending += packing
    path = folder / f"in{ending}"
    path.write_bytes(data)
    return path


def _packed(data: bytes, packing: str) -> bytes:
    if packing == ".gz":
        return gzip.compress(data, 1)
    import zstandard

    return zstandard.ZstdCompressor(level=1).compress(data)
