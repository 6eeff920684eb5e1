"""The sign of every feedback loop and of every feedforward path, at the operating point."""

from __future__ import annotations

from collections.abc import Collection
from functools import lru_cache

import networkx as nx
import numpy as np

from loopsim.errors import Problem
from loopsim.model.graph import influences, reached_from
from loopsim.model.numbers import FloatArray, System
from loopsim.model.rest import eigenvalues_of
from loopsim.model.types import Controller, Model

SLOW = 1e-10  # 1/s: a real frequency below every lag and above nought, so that integrating plants have a gain too


def audit(model: Model, values: dict[str, float]) -> list[Problem]:
    """Problems with signs in a law model at a point: positive feedback, outputs without effect, wrong feedforward."""
    graph = influences(model)
    problems: list[Problem] = []
    for controller in model.controllers:
        if not _automatic(model, controller):
            continue
        problem = _loop_problem(model, values, graph, controller) or _feedforward_problem(
            model, values, graph, controller
        )
        if problem is not None:
            problems.append(problem)
    return problems


def _automatic(model: Model, controller: Controller) -> bool:
    slot = model.slots.get(f"{controller.tag}.mode")
    return slot is None or slot.choices[int(slot.value)] != "manual"


def _loop_problem(
    model: Model, values: dict[str, float], graph: nx.DiGraph[str], controller: Controller
) -> Problem | None:
    tag, opened = controller.tag, _opened(model, graph, controller)
    gain = slow_gain(model, values, controller.out, controller.pv, opened)
    if gain == 0.0:
        if controller.pv in reached_from(graph, controller.out):  # a selector may pass another controller just now
            return None
        return Problem(
            f"the output of {tag} has no effect on its measurement {controller.pv}",
            "look for a wire that is missing",
            controller.where,
        )
    slot = model.slots.get(f"{tag}.action")
    if slot is None:
        return None
    action = slot.choices[int(slot.value)]
    wanted = "reverse" if gain > 0 else "direct"
    if action == wanted:
        return None
    return Problem(
        f"the loop of {tag} feeds back positively: a rising output {'raises' if gain > 0 else 'lowers'} "
        f"{controller.pv}, and its action is {action}",
        f"set `action: {wanted}` in {tag}, or check what a rising signal does to the valve",
        controller.where,
    )


def _opened(model: Model, graph: nx.DiGraph[str], controller: Controller) -> frozenset[str]:
    """The outputs held while a loop is looked at: its own, and those of controllers that it does not drive."""
    below = reached_from(_without_measurements(graph, model), controller.out)
    others = [one for one in model.controllers if one.tag != controller.tag and one.sp not in below]
    return frozenset({controller.out, *(one.out for one in others)})


def _without_measurements(graph: nx.DiGraph[str], model: Model) -> nx.DiGraph[str]:
    """The graph without what enters controllers as measurements: what is left of a cascade is its set points."""
    kept = graph.copy()
    kept.remove_nodes_from([one.pv for one in model.controllers if one.pv in kept])
    return kept


def slow_gain(model: Model, values: dict[str, float], source: str, target: str, opened: Collection[str] = ()) -> float:
    """d target / d source [SI] at a very low frequency, with the `opened` names held.

    Where the held system is unstable by itself the frequency lies above its growth, so that the sign is the one that
    feedback meets.
    """
    system = _system(model)
    matrix = system.jacobian(values, opened)
    slopes = system.carried(values, {source: {0: 1.0}}, opened)
    by_source = system.rows_by(values, slopes, 1)[:, 0]
    places = {name: {place: 1.0} for place, name in enumerate(system.unknowns)}
    seen = system.carried(values, places, opened).get(target, {})
    through = np.array([seen.get(place, 0.0) for place in range(len(system.unknowns))])
    direct = slopes.get(target, {}).get(0, 0.0)
    if not len(system.unknowns):
        return direct
    mass = np.array([1.0] * system.states + [0.0] * (len(system.unknowns) - system.states))
    frequency = _frequency(system, matrix)
    state = np.linalg.lstsq(np.diag(mass * frequency) - matrix, by_source, rcond=None)[0]
    gain = float(through @ state + direct)
    return gain if abs(gain) > 1e-12 * (float(np.abs(through) @ np.abs(state)) + abs(direct)) else 0.0


@lru_cache(maxsize=8)
def _system(model: Model) -> System:
    """The model's equations without limits, made once for all gains."""
    return System(model, free_of_limits=True)


def _frequency(system: System, matrix: FloatArray) -> float:
    fastest = float(np.max(np.real(eigenvalues_of(system, matrix)), initial=0.0))
    return SLOW if fastest < 1e-9 else 10.0 * fastest


def _feedforward_problem(
    model: Model, values: dict[str, float], graph: nx.DiGraph[str], controller: Controller
) -> Problem | None:
    """A feedforward path must act against what the disturbance does by itself."""
    if not controller.ff:
        return None
    opened = _opened(model, graph, controller)
    plant = slow_gain(model, values, controller.out, controller.pv, opened)
    for name, slot in model.slots.items():
        if slot.kind != "boundary" or controller.ff not in reached_from(graph, name):
            continue
        direct = slow_gain(model, values, name, controller.pv, opened)
        forward = slow_gain(model, values, name, controller.ff, opened)
        if direct * forward * plant > 0:
            return Problem(
                f"the feedforward into {controller.tag} has the wrong sign: '{name}' rising by itself "
                f"{'raises' if direct > 0 else 'lowers'} {controller.pv}, and so does the feedforward",
                "turn the sign of the feedforward's gain, or check which way its signal acts",
                controller.where,
            )
    return None
