"""A file as a tree whose first key says its kind."""

from __future__ import annotations

from pathlib import Path

from loopsim.documents.nodes import Mapping, Scalar, compose
from loopsim.documents.shapes import KINDS
from loopsim.documents.source import read_source
from loopsim.errors import InputError, Problems, Where, fail, nearest

FORMATS = ("1",)


def read_tree(path: Path, kinds: tuple[str, ...], problems: Problems, asked_at: Where | None = None) -> Mapping:
    """The tree of a file of one of `kinds`; `asked_at` is where another file asks for it. Raises `InputError`."""
    tree = compose(read_source(path, asked_at), problems)
    kind = kind_of(tree, str(path))
    assert isinstance(tree, Mapping)
    if kind not in kinds:
        wanted = " or ".join(kinds)
        where = tree.entries[kind].key.where
        raise fail(f"this is a {kind} file; a {wanted} file is wanted", where, f"its first key is {wanted}:")
    _check_format(tree)
    return tree


def kind_of(tree: object, file: str) -> str:
    """The kind of file that the first key names. Raises `InputError`."""
    if not isinstance(tree, Mapping):
        where = tree.where if isinstance(tree, Scalar) else None
        raise fail(f"the file '{file}' holds no keys", where, "it starts with block:, plant:, strategy: or scenario:")
    first = next(iter(tree.entries), "")
    if first in KINDS:
        return first
    raise _unknown_kind(tree, first)


def _unknown_kind(tree: Mapping, first: str) -> InputError:
    where = tree.entries[first].key.where if first else tree.where
    later = [key for key in tree.entries if key in KINDS]
    if later:
        return fail(f"the first key is '{first}'", where, f"put {later[0]}: first; it says what the file is")
    return fail(f"'{first}' is not a kind of file", where, nearest(first, KINDS, "the first key is one of"))


def _check_format(tree: Mapping) -> None:
    node = tree.get("format")
    if node is None or (isinstance(node, Scalar) and node.text in FORMATS):
        return
    found = f"'{node.text}'" if isinstance(node, Scalar) else "this"
    raise fail(f"{found} is not a format known here", node.where, "this version reads format: 1")
