"""Formulas that lead back to themselves: among lets and outputs, in a scan, in the continuous law, among starts."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from itertools import islice, product

from loopsim.documents.block_kinds import pruned
from loopsim.documents.namespace import KNOWN, Names, choices_in, formulas_in, shown
from loopsim.documents.types import Balance, Block, ByChoice, Key, Let
from loopsim.errors import Problems, Where
from loopsim.language.tree import Call, Expression, Name, names_in, parts, walk

MOST_COMBINATIONS = 64
# what these take is read as it was, or follows from a state: no circle closes through it
LOOK_BACK = ("was", "delayed", "transported", *KNOWN)
Formulas = Mapping[Key, tuple[object, Where]]  # what a name is, and where that stands


def check_circles(block: Block, names: Names, problems: Problems) -> frozenset[str]:
    """Note every circle that some choice of settings closes; returns the names in circles."""
    told: set[str] = set()
    for formulas, hint in _contexts(block):
        if not any(True for _ in _circles(formulas, {}, names)):
            continue  # none even if all choices held at once
        for choices in _combinations(block, formulas):
            for circle in _circles(formulas, choices, names):
                if not told & {key.name for key in circle}:
                    told |= {key.name for key in circle}
                    chain = " -> ".join(shown(key) for key in (*circle, circle[0]))
                    problems.add(f"these depend on each other in a circle: {chain}", formulas[circle[0]][1], hint)
    return frozenset(told)


def _contexts(block: Block) -> Iterator[tuple[Formulas, str]]:
    """The formulas that hold together, and the cure for a circle among them."""
    always: dict[Key, tuple[object, Where]] = {one.key: (one.value, one.where) for one in block.let}
    always |= {one.key: (one.value, one.where) for one in block.outputs if one.value is not None}
    scan = {one.key: (one.value, one.where) for one in block.scan}
    laws = {one.key: (one.value, one.where) for one in block.continuous if isinstance(one, Let)}
    moved = {one.key for one in block.continuous if isinstance(one, Balance)}
    still = {key: one for key, one in scan.items() if key not in moved}
    starts = {one.key: (one.start, one.where) for one in (*block.states, *block.memory) if one.start is not None}
    yield always, "find one of them with solve:"
    yield always | scan, "was(x) is the value of the execution before"
    yield always | still | laws, "make one of them a balance"
    yield always | starts, "give one of them a start of its own"


def _combinations(block: Block, formulas: Formulas) -> Iterator[dict[str, str]]:
    """The choices of all settings that decide between formulas."""
    values = [value for value, _ in formulas.values()]
    named = {one.setting for value in values for one in choices_in(value)}
    named |= {name for value in values for formula in formulas_in(value) for name in names_in(formula.tree)}
    settings = sorted(named & set(block.settings))
    chosen = product(*(block.settings[name].choices for name in settings))
    for one in islice(chosen, MOST_COMBINATIONS):
        yield dict(zip(settings, one, strict=True))


def _circles(formulas: Formulas, choices: Mapping[str, str], names: Names) -> Iterator[tuple[Key, ...]]:
    """Circles in a set of formulas, found by walking along what each one reads."""
    reads = {key: sorted(_read(value, formulas, choices, names), key=shown) for key, (value, _) in formulas.items()}
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


def _read(value: object, formulas: Formulas, choices: Mapping[str, str], names: Names) -> set[Key]:
    while isinstance(value, ByChoice) and value.setting in choices:
        value = value.options.get(choices[value.setting])
    found = set()
    for formula in formulas_in(value):
        for name in _now(pruned(formula.tree, choices) if choices else formula.tree):
            key = _key(name, formulas, names)
            if key is not None:
                found.add(key)
    return found


def _now(tree: Expression) -> Iterator[Name]:
    """The names that a tree reads as they stand now, for all that a plant may give or wire."""
    if isinstance(tree, Name):
        yield tree
    elif isinstance(tree, Call) and tree.function == "where":
        for condition, branch in zip(tree.arguments[:-1:2], tree.arguments[1::2], strict=True):
            if not _depends_on_plant(condition):
                yield from (*_now(condition), *_now(branch))
        if not any(_depends_on_plant(condition) for condition in tree.arguments[:-1:2]):
            yield from _now(tree.arguments[-1])
    elif not (isinstance(tree, Call) and tree.function in LOOK_BACK):
        for part in parts(tree):
            yield from _now(part)


def _depends_on_plant(condition: Expression) -> bool:
    return any(isinstance(node, Call) and node.function in KNOWN for node in walk(condition))


def _key(name: Name, formulas: Formulas, names: Names) -> Key | None:
    """The formula that a name means; a neighbour such as `x[i-1]` is another element."""
    stem, _, dotted = name.name.partition(".")
    index = name.index
    if dotted or (index is not None and index.base == names.letter and index.offset):
        return None
    if Key(stem, index) in formulas:
        return Key(stem, index)
    return next((key for key in formulas if index is not None and key.name == stem and names.generic(key)), None)
