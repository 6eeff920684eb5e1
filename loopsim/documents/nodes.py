"""Text to a tree of located nodes. Every scalar stays text: YAML's own typing (no -> false, 1:30 -> 90) never happens.

Anchors, aliases, tags, merge keys and several documents in one file are refused: a tree is no larger than its text.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from typing import Any

import yaml

from loopsim.documents.source import Source
from loopsim.documents.yaml_faults import comma_in_formula, explain, no_value
from loopsim.errors import InputError, Problem, Problems, Where, fail

try:
    from yaml import CSafeLoader as _Parser
except ImportError:  # PyYAML built without libyaml
    from yaml import SafeLoader as _Parser  # type: ignore[assignment]

MOST_NODES = 200_000
MOST_DEPTH = 40
_SENTENCES = ("about", "source")


@dataclass(frozen=True, slots=True)
class Scalar:
    """A text as written; `plain` when it stands without quotes. Line and column of its first character, from 0."""

    text: str
    plain: bool
    source: Source
    line: int
    column: int

    @property
    def where(self) -> Where:
        """The place of the first character; the line shown holds the whole text, also where it is folded."""
        place = self.source.place(self.line, self.column)
        if place.text.startswith(self.text, self.column):
            return place
        return replace(place, text=place.text[: self.column] + self.text)

    @property
    def empty(self) -> bool:
        """Nothing is written here."""
        return self.plain and not self.text


@dataclass(frozen=True, slots=True)
class Entry:
    """A key and what it holds."""

    key: Scalar
    value: Node


@dataclass(frozen=True, slots=True)
class Mapping:
    """Keys with what they hold, in the order written."""

    entries: dict[str, Entry]
    where: Where

    def get(self, key: str) -> Node | None:
        """What a key holds, or None."""
        entry = self.entries.get(key)
        return entry.value if entry else None

    def __iter__(self) -> Iterator[Entry]:
        return iter(self.entries.values())


@dataclass(frozen=True, slots=True)
class Sequence:
    """A list."""

    items: tuple[Node, ...]
    where: Where


Node = Scalar | Mapping | Sequence


def compose(source: Source, problems: Problems) -> Node:
    """The tree of a source. Duplicate keys are noted in `problems`; what is not good YAML raises `InputError`."""
    builder = _Builder(source, problems)
    parser: Any = _Parser("\n".join(source.lines))
    try:
        while parser.check_event():
            builder.take(parser.get_event())
    except yaml.MarkedYAMLError as error:
        builder.fatal.append(explain(error, source))
    except yaml.YAMLError as error:
        builder.fatal.append(Problem(f"the file '{source.file}' is not YAML: {error}"))
    finally:
        parser.dispose()
    if builder.fatal:
        raise InputError([*problems.found, *_first_of_each_line(builder.fatal)])
    if builder.root is None or (isinstance(builder.root, Scalar) and builder.root.empty):
        raise fail(f"the file '{source.file}' is empty", None, "it starts with block:, plant:, strategy: or scenario:")
    return builder.root


def _first_of_each_line(found: list[Problem]) -> list[Problem]:
    """What follows on the same line is mostly an echo of the first."""
    first: dict[int, Problem] = {}
    for problem in found:
        first.setdefault(problem.where.line if problem.where else 0, problem)
    return list(first.values())


def _continues_sentence(entries: dict[str, Entry], key: Scalar, value: Node) -> bool:
    """Inside { } a phrase without a value belongs to the `about` before it, which its comma has cut."""
    last = next(reversed(entries), "")
    phrase = key.plain and not key.text.isalnum() and isinstance(value, Scalar) and value.empty
    if last not in _SENTENCES or not phrase:
        return False
    old = entries[last]
    if isinstance(old.value, Scalar) and old.value.plain:
        entries[last] = Entry(old.key, replace(old.value, text=f"{old.value.text}, {key.text}"))
        return True
    return False


@dataclass(slots=True)
class _Open:
    """A mapping or list whose end has not been reached."""

    where: Where
    flow: bool
    entries: dict[str, Entry] | None
    items: list[Node] = field(default_factory=list)
    key: Scalar | None = None


class _Builder:
    """Takes parser events one by one and grows the tree, without recursion."""

    def __init__(self, source: Source, problems: Problems) -> None:
        self.source, self.problems = source, problems
        self.root: Node | None = None
        self.fatal: list[Problem] = []
        self._open: list[_Open] = []
        self._count = 0
        self._documents = 0

    def take(self, event: yaml.Event) -> None:
        """Grow the tree by one event."""
        if isinstance(event, yaml.ScalarEvent):
            self._refuse_extras(event)
            self._add(self._scalar(event))
        elif isinstance(event, yaml.CollectionStartEvent):
            self._refuse_extras(event)
            self._start(event)
        elif isinstance(event, yaml.CollectionEndEvent):
            self._end()
        elif isinstance(event, yaml.AliasEvent):
            hint = f'put text that starts with * in quotes: "*{event.anchor} …"'
            raise self._stop("a value cannot start with *", event, hint)
        elif isinstance(event, yaml.DocumentStartEvent):
            self._documents += 1
            if self._documents > 1:
                raise self._stop("a second document starts here", event, "take out the ---")

    def _place(self, event: yaml.Event) -> Where:
        assert event.start_mark is not None
        return self.source.place(event.start_mark.line, event.start_mark.column)

    def _stop(self, what: str, event: yaml.Event, hint: str) -> InputError:
        return InputError([*self.problems.found, *self.fatal, Problem(what, hint, self._place(event))])

    def _refuse_extras(self, event: yaml.ScalarEvent | yaml.CollectionStartEvent) -> None:
        if event.anchor is not None:
            raise self._stop("a value cannot start with &", event, "put text that starts with & in quotes")
        if event.tag is not None:
            raise self._stop("a value cannot start with !", event, "write the value alone, or put it in quotes")
        self._count += 1
        if self._count > MOST_NODES:
            raise self._stop(f"the file has more than {MOST_NODES} values", event, "split it, or keep long data in CSV")

    def _scalar(self, event: yaml.ScalarEvent) -> Scalar:
        assert event.start_mark is not None
        line, column = event.start_mark.line, event.start_mark.column
        text = " ".join(event.value.split()) if "\n" in event.value else event.value.strip()
        if event.style in ("'", '"'):
            column += 1
        elif event.style in ("|", ">"):
            line, column = self._first_text(line + 1)
        return Scalar(text, event.style in (None, ""), self.source, line, column)

    def _first_text(self, line: int) -> tuple[int, int]:
        lines = self.source.lines
        line = min(line, len(lines) - 1)
        while line < len(lines) - 1 and not lines[line].strip():
            line += 1
        return line, len(lines[line]) - len(lines[line].lstrip())

    def _start(self, event: yaml.CollectionStartEvent) -> None:
        if len(self._open) >= MOST_DEPTH:
            raise self._stop(f"nested more than {MOST_DEPTH} deep", event, "")
        top = self._open[-1] if self._open else None
        if top and top.entries is not None and top.key is None:
            raise self._stop("a list or mapping stands where a key is wanted", event, "an index follows a name: T[i]")
        entries: dict[str, Entry] | None = {} if isinstance(event, yaml.MappingStartEvent) else None
        self._open.append(_Open(self._place(event), bool(event.flow_style), entries))

    def _end(self) -> None:
        done = self._open.pop()
        if done.entries is None:
            self._add(Sequence(tuple(done.items), done.where))
        else:
            self._add(Mapping(done.entries, done.where))

    def _add(self, node: Node) -> None:
        if not self._open:
            self.root = node
            return
        top = self._open[-1]
        if top.entries is None:
            self._check_flow(top, None, node)
            top.items.append(node)
        elif top.key is None:
            assert isinstance(node, Scalar)
            top.key = node
        else:
            self._pair(top, top.entries, top.key, node)
            top.key = None

    def _pair(self, top: _Open, entries: dict[str, Entry], key: Scalar, value: Node) -> None:
        if top.flow and _continues_sentence(entries, key, value):
            return
        self._check_flow(top, key, value)
        if key.text == "<<" and key.plain:
            self.fatal.append(Problem("merge keys (<<) are not used here", "write the keys out", key.where))
        elif not key.text:
            self.fatal.append(Problem("a key is missing before the colon", "", key.where))
        elif key.text in entries:
            first = entries[key.text].key.where
            self.problems.add(f"'{key.text}' stands twice; first on line {first.line}", key.where, "keep one of them")
        else:
            entries[key.text] = Entry(key, value)

    def _check_flow(self, top: _Open, key: Scalar | None, value: Node) -> None:
        """Inside { } and [ ] a comma ends a value and a missing value goes unseen."""
        if not top.flow or not isinstance(value, Scalar):
            return
        prose = key is not None and key.text in _SENTENCES
        cut = comma_in_formula(value.text) if value.plain and not prose else None
        if cut:
            self.fatal.append(Problem(*cut, value.where))
        elif value.empty and key is not None:
            self.fatal.append(Problem(*no_value(key.text, key.where), key.where))
