"""Balances solved for the rates of the states: chain rule, shared derivatives, and factors that are zero."""

from __future__ import annotations

from dataclasses import dataclass

from loopsim.documents.types import Balance
from loopsim.errors import Where
from loopsim.language.derivative import derivative, simplify, substitute
from loopsim.language.tree import Expression, Name, Number, Operation, Rate, names_in, transform
from loopsim.model.draft import Draft
from loopsim.model.translate import Translator
from loopsim.model.types import Implicit

RATE = "rate of "


@dataclass(frozen=True, slots=True)
class Equation:
    """One balance as `sum(factors * rates) = rest`, all flat."""

    factors: dict[str, Expression]
    rest: Expression
    name: str
    where: Where


def equations(part: Translator, balances: dict[str, tuple[Balance, str]], states: set[str]) -> list[Equation]:
    """The balances of one instance as linear equations in the rates of its states."""
    found = []
    for name, (balance, index) in balances.items():
        left, right = (part.tree(side, index, False) for side in (balance.left, balance.right))
        found.append(_equation(part.draft, left, right, states, part.flat(name), balance.where))
    return found


def _equation(draft: Draft, left: Expression, right: Expression, states: set[str], name: str, where: Where) -> Equation:
    difference = Operation("-", (left, right))
    with_rates = transform(difference, lambda node: _chain(draft, node, states))
    involved = sorted(one for one in names_in(with_rates) if one.startswith(RATE))
    factors = {one.removeprefix(RATE): simplify(derivative(with_rates, one)) for one in involved}
    still = substitute(right if _only_left(left, right) else difference, {one: Number(0.0) for one in involved})
    if not _only_left(left, right):
        still = Operation("neg", (still,))
    return Equation(
        {state: factor for state, factor in factors.items() if factor != Number(0.0)}, simplify(still), name, where
    )


def _only_left(left: Expression, right: Expression) -> bool:
    """Whether the left side is rates only, as in `rho*V*dT/dt = …`: then the right side is kept as it was written."""
    if isinstance(left, Rate):
        return not _has_rate(right)
    if not isinstance(left, Operation) or left.operator not in ("*", "/") or _has_rate(right):
        return False
    inside = [_only_left(one, Number(0.0)) for one in left.arguments]
    return inside[0] or (left.operator == "*" and inside[1])


def _has_rate(tree: Expression) -> bool:
    return isinstance(tree, Rate) or any(_has_rate(one) for one in getattr(tree, "arguments", ()))


def _chain(draft: Draft, node: Expression, states: set[str]) -> Expression:
    """`d(expression)/dt` as the sum of partial derivatives times rates."""
    if not isinstance(node, Rate):
        return node
    inner = opened(draft, node.argument, states)
    total: Expression | None = None
    for state in sorted(names_in(inner) & states):
        term: Expression = Operation("*", (derivative(inner, state), Name(RATE + state)))
        total = term if total is None else Operation("+", (total, term))
    return simplify(total) if total is not None else Number(0.0)


def opened(draft: Draft, tree: Expression, states: set[str]) -> Expression:
    """A tree with the lets that depend on the states written out."""
    lets = {
        name: opened(draft, draft.assignments[name].tree, states)
        for name in names_in(tree)
        if name in draft.assignments and _depends(draft, name, states)
    }
    return substitute(tree, lets) if lets else tree


def _depends(draft: Draft, name: str, states: set[str]) -> bool:
    if name in states:
        return True
    return name in draft.assignments and any(
        _depends(draft, one, states) for one in names_in(draft.assignments[name].tree) if one != name
    )


def solve_rates(draft: Draft, tag: str, found: list[Equation]) -> dict[str, Expression]:
    """The rate of each state; a balance whose factors are all zero is solved for its state instead."""
    rates: dict[str, Expression] = {}
    pending = []
    for equation in found:
        alive = {state: one for state, one in equation.factors.items() if draft.static(one) != 0}
        if alive:
            pending.append(Equation(alive, equation.rest, equation.name, equation.where))
        else:
            _solve_for_state(draft, tag, equation)
    while pending:
        pick = min(pending, key=lambda one: len(one.factors))
        pending.remove(pick)
        if not pick.factors:
            draft.problems.add(
                f"the balances of '{tag}' cannot be solved for the rates of its states",
                pick.where,
                f"'{pick.name}' says nothing that the other balances do not say already",
            )
            continue
        state = sorted(pick.factors)[0]
        pending = [_eliminated(draft, one, pick, state) for one in pending]
        rates[state] = _isolated(pick, state)
    return _back_substituted(rates)


def _isolated(pick: Equation, state: str) -> Expression:
    """The rate of `state` from one equation, other rates still in it."""
    rest = pick.rest
    for other, factor in pick.factors.items():
        if other != state:
            rest = Operation("-", (rest, Operation("*", (factor, Name(RATE + other)))))
    return simplify(Operation("/", (rest, pick.factors[state])))


def _eliminated(draft: Draft, equation: Equation, pick: Equation, state: str) -> Equation:
    """An equation with the rate of `state` taken out by means of `pick`."""
    if state not in equation.factors:
        return equation
    ratio = simplify(Operation("/", (equation.factors[state], pick.factors[state])))
    factors = {one: factor for one, factor in equation.factors.items() if one != state}
    for other, factor in pick.factors.items():
        if other != state:
            reduced = Operation("-", (factors.get(other, Number(0.0)), Operation("*", (ratio, factor))))
            factors[other] = simplify(reduced)
    alive = {one: factor for one, factor in factors.items() if draft.static(factor) != 0 and factor != Number(0.0)}
    rest = simplify(Operation("-", (equation.rest, Operation("*", (ratio, pick.rest)))))
    return Equation(alive, rest, equation.name, equation.where)


def _back_substituted(rates: dict[str, Expression]) -> dict[str, Expression]:
    solved: dict[str, Expression] = {}
    for state in reversed(list(rates)):
        solved[state] = simplify(substitute(rates[state], {RATE + one: tree for one, tree in solved.items()}))
    return {state: solved[state] for state in rates}


def _solve_for_state(draft: Draft, tag: str, equation: Equation) -> None:
    """With a factor of zero the balance holds without its rate: explicit where the state stands linearly."""
    if len(equation.factors) != 1:
        draft.problems.add(
            f"balance '{equation.name}' has no rate left: its factors are zero",
            equation.where,
            "give the parameters in front of the derivatives values above zero",
        )
        return
    (state,) = equation.factors
    slope = simplify(derivative(equation.rest, state))
    if not names_in(slope) & {state} and slope != Number(0.0):
        at_zero = substitute(equation.rest, {state: Number(0.0)})
        tree = Operation("/", (Operation("neg", (at_zero,)), slope))
        draft.assign(state, tag, tree, equation.where)
        return
    start = draft.states[state].start if state in draft.states else Number(0.0)
    draft.implicits[state] = Implicit(state, tag, equation.rest, start, equation.where)
