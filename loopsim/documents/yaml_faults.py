"""What the YAML parser trips over, in plain sentences with a cure."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass

import yaml

from loopsim.documents.source import Source
from loopsim.errors import Problem, Where

INDEXED_KEY = ("a key with an index cannot stand inside { }", "give a key with [i] a line of its own, not inside { }")

_JOINED = re.compile(r"^\s*(?:- )?[\w.\[\]+-]+(:)[^\s:]")


def comma_in_formula(text: str) -> tuple[str, str] | None:
    """What and hint, if a plain text inside { } or [ ] was cut by a comma within parentheses."""
    if text.count("(") <= text.count(")"):
        return None
    return f"a comma ends the value '{text}' inside {{ }} or [ ]", 'put the whole of it in quotes: is: "min(a, b)"'


def no_value(key: str, where: Where) -> tuple[str, str]:
    """What and hint for a key inside { } that holds nothing."""
    if where.text.startswith("[", where.column - 1 + len(key)):
        return INDEXED_KEY
    joined = re.match(r"^([A-Za-z_][\w.-]*):(\S.*)$", key)
    if joined:
        return f"no space after the colon in '{key}'", f"write {joined[1]}: {joined[2]}"
    before = where.text[: where.column - 1].rstrip()
    if re.match(r"^\d", key) and re.search(r"\d,$", before):
        return f"a comma ends the number before '{key}'", "write decimals with a point: 1.2 m^3"
    return f"'{key}' has no value", "a text with a comma needs quotes inside { }"


@dataclass(frozen=True, slots=True)
class _Spot:
    """Where the parser stopped, and what it was inside of (`opener`: the character that began it)."""

    source: Source
    line: int
    column: int
    opened: tuple[int, int] | None

    @property
    def text(self) -> str:
        return self.source.lines[self.line]

    @property
    def char(self) -> str:
        return self.text[self.column : self.column + 1]

    @property
    def before(self) -> str:
        return self.text[: self.column]

    @property
    def opener(self) -> str:
        if self.opened is None:
            return ""
        line, column = self.opened
        return self.source.lines[line][column : column + 1]

    @property
    def at_end(self) -> bool:
        rest = (self.text[self.column :], *self.source.lines[self.line + 1 :])
        return not any(part.strip() for part in rest)

    @property
    def here(self) -> Where:
        return self.source.place(self.line, self.column)

    @property
    def there(self) -> Where:
        return self.source.place(*self.opened) if self.opened else self.here

    def above(self) -> int:
        """The nearest line above with text on it; the line itself when there is none."""
        line = self.line - 1
        while line >= 0 and not self.source.lines[line].strip():
            line -= 1
        return line if line >= 0 else self.line


def explain(error: yaml.MarkedYAMLError, source: Source) -> Problem:
    """The problem that a scanner or parser error of YAML stands for."""
    spot = _spot(error, source)
    for rule in _RULES:
        found = rule(spot)
        if found:
            return found
    return Problem(f"this is not YAML: {error.problem}", "", spot.here)


def _spot(error: yaml.MarkedYAMLError, source: Source) -> _Spot:
    mark, context = error.problem_mark or error.context_mark, error.context_mark
    last = len(source.lines) - 1
    if mark is None:
        return _Spot(source, last, 0, None)
    line, column = (mark.line, mark.column) if mark.line <= last else (last, len(source.lines[last]))
    opened = (context.line, context.column) if context and context.line <= last else None
    return _Spot(source, line, column, opened)


def _indent(text: str) -> int:
    return len(text) - len(text.lstrip())


def _percent(spot: _Spot) -> Problem | None:
    if spot.char != "%" and not spot.text.startswith("%"):
        return None
    return Problem("a value cannot start with %", 'put the unit in quotes: unit: "%"', spot.here)


def _reserved(spot: _Spot) -> Problem | None:
    if spot.opener in ("*", "&", "!"):
        return Problem(f"a value cannot start with {spot.opener}", "put the text in quotes", spot.there)
    if not spot.char or spot.char not in "@`,?":
        return None
    return Problem(f"a value cannot start with {spot.char}", "put the text in quotes", spot.here)


def _index(spot: _Spot) -> Problem | None:
    if spot.char != "[" or spot.opener not in ("{", "[") or not re.search(r"\w$", spot.before):
        return None
    part = spot.before[spot.opened[1] + 1 if spot.opened and spot.opened[0] == spot.line else 0 :]
    if ":" not in part.rsplit(",", 1)[-1] and part.count("(") <= part.count(")"):
        return Problem(*INDEXED_KEY, spot.here)
    return Problem("an index cannot stand inside { } without quotes", 'quote the text: is: "T[n]"', spot.here)


def _open_quote(spot: _Spot) -> Problem | None:
    if not spot.opener or spot.opener not in "'\"" or not spot.at_end:
        return None
    return Problem("the quote that opens here is never closed", "close it at the end of the text", spot.there)


def _escape(spot: _Spot) -> Problem | None:
    if spot.opener != '"' or (spot.char != "\\" and not spot.before.endswith("\\")):
        return None
    return Problem('a backslash inside " " has a meaning of its own', "use single quotes around this text", spot.here)


def _open_bracket(spot: _Spot) -> Problem | None:
    if spot.opened is None or spot.opener not in ("{", "["):
        return None
    above = spot.source.lines[spot.opened[0]]
    if not spot.at_end and (spot.line == spot.opened[0] or _indent(spot.text) > _indent(above)):
        return None
    close = "}" if spot.opener == "{" else "]"
    return Problem(f"the {spot.opener} that opens here is never closed", f"add the {close}", spot.there)


def _wrong_bracket(spot: _Spot) -> Problem | None:
    if spot.char not in ("}", "]"):
        return None
    if spot.opener in ("{", "["):
        return Problem(f"the {spot.opener} is closed by a {spot.char}", "brackets close in pairs", spot.here)
    return Problem(f"a {spot.char} without its opening bracket", "take it out, or put the text in quotes", spot.here)


def _joined(spot: _Spot) -> Problem | None:
    lines = [spot.above(), spot.line] if spot.char in (":", "") else []
    if spot.opened and spot.opener not in ("{", "["):
        lines.append(spot.opened[0])
    for line in lines:
        match = _JOINED.match(spot.source.lines[line])
        if match:
            return Problem("no space after the colon", "write key: value", spot.source.place(line, match.start(1)))
    return None


def _second_colon(spot: _Spot) -> Problem | None:
    if spot.char != ":" or not re.search(r":\s", spot.before):
        return None
    return Problem("a second ': ' in one value", "put the text in quotes", spot.here)


def _deeper(spot: _Spot) -> Problem | None:
    if spot.char != ":":
        return None
    indent = _indent(spot.text)
    if not spot.before.strip():
        return Problem("a key is missing before the colon", "write key: value", spot.here)
    outer = [n for n in range(spot.line) if spot.source.lines[n].strip() and _indent(spot.source.lines[n]) < indent]
    if not outer:
        return None
    what = f"this line is indented deeper than line {outer[-1] + 1}, which has its value already"
    return Problem(what, f"line it up with line {outer[-1] + 1}", spot.source.place(spot.line, indent))


def _dash(spot: _Spot) -> Problem | None:
    if spot.char != "-":
        return None
    hint = "write a negative number without a space (-3); give each item of a list a line of its own"
    return Problem("a list item cannot start here", hint, spot.here)


def _among_items(spot: _Spot) -> Problem | None:
    if spot.opener != "-" or spot.char == "-":
        return None
    hint = "start every item with '- ', or line the key up with the keys above"
    return Problem("a key stands among the items of a list", hint, spot.here)


def _folding(spot: _Spot) -> Problem | None:
    if spot.opener not in (">", "|"):
        return None
    return Problem(f"a value cannot start with {spot.opener}", "put the text in quotes", spot.there)


def _after_quote(spot: _Spot) -> Problem | None:
    if not spot.before.rstrip().endswith(("'", '"')):
        return None
    return Problem("text follows a quote that is closed", "put the whole text inside the quotes", spot.here)


def _no_colon(spot: _Spot) -> Problem | None:
    if spot.opened is None or spot.opened[0] > spot.line or spot.opener in ("{", "["):
        return None
    text = spot.source.lines[spot.opened[0]]
    if re.search(r":(\s|$)", text) or not text.strip():
        return None
    above = [line for line in spot.source.lines[: spot.opened[0]] if line.strip()]
    if above and above[-1].lstrip().startswith("- ") and _indent(above[-1]) == _indent(text):
        return Problem("this line stands among the items of a list", "start every item with '- '", spot.there)
    return Problem("this line has no ': '", "write key: value", spot.there)


def _astray(spot: _Spot) -> Problem | None:
    if spot.before.strip() or not spot.text.strip():
        return None
    return Problem("the indentation of this line fits no entry above it", "line it up with its neighbours", spot.here)


_RULES: tuple[Callable[[_Spot], Problem | None], ...] = (
    _percent,
    _open_quote,
    _escape,
    _index,
    _open_bracket,
    _joined,
    _second_colon,
    _deeper,
    _wrong_bracket,
    _dash,
    _among_items,
    _folding,
    _reserved,
    _after_quote,
    _no_colon,
    _astray,
)
