"""The engine text and a model's text made into one module, and the state of a run that it moves on.

Only a `RunState` evolves; it is a value: `copy()` is a snapshot from which the same future follows, bit for bit.
"""

from __future__ import annotations

import hashlib
import importlib
import linecache
import math
from collections.abc import Callable, Sequence
from copy import deepcopy
from dataclasses import dataclass, field
from functools import lru_cache
from importlib.resources import files
from types import SimpleNamespace
from typing import TYPE_CHECKING, Any

import numpy as np

from loopsim import store
from loopsim.results import FloatArray
from loopsim.simulation.guarded import GUARDED_FUNCTIONS
from loopsim.simulation.unrolled import unrolled

if TYPE_CHECKING:
    from loopsim.native.build import Native

ENGINE = ("mathematics", "history", "stepping", "switching", "echoes", "recording", "implicit", "advance")
ECHOES = 256  # echoes that one dead time can hold; more are left to error control
CAPACITY = 2000  # pieces that the engine can hold before they are put aside
STEPS = 20000  # steps of one call of the engine
RELATIVE = 1e-8  # default tolerance of a step
MOST_STEPS = 50_000_000
MOST_KEPT = 200_000_000  # numbers of all pieces of a run, 1.6 GB
MOST_IMPLICIT = 60  # states: with more of them the implicit method's full matrices cost more than they save
# kinds of the arguments of what is compiled: f number, i whole number, F and I arrays of them, P array of arrays
STATE = ("F", "I", "F", "F", "F", "F", "F", "I", "F", "P", "F", "F")
TIMES = ("F", "F", "F", "I", "I", "F", "I", "F")
ADVANCE = ("f", "i", *STATE, "F", *TIMES)
CARRY_OUT = ("i", *STATE, *TIMES)
CODES = {
    2: ("step_too_small", "the step size was lost"),
    3: ("not_finite", "a rate of change is not a finite number"),
    5: ("unsolved", "an equation has no solution"),
    7: ("chatter", "a comparison turns over for ever without time going on"),
}


@dataclass(frozen=True, slots=True)
class Machine:
    """The functions and sizes of one model's module."""

    module: SimpleNamespace
    text: str
    native: Native | None = None

    def __getattr__(self, name: str) -> Any:
        return getattr(self.module, name)


@dataclass(frozen=True, slots=True)
class Outcome:
    """How an advance ended: `reached`, `condition` (its switch in `index`), or a failure with a sentence."""

    code: str
    sentence: str = ""
    index: int = -1


@dataclass(slots=True)
class RunState:
    """Everything that evolves in a run: x, m, p, b as in the generated text, history, counters, what was recorded."""

    e: list[float]
    j: list[int]
    x: list[float]
    m: list[float]
    p: list[float]
    b: list[float]
    h: list[float]
    n: list[int]
    z: list[float]
    q: list[float]
    timing: list[list[float]]
    counters: list[list[int]]
    pending: list[float]
    waiting: list[int]
    pieces: list[FloatArray] = field(default_factory=list)
    rows: list[FloatArray] = field(default_factory=list)
    reversed_at: float = math.nan

    @property
    def t(self) -> float:
        """The present time [s]."""
        return self.e[0]

    @property
    def record_every(self) -> float:
        """Seconds between recorded rows, 0 for none."""
        return self.e[2]

    @record_every.setter
    def record_every(self, every: float) -> None:
        self.e[2] = every

    def record_end(self, end: float) -> None:
        """Have a row written at the end [s] too, where the interval does not fall on it."""
        every = self.record_every
        if every > 0 and abs(round(end / every) * every - end) > 1e-10 * (1.0 + end):
            self.e[2], self.j[3] = end, 1

    def copy(self) -> RunState:
        """A snapshot."""
        return deepcopy(self)

    def statistics(self) -> dict[str, int]:
        """Steps taken, those among them by the implicit method, and tries rejected."""
        return {"steps": int(self.j[0]), "implicit": int(self.j[17]), "rejected": int(self.j[1])}


@lru_cache(maxsize=64)
def build(model_text: str, native: bool = True) -> Machine:
    """Engine and model as one module; tracebacks show its lines.

    `native`: the inner loop as machine code, the same bits; as Python where llvmlite is missing.
    """
    sizes = _sizes(model_text)
    engine = "\n".join((files("loopsim.simulation.engine") / f"{part}.py").read_text("utf-8") for part in ENGINE)
    implicit, worth = int(sizes["NX"] <= MOST_IMPLICIT), 2.0 + sizes["NX"] / 10.0
    constants = f"STRIDE = {2 + 5 * sizes['NW']}\nECHOES = {ECHOES}\nIMPLICIT = {implicit}\nWORTH = {worth}\n"
    text = "\n".join([constants, model_text, "\n".join(unrolled(sizes["NX"])), engine])
    filename = f"<model {hashlib.sha256(text.encode()).hexdigest()[:12]}>"
    linecache.cache[filename] = (len(text), None, text.splitlines(keepends=True), filename)
    namespace: dict[str, Any] = dict(GUARDED_FUNCTIONS)
    exec(compile(text, filename, "exec"), namespace)
    return Machine(SimpleNamespace(**namespace), text, _native(text) if native else None)


def _native(text: str) -> Native | None:
    """The compiled inner loop, None where the compiler cannot be had."""
    try:
        compiler = importlib.import_module("loopsim.native.build")
    except ImportError:
        return None
    built: Native = compiler.build_native(text, {"advance": ADVANCE, "carry_out": CARRY_OUT}, store.folder())
    return built


def _sizes(text: str) -> dict[str, int]:
    """The constants at the head of a model's text."""
    sizes = {}
    for line in text.splitlines():
        name, _, value = line.partition(" = ")
        if len(name) == 2 and name.isupper():
            sizes[name] = int(value)
        elif sizes:
            break
    return sizes


# ---------------------------------------------------------------- runs
def start(
    machine: Machine,
    x: Sequence[float],
    m: Sequence[float],
    p: Sequence[float],
    z: Sequence[Sequence[float]],
    floors: Sequence[float],
    first_positions: tuple[float, ...],
    relative: float = RELATIVE,
) -> RunState:
    """The state before the first boundary at t = 0.

    `floors` [SI], one a state: changes below this size are not looked at more closely than `relative` of it.
    """
    sizes = machine.module
    n = [1, 0, 0, 0, 0, 0, 0, 0, *([0] * sizes.ND)]
    n[6] = CAPACITY
    offsets, flat = [], list[float]()
    for numbers in z:
        offsets.append(len(flat))
        flat += numbers
    n += offsets + [len(numbers) for numbers in z]
    stride = 2 + 5 * sizes.NW
    arrays: list[Sequence[Any]] = [
        [0.0, 1.0, 0.0, 0.0, *([0.0] * 12), *([-1.0] * sizes.NC)],
        [0] * 20,
        *(x, m, p, first_positions),
        [0.0] * (stride * CAPACITY),
        n,
        flat or [0.0],
        [relative, *x, *floors],
    ]
    timing = [_array(machine, [0.0] * count) for count in (sizes.NC, sizes.NC, sizes.NZ)]
    counters = [_array(machine, [0] * max(count, 1)) for count in (sizes.NC, sizes.NZ)]
    echoes = _array(machine, [0.0] * (ECHOES * sizes.ND)), _array(machine, [0] * max(sizes.ND, 1))
    made = [_array(machine, values) for values in arrays]
    state = RunState(*made, timing, counters, *echoes)  # type: ignore[call-arg]
    work = _work(machine)
    _first_piece(machine, state, work)
    return state


def _work(machine: Machine) -> tuple[list[list[float]], list[float], list[float]]:
    """Work arrays: stages and states, w, samples, switch marks, a row, rates and states on a tie, facts of the try
    (span of a tie, method, method tried), matrices and more of the implicit method; then g and c."""
    sizes = machine.module
    widths = [*([sizes.NX] * 10), sizes.NW, 5 * sizes.NW, sizes.NB, sizes.NR, sizes.NX, sizes.NX, sizes.NX, 3]
    square = sizes.NX**2 if sizes.IMPLICIT else 0
    widths += [square, square, sizes.NX, sizes.NX, sizes.NX]
    f = [_array(machine, [0.0] * width) for width in widths]
    return f, _array(machine, [0.0] * sizes.NB), _array(machine, [0.0] * sizes.ND)


def _first_piece(machine: Machine, state: RunState, work: tuple[list[list[float]], list[float], list[float]]) -> None:
    """What stood before the start: the watched signals as they are at the start, dead times passed through."""
    module, (f, g, _) = machine.module, work
    state.h[0] = -1e300
    arrays = (state.x, state.m, state.p, state.b, state.h, state.n, state.z)
    for _ in range(1 + 2 * module.ND):
        module.set_switches(0.0, *arrays, g, f)
        module.watched(0.0, 1, *arrays, f[10])
        for part in range(5):
            for place in range(module.NW):
                state.h[2 + part * module.NW + place] = f[10][place]


def boundary(machine: Machine, state: RunState, event: bool) -> None:
    """Carry out the boundary at the present time: after an event's changes, or the scans that fall on it."""
    f, g, c = _work(machine)
    rows = _array(machine, [0.0] * (2 * (machine.NR + 1)))
    state.j[4] = 0
    _call(machine, "carry_out", (int(event), *_arguments(state, f, g, c), rows))
    _keep_rows(machine, state, rows)


def _arguments(state: RunState, f: list[list[float]], g: list[float], c: list[float]) -> tuple[Any, ...]:
    return (
        *(state.e, state.j, state.x, state.m, state.p, state.b, state.h, state.n, state.z, f, g, c),
        *(*state.timing, *state.counters, state.pending, state.waiting),
    )


def advance(machine: Machine, state: RunState, until: float, enough: Callable[[], bool] = lambda: False) -> Outcome:
    """Move on to `until` [s] or to the first condition; `enough` is asked now and then whether to give up."""
    f, g, c = _work(machine)
    arguments = list(_arguments(state, f, g, c))
    arguments.insert(12, state.q)
    state.j[6] = 1
    rows = _array(machine, [0.0] * (_row_count(state, until) * (machine.NR + 1)))
    while True:
        state.j[4] = 0
        status = _call(machine, "advance", (until, STEPS, *arguments, rows))
        _keep_rows(machine, state, rows)
        if state.n[4] and math.isnan(state.reversed_at):
            state.reversed_at = state.t
        if status not in (1, 4):
            break
        if status == 1:
            put_aside(machine, state)
            arguments[6] = state.h
        if enough() or state.j[0] > MOST_STEPS:
            return Outcome("budget", "the run takes too long; it was given up")
        if sum(chunk.size for chunk in state.pieces) > MOST_KEPT:
            return Outcome("budget", "the run is too long to be kept at full resolution; it was given up")
    if status == 0:
        return Outcome("reached")
    if status == 6:
        return Outcome("condition", index=state.j[5])
    code, sentence = CODES[status]
    return Outcome(code, sentence, _culprit(machine, state, f) if status == 3 else state.j[5])


def _call(machine: Machine, name: str, arguments: tuple[Any, ...]) -> int:
    """Call the inner loop, as Python or compiled."""
    if machine.native is None:
        status: int = getattr(machine.module, name)(*arguments)
        return status
    held: list[FloatArray] = []
    return int(machine.native.entries[name](*[_passed(argument, held) for argument in arguments]))


def _passed(argument: Any, held: list[Any]) -> Any:
    """An argument as machine code takes it: arrays by address; `held` keeps addresses alive during the call."""
    if isinstance(argument, np.ndarray):
        return argument.ctypes.data
    if isinstance(argument, list):
        addresses = np.array([one.ctypes.data for one in argument], dtype=np.uintp)
        held.append(addresses)
        return addresses.ctypes.data
    return argument


def _array(machine: Machine, values: Sequence[Any]) -> Any:
    """Numbers as the inner loop holds them: a list, or a numpy array for machine code."""
    if machine.native is None:
        return list(values)
    whole = bool(values) and isinstance(values[0], int)
    return np.array(values, dtype=np.int64 if whole else np.float64)


def _row_count(state: RunState, until: float) -> int:
    return 4 if state.record_every <= 0 else int((until - state.t) / state.record_every) + 4


def _culprit(machine: Machine, state: RunState, f: list[list[float]]) -> int:
    """The first state whose rate is not finite."""
    arrays = (state.x, state.m, state.p, state.b, state.h, state.n, state.z)
    machine.rates(state.t, 1, *arrays, f[0])
    return next((i for i, rate in enumerate(f[0]) if not math.isfinite(rate)), -1)


def _keep_rows(machine: Machine, state: RunState, rows: list[float]) -> None:
    width, count = machine.NR + 1, state.j[4]
    if count:
        state.rows.append(np.array(rows[: count * width], dtype=float).reshape(count, width))
        state.j[4] = 0


def put_aside(machine: Machine, state: RunState) -> None:
    """Copy the pieces out and keep only those that a dead time can still reach; the store grows when it must."""
    stride, count = 2 + 5 * machine.NW, state.n[0]
    done = np.array(state.h[stride : count * stride], dtype=float).reshape(count - 1, stride)
    state.pieces.append(done[state.n[5] :])
    first = _first_needed(machine, state, count)
    kept = np.concatenate([state.h[:stride], state.h[first * stride : count * stride]])
    state.n[0] = 1 + count - first
    state.n[5] = count - first
    state.n[6] = max(CAPACITY, 2 * state.n[0])
    room = state.n[6] * stride
    whole = np.concatenate([kept, np.zeros(room - len(kept))])
    state.h = whole if machine.native is not None else whole.tolist()  # type: ignore[assignment]
    for k in range(machine.ND):
        state.n[8 + k] = max(0, state.n[8 + k] - first + 1)


def _first_needed(machine: Machine, state: RunState, count: int) -> int:
    """The first piece that a dead time may still look at: one before its cursor, or all where lags may grow."""
    if not machine.ND:
        return count
    if machine.KEEP:
        return 1
    return max(1, min(state.n[8 + k] for k in range(machine.ND)) - 1)


def trends(
    machine: Machine, state: RunState, places: Sequence[int]
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray, FloatArray]:
    """Recorded times (r,) and rows (r, NR); starts (k,), lengths (k,) and samples (k, 5, m) of all pieces.

    `places`: the m watched signals wanted. In memory each one's samples stand together.
    """
    put_aside(machine, state)
    rows = np.concatenate(state.rows) if state.rows else np.zeros((0, machine.NR + 1))
    count = sum(len(chunk) for chunk in state.pieces)
    columns = [2 + part * machine.NW + place for place in places for part in range(5)]
    times, samples, first = np.empty((2, count)), np.empty((len(columns), count)), 0
    for chunk in state.pieces:
        here = slice(first, first + len(chunk))
        times[:, here] = chunk[:, :2].T
        samples[:, here] = chunk.take(columns, axis=1).T
        first += len(chunk)
    return rows[:, 0], rows[:, 1:], times[0], times[1], samples.reshape(len(places), 5, count).T
