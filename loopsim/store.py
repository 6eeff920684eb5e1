"""What is kept on disk between processes: compiled code, models that have been read. Safe to delete at any time."""

from __future__ import annotations

import hashlib
import os
import pickle
import sys
import tempfile
from collections.abc import Callable, Iterable
from functools import cache
from pathlib import Path
from typing import TypeVar

from loopsim import __version__

Kept = TypeVar("Kept")


def folder() -> Path:
    """Where things are kept: LOOPSIM_CACHE, else the user's cache folder."""
    named = os.environ.get("LOOPSIM_CACHE")
    return Path(named) if named else Path(os.environ.get("XDG_CACHE_HOME", Path.home() / ".cache")) / "loopsim"


@cache
def _program() -> str:
    """What tells this build of loopsim and this Python from others."""
    files = sorted(Path(__file__).parent.rglob("*.py"))
    stamps = [f"{file.name}/{stat.st_size}/{stat.st_mtime_ns}" for file in files for stat in (file.stat(),)]
    return "\n".join([__version__, sys.version, *stamps])


def digest(parts: Iterable[str | bytes]) -> str:
    """A name that follows from the parts, and from this build of loopsim and Python."""
    found = hashlib.sha256(_program().encode())
    for part in parts:
        data = part.encode() if isinstance(part, str) else part
        found.update(str(len(data)).encode() + b":" + data)
    return found.hexdigest()


def read(path: Path) -> bytes | None:
    """What was kept there, None where nothing can be read."""
    try:
        return path.read_bytes()
    except OSError:
        return None


def write(path: Path, data: bytes) -> None:
    """Write a file that other processes see whole or not at all; a folder that cannot be written is left alone."""
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, name = tempfile.mkstemp(dir=path.parent)
        with os.fdopen(handle, "wb") as file:
            file.write(data)
        os.replace(name, path)
    except OSError:
        return


def kept(key: str, make: Callable[[], Kept]) -> Kept:
    """What was kept under a key, made now where it was not; what cannot be read back is made again.

    The folder is trusted as code is: it holds compiled code too.
    """
    path = folder() / f"{key}.model"
    data = read(path)
    if data is not None:
        try:
            found: Kept = pickle.loads(data)
            return found
        except Exception:  # cut short, or of another build: whatever the reason, it can be made again
            pass
    made = make()
    write(path, pickle.dumps(made, protocol=pickle.HIGHEST_PROTOCOL))
    return made
