"""Blocks by name: beside the plant first, then those that are shipped; each is read once."""

from __future__ import annotations

from pathlib import Path

from loopsim.documents.block import block_from
from loopsim.documents.check_block import check_block
from loopsim.documents.document import read_tree
from loopsim.documents.types import Block
from loopsim.errors import InputError, Problems, Where, fail, nearest


def shipped(kind: str) -> Path:
    """The folder of what is shipped: `blocks` or `scenarios`; inside the wheel, or beside the package in a checkout."""
    package = Path(__file__).resolve().parents[1]
    for folder in (package / "_data" / kind, package.parent / kind):
        if folder.is_dir():
            return folder
    raise FileNotFoundError(f"the folder of shipped {kind} is missing from the installation")


class Catalogue:
    """The blocks that a plant can use: those in `blocks/` beside it, then the shipped ones."""

    def __init__(self, beside: Path) -> None:
        """`beside` is the folder of the plant file."""
        self._folders = (beside / "blocks", shipped("blocks"))
        self._paths: dict[str, Path] | None = None
        self._known: dict[Path, Block | InputError] = {}
        self._reading: list[str] = []

    def names(self) -> tuple[str, ...]:
        """The names of all blocks, sorted."""
        return tuple(sorted(self._index()))

    def path(self, name: str, where: Where | None = None) -> Path:
        """The file of a block. Raises `InputError` with the nearest names."""
        paths = self._index()
        if name not in paths:
            raise fail(f"there is no block '{name}'", where, nearest(name, paths, "blocks"))
        return paths[name]

    def block(self, name: str, where: Where | None = None) -> Block:
        """A block by name, `like` carried out, checked; `where` is the place that asks for it. Raises `InputError`."""
        if name in self._reading:
            chain = " -> ".join([*self._reading[self._reading.index(name) :], name])
            raise fail(f"'like' goes in a circle: {chain}", where, "one of these blocks has to stand alone")
        return self.read(self.path(name, where))

    def read(self, path: Path) -> Block:
        """The block in a file; its name is the file's. Raises `InputError` with all that is wrong in it."""
        if path not in self._known:
            self._reading.append(path.stem)
            try:
                self._known[path] = self._read(path)
            except InputError as error:
                self._known[path] = error
            finally:
                self._reading.pop()
        known = self._known[path]
        if isinstance(known, InputError):
            raise known
        return known

    def _read(self, path: Path) -> Block:
        problems = Problems()
        tree = read_tree(path, ("block",), problems)
        block = block_from(tree, problems, self.block)
        if block.name and block.name != path.stem:
            what = f"the block '{block.name}' stands in the file '{path.name}'"
            problems.add(what, block.where, "give both one name")
        if not problems.found:
            check_block(block, problems)
        problems.raise_if_any()
        return block

    def _index(self) -> dict[str, Path]:
        """Name to file; what stands beside the plant hides a shipped block of its name."""
        if self._paths is None:
            self._paths = {}
            for folder in self._folders:
                for name, path in _files(folder).items():
                    self._paths.setdefault(name, path)
        return self._paths


def _files(folder: Path) -> dict[str, Path]:
    """The block files in a folder and those below it. Raises `InputError` when two have one name."""
    found: dict[str, Path] = {}
    problems = Problems()
    for path in sorted(folder.rglob("*.yaml")):
        other = found.setdefault(path.stem, path)
        if other is not path:
            problems.add(f"two files hold the block '{path.stem}': '{other}' and '{path}'", None, "rename one of them")
    problems.raise_if_any()
    return found
