"""Formulas that lead back to themselves: among lets and outputs, inside a scan, in the continuous law."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from loopsim.documents.namespace import KNOWN, Names, formulas_in, shown
from loopsim.documents.types import Balance, Block, Key, Let, Output
from loopsim.errors import Problems, Where
from loopsim.language.tree import Call, Expression, Name, parts

# what these take is read as it was, or follows from a state: no circle closes through it
LOOK_BACK = ("was", "delayed", "transported", *KNOWN)
Formulas = Mapping[Key, Let | Output]


def check_circles(block: Block, names: Names, problems: Problems) -> frozenset[str]:
    """Note every circle; returns the names in circles."""
    always: dict[Key, Let | Output] = {one.key: one for one in block.let}
    always |= {one.key: one for one in block.outputs if one.value is not None}
    scan = {one.key: one for one in block.scan}
    laws = {one.key: one for one in block.continuous if isinstance(one, Let)}
    moved = {one.key for one in block.continuous if isinstance(one, Balance)}
    told: set[str] = set()
    for formulas, hint in (
        (always, "find one of them with solve:"),
        (always | scan, "was(x) is the value of the execution before"),
        (always | {key: one for key, one in scan.items() if key not in moved} | laws, "make one of them a balance"),
    ):
        for circle in _circles(formulas, names):
            if not told & {key.name for key in circle}:
                told |= {key.name for key in circle}
                chain = " -> ".join(shown(key) for key in (*circle, circle[0]))
                where: Where = formulas[circle[0]].where
                problems.add(f"these depend on each other in a circle: {chain}", where, hint)
    return frozenset(told)


def _circles(formulas: Formulas, names: Names) -> Iterator[tuple[Key, ...]]:
    """Circles in a set of formulas, found by walking along what each one reads."""
    reads = {key: sorted(_read(one, formulas, names), key=shown) for key, one in formulas.items()}
    done: set[Key] = set()
    for start in reads:
        path, rest = [start], [iter(reads[start])]
        while path:
            following = next(rest[-1], None)
            if following is None:
                done.add(path.pop())
                rest.pop()
            elif following in path:
                yield tuple(path[path.index(following) :])
            elif following not in done:
                path.append(following)
                rest.append(iter(reads[following]))


def _read(one: Let | Output, formulas: Formulas, names: Names) -> set[Key]:
    found = set()
    for formula in formulas_in(one.value):
        for name in _now(formula.tree):
            key = _key(name, formulas, names)
            if key is not None:
                found.add(key)
    return found


def _now(tree: Expression) -> Iterator[Name]:
    """The names that a tree reads as they stand now."""
    if isinstance(tree, Name):
        yield tree
    elif not (isinstance(tree, Call) and tree.function in LOOK_BACK):
        for part in parts(tree):
            yield from _now(part)


def _key(name: Name, formulas: Formulas, names: Names) -> Key | None:
    """The formula that a name means; a neighbour such as `x[i-1]` is another element."""
    stem, _, dotted = name.name.partition(".")
    index = name.index
    if dotted or (index is not None and index.base == names.letter and index.offset):
        return None
    if Key(stem, index) in formulas:
        return Key(stem, index)
    return next((key for key in formulas if index is not None and key.name == stem and names.generic(key)), None)
