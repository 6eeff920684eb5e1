"""One instance's equations put into the draft: states and balances, outputs, scan task, watched levels."""

from __future__ import annotations

from dataclasses import replace

from loopsim.documents.types import Balance, Bounds, Formula, Given, Held, Output, Parameter, Quantity, Word
from loopsim.language.derivative import simplify
from loopsim.language.tree import Expression, Name, Number, Operation, names_in
from loopsim.language.units import from_si
from loopsim.model.balances import equations, solve_rates
from loopsim.model.draft import INNER, Absent
from loopsim.model.givens import Givens
from loopsim.model.scales import si_value
from loopsim.model.types import PRIME, RELATIONS, Bound, Controller, ScanTask, Signal, State


class Elaboration(Givens):
    """Carries one instance into the model, after all parameters and inputs have been read."""

    def choose_mode(self) -> None:
        """How the scan text counts in this model."""
        if not self.block.scan:
            return
        if self.draft.law:
            self.set_mode("law")
            return
        period = self.draft.static(Name(self.flat("scan")))
        self.set_mode("continuous" if period == 0 else "scanned")
        if period == 0 and not self.block.continuous:
            self.draft.problems.add(
                f"'{self.tag}' ({self.block.name}) has no continuous law, so its scan cannot be 0 s",
                self.where,
                "give it a scan time",
            )

    def given_value(self, given: Given, element: str) -> Expression:
        """A plant's start for a state or memory."""
        flat = self.flat(element)
        unit = self.draft.unit(flat, given.where)
        if isinstance(given.value, Formula):
            return given.value.tree
        if not isinstance(given.value, Quantity | Word):
            self.draft.problems.add(f"the start of '{flat}' is not a single value", given.where)
            return Number(0.0)
        return Number(si_value(given.value, unit, self.draft.problems, self.draft.layout.air_pressure, f"'{flat}'"))

    def scaled(self, share: Expression, pair: str) -> Expression:
        """A share of a range as a value on that range."""
        low, high = Name(self.flat(f"{pair}.low")), Name(self.flat(f"{pair}.high"))
        return Operation("+", (low, Operation("*", (share, Operation("-", (high, low))))))

    # ------------------------------------------------------------ states
    def note_states(self) -> None:
        """States and the rates that the balances give them."""
        own: dict[str, tuple[Balance, str]] = {}
        for element, (balance, index) in self._entries(self.block.balances).items():
            assert isinstance(balance, Balance)
            own[element] = (balance, index)
        states = {self.flat(e): e for held in self.block.states for e in self.elements.of(held.key)}
        for element, (law, index) in self.laws.items():
            if isinstance(law, Balance):
                own[element] = (law, index)
                states[self.flat(element)] = element
        if not own and not states:
            return
        for flat, element in states.items():
            self._place_state(flat, element, Number(0.0))
        found = equations(self, own, set(states))
        rates = solve_rates(self.draft, self.tag, found)
        for flat, element in states.items():
            if flat in rates:
                self._place_state(flat, element, rates[flat])
            else:
                self._not_a_state(flat)

    def _not_a_state(self, flat: str) -> None:
        state = self.draft.states.pop(flat)
        if flat not in self.draft.assignments and flat not in self.draft.implicits:
            self.draft.problems.add(
                f"no balance says how '{flat}' changes", state.where, "write a balance with its derivative"
            )

    def _place_state(self, flat: str, element: str, rate: Expression) -> None:
        held = self.held_entry(element)
        where = held.where if held else self.where
        start = self.start_of(element)
        self.draft.states[flat] = State(flat, self.tag, self.draft.unit(flat, where), start, rate, where)

    # ------------------------------------------------------------ the law model's memories
    def note_law(self) -> None:
        """In the law model: every name of `scan` and `continuous`; a memory that looks back at itself is mapped."""
        if self.mode != "law":
            return
        for element in [*self.scanned, *self.laws]:
            flat = self.flat(element)
            if flat in self.draft.states:
                continue
            try:
                if element in self.scanned:
                    self.scan_name(element, False)
                else:
                    self.law_name(element)
            except Absent as absent:
                self.leave_out(flat, absent)
        for element in self.scanned:
            self._map(element)

    def _map(self, element: str) -> None:
        """A memory that depends on itself stands where its scan text leaves it: rate = formula - value, per second."""
        flat, held = self.flat(element), self.held_entry(element)
        assignment = self.draft.assignments.get(flat)
        if assignment is None or not self._reaches(assignment.tree, flat, set()):
            return
        del self.draft.assignments[flat]
        unit = self.draft.unit(flat, held.where) if held else INNER
        rate = simplify(Operation("-", (assignment.tree, Name(flat))))
        rate = Number(0.0) if assignment.tree == Name(flat) else rate
        self.draft.states[flat] = State(flat, self.tag, unit, self.start_of(element), rate, assignment.where, True)

    def _reaches(self, tree: Expression, target: str, seen: set[str]) -> bool:
        """Whether a tree depends on `target` inside this instance."""
        for name in names_in(tree) - seen:
            if name == target:
                return True
            seen.add(name)
            found = self.draft.assignments.get(name)
            if found is not None and found.tag == self.tag and self._reaches(found.tree, target, seen):
                return True
        return False

    # ------------------------------------------------------------ outputs, signals, watched levels
    def note_outputs(self) -> None:
        """Outputs become signals; those that need what is absent are absent too."""
        for entry in sorted(self.block.outputs, key=lambda one: not self.elements.generic(one.key)):
            for element in self.elements.of(entry.key):
                self._output(entry, element)
        for element, member in self.members.items():
            if isinstance(member.entry, Held) and self.flat(element) not in self.draft.absent:
                self._watch(member.entry.bounds, self.flat(element), member.entry)
        self._note_in_use()

    def _output(self, entry: Output, element: str) -> None:
        flat = self.flat(element)
        try:
            self.element(element, False)
        except Absent as absent:
            self.leave_out(flat, absent)
            return
        unit = self.draft.layout.show_unit(self.draft.unit(flat, entry.where))
        self.draft.signals[flat] = Signal(flat, self.tag, unit, entry.where, entry.about)
        self._watch(entry.bounds, flat, entry)

    def _watch(self, bounds: Bounds, flat: str, entry: Held | Output) -> None:
        for relation in RELATIONS:
            limit = getattr(bounds, relation)
            if isinstance(limit, Quantity | Formula):
                self.draft.bounds.append(Bound(flat, relation, self.definition(limit), entry.where))

    def check_parameters(self) -> None:
        """Tell values that lie outside the bounds of their parameter."""
        for parameter in self.block.parameters:
            for element in self.elements.of(parameter.key):
                for end in (".low", ".high") if parameter.pair else ("",):
                    self._check_bounds(parameter, element, self.flat(element) + end)

    def _check_bounds(self, parameter: Parameter, element: str, flat: str) -> None:
        value = self.draft.static(Name(flat)) if self.flat(element) not in self.draft.absent else None
        for relation, kept in RELATIONS.items():
            bound = getattr(parameter.bounds, relation)
            if value is None or bound is None:
                continue
            limit = self._limit(bound)
            if limit is None:
                continue
            self._note_bound(flat, relation, limit)
            if kept(value, limit):
                continue
            given = self.values.get(element, self.values.get(parameter.key.name))
            unit, air = self.draft.unit(self.flat(element), parameter.where), self.draft.layout.air_pressure
            shown, wanted = (f"{from_si(one, unit, air):.5g} {unit.text}" for one in (value, limit))
            self.draft.problems.add(
                f"'{flat}' is {shown}; it must be {relation.replace('_', ' ')} {wanted}",
                given.where if given else self.where,
                parameter.about,
            )

    def _note_bound(self, flat: str, relation: str, limit: float) -> None:
        """Events have to keep the bound too."""
        slot = self.draft.slots.get(flat)
        if slot is not None:
            self.draft.slots[flat] = replace(slot, bounds=(*slot.bounds, (relation, limit)))

    def _limit(self, bound: Quantity | Formula) -> float | None:
        try:
            return self.draft.static(self.definition(bound))
        except Absent:  # it is measured against a parameter that this plant leaves out
            return None

    def _note_in_use(self) -> None:
        """An input that answers with a memory is read as that memory: the set point in use."""
        for entry in self.block.inputs:
            takes = entry.answers.takes if entry.answers else None
            if isinstance(takes, Formula) and isinstance(takes.tree, Name) and takes.tree.name in self.scanned:
                flat = self.flat(entry.key.name)
                memory = self.scan_name(takes.tree.name, False)
                assert isinstance(memory, Name)
                self.draft.in_use[flat] = memory.name
                unit = self.draft.layout.show_unit(self.draft.unit(memory.name, entry.where))
                self.draft.signals[flat] = Signal(flat, self.tag, unit, entry.where, entry.about)
        names = {one.key.name for one in self.block.inputs}, {one.key.name for one in self.block.outputs}
        if {"pv", "sp"} <= names[0] and "out" in names[1]:
            self._note_controller("ff" in names[0])

    def _note_controller(self, has_ff: bool) -> None:
        ff = self.flat("ff") if has_ff and self.flat("ff") in self.draft.wiring.drivers else ""
        integral = "integral" in self.values or self.flat("integral") in self.draft.assignments
        self.draft.controllers.append(
            Controller(self.tag, self.flat("pv"), self.flat("sp"), self.flat("out"), ff, integral, self.where)
        )

    # ------------------------------------------------------------ scan task
    def note_scan(self) -> None:
        """The statements of this block's scan text."""
        if self.mode not in ("scanned", "continuous"):
            return
        for element in self.scanned:
            try:
                self.scan_name(element, True)
            except Absent as absent:
                self.leave_out(self.flat(element), absent)

    def note_task(self) -> None:
        """The task that executes them, once all that any block reads of it is known."""
        if self.mode not in ("scanned", "continuous"):
            return
        writes: list[tuple[str, Expression]] = [
            (self._store(element), Name(self.flat(element) + PRIME))
            for element in self.scanned
            if self._store(element) and self.flat(element) + PRIME in self.statements
        ]
        for slot, (outside, inside) in self.was_slots.items():
            writes.append((slot, inside))
            if self.mode == "continuous":
                self.draft.settles.append((slot, outside))
        for element, slot in self.left.items():
            self.draft.settles.append((slot, Name(self.flat(element))))
        self._add_task(tuple(writes))

    def _store(self, element: str) -> str:
        """Where a scanned name's new value goes, '' where nothing reads it afterwards."""
        flat = self.flat(element)
        if flat in self.draft.states:
            return flat
        if element in self.left:
            return self.left[element]
        return flat if self.mode == "scanned" and flat in self.draft.memory else ""

    def _add_task(self, writes: tuple[tuple[str, Expression], ...]) -> None:
        previous = self.flat("scan#previous")
        self.draft.remember(previous, self.tag, Number(-1.0), self.where)
        phase: Expression = Name(self.flat("phase")) if "phase" in self.members else Number(0.0)
        self.draft.scans.append(
            ScanTask(
                self.tag,
                Name(self.flat("scan")),
                phase,
                self.mode == "continuous",
                tuple(self.statements.values()),
                writes,
                previous,
                self.where,
            )
        )
