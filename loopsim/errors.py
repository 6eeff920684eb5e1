"""Located problems, the exception tree, and the one place where a message is composed."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Where:
    """A place in a text file; `line` and `column` count from 1, `text` is the whole line."""

    file: str
    line: int
    column: int
    text: str = ""

    def shifted(self, columns: int) -> Where:
        """The same line, `columns` further to the right."""
        return Where(self.file, self.line, self.column + columns, self.text)


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing that is wrong: what was found and what was wanted, the cure, and where."""

    what: str
    hint: str = ""
    where: Where | None = None


class LoopsimError(Exception):
    """Base of all errors that a user is meant to read; carries located problems."""

    def __init__(self, problems: Iterable[Problem]) -> None:
        self.problems = tuple(problems)
        super().__init__("\n".join(compose(problem) for problem in self.problems))


class InputError(LoopsimError):
    """The files or the command are wrong (exit status 2)."""


class ComputationError(LoopsimError):
    """A computation could not be done (exit status 3): no steady state, divergence, step size lost."""


class Problems:
    """Collects problems so that all of them are told at once."""

    def __init__(self) -> None:
        self.found: list[Problem] = []

    def add(self, what: str, where: Where | None = None, hint: str = "") -> None:
        """Note one problem; the same one at the same place is noted once."""
        problem = Problem(what, hint, where)
        if problem not in self.found:
            self.found.append(problem)

    def raise_if_any(self) -> None:
        """Raise `InputError` with all that was noted, in order of file and line."""
        if self.found:
            raise InputError(sorted(self.found, key=_order))

    @contextmanager
    def collecting(self) -> Iterator[None]:
        """Turn an `InputError` raised inside into noted problems, and go on after the block."""
        try:
            yield
        except InputError as error:
            for problem in error.problems:
                self.add(problem.what, problem.where, problem.hint)


def _order(problem: Problem) -> tuple[str, int, int]:
    where = problem.where
    return (where.file, where.line, where.column) if where else ("", 0, 0)


def fail(what: str, where: Where | None = None, hint: str = "") -> InputError:
    """An `InputError` with a single problem, to be raised by the caller."""
    return InputError([Problem(what, hint, where)])


def compose(problem: Problem) -> str:
    """The text of a problem: `file:line:column: what`, the line with a caret, the cure."""
    lines = []
    where = problem.where
    if where is None:
        lines.append(problem.what)
    else:
        lines.append(f"{where.file}:{where.line}:{where.column}: {problem.what}")
        if where.text.strip():
            lines += ["    " + where.text, "    " + " " * (where.column - 1) + "^"]
    if problem.hint:
        lines.append("    " + problem.hint)
    return "\n".join(lines)


def nearest(name: str, choices: Iterable[str], wanted: str = "known here") -> str:
    """A hint that names the nearest valid names, or all of them when they are few."""
    known = sorted(set(choices))
    close = difflib.get_close_matches(name, known, n=3, cutoff=0.6)
    if close:
        return "did you mean " + " or ".join(f"'{one}'" for one in close) + "?"
    if not known:
        return "nothing is known here" if wanted == "known here" else f"there are no {wanted}"
    shown = ", ".join(known[:12]) + (", …" if len(known) > 12 else "")
    return f"{wanted}: {shown}"
