"""Wires and streams joined: what drives each input."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

from loopsim.documents.types import Input, Output, Stream, Wire
from loopsim.errors import Problems, Where, nearest
from loopsim.model.elements import Elements
from loopsim.model.layout import Instance, Layout, split_address


@dataclass(frozen=True, slots=True)
class Port:
    """One element of an input or output: `flat` is `TAG.name` or `TAG.name.i`."""

    flat: str
    tag: str
    element: str
    entry: Input | Output
    index: str = ""

    @property
    def is_input(self) -> bool:
        """Whether it takes a value (an output gives one)."""
        return isinstance(self.entry, Input)


@dataclass(frozen=True, slots=True)
class Driver:
    """What drives an input: the flat name of a port or a boundary value. `stream`: joined by a stream wire."""

    source: str
    where: Where
    stream: bool = False


@dataclass(slots=True)
class Wiring:
    """All ports of a layout and the driver of each wired input."""

    ports: dict[str, Port] = field(default_factory=dict)
    drivers: dict[str, Driver] = field(default_factory=dict)


def ports_of(instance: Instance, elements: Elements) -> Iterator[Port]:
    """The ports of one instance, repeats opened, single elements' own entries winning.

    Of an input and the output that shows it, the input comes last.
    """
    groups: tuple[tuple[Input | Output, ...], ...] = (instance.block.outputs, instance.block.inputs)
    for entries in groups:
        found: dict[str, Port] = {}
        for entry in sorted(entries, key=lambda one: not elements.generic(one.key)):
            for element in elements.of(entry.key):
                index = element.rpartition(".")[2] if elements.generic(entry.key) else ""
                found[element] = Port(f"{instance.tag}.{element}", instance.tag, element, entry, index)
        yield from found.values()


def join(layout: Layout, elements: dict[str, Elements], problems: Problems) -> Wiring:
    """Join every wire; tell unknown ends, wrong ways round and two drivers of one input."""
    wiring = Wiring()
    for instance in layout.instances.values():
        for port in ports_of(instance, elements[instance.tag]):
            wiring.ports[port.flat] = port
    joiner = _Joiner(layout, elements, wiring, problems)
    for wire in sorted(layout.wires, key=lambda one: (one.source, one.target)):
        joiner.join(wire)
    return wiring


class _Joiner:
    """Joins wires one after the other; holds what every step needs."""

    def __init__(self, layout: Layout, elements: dict[str, Elements], wiring: Wiring, problems: Problems) -> None:
        self.layout, self.elements, self.wiring, self.problems = layout, elements, wiring, problems

    def join(self, wire: Wire) -> None:
        left, right = self._stream(wire.source), self._stream(wire.target)
        if left and right:
            self._join_streams(left, right, wire)
        elif left or right:
            lone, other = (wire.source, wire.target) if left else (wire.target, wire.source)
            self.problems.add(
                f"'{lone}' is a stream but '{other}' is not", wire.where, "join a stream to a stream, a port to a port"
            )
        else:
            self._join_ports(wire)

    def _stream(self, end: str) -> tuple[Instance, Stream] | None:
        tag, name = split_address(self.layout, end)
        instance = self.layout.instances.get(tag)
        if instance is None or name not in instance.block.streams:
            return None
        return instance, instance.block.streams[name]

    def _join_streams(self, left: tuple[Instance, Stream], right: tuple[Instance, Stream], wire: Wire) -> None:
        ours, theirs = self._carried(*left), self._carried(*right)
        common = [name for name in ours if name in theirs]
        if not common:
            self.problems.add(
                f"the streams '{wire.source}' and '{wire.target}' carry nothing in common",
                wire.where,
                f"the left carries {', '.join(ours)}; the right carries {', '.join(theirs)}",
            )
        for name in common:
            source, target = ours[name], theirs[name]
            if not target.is_input and source.is_input:
                source, target = target, source
            if not target.is_input:
                self.problems.add(
                    f"'{source.flat}' and '{target.flat}' both give '{name}' in this pipe",
                    wire.where,
                    "join the ports that are meant one by one instead of the whole stream",
                )
                continue
            self._drive(target, source.flat, wire.where, stream=True)

    def _carried(self, instance: Instance, stream: Stream) -> dict[str, Port]:
        elements = self.elements[instance.tag]
        found: dict[str, Port] = {}
        for carried, port in sorted(stream.carries, key=lambda one: not elements.generic(one[0])):
            for name, element in zip(elements.of(carried), elements.of(port), strict=False):
                flat = f"{instance.tag}.{element}"
                if flat in self.wiring.ports:
                    found[name] = self.wiring.ports[flat]
        return found

    def _join_ports(self, wire: Wire) -> None:
        sources, targets = self._source(wire), self._target(wire)
        if not sources or not targets:
            return
        if len(sources) == 1 and len(targets) == 1:
            self._drive(targets[0], sources[0], wire.where)
            return
        ends = {name.rpartition(".")[2]: name for name in sources}
        matched = [(port, ends[port.index]) for port in targets if port.index in ends]
        if len(matched) != len(targets):
            self.problems.add(
                f"'{wire.source}' has the elements {', '.join(ends)} but '{wire.target}' has "
                + ", ".join(port.index for port in targets),
                wire.where,
                "name single elements with a dot, such as `tank.c_in.sugar`",
            )
        for port, source in matched:
            self._drive(port, source, wire.where)

    def _source(self, wire: Wire) -> list[str]:
        if wire.source in self.layout.boundary:
            return [wire.source]
        return [port.flat for port in self._ports(wire.source, wire.where)]

    def _target(self, wire: Wire) -> list[Port]:
        if wire.target in self.layout.boundary:
            self.problems.add(
                f"'{wire.target}' is a boundary value; nothing can be wired to it",
                wire.where.shifted(len(wire.source) + 4),
                "turn the arrow round, or take the value out of `boundary:`",
            )
            return []
        ports = self._ports(wire.target, wire.where.shifted(len(wire.source) + 4))
        for port in ports:
            if not port.is_input:
                self.problems.add(
                    f"'{port.flat}' is an output; nothing can be wired to it",
                    wire.where.shifted(len(wire.source) + 4),
                    "turn the arrow round, or name an input",
                )
        return [port for port in ports if port.is_input]

    def _ports(self, end: str, where: Where) -> list[Port]:
        """The port of that address, all its elements, or nothing and a problem."""
        ports = self.wiring.ports
        if end in ports:
            return [ports[end]]
        whole = [port for flat, port in ports.items() if port.index and flat == f"{end}.{port.index}"]
        if whole:
            return whole
        self._tell_unknown(end, where)
        return []

    def _tell_unknown(self, end: str, where: Where) -> None:
        tag, name = split_address(self.layout, end)
        instance = self.layout.instances.get(tag)
        if instance is None:
            known = [*self.layout.instances, *self.layout.boundary]
            self.problems.add(f"'{end}' names no block and no boundary value", where, nearest(end.split(".")[0], known))
            return
        block = instance.block
        entries = [port.element for port in self.wiring.ports.values() if port.tag == tag]
        known = [*entries, *block.streams, *block.ports]
        self.problems.add(
            f"'{tag}' ({block.name}) has no port or stream '{name}'", where, nearest(name, known, "ports and streams")
        )

    def _drive(self, target: Port, source: str, where: Where, stream: bool = False) -> None:
        old = self.wiring.drivers.get(target.flat)
        if old is not None and old.source != source:
            self.problems.add(
                f"'{target.flat}' has two drivers: '{old.source}' (line {old.where.line} of {old.where.file}) "
                f"and '{source}'",
                where,
                f"take one of the wires out, or `cut: [{old.source} -> {target.flat}]` in the strategy first",
            )
            return
        self.wiring.drivers[target.flat] = Driver(source, where, stream)
