"""Published values of `published.yaml` against the product: plants built, at rest or run, and read."""

from __future__ import annotations

import importlib
from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING

import pytest
import yaml

if TYPE_CHECKING:
    from published_bench import Results

HERE = Path(__file__).parent
CHECKS = {
    check["id"]: check for check in yaml.safe_load((HERE / "published.yaml").read_text(encoding="utf-8"))["checks"]
}
ROBERTSON = ("4e-01", "4e+00", "4e+01", "4e+02", "4e+04", "4e+05", "1e+11")  # seconds
# where each check is measured: module, function (and after a colon the time that it is asked for)
MEASURES = {
    "mixing-tank": ("published_process", "mixing_tank"),
    "blending-example": ("published_process", "blending_example"),
    "heated-tank-si": ("published_process", "heated_tank"),
    "interacting-tanks": ("published_process", "interacting_tanks"),
    "second-order-kinetics": ("published_process", "second_order_kinetics"),
    "cstr-exo-steady": ("published_process", "exothermic_reactor"),
    "vdvusse-benchmark": ("published_process", "van_de_vusse"),
    "quadtank-Pminus": ("published_process", "quadruple_tank"),
    "ph-neutralisation": ("published_instruments", "ph_neutralisation"),
    "iec-liquid-ex1": ("published_instruments", "sizing"),
    "kv-basics": ("published_instruments", "kv_definition"),
    "valve-characteristics": ("published_instruments", "characteristics"),
    "backlash-df": ("published_instruments", "backlash"),
    "stick-slip-cycle": ("published_instruments", "stick_slip"),
    "thermowell-lags": ("published_instruments", "thermowell_lags"),
    "derivative-filter": ("published_controllers", "derivative_filter"),
    "velocity-position": ("published_controllers", "velocity_position"),
    "sampling-facts": ("published_controllers", "sampling"),
    "bumpless": ("published_controllers", "bumpless"),
    "pid-forms": ("published_controllers", "forms"),
    **{f"robertson-{time}": ("published_solvers", f"robertson:{time}") for time in ROBERTSON},
    "vanderpol-stiff": ("published_solvers", "stiff_oscillator"),
    "vanderpol-mu1": ("published_solvers", "mild_oscillator"),
    "dde-hayes-const": ("published_solvers", "hayes_from_one"),
    "dde-hayes-zero": ("published_solvers", "hayes_from_nought"),
    "hires": ("published_solvers", "photochemical_chain"),
}


def allowed(expected: float, tolerance: str) -> float:
    """The tolerance of a source as an absolute number: `abs x`, `rel x` or `exact`."""
    kind, _, number = tolerance.partition(" ")
    if kind == "exact":
        return 0.0
    return float(number) * (abs(expected) if kind == "rel" else 1.0)


def test_every_check_is_measured() -> None:
    assert set(CHECKS) == set(MEASURES)


@pytest.mark.parametrize("name", CHECKS)
def test_published_values(name: str, tmp_path: Path) -> None:
    module, function = MEASURES[name]
    measure: Callable[[Path], Results] = getattr(importlib.import_module(module), function.partition(":")[0])
    if ":" in function:
        measure = partial(measure, time=float(function.partition(":")[2]))
    found, check = measure(tmp_path), CHECKS[name]
    assert set(found) == {output["name"] for output in check["outputs"]}
    misses = []
    for output in check["outputs"]:
        measured, expected = found[output["name"]], float(output["expected"])
        limit = max(allowed(expected, output["tolerance"]), measured.error)
        if not abs(measured.value - expected) <= limit:
            misses.append(f"{output['name']}: {measured.value!r}, published {expected} ± {limit:.3g}")
    assert not misses, f"{check['source']} ({check['basis']})\n" + "\n".join(misses)
