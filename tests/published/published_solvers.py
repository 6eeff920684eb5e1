"""How the published problems of solvers are measured: stiff kinetics, oscillators, delay equations, written as blocks."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from published_bench import Bench, Measured, Results, at, from_run


def closely(value: float) -> Measured:
    """A value to as many digits as it has been published with, however small it is beside others."""
    return Measured(value, 1e-7 * abs(value))


def robertson(folder: Path, time: float) -> Results:
    """Three species with rates of 0.04, 1e4 and 3e7; at the end what is left of the first is far below any span."""
    trends = Bench(folder, "blocks: {r: {use: robertson}}\n").run(f"{time!r} s", f"{time!r} s", starts="given")
    assert trends.statistics["implicit"] > 0
    measured = from_run if time > 1e6 else closely
    return {name: measured(at(trends, f"r.{part}", time)) for name, part in (("y1", "a"), ("y2", "c"), ("y3", "d"))}


def photochemical_chain(folder: Path) -> Results:
    """Eight concentrations just when most of them fall."""
    trends = Bench(folder, "blocks: {r: {use: hires}}\n").run("321.8122 s", "321.8122 s", starts="given")
    return {f"y{k}": closely(at(trends, f"r.y{k}", 321.8122)) for k in range(1, 9)}


def stiff_oscillator(folder: Path) -> Results:
    """Relaxation: jumps of a millionth of the time between them."""
    trends = Bench(folder, "blocks: {r: {use: oscillator, e: 1e-6}}\n").run("2 s", "1 s", starts="given")
    assert trends.statistics["implicit"] > 0
    return {"y": from_run(at(trends, "r.y", 2.0), 4.0), "y'": from_run(at(trends, "r.v", 2.0), 4.0)}


def mild_oscillator(folder: Path) -> Results:
    """Period and height of the cycle, from rows a thousandth of a second apart and parabolas through them."""
    trends = Bench(folder, "blocks: {r: {use: oscillator, e: 1}}\n").run("60 s", "1 ms", starts="given")
    y, time = trends.columns["r.y"], trends.time
    rises = np.flatnonzero((y[:-1] < 0) & (y[1:] >= 0))[-2:]
    zeros = time[rises] - y[rises] / (y[rises + 1] - y[rises]) * 0.001
    top = rises[0] + int(np.argmax(y[rises[0] : rises[1]]))
    bend, slope = y[top + 1] - 2 * y[top] + y[top - 1], (y[top + 1] - y[top - 1]) / 2
    return {
        "period": from_run(float(zeros[1] - zeros[0])),
        "amplitude": from_run(float(y[top] - slope**2 / (2 * bend))),
    }


def hayes_from_one(folder: Path) -> Results:
    """x' = -x(t - 1) with x = 1 before the start."""
    trends = Bench(folder, "blocks: {a: {use: hayes}}\n").run("10 s", "1 s", starts="given")
    return {f"x({time})": from_run(at(trends, "a.x", time)) for time in (1, 2, 3, 4, 5, 10)}


def hayes_from_nought(folder: Path) -> Results:
    """The same with x = 0 before the start and a jump to 1 at the start."""
    bench = Bench(folder, "blocks: {a: {use: hayes, x: 0}}\n")
    trends = bench.run("10 s", "1 s", ["at: 0 s, step: a.x, to: 1"], starts="given")
    return {f"u({time})": from_run(at(trends, "a.x", time)) for time in (2, 3, 5, 10)}
