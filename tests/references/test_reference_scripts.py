"""The stored reference tables are what their scripts compute, and the scripts hold nothing of the simulator."""

from __future__ import annotations

import ast
import importlib
from functools import cache

import pytest
from reference_tools import AGREEMENT, HERE, PLANTS, VALUES, Table, largest_difference, read

SHARED = {"reference_tools", "reference_controller", "reference_lag"}
FILES = [path for path in sorted(HERE.glob("*.py")) if not path.stem.startswith("test_")]
SCRIPTS = [path.stem for path in FILES if path.stem not in SHARED]
# machines differ in the last bits of exp and pow: far below the 1e-7 that a run is compared with
SAME = 1e-11


@cache
def computed(name: str) -> tuple[Table, ...]:
    """The tables of a script."""
    return tuple(importlib.import_module(name).tables())


@pytest.mark.parametrize("name", SCRIPTS)
def test_stored_values_are_what_the_script_computes(name: str) -> None:
    for table in computed(name):
        stored = read(table.name)
        assert (table.scenario, table.strategy, table.method) == (stored.scenario, stored.strategy, stored.method)
        assert largest_difference(stored, table) <= SAME


@pytest.mark.parametrize("name", SCRIPTS)
def test_two_independent_computations_agree(name: str) -> None:
    assert importlib.import_module(name).verify() <= AGREEMENT


def test_every_stored_table_has_a_script_and_a_scenario() -> None:
    stored = {path.stem for path in VALUES.glob("*.json")}
    assert stored == {table.name for name in SCRIPTS for table in computed(name)}
    assert all((PLANTS / read(name).scenario).is_file() for name in stored)


def test_a_reference_uses_nothing_of_the_simulator() -> None:
    for path in FILES:
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            names = [alias.name for alias in node.names] if isinstance(node, ast.Import) else []
            names += [node.module or ""] if isinstance(node, ast.ImportFrom) else []
            assert not any(name.split(".")[0] == "loopsim" for name in names), path.name
