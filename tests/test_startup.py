"""A command starts quickly because it imports little: counted in modules, never in time."""

from __future__ import annotations

from importlib.machinery import SourceFileLoader
from importlib.util import module_from_spec, spec_from_loader
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
_LOADER = SourceFileLoader("startup_script", str(ROOT / "scripts" / "startup"))
startup = module_from_spec(spec_from_loader(_LOADER.name, _LOADER))
_LOADER.exec_module(startup)

FOR_HELP = 290  # modules, Python's own included: 200 to 240 with Python 3.11
OWN_FOR_HELP = 40  # of the package: 20 to 29
FOR_A_COMPOUND = 500  # 350 to 380, of which numpy and RDKit have half


@pytest.mark.parametrize(
    "what", [name for name in startup.STARTS if name.endswith("basirank") or "--help" in name]
)
def test_the_package_and_all_help_load_little_and_nothing_heavy(what):
    modules = startup.loaded(startup.STARTS[what])
    assert startup.heavy(modules) == []
    assert len(modules) <= FOR_HELP
    own = [name for name in modules if name.split(".")[0] == "basirank"]
    assert 1 <= len(own) <= (1 if what == "import basirank" else OWN_FOR_HELP)


@pytest.mark.parametrize("what", [name for name in startup.STARTS if name.endswith("CCN")])
def test_a_compound_needs_rdkit_and_numpy_only(what):
    modules = startup.loaded(startup.STARTS[what])
    assert set(startup.heavy(modules)) == {"rdkit", "numpy"}
    assert len(modules) <= FOR_A_COMPOUND
    assert "basirank.report" not in modules and "basirank.tuning" not in modules
