"""Repeats opened: which elements a key stands for in one instance, and which element an index means."""

from __future__ import annotations

from dataclasses import dataclass

from loopsim.documents.types import Formula, Given, Key, NameList, Parameter, Quantity
from loopsim.errors import Problems
from loopsim.language.tree import Index, Name
from loopsim.model.layout import Instance


@dataclass(frozen=True, slots=True)
class Elements:
    """What an instance repeats over: `letter`, the `indices` as texts, the count parameter's name ('' for a list)."""

    letter: str = ""
    indices: tuple[str, ...] = ()
    count: str = ""

    def of(self, key: Key) -> tuple[str, ...]:
        """The element names (`T.1`, `T.2`, …, or just `T`) that a key stands for."""
        if key.index is None:
            return (key.name,)
        if key.index.base == self.letter and self.letter and key.index.offset == 0:
            return tuple(f"{key.name}.{index}" for index in self.indices)
        return (f"{key.name}.{self.text(key.index, '')}",)

    def generic(self, key: Key) -> bool:
        """Whether the key stands for all elements, so that a single element's own entry wins over it."""
        return key.index is not None and key.index.base == self.letter and key.index.offset == 0

    def text(self, index: Index, current: str) -> str:
        """The element that an index means where the letter stands for `current`."""
        if index.base is None:
            return str(index.offset)
        if index.base == self.letter:
            return str(int(current) + index.offset) if index.offset else current
        if index.base == self.count:
            return str(len(self.indices) + index.offset)
        return index.base

    def name(self, name: Name, current: str) -> str:
        """The element name that a Name node means where the letter stands for `current`."""
        return name.name if name.index is None else f"{name.name}.{self.text(name.index, current)}"


def elements_of(instance: Instance, problems: Problems) -> Elements:
    """Open the repeat of an instance from the count or the list that its plant gives."""
    repeat = instance.block.repeat
    if repeat is None:
        return Elements()
    parameter = next((one for one in instance.block.parameters if one.key.name == repeat.over), None)
    if parameter is None:
        return Elements(repeat.letter)
    given = instance.values.get(repeat.over)
    if parameter.names is not None:
        names = given.value.names if given is not None and isinstance(given.value, NameList) else parameter.names
        return Elements(repeat.letter, tuple(names))
    count = _count(parameter, given, instance, problems)
    return Elements(repeat.letter, tuple(str(i + 1) for i in range(count)), repeat.over)


def _count(parameter: Parameter, given: Given | None, instance: Instance, problems: Problems) -> int:
    value = given.value if given is not None else parameter.default
    if isinstance(value, Quantity):
        number, where = value.value, value.where
    elif isinstance(value, Formula) and hasattr(value.tree, "value"):
        number, where = float(value.tree.value), value.where
    else:
        problems.add(f"'{instance.tag}' needs a whole number for '{parameter.key.name}'", instance.where)
        return 1
    if number != int(number) or not 1 <= number <= 1000:
        problems.add(f"'{parameter.key.name}' is {number:g}; a whole number from 1 to 1000 is wanted", where)
        return 1
    return int(number)
