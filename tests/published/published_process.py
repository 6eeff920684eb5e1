"""How the published values of tanks and reactors are measured: each function builds a plant and returns the values."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from published_bench import Bench, Measured, Results, at, at_rest, from_run, time_constant
from scipy.optimize import fsolve

MOL_PER_L = 1000.0


def mixing_tank(folder: Path) -> Results:
    """One tank and two half tanks, at rest without solute; the feed turns to 1 mol/L at once."""
    bench = Bench(
        folder,
        """
boundary:
  feed_q: {is: 30 m^3/h}
  feed_c: {is: 0 mol/L}
blocks:
  whole:  {use: mixing_tank, V: 2 m^3}
  first:  {use: mixing_tank, V: 1 m^3}
  second: {use: mixing_tank, V: 1 m^3}
wires:
  - feed_q -> whole.q
  - feed_c -> whole.c_in
  - feed_q -> first.q
  - feed_c -> first.c_in
  - first.outlet -> second.inlet
""",
    )
    trends = bench.run("120 min", "1 min", ["at: 0 s, step: feed_c, to: 1 mol/L"])
    share = {minutes: at(trends, "whole.c", 60.0 * minutes) / MOL_PER_L for minutes in (2, 4, 16, 120)}
    tau = time_constant(share[2], 120.0)
    return {
        "time constant": Measured(tau.value / 60.0, tau.error / 60.0),
        "gain": from_run(share[120]),
        "response at t=tau": from_run(share[4]),
        "response at 4 tau": from_run(share[16]),
        "two equal tanks in series (V/2 each): response at t=4 min": from_run(
            at(trends, "second.c", 240.0) / MOL_PER_L
        ),
    }


def _blend(folder: Path, first: float, second: float) -> tuple[float, Measured]:
    """Mass fraction at rest with two feeds [kg/min], and the time constant [s] after a step of the first fraction."""
    bench = Bench(
        folder,
        f"""
boundary:
  w_1: {{is: {first} kg/min}}
  x_1: {{is: 0.4}}
  w_2: {{is: {second} kg/min}}
  x_2: {{is: 0.75}}
blocks:
  tank: {{use: blending_tank, V: 2 m^3, rho: 900 kg/m^3}}
wires:
  - w_1 -> tank.w_1
  - x_1 -> tank.x_1
  - w_2 -> tank.w_2
  - x_2 -> tank.x_2
""",
    )
    rest = bench.rest()["tank.x"]
    trends = bench.run("2 min", "1 min", ["at: 0 s, step: x_1, to: 0.9"])
    final = (first * 0.9 + second * 0.75) / (first + second)
    return rest, time_constant((at(trends, "tank.x", 120.0) - rest) / (final - rest), 120.0)


def blending_example(folder: Path) -> Results:
    """At rest with the four pairs of feeds; the time constants from a step."""
    both, tau = _blend(folder / "both", 500.0, 200.0)
    less_first, tau_600 = _blend(folder / "first", 400.0, 200.0)
    less_second, _ = _blend(folder / "second", 500.0, 100.0)
    less_both, _ = _blend(folder / "less", 400.0, 100.0)
    return {
        "steady x": at_rest(both),
        "tau = rho V/w": Measured(tau.value / 60.0, tau.error / 60.0),
        "new x when w1 -> 400": at_rest(less_first),
        "new x when w2 -> 100": at_rest(less_second),
        "new x when both": at_rest(less_both),
        "tau when w=600": Measured(tau_600.value / 60.0, tau_600.error / 60.0),
    }


def _heated(folder: Path, feed: float, heat: float, around: float, UA: float) -> Bench:
    return Bench(
        folder,
        f"""
boundary:
  feed_q: {{is: 7.2 m^3/h}}
  feed_T: {{is: {feed} degC}}
  heat:   {{is: {heat} kW}}
  around: {{is: {around} degC}}
blocks:
  tank: {{use: heated_tank, V: 1 m^3, rho: 1000 kg/m^3, cp: 4180 J/(kg*K), UA: {UA} W/K}}
wires:
  - feed_q -> tank.q
  - feed_T -> tank.T_in
  - heat -> tank.Q
  - around -> tank.T_amb
""",
    )


def heated_tank(folder: Path) -> Results:
    """Gains from two operating points (the balance is linear), time constants from a step of the feed."""
    found: Results = {}
    for name, UA in (("plain", 0.0), ("jacket", 4180.0)):
        base = _heated(folder / name, 20.0, 100.0, 30.0, UA)
        rest = base.rest()["tank.T"]
        moved = [(30.0, 100.0, 30.0), (20.0, 110.0, 30.0), (20.0, 100.0, 40.0)]
        by_ten = [
            _heated(folder / f"{name}_{number}", *values, UA).rest()["tank.T"] for number, values in enumerate(moved)
        ]
        gains = [(value - rest) / 10.0 for value in by_ten]
        trends = base.run("400 s", "100 s", ["at: 0 s, step: feed_T, to: 30 degC"])
        tau = time_constant((at(trends, "tank.T", 400.0) - rest) / (by_ten[0] - rest), 400.0)
        if name == "plain":
            found |= {"time constant": tau, "gain T/Q": at_rest(gains[1]), "gain T/Tin": at_rest(gains[0])}
        else:
            found["with jacket UA=4180 W/K: tau"] = tau
            found["with jacket: T/Tin gain"] = at_rest(gains[0])
            found["with jacket: T/Tjacket gain"] = at_rest(gains[2])
    return found


def interacting_tanks(folder: Path) -> Results:
    """A step of the inflow; both time constants from two values of the level, by the second-order step response."""
    bench = Bench(
        folder,
        """
boundary:
  inflow: {is: 0 m^3/s}
blocks:
  pair: {use: interacting_tanks, A: 1 m^2, resistance: 1 s/m^2}
wires:
  - inflow -> pair.q
""",
    )
    trends = bench.run("5 s", "0.5 s", ["at: 0 s, step: inflow, to: 1 m^3/s"])
    early, late = at(trends, "pair.h_2", 1.0), at(trends, "pair.h_2", 5.0)

    def misses(tau: NDArray[np.float64]) -> list[float]:
        slow, fast = (float(one) for one in tau)
        response = [1.0 - (slow * math.exp(-t / slow) - fast * math.exp(-t / fast)) / (slow - fast) for t in (1.0, 5.0)]
        return [response[0] - early, response[1] - late]

    slow, fast = (float(tau) for tau in fsolve(misses, [2.0, 0.5], xtol=1e-13))
    return {
        "slow time constant": from_run(slow, 10.0 * slow),
        "fast time constant": from_run(fast, 10.0 * slow),
        "ratio": from_run(slow / fast, 100.0),
    }


def second_order_kinetics(folder: Path) -> Results:
    """At rest, and the gain from two operating points close to it."""

    def concentration(name: str, feed: float) -> float:
        text = f"""
boundary:
  feed_q: {{is: 6 m^3/h}}
  feed_c: {{is: {feed} mol/L}}
blocks:
  tank: {{use: reacting_tank, V: 1 m^3, order: 2, k: 0.5 L/(mol*min)}}
wires:
  - feed_q -> tank.q
  - feed_c -> tank.c_in
"""
        return Bench(folder / name, text).rest()["tank.c"] / MOL_PER_L

    gain = (concentration("more", 1.001) - concentration("less", 0.999)) / 0.002
    return {"steady C": at_rest(concentration("base", 1.0)), "gain dC/dCf": at_rest(gain, 500.0)}


def exothermic_reactor(folder: Path) -> Results:
    """Started at the rounded nominal point, a saddle, the run leaves it and settles at the low state."""
    bench = Bench(
        folder,
        """
boundary:
  feed_q: {is: 100 L/min}
  feed_c: {is: 1 mol/L}
  feed_T: {is: 76.85 degC}
  jacket: {is: 26.85 degC}
blocks:
  reactor:
    use: cooled_reactor
    V: 100 L
    rho: 1000 kg/m^3
    cp: 239 J/(kg*K)
    k0: 7.2e10 1/min
    E: 72.7515479075 kJ/mol
    dH: -50 kJ/mol
    UA: 50 kJ/(min*K)
wires:
  - feed_q -> reactor.q
  - feed_c -> reactor.c_in
  - feed_T -> reactor.T_in
  - jacket -> reactor.T_j
""",
    )
    start = ["at: 0 s, step: reactor.c, to: 0.5 mol/L", "at: 0 s, step: reactor.T, to: 76.85 degC"]
    trends = bench.run("40 min", "1 min", start, starts="given")
    return {
        "low Ca": from_run(at(trends, "reactor.c", 2400.0) / MOL_PER_L),
        "low T": from_run(at(trends, "reactor.T", 2400.0), 50.0),
    }


def _van_de_vusse(folder: Path, per_hour: float) -> dict[str, float]:
    """The operating point at a flow per volume [1/h]: mol/L and degC."""
    bench = Bench(
        folder,
        f"""
boundary:
  feed_q: {{is: {10.0 * per_hour!r} L/h}}
  feed_a: {{is: 5.10 mol/L}}
  feed_T: {{is: 104.9 degC}}
  cooling: {{is: -1113.5 kJ/h}}
blocks:
  reactor:
    use: van_de_vusse_reactor
    V: 10 L
    rho: 934.2 kg/m^3
    cp: 3.01 kJ/(kg*K)
    k1_0: 1.287e12 1/h
    k3_0: 9.043e9 L/(mol*h)
    E1: 9758.3 K
    E3: 8560 K
    dH1: 4.2 kJ/mol
    dH2: -11.0 kJ/mol
    dH3: -41.85 kJ/mol
    UA: 866.88 kJ/(h*K)
    C_j: 10 kJ/K
wires:
  - feed_q -> reactor.q
  - feed_a -> reactor.a_in
  - feed_T -> reactor.T_in
  - cooling -> reactor.Q_j
""",
    )
    rest = bench.rest()
    found = {"cA": rest["reactor.a"] / MOL_PER_L, "cB": rest["reactor.b"] / MOL_PER_L}
    return found | {"T": rest["reactor.T"] - 273.15, "TK": rest["reactor.T_j"] - 273.15}


def van_de_vusse(folder: Path) -> Results:
    """The published point; the flow of the largest cB from a parabola through three operating points."""
    point = _van_de_vusse(folder / "point", 14.19)
    found = {name: at_rest(value) for name, value in point.items()}
    found |= {f"{name} (16-digit published)": at_rest(value) for name, value in point.items()}
    low, middle, high = (_van_de_vusse(folder / f"b{flow}", flow)["cB"] for flow in (14.44, 14.74, 15.04))
    top = 14.74 - 0.3 * (high - low) / (2.0 * (high - 2.0 * middle + low))
    return found | {"F/V at the maximum of cB for this QK": at_rest(top, 1e5), "maximum cB": at_rest(middle)}


def _four_tanks(folder: Path, v1: float, v2: float) -> tuple[float, float, float, float]:
    """Levels [cm] with two pump voltages: tanks with a hole in the floor, the upper ones emptying into the lower."""
    flows = {"q1": 0.7 * 3.33 * v1, "q4": 0.3 * 3.33 * v1, "q2": 0.6 * 3.35 * v2, "q3": 0.4 * 3.35 * v2}
    boundary = "\n".join(f"  {name}: {{is: {3.6 * value!r} L/h}}" for name, value in flows.items())
    wide, narrow = "A: 0.0028 m^2, outlet_area: 0.071 cm^2, Cd: 1", "A: 0.0032 m^2, outlet_area: 0.057 cm^2, Cd: 1"
    text = f"""
boundary:
{boundary}
blocks:
  tank_1: {{use: drained_tank, {wide}}}
  tank_2: {{use: drained_tank, {narrow}}}
  tank_3: {{use: drained_tank, {wide}}}
  tank_4: {{use: drained_tank, {narrow}}}
  into_1: {{use: summing}}
  into_2: {{use: summing}}
wires:
  - q3 -> tank_3.q_in
  - q4 -> tank_4.q_in
  - q1 -> into_1.u.1
  - tank_3.q_out -> into_1.u.2
  - q2 -> into_2.u.1
  - tank_4.q_out -> into_2.u.2
  - into_1.out -> tank_1.q_in
  - into_2.out -> tank_2.q_in
"""
    rest = Bench(folder, text).rest()
    h1, h2, h3, h4 = (100.0 * rest[f"tank_{number}.h"] for number in (1, 2, 3, 4))
    return h1, h2, h3, h4


def quadruple_tank(folder: Path) -> Results:
    """Levels at the operating point; gains (0.5 V/cm) from operating points 0.05 V to both sides."""
    base = _four_tanks(folder / "base", 3.0, 3.0)
    found = {f"h{number}": at_rest(level) for number, level in enumerate(base, 1)}
    gains: dict[str, float] = {}
    for pump, change in ((1, (0.05, 0.0)), (2, (0.0, 0.05))):
        more = _four_tanks(folder / f"more_{pump}", 3.0 + change[0], 3.0 + change[1])
        less = _four_tanks(folder / f"less_{pump}", 3.0 - change[0], 3.0 - change[1])
        gains |= {f"g{level + 1}{pump}": 0.5 * (more[level] - less[level]) / 0.1 for level in (0, 1)}
    found |= {name: at_rest(gain) for name, gain in gains.items()}
    interaction = gains["g12"] * gains["g21"] / (gains["g11"] * gains["g22"])
    return found | {"RGA from the gain matrix": at_rest(1.0 / (1.0 - interaction))}
