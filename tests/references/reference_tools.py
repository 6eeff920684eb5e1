"""What the reference scripts share: tables of values, tight integration, and how two tables are compared.

A reference is a case worked out by hand-written equations, with nothing of the simulator in it. Every script has
`tables()`, which computes its tables, and `verify()`, which shows why they can be trusted and returns the largest
relative difference that it found. Run as a program, a script verifies itself and then writes `values/NAME.json`.
"""

from __future__ import annotations

import json
import math
import sys
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

HERE = Path(__file__).parent
VALUES = HERE / "values"
PLANTS = HERE / "plants"

FloatArray = NDArray[np.float64]
Rates = Callable[[float, FloatArray], Sequence[float]]

RTOL = 1e-12
AGREEMENT = 1e-10

# value in SI = number * factor + offset: the definitions of the units, written out here so that no unit code is shared
SI: dict[str, tuple[float, float]] = {
    "degC": (1.0, 273.15),
    "K": (1.0, 0.0),
    "%": (0.01, 0.0),
    "dimensionless": (1.0, 0.0),
    "m": (1.0, 0.0),
    "m^3": (1.0, 0.0),
    "m^3/h": (1.0 / 3600.0, 0.0),
    "kW": (1000.0, 0.0),
    "mol/L": (1000.0, 0.0),
    "mol/(L*min)": (1000.0 / 60.0, 0.0),
}


@dataclass(frozen=True)
class Column:
    """One signal: the unit people read it in, and its values [unit]."""

    unit: str
    values: list[float]

    def tolerance_scale(self) -> float:
        """What 1e-7 is taken of [unit]: the span in the run, at least 1 K or 1 % (of the largest value elsewhere)."""
        span = max(self.values) - min(self.values)
        floor = 1.0 if self.unit in ("degC", "K", "%") else 0.01 * max(abs(value) for value in self.values)
        return max(span, floor)


@dataclass(frozen=True)
class Table:
    """One case: which scenario file and strategy it belongs to, how it was got, instants [s] and signals."""

    name: str
    scenario: str
    strategy: str
    method: str
    time: list[float]
    signals: dict[str, Column] = field(default_factory=dict)

    def add(self, signal: str, unit: str, si_values: Sequence[float]) -> None:
        """Put in a signal that was computed in SI."""
        factor, offset = SI[unit]
        values = [float((value - offset) / factor) for value in si_values]
        if len(values) != len(self.time) or not all(math.isfinite(value) for value in values):
            raise ValueError(f"{self.name}: {signal} has {len(values)} values for {len(self.time)} instants, or a gap")
        self.signals[signal] = Column(unit, values)


def instants(end: float, every: float) -> list[float]:
    """0, every, 2*every, … end [s]: the recording grid of the scenario."""
    return [number * every for number in range(round(end / every) + 1)]


def write(table: Table) -> None:
    """Write a table to `values/`, numbers in round-trip precision."""
    VALUES.mkdir(exist_ok=True)
    document = {
        "name": table.name,
        "scenario": table.scenario,
        "strategy": table.strategy,
        "method": table.method,
        "time [s]": table.time,
        "signals": {name: {"unit": one.unit, "values": one.values} for name, one in table.signals.items()},
    }
    text = json.dumps(document, indent=None, separators=(", ", ": "))
    text = text.replace('", "', '",\n"').replace('], "', '],\n"').replace('}, "', '},\n"')
    (VALUES / f"{table.name}.json").write_text(text + "\n", encoding="utf-8")


def read(name: str) -> Table:
    """Read a stored table."""
    document = json.loads((VALUES / f"{name}.json").read_text(encoding="utf-8"))
    signals = {signal: Column(one["unit"], one["values"]) for signal, one in document["signals"].items()}
    head = (document["name"], document["scenario"], document["strategy"], document["method"])
    return Table(*head, document["time [s]"], signals)


def largest_difference(one: Table, other: Table) -> float:
    """The largest difference between two tables of one case, relative to each signal's `tolerance_scale`."""
    if one.time != other.time or one.signals.keys() != other.signals.keys():
        raise ValueError(f"{one.name}: the two tables hold different instants or signals")
    worst = 0.0
    for name, column in one.signals.items():
        gap = np.abs(np.array(column.values) - np.array(other.signals[name].values))
        worst = max(worst, float(gap.max()) / column.tolerance_scale())
    return worst


def integrate(
    rates: Rates,
    begin: float,
    end: float,
    start: Sequence[float],
    rtol: float = RTOL,
    method: Literal["DOP853", "Radau"] = "DOP853",
) -> Piece:
    """Integrate between two discontinuities by SciPy's DOP853 (explicit) or Radau (implicit); absolute errors rtol/10.

    States are to be scaled so that 1 is a usual size.
    """
    span, first = (begin, end), np.array(start, dtype=np.float64)
    solution = solve_ivp(rates, span, first, method=method, rtol=rtol, atol=0.1 * rtol, dense_output=True)
    if not solution.success or solution.sol is None:
        raise ArithmeticError(solution.message)
    return Piece(begin, end, solution.sol, solution.y[:, -1])


@dataclass(frozen=True)
class Piece:
    """A smooth piece of a solution on [begin, end]: callable; its last values stand apart, free of interpolation."""

    begin: float
    end: float
    curve: Callable[[float], FloatArray]
    last: FloatArray

    def __call__(self, time: float) -> FloatArray:
        return self.last if time == self.end else self.curve(time)


def main(tables: Callable[[], list[Table]], verify: Callable[[], float]) -> None:
    """Verify, and only then write."""
    difference = verify()
    if not difference <= AGREEMENT:
        sys.exit(f"two independent computations differ by {difference:.2e} of span: nothing was written")
    for table in tables():
        write(table)
        print(f"{table.name}: {len(table.time)} instants, {len(table.signals)} signals, agreement {difference:.1e}")
