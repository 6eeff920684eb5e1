"""How the published values of valves, of a thermowell and of the pH of a blend are measured."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
from published_bench import Bench, Results, at, at_rest, first_harmonic, from_run, reaches

MOL_PER_L = 1000.0


def sizing(folder: Path) -> Results:
    """Flow of a valve of Kv 165 under the example's conditions, turned into the Kv that its flow would need."""
    text = """
blocks:
  valve: {use: control_valve, Kv: 165 m^3/h, density: 965.4 kg/m^3, signal: 100 %, dp: 4.6 bar}
"""
    flow = 3600.0 * Bench(folder, text).rest()["valve.q"]
    return {"Kv": at_rest(165.0 * 360.0 / flow)}


def kv_definition(folder: Path) -> Results:
    """Water at 1000 kg/m^3 through a Kv of 10 at 0.25 bar."""
    text = """
blocks:
  valve: {use: control_valve, Kv: 10 m^3/h, density: 1000 kg/m^3, signal: 100 %, dp: 0.25 bar}
"""
    return {"flow through Kv=10 at 0.25 bar water": at_rest(3600.0 * Bench(folder, text).rest()["valve.q"])}


def characteristics(folder: Path) -> Results:
    """Relative flow of many valves at rest, each with a travel of its own."""
    travels = {"0.00": 0.0, "0.25": 25.0, "0.50": 50.0, "0.75": 75.0, "0.90": 90.0}
    valves = {f"R{R}_{name[2:]}": ("equal_percentage", R, travel) for R in (30, 50) for name, travel in travels.items()}
    valves |= {f"R{R}_10": ("equal_percentage", R, 10.0) for R in (30, 50)}
    valves |= {"open": ("equal_percentage", 50, 100.0), "nearly": ("equal_percentage", 50, 99.999)}
    valves["quick"] = ("quick_opening", 50, 25.0)
    lines = [
        f"  {tag}: {{use: control_valve, q_max: 1 m^3/h, trim: {trim}, rangeability: {R}, signal: {travel} %}}"
        for tag, (trim, R, travel) in valves.items()
    ]
    rest = Bench(folder, "blocks:\n" + "\n".join(lines) + "\n").rest()
    flow = {tag: 3600.0 * rest[f"{tag}.q"] for tag in valves}
    found = {f"R={R}, travel {name}": at_rest(flow[f"R{R}_{name[2:]}"]) for R in (30, 50) for name in travels}
    for R in (30, 50):
        change = 100.0 * (flow[f"R{R}_10"] / flow[f"R{R}_00"] - 1.0)
        found[f"R={R}: relative change per 10 % travel"] = at_rest(change)
    found["R=50 slope at full travel ln R"] = at_rest((flow["open"] - flow["nearly"]) / 1e-5, 1e5)
    return found | {"quick-opening sqrt form at 25 %": at_rest(flow["quick"])}


def backlash(folder: Path) -> Results:
    """First harmonic of three valves with play on a slow sine of 20 %; one row for each execution of the friction."""
    plays = {1: 20.0, 2: 10.0, 5: 4.0}  # A/b -> full play [%]: half of it is b
    valves = "\n".join(
        f"  A{ratio}: {{use: control_valve, q_max: 1 m^3/h, dead_band: {play} %, tick: 0.1 s}}"
        for ratio, play in plays.items()
    )
    wires = "\n".join(f"  - wave -> A{ratio}.signal" for ratio in plays)
    bench = Bench(folder, f"boundary:\n  wave: {{is: 50 %}}\nblocks:\n{valves}\nwires:\n{wires}\n")
    trends = bench.run("3000 s", "0.1 s", ["at: 0 s, sine: wave, by: 20 %, period: 1000 s"])
    found: Results = {}
    for ratio in plays:
        real, imaginary = first_harmonic(trends, f"A{ratio}.position", 2000.0, 1000.0)
        found[f"A={ratio}: real"] = from_run(real / 0.2, 5.0)
        found[f"A={ratio}: imaginary"] = from_run(imaginary / 0.2, 5.0)
    return found


def stick_slip(folder: Path) -> Results:
    """The cycle of a valve that jumps by 1 %, in per cent of a scale where the source has units of one.

    Every jump is a little more than 1 %, by what the demand moves in one execution, so the two positions drift until
    they lie even about the set point; the source's figures are those of the settled cycle. Executed every 0.02 s it
    has settled after 2000 s (by a plain loop over the same law).
    """
    plant = """
blocks:
  valve: {use: control_valve, q_max: 1 m^3/h, stiction: 1 %, tick: 0.02 s, signal: 50 %}
  dead:  {use: dead_time, dead_time: 1 s}
  lag:   {use: first_order_lag, time_constant: 1 s}
wires:
  - valve.position -> dead.u
  - dead.y -> lag.u
"""
    strategy = """
blocks:
  TIC-1: {use: pid, action: reverse, range: [0 %, 100 %], gain: 0.5, integral: 1 s, scan: 0.02 s, sp: 50 %}
wires:
  - lag.y -> TIC-1.pv
  - TIC-1.out -> valve.signal
"""
    bench = Bench(folder, plant, {"feedback": strategy})
    trends = bench.run("2200 s", "0.02 s", ["at: 0 s, step: TIC-1.sp, to: 50.37 %"])
    late = trends.time >= 2050.0
    values, times = 100.0 * trends.columns["lag.y"][late], trends.time[late]
    middle = 0.5 * (values.max() + values.min())
    rising = times[1:][(values[:-1] < middle) & (values[1:] >= middle)]
    return {
        "peak to peak of the measurement": from_run(float(values.max() - values.min())),
        "period": from_run(float(np.diff(rising).mean())),
    }


def ph_neutralisation(folder: Path) -> Results:
    """Acid, buffer and base streams blended by hand; the tank then holds the blend, and its pH is read.

    Wa and Wb are strong acid less strong base and total carbonate [mol/L].
    """

    def blend(q3: float) -> tuple[float, float]:
        flows = (16.6, 0.55, q3)
        Wa = sum(q * W for q, W in zip(flows, (3e-3, -3e-2, -3.05e-3), strict=True)) / sum(flows)
        Wb = sum(q * W for q, W in zip(flows, (0.0, 3e-2, 5e-5), strict=True)) / sum(flows)
        return Wa, Wb

    def tank(name: str, Wa: float, Wb: float) -> dict[str, float]:
        text = f"""
blocks:
  tank:
    use: ph_neutraliser
    V: 1 m^3
    pK1: {-math.log10(4.47e-7)!r}
    pK2: {-math.log10(5.62e-11)!r}
    pKw: 14
    q: 1 m^3/h
    acid_in: {1000.0 * Wa!r} mmol/L
    carbonate_in: {1000.0 * Wb!r} mmol/L
    q_base: 0 L/h
    base_in: 0 mol/L
"""
        return dict(Bench(folder / name, text).rest())

    def pH(q3: float) -> float:
        return tank(f"q{q3}", *blend(q3))["tank.pH"]

    nominal = tank("nominal", *blend(15.55))
    gain = (pH(15.56) - pH(15.54)) / 0.02
    return {
        "pH at the nominal flows": at_rest(nominal["tank.pH"]),
        "pH with q3 as printed 15.6": at_rest(pH(15.6)),
        "effluent Wa4": at_rest(nominal["tank.acid"] / MOL_PER_L),
        "effluent Wb4": at_rest(nominal["tank.carbonate"] / MOL_PER_L),
        "pH from the printed Wa4, Wb4": at_rest(tank("printed", -4.32e-4, 5.28e-4)["tank.pH"]),
        "steady gain dpH/dq3 at nominal": at_rest(gain, 1e3),
        "pH at q3=14": at_rest(pH(14.0)),
        "pH at q3=16.5": at_rest(pH(16.5)),
        "pH at q3=17": at_rest(pH(17.0)),
    }


def thermowell_lags(folder: Path) -> Results:
    """Two lags and a single one on a step of 100 K, on a ramp of 1 K/min, and on a sine of one radian a time constant.

    A time is as uncertain as the signal over its slope, which is 0.5 to 2.5 K/s at the levels asked for.
    """
    text = """
boundary:
  true_T: {is: 20 degC}
  sine_T: {is: 50 degC}
blocks:
  two:  {use: temperature_transmitter, range: [0 degC, 200 degC], lag: 20 s, damping: 5 s}
  one:  {use: temperature_transmitter, range: [0 degC, 200 degC], lag: 20 s}
  wave: {use: temperature_transmitter, range: [0 degC, 200 degC], lag: 20 s}
wires:
  - true_T -> two.T
  - true_T -> one.T
  - sine_T -> wave.T
"""
    period = 40.0 * math.pi
    step = Bench(folder / "step", text).run("150 s", "0.02 s", ["at: 0 s, step: true_T, to: 120 degC"])
    ramp = Bench(folder / "ramp", text).run("15 min", "1 min", ["at: 0 s, ramp: true_T, to: 35 degC, over: 15 min"])
    waves = ["at: 0 s, sine: sine_T, by: 10 K, period: " + repr(period) + " s"]
    last = Bench(folder / "wave", text).run(f"{20.0 * period!r} s", f"{period / 200.0!r} s", waves)
    one_e_fold = 100.0 * (1.0 - math.exp(-1.0))  # what the trade calls 63.2 %
    levels = (50.0, one_e_fold, 90.0)
    times = {name: {p: reaches(step, f"{name}.pv", 293.15 + p) for p in levels} for name in ("one", "two")}
    in_phase, behind = first_harmonic(last, "wave.pv", 19.0 * period, period)
    return {
        "63.2 % time": from_run(times["two"][one_e_fold], 200.0),
        "50 % time": from_run(times["two"][50.0], 200.0),
        "90 % time": from_run(times["two"][90.0], 200.0),
        "ramp error for 1 C/min": from_run(308.15 - at(ramp, "two.pv", 900.0), 15.0),
        "single lag: t90/t50": from_run(times["one"][90.0] / times["one"][50.0], 60.0),
        "single lag: t50/tau": from_run(times["one"][50.0] / 20.0, 2.0),
        "single lag: t90/tau": from_run(times["one"][90.0] / 20.0, 10.0),
        "single lag: attenuation of a sine at omega tau=1": from_run(math.hypot(in_phase, behind) / 10.0, 2.0),
    }
