"""A plant with strategies laid over it, blocks of blocks opened: tagged instances and wires between their ports."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace

from loopsim.documents.catalogue import Catalogue
from loopsim.documents.types import Block, Diagram, Formula, Given, Liquid, PairValue, Quantity, Use, Value, Wire, Word
from loopsim.errors import Problems, Where, nearest
from loopsim.language.derivative import substitute
from loopsim.language.tree import Expression, Name
from loopsim.language.units import Unit


@dataclass(slots=True)
class Instance:
    """A tagged block with the values given to it; formulas among the values are already in flat names."""

    tag: str
    block: Block
    values: dict[str, Given]
    where: Where


@dataclass(slots=True)
class Layout:
    """Instances and wires of a plant and its strategies; `ports` leads from a block of blocks to the port inside."""

    name: str
    boundary: dict[str, Given] = field(default_factory=dict)
    instances: dict[str, Instance] = field(default_factory=dict)
    wires: list[Wire] = field(default_factory=list)
    ports: dict[str, str] = field(default_factory=dict)
    show: dict[str, Unit] = field(default_factory=dict)
    liquid: Liquid | None = None
    air_pressure: float = 101325.0
    notes: list[str] = field(default_factory=list)
    points: dict[str, dict[str, Given]] = field(default_factory=dict)

    def show_unit(self, unit: Unit) -> Unit:
        """The unit in which people want this dimension shown."""
        for shown in self.show.values():
            if shown.dimension == unit.dimension and shown.point == unit.point and unit.dimension.powers:
                return shown
        return unit


def lay_out(
    diagrams: Iterable[Diagram],
    catalogue: Catalogue,
    problems: Problems,
    values: Mapping[str, Given] | None = None,
    point: str = "",
) -> Layout:
    """Join a plant and strategies, in any order.

    `values` are laid over last (a study's draw, a command's choice); `point` names an operating point of the plant.
    """
    ordered = sorted(diagrams, key=lambda one: (one.kind != "plant", one.name))
    layout = Layout(" + ".join(one.name for one in ordered))
    _one_plant(ordered, problems)
    for diagram in ordered:
        _join_values(layout, diagram, problems)
        for use in diagram.blocks.values():
            _place(layout, use.tag, use, catalogue, problems)
        layout.wires += diagram.wires
    for diagram in ordered:
        for cut in diagram.cut:
            _cut(layout, cut, problems)
    settings = [one for diagram in ordered for one in diagram.set.items()]
    settings += _point_values(layout, point, problems)
    for address, given in [*settings, *(values or {}).items()]:
        set_value(layout, address, given, problems)
    layout.wires = [_through_ports(layout, wire) for wire in layout.wires]
    return layout


def _one_plant(diagrams: list[Diagram], problems: Problems) -> None:
    plants = [one for one in diagrams if one.kind == "plant"]
    if len(plants) != 1:
        found = ", ".join(f"'{one.name}'" for one in plants) or "none"
        where = diagrams[-1].where if diagrams else None
        problems.add(f"one plant is wanted, found {found}", where, "give one file that begins with `plant:`")


def _join_values(layout: Layout, diagram: Diagram, problems: Problems) -> None:
    for name, given in diagram.boundary.items():
        if name in layout.boundary:
            problems.add(f"boundary value '{name}' is given twice", given.where, "use `set:` to change a value")
        layout.boundary[name] = given
    layout.show.update(diagram.show)
    layout.points.update(diagram.points)
    layout.liquid = diagram.liquid or layout.liquid
    if diagram.air_pressure is not None and diagram.air_pressure.unit is not None:
        pressure = diagram.air_pressure
        layout.air_pressure = pressure.value * diagram.air_pressure.unit.factor


def _place(layout: Layout, tag: str, use: Use, catalogue: Catalogue, problems: Problems) -> None:
    if tag in layout.instances or tag in layout.boundary:
        problems.add(f"the tag '{tag}' is used twice", use.where, "give every block a tag of its own")
        return
    with problems.collecting():
        block = catalogue.block(use.block, use.where)
        layout.instances[tag] = Instance(tag, block, dict(use.values), use.where)
        _open(layout, tag, block, catalogue, problems)


def _open(layout: Layout, tag: str, block: Block, catalogue: Catalogue, problems: Problems) -> None:
    own = {one.key.name for one in block.parameters} | set(block.settings)
    for inner in block.blocks.values():
        values = {key: _passed(given, tag, own) for key, given in inner.values.items()}
        _place(layout, f"{tag}.{inner.tag}", replace(inner, values=values), catalogue, problems)
    for wire in block.wires:
        layout.wires.append(replace(wire, source=f"{tag}.{wire.source}", target=f"{tag}.{wire.target}"))
    for port, inside in block.ports.items():
        layout.ports[f"{tag}.{port}"] = f"{tag}.{inside}"
        if port in layout.instances[tag].values:
            set_value(layout, f"{tag}.{inside}", layout.instances[tag].values.pop(port), problems)


def _passed(given: Given, tag: str, own: set[str]) -> Given:
    """The value handed to an inner block, its names made flat (`gain` -> `loop.gain`)."""
    return replace(given, value=_flat_value(given.value, tag, own))


def _flat_value(value: Value, tag: str, own: set[str]) -> Value:
    if isinstance(value, Word) and value.text in own:
        return Formula(Name(f"{tag}.{value.text}"), value.text, value.where)
    if isinstance(value, Formula):
        flat: dict[str, Expression] = {}
        for name in own:
            for part in ("", ".low", ".high"):
                flat[name + part] = Name(f"{tag}.{name}{part}")
        return replace(value, tree=substitute(value.tree, flat))
    if isinstance(value, PairValue):
        low, high = (_flat_value(one, tag, own) for one in (value.low, value.high))
        assert isinstance(low, Quantity | Formula) and isinstance(high, Quantity | Formula)
        return replace(value, low=low, high=high)
    return value


def _point_values(layout: Layout, point: str, problems: Problems) -> list[tuple[str, Given]]:
    if not point:
        return []
    if point not in layout.points:
        problems.add(f"no operating point is called '{point}'", None, nearest(point, layout.points, "points"))
        return []
    return list(layout.points[point].items())


def _cut(layout: Layout, cut: Wire, problems: Problems) -> None:
    kept = [wire for wire in layout.wires if (wire.source, wire.target) != (cut.source, cut.target)]
    if len(kept) == len(layout.wires):
        known = [f"{wire.source} -> {wire.target}" for wire in layout.wires]
        text = f"{cut.source} -> {cut.target}"
        problems.add(f"there is no wire '{text}' to cut", cut.where, nearest(text, known, "wires"))
    layout.wires[:] = kept


def split_address(layout: Layout, address: str) -> tuple[str, str]:
    """`TAG.key` into the longest known tag and the rest; the tag is '' where none fits."""
    cut = len(address)
    while (cut := address.rfind(".", 0, cut)) > 0:
        if address[:cut] in layout.instances:
            return address[:cut], address[cut + 1 :]
    return "", address


def set_value(layout: Layout, address: str, given: Given, problems: Problems) -> None:
    """Lay one value over a boundary value or over `TAG.name`."""
    if address in layout.boundary:
        old = layout.boundary[address]
        layout.boundary[address] = replace(given, about=given.about or old.about)
        return
    tag, key = split_address(layout, address)
    if not tag:
        known = [*layout.boundary, *layout.instances]
        problems.add(f"'{address}' names no boundary value and no block", given.where, nearest(address, known))
        return
    layout.instances[tag].values[key] = given


def _through_ports(layout: Layout, wire: Wire) -> Wire:
    return replace(wire, source=_inside(layout, wire.source), target=_inside(layout, wire.target))


def _inside(layout: Layout, end: str) -> str:
    while end in layout.ports:
        end = layout.ports[end]
    return end
