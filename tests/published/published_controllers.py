"""How the published values of the control law are measured: a controller reads a signal that is told to move."""

from __future__ import annotations

from pathlib import Path

from published_bench import Bench, Results, at, by_law, from_run

PLANT = """
boundary:
  level: {is: 50 %}
blocks:
  lag: {use: first_order_lag, time_constant: 0 s}
wires:
  - level -> lag.u
"""


def _controller(settings: str) -> str:
    return f"""
blocks:
  TIC-1:
    use: pid
    action: reverse
    range: [0 %, 100 %]
    sp: 50 %
    {settings}
wires:
  - lag.y -> TIC-1.pv
"""


def _run(folder: Path, settings: list[str], lasts: float, every: float, events: list[str]) -> list[float]:
    """The output [fraction] at every recorded instant, from a start with no error and the output at 50 %."""
    bench = Bench(folder, PLANT, {"feedback": _controller("\n    ".join(settings))})
    start = ["at: 0 s, step: TIC-1.I, to: 50 %"]
    trends = bench.run(f"{lasts!r} s", f"{every!r} s", [*start, *events], starts="given")
    return [at(trends, "TIC-1.out", number * every) for number in range(round(lasts / every) + 1)]


def derivative_filter(folder: Path) -> Results:
    """Measurement up by 1 %: the derivative's first kick and how it fades, scanned; the whole kick continuously."""
    settings = ["gain: 1", "derivative: 10 s", "N: 10", "bias: 50 %"]
    step = ["at: 0.1 s, step: level, to: 51 %"]
    out = _run(folder / "scanned", [*settings, "scan: 0.1 s"], 1.0, 0.1, step)
    kicks = [(0.5 - 0.01 - value) / 0.01 for value in out]  # the proportional part takes 1 %
    at_once = _run(folder / "continuous", [*settings, "scan: 0 s"], 1.0, 0.1, step)
    return {
        "pole ad = Td/(Td+N h)": by_law(kicks[5] / kicks[4]),
        "gain bd = K Td N/(Td+N h)": by_law(kicks[1]),
        "high-frequency gain": by_law((0.5 - at_once[1]) / 0.01),
    }


def velocity_position(folder: Path) -> Results:
    """The outputs against the velocity form, computed here, on a measurement that ramps, steps and rests."""
    gain, integral, derivative, h, N = 2.0, 8.0, 2.0, 0.5, 8.0
    settings = [f"gain: {gain}", f"integral: {integral} s", f"derivative: {derivative} s", f"N: {N}", f"scan: {h} s"]
    events = ["at: 2 s, ramp: level, to: 53 %, over: 4 s", "at: 9 s, step: level, to: 50.5 %"]
    out = _run(folder, settings, 20.0, h, events)
    pv = [0.50 + 0.03 * min(max(number * h - 2.0, 0.0), 4.0) / 4.0 for number in range(len(out))]
    pv = [value if number * h < 9.0 else 0.505 for number, value in enumerate(pv)]
    Tf = derivative / N
    output, slope, worst = out[0], 0.0, 0.0
    for number in range(1, len(out)):
        kick = Tf / (Tf + h) * slope - gain * derivative / (Tf + h) * (pv[number] - pv[number - 1])
        output += gain * (pv[number - 1] - pv[number]) + gain * h / integral * (0.50 - pv[number]) + kick - slope
        slope = kick
        worst = max(worst, abs(output - out[number]))
    if not 0.01 < min(out) < 0.495 < max(out) < 0.99:
        raise AssertionError("the output was to move, and to stay inside its limits")
    return {"largest difference": by_law(worst)}


def sampling(folder: Path) -> Results:
    """A lag of 10 s behind a signal that rises by 50 % at once: how far it comes in 1 s, and how its gap shrinks."""
    text = """
boundary:
  level: {is: 0 %}
blocks:
  lag: {use: first_order_lag, time_constant: 10 s}
wires:
  - level -> lag.u
"""
    trends = Bench(folder, text).run("2 s", "1 s", ["at: 0 s, step: level, to: 50 %"])
    first, second = at(trends, "lag.y", 1.0) / 0.5, at(trends, "lag.y", 2.0) / 0.5
    return {
        "FOPDT ZOH pole h=1,tau=10": from_run((1.0 - second) / (1.0 - first), 2.0),
        "FOPDT ZOH gain h=1,tau=10": from_run(first),
    }


def bumpless(folder: Path) -> Results:
    """Gain 2 -> 3 at an error of 5 %, no integral action; then the error goes and the output is the integral term.

    One unit of the source is 10 % here.
    """
    settings = ["gain: 2", "bias: 7 %", "scan: 1 s"]
    bench = Bench(folder, PLANT, {"feedback": _controller("\n    ".join(settings))})
    events = [
        "at: 0 s, step: level, to: 45 %",
        "at: 2.5 s, step: TIC-1.gain, to: 3",
        "at: 5.5 s, step: level, to: 50 %",
    ]
    trends = bench.run("8 s", "1 s", events, starts="given")
    return {
        "output before": by_law(at(trends, "TIC-1.out", 2.0) / 0.1),
        "output after": by_law(at(trends, "TIC-1.out", 4.0) / 0.1),
        "adjusted integral": by_law(at(trends, "TIC-1.out", 7.0) / 0.1),
    }


def _identified(folder: Path, settings: list[str]) -> tuple[float, float, float]:
    """Kc, Kc/Ti [1/s] and Kc*Td [s] of the law in force, from the outputs on a step of the set point and of pv.

    Set point up by 1 % for good: the output jumps by Kc and then climbs by Kc*Ts/Ti a scan. Later the measurement
    moves by 0.1 %: what is left of that scan's change is the derivative's kick, Kc*Td/(Td/N + Ts).
    """
    Ts, N, up, moved = 0.5, 8.0, 0.01, 0.001
    steps = ["at: 2 s, step: TIC-1.sp, to: 51 %", "at: 4 s, step: level, to: 50.1 %"]
    out = _run(folder, [*settings, f"N: {N}", f"scan: {Ts} s"], 5.0, Ts, steps)
    climb = (out[6] - out[5]) / up
    Kc = (out[4] - out[3]) / up - climb
    kick = -(out[8] - out[7] - climb * (up - moved)) / moved - Kc
    # kick = Kc*Td/(Td/N + Ts), solved for Td
    Td = kick * Ts / (Kc - kick / N)
    return Kc, climb / Ts, Kc * Td


def forms(folder: Path) -> Results:
    """What a series controller of the given settings does, named in the ideal and the parallel form.

    A parallel controller of the published constants must do the same (asserted through the same names).
    """
    series = _identified(folder / "series", ["form: series", "gain: 10", "integral: 8 s", "derivative: 2 s"])
    parallel = _identified(folder / "parallel", ["form: parallel", "gain: 12.5", "integral: 0.8 s", "derivative: 20 s"])
    ideal = _identified(folder / "ideal", ["form: ideal", "gain: 12.5", "integral: 10 s", "derivative: 1.6 s"])
    for other in (parallel, ideal):
        assert max(abs(a / b - 1.0) for a, b in zip(series, other, strict=True)) < 1e-9
    Kc, Ki, Kd = series
    return {
        "factor 1+tauD/tauI": by_law(Kc / 10.0),
        "ideal Kc": by_law(Kc),
        "ideal tauI": by_law(Kc / Ki),
        "ideal tauD": by_law(Kd / Kc),
        "parallel Ki": by_law(Ki),
        "parallel Kd": by_law(Kd),
    }
