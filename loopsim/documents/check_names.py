"""The names of a block: none means two things, those in formulas are there; functions stand where they may."""

from __future__ import annotations

from collections.abc import Iterator

from loopsim.documents.namespace import (
    KNOWN,
    Member,
    Names,
    Text,
    choices_in,
    entries_with_unit,
    inside,
    near,
    shown,
    texts_of,
)
from loopsim.documents.types import Block, ByChoice, Key, Output, Parameter
from loopsim.errors import Problems
from loopsim.language.functions import CONSTANTS, FUNCTIONS
from loopsim.language.names import check_name
from loopsim.language.tree import Call, Expression, Index, Name, Number, Operation, parts, walk
from loopsim.language.write import write

# sections that may share a name: what a scan assigns is remembered and has a continuous law; a fault may be a size
TOGETHER = ({"memory", "scan", "continuous"}, {"parameter", "fault"})
ANSWERS = ("takes", "up", "down")
ARTICLES = {"input": "an input", "output": "an output", "unknown": "an unknown", "scan": "an entry of scan"} | {
    "continuous": "an entry of continuous",
    "memory": "a memory",
    "let": "a let",
}


def check_names(block: Block, names: Names, problems: Problems) -> frozenset[Key]:
    """Note names that are reserved or stand for two things, unknown names, wrong indices, functions out of place.

    Returns the single elements (`T[0]`, `u[1]`) that some `T[i]`, `T[i-1]` reaches: they must be of its kind.
    """
    reached: set[Key] = set()
    for name in names:
        _check_meaning(name, names, problems)
    for member in names.members:
        _check_key(member.key, member, names, problems)
    for choice in _all_choices(block):
        _check_choice(choice, block, problems)
    for text in texts_of(block):
        _Reader(text, block, names, problems, reached).check()
    return frozenset(reached)


def _what(section: str) -> str:
    return ARTICLES.get(section, f"a {section}")


# ---------------------------------------------------------------- entries
def _check_meaning(name: str, names: Names, problems: Problems) -> None:
    """One name, one meaning."""
    members = [one for one in names.of(name) if not _shows(one)]
    reason = check_name(name)
    if reason is None and name.startswith("d") and "state" in names.sections(name[1:]):
        reason = f"'{name}' would be read as the change of the state '{name[1:]}'"
    if reason is not None:
        problems.add(reason, names.of(name)[0].where, "choose another name")
    if name == names.letter:
        problems.add(f"'{name}' is the index of the repeat", names.of(name)[0].where, "choose another name")
    for place, member in enumerate(members):
        for earlier in members[:place]:
            if _clash(earlier, member, names):
                what = f"'{name}' is {_what(earlier.section)} already; it cannot be {_what(member.section)} too"
                shows = member.section == "output"
                hint = "rename one of them" + (", or leave out `is:` to show what has that name" if shows else "")
                problems.add(what, member.where, hint)


def _shows(member: Member) -> bool:
    """An output that repeats a name to show it."""
    return isinstance(member.entry, Output) and member.entry.value is None


def _clash(one: Member, other: Member, names: Names) -> bool:
    """Whether two entries give one name two meanings; elements beyond the range may come from another section."""
    if one.section == other.section:
        return one.key == other.key
    if any({one.section, other.section} <= group for group in TOGETHER):
        return False
    indices = (one.key.index, other.key.index)
    if None in indices:
        return indices == (None, None) or "output" not in (one.section, other.section)
    if one.key == other.key:
        return True
    single = [key.index for key in (one.key, other.key) if not names.generic(key)]
    return len(single) == 1 and single[0] is not None and names.has(one.key.name, single[0]) and inside(single[0])


def _check_key(key: Key, member: Member, names: Names, problems: Problems) -> None:
    """The index of an entry's own name."""
    index = key.index
    if index is None:
        return
    own = f"'{shown(key)}'"
    if not names.letter:
        problems.add(f"{own} repeats, but the block repeats nothing", member.where, "add repeat: {i: n}")
    elif index.base == names.letter and index.offset:
        problems.add(f"{own} is not an entry", member.where, f"write {key.name}[{names.letter}], or single elements")
    elif index.base not in (None, names.letter, names.over) and index.base not in (names.listed or ()):
        known = [names.letter, names.over, *(names.listed or ())]
        problems.add(f"{own}: there is no index '{index.base}'", member.where, near(str(index.base), known, "indices"))


def _all_choices(block: Block) -> Iterator[ByChoice]:
    for entry in entries_with_unit(block):
        yield from choices_in(entry.unit)
        for field in ("default", "start", "value"):
            yield from choices_in(getattr(entry, field, None))
    for one in (*block.let, *block.scan, *block.continuous):
        yield from choices_in(getattr(one, "value", None))
    for one_input in block.inputs:
        if one_input.answers is not None:
            for answer in (one_input.answers.takes, one_input.answers.up, one_input.answers.down):
                yield from choices_in(answer)


def _check_choice(choice: ByChoice, block: Block, problems: Problems) -> None:
    """`by:` names a setting and has every one of its choices."""
    if choice.setting not in block.settings:
        hint = near(choice.setting, block.settings, "settings")
        problems.add(f"there is no setting '{choice.setting}'", choice.where, hint)
        return
    wanted = block.settings[choice.setting].choices
    for option in choice.options:
        if option not in wanted:
            what = f"'{option}' is not a choice of '{choice.setting}'"
            problems.add(what, choice.where, near(option, wanted, "choices"))
    missing = [f"'{one}'" for one in wanted if one not in choice.options]
    if missing:
        what = f"nothing is said for {' and '.join(missing)} of '{choice.setting}'"
        problems.add(what, choice.where, "every choice has its entry")


# ---------------------------------------------------------------- formulas
class _Reader:
    """Looks at every name and call of one formula."""

    def __init__(self, text: Text, block: Block, names: Names, problems: Problems, reached: set[Key]) -> None:
        self.text, self.block, self.names, self.problems, self.reached = text, block, names, problems, reached
        self.beside = set(_beside_settings(text.tree, block))

    def add(self, what: str, at: int, hint: str = "") -> None:
        self.problems.add(what, self.text.at(at), hint)

    def check(self) -> None:
        """All of it."""
        self.look(self.text.tree, self.names.generic(self.text.key), *self._range())

    def _range(self) -> tuple[int, int]:
        """The elements that the letter means, from 1 + the first to n + the second: single entries win at the ends."""
        name, first, last = self.text.key.name, 0, 0
        if self.text.section == "balance":
            keys = [one.key for one in self.block.balances]
        else:
            keys = [one.key for one in self.names.of(name, self.text.section)]
        while Key(name, Index(None, 1 + first)) in keys:
            first += 1
        while Key(name, Index(self.names.over, last)) in keys:
            last -= 1
        return first, last

    def look(self, node: Expression, running: bool, first: int, last: int) -> None:
        """One node and what is below it; `running`: the index letter stands for something."""
        if isinstance(node, Name):
            if id(node) not in self.beside:
                self._name(node, running, first, last)
            return
        if isinstance(node, Call):
            self._call(node)
            if node.function in KNOWN:
                return
            if node.function in ("sum", "min", "max") and len(node.arguments) == 1:
                self._over(node)
                running, first, last = True, 0, 0
        for part in parts(node):
            self.look(part, running, first, last)

    # ------------------------------------------------------------ calls
    def _call(self, node: Call) -> None:
        function, role = node.function, self.text.role
        if function in KNOWN:
            self._known(node)
        elif FUNCTIONS[function].kind == "primitive" and role in ("default", "bound", "between"):
            self.add(f"'{function}' cannot stand in a {role}", node.at, "give it a name under let, and use that")
        elif function == "was" and not self.block.scan:
            self.add("'was' looks back at the previous execution; this block has no scan", node.at)
        elif function == "was" and self.text.section in ("balance", "unknown", "output", "state"):
            self.add("'was' stands in scan only", node.at, "give it a name under scan, and use that")

    def _known(self, node: Call) -> None:
        argument = node.arguments[0]
        wanted = ("parameter", "input") if node.function == "given" else ("input",)
        told = " or ".join(_what(one) for one in wanted)
        if not isinstance(argument, Name) or argument.index is not None:
            self.add(f"'{node.function}' takes the name of {told}, without index", node.at)
        elif not self.names.sections(argument.name) & set(wanted):
            known = [one.key.name for one in self.names.members if one.section in wanted]
            what = f"'{argument.name}' is not {told}"
            self.add(what, argument.at, near(argument.name, known, " and ".join(f"{one}s" for one in wanted)))

    def _over(self, node: Call) -> None:
        """`sum`, `min`, `max` of one argument run over the repeat."""
        if not self.names.letter:
            hint = "give min and max two arguments or more" if node.function != "sum" else "add repeat: {i: n}"
            self.add(f"'{node.function}' of one argument runs over a repeat; there is none", node.at, hint)
            return
        inner = [one for one in walk(node.arguments[0]) if isinstance(one, Name) and one.index is not None]
        if not any(one.index is not None and one.index.base == self.names.letter for one in inner):
            hint = f"write {node.function}(x[{self.names.letter}])"
            self.add(f"nothing in `{write(node)}` runs over '{self.names.letter}'", node.at, hint)

    # ------------------------------------------------------------ names
    def _name(self, node: Name, running: bool, first: int, last: int) -> None:
        stem, _, dotted = node.name.partition(".")
        if stem in CONSTANTS and not dotted:
            return
        if dotted:
            self._dotted(node, stem, dotted)
        elif stem not in self.names:
            self._unknown(node)
        elif node.index is not None:
            self._index(node, node.index, running, first, last)
        elif all(one.key.index is not None for one in self.names.of(stem)):
            hint = f"write {stem}[{self.names.letter}], or one element, such as {stem}[1]"
            self.add(f"'{stem}' repeats", node.at, hint)
        else:
            self._usable(node)

    def _usable(self, node: Name) -> None:
        """Pairs, lists and curves are no numbers; a default is known before anything moves."""
        entry = self.names.of(node.name)[0].entry
        if isinstance(entry, Parameter) and entry.pair:
            self.add(f"'{node.name}' is a pair", node.at, f"write {node.name}.low or {node.name}.high")
        if isinstance(entry, Parameter) and entry.names is not None:
            self.add(f"'{node.name}' is a list of names", node.at, "it stands under repeat: only")

    def _dotted(self, node: Name, stem: str, dotted: str) -> None:
        entries = [one.entry for one in self.names.of(stem)]
        pair = any(isinstance(one, Parameter) and one.pair for one in entries)
        output = any(isinstance(one, Output) for one in entries)
        if dotted in ANSWERS and not output:
            known = [one.key.name for one in self.block.outputs]
            self.add(f"'{stem}' is not an output: nobody answers it", node.at, near(stem, known, "outputs"))
        elif dotted not in ANSWERS and not pair:
            known = [one.key.name for one in self.block.parameters if one.pair]
            self.add(f"'{stem}' is not a pair", node.at, near(stem, known, "pairs"))

    def _unknown(self, node: Name) -> None:
        name = node.name
        choices = [one.name for one in self.block.settings.values() if name in one.choices]
        if name in ("on", "off"):
            hint = "in a formula write the condition itself: not x for where(x, off, on)"
        elif choices:
            hint = f"a choice stands beside == or != with its setting: {choices[0]} == {name}"
        elif name in FUNCTIONS:
            hint = f"'{name}' is a function: write {name}(…)"
        else:
            hint = near(name, [*self.names, *CONSTANTS], "names here")
        self.add(f"there is no '{name}' in this block", node.at, hint)

    # ------------------------------------------------------------ indices
    def _index(self, node: Name, index: Index, running: bool, first: int, last: int) -> None:
        names = self.names
        if all(one.key.index is None for one in names.of(node.name)):
            self.add(f"'{node.name}' does not repeat", node.at, f"write {node.name}")
        elif index.base == names.letter and not running:
            hint = f"write one element, such as {node.name}[1], or a sum over all"
            self.add(f"'{index.base}' stands for nothing here", node.at, hint)
        elif index.base in (names.letter, names.over, None) and names.listed is not None:
            if index.base != names.letter or index.offset:
                self.add(
                    f"`{write(node)}`: a list of names has no order", node.at, f"write {node.name}[{names.letter}]"
                )
        elif index.base == names.letter:
            self._neighbours(node, index.offset, first, last)
        elif index.base in (None, names.over):
            self._element(node, index, "")
        elif index.base not in (names.listed or ()):
            known = [names.letter, names.over, *(names.listed or ())]
            self.add(f"there is no index '{index.base}'", node.at, near(str(index.base), known, "indices"))

    def _neighbours(self, node: Name, offset: int, first: int, last: int) -> None:
        """The elements beyond the ends that `[i-1]`, `[i+1]` reach are given one by one."""
        letter, over = self.names.letter, self.names.over
        for key in (one.key for one in self.names.of(node.name)):
            low = key.index is not None and key.index.base is None and key.index.offset >= 1 + first + offset
            high = key.index is not None and key.index.base == over and key.index.offset <= last + offset
            if low or high:
                self.reached.add(key)
        for below in range(1 + first + offset, 1):
            self._element(node, Index(None, below), f" where {letter} is {below - offset}")
        for above in range(1, last + offset + 1):
            at = above - offset
            self._element(node, Index(over, above), f" where {letter} is {over}{f'{at:+d}' if at else ''}")
        if not any(self.names.generic(one.key) for one in self.names.of(node.name)):
            self.add(f"there is no {node.name}[{letter}]", node.at, "only single elements of it are given")

    def _element(self, node: Name, index: Index, when: str) -> None:
        if not self.names.has(node.name, index):
            wanted = shown(Key(node.name, index))
            because = f"`{write(node)}` reads {wanted}{when}" if when else f"there is no {wanted}"
            self.add(because, node.at, f"give it under let: {wanted}: …")


def _beside_settings(tree: Expression, block: Block) -> Iterator[int]:
    """Nodes that stand beside a setting in `==` or `!=`: choices, looked at when kinds are."""
    for node in walk(tree):
        if isinstance(node, Operation) and node.operator in ("==", "!="):
            for one, other in (node.arguments, node.arguments[::-1]):
                inner = one.arguments[0] if isinstance(one, Call) and one.function == "was" else one
                if isinstance(inner, Name) and inner.name in block.settings and isinstance(other, Name | Number):
                    yield id(other)
