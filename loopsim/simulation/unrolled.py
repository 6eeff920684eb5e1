"""Sums over states of Dormand and Prince's method, written out where a model has few.

Sources: Dormand, Prince, J. Comput. Appl. Math. 6 (1980) 19-26; dense output: Hairer, Norsett, Wanner, Solving Ordinary
Differential Equations I, II.6.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence

STAGES: dict[str, tuple[tuple[str, float], ...]] = {
    "stage_2": (("k1", 1 / 5),),
    "stage_3": (("k1", 3 / 40), ("k2", 9 / 40)),
    "stage_4": (("k1", 44 / 45), ("k2", -56 / 15), ("k3", 32 / 9)),
    "stage_5": (("k1", 19372 / 6561), ("k2", -25360 / 2187), ("k3", 64448 / 6561), ("k4", -212 / 729)),
    "stage_6": (
        ("k1", 9017 / 3168),
        ("k2", -355 / 33),
        ("k3", 46732 / 5247),
        ("k4", 49 / 176),
        ("k5", -5103 / 18656),
    ),
    "stage_7": (("k1", 35 / 384), ("k3", 500 / 1113), ("k4", 125 / 192), ("k5", -2187 / 6784), ("k6", 11 / 84)),
}
ERROR = (
    ("k1", 71 / 57600),
    ("k3", -71 / 16695),
    ("k4", 71 / 1920),
    ("k5", -17253 / 339200),
    ("k6", 22 / 525),
    ("k7", -1 / 40),
)
DENSE = (
    ("k1", -12715105075 / 11282082432),
    ("k3", 87487479700 / 32700410799),
    ("k4", -10690763975 / 1880347072),
    ("k5", 701980252875 / 199316789632),
    ("k6", -1453857185 / 822651844),
    ("k7", 69997945 / 29380423),
)


MOST_LINES = 16  # states: with more of them a loop runs as fast and is compiled in a fraction of the time


def _sum(terms: tuple[tuple[str, float], ...], place: str) -> str:
    return " + ".join(f"{factor!r}*{name}[{place}]" for name, factor in terms)


def _each(count: int, lines: Callable[[str], Sequence[str]]) -> Iterator[str]:
    """The lines for every state, by its number or in a loop."""
    if count > MOST_LINES:
        yield "    for i in range(NX):"
        yield from (f"        {line}" for line in lines("i"))
    else:
        yield from (f"    {line}" for number in range(count) for line in lines(str(number)))


def unrolled(count: int) -> Iterator[str]:
    """Stage sums, error norm and dense output, the same operations in the same order for any number of states."""
    for name, terms in STAGES.items():
        arguments = ", ".join(stage for stage, _ in terms)
        yield f"def {name}(x, {arguments}, step, y):"
        yield from _each(count, lambda i, terms=terms: [f"y[{i}] = x[{i}] + step*({_sum(terms, i)})"])  # type: ignore[misc]
        yield "    return 0.0\n"
    yield "def error_norm(x, new, k1, k3, k4, k5, k6, k7, step, q):\n    worst = 0.0\n    total = 0.0"
    yield from _each(
        count,
        lambda i: [
            f"scale = greater(abs(new[{i}] - q[1 + {i}]), q[{1 + count} + {i}])",
            f"error = abs(step*({_sum(ERROR, i)}))/(q[0]*scale)",
            "total = total + error",
            "worst = greater(worst, error)",
        ],
    )
    yield "    return worst + 0.0*total\n"
    yield "def dense_explicit(share, step, x, f, y):"
    names = ("k1", "k2", "k3", "k4", "k5", "k6", "k7")
    yield from (f"    {name} = f[{place}]" for place, name in enumerate(names))
    yield "    new = f[8]\n    rest = 1.0 - share"
    yield from _each(
        count,
        lambda i: [
            f"gain = new[{i}] - x[{i}]",
            f"bend = step*k1[{i}] - gain",
            f"curve = (gain - step*k7[{i}] - bend) + rest*step*({_sum(DENSE, i)})",
            f"y[{i}] = x[{i}] + share*(gain + rest*(bend + share*curve))",
        ],
    )
    yield "    return 0.0\n"
