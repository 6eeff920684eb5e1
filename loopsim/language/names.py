"""Which names a block may use."""

from __future__ import annotations

import keyword
import re

from loopsim.language.functions import CONSTANTS

PATTERN = re.compile(r"[A-Za-z][A-Za-z0-9_]*")
TAKEN = ("on", "off", "none", "dt")


def check_name(name: str) -> str | None:
    """The reason why a name is not allowed, None when it is."""
    if not PATTERN.fullmatch(name):
        return f"'{name}' is not a name: letters, digits and _ are wanted, a letter first"
    if name in CONSTANTS:
        return f"'{name}' is a constant of the language"
    if name in TAKEN or keyword.iskeyword(name):
        return f"'{name}' is a word of the language"
    return None
