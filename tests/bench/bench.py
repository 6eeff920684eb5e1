"""What a run costs, as ratios taken in one session, interleaved, medians: `python tests/bench/bench.py`.

The plant is a row of heated tanks with an element, a thermometer and a scanned controller (`chain.c` holds the same in C,
by the same method; the best of four sets of compiler flags counts). A ratio to C is refused unless steps, rejections and,
where C may not contract products and sums, the bits of the last state agree. SciPy's methods start again at every scan.
"""

from __future__ import annotations

import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from loopsim.model.choice import scenario_sources
from loopsim.simulation import machine
from loopsim.simulation.case import Case, case_of
from loopsim.simulation.run import Simulation, prepare, run

HERE = Path(__file__).parent
FLAGS = {
    "bits": ["-O3", "-march=native", "-ffp-contract=off"],
    "-O2": ["-O2"],
    "-O3": ["-O3", "-march=native"],
    "fast": ["-O3", "-march=native", "-ffast-math"],
}
ROUNDS = 7


def files_of(folder: Path, tanks: int, hours: float) -> Path:
    """The plant and its scenario; gives the scenario."""
    rows = "".join(f"  t{k}: {{use: heated_tank, V: {(20 + k) / 64!r} m^3, UA: 40 W/K}}\n" for k in range(1, tanks + 1))
    wires = "".join(f"  - feed -> t{k}.q\n" for k in range(1, tanks + 1))
    wires += "".join(f"  - t{k}.T -> t{k + 1}.T_in\n" for k in range(1, tanks))
    plant = f"""plant: chain
boundary: {{feed: {{is: 3 m^3/h}}, feed_T: {{is: 12 degC}}}}
blocks:
{rows}  el: {{use: heater_element, power: 250 kW, C: 60 kJ/K, UA: 6 kW/K}}
  TT: {{use: temperature_transmitter, range: [0 degC, 100 degC], lag: 20 s}}
  TIC: {{use: pid, action: reverse, range: [0 degC, 100 degC], gain: 2, integral: 900 s, scan: 0.5 s, sp: 45 degC}}
wires:
{wires}  - feed_T -> t1.T_in
  - t1.T -> el.T
  - el.Q -> t1.Q
  - t{tanks}.T -> TT.T
  - TT.pv -> TIC.pv
  - TIC.out -> el.duty
"""
    (folder / "plant.yaml").write_text(plant)
    (folder / "run.yaml").write_text(
        f"scenario: run\nplant: plant.yaml\nstrategies: {{none: []}}\nlasts: {hours!r} h\n"
        f"record: {{every: {hours!r} h}}\nevents: [{{at: 10 min, step: feed, by: 20 %}}]\n"
    )
    return folder / "run.yaml"


class Ours:
    """The product."""

    def __init__(self, scenario: Path, native: bool = True) -> None:
        read, sources = scenario_sources(scenario)
        self.case: Case = case_of("none", read, sources["none"])
        self.native = native
        self.last: Simulation | None = None

    def seconds(self) -> float:
        """A run, prepared outside the clock."""
        self.last = prepare(
            self.case.model, self.case.law, self.case.point, self.case.scenario, {}, {}, native=self.native
        )
        begun = time.perf_counter()
        run(self.last, 1e9)
        return time.perf_counter() - begun

    def inner_seconds(self) -> float:
        """What the inner loop took of it, as in C."""
        total, call = 0.0, machine._call

        def timed(*arguments: Any) -> int:
            nonlocal total
            begun = time.perf_counter()
            status = call(*arguments)
            total += time.perf_counter() - begun
            return status

        machine._call = timed
        try:
            self.seconds()
        finally:
            machine._call = call
        return total

    def start(self, tanks: int) -> list[float]:
        """The first state, the controller's output and integral, in the order of `chain.c`."""
        assert self.case.point is not None
        names = [*(f"t{k}.T" for k in range(1, tanks + 1)), "el.T_element", "TT.sensed", "TIC.output", "TIC.I"]
        return [self.case.point.values[name] for name in names]

    def end(self, tanks: int) -> list[float]:
        """The last state in the same order."""
        assert self.last is not None
        places = self.last.program.states
        return [
            self.last.state.x[places[name]]
            for name in [*(f"t{k}.T" for k in range(1, tanks + 1)), "el.T_element", "TT.sensed"]
        ]


class InC:
    """`chain.c` compiled for a number of tanks."""

    def __init__(self, folder: Path, name: str, tanks: int, hours: float, start: Sequence[float]) -> None:
        self.program = folder / f"chain_{name.strip('-')}"
        source = str(HERE / "chain.c")
        subprocess.run(["gcc", *FLAGS[name], f"-DN={tanks}", source, "-o", str(self.program), "-lm"], check=True)
        self.words = [repr(hours), "1", *map(repr, start)]
        self.steps = self.rejected = 0
        self.end: list[float] = []

    def seconds(self) -> float:
        """The time that the program itself takes for the loop."""
        told = subprocess.run([self.program, *self.words], check=True, capture_output=True, text=True).stdout.split()
        self.steps, self.rejected, self.end = int(told[1]), int(told[2]), [float.fromhex(one) for one in told[3:]]
        return float(told[0])


def by_scipy(method: str, tanks: int, hours: float, start: Sequence[float]) -> float:
    """The time of the same run by SciPy, restarted at every scan; as a user would write it."""
    from scipy.integrate import solve_ivp

    V = (20 + np.arange(1, tanks + 1)) / 64
    state, out, integral = np.array(start[:-2]), start[-2], start[-1]
    begun = time.perf_counter()
    for scan in range(round(hours * 3600 / 0.5)):
        q = 3 / 3600 * (1.2 if scan * 0.5 >= 600 else 1.0)
        error = (318.15 - state[-1]) / 100.0
        integral = min(max(integral + 2.0 * 0.5 / 900.0 * error, -2.0 * error), 1.0 - 2.0 * error)
        out = min(max(2.0 * error + integral, 0.0), 1.0)

        def rates(t: float, x: np.ndarray, q: float = q, out: float = out) -> np.ndarray:
            heat = 6e3 * (x[-2] - x[0])
            before = np.concatenate([[285.15], x[: tanks - 1]])
            gain = 998 * 4182 * q * (before - x[:tanks]) - 40.0 * (x[:tanks] - 293.15)
            gain[0] += heat
            return np.concatenate(
                [gain / (998 * 4182 * V), [(250e3 * out - heat) / 60e3, (x[tanks - 1] - x[-1]) / 20.0]]
            )

        state = solve_ivp(rates, (0.0, 0.5), state, method=method, rtol=1e-6, atol=1e-6).y[:, -1]
    return time.perf_counter() - begun


def medians(measured: dict[str, Callable[[], float]], rounds: int = ROUNDS) -> dict[str, float]:
    """Medians of measurements taken in turn."""
    found: dict[str, list[float]] = {name: [] for name in measured}
    for _ in range(rounds):
        for name, measure in measured.items():
            found[name].append(measure())
    return {name: statistics.median(times) for name, times in found.items()}


def against_c(tanks: int, hours: float) -> str:
    """One row of the table."""
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place)
        ours = Ours(files_of(folder, tanks, hours))
        theirs = {name: InC(folder, name, tanks, hours, ours.start(tanks)) for name in FLAGS}
        times = medians(
            {"ours": ours.inner_seconds, "whole": ours.seconds, **{name: one.seconds for name, one in theirs.items()}}
        )
        assert ours.last is not None
        same = ours.last.state.statistics()
        told = theirs["bits"]
        best = min(times[name] for name in FLAGS)
        alike = (same["steps"], same["rejected"]) == (told.steps, told.rejected) and ours.end(tanks) == told.end
        inner, whole = f"{times['ours'] / best:6.2f}", f"{times['whole'] / best:6.2f}"
        ratio = f"inner loop {inner}, whole run {whole} x best C" if alike else "refused: the runs differ"
        return f"{tanks:5d} tanks {hours:5.2f} h   {same['steps']:7d} steps  {1e3 * times['whole']:8.2f} ms   {ratio}"


def against_scipy(tanks: int, hours: float) -> list[str]:
    """How many times longer SciPy takes."""
    with tempfile.TemporaryDirectory() as place:
        ours = Ours(files_of(Path(place), tanks, hours))
        start = ours.start(tanks)
        measured: dict[str, Callable[[], float]] = {"ours": ours.seconds}
        for method in ("LSODA", "RK45"):
            measured[method] = lambda method=method: by_scipy(method, tanks, hours, start)  # type: ignore[misc]
        interpreted = Ours(Path(place) / "run.yaml", native=False)
        measured["interpreted"] = interpreted.seconds
        times = medians(measured, 3)
        return [f"{name:12s} {times[name] / times['ours']:8.0f} x ours" for name in ("LSODA", "RK45", "interpreted")]


def processes() -> list[str]:
    """Whole processes: the demo's first scenario, its plant never seen before and kept."""
    demo = HERE.parents[1] / "scenarios" / "wash_water_heater" / "flow_rise.yaml"

    def seconds(cache: str) -> float:
        begun = time.perf_counter()
        words = [sys.executable, "-c", "from loopsim.cli.main import main; main()", "run", str(demo), "--cache", cache]
        subprocess.run(words, check=False, capture_output=True)
        return time.perf_counter() - begun

    with tempfile.TemporaryDirectory() as kept:
        seconds(kept)

        def never_seen() -> float:
            with tempfile.TemporaryDirectory() as fresh:
                return seconds(fresh)

        times = medians({"never seen": never_seen, "kept": lambda: seconds(kept)}, 5)
    return [f"four strategies of one scenario, plant {name}: {times[name]:.2f} s" for name in times]


def main() -> None:
    """Print the table."""
    machine.build.cache_clear()
    print("Row of tanks, one run, against the best of four C programs")
    for tanks, hours in ((3, 0.25), (3, 4.0), (3, 24.0), (10, 1.0), (30, 1.0), (100, 1.0)):
        print(against_c(tanks, hours))
    print("\nThree tanks, 0.25 h, the other solvers restarted at each scan")
    print("\n".join(against_scipy(3, 0.25)))
    print("\nWhole processes")
    print("\n".join(processes()))


if __name__ == "__main__":
    main()
