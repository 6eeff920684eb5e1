"""`blocks`: the library, and one block as a page worth reading."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from loopsim.documents.library import Library
from loopsim.documents.types import (
    ByChoice,
    Check,
    Formula,
    Key,
    PairValue,
    Quantity,
    UnitSpec,
    Word,
)
from loopsim.language.write import write
from loopsim.results import Cell, Table


def block_table() -> Table:
    """Every block with its family and what it is."""
    library = Library(Path())
    rows = []
    for name in library.names():
        block = library.block(name)
        family = library.path(name).parent.name
        rows.append((family, name, block.about))
    cells = tuple(tuple(Cell(text) for text in row) for row in sorted(rows))
    return Table("Blocks", ("family", "block", "what it is"), cells, ("`loopsim blocks NAME` shows one of them.",))


def block_page(name: str) -> list[str]:
    """One block: what it is, its balance, its checks, parameters, ports, assumptions, sources."""
    block = Library(Path()).block(name)
    lines = [block.name, "=" * len(block.name), block.about, ""]
    lines += _section("Balances", [f"{one.key.name}: {one.text}" for one in block.balances])
    lines += _section("With", [f"{key_text(one.key)} = {text(one.value)}" for one in block.let])
    lines += _section("To be solved", [f"{one.key.name}: {one.equation.text}" for one in block.solve])
    lines += _section("At each scan", [f"{key_text(one.key)} = {text(one.value)}" for one in block.scan])
    lines += _section("Checked by", [check_text(one) for one in block.checks])
    lines += _section(
        "Settings", [_setting(one.name, one.choices, one.default, one.about) for one in block.settings.values()]
    )
    lines += _section("Parameters", [_entry(one.key, one.unit, one.about, one.default) for one in block.parameters])
    lines += _section("In", [_entry(one.key, one.unit, one.about, one.default) for one in block.inputs])
    lines += _section("Out", [_entry(one.key, one.unit, one.about, None) for one in block.outputs])
    lines += _section("Faults", [f"{one.name}: {one.about}" for one in block.faults.values()])
    streams = [f"{one.name}: {', '.join(key_text(key) for key, _ in one.carries)}" for one in block.streams.values()]
    lines += _section("Streams", streams)
    lines += _section("Assumes", list(block.assumes))
    return lines + _section("Sources", list(block.sources))


def block_json(name: str) -> dict[str, Any]:
    """The same as data."""
    block = Library(Path()).block(name)
    return {
        "block": block.name,
        "about": block.about,
        "balances": {key_text(one.key): one.text for one in block.balances},
        "settings": {one.name: list(one.choices) for one in block.settings.values()},
        "parameters": {key_text(one.key): _port(one.unit, one.about) for one in block.parameters},
        "inputs": {key_text(one.key): _port(one.unit, one.about) for one in block.inputs},
        "outputs": {key_text(one.key): _port(one.unit, one.about) for one in block.outputs},
        "faults": {one.name: one.about for one in block.faults.values()},
        "assumes": list(block.assumes),
        "sources": list(block.sources),
        "checks": [check_text(one) for one in block.checks],
    }


def _section(title: str, lines: list[str]) -> list[str]:
    return [title, *(f"  {line}" for line in lines), ""] if lines else []


def _port(unit: UnitSpec, about: str) -> dict[str, str]:
    return {"unit": unit_text(unit), "about": about}


def _entry(key: Key, unit: UnitSpec, about: str, default: object) -> str:
    parts = [f"{key_text(key)} [{unit_text(unit)}]", about, f"default {text(default)}" if default is not None else ""]
    return "  ".join(part for part in parts if part)


def _setting(name: str, choices: tuple[str, ...], default: object, about: str) -> str:
    parts = [f"{name}: {', '.join(choices)}", f"default {text(default)}" if default is not None else "", about]
    return "  ".join(part for part in parts if part)


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
        options = [
            f"{choice}: {unit_text(one)}"
            for choice, one in unit.options.items()
            if not isinstance(one, Formula | Quantity)
        ]
        return f"by {unit.setting} - {', '.join(options)}"
    return unit.text


def text(value: object) -> str:
    """A definition as a line."""
    if isinstance(value, Quantity | Word):
        return value.text
    if isinstance(value, Formula):
        return write(value.tree)
    if isinstance(value, PairValue):
        return f"[{text(value.low)}, {text(value.high)}]"
    if isinstance(value, ByChoice):
        return f"by {value.setting} - " + ", ".join(f"{choice}: {text(one)}" for choice, one in value.options.items())
    return str(getattr(value, "text", value))


def check_text(check: Check) -> str:
    """A check as a sentence."""
    given = ", ".join(f"{name} {text(one.value)}" for name, one in check.given.items())
    if check.gain is not None:
        asked = f"gain {check.gain[0]} to {check.gain[1]}"
    elif check.time_constant is not None:
        asked = f"time constant {check.time_constant[0]} to {check.time_constant[1]}"
    elif check.after is not None:
        asked = f"{check.after[1]} after {check.after[0].text}"
    else:
        asked = f"{check.at} at rest"
    return f"{asked} is {check.expected.text} within {check.within.text}, with {given} ({check.source})"
