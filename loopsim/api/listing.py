"""`blocks`: the library, and one block as a page worth reading."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from loopsim.documents.catalogue import Catalogue
from loopsim.documents.types import (
    Balance,
    Block,
    Bounds,
    ByChoice,
    Check,
    Formula,
    Given,
    Held,
    Input,
    Key,
    Let,
    Output,
    PairValue,
    Parameter,
    Quantity,
    UnitSpec,
    Unknown,
    Word,
)
from loopsim.language.write import write
from loopsim.results import Cell, Table

RELATIONS = ("above", "at_least", "below", "at_most")
# how the sections are called on a page -> in JSON; the balance first, then what it is checked against
FORMULAS = {
    "Balances": "balances",
    "With": "let",
    "Solved": "solve",
    "At each execution": "scan",
    "Between executions": "continuous",
}
ENTRIES = {
    "Parameters": "parameters",
    "In": "inputs",
    "Out": "outputs",
    "States": "states",
    "Memories": "memory",
}


def block_table() -> Table:
    """Every block with its family and what it is."""
    rows = [(one["family"], one["block"], one["about"]) for one in blocks_json()]
    cells = tuple(tuple(Cell(text) for text in row) for row in rows)
    return Table("Blocks", ("family", "block", "what it is"), cells, ("`loopsim blocks NAME` shows one of them.",))


def blocks_json() -> list[dict[str, str]]:
    """The same as data, by family and name."""
    catalogue = Catalogue(Path())
    found = [
        {"family": catalogue.path(name).parent.name, "block": name, "about": catalogue.block(name).about}
        for name in catalogue.names()
    ]
    return sorted(found, key=lambda one: (one["family"], one["block"]))


def block_page(name: str) -> list[Table]:
    """One block: what it is, its balance, its checks, ports and parameters with units, assumptions, sources."""
    data = block_json(name)
    tables = [Table(name, (), (), (data["about"],))]
    tables += [
        _rows(title, [(key, "=", text) for key, text in data[where].items()]) for title, where in FORMULAS.items()
    ]
    tables.append(_rows("Checked against", [_check_row(one) for one in data["checks"]]))
    tables.append(_rows("Settings", [_setting_row(key, one) for key, one in data["settings"].items()]))
    for title, where in ENTRIES.items():
        tables.append(_rows(title, [_entry_row(key, one) for key, one in data[where].items()]))
    tables.append(_rows("Exactly one of", [(", ".join(names),) for names in data["one_of"]]))
    for title in ("Faults", "Streams"):
        tables.append(_rows(title, [(key, text) for key, text in data[title.lower()].items()]))
    tables.append(_rows("Made of", [(key, one["use"], _given(one["values"])) for key, one in data["blocks"].items()]))
    tables.append(_rows("Wires", [(one,) for one in data["wires"]]))
    for title in ("Assumes", "Sources"):
        tables.append(_rows(title, [(one,) for one in data[title.lower()]]))
    return tables


def _rows(title: str, rows: list[tuple[str, ...]]) -> Table:
    cells = tuple(tuple(Cell(text) for text in row) for row in rows)
    return Table(title, ("",) * len(rows[0]) if rows else (), cells)


def _check_row(check: dict[str, Any]) -> tuple[str, ...]:
    return (f"{check['what']} is {check['is']} within {check['within']}", _given(check["given"]), check["source"])


def _setting_row(name: str, setting: dict[str, Any]) -> tuple[str, ...]:
    return name, ", ".join(setting["choices"]), _default(setting), setting["about"]


def _entry_row(name: str, entry: dict[str, Any]) -> tuple[str, ...]:
    extra = [
        f"{key.replace('_', ' ')} {entry[key]}" for key in (*RELATIONS, "is", "start", "percent_of") if key in entry
    ]
    return name, f"[{entry['unit']}]", _default(entry), ", ".join(extra), entry["about"]


def _default(entry: dict[str, Any]) -> str:
    if "default" not in entry:
        return ""
    return "may be left out" if entry["default"] is None else f"default {entry['default']}"


def _given(values: dict[str, str]) -> str:
    return ", ".join(f"{name}: {value}" for name, value in values.items())


# ---------------------------------------------------------------- as data
def block_json(name: str) -> dict[str, Any]:
    """A block as data, what `like:` brings carried out; quantities and formulas as text."""
    catalogue = Catalogue(Path())
    block = catalogue.block(name)
    return {
        "block": block.name,
        "family": catalogue.path(name).parent.name,
        "about": block.about,
        "balances": {key_text(one.key): one.text for one in block.balances},
        "let": _formulas(block.let),
        "solve": {key_text(one.key): one.equation.text for one in block.solve},
        "scan": _formulas(block.scan),
        "continuous": _formulas(block.continuous),
        "checks": [_check(one) for one in block.checks],
        "settings": {
            one.name: {"choices": list(one.choices), **_default_of(one.default, False), "about": one.about}
            for one in block.settings.values()
        },
        "parameters": _entries(block.parameters),
        "one_of": [list(names) for names in block.one_of],
        **_ports(block, catalogue),
        "states": _entries(block.states),
        "memory": _entries(block.memory),
        "faults": {one.name: one.about for one in block.faults.values()},
        "streams": {
            one.name: ", ".join(f"{key_text(carried)}: {key_text(port)}" for carried, port in one.carries)
            for one in block.streams.values()
        },
        "blocks": {one.tag: {"use": one.block, "values": _values(one.values)} for one in block.blocks.values()},
        "wires": [f"{one.source} -> {one.target}" for one in block.wires],
        "assumes": list(block.assumes),
        "sources": list(block.sources),
    }


def _ports(block: Block, catalogue: Catalogue) -> dict[str, Any]:
    """Inputs and outputs; those of a block of blocks are ports inside."""
    if not block.ports:
        return {"inputs": _entries(block.inputs), "outputs": _entries(block.outputs)}
    found: dict[str, dict[str, Any]] = {"inputs": {}, "outputs": {}}
    for port, inside in block.ports.items():
        tag, _, name = inside.partition(".")
        entries = _ports(catalogue.block(block.blocks[tag].block), catalogue)
        for where, known in found.items():
            if name in entries[where]:
                known[port] = {**entries[where][name], "port": inside}
    return found


def _entries(entries: tuple[Parameter | Input | Output | Held | Unknown, ...]) -> dict[str, Any]:
    return {key_text(one.key): _entry(one) for one in entries}


def _entry(entry: Parameter | Input | Output | Held | Unknown) -> dict[str, Any]:
    found: dict[str, Any] = {"unit": unit_text(entry.unit), "about": entry.about}
    if isinstance(entry, Parameter):
        found["unit"] = _parameter_unit(entry)
    if isinstance(entry, Parameter | Input):
        found |= _default_of(entry.default, entry.optional)
    if isinstance(entry, Input) and entry.percent_of:
        found["percent_of"] = entry.percent_of
    if isinstance(entry, Output) and entry.value is not None:
        found["is"] = text(entry.value)
    if isinstance(entry, Held | Unknown) and entry.start is not None:
        found["start"] = text(entry.start)
    bounds = getattr(entry, "bounds", Bounds())
    return found | {name: text(getattr(bounds, name)) for name in RELATIONS if getattr(bounds, name) is not None}


def _parameter_unit(entry: Parameter) -> str:
    if entry.table is not None:
        return f"{entry.table[1].text} by {entry.table[0].text}"
    if entry.names is not None:
        return "names"
    return f"two of {unit_text(entry.unit)}" if entry.pair else unit_text(entry.unit)


def _default_of(default: object, optional: bool) -> dict[str, Any]:
    if default is None:
        return {"default": None} if optional else {}
    return {"default": text(default)}


def _formulas(entries: tuple[Let | Balance, ...]) -> dict[str, str]:
    return {key_text(one.key): one.text if isinstance(one, Balance) else text(one.value) for one in entries}


def _values(values: dict[str, Given]) -> dict[str, str]:
    return {name: text(one.value) for name, one in values.items()}


def _check(check: Check) -> dict[str, Any]:
    if check.gain is not None:
        what = f"gain from {check.gain[0]} to {check.gain[1]}"
    elif check.time_constant is not None:
        what = f"time constant from {check.time_constant[0]} to {check.time_constant[1]}"
    elif check.after is not None:
        what = f"{check.after[1]} after {check.after[0].text}"
    else:
        what = f"{check.at} at rest"
    asked = {"what": what, "is": check.expected.text, "within": check.within.text}
    return {**asked, "given": _values(check.given), "source": check.source}


# ---------------------------------------------------------------- as text
def key_text(key: Key) -> str:
    """A key as it is written."""
    if key.index is None:
        return key.name
    base, offset = key.index.base or "", key.index.offset
    shown = f"{base}{offset:+d}" if base and offset else base or str(offset)
    return f"{key.name}[{shown}]"


def unit_text(unit: UnitSpec) -> str:
    """A unit as it is written."""
    if isinstance(unit, ByChoice):
        options = {
            choice: unit_text(one) for choice, one in unit.options.items() if not isinstance(one, Formula | Quantity)
        }
        return _by_choice(unit.setting, options)
    return unit.text


def text(value: object) -> str:
    """A definition or a value as it is written."""
    if isinstance(value, Quantity | Word):
        return value.text
    if isinstance(value, Formula):
        return write(value.tree)
    if isinstance(value, PairValue):
        return f"[{text(value.low)}, {text(value.high)}]"
    if isinstance(value, ByChoice):
        return _by_choice(value.setting, {choice: text(one) for choice, one in value.options.items()})
    return str(getattr(value, "text", value))


def _by_choice(setting: str, options: dict[str, str]) -> str:
    return f"{{by: {setting}, " + ", ".join(f"{choice}: {one}" for choice, one in options.items()) + "}"
