"""What is known of one instance while its formulas are made flat, and the names noted on the way."""

from __future__ import annotations

from collections.abc import Callable

from loopsim.documents.types import Balance, ByChoice, Definition, Given, Held, Let, Unknown
from loopsim.language.tree import Call, Expression, Name, Number, Operation, walk
from loopsim.model.draft import Draft, Member, namespace
from loopsim.model.layout import Instance
from loopsim.model.types import PRIME, Assignment, Implicit, ScanLatch

AnswerFinder = Callable[[str, str], Expression | None]


class Part:
    """One instance on its way into the model.

    `mode` says how its scan text counts: `plain` (it has none), `scanned`, `continuous` (scan 0 s) or `law`
    (operating point and linear model).
    """

    def __init__(self, draft: Draft, instance: Instance, answers: AnswerFinder) -> None:
        self.draft, self.answers = draft, answers
        self.tag, self.block, self.values, self.where = instance.tag, instance.block, instance.values, instance.where
        self.elements = draft.elements[instance.tag]
        self.choices = draft.choices[instance.tag]
        self.members: dict[str, Member] = namespace(instance, self.elements)
        self.scanned: dict[str, tuple[Let, str]] = dict(self._entries(self.block.scan))  # type: ignore[arg-type]
        self.laws: dict[str, tuple[Let | Balance, str]] = {}
        self.mode = "plain"
        self.statements: dict[str, Assignment | ScanLatch] = {}
        self.was_slots: dict[str, tuple[Expression, Expression]] = {}
        self.left: dict[str, str] = {}
        self._noises: dict[int, int] = {}
        self._scan_bound: dict[str, bool] = {}
        self._started: set[str] = set()

    def definition(self, value: Definition, index: str = "", scan: bool = False) -> Expression:
        """A definition as a flat tree (given by `Translator`)."""
        raise NotImplementedError

    def tree(self, node: Expression, index: str, scan: bool) -> Expression:
        """A node as a flat tree (given by `Translator`)."""
        raise NotImplementedError

    def flat(self, element: str) -> str:
        """The model's name of an element."""
        return f"{self.tag}.{element}"

    def _entries(self, entries: tuple[Let | Balance, ...]) -> dict[str, tuple[Let | Balance, str]]:
        found: dict[str, tuple[Let | Balance, str]] = {}
        for entry in sorted(entries, key=lambda one: not self.elements.generic(one.key)):
            for element in self.elements.of(entry.key):
                found[element] = (entry, element.rpartition(".")[2] if self.elements.generic(entry.key) else "")
        return found

    def is_law_state(self, element: str) -> bool:
        """Whether the continuous law moves this name by a balance."""
        return isinstance(self.laws.get(element, (None,))[0], Balance)

    def noise_number(self, node: Call) -> int:
        """The place of a `noise` call among those of the block's text, whatever else the model holds."""
        if not self._noises:
            entries = (*self.block.let, *self.block.scan, *self.block.continuous, *self.block.outputs)
            nodes = [one for entry in entries for one in definition_nodes(getattr(entry, "value", None))]
            calls = [one for one in nodes if isinstance(one, Call) and one.function == "noise"]
            self._noises = {id(one): number for number, one in enumerate(calls, 1)}
        return self._noises.get(id(node), 0)

    def set_mode(self, mode: str) -> None:
        """Say how the scan text counts; the law's entries are looked at only where they stand for it."""
        self.mode = mode
        if mode in ("continuous", "law"):
            self.laws = self._entries(self.block.continuous)

    # ------------------------------------------------------------ names assigned in `scan`
    def scan_name(self, element: str, scan: bool) -> Expression:
        """A name assigned in `scan`: its new value inside, what stands outside."""
        if scan:
            return self._primed(element, self.scanned[element])
        flat = self.flat(element)
        if self.mode == "scanned":
            self.remember(element)
        elif not self.is_law_state(element):
            self._note_formula(element)
        return Name(flat)

    def _primed(self, element: str, entry: tuple[Let, str]) -> Expression:
        name = self.flat(element) + PRIME
        if name not in self._started:
            self._started.add(name)
            let, index = entry
            tree = self.definition(let.value, index, scan=True)
            self.statements[name] = Assignment(name, self.tag, tree, let.where)
        return Name(name)

    def _note_formula(self, element: str) -> None:
        """An entry of `continuous`, or one of `scan` that holds as a formula."""
        flat = self.flat(element)
        if flat in self._started or flat in self.draft.states:
            return
        self._started.add(flat)
        let, index = self.laws.get(element, self.scanned[element])
        assert isinstance(let, Let)
        self.draft.assign(flat, self.tag, self.definition(let.value, index), let.where)

    def law_name(self, element: str) -> Expression:
        """A name that only `continuous` assigns."""
        flat = self.flat(element)
        law, index = self.laws[element]
        if isinstance(law, Let) and flat not in self._started:
            self._started.add(flat)
            self.draft.assign(flat, self.tag, self.definition(law.value, index), law.where)
        return Name(flat)

    def remember(self, element: str) -> str:
        """The stored value of a scanned name; one without an entry in `memory` gets its start from the law."""
        flat = self.flat(element)
        if flat not in self.draft.memory:
            held = self.held_entry(element)
            unit = self.draft.unit(flat, held.where) if held else None
            where = held.where if held else self.scanned[element][0].where
            self.draft.remember(flat, self.tag, Number(0.0), where, unit)
            self.draft.remember_start(flat, self.start_of(element))
        return flat

    def held_entry(self, element: str) -> Held | None:
        """The entry of `states` or `memory` behind an element."""
        member = self.members.get(element)
        return member.entry if member is not None and isinstance(member.entry, Held) else None

    def start_of(self, element: str) -> Expression:
        """Where a state or memory starts: what the plant gives, else its `start`, else nought."""
        given: Given | None = self.values.get(element)
        held = self.held_entry(element)
        if given is not None and held is not None:
            return self.given_value(given, element)
        member = self.members.get(element)
        if held is None or held.start is None or member is None:
            return Number(0.0)
        return self.definition(held.start, member.index)

    def given_value(self, given: Given, element: str) -> Expression:
        """A plant's value for an element as a tree (given by the elaboration)."""
        raise NotImplementedError

    # ------------------------------------------------------------ lets and outputs
    def let_name(self, element: str, scan: bool) -> Expression:
        """A `let` (or an output with a formula): inside a scan a copy of its own where it depends on the scan."""
        member = self.members[element]
        value = getattr(member.entry, "value", None)
        if value is None:
            return Name(self.flat(element))
        if scan and self.bound_to_scan(element):
            return self._primed(element, (Let(member.entry.key, value, member.entry.where), member.index))  # type: ignore[attr-defined]
        flat = self.flat(element)
        if flat not in self._started:
            self._started.add(flat)
            tree = self.definition(value, member.index)
            self.draft.assign(flat, self.tag, tree, member.entry.where)  # type: ignore[attr-defined]
        return Name(flat)

    def bound_to_scan(self, element: str) -> bool:
        """Whether a let means another value inside a scan than outside."""
        if element not in self._scan_bound:
            self._scan_bound[element] = False
            value = getattr(self.members[element].entry, "value", None)
            self._scan_bound[element] = any(self._bound_node(node) for node in definition_nodes(value))
        return self._scan_bound[element]

    def _bound_node(self, node: Expression) -> bool:
        if isinstance(node, Call):
            return node.function in ("was", "since", "held")
        if not isinstance(node, Name):
            return False
        if node.name == "scan":
            return True
        for current in ("", *self.elements.indices):
            if node.index is not None and node.index.base == self.elements.letter and not current:
                continue
            element = self.elements.name(node, current)
            member = self.members.get(element)
            if element in self.scanned or (
                member is not None and member.kind in ("let", "output") and self.bound_to_scan(element)
            ):
                return True
            if node.index is None or node.index.base != self.elements.letter:
                break
        return False

    def note_unknown(self, element: str) -> None:
        """An unknown of `solve` and its equation."""
        flat = self.flat(element)
        if flat in self._started:
            return
        self._started.add(flat)
        member = self.members[element]
        entry = member.entry
        assert isinstance(entry, Unknown)
        sides = [self.tree(side, member.index, False) for side in (entry.equation.left, entry.equation.right)]
        start = self.definition(entry.start, member.index) if entry.start is not None else Number(0.0)
        low = high = None
        if entry.between is not None:
            low, high = (self.definition(end, member.index) for end in (entry.between.low, entry.between.high))
        residual = Operation("-", (sides[0], sides[1]))
        self.draft.implicits[flat] = Implicit(flat, self.tag, residual, start, entry.where, low, high, entry.stops)

    def as_it_stands(self, output: str) -> Expression:
        """An output's value before the execution, for `out.takes` when nobody answers."""
        return self.tree(Name(output), "", False)


def definition_nodes(value: object) -> list[Expression]:
    """All nodes of all formulas of a definition."""
    if isinstance(value, ByChoice):
        return [node for option in value.options.values() for node in definition_nodes(option)]
    tree = getattr(value, "tree", None)
    return list(walk(tree)) if tree is not None else []
