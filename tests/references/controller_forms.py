"""Controllers that read a known signal, no process: three forms of one PID, a PD with a bias, a PI with feedforward.

The written law (reference_controller) over 125 scans of 2 s. The measurements are boundary signals: a base with ramps,
a pulse on it. TIC-1 ideal, TIC-2 series, TIC-3 parallel with settings that convert into each other:
series (Kc 1.6, Ti 48 s, Td 12 s) = ideal (Kc 2, Ti 60 s, Td 9.6 s) = parallel (Kp 2, 1/Ki 30 s, Kd 19.2 s), each
with N 8 and beta 0.5, through a set-point step at a scan and one between scans, manual and back, and a rise of the
gain by half.
TIC-4: direct, PD, no integral: I is the bias (35 %), and after manual what the last manual output leaves.
TIC-5: PI, beta 0.7, on a measurement that never rests, with feedforward; then gain, integral time and beta change
while the measurement moves: each such scan absorbs what P and ff do in it, and the output moves by dI alone.
The rise of the gain of TIC-1 to 3 falls where the derivative has died away (below 1e-9; asserted), since the
written law does not say in which gain the derivative of the scan before counts.

Trust: every output a second way, by the velocity form with the derivative on a filtered measurement.
Asserted: no output meets a limit; the three forms agree.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

from reference_controller import Controller
from reference_tools import Table, instants, largest_difference, main

NAME = "controller_forms"
SCAN, END, EVERY = 2.0, 250.0, 1.0
# pv [degC]: base by straight lines from (time, value) to the next, and a pulse
LINES = [(0.0, 42.0), (20.0, 42.0), (50.0, 47.0), (62.0, 47.0), (72.0, 41.0), (102.0, 41.0), (120.0, 46.0),
         (180.0, 46.0), (200.0, 43.0), (250.0, 43.0)]  # fmt: skip
PULSE = (205.0, 215.0, 2.0)
DRIFT = [(0.0, 40.0), (250.0, 50.0)]
FEEDFORWARD = [(0.0, 0.0), (31.0, 0.0), (31.0, 0.04), (180.0, 0.04), (190.0, 0.01), (250.0, 0.01)]

Changes = dict[float, dict[str, float]]


def on_lines(lines: list[tuple[float, float]], time: float) -> float:
    """The value at a time on straight lines through points; at a jump the later one."""
    place = max(number for number, (begin, _) in enumerate(lines) if begin <= time)
    if place == len(lines) - 1:
        return lines[-1][1]
    (begin, low), (end, high) = lines[place], lines[place + 1]
    return low + (high - low) * (time - begin) / (end - begin)


def pv(time: float) -> float:
    """First measurement, in fractions of 0 to 100 degC."""
    return (on_lines(LINES, time) + (PULSE[2] if PULSE[0] <= time < PULSE[1] else 0.0)) / 100.0


def drift(time: float) -> float:
    """Second measurement."""
    return on_lines(DRIFT, time) / 100.0


def feedforward(time: float) -> float:
    """Feedforward signal."""
    return on_lines(FEEDFORWARD, time)


def nothing(_: float) -> float:
    """No feedforward."""
    return 0.0


@dataclass(frozen=True)
class Case:
    """One controller: ideal settings (`integral` nought: none), start of I, measurement, changes at their instants."""

    settings: dict[str, float]
    I: float  # noqa: E741  (the letter the law is written with)
    sp: float
    measure: Callable[[float], float]
    ff: Callable[[float], float] = nothing
    changes: Changes = field(default_factory=dict)


THREE = Case(
    {"gain": 2.0, "integral": 60.0, "derivative": 9.6, "N": 8.0, "beta": 0.5, "sign": 1.0},
    0.85, 0.45, pv,
    changes={60.5: {"manual": 0.62}, 90.5: {"auto": 1.0}, 100.0: {"sp": 0.48}, 113.0: {"sp": 0.46},
             171.0: {"gain": 3.0}},
)  # fmt: skip
BIASED = Case(
    {"gain": 1.5, "integral": 0.0, "derivative": 6.0, "N": 10.0, "beta": 1.0, "sign": -1.0},
    0.35, 0.45, pv,
    changes={60.5: {"manual": 0.55}, 90.5: {"auto": 1.0}, 100.0: {"sp": 0.47}},
)  # fmt: skip
FORWARD = Case(
    {"gain": 1.2, "integral": 40.0, "derivative": 0.0, "N": 8.0, "beta": 0.7, "sign": 1.0},
    0.50, 0.45, drift, feedforward,
    changes={71.0: {"gain": 1.8}, 111.0: {"integral": 25.0}, 151.0: {"beta": 1.0}, 171.0: {"sp": 0.47}},
)  # fmt: skip


def due(case: Case, time: float) -> list[dict[str, float]]:
    """The changes that a scan at `time` is the first to see."""
    return [change for moment, change in sorted(case.changes.items()) if time - SCAN < moment <= time]


def positional(case: Case) -> tuple[list[float], list[float]]:
    """Output after each scan, and the derivative term, by the written law."""
    settings = dict(case.settings)
    integral = settings.pop("integral") or None
    controller = Controller(output=case.I, I=case.I, integral=integral, **settings)  # type: ignore[arg-type]
    sp, outputs, derivatives = case.sp, [], []
    for number in range(round(END / SCAN) + 1):
        time = number * SCAN
        for change in due(case, time):
            for name, value in change.items():
                if name == "sp":
                    sp = value
                elif name == "manual":
                    controller.manual, controller.output = True, value
                elif name == "auto":
                    controller.manual = False
                else:
                    setattr(controller, name, value)
        outputs.append(controller.scan(SCAN, sp, case.measure(time), case.ff(time)))
        derivatives.append(controller.D)
    return outputs, derivatives


def velocity(case: Case) -> list[float]:
    """The same by the velocity form: moves of P, D and ff from scan to scan, none of them where something changed."""
    now, sp, manual = dict(case.settings), case.sp, False
    outputs: list[float] = []
    filtered, parts_before, out = case.measure(0.0), 0.0, 0.0
    for number in range(round(END / SCAN) + 1):
        time, changed = number * SCAN, False
        for change in due(case, time):
            sp = change.get("sp", sp)
            out = change.get("manual", out)
            manual = "manual" in change or (manual and "auto" not in change)
            changed = changed or bool(change.keys() - {"sp"})
            now.update({name: value for name, value in change.items() if name in now})
        y, Tf = case.measure(time), now["derivative"] / now["N"]
        filtered += (y - filtered) * SCAN / (SCAN + Tf)
        derivative = -now["sign"] * now["gain"] * now["N"] * (y - filtered) if now["derivative"] else 0.0
        parts = now["sign"] * now["gain"] * (now["beta"] * sp - y) + derivative + case.ff(time)
        push = now["sign"] * now["gain"] * SCAN / now["integral"] * (sp - y) if now["integral"] else 0.0
        if number == 0:
            out = parts + case.I + push
        elif not manual:
            out += push + (0.0 if changed else parts - parts_before)
        parts_before = parts
        outputs.append(out)
    return outputs


def _settled() -> None:
    outputs, derivatives = positional(THREE)
    if abs(derivatives[round(170.0 / SCAN)]) > 1e-9:
        raise ArithmeticError("the derivative has not died away before the gain changes")
    everything = [*outputs, *positional(BIASED)[0], *positional(FORWARD)[0]]
    if min(everything) < 0.01 or max(everything) > 0.99:
        raise ArithmeticError(f"an output comes near its limit: {min(everything)}, {max(everything)}")


def _table(way: Callable[[Case], list[float]]) -> Table:
    time = instants(END, EVERY)
    table = Table(NAME, f"{NAME}/scenario.yaml", "forms", "the written law, scan by scan", time)
    for tags, case in ((("TIC-1", "TIC-2", "TIC-3"), THREE), (("TIC-4",), BIASED), (("TIC-5",), FORWARD)):
        outputs = way(case)
        held = [_held(case, outputs, one) for one in time]
        for tag in tags:
            table.add(f"{tag}.out", "%", held)
    return table


def _held(case: Case, outputs: list[float], time: float) -> float:
    """The output as it stands at `time`: the last scan's, or the manual output set since."""
    scan = int(time // SCAN)
    set_since = [
        one["manual"] for moment, one in case.changes.items() if "manual" in one and scan * SCAN < moment <= time
    ]
    return set_since[-1] if set_since else outputs[scan]


def tables() -> list[Table]:
    """The table of this case."""
    _settled()
    return [_table(lambda case: positional(case)[0])]


def verify() -> float:
    """Positional against velocity form; the conversions."""
    Kc, Ti, Td = 1.6, 48.0, 12.0
    ideal = (Kc * (1.0 + Td / Ti), Ti + Td, Ti * Td / (Ti + Td))
    parallel = (ideal[0], ideal[1] / ideal[0], ideal[0] * ideal[2])
    wanted = tuple(THREE.settings[name] for name in ("gain", "integral", "derivative"))
    if max(abs(a - b) for a, b in zip((*ideal, *parallel), (*wanted, 2.0, 30.0, 19.2), strict=True)) > 1e-12:
        raise ArithmeticError(f"the forms do not convert into each other: {ideal}, {parallel}")
    return largest_difference(tables()[0], _table(velocity))


if __name__ == "__main__":
    main(tables, verify)
