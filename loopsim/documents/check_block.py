"""A block's text checked for sense: names, dimensions of everything, as many balances as states, ports that exist."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from itertools import product

from loopsim.documents.namespace import Namespace
from loopsim.documents.types import (
    Balance,
    Block,
    ByChoice,
    Definition,
    Formula,
    Input,
    Key,
    Let,
    Output,
    PairValue,
    Quantity,
    UnitSpec,
    Unknown,
)
from loopsim.errors import Problems, Where, nearest
from loopsim.language.kinds import Curve, Kind, KindError, OnOff, Words, describe, kind_of, same
from loopsim.language.names import check_name
from loopsim.language.tree import Call, Expression, Name, walk

MOST_COMBINATIONS = 64


def check_block(block: Block, problems: Problems) -> None:
    """Note all that is wrong in a block."""
    _check_names(block, problems)
    _check_circles(block, problems)
    if block.blocks:
        _check_inside(block, problems)
        return
    for choices in _combinations(block):
        _Check(block, choices, problems).all()
    _check_ports(block, problems)


def _combinations(block: Block) -> Iterator[dict[str, str]]:
    """Each choice of the settings that units depend on."""
    specs = [one.unit for one in block.parameters] + [one.unit for one in block.inputs]
    specs += [one.unit for one in block.states + block.memory]
    specs += [one.unit for one in block.solve] + [one.unit for one in block.outputs]
    settings = sorted({name for spec in specs for name in _unit_settings(spec) if name in block.settings})
    options = [block.settings[name].choices for name in settings]
    for count, chosen in enumerate(product(*options)):
        if count >= MOST_COMBINATIONS:
            return
        yield dict(zip(settings, chosen, strict=True))


def _unit_settings(spec: UnitSpec) -> set[str]:
    if not isinstance(spec, ByChoice):
        return set()
    inner = [one for one in spec.options.values() if isinstance(one, ByChoice)]
    return {spec.setting}.union(*(_unit_settings(one) for one in inner))


class _Check:
    """The checks of one block under one choice of the settings that its units depend on."""

    def __init__(self, block: Block, choices: dict[str, str], problems: Problems) -> None:
        self.block, self.problems = block, problems
        self.space = Namespace(block, choices)

    def all(self) -> None:
        """Every formula, against the unit of what it defines where there is one."""
        block = self.block
        for parameter in block.parameters:
            default = parameter.default
            if not parameter.table and isinstance(default, Formula | Quantity | ByChoice | PairValue):
                self.fits(parameter.key.name, default, "its default")
            self._bounds(parameter.key.name, parameter.bounds)
        for held in (*block.states, *block.memory):
            if held.start is not None:
                self.fits(held.key.name, held.start, "its start")
            self._bounds(held.key.name, held.bounds)
        for one in block.inputs:
            self._input(one)
        for entry in (*block.let, *block.scan, *block.continuous, *block.balances):
            self._entry(entry)
        for looked_for in block.solve:
            self._unknown(looked_for)
        for output in block.outputs:
            self._output(output)

    def _unknown(self, looked_for: Unknown) -> None:
        self._equal(looked_for.equation)
        for value, what in ((looked_for.start, "its start"), (looked_for.between, "`between`")):
            if value is not None:
                self.fits(looked_for.key.name, value, what)

    def _output(self, output: Output) -> None:
        if output.value is not None:
            self.fits(output.key.name, output.value, "its formula")
        elif output.key.name not in self._shown():
            hint = nearest(output.key.name, self._shown())
            self.problems.add(f"the output '{output.key.name}' shows nothing: give it `is:`", output.where, hint)
        self._bounds(output.key.name, output.bounds)

    def _shown(self) -> set[str]:
        """What an output without a formula can show."""
        block = self.block
        found = {one.key.name for one in block.states + block.memory} | {one.key.name for one in block.solve}
        found |= {one.key.name for one in block.let + block.scan}
        return found | {one.key.name for one in block.inputs} | {one.key.name for one in block.parameters}

    def _input(self, one: Input) -> None:
        if one.default is not None:
            self.fits(one.key.name, one.default, "its default")
        if one.answers is None:
            return
        if one.answers.takes is not None:
            self.fits(one.key.name, one.answers.takes, "what it takes")
        for value in (one.answers.up, one.answers.down):
            if value is not None:
                self._condition(value)

    def _entry(self, entry: Let | Balance) -> None:
        if isinstance(entry, Balance):
            self._equal(entry)
        elif entry.key.name in self.space.units:
            self.fits(entry.key.name, entry.value, "its formula")
        else:
            self._guarded(entry.where, lambda: self.space.of(entry.value), entry.value)

    def fits(self, name: str, value: Definition | PairValue, what: str) -> None:
        """A definition against the unit of the entry that it belongs to."""
        where = value.where
        wanted = self._guarded(where, lambda: self.space.of_entry(name))
        found = self._guarded(where, lambda: self.space.of(value), value)
        if wanted is None or found is None or same(wanted, found) or isinstance(wanted, Curve):
            return
        if isinstance(wanted, OnOff) and isinstance(found, OnOff):
            return
        if isinstance(found, Words) or wanted == found:
            return
        self.problems.add(
            f"'{name}' is {_in(wanted)} but {what} is {_in(found)}", where, "a factor is missing or too many"
        )

    def _bounds(self, name: str, bounds: object) -> None:
        for relation in ("above", "at_least", "below", "at_most"):
            limit = getattr(bounds, relation)
            if limit is not None:
                self.fits(name, limit, f"`{relation}`")

    def _condition(self, value: Formula | ByChoice) -> None:
        found = self._guarded(value.where, lambda: self.space.of(value), value)
        if found is not None and not isinstance(found, OnOff):
            self.problems.add(f"an answer is {_in(found)}; on or off is wanted", value.where, "write a comparison")

    def _equal(self, balance: Balance) -> None:
        """Both sides of a balance."""
        sides = [self._side(balance, tree) for tree in (balance.left, balance.right)]
        if sides[0] is None or sides[1] is None or same(sides[0], sides[1]):
            return
        left, _, right = balance.text.partition("=")
        self.problems.add(
            f"`{left.strip()}` is {_in(sides[0])} but `{right.strip()}` is {_in(sides[1])}",
            balance.where,
            "both sides of a balance have one unit; a factor is missing or too many",
        )

    def _side(self, balance: Balance, tree: Expression) -> Kind | None:
        return self._guarded(balance.where, lambda: kind_of(tree, self.space.kind))

    def _guarded(self, where: Where, made: Callable[[], Kind], value: object = None) -> Kind | None:
        """A kind, or None after its problem has been noted."""
        try:
            return made()
        except KindError as error:
            place = getattr(value, "where", where)
            self.problems.add(
                error.what,
                place.shifted(error.at) if isinstance(value, Formula) or value is None else place,
                error.hint,
            )
            return None


def _in(kind: Kind) -> str:
    return describe(kind) if isinstance(kind, OnOff) else f"in {describe(kind)}"


# ---------------------------------------------------------------- names
def _check_names(block: Block, problems: Problems) -> None:
    """One namespace: every name allowed, none used for two things."""
    owners: dict[str, str] = {}
    states = {one.key.name for one in block.states}
    groups: list[tuple[str, list[tuple[str, Where]]]] = [
        ("setting", [(name, one.where) for name, one in block.settings.items()]),
        ("parameter", [(one.key.name, one.where) for one in block.parameters]),
        ("input", [(one.key.name, one.where) for one in block.inputs]),
        ("state", [(one.key.name, one.where) for one in block.states]),
        ("memory", [(one.key.name, one.where) for one in block.memory]),
        ("let", [(one.key.name, one.where) for one in block.let if not _single(block, one.key)]),
        ("unknown", [(one.key.name, one.where) for one in block.solve]),
    ]
    for kind, entries in groups:
        for name, where in entries:
            reason = check_name(name)
            if reason is None and name[:1] == "d" and name[1:] in states:
                reason = f"'{name}' would be read as the change of '{name[1:]}'"
            if reason is not None:
                problems.add(reason, where, "choose another name")
            if owners.setdefault(name, kind) != kind:
                problems.add(
                    f"'{name}' is already a {owners[name]}; it cannot be a {kind} too", where, "rename one of them"
                )
    _check_counts(block, problems)


def _single(block: Block, key: Key) -> bool:
    """Whether a key means one element of a repeated name, such as `T[0]`, the inlet of the first cell."""
    letter = block.repeat.letter if block.repeat is not None else ""
    return key.index is not None and (key.index.base != letter or key.index.offset != 0)


def _check_counts(block: Block, problems: Problems) -> None:
    """As many balances as states; a scan has a parameter `scan`."""
    if not block.blocks and len(block.states) != len(block.balances):
        counts = f"{len(block.states)} states but {len(block.balances)} balances"
        problems.add(
            f"'{block.name}' has {counts}", block.where, "every state needs one balance that says how it changes"
        )
    parameters = {one.key.name for one in block.parameters}
    if block.scan and "scan" not in parameters:
        problems.add(
            f"'{block.name}' has a scan but no parameter 'scan'", block.where, "add `scan: {unit: s, default: 1 s}`"
        )
    for group in block.one_of:
        for name in group:
            if name not in parameters:
                problems.add(f"`one_of` names '{name}', which is no parameter", block.where, nearest(name, parameters))
    if block.repeat is not None and block.repeat.over not in parameters:
        problems.add(f"`repeat` runs over '{block.repeat.over}', which is no parameter", block.repeat.where)


def _check_circles(block: Block, problems: Problems) -> None:
    """Lets and outputs that go round in a circle."""
    lets = {one.key.name: one for one in block.let if one.key.index is None}
    reads = {name: _read_names(one.value) & set(lets) for name, one in lets.items()}
    for start in sorted(reads):
        path, seen = [start], {start}
        while True:
            following = sorted(name for name in reads[path[-1]] if name == start or name not in seen)
            if start in following:
                circle = " -> ".join([*path, start])
                problems.add(
                    f"these depend on each other in a circle: {circle}", lets[start].where, "use `solve:` for it"
                )
                return
            if not following:
                break
            path.append(following[0])
            seen.add(following[0])


def _read_names(value: Definition) -> set[str]:
    if isinstance(value, ByChoice):
        options = [one for one in value.options.values() if isinstance(one, Formula | ByChoice)]
        return set[str]().union(*(_read_names(one) for one in options))
    if not isinstance(value, Formula):
        return set()
    hidden = {id(part) for node in walk(value.tree) if isinstance(node, Call) and node.function in ("was", "delayed")
              for part in walk(node.arguments[0])}  # fmt: skip
    return {node.name for node in walk(value.tree) if isinstance(node, Name) and id(node) not in hidden}


# ---------------------------------------------------------------- ports
def _check_ports(block: Block, problems: Problems) -> None:
    """Streams carry ports that exist; `percent_of` names a range."""
    ports = {one.key.name for one in block.inputs} | {one.key.name for one in block.outputs}
    for stream in block.streams.values():
        for _, port in stream.carries:
            if port.name not in ports:
                problems.add(f"the stream '{stream.name}' carries '{port.name}', which is no port", stream.where,
                             nearest(port.name, ports, "ports"))  # fmt: skip
    pairs = {one.key.name for one in block.parameters if one.pair}
    for one in block.inputs:
        if one.percent_of and one.percent_of not in pairs:
            problems.add(
                f"`percent_of` names '{one.percent_of}', which is no pair", one.where, nearest(one.percent_of, pairs)
            )


def _check_inside(block: Block, problems: Problems) -> None:
    """A block of blocks: wires and ports lead to blocks that are there."""
    for wire in block.wires:
        for end in (wire.source, wire.target):
            if "." in end and end.split(".")[0] not in block.blocks:
                problems.add(f"there is no block '{end.split('.')[0]}' inside", wire.where, nearest(end, block.blocks))
    for port, inside in block.ports.items():
        if inside.split(".")[0] not in block.blocks:
            problems.add(
                f"the port '{port}' leads to '{inside}', which is not inside",
                block.where,
                nearest(inside, block.blocks),
            )
