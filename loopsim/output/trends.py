"""Trends as CSV: one row for each recorded instant, in people's units."""

from __future__ import annotations

from pathlib import Path

from loopsim.language.units import from_si
from loopsim.results import Trends


def write_csv(trends: Trends, path: Path, air_pressure: float = 101325.0) -> None:
    """Header `time [s],tank.T [degC],…`; numbers with `.` that read back bit for bit."""
    names = list(trends.columns)
    heads = ["time [s]", *(f"{name} [{trends.units[name].text}]" for name in names)]
    columns = [trends.time.tolist()]
    for name in names:
        unit = trends.units[name]
        columns.append([from_si(value, unit, air_pressure) for value in trends.columns[name].tolist()])
    lines = [",".join(heads), *(",".join(repr(value) for value in row) for row in zip(*columns, strict=True))]
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
