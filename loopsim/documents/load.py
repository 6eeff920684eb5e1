"""Files to documents. Each function raises `InputError` with all problems of its file.

To read several files and tell all their problems together, put each call inside `problems.collecting()`.
"""

from __future__ import annotations

from pathlib import Path

from loopsim.documents.catalogue import Catalogue
from loopsim.documents.diagram import diagram_from
from loopsim.documents.document import read_tree
from loopsim.documents.scenario import scenario_from
from loopsim.documents.shapes import KINDS
from loopsim.documents.types import Block, Diagram, Document, Scenario
from loopsim.errors import Problems, Where


def read_block(path: Path, catalogue: Catalogue | None = None) -> Block:
    """A block file, `like` carried out, checked. `catalogue`: where `like` looks; by default around the file."""
    return (catalogue or catalogue_around(path)).read(path)


def read_diagram(path: Path, asked_at: Where | None = None) -> Diagram:
    """A plant or strategy file; `asked_at` is the place in another file that names it."""
    problems = Problems()
    tree = read_tree(path, ("plant", "strategy"), problems, asked_at)
    made = diagram_from(tree, problems)
    problems.raise_if_any()
    return made


def read_scenario(path: Path) -> Scenario:
    """A scenario file; the files that it names must be there, and are not read."""
    problems = Problems()
    made = scenario_from(read_tree(path, ("scenario",), problems), problems)
    problems.raise_if_any()
    return made


def read_document(path: Path) -> Document:
    """A file of any kind; its first key says which."""
    kind = next(iter(read_tree(path, tuple(KINDS), Problems()).entries))
    if kind == "block":
        return read_block(path)
    return read_scenario(path) if kind == "scenario" else read_diagram(path)


def catalogue_around(path: Path) -> Catalogue:
    """The library as the plant sees it that a block file belongs to: from the folder that holds its `blocks/`."""
    near = (*path.parents[:3], *path.resolve().parents[:3])
    return Catalogue(next((folder.parent for folder in near if folder.name == "blocks"), path.parent))
