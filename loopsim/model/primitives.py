"""What needs the engine - dead time, plug flow, noise, earlier values - given a name of its own in the model."""

from __future__ import annotations

from typing import TYPE_CHECKING

from loopsim.language.derivative import simplify
from loopsim.language.tree import Call, Expression, Name, Number, Operation
from loopsim.model.draft import INNER
from loopsim.model.types import PRIME, DeadTime, Latch, Noise, ScanLatch, State

if TYPE_CHECKING:
    from loopsim.model.translate import Translator

FOR_EVER = 1e30  # s: the time since something became true long before the start


def primitive(part: Translator, node: Call, index: str, scan: bool) -> Expression:
    """The flat tree of a call that the engine serves."""
    match node.function:
        case "rounded":
            return _rounded(part, node, index, scan)
        case "delayed":
            return _delayed(part, node, index)
        case "transported":
            return _transported(part, node, index)
        case "noise":
            return _noise(part, node, index, scan)
        case "was":
            return _was(part, node.arguments[0], index)
    return _latched(part, node, index, scan)


def _outside(part: Translator, node: Expression, index: str) -> Expression:
    return simplify(part.tree(node, index, False))


def _rounded(part: Translator, node: Call, index: str, scan: bool) -> Expression:
    value, step = (part.tree(argument, index, scan) for argument in node.arguments)
    if part.draft.law or (part.draft.constant(step) and part.draft.static(step) == 0):
        return value
    return Call("rounded", (value, step), node.at)


def _refuse_free_zero(part: Translator, tree: Expression, what: str) -> None:
    if not part.draft.constant(tree):
        part.draft.problems.add(
            f"{what} of '{part.tag}' is zero at the start and an event changes it",
            part.where,
            "start it a little above zero, such as 1 ms or 1 mL",
        )


def _delayed(part: Translator, node: Call, index: str) -> Expression:
    argument, lag = (_outside(part, one, index) for one in node.arguments)
    if part.draft.law:
        return argument
    if part.draft.static(lag) == 0:
        _refuse_free_zero(part, lag, "a dead time")
        return argument
    return _dead_time(part, argument, lag, "")


def _transported(part: Translator, node: Call, index: str) -> Expression:
    argument, flow, volume = (_outside(part, one, index) for one in node.arguments)
    if part.draft.law:
        return argument
    if part.draft.static(volume) == 0:
        _refuse_free_zero(part, volume, "the volume")
        return argument
    return _dead_time(part, argument, volume, _swept(part, flow))


def _swept(part: Translator, flow: Expression) -> str:
    """The state that integrates a flow; a flow below zero counts as zero."""
    key = ("swept", part.tag, flow)
    if key not in part.draft.named:
        name = part.draft.fresh(part.tag, "swept")
        part.draft.named[key] = name
        rate = Call("max", (flow, Number(0.0)))
        part.draft.states[name] = State(name, part.tag, INNER, Number(0.0), rate, part.where)
    return part.draft.named[key]


def _dead_time(part: Translator, argument: Expression, lag: Expression, swept: str) -> Expression:
    key = ("dead time", part.tag, argument, lag, swept)
    if key not in part.draft.named:
        name = part.draft.fresh(part.tag, "transported" if swept else "delayed")
        part.draft.named[key] = name
        part.draft.dead_times[name] = DeadTime(name, part.tag, argument, lag, part.where, swept)
    return Name(part.draft.named[key])


def _noise(part: Translator, node: Call, index: str, scan: bool) -> Expression:
    deviation = part.tree(node.arguments[0], index, scan)
    if part.draft.law or (part.draft.constant(deviation) and part.draft.static(deviation) == 0):
        return Number(0.0)
    key = ("noise", part.tag, part.noise_number(node), index)
    if key not in part.draft.named:
        suffix = f".{index}" if index else ""
        name = part.draft.fresh(part.tag, "noise")
        part.draft.named[key] = name
        seed = f"{part.tag}#{part.noise_number(node)}{suffix}"
        steady = _outside(part, node.arguments[1], index)
        part.draft.noises[name] = Noise(name, part.tag, seed, steady, part.where)
    return Operation("*", (deviation, Name(part.draft.named[key])), node.at)


def _was(part: Translator, argument: Expression, index: str) -> Expression:
    if isinstance(argument, Name):
        element = part.elements.name(argument, index)
        if element in part.scanned:
            return _stored(part, element)
    outside = _outside(part, argument, index)
    if part.draft.law or part.draft.constant(outside):
        return outside
    key = ("was", part.tag, outside)
    if key not in part.draft.named:
        slot = part.draft.fresh(part.tag, "was")
        part.draft.named[key] = slot
        part.draft.remember(slot, part.tag, outside, part.where)
        part.was_slots[slot] = (outside, simplify(part.tree(argument, index, True)))
    return Name(part.draft.named[key])


def _stored(part: Translator, element: str) -> Expression:
    """What stands of a scanned name: its memory, its state, or what the last execution left of a formula."""
    flat = part.flat(element)
    if part.mode == "scanned":
        return Name(part.remember(element))
    if part.mode == "law":
        return part.scan_name(element, False)
    current = part.scan_name(element, False)
    if flat in part.draft.states or part.is_law_state(element):
        return current
    part.left[element] = f"{flat}.left"
    start = part.start_of(element) if part.held_entry(element) is not None else current
    part.draft.remember(part.left[element], part.tag, start, part.where)
    return Name(part.left[element])


def _latched(part: Translator, node: Call, index: str, scan: bool) -> Expression:
    """`since(c)` and `held(x, c)`."""
    *value, condition = (simplify(part.tree(argument, index, scan)) for argument in node.arguments)
    argument = value[0] if value else None
    otherwise = argument if argument is not None else Number(0.0)
    if condition == Number(0.0):
        return otherwise
    if part.draft.law:
        return Call("where", (condition, Number(FOR_EVER), Number(0.0))) if argument is None else otherwise
    key = (node.function, part.tag, scan, condition, argument)
    if key not in part.draft.named:
        part.draft.named[key] = _new_latch(part, node.function, condition, argument, scan)
    return Name(part.draft.named[key])


def _new_latch(part: Translator, kind: str, condition: Expression, argument: Expression | None, scan: bool) -> str:
    stem = part.draft.fresh(part.tag, kind)
    slots = (f"{stem}.from", f"{stem}.on")
    for slot in slots:
        part.draft.remember(slot, part.tag, Number(0.0), part.where)
    if scan:
        name = stem + PRIME
        part.statements[name] = ScanLatch(name, kind, condition, argument, slots, part.where)
        return name
    part.draft.latches[stem] = Latch(stem, part.tag, kind, condition, argument, slots, part.where)
    return stem
