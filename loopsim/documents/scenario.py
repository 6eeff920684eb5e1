"""Scenario files."""

from __future__ import annotations

from pathlib import Path

from loopsim.documents.events import event
from loopsim.documents.fields import Fields, address, beside, items, name, scalar, tag, whole
from loopsim.documents.nodes import Entry, Mapping, Node
from loopsim.documents.rules import rule
from loopsim.documents.shapes import RECORD, SCENARIO
from loopsim.documents.types import Quantity, Rule, Scenario
from loopsim.documents.values import positive_duration, seconds
from loopsim.errors import Problems, fail, nearest


def scenario_from(tree: Mapping, problems: Problems) -> Scenario:
    """The scenario that a tree describes. What is wrong is noted in `problems`, and it is then of no use."""
    fields = Fields(tree, SCENARIO, "a scenario", problems)
    where = tree.entries["scenario"].value.where
    folder = Path(where.file).parent
    strategies = fields.named("strategies", lambda entry: _strategy(entry, folder, problems))
    named = fields.node.get("strategies")
    if isinstance(named, Mapping) and not named.entries:
        problems.add("there is no strategy", fields.place("strategies"), "write {none: []} for the plant alone")
    lasts = fields.read("lasts", positive_duration)
    every, signals = _record(fields)
    made = Scenario(
        name=fields.read("scenario", lambda node: tag(node, "a name")) or "",
        where=where,
        plant=fields.read("plant", lambda node: beside(node, folder)) or "",
        strategies=strategies,
        lasts=lasts or Quantity(0.0, None, "", where),
        about=fields.text("about"),
        must_pass=_must_pass(fields, strategies),
        starts=fields.read("starts", _starts) or "steady",
        seed=fields.read("seed", whole) or 0,
        record_every=every,
        record_signals=signals,
        points=fields.every("points", lambda node: tag(node, "the name of a point")),
        events=fields.every("events", lambda node: event(node, folder, problems)),
        accept=fields.every("accept", lambda node: rule(node, problems)),
    )
    if lasts is not None:
        _check_times(made, problems)
    return made


def _strategy(entry: Entry, folder: Path, problems: Problems) -> tuple[str, tuple[str, ...]]:
    files = []
    for node in items(entry.value, "strategy files"):
        with problems.collecting():
            files.append(beside(node, folder))
    return tag(entry.key, "the name of a strategy"), tuple(files)


def _starts(node: Node) -> str:
    found = scalar(node, "steady or given")
    if found.text not in ("steady", "given"):
        raise fail(f"'{found.text}' is not a start", found.where, "write steady or given")
    return found.text


def _record(fields: Fields) -> tuple[Quantity | None, tuple[str, ...] | None]:
    node = fields.node.get("record")
    if node is None:
        return None, None
    record = fields.attempt(lambda: Fields(node, RECORD, "'record'", fields.problems))
    if record is None:
        return None, None
    signals = record.every("signals", address) if "signals" in record else None
    return record.read("every", positive_duration), signals


def _must_pass(fields: Fields, strategies: dict[str, tuple[str, ...]]) -> tuple[str, ...] | None:
    """The strategies that decide; None: all. Those named must be there."""

    def one(node: Node) -> str:
        found = name(node)
        if found not in strategies:
            raise fail(f"there is no strategy '{found}'", node.where, nearest(found, strategies, "strategies"))
        return found

    return fields.every("must_pass", one) if "must_pass" in fields else None


def _check_times(made: Scenario, problems: Problems) -> None:
    """Nothing happens, and nothing is judged, after the end of the run."""
    end, text = seconds(made.lasts), made.lasts.text
    for event_ in made.events:
        if event_.at is not None and seconds(event_.at) > end:
            what = f"this event comes at {event_.at.text}; the run lasts {text}"
            problems.add(what, event_.at.where, "let the run last longer")
    for judged in made.accept:
        _check_window(judged, end, text, problems)


def _check_window(one: Rule, end: float, text: str, problems: Problems) -> None:
    after = seconds(one.after) if one.after else 0.0
    if one.after is not None and after >= end:
        what = f"the window starts at {one.after.text}; the run lasts {text}"
        problems.add(what, one.after.where, "let the run last longer")
    if one.until is not None and seconds(one.until) <= after:
        what = f"the window ends at {one.until.text}, before it starts"
        problems.add(what, one.until.where, "let it end later, or start earlier")
