"""Jacketed stirred reactor with an exothermic first-order reaction, near the published low steady state; coolant steps.

V*dc/dt = q*(c_in - c) - V*r, r = k0*exp(-E/(R*T))*c;
rho*cp*V*dT/dt = rho*cp*q*(T_in - T) - dH*V*r - UA*(T - T_j);
rho_j*cp_j*V_j*dT_j/dt = rho_j*cp_j*q_j*(T_j_in - T_j) + UA*(T - T_j).
Numbers of the published case (q 100 L/min, V 100 L, rho 1000 g/L, cp 0.239 J/(g*K), dH -5e4 J/mol, E/R 8750 K,
k0 7.2e10 1/min, UA 5e4 J/(min*K), c_in 1 mol/L, T_in 350 K, jacket at 300 K; Seborg, Edgar and Mellichamp, Process
Dynamics and Control; three steady states, the low one at 0.877253 mol/L and 324.4754 K). The jacket of that case
has a given temperature; here it is stirred, with a feed chosen so that it too stands near 300 K.
The run starts from given states near that point: 0.877 mol/L, 324.5 K (51.35 degC), 300 K (26.85 degC).
Coolant feed 25.87 -> 21 degC at 2 min, flow 300 -> 200 L/min at 11 min, feed 21 -> 28 degC at 18 min: there the
states swing before they settle.

Trust: DOP853 (restarted at the steps) against Radau; and the start is near a rest: with a jacket held at 300 K the
equations give the published low state (asserted to its printed digits).
"""

from __future__ import annotations

import math
from typing import Literal

import numpy as np
from reference_tools import RTOL, FloatArray, Table, instants, integrate, largest_difference, main
from scipy.optimize import fsolve

NAME = "jacketed_reactor"
# minutes, litres, mol, joules, kelvin
V, Q, RHO_CP, DH = 100.0, 100.0, 1000.0 * 0.239, -5e4
K0, E_OVER_R, UA = 7.2e10, 72.75 * 1000.0 / 8.314462618, 5e4
C_IN, T_IN = 1.0, 350.0
V_J, RHO_CP_J = 50.0, 0.998 * 4182.0
STAGES = [(0.0, 300.0, 25.87 + 273.15), (2.0, 300.0, 21.0 + 273.15), (11.0, 200.0, 21.0 + 273.15),
          (18.0, 200.0, 28.0 + 273.15)]  # fmt: skip
START = (0.877, 51.35 + 273.15, 26.85 + 273.15)
END, EVERY = 40.0, 0.125

Way = Literal["DOP853", "Radau"]


def vessel(c: float, T: float, T_j: float, e_over_r: float = E_OVER_R) -> tuple[float, float]:
    """Rates of c [mol/(L*min)] and T [K/min]."""
    r = K0 * math.exp(-e_over_r / T) * c
    heat = RHO_CP * Q * (T_IN - T) - DH * V * r - UA * (T - T_j)
    return (Q * (C_IN - c) - V * r) / V, heat / (RHO_CP * V)


def published_low_state() -> tuple[float, float]:
    """Rest with the jacket held at 300 K and the printed E/R."""

    def at_rest(x: FloatArray) -> tuple[float, float]:
        return vessel(float(x[0]), float(x[1]), 300.0, 8750.0)

    c, T = fsolve(at_rest, [0.877, 324.5], xtol=1e-12)
    return float(c), float(T)


def stretch(x: FloatArray, begin: float, length: float, way: Way) -> FloatArray:
    """(c, T/100, T_j/100) after a stretch."""
    _, q_j, feed = [one for one in STAGES if one[0] <= begin][-1]

    def rates(_: float, z: FloatArray) -> list[float]:
        c_rate, T_rate = vessel(z[0], 100.0 * z[1], 100.0 * z[2])
        jacket = (RHO_CP_J * q_j * (feed - 100.0 * z[2]) + 100.0 * UA * (z[1] - z[2])) / (RHO_CP_J * V_J)
        return [c_rate, T_rate / 100.0, jacket / 100.0]

    return integrate(rates, 0.0, length, list(x), RTOL, way).last


def _table(way: Way) -> Table:
    time, rows = instants(END, EVERY), []
    x = np.array([START[0], START[1] / 100.0, START[2] / 100.0])
    for begin in time:
        rows.append(x)
        x = stretch(x, begin, EVERY, way) if begin < END else x
    table = Table(NAME, f"{NAME}/scenario.yaml", "none", "DOP853", [60.0 * one for one in time])
    table.add("reactor.c", "mol/L", [1000.0 * row[0] for row in rows])
    table.add("reactor.T", "degC", [100.0 * row[1] for row in rows])
    table.add("reactor.T_j", "degC", [100.0 * row[2] for row in rows])
    return table


def tables() -> list[Table]:
    """The table of this case."""
    return [_table("DOP853")]


def verify() -> float:
    """Explicit against implicit, and the published low state."""
    c, T = published_low_state()
    if abs(c - 0.877253) > 1e-6 or abs(T - 324.4754) > 1e-3:
        raise ArithmeticError(f"low state {c}, {T} K; published 0.877253, 324.4754 K")
    return largest_difference(_table("DOP853"), _table("Radau"))


if __name__ == "__main__":
    main(tables, verify)
