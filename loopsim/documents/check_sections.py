"""What a plant gives to a block and what it wires: repeats, settings, defaults, streams, outputs, inner blocks."""

from __future__ import annotations

from collections.abc import Iterator

from loopsim.documents.namespace import Names, column_of, formulas_in, moving, near, shown, texts_of
from loopsim.documents.types import Block, Formula, PairValue, Parameter, UnitText, Word
from loopsim.errors import Problems, Where
from loopsim.language.functions import CONSTANTS
from loopsim.language.tree import Call, Expression, Name, Number, Operation, walk
from loopsim.language.write import shortened, write

STILL = {"parameter", "setting"}  # what a default may depend on


def check_sections(block: Block, names: Names, problems: Problems) -> None:
    """Note what is missing or too many."""
    for check in (_repeat, _settings, _given, _ports, _inside):
        check(block, names, problems)


# ---------------------------------------------------------------- what a plant gives
def _repeat(block: Block, names: Names, problems: Problems) -> None:
    """What a repeat runs over."""
    if block.repeat is None:
        return
    parameters = [one.entry for one in names.of(names.over, "parameter")]
    counted = [one for one in parameters if isinstance(one, Parameter) and (one.names is not None or _counts(one))]
    if not counted:
        known = [one.key.name for one in block.parameters if one.names is not None or _counts(one)]
        hint = near(names.over, known, "counts and lists") if known else f"{names.over}: {{unit: count, at_least: 1}}"
        problems.add(f"the repeat runs over '{names.over}', which is no count and no list", block.repeat.where, hint)


def _counts(parameter: Parameter) -> bool:
    return isinstance(parameter.unit, UnitText) and parameter.unit.kind == "count"


def _settings(block: Block, names: Names, problems: Problems) -> None:
    """Choices are there, each once; a default by formula rests on what is given or wired."""
    for setting in block.settings.values():
        for choice in sorted({one for one in setting.choices if setting.choices.count(one) > 1}):
            problems.add(f"'{choice}' stands twice among the choices of '{setting.name}'", setting.where)
        if not setting.choices:
            problems.add(f"the setting '{setting.name}' has no choices", setting.where, "choices: [one, other]")
        if isinstance(setting.default, Formula):
            for node in _not_chosen(setting.default.tree, setting.choices):
                what = f"`{shortened(node)}` cannot stand in the default of a setting"
                hint = f"write where(wired(u), {setting.choices[0]}, …): choices, by given(p), wired(u) and not"
                problems.add(what, setting.default.where, hint)


def _not_chosen(tree: Expression, choices: tuple[str, ...]) -> Iterator[Expression]:
    """Parts of a setting's default that are no choices and no conditions on what is given."""
    if isinstance(tree, Call) and tree.function == "where":
        for condition in tree.arguments[:-1:2]:
            while isinstance(condition, Operation) and condition.operator == "not":
                condition = condition.arguments[0]
            if not (isinstance(condition, Call) and condition.function in ("given", "wired")):
                yield condition
        for branch in (*tree.arguments[1::2], tree.arguments[-1]):
            yield from _not_chosen(branch, choices)
    elif not isinstance(tree, Name | Number) or write(tree) not in choices:
        yield tree


def _given(block: Block, names: Names, problems: Problems) -> None:
    """`one_of`, `percent_of`, and defaults that are known before anything moves."""
    for group in block.one_of:
        for name in group:
            entries = [one.entry for one in names.of(name, "parameter")]
            if not entries:
                known = [one.key.name for one in block.parameters]
                problems.add(f"one_of: '{name}' is not a parameter", block.where, near(name, known, "parameters"))
            elif not all(isinstance(one, Parameter) and one.optional for one in entries):
                problems.add(f"one_of: '{name}' may be left out", entries[0].where, "write default: none")
    pairs = [one.key.name for one in block.parameters if one.pair]
    for one in block.inputs:
        if one.percent_of and one.percent_of not in pairs:
            hint = near(one.percent_of, pairs, "pairs")
            problems.add(f"percent_of: '{one.percent_of}' is not a pair", one.where, hint)
    for parameter in block.parameters:
        if parameter.pair and parameter.default is not None and not isinstance(parameter.default, PairValue):
            problems.add(
                f"the default of the pair '{parameter.key.name}' is one value", parameter.where, "write [low, high]"
            )
    for text in texts_of(block):
        if text.section == "parameter":
            for moved in moving(text.tree, names, STILL):
                hint = f"a {text.role} of a parameter depends on other parameters and settings only"
                problems.add(f"'{moved.name}' is not known yet where parameters are", text.at(moved.at), hint)


# ---------------------------------------------------------------- ports, inner blocks
def _ports(block: Block, names: Names, problems: Problems) -> None:
    """Streams carry ports; outputs show something."""
    ports = _ports_of(block)
    for stream in block.streams.values():
        if stream.name in ports:
            problems.add(f"'{stream.name}' is a stream and a port", stream.where, "rename one of them")
        for carried, port in stream.carries:
            entries = [one for one in names.of(port.name) if one.section in ("input", "output")]
            if not entries:
                hint = near(port.name, ports, "ports")
                problems.add(f"the stream '{stream.name}' carries '{port.name}', which is no port", stream.where, hint)
            elif all((one.key.index is None) != (port.index is None) for one in entries):
                problems.add(f"there is no port '{shown(port)}'", stream.where, f"there is {shown(entries[0].key)}")
            elif names.generic(carried) != names.generic(port):
                what = f"the stream '{stream.name}' carries '{shown(port)}' under '{shown(carried)}'"
                problems.add(what, stream.where, f"write the index [{names.letter}] at both, or at none")
    for output in block.outputs:
        shows = [one for one in names.of(output.key.name) if one.section != "output" and one.key == output.key]
        if output.value is None and not shows and not block.blocks:
            known = [name for name in names if names.sections(name) != {"output"}]
            hint = f"give it is:, or {near(output.key.name, known, 'names here')}"
            problems.add(f"the output '{output.key.name}' shows nothing of its name", output.where, hint)


def _ports_of(block: Block) -> list[str]:
    return [*(one.key.name for one in block.inputs), *(one.key.name for one in block.outputs)]


def _inside(block: Block, names: Names, problems: Problems) -> None:
    """A block made of blocks: it has no equations of its own; wires, ports and values lead somewhere."""
    if not block.blocks:
        for what, entries in (("wires", block.wires), ("ports", block.ports)):
            if entries:
                problems.add(f"the block has {what} but no blocks", block.where, "blocks: {TAG: {use: …}}")
        return
    for section in ("states", "balances", "memory", "scan", "continuous", "let", "solve"):
        if entries := getattr(block, section):
            what = f"a block made of blocks has no {section} of its own"
            problems.add(what, entries[0].where, "put them into a block of their own")
    outer = {*_ports_of(block), *block.ports}
    for wire in block.wires:
        for end in (wire.source, wire.target):
            if end.split(".")[0] not in block.blocks and end.split(".")[0] not in outer:
                problems.add(
                    f"'{end}': there is no block of that tag inside", wire.where, near(end, block.blocks, "tags")
                )
    for port, end in block.ports.items():
        if "." not in end or end.split(".")[0] not in block.blocks:
            problems.add(
                f"the port '{port}' leads to '{end}', which is not inside", block.where, near(end, block.blocks, "tags")
            )
    _values(block, names, problems)


def _values(block: Block, names: Names, problems: Problems) -> None:
    """What is handed to inner blocks are the outer block's parameters and settings."""
    known = [*(one.key.name for one in block.parameters), *block.settings]
    for use in block.blocks.values():
        for key, given in use.values.items():
            for name, where in _handed_on(key, given.value):
                if name not in CONSTANTS and not names.sections(name) & STILL:
                    what = f"'{name}' is not a parameter of this block"
                    problems.add(what, where, near(name, known, "parameters"))


def _handed_on(key: str, value: object) -> Iterator[tuple[str, Where]]:
    """Names of the outer block in a value; a lone word may also be a choice, unless it is the key's own name."""
    if isinstance(value, Word) and value.text == key:
        yield key, value.where
    for formula in formulas_in(value):
        for node in walk(formula.tree):
            if isinstance(node, Name):
                yield node.name.partition(".")[0], column_of(formula.where, node.at)
