"""Runs and rules for the tests: signals from functions of time, rules read as a scenario file has them."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from itertools import pairwise

import numpy as np

from loopsim.documents.nodes import compose
from loopsim.documents.rules import rule as read_rule
from loopsim.documents.source import source_from
from loopsim.documents.types import Rule
from loopsim.errors import Problems
from loopsim.language.units import parse_unit
from loopsim.results import FloatArray, Pieces, Status, Trends
from loopsim.study.judge import verdict_of
from loopsim.study.polynomials import coefficients, value
from loopsim.study.types import Happening, Run, Verdict

SHARES = np.array([0.0, 0.25, 0.5, 0.75, 1.0])
Signal = Callable[[FloatArray], FloatArray]


def rule(text: str) -> Rule:
    """A rule from its text, `{signal: x, max: 70 degC}`."""
    problems = Problems()
    made = read_rule(compose(source_from(text.encode(), "scenario.yaml"), problems), problems)
    problems.raise_if_any()
    return made


def sampled(signals: dict[str, Signal], edges: Sequence[float]) -> Pieces:
    """Pieces between the edges. A function that jumps does so at an edge, and is asked a little inside of both ends."""
    start, length = np.array(edges[:-1], float), np.diff(np.array(edges, float))
    inside = np.clip(SHARES, 1e-12, 1 - 1e-12)
    instants = start[:, None] + length[:, None] * inside
    samples = np.stack([np.broadcast_to(signal(instants), instants.shape) for signal in signals.values()], axis=2)
    return Pieces(tuple(signals), start, length, samples)


def held(name: str, values: Sequence[float], every: float = 1.0) -> Pieces:
    """Pieces of a signal that keeps each value for `every` [s]."""
    samples = np.repeat(np.array(values, float)[:, None], 5, axis=1)
    return Pieces((name,), every * np.arange(len(values)), np.full(len(values), every), samples[:, :, None])


def recut(pieces: Pieces, cuts: Sequence[float]) -> Pieces:
    """The same signals with further cuts at these instants; a quartic cut in two is two quartics."""
    starts, lengths, samples = [], [], []
    for begin, width, values in zip(pieces.start, pieces.length, pieces.samples, strict=True):
        inner = sorted(one for one in cuts if begin + 1e-6 < one < begin + width - 1e-6)
        edges = [begin, *dict.fromkeys(inner), begin + width]
        quartics = coefficients(values.T)
        for low, high in pairwise(edges):
            shares = (low + (high - low) * SHARES - begin) / width if width else SHARES
            starts.append(low)
            lengths.append(high - low)
            samples.append(value(quartics, np.broadcast_to(shares, (len(quartics), 5))).T)
    return Pieces(pieces.names, np.array(starts), np.array(lengths), np.array(samples))


def happened(
    time: float, *reaches: str, target: str = "load", kind: str = "step", step: tuple[float, float] | None = None
) -> Happening:
    """An event that reaches these signals; `step`: a set point from, to."""
    before, after = step if step is not None else (None, None)
    return Happening(time, kind, target, f"{kind} {target}", frozenset(reaches), None, before, after)


def run(pieces: Pieces, *happenings: Happening, units: dict[str, str] | None = None, **others: object) -> Run:
    """A run of these pieces. Signals are in % unless `units` says otherwise; it was to last as long as it did."""
    named = {name: parse_unit((units or {}).get(name, "%")) for name in pieces.names}
    end = float(pieces.start[-1] + pieces.length[-1])
    trends = Trends(np.array([0.0, end]), {}, named, pieces, Status("done"))
    made = Run("feedback", trends, end, tuple(happenings), tuple(one.time for one in happenings))
    return replace(made, **others)  # type: ignore[arg-type]


def judged(text: str, pieces: Pieces, *happenings: Happening, **others: object) -> Verdict:
    """One rule on one run, disturbed at its beginning where nothing else is said to happen."""
    everything = happened(float(pieces.start[0]), *pieces.names, kind="start", target="")
    units = others.pop("units", None)
    assert units is None or isinstance(units, dict)
    return verdict_of(rule(text), run(pieces, *(happenings or (everything,)), units=units, **others))
