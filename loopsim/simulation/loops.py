"""Loops of algebra and implicit equations: Newton's method written out in the generated text."""

from __future__ import annotations

from typing import TYPE_CHECKING

from loopsim.language.derivative import derivative, simplify
from loopsim.language.tree import Call, Expression, Name, Number, Operation, names_in, transform
from loopsim.model.order import Loop
from loopsim.model.types import Assignment

if TYPE_CHECKING:
    from loopsim.simulation.bodies import Bodies
    from loopsim.simulation.text import Writer

ITERATIONS = 60
RELATIVE = 1e-13


def loop_lines(bodies: Bodies, loop: Loop, number: int, writer: Writer) -> list[str]:
    """The lines that solve a loop inside a function: a call, then its unknowns and what follows from them."""
    arguments = ", ".join(["t, side, x, m, p, b, h, n, z", *outer_texts(bodies, loop)])
    lines: list[str] = []
    if len(loop.unknowns) == 1:
        (unknown,) = loop.unknowns
        start, low, high = bounds_of(bodies, loop, writer)
        lines += [*writer.take(), f"{bodies.read(unknown)} = solve_{number}({start}, {low}, {high}, {arguments})"]
    else:
        lines.append(f"solved_{number} = solve_{number}({arguments})")
        for unknown in loop.unknowns:
            lines.append(f"{bodies.read(unknown)} = m[{bodies.memory['now of ' + unknown]}]")
    for one in loop.inner:
        text = writer.value(bodies.analysis.trees[one.name])
        lines += [*writer.take(), f"{bodies.read(one.name)} = {text}"]
    return lines


def bounds_of(bodies: Bodies, loop: Loop, writer: Writer) -> tuple[str, str, str]:
    """Texts of the last value and of the ends between which a single unknown is looked for."""
    low, high, _ = loop.limits[0]
    ends = ["-1e300" if low is None else writer.value(low), "1e300" if high is None else writer.value(high)]
    return f"m[{bodies.memory['last of ' + loop.unknowns[0]]}]", ends[0], ends[1]


def outer_names(bodies: Bodies, loop: Loop) -> list[str]:
    """The locals of the caller that a loop's equations read."""
    inside = {*loop.unknowns, *(one.name for one in loop.inner)}
    trees = [*bodies.analysis.residuals(loop), *(bodies.analysis.trees[one.name] for one in loop.inner)]
    names = {name for tree in trees for name in names_in(tree)} - inside - set(bodies.tables)
    return sorted(name for name in names if bodies.read(name).isidentifier())


def outer_texts(bodies: Bodies, loop: Loop) -> list[str]:
    """Their identifiers."""
    return [bodies.read(name) for name in outer_names(bodies, loop)]


def loop_functions(bodies: Bodies, loop: Loop, number: int) -> list[str]:
    """The functions that solve one loop."""
    if len(loop.unknowns) == 1:
        return _scalar(bodies, loop, number)
    return [_vector(bodies, loop, number)]


def _scalar(bodies: Bodies, loop: Loop, number: int) -> list[str]:
    (unknown,) = loop.unknowns
    variable = bodies.read(unknown)
    outer = outer_texts(bodies, loop)
    arrays = "t, side, x, m, p, b, h, n, z"
    head = ", ".join([variable, arrays, *outer])
    writer = bodies.writer()
    lines = _inner_lines(bodies, loop, writer)
    residual = writer.value(bodies.analysis.residuals(loop)[0])
    value = [*lines, *writer.take(), f"return {residual}"]
    slope_lines, slopes = _slopes(bodies, loop, writer)
    slope = [*lines, *slope_lines, f"return {slopes[0][0]}"]
    stops = 1 if loop.limits[0][2] else 0
    call = ", ".join([arrays, *outer])
    return [
        bodies.function(f"residual_{number}({head})", value),
        bodies.function(f"slope_{number}({head})", slope),
        SCALAR.format(
            number=number, arrays=call, stops=stops, iterations=ITERATIONS, relative=RELATIVE, error=number + 1
        ),
    ]


def _inner_lines(bodies: Bodies, loop: Loop, writer: Writer) -> list[str]:
    lines: list[str] = []
    for one in loop.inner:
        text = writer.value(bodies.analysis.trees[one.name])
        lines += [*writer.take(), f"{bodies.read(one.name)} = {text}"]
    return lines


def _slopes(bodies: Bodies, loop: Loop, writer: Writer) -> tuple[list[str], list[list[str]]]:
    """Lines that carry derivatives through the inner assignments, and the texts of d residual / d unknown."""
    lines: list[str] = []
    inner = [Assignment(one.name, one.tag, bodies.analysis.trees[one.name], one.where) for one in loop.inner]
    columns: list[list[str]] = []
    for unknown in loop.unknowns:
        known: dict[str, Expression] = {unknown: Number(1.0)}
        for one in inner:
            total = total_derivative(one.tree, known)
            if total != Number(0.0):
                name = f"d {one.name} by {unknown}"
                lines += [f"{bodies.identifiers.of(name)} = {writer.value(total)}"]
                lines[-1:-1] = writer.take()
                known[one.name] = Name(name)
        texts = [writer.value(total_derivative(residual, known)) for residual in bodies.analysis.residuals(loop)]
        lines += writer.take()
        columns.append(texts)
    return lines, [[column[row] for column in columns] for row in range(len(bodies.analysis.residuals(loop)))]


def total_derivative(tree: Expression, known: dict[str, Expression]) -> Expression:
    """The derivative of a tree through names whose own derivatives are known."""
    total: Expression = Number(0.0)
    plain = transform(tree, _as_where)
    for name in sorted(names_in(tree)):
        if name in known:
            term = Operation("*", (derivative(plain, name), known[name]))
            total = Operation("+", (total, term))
    return simplify(total)


def _as_where(node: Expression) -> Expression:
    """A switched value as a choice between branches, which has a derivative."""
    if isinstance(node, Call) and node.function == "switched":
        return Call("where", (Call("switch", node.arguments[:1]), *node.arguments[1:]))
    return node


SCALAR = """\
def solve_{number}(start, low, high, {arrays}):
    best = start if start > low else low
    best = best if best < high else high
    count = 0
    while count < {iterations}:
        count += 1
        value = residual_{number}(best, {arrays})
        if value == 0.0:
            return best
        slope = slope_{number}(best, {arrays})
        move = div(-value, slope)
        if not (abs(move) < 1e300):
            count = {iterations} + 1
        else:
            trial = best + move
            trial = trial if trial > low else low
            trial = trial if trial < high else high
            if abs(trial - best) <= {relative} * abs(trial) + 1e-300:
                if trial > low and trial < high:
                    return trial
                count = {iterations} + 1
            best = trial
    centre = start if start > low else low
    centre = centre if centre < high else high
    width = abs(centre) + 1e-6
    if high - low < 1e299:
        width = (high - low) / 2000.0
    left = centre
    right = centre
    at_left = residual_{number}(centre, {arrays})
    at_right = at_left
    count = 0
    while count < 2000:
        count += 1
        further = left - width
        further = further if further > low else low
        value = residual_{number}(further, {arrays})
        if value * at_left <= 0.0:
            return bisect_{number}(further, left, value, {arrays})
        left = further
        at_left = value
        further = right + width
        further = further if further < high else high
        value = residual_{number}(further, {arrays})
        if value * at_right <= 0.0:
            return bisect_{number}(right, further, at_right, {arrays})
        right = further
        at_right = value
        if high - low >= 1e299:
            width = width * 1.05
    if {stops} == 1:
        return left if abs(at_left) < abs(at_right) else right
    n[1] = {error}
    return centre


def bisect_{number}(low, high, at_low, {arrays}):
    count = 0
    middle = low
    while count < 200:
        count += 1
        middle = 0.5 * (low + high)
        value = residual_{number}(middle, {arrays})
        if value == 0.0:
            return middle
        if value * at_low < 0.0:
            high = middle
        else:
            low = middle
            at_low = value
        if high - low <= {relative} * abs(middle):
            return middle
    return middle

"""


def _vector(bodies: Bodies, loop: Loop, number: int) -> str:
    """Newton on several unknowns, the small linear system eliminated in place."""
    size = len(loop.unknowns)
    outer = outer_texts(bodies, loop)
    arguments = ", ".join(["t, side, x, m, p, b, h, n, z", *outer])
    writer = bodies.writer()
    names = [bodies.read(unknown) for unknown in loop.unknowns]
    step = _inner_lines(bodies, loop, writer)
    for row in range(size):
        text = writer.value(bodies.analysis.residuals(loop)[row])
        step += [*writer.take(), f"r{row} = {text}"]
    slope_lines, slopes = _slopes(bodies, loop, writer)
    step += slope_lines
    step += [f"j{row}_{column} = {slopes[row][column]}" for row in range(size) for column in range(size)]
    step += _elimination(size)
    step.append("moved = 0.0")
    for row, name in enumerate(names):
        step += [f"{name} = {name} - s{row}", f"moved = greater(moved, div(abs(s{row}), abs({name}) + 1e-6))"]
    lines = [
        f"{name} = m[{bodies.memory['last of ' + unknown]}]" for name, unknown in zip(names, loop.unknowns, strict=True)
    ]
    lines += ["count = 0", "moved = 1.0", f"while count < {ITERATIONS} and not (moved <= {RELATIVE}):"]
    lines += ["    count += 1", *(f"    {line}" for line in step)]
    lines += ["if not (moved <= 1e-9):", f"    n[1] = {number + 1}"]
    lines += [
        f"m[{bodies.memory['now of ' + unknown]}] = {name}" for name, unknown in zip(names, loop.unknowns, strict=True)
    ]
    return bodies.function(f"solve_{number}({arguments})", [*lines, "return 0.0"])


def _elimination(size: int) -> list[str]:
    lines = []
    for pivot in range(size):
        for row in range(pivot + 1, size):
            lines.append(f"f = div(j{row}_{pivot}, j{pivot}_{pivot})")
            lines += [f"j{row}_{column} = j{row}_{column} - f*j{pivot}_{column}" for column in range(pivot, size)]
            lines.append(f"r{row} = r{row} - f*r{pivot}")
    for row in reversed(range(size)):
        known = "".join(f" - j{row}_{column}*s{column}" for column in range(row + 1, size))
        lines.append(f"s{row} = div(r{row}{known}, j{row}_{row})")
    return lines
