"""A block's `check:` carried out: the block alone, its inputs given, against the value that its source states."""

from __future__ import annotations

import numpy as np

from loopsim.documents.catalogue import Catalogue
from loopsim.documents.types import Block, Check, Diagram, Scenario, Use
from loopsim.documents.values import seconds
from loopsim.errors import ComputationError, Problem, Problems, fail, nearest
from loopsim.language.dimensions import Dimension
from loopsim.language.units import DIMENSIONLESS, PERCENT, Unit, difference_of, from_si, parse_unit
from loopsim.model.assemble import assemble
from loopsim.model.numbers import FloatArray, system_of
from loopsim.model.rest import OperatingPoint, rest
from loopsim.model.scales import si_value
from loopsim.model.types import Model
from loopsim.simulation.conditions import resolve
from loopsim.simulation.run import prepare, run


def run_check(block: Block, check: Check, catalogue: Catalogue) -> tuple[float, bool]:
    """The value that a check asks for, in the unit of its `is:`, and whether it agrees within `within:`.

    `at`: a signal at rest. `gain`: its slope by another at rest. `time_constant`: sum of lags less sum of leads of the
    linearised law between the two, -G'(0)/G(0), dead times left out. `after`: a signal at a time of a run from
    the `start`s.
    Raises `InputError` for names and units that do not fit, `ComputationError` where there is no rest or no slope.
    """
    diagram = case_of(block, check)
    if check.after is not None:
        found = _after(block, check, diagram, catalogue)
    elif check.at:
        law = assemble([diagram], catalogue, law=True)
        flat = _name(block, check, check.at, law)
        _refuse_other_kind(check, _scale(law, flat).dimension, _scale(law, flat).point)
        found = rest(law).values[flat]
    else:
        found = _slope(block, check, assemble([diagram], catalogue, law=True))
    unit = _unit(check)
    value = from_si(found, unit if check.at or check.after else difference_of(unit))
    return value, abs(value - check.expected.value) <= _allowed(check)


def case_of(block: Block, check: Check) -> Diagram:
    """A plant that holds the block alone, under its own name as its tag, with the values of a check."""
    use = Use(block.name, block.name, dict(check.given), check.where)
    return Diagram("plant", block.name, check.where, blocks={block.name: use})


# ---------------------------------------------------------------- what is compared with what
def _unit(check: Check) -> Unit:
    return check.expected.unit or DIMENSIONLESS


def _allowed(check: Check) -> float:
    """How far off the value may be, in the unit of `is:`; `within:` in % is of the expected value."""
    within, unit = check.within, _unit(check)
    if within.unit == PERCENT:
        if unit.point:
            raise fail(f"{within.text} of a point on the scale of {unit.text}", within.where, "write a difference")
        return abs(check.expected.value) * within.value / 100.0
    problems, difference = Problems(), difference_of(unit)
    value = si_value(within, difference if within.unit else DIMENSIONLESS, problems, 0.0, "'within'")
    if within.unit is None and unit.dimension.powers:
        problems.add(f"the bare number {within.text} where 'within' wants {difference.text}", within.where)
    problems.raise_if_any()
    return value / difference.factor


def _name(block: Block, check: Check, name: str, model: Model) -> str:
    """The model's name of one of the block's; a port of a block of blocks is the port inside."""
    flat = resolve(model, f"{block.name}.{block.ports.get(name, name)}")
    if flat is None:
        known = [one.removeprefix(f"{block.name}.") for one in model.signals]
        raise fail(f"the block '{block.name}' has no '{name}'", check.where, nearest(name, known, "signals"))
    return flat


def _source(block: Block, check: Check, name: str, model: Model) -> str:
    """The model's name of what is moved: the value given, not the one in use."""
    flat = f"{block.name}.{block.ports.get(name, name)}"
    return flat if flat in model.slots else _name(block, check, name, model)


def _refuse_other_kind(check: Check, dimension: Dimension, point: bool = False) -> None:
    """The value expected must be of the kind of what is asked for."""
    unit = _unit(check)
    if unit.dimension != dimension or unit.point != point:
        wanted = "a point on a scale" if point else dimension.describe()
        raise fail(f"{check.expected.text} where {wanted} is meant", check.expected.where)


def _scale(model: Model, flat: str) -> Unit:
    """The unit of a name that people can read or give."""
    known = model.signals.get(flat) or model.slots.get(flat) or model.states.get(flat) or model.memory.get(flat)
    return known.unit if known else DIMENSIONLESS


# ---------------------------------------------------------------- slopes
def _slope(block: Block, check: Check, law: Model) -> float:
    """The gain [SI] or the time constant [s] between two names at rest."""
    ends = check.gain or check.time_constant
    assert ends is not None
    source, target = _source(block, check, ends[0], law), _name(block, check, ends[1], law)
    quotient = _scale(law, target).dimension.divide(_scale(law, source).dimension)
    _refuse_other_kind(check, quotient if check.gain else parse_unit("s").dimension)
    matrix, by_source, by_unknown, direct, mass = _linear(law, rest(law), source, target)
    # what nothing moves stands where it is, such as the integral term of a controller without integral action
    moved = np.any(matrix != 0.0, axis=1) | (by_source != 0.0)
    matrix = matrix[np.ix_(moved, moved)]
    try:
        move = np.linalg.solve(matrix, by_source[moved])
        gain = direct - float(by_unknown[moved] @ move)
        later = float(by_unknown[moved] @ np.linalg.solve(matrix, mass[moved] * move))
    except np.linalg.LinAlgError:
        what = f"'{ends[1]}' does not come to rest after a step of '{ends[0]}': there is no gain"
        raise ComputationError([Problem(what, "ask for a value `after` a time", check.where)]) from None
    if check.gain:
        return gain
    if gain == 0.0:
        raise fail(f"'{ends[0]}' does not move '{ends[1]}' at rest: there is no time constant", check.where)
    return later / gain


def _linear(
    law: Model, point: OperatingPoint, source: str, target: str
) -> tuple[FloatArray, FloatArray, FloatArray, float, FloatArray]:
    """The slopes at rest: M du/dt = A du + b dp, dy = c du + d dp, M diagonal.

    Returns A of shape (n, n), b (n,), c (n,), d, and the diagonal of M (n,).
    """
    system, values = system_of(law), point.values
    count = len(system.unknowns)
    by_source = system.carried(values, {source: {0: 1.0}}, held=(source,))
    seeds = {name: {place: 1.0} for place, name in enumerate(system.unknowns)}
    by_unknown = system.carried(values, seeds, held=(source,)).get(target, {})
    moves = [0.0 if name not in law.states or law.states[name].mapped else 1.0 for name in system.unknowns]
    return (
        system.jacobian(values, held=(source,)),
        system.rows_by(values, by_source, 1)[:, 0],
        np.array([by_unknown.get(place, 0.0) for place in range(count)]),
        by_source.get(target, {}).get(0, 0.0),
        np.array(moves),
    )


# ---------------------------------------------------------------- runs
def _after(block: Block, check: Check, diagram: Diagram, catalogue: Catalogue) -> float:
    """A signal [SI] at a time of a run from the starts of the block, all inputs as given."""
    assert check.after is not None
    time, name = check.after
    law, timed = assemble([diagram], catalogue, law=True), assemble([diagram], catalogue)
    flat = _name(block, check, name, timed)
    _refuse_other_kind(check, _scale(timed, flat).dimension, _scale(timed, flat).point)
    lasts = seconds(time)
    if lasts <= 0:
        raise fail(f"{time.text} is no time to wait", time.where, "write a time above zero, or use `at:`")
    scenario = Scenario(block.name, check.where, "", {}, lasts=time, starts="given")
    simulation = prepare(timed, law, None, scenario, {name: flat}, {name: flat})
    result = run(simulation, lasts)
    status = result.trends.status
    if status.code != "done":
        raise ComputationError([Problem(status.sentence, "", check.where)])
    return float(result.trends.columns[name][-1])
