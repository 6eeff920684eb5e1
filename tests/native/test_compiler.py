"""The small compiler, construct by construct: the same bits as Python gives."""

from __future__ import annotations

import ctypes
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from loopsim.native.build import build_native
from loopsim.native.compiler import Module
from loopsim.native.kinds import NotCompilable
from loopsim.simulation.guarded import GUARDED_FUNCTIONS

TEXT = """
NX = 3
HALF = 0.5


def swap(a, i, j):
    kept = a[i]
    a[i] = a[j]
    a[j] = kept
    return 0.0


def choose(a, b):
    return a if a > b and not a > 100.0 or b != b else b


def count_down(n):
    k = n
    total = 0
    while k > 0:
        k = k - 1
        if k == 2:
            continue
        total += k
    return total


def sums(a, entry):
    total = 0.0
    n = entry
    for i in range(NX):
        total = total + a[i] * HALF
    for i in range(1, n):
        total += i
    return total


def functions(a, b):
    return power(abs(a), b) + exponential(a / 10.0) * sine(b) - div(a, b) + root(abs(b)) + floor(a) + logarithm(abs(a) + 1.0)


def entry(a, n, out):
    out[0] = choose(a[0], a[1])
    out[1] = sums(a, n)
    out[2] = functions(a[0], a[1])
    out[3] = float_of(int(a[2] / 7.0))
    out[4] = -a[0] + (1.0 if n == 4 else 2.0)
    swap(a, 0, 2)
    return count_down(n)


def float_of(k):
    return 1.0 * k
"""


def python_entry() -> Any:
    namespace: dict[str, Any] = dict(GUARDED_FUNCTIONS)
    exec(TEXT, namespace)
    return namespace["entry"]


NATIVE = build_native(TEXT, {"entry": ("F", "i", "F")})
FINITE = st.floats(-1e3, 1e3)


@settings(max_examples=300)
@given(st.tuples(FINITE, FINITE, FINITE), st.integers(0, 6))
def test_every_construct_gives_the_bits_of_python(numbers: tuple[float, float, float], n: int) -> None:
    mine, out = list(numbers), [0.0] * 5
    status = python_entry()(mine, n, out)
    theirs, out_native = np.array(numbers), np.zeros(5)
    assert NATIVE.entries["entry"](theirs.ctypes.data, n, out_native.ctypes.data) == status
    assert theirs.tolist() == mine
    assert np.array_equal(out_native, np.array(out), equal_nan=True)


@pytest.mark.parametrize("value", [0.0, math.nan, math.inf, -math.inf])
def test_what_has_no_value_is_alike(value: float) -> None:
    mine, out = [value, 0.0, 1.0], [0.0] * 5
    python_entry()(mine, 1, out)
    theirs, out_native = np.array([value, 0.0, 1.0]), np.zeros(5)
    NATIVE.entries["entry"](theirs.ctypes.data, ctypes.c_int64(1), out_native.ctypes.data)
    assert np.array_equal(np.isfinite(out_native), np.isfinite(out))


@pytest.mark.parametrize(
    "text",
    [
        "def f(a):\n    return [a]\n",
        "def f(a):\n    return g(a)\n",
        "def f(a):\n    with a:\n        pass\n",
        "def f(a):\n    return b\n",
    ],
)
def test_text_outside_the_language_is_refused(text: str) -> None:
    with pytest.raises(NotCompilable):
        Module(text).entry("f", ("f",))


def test_a_cache_that_is_broken_or_cannot_be_written_does_no_harm(tmp_path: Path) -> None:
    blocked = tmp_path / "file"
    blocked.write_text("not a folder")
    build_native(TEXT, {"entry": ("F", "i", "F")}, blocked)
    build_native(TEXT, {"entry": ("F", "i", "F")}, tmp_path / "cache")
    assert list((tmp_path / "cache").glob("*.o"))
    build_native(TEXT, {"entry": ("F", "i", "F")}, tmp_path / "cache")
