"""Strategies are compiled at once, in threads: nothing that they share may get into a muddle."""

from __future__ import annotations

import gc
import time
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor

import pytest

from loopsim.native.compiler import Module

LINES = "".join(f"    x[{k}] = a if b < {k} else (a + b * (c - {k})) / d\n" for k in range(300))


@pytest.fixture
def hurried() -> Iterator[None]:
    """Threads change over in the middle of everything."""
    thresholds = gc.get_threshold()

    def pause(*_: object) -> None:
        time.sleep(1e-5)

    gc.set_threshold(50)
    gc.callbacks.append(pause)
    yield
    gc.callbacks.remove(pause)
    gc.set_threshold(*thresholds)


@pytest.mark.usefixtures("hurried")
def test_texts_are_read_in_several_threads() -> None:
    """In Python 3.11 two parses at once stumble over one count of their depth (`SystemError`)."""
    text = f"def rates(a, b, c, d, x):\n{LINES}    return 0\n"
    with ThreadPoolExecutor(4) as pool:
        assert all("rates" in one.functions for one in pool.map(Module, [text] * 24))
