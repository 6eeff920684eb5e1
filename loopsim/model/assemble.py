"""Plant and strategies made into one flat model."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

from loopsim.documents.catalogue import Catalogue
from loopsim.documents.types import Diagram, Formula, Given, Input, Word
from loopsim.errors import Problems, nearest
from loopsim.language.tree import Call, Expression, Name, Number, Operation
from loopsim.language.units import PERCENT
from loopsim.model.draft import Absent, Draft
from loopsim.model.elaborate import Elaboration
from loopsim.model.elements import elements_of
from loopsim.model.givens import boundary, check_keys
from loopsim.model.layout import Instance, Layout, lay_out
from loopsim.model.order import order_scans
from loopsim.model.scales import Scales
from loopsim.model.types import Model, Signal
from loopsim.model.wiring import Port, Wiring, join


def assemble(
    diagrams: Iterable[Diagram],
    catalogue: Catalogue,
    *,
    law: bool = False,
    free: frozenset[str] = frozenset(),
    values: Mapping[str, Given] | None = None,
    point: str = "",
) -> Model:
    """The model of a plant with its strategies, in any order.

    `law`: the continuous law in place of every scan, dead times passed through (operating point, linear model).
    `free`: flat names of settings, faults, parameters and inputs that events may change.
    Raises `InputError` with all that is wrong.
    """
    problems = Problems()
    layout = lay_out(diagrams, catalogue, problems, values, point)
    problems.raise_if_any()
    elements = {tag: elements_of(instance, problems) for tag, instance in layout.instances.items()}
    wiring = join(layout, elements, problems)
    for tag, instance in layout.instances.items():
        check_keys(instance, elements[tag], problems)
    choices = choose(layout, wiring, problems)
    problems.raise_if_any()
    absent: set[str] = set()
    while True:
        problems = Problems()
        scales = Scales(layout, elements, wiring, choices)
        draft = Draft(layout, elements, wiring, choices, scales, problems, law, free, set(absent))
        drivers = dict(wiring.drivers)
        _elaborate(draft)
        if draft.absent == absent and wiring.drivers == drivers:
            break
        absent = set(draft.absent)
    problems.raise_if_any()
    return _finished(draft)


def _elaborate(draft: Draft) -> None:
    boundary(draft)
    finder = _Answers(draft)
    parts = [Elaboration(draft, instance, finder.find) for instance in draft.layout.instances.values()]
    finder.parts = {part.tag: part for part in parts}
    for part in parts:
        with draft.problems.collecting():
            part.read_parameters()
    for part in parts:
        part.read_inputs()
        part.choose_mode()
    for step in ("note_states", "note_law", "note_outputs", "check_parameters", "note_scan", "note_task"):
        for part in parts:
            with draft.problems.collecting():
                _tolerant(part, step)


def _tolerant(part: Elaboration, step: str) -> None:
    """One step of one instance; needing what the plant leaves out is a problem of that instance."""
    try:
        getattr(part, step)()
    except Absent as absent:
        if absent.name not in part.draft.broken:
            part.draft.problems.add(
                f"'{part.tag}' ({part.block.name}) needs '{absent.name}', which the plant leaves out",
                part.where,
                "give it a value or a wire",
            )


def choose(layout: Layout, wiring: Wiring, problems: Problems) -> dict[str, dict[str, str]]:
    """The choice of every setting of every instance."""
    choices: dict[str, dict[str, str]] = {}
    for tag, instance in layout.instances.items():
        choices[tag] = {}
        for name, setting in instance.block.settings.items():
            word = _given_choice(instance, name, choices)
            if word is None and setting.default is not None:
                word = _default_choice(instance, setting.default, wiring)
            if word is None:
                problems.add(
                    f"'{tag}' ({instance.block.name}) needs a choice for '{name}'",
                    instance.where,
                    f"choose one of: {', '.join(setting.choices)}",
                )
            elif word not in setting.choices:
                where = instance.values[name].where if name in instance.values else setting.where
                problems.add(f"'{name}' cannot be '{word}'", where, nearest(word, setting.choices, "choices"))
            choices[tag][name] = word if word in setting.choices else setting.choices[0]
    return choices


def _given_choice(instance: Instance, name: str, choices: dict[str, dict[str, str]]) -> str | None:
    given = instance.values.get(name)
    if given is None:
        return None
    if isinstance(given.value, Formula) and isinstance(given.value.tree, Name):
        tag, _, outer = given.value.tree.name.rpartition(".")
        return choices.get(tag, {}).get(outer, given.value.text)
    return getattr(given.value, "text", "")


def _default_choice(instance: Instance, default: Word | Formula, wiring: Wiring) -> str | None:
    if isinstance(default, Word):
        return default.text
    tree: Expression = default.tree
    while isinstance(tree, Call) and tree.function == "where":
        conditions = zip(tree.arguments[:-1:2], tree.arguments[1::2], strict=False)
        tree = next((branch for test, branch in conditions if _holds(test, instance, wiring)), tree.arguments[-1])
    if isinstance(tree, Number):
        return f"{tree.value:g}"
    return tree.name if isinstance(tree, Name) else None


def _holds(test: Expression, instance: Instance, wiring: Wiring) -> bool:
    if isinstance(test, Operation) and test.operator == "not":
        return not _holds(test.arguments[0], instance, wiring)
    assert isinstance(test, Call) and isinstance(test.arguments[0], Name)
    name = test.arguments[0].name
    wired = f"{instance.tag}.{name}" in wiring.drivers
    return wired or (test.function == "given" and name in instance.values)


class _Answers:
    """Finds what the block driven by an output answers back along the wire."""

    def __init__(self, draft: Draft) -> None:
        self.draft = draft
        self.parts: dict[str, Elaboration] = {}
        self.consumers: dict[str, list[Port]] = {}
        for flat in sorted(draft.wiring.drivers):
            port = draft.wiring.ports[flat]
            assert isinstance(port.entry, Input)
            if port.entry.answers is not None:
                self.consumers.setdefault(self._root(flat), []).append(port)

    def _root(self, flat: str) -> str:
        """The output or boundary value behind an input, through inputs that pass it on."""
        while flat in self.draft.wiring.drivers:
            flat = self.draft.wiring.drivers[flat].source
        return flat

    def find(self, output: str, which: str) -> Expression | None:
        """The answer as a tree; of several listeners, the first tag's value, and `up`/`down` where any can follow."""
        answers = [self._answer(port, which) for port in self.consumers.get(output, [])]
        found = [one for one in answers if one is not None]
        if not found:
            return None
        if which == "takes":
            return found[0]
        tree = found[0]
        for other in found[1:]:
            tree = Operation("or", (tree, other))
        return tree

    def _answer(self, port: Port, which: str) -> Expression | None:
        assert isinstance(port.entry, Input) and port.entry.answers is not None
        value = getattr(port.entry.answers, which)
        if value is None:
            return None
        part = self.parts[port.tag]
        tree = part.definition(value, port.index)
        if which == "takes" and port.entry.percent_of and self._converted(port):
            return self._share(tree, part, port.entry.percent_of)
        return tree

    def _converted(self, port: Port) -> bool:
        source = self.draft.scales.of(self.draft.wiring.drivers[port.flat].source)
        own = self.draft.scales.of(port.flat)
        return source is not None and own is not None and source.dimension == PERCENT.dimension != own.dimension

    def _share(self, value: Expression, part: Elaboration, pair: str) -> Expression:
        low, high = Name(part.flat(f"{pair}.low")), Name(part.flat(f"{pair}.high"))
        return Operation("/", (Operation("-", (value, low)), Operation("-", (high, low))))


def _finished(draft: Draft) -> Model:
    layout = draft.layout
    for name, slot in draft.slots.items():
        if slot.kind in ("boundary", "input"):
            unit = layout.show_unit(slot.unit)
            draft.signals.setdefault(name, Signal(name, name.rpartition(".")[0], unit, slot.where, slot.about))
    scans, notes = order_scans(draft.scans, draft.assignments, draft.states)
    return Model(
        name=layout.name,
        law=draft.law,
        slots=draft.slots,
        states=draft.states,
        memory=draft.memory,
        assignments=draft.assignments,
        implicits=draft.implicits,
        dead_times=draft.dead_times,
        noises=draft.noises,
        latches=draft.latches,
        scans=tuple(scans),
        settles=tuple(draft.settles),
        bounds=tuple(draft.bounds),
        tables=draft.tables,
        signals=draft.signals,
        in_use=draft.in_use,
        controllers=tuple(sorted(draft.controllers, key=lambda one: one.tag)),
        free=draft.free,
        air_pressure=layout.air_pressure,
        assumed=tuple(draft.assumed),
        notes=(*layout.notes, *notes),
    )
