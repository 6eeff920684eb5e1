"""Seeded noise: draw k of a source depends on the seed, the run, the source's tag and k, and on nothing else."""

from __future__ import annotations

import hashlib
import math

import numpy as np

from loopsim.errors import fail
from loopsim.model.types import Model
from loopsim.simulation.bodies import Program
from loopsim.simulation.machine import Machine

MOST_DRAWS = 20_000_000  # of one source in one run


def normals(seed: int, run: int, key: str, count: int) -> list[float]:
    """`count` standard normal numbers of one source: Box and Muller's transform of counter-based uniform numbers.

    The first numbers of a longer list are those of a shorter one.
    """
    digest = hashlib.sha256(f"{seed}/{run}/{key}".encode()).digest()
    bits = np.random.Philox(key=np.frombuffer(digest[:16], dtype=np.uint64)).random_raw(2 * count)
    uniform = ((bits >> np.uint64(11)).astype(np.float64) + 0.5) * 2.0**-53
    radius = np.sqrt(-2.0 * np.log(uniform[0::2]))
    result: list[float] = (radius * np.cos(2.0 * math.pi * uniform[1::2])).tolist()
    return result


def draws(
    model: Model, p: list[float], program: Program, machine: Machine, seed: int, run: int, lasts: float
) -> list[list[float]]:
    """The numbers of every noise source for a run of `lasts` seconds, in the program's order of sources."""
    periods = [0.0] * len(program.scans), [0.0] * len(program.scans)
    every = [0.0] * len(program.noises)
    machine.timing(p, *periods, every)
    counts = [math.floor(lasts / one + 1e-6) + 2 if one > 0 else 1 for one in every]
    for name, count in zip(program.noises, counts, strict=True):
        if count > MOST_DRAWS:
            noise = model.noises[name]
            cure = f"at most {MOST_DRAWS:.0e} can be; draw less often, or run for a shorter time"
            raise fail(f"the noise of '{noise.tag}' would be drawn {count} times", noise.where, cure)
    return [
        normals(seed, run, model.noises[name].key, count) for name, count in zip(program.noises, counts, strict=True)
    ]
