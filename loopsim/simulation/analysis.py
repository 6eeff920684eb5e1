"""What of a model moves inside a step, what is settled between events, and in which order all is computed."""

from __future__ import annotations

from dataclasses import dataclass, field

from loopsim.errors import Where
from loopsim.language.tree import Call, Expression, Name, Number, Operation, names_in, parts, rebuild, transform
from loopsim.model.order import Loop, Step, ordered, statement_names
from loopsim.model.types import Assignment, DeadTime, Latch, Model, Noise
from loopsim.simulation.switches import Switches, moving_names


@dataclass(frozen=True, slots=True)
class Condition:
    """Something a run waits for: true while `left` is greater than `right`."""

    left: Expression
    right: Expression
    tag: str
    where: Where


@dataclass(frozen=True, slots=True)
class Wishes:
    """What a run wants of the model: names to judge and to record, conditions, slots that events move in time."""

    judged: tuple[str, ...] = ()
    recorded: tuple[str, ...] = ()
    conditions: tuple[Condition, ...] = ()
    moving: frozenset[str] = frozenset()


@dataclass(slots=True)
class Analysis:
    """The model's steps in order, with switches put in and settled parts taken out."""

    model: Model
    wishes: Wishes
    switches: Switches = field(init=False)
    order: list[Step] = field(init=False)
    place: dict[str, int] = field(default_factory=dict)
    trees: dict[str, Expression] = field(default_factory=dict)
    settled: dict[str, Expression] = field(default_factory=dict)
    _scales: dict[str, float] = field(default_factory=dict)
    _residuals: dict[str, Expression] = field(default_factory=dict)
    _settled_known: dict[str, bool] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.switches = Switches(moving_names(self._below), self._scale)
        self.order = ordered(self.model, self._everything())
        for place, step in enumerate(self.order):
            for name in step.unknowns if isinstance(step, Loop) else (step.name,):
                self.place[name] = place
            if isinstance(step, Loop):
                for one in step.inner:
                    self.place[one.name] = place
        for step in self.order:
            self._prepare(step)

    def _everything(self) -> set[str]:
        """All names that any part of the run reads."""
        model, wanted = self.model, set(self.wishes.judged) | set(self.wishes.recorded)
        for state in model.states.values():
            wanted |= names_in(state.rate)
        for dead_time in model.dead_times.values():
            wanted |= names_in(dead_time.argument) | names_in(dead_time.lag)
        for condition in self.wishes.conditions:
            wanted |= names_in(condition.left) | names_in(condition.right)
        for task in model.scans:
            wanted |= names_in(task.period) | names_in(task.phase)
            for statement in task.statements:
                wanted |= statement_names(statement)
            for _, tree in task.writes:
                wanted |= names_in(tree)
        for _, tree in model.settles:
            wanted |= names_in(tree)
        return {name for name in wanted | set(model.latches) if not name.endswith("'")}

    def _below(self, name: str) -> frozenset[str] | None:
        model = self.model
        if name in model.states or name in model.dead_times or name in model.latches or name in self.wishes.moving:
            return None
        if name in model.assignments:
            return names_in(model.assignments[name].tree)
        if name in model.implicits:
            return names_in(model.implicits[name].residual)
        return frozenset()

    def _scale(self, name: str) -> float:
        """The size in SI of the unit that a name is written in; for a formula, of what it is made of."""
        model = self.model
        for items in (model.states, model.slots, model.memory, model.signals):
            if name in items:
                return items[name].unit.factor
        if name not in self._scales:
            self._scales[name] = 0.0
            below = [self._scale(one) for one in self._below(name) or ()]
            self._scales[name] = max(below, default=0.0)
        return self._scales[name]

    def is_settled(self, name: str) -> bool:
        """Whether a name can change at events only: slots that do not move, and what is computed from them."""
        if name not in self._settled_known:
            model = self.model
            self._settled_known[name] = False
            if name in model.slots:
                self._settled_known[name] = name not in self.wishes.moving
            elif name in model.tables:
                self._settled_known[name] = True
            elif name in model.assignments:
                self._settled_known[name] = all(self.is_settled(one) for one in names_in(model.assignments[name].tree))
        return self._settled_known[name]

    def _prepare(self, step: Step) -> None:
        if isinstance(step, Assignment):
            if self.is_settled(step.name):
                self.settled[step.name] = step.tree
            else:
                self.trees[step.name] = self.readied(step.tree, step.tag, step.where)
        elif isinstance(step, Loop):
            for one in step.inner:
                self.trees[one.name] = self.readied(one.tree, one.tag, one.where)
            for name, residual in zip(step.unknowns, step.residuals, strict=True):
                self._residuals[name] = self.readied(residual, step.tag, step.where)

    def residuals(self, loop: Loop) -> tuple[Expression, ...]:
        """The residuals of a loop, readied like all trees."""
        return tuple(self._residuals[name] for name in loop.unknowns)

    def readied(self, tree: Expression, tag: str, where: Where) -> Expression:
        """A tree with its switches put in and its settled parts named."""
        return self.hoisted(self.switches.apply(tree, tag, where))

    def hoisted(self, tree: Expression) -> Expression:
        """A tree whose largest settled parts have become names of their own."""
        if isinstance(tree, Name | Number):
            return tree
        names = names_in(tree)
        if names and all(self.is_settled(name) for name in names) and not (_flaggy(tree) or switch_numbers(tree)):
            name = self._name_of_settled(tree)
            return Name(name)
        return rebuild(tree, tuple(self.hoisted(part) for part in parts(tree)))

    def by_reciprocals(self, tree: Expression) -> Expression:
        """A readied tree that multiplies by reciprocals, told once, where it would divide by settled names."""

        def turned(node: Expression) -> Expression:
            if not isinstance(node, Operation) or node.operator != "/":
                return node
            above, below = node.arguments
            if not isinstance(below, Name) or not self.is_settled(below.name) or isinstance(above, Number):
                return node
            reciprocal = Name(self._name_of_settled(Operation("/", (Number(1.0), below))))
            return Operation("*", (above, reciprocal), node.at)

        return transform(tree, turned)

    def _name_of_settled(self, tree: Expression) -> str:
        for name, known in self.settled.items():
            if known == tree:
                return name
        name = f"settled#{len(self.settled)}"
        self.settled[name] = tree
        self._settled_known[name] = True
        return name

    def needed(self, names: set[str], sticky: bool = False) -> list[Step]:
        """The steps that the names need, in order; `sticky`: with what their switches compare."""
        found: set[int] = set()
        pending = [name for name in names if name in self.place]
        while pending:
            place = self.place[pending.pop()]
            if place in found:
                continue
            found.add(place)
            reads = self._reads(self.order[place])
            if sticky:
                reads = reads | self.switch_names(self._trees_of(self.order[place]))
            pending += [name for name in reads if name in self.place]
        steps = [self.order[place] for place in sorted(found)]
        return [step for step in steps if not (isinstance(step, Assignment) and step.name in self.settled)]

    def _reads(self, step: Step) -> frozenset[str]:
        if isinstance(step, Assignment):
            return frozenset() if step.name in self.settled else names_in(self.trees[step.name])
        if isinstance(step, Loop):
            inner = [self.trees[one.name] for one in step.inner]
            limits = [end for low, high, _ in step.limits for end in (low, high) if end is not None]
            return frozenset(name for tree in (*inner, *self.residuals(step), *limits) for name in names_in(tree))
        if isinstance(step, DeadTime):
            return names_in(step.lag)
        if isinstance(step, Noise):
            return names_in(step.every)
        assert isinstance(step, Latch)
        before = names_in(step.condition)
        return before | (names_in(step.argument) if step.argument is not None else frozenset())

    def _trees_of(self, step: Step) -> list[Expression]:
        if isinstance(step, Assignment):
            return [self.trees[step.name]] if step.name in self.trees else []
        if isinstance(step, Loop):
            return [*(self.trees[one.name] for one in step.inner), *self.residuals(step)]
        return []

    def switch_names(self, trees: list[Expression]) -> set[str]:
        """The names that the switches inside some trees compare."""
        found: set[str] = set()
        for tree in trees:
            for number in switch_numbers(tree):
                switch = self.switches.found[number]
                found |= names_in(switch.left) | names_in(switch.right)
                found |= self.switch_names([switch.left, switch.right])
        return found


def _flaggy(tree: Expression) -> bool:
    """Whether a tree is a condition: those are cheap and read better where they stand."""
    return isinstance(tree, Operation) and tree.operator in ("<", "<=", ">", ">=", "==", "!=", "and", "or", "not")


def switch_numbers(tree: Expression) -> set[int]:
    """The switches that stand in a tree."""
    found: set[int] = set()
    if isinstance(tree, Call) and tree.function in ("switch", "switched"):
        first = tree.arguments[0]
        assert isinstance(first, Number)
        found.add(int(first.value))
    for part in parts(tree):
        found |= switch_numbers(part)
    return found
