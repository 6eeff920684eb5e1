"""The law model evaluated with numbers: values of all names and their slopes by forward differentiation."""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping
from dataclasses import dataclass, field
from functools import lru_cache, partial

import numpy as np
from numpy.typing import NDArray

from loopsim.language.derivative import derivative
from loopsim.language.evaluate import Table, evaluate
from loopsim.language.tree import Call, Expression, Number, names_in, transform
from loopsim.model.order import Loop, ordered
from loopsim.model.types import Assignment, Model

FloatArray = NDArray[np.float64]
Slopes = dict[int, float]
BEYOND = "beyond#"  # before an unknown's name: how far the search has gone past the end where the unknown stands
NEAR = 0.01  # of the way between an unknown's ends


def relaxed(tree: Expression, given: Collection[str]) -> Expression:
    """A tree whose limits let everything pass: what would be needed if nothing had a limit.

    Limits are `clip`, and `min` or `max` with something that the plant gives (`given`).
    """

    def opened(node: Expression) -> Expression:
        if not isinstance(node, Call):
            return node
        if node.function == "clip":
            return node.arguments[0]
        if node.function in ("min", "max"):
            moving = [one for one in node.arguments if not names_in(one) <= set(given)]
            return moving[0] if len(moving) == 1 else node
        return node

    return transform(tree, opened)


@dataclass(frozen=True, slots=True)
class Line:
    """One assignment or residual with its slopes by the names that it reads."""

    name: str
    tree: Expression
    slopes: tuple[tuple[str, Expression], ...]


def line_of(name: str, tree: Expression) -> Line:
    """A line with its derivatives, those that are nought left out."""
    slopes = [(one, derivative(tree, one)) for one in sorted(names_in(tree))]
    return Line(name, tree, tuple((one, slope) for one, slope in slopes if slope != Number(0.0)))


@dataclass(frozen=True, slots=True)
class Bracket:
    """Between which values an unknown is looked for; `stops`: it stands at an end where nothing solves it."""

    name: str
    place: int
    row: int
    low: float
    high: float
    stops: bool


@dataclass(slots=True)
class System:
    """`rate(u) = 0` for the states and residuals of loops u of a law model.

    `unknowns` are the names behind u: states first (`states` of them), then unknowns of loops. One that has ends never
    leaves them: where u lies beyond, the model is looked at with the unknown at the end, and its row is what is left of
    the equation there and a slope that leads back. `free_of_limits` takes the clips out.
    """

    model: Model
    free_of_limits: bool = False
    unknowns: list[str] = field(default_factory=list)
    states: int = 0
    _steps: list[Line] = field(default_factory=list)
    _rows: list[Line] = field(default_factory=list)
    _settled: dict[str, float | Table] = field(default_factory=dict)
    _brackets: list[Bracket] = field(default_factory=list)

    def __post_init__(self) -> None:
        model = self.model
        change: Callable[[Expression], Expression] = (
            partial(relaxed, given=model.slots) if self.free_of_limits else (lambda tree: tree)
        )
        self.unknowns = list(model.states)
        self.states = len(self.unknowns)
        rows = [change(state.rate) for state in model.states.values()]
        wanted = set(model.assignments) | set(model.implicits) | {n for row in rows for n in names_in(row)}
        for step in ordered(model, wanted):
            if isinstance(step, Loop):
                self._bracket(step, len(rows))
                self.unknowns += step.unknowns
                self._steps += [line_of(one.name, change(one.tree)) for one in step.inner]
                rows += [change(one) for one in step.residuals]
            elif isinstance(step, Assignment):
                self._steps.append(line_of(step.name, change(step.tree)))
        self._rows = [line_of("", row) for row in rows]
        self._settled = {name: slot.value for name, slot in model.slots.items()} | dict(model.tables)

    def _bracket(self, loop: Loop, row: int) -> None:
        """Note the ends of a loop's unknowns, where parameters alone tell them."""
        for number, (low, high, stops) in enumerate(loop.limits):
            if low is not None and high is not None:
                first, last = (_by_parameters(self.model, end) for end in (low, high))
                if first is not None and last is not None:
                    place = len(self.unknowns) + number
                    self._brackets.append(Bracket(loop.unknowns[number], place, row + number, first, last, stops))

    def inside(self, u: FloatArray) -> FloatArray:
        """u with every unknown between its ends."""
        found = u.copy()
        for one in self._brackets:
            found[one.place] = min(max(u[one.place], one.low), one.high)
        return found

    def outside(self, values: Mapping[str, float]) -> str:
        """An unknown that nothing solves between its ends, and that may not stand there; '' for none."""
        return next((one.name for one in self._brackets if values.get(BEYOND + one.name) and not one.stops), "")

    def _back(self, values: Mapping[str, float], bracket: Bracket) -> float:
        """The slope that leads back: the equation's over the part next to the end, or over all where that turns."""
        u = np.array([values[name] for name in self.unknowns])
        end, width = values[bracket.name], bracket.high - bracket.low
        inward = NEAR * width if end == bracket.low else -NEAR * width
        sides = []
        for place in (end, end + inward, bracket.low, bracket.high):
            u[bracket.place] = place
            sides.append(float(evaluate(self._rows[bracket.row].tree, self.values(u))))
        near, mean = (sides[1] - sides[0]) / inward, (sides[3] - sides[2]) / width
        return near if near * mean > 0 else mean

    def values(self, u: FloatArray, slots: Mapping[str, float] | None = None) -> dict[str, float]:
        """Every name's value at u (SI)."""
        values: dict[str, float | Table] = dict(self._settled)
        values.update(slots or {})
        within = self.inside(u)
        values.update(zip(self.unknowns, within.tolist(), strict=True))
        values.update((BEYOND + one.name, u[one.place] - within[one.place]) for one in self._brackets)
        for step in self._steps:
            values[step.name] = evaluate(step.tree, values)
        return values  # type: ignore[return-value]

    def residuals(self, values: Mapping[str, float]) -> FloatArray:
        """Rates of the states and residuals of the loops at these values."""
        rows = np.array([evaluate(row.tree, values) for row in self._rows])
        for one in self._brackets:
            beyond = values.get(BEYOND + one.name)
            if beyond:
                rows[one.row] += self._back(values, one) * beyond
        return rows

    def jacobian(self, values: Mapping[str, float], held: Collection[str] = ()) -> FloatArray:
        """d residuals / d u, shape (n, n); names in `held` are taken for constant."""
        at_an_end = [one for one in self._brackets if values[one.name] in (one.low, one.high)]
        still = {one.place for one in at_an_end}
        seeds = {name: {place: 1.0} for place, name in enumerate(self.unknowns) if place not in still}
        matrix = self.rows_by(values, self.carried(values, seeds, held), len(self.unknowns))
        for one in at_an_end:
            matrix[one.row, one.place] = self._back(values, one)
        return matrix

    def carried(
        self, values: Mapping[str, float], seeds: dict[str, Slopes], held: Collection[str] = ()
    ) -> dict[str, Slopes]:
        """Slopes of every name with respect to the seeded places, carried through all assignments but the held ones."""
        slopes = dict(seeds)
        for step in self._steps:
            if step.name in held:
                continue
            total = _total(step, values, slopes)
            if total:
                slopes[step.name] = {**slopes.get(step.name, {}), **total}
        return slopes

    def rows_by(self, values: Mapping[str, float], slopes: dict[str, Slopes], columns: int) -> FloatArray:
        """d residuals / d seeded places, shape (n, columns)."""
        matrix = np.zeros((len(self._rows), columns))
        for row, line in enumerate(self._rows):
            for place, slope in _total(line, values, slopes).items():
                matrix[row, place] = slope
        return matrix

    def starts(self) -> FloatArray:
        """Where the search begins: the starts of the states, evaluated as far as they can be told."""
        u = np.zeros(len(self.unknowns))
        for place, name in enumerate(self.unknowns):
            u[place] = self._start(name)
        return self._refined(u)

    def _start(self, name: str) -> float:
        found = self.model.states.get(name) or self.model.implicits.get(name)
        return found.start.value if found is not None and isinstance(found.start, Number) else 0.0

    def _refined(self, u: FloatArray) -> FloatArray:
        """Starts that are formulas, from the values that the other starts give; a few rounds settle chains."""
        for _ in range(20):
            values = self.values(u)
            before = u.copy()
            for place, name in enumerate(self.unknowns):
                found = self.model.states.get(name) or self.model.implicits.get(name)
                if found is not None and names_in(found.start):
                    u[place] = float(evaluate(found.start, values))
            if np.array_equal(before, u, equal_nan=True):
                break
        return np.nan_to_num(u, nan=0.0, posinf=0.0, neginf=0.0)


def _by_parameters(model: Model, tree: Expression) -> float | None:
    """The value of a tree of slots and of what is computed from them; None for one that moves with the plant."""
    known: dict[str, float | Table] = {}
    for name in names_in(tree):
        slot, assignment = model.slots.get(name), model.assignments.get(name)
        found = slot.value if slot else _by_parameters(model, assignment.tree) if assignment else None
        if found is None:
            return None
        known[name] = found
    return float(evaluate(tree, known))


@lru_cache(maxsize=32)
def system_of(model: Model) -> System:
    """The system of a model, made once."""
    return System(model)


def _total(line: Line, values: Mapping[str, float], slopes: dict[str, Slopes]) -> Slopes:
    """The slopes of a line from those of the names that it reads."""
    total: Slopes = {}
    for name, slope_tree in line.slopes:
        below = slopes.get(name)
        if not below:
            continue
        factor = evaluate(slope_tree, values)
        for place, slope in below.items():
            total[place] = total.get(place, 0.0) + factor * slope
    return total
