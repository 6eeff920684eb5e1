"""Block files: every section read into its typed entries; `like` laid under it."""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeVar

from loopsim.documents.definitions import (
    balance,
    between,
    default_value,
    definition,
    formula_or_choice,
    is_equation,
    is_none,
    key,
    new_key,
    new_name,
    no_unit,
    setting_default,
    unit_spec,
)
from loopsim.documents.fields import Fields, address, items, mapping, name, scalar, sentences, tag
from loopsim.documents.likes import Own, laid_over, renamed
from loopsim.documents.nodes import Entry, Mapping, Node, Scalar, Sequence
from loopsim.documents.shapes import (
    ANSWERS,
    BLOCK,
    CHECK,
    FAULT,
    HELD,
    INPUT,
    OUTPUT,
    PARAMETER,
    SETTING,
    TABLE_UNITS,
    UNKNOWN,
    Shape,
)
from loopsim.documents.types import (
    Answers,
    Balance,
    Block,
    Bounds,
    Check,
    Fault,
    Held,
    Input,
    Key,
    Let,
    Output,
    Parameter,
    Quantity,
    Repeat,
    Setting,
    Stream,
    UnitSpec,
    Unknown,
)
from loopsim.documents.values import duration, formula_or_quantity, given, passed, quantity, unit
from loopsim.documents.wires import use, wire
from loopsim.errors import Problems, Where, fail
from loopsim.language.units import Unit

T = TypeVar("T")
_UNIT = "unit: its unit, such as m^3/h"
Finder = Callable[[str, Where], Block]


def block_from(tree: Mapping, problems: Problems, find: Finder) -> Block:
    """The block that a tree describes. What is wrong is noted in `problems`, and the block is then of no use.

    `find` gives another block by name, for `like`.
    """
    reader = _Reader(tree, problems)
    own = reader.block()
    fields = reader.fields
    if "like" not in fields:
        if "about" not in fields:
            problems.add("'about' is missing from the block", own.where, "about: what it is")
        return own
    base = fields.read("like", lambda node: find(name(node, "the name of a block"), node.where))
    if base is None:
        return own
    changed = fields.read("rename", lambda node: renamed(base, mapping(node, "'rename'")))
    return laid_over(changed or base, Own(own, frozenset(fields.node.entries), reader.taken_out), problems)


class _Reader:
    """Reads the sections of one block file; `taken_out` holds the entries that are `none`, by section."""

    def __init__(self, tree: Mapping, problems: Problems) -> None:
        self.problems = problems
        self.fields = Fields(tree, BLOCK, "a block", problems)
        self.taken_out: dict[str, dict[Key, Where]] = {}

    def block(self) -> Block:
        """All sections, without what `like` brings."""
        fields = self.fields
        return Block(
            name=fields.read("block", new_name) or "",
            about=fields.text("about"),
            where=fields.node.entries["block"].value.where if "block" in fields else fields.where,
            assumes=fields.read("assumes", sentences) or (),
            sources=fields.read("sources", sentences) or (),
            settings=self.by_name("settings", self.setting),
            parameters=self.entries("parameters", self.parameter, new_key),
            one_of=self.one_of(),
            repeat=fields.read("repeat", _repeat),
            inputs=self.entries("inputs", self.input, new_key),
            states=self.entries("states", self.held, new_key),
            balances=self.entries("balances", lambda owner, entry: balance(owner, entry.value), key),
            memory=self.entries("memory", self.held, new_key),
            scan=self.entries("scan", _let, new_key),
            continuous=self.entries("continuous", _let_or_balance, new_key),
            let=self.entries("let", _let, new_key),
            solve=self.entries("solve", self.unknown, new_key),
            faults=self.by_name("faults", self.fault),
            outputs=self.entries("outputs", self.output, new_key),
            streams=self.by_name("streams", self.stream),
            blocks=self.by_name("blocks", lambda owner, entry: use(owner, entry, passed, self.problems), tag),
            wires=fields.every("wires", wire),
            ports=self.by_name("ports", lambda _, entry: address(entry.value, "a port, TAG.port")),
            checks=fields.every("check", self.check),
        )

    # ------------------------------------------------------------ sections
    def entries(
        self, section: str, make: Callable[[Key, Entry], T | None], read_key: Callable[[Scalar], Key]
    ) -> tuple[T, ...]:
        """The entries of a section in their order, those that are wrong left out (then noted)."""
        node = self.fields.read(section, lambda node: mapping(node, f"'{section}'"))
        made = []
        for entry in node or ():
            if section == "parameters" and _is_one_of(entry):
                continue
            with self.problems.collecting():
                owner = read_key(entry.key)
                one = None if self.takes_out(section, owner, entry) else make(owner, entry)
                if one is not None:
                    made.append(one)
        return tuple(made)

    def by_name(
        self, section: str, make: Callable[[str, Entry], T | None], read_name: Callable[[Scalar], str] = new_name
    ) -> dict[str, T]:
        """The entries of a section by name."""

        def one(owner: Key, entry: Entry) -> tuple[str, T] | None:
            made = make(owner.name, entry)
            return None if made is None else (owner.name, made)

        return dict(self.entries(section, one, lambda found: Key(read_name(found))))

    def takes_out(self, section: str, owner: Key, entry: Entry) -> bool:
        """`name: none` takes out an entry that `like` brought."""
        if not is_none(entry.value):
            return False
        if "like" not in self.fields:
            hint = "none takes out an entry of the block named under like:"
            raise fail(f"'{entry.key.text}' is none, but this block is like no other", entry.value.where, hint)
        self.taken_out.setdefault(section, {})[owner] = entry.key.where
        return True

    def one_of(self) -> tuple[tuple[str, ...], ...]:
        """`one_of:` of the block, or in its parameters."""
        groups = self.fields.every("one_of", _group)
        parameters = self.fields.node.get("parameters")
        inside = parameters.entries.get("one_of") if isinstance(parameters, Mapping) else None
        if inside is not None and _is_one_of(inside):
            with self.problems.collecting():
                groups += tuple(_group(item) for item in items(inside.value, "groups"))
        return groups

    # ------------------------------------------------------------ entries
    def open(self, entry: Entry, shape: Shape, what: str) -> Fields:
        """The keys of an entry."""
        return Fields(entry.value, shape, f"{what} '{entry.key.text}'", self.problems, entry.key.where)

    def setting(self, owner: str, entry: Entry) -> Setting:
        fields = self.open(entry, SETTING, "the setting")
        choices = fields.every("choices", lambda node: name(node, "a choice"))
        default = fields.read("default", lambda node: setting_default(node, choices))
        return Setting(owner, choices, default, fields.text("about"), fields.where)

    def parameter(self, owner: Key, entry: Entry) -> Parameter:
        fields = self.open(entry, PARAMETER, "the parameter")
        names = fields.every("names", new_name) if "names" in fields else None
        columns = fields.read("table", self.columns)
        if "unit" not in fields and names is None and "table" not in fields:
            self.problems.add(f"'unit' is missing from the parameter '{owner.name}'", fields.where, _UNIT)
        optional = is_none(fields.node.get("default"))
        return Parameter(
            key=owner,
            unit=_unit_of(fields),
            where=fields.where,
            about=fields.text("about"),
            default=None if optional else fields.read("default", default_value),
            optional=optional,
            bounds=_bounds(fields),
            pair=fields.yes("pair"),
            table=columns,
            names=names,
        )

    def columns(self, node: Node) -> tuple[Unit, Unit] | None:
        fields = Fields(node, TABLE_UNITS, "'table'", self.problems)
        x, y = fields.read("x_unit", unit), fields.read("y_unit", unit)
        return (x, y) if x is not None and y is not None else None

    def input(self, owner: Key, entry: Entry) -> Input:
        fields = self.open(entry, INPUT, "the input")
        optional = is_none(fields.node.get("default"))
        return Input(
            key=owner,
            unit=_unit_of(fields),
            where=fields.where,
            about=fields.text("about"),
            default=None if optional else fields.read("default", definition),
            optional=optional,
            percent_of=fields.read("percent_of", name) or "",
            answers=fields.read("answers", self.answers),
        )

    def answers(self, node: Node) -> Answers:
        fields = Fields(node, ANSWERS, "'answers'", self.problems)
        takes, up, down = (fields.read(part, formula_or_choice) for part in ("takes", "up", "down"))
        return Answers(takes, up, down, node.where)

    def held(self, owner: Key, entry: Entry) -> Held:
        fields = self.open(entry, HELD, "the entry")
        start = fields.read("start", definition)
        return Held(owner, _unit_of(fields), fields.where, fields.text("about"), start, _bounds(fields))

    def unknown(self, owner: Key, entry: Entry) -> Unknown | None:
        fields = self.open(entry, UNKNOWN, "the unknown")
        equation = fields.read("equation", lambda node: balance(owner, node))
        beyond = fields.node.get("beyond")
        if beyond is not None and scalar(beyond, "stop").text != "stop":
            raise fail(f"'{scalar(beyond, 'stop').text}' is not known here", beyond.where, "write beyond: stop")
        if equation is None:
            return None
        return Unknown(
            key=owner,
            unit=_unit_of(fields),
            equation=equation,
            where=fields.where,
            about=fields.text("about"),
            start=fields.read("start", definition),
            between=fields.read("between", between),
            stops=beyond is not None,
        )

    def fault(self, owner: str, entry: Entry) -> Fault:
        fields = self.open(entry, FAULT, "the fault")
        return Fault(owner, fields.text("about"), fields.where)

    def output(self, owner: Key, entry: Entry) -> Output:
        fields = self.open(entry, OUTPUT, "the output")
        value = fields.read("is", definition)
        return Output(owner, _unit_of(fields), fields.where, fields.text("about"), value, _bounds(fields))

    def stream(self, owner: str, entry: Entry) -> Stream:
        node = mapping(entry.value, f"the stream '{owner}'", "write carried name: port, as in {q: q, T: T_in}")
        carries = tuple((key(one.key), key(scalar(one.value, "a port"))) for one in node)
        return Stream(owner, carries, entry.key.where)

    def check(self, node: Node) -> Check | None:
        fields = Fields(node, CHECK, "a check", self.problems)
        asked = [one for one in ("at", "gain", "time_constant", "after") if one in fields]
        if len(asked) != 1:
            raise fail("a check asks for one thing", fields.where, "write one of at:, gain:, time_constant:, after:")
        expected, within = fields.read("is", quantity), fields.read("within", quantity)
        values = fields.named("given", lambda entry: (address(entry.key, "a name"), given(entry.value)))
        at, gain = fields.read("at", address) or "", fields.read("gain", _from_to)
        time_constant, after = fields.read("time_constant", _from_to), fields.read("after", _after)
        if expected is None or within is None:
            return None
        source = fields.text("source")
        return Check(values, expected, within, source, fields.where, at, gain, time_constant, after)


def _is_one_of(entry: Entry) -> bool:
    return entry.key.text == "one_of" and isinstance(entry.value, Sequence)


def _group(node: Node) -> tuple[str, ...]:
    return tuple(name(item, "a parameter") for item in items(node, "parameters"))


def _unit_of(fields: Fields) -> UnitSpec:
    return fields.read("unit", unit_spec) or no_unit(fields.where)


def _bounds(fields: Fields) -> Bounds:
    return Bounds(*(fields.read(limit, formula_or_quantity) for limit in ("above", "at_least", "below", "at_most")))


def _let(owner: Key, entry: Entry) -> Let:
    return Let(owner, definition(entry.value), entry.key.where)


def _let_or_balance(owner: Key, entry: Entry) -> Let | Balance:
    return balance(owner, entry.value) if is_equation(entry.value) else _let(owner, entry)


def _repeat(node: Node) -> Repeat:
    entries = tuple(mapping(node, "'repeat'"))
    if len(entries) != 1:
        raise fail("'repeat' has one index letter", node.where, "write repeat: {i: n}")
    return Repeat(new_name(entries[0].key), new_name(entries[0].value), entries[0].key.where)


def _from_to(node: Node) -> tuple[str, str]:
    ends = tuple(address(item, "a name") for item in items(node, "two names"))
    if len(ends) != 2:
        raise fail(f"two names are wanted, {len(ends)} stand here", node.where, "write [from, to]")
    return ends[0], ends[1]


def _after(node: Node) -> tuple[Quantity, str]:
    parts = items(node, "a time and a signal")
    if len(parts) != 2:
        raise fail("a time and a signal are wanted", node.where, "write after: [30 s, T]")
    return duration(parts[0]), address(parts[1], "a name")
