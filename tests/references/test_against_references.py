"""Runs of the plants under `plants/` against tables worked out by hand-written equations (see each script).

Tolerance: 1e-7 of the signal's span in the table, the span taken as at least 1 K or 1 %.
"""

from __future__ import annotations

import numpy as np
import pytest
from reference_tools import PLANTS, SI, VALUES, FloatArray, Table, read

NAMES = sorted(path.stem for path in VALUES.glob("*.json"))
TOLERANCE = 1e-7


def rows_at(recorded: FloatArray, table: Table) -> list[int]:
    """The recorded row of each instant of the table; an instant that was not recorded is a failure."""
    rows = [int(np.argmin(np.abs(recorded - time))) for time in table.time]
    missing = [time for row, time in zip(rows, table.time, strict=True) if abs(recorded[row] - time) > 1e-9]
    assert not missing, f"{table.name}: no row at {missing[:5]} s"
    return rows


@pytest.mark.parametrize("name", NAMES)
def test_run_agrees_with_reference(name: str) -> None:
    from loopsim.api import simulate

    table = read(name)
    trends = simulate(PLANTS / table.scenario, table.strategy)
    assert trends.status.code == "done", trends.status.sentence
    rows = rows_at(trends.time, table)
    failures = []
    for signal, column in table.signals.items():
        factor, offset = SI[column.unit]
        gaps = np.abs((trends.columns[signal][rows] - offset) / factor - np.array(column.values))
        worst, allowed = int(np.argmax(gaps)), TOLERANCE * column.tolerance_scale()
        if not gaps[worst] <= allowed:
            where = f"{table.time[worst]} s (first beyond: {table.time[int(np.argmax(~(gaps <= allowed)))]} s)"
            failures.append(f"{signal}: {gaps[worst]:.3g} {column.unit} off at {where}, allowed {allowed:.3g}")
    assert not failures, "\n".join(failures)
