"""Sums over states of Dormand and Prince's method written out for a model's number of states.

Sources: Dormand, Prince, J. Comput. Appl. Math. 6 (1980) 19-26; dense output: Hairer, Norsett, Wanner, Solving Ordinary
Differential Equations I, II.6.
"""

from __future__ import annotations

from collections.abc import Iterator

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


def _sum(terms: tuple[tuple[str, float], ...], place: int) -> str:
    return " + ".join(f"{factor!r}*{name}[{place}]" for name, factor in terms)


def unrolled(count: int) -> Iterator[str]:
    """Stage sums, error norm and dense output as straight lines, one a state."""
    for name, terms in STAGES.items():
        arguments = ", ".join(stage for stage, _ in terms)
        yield f"def {name}(x, {arguments}, step, y):"
        yield from (f"    y[{i}] = x[{i}] + step*({_sum(terms, i)})" for i in range(count))
        yield "    return 0.0\n"
    yield "def error_norm(x, new, k1, k3, k4, k5, k6, k7, step, q):\n    worst = 0.0\n    total = 0.0"
    for i in range(count):
        yield f"    scale = greater(abs(new[{i}] - q[{1 + i}]), q[{1 + count + i}])"
        yield f"    error = abs(step*({_sum(ERROR, i)}))/(q[0]*scale)"
        yield "    total = total + error\n    if error > worst:\n        worst = error"
    yield "    return worst + 0.0*total\n"
    yield "def dense(share, step, x, f, y):"
    names = ("k1", "k2", "k3", "k4", "k5", "k6", "k7")
    yield from (f"    {name} = f[{place}]" for place, name in enumerate(names))
    yield "    new = f[8]\n    rest = 1.0 - share"
    for i in range(count):
        yield f"    gain = new[{i}] - x[{i}]\n    bend = step*k1[{i}] - gain"
        yield f"    y[{i}] = x[{i}] + share*(gain + rest*(bend + share*((gain - step*k7[{i}] - bend)"
        yield f"        + rest*step*({_sum(DENSE, i)}))))"
    yield "    return 0.0\n"
