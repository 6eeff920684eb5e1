"""From a path to clean lines of text: encoding, size, tabs and characters that nobody can see."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

from loopsim.errors import InputError, Where, fail, nearest

MOST_BYTES = 4_000_000

_SPACES = str.maketrans({"\t": " ", "\u00a0": " ", "\u2009": " ", "\u202f": " "})
_UNSEEN = re.compile(
    "[\x00-\x09\x0b-\x1f\x7f-\x9f\xad\u200b-\u200f\u2028-\u202e\u2060-\u206f\ufeff\ufffe\uffff\ud800-\udfff]"
)


@dataclass(frozen=True, slots=True)
class Source:
    """A text file: its name as the user gave it, and its lines without their ends."""

    file: str
    lines: tuple[str, ...]

    def place(self, line: int, column: int) -> Where:
        """The place of a line and column that count from 0."""
        text = self.lines[line] if line < len(self.lines) else ""
        return Where(self.file, line + 1, column + 1, text)


def read_source(path: Path, asked_at: Where | None = None) -> Source:
    """Read a text file; `asked_at` is where another file asks for it. Raises `InputError`."""
    try:
        with path.open("rb") as file:
            raw = file.read(MOST_BYTES + 1)
    except FileNotFoundError:
        raise missing(path, asked_at) from None
    except IsADirectoryError:
        raise fail(f"'{path}' is a folder; a file is wanted", asked_at) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise fail(f"the file '{path}' cannot be read: {reason}", asked_at) from None
    if len(raw) > MOST_BYTES:
        raise fail(f"the file '{path}' is larger than {MOST_BYTES // 1_000_000} MB", asked_at)
    return source_from(raw, str(path))


def missing(path: Path, asked_at: Where | None) -> InputError:
    """The error for a file that is not there, with the nearest name in its folder."""
    folder = path.parent
    if not folder.is_dir():
        return fail(f"the file '{path}' is not there", asked_at, f"there is no folder '{folder}'")
    names = [entry.name for entry in folder.iterdir() if entry.suffix == path.suffix]
    hint = nearest(path.name, names, f"in '{folder}'") if names else f"no {path.suffix} file is in '{folder}'"
    return fail(f"the file '{path}' is not there", asked_at, hint)


def source_from(raw: bytes, file: str) -> Source:
    """Clean lines from the bytes of a file. Raises `InputError` for what is not plain UTF-8 text."""
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        raise fail(f"the file '{file}' is not UTF-8 text (line {line})", None, "save it as UTF-8") from None
    text = text.replace("\r\n", "\n").replace("\r", "\n")
    lines = tuple(text.split("\n"))
    _refuse_indenting_tabs(lines, file)
    cleaned = text.translate(_SPACES)
    source = Source(file, tuple(cleaned.split("\n")))
    unseen = _UNSEEN.search(cleaned)
    if unseen:
        before = cleaned[: unseen.start()].split("\n")
        where = source.place(len(before) - 1, len(before[-1]))
        code = f"U+{ord(unseen.group()):04X}"
        raise fail(f"a character that cannot be seen ({code}) stands here", where, "take it out")
    return source


def _refuse_indenting_tabs(lines: tuple[str, ...], file: str) -> None:
    for number, line in enumerate(lines):
        indent = len(line) - len(line.lstrip())
        tab = line.find("\t", 0, indent)
        if tab >= 0 and line.strip() and not line.lstrip().startswith("#"):
            where = Where(file, number + 1, tab + 1, line.replace("\t", " "))
            raise fail("a tab stands in the indentation", where, "indent with spaces")
