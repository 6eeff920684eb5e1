"""Imports go down the layers only, and files and functions stay short."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "loopsim"
LAYERS = [
    *(
        "errors",
        "store",
        "language",
        "documents",
        "results",
        "model",
        "native",
        "simulation",
        "study",
        "api",
        "output",
        "cli",
    ),
]
FILES = sorted(PACKAGE.rglob("*.py"))


def layer(path: Path) -> str:
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


def imported(path: Path) -> set[str]:
    names: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.ImportFrom) and node.module and node.module.startswith("loopsim."):
            names.add(node.module.split(".")[1])
        if isinstance(node, ast.Import):
            names |= {alias.name.split(".")[1] for alias in node.names if alias.name.startswith("loopsim.")}
    return names


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_imports_go_down_only(path: Path) -> None:
    own = layer(path)
    if own == "__init__":
        return
    allowed = set(LAYERS[: LAYERS.index(own) + 1])
    assert imported(path) <= allowed


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_files_and_functions_are_short(path: Path) -> None:
    text = path.read_text()
    assert len(text.splitlines()) <= 400
    for node in ast.walk(ast.parse(text)):
        if isinstance(node, ast.FunctionDef):
            assert node.end_lineno is not None
            assert node.end_lineno - node.lineno < 60, node.name
