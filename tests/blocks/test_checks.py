"""Every shipped block alone: its `check:` cases against their sources, both of its models, and what it must say of itself."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from loopsim.documents.catalogue import Catalogue
from loopsim.documents.types import Block, Check
from loopsim.errors import ComputationError, InputError
from loopsim.model.assemble import assemble
from loopsim.simulation.check_case import case_of, run_check

LIBRARY = Catalogue(Path(__file__).parent / "beside nothing")
NAMES = LIBRARY.names()
CASES = [(name, number) for name in NAMES for number in range(len(LIBRARY.block(name).checks))]


@pytest.mark.parametrize(("name", "number"), CASES, ids=lambda part: str(part))
def test_check_agrees_with_its_source(name: str, number: int) -> None:
    block = LIBRARY.block(name)
    check = block.checks[number]
    value, agrees = run_check(block, check, LIBRARY)
    assert agrees, f"{value!r}, wanted {check.expected.text} within {check.within.text} ({check.source})"


@pytest.mark.parametrize("name", NAMES)
def test_block_has_a_check_with_a_source(name: str) -> None:
    checks = LIBRARY.block(name).checks
    assert checks
    assert all(check.source and check.given for check in checks)


@pytest.mark.parametrize("name", NAMES)
def test_block_stands_alone(name: str) -> None:
    """Read, and assembled both ways with the values of its first check."""
    block = LIBRARY.block(name)
    plant = case_of(block, block.checks[0])
    law, timed = assemble([plant], LIBRARY, law=True), assemble([plant], LIBRARY)
    assert set(law.signals) == set(timed.signals) != set()


def lacking(block: Block) -> Iterator[str]:
    """Entries that do not say what they mean."""
    yield from (section for section in ("about", "assumes", "sources") if not getattr(block, section))
    for setting in block.settings.values():
        if not setting.about:
            yield setting.name
    for fault in block.faults.values():
        if not fault.about:
            yield fault.name
    for entry in (*block.parameters, *block.inputs, *block.states, *block.memory, *block.solve):
        if not entry.about:
            yield entry.key.name
    told = {entry.key.name for entry in (*block.parameters, *block.inputs, *block.states, *block.memory, *block.solve)}
    for output in block.outputs:
        if not output.about and output.key.name not in told:
            yield output.key.name


@pytest.mark.parametrize("name", NAMES)
def test_block_says_what_everything_is(name: str) -> None:
    assert not list(lacking(LIBRARY.block(name)))


# ---------------------------------------------------------------- the checks can fail
def wrong(name: str, number: int, tmp_path: Path, old: str, new: str) -> tuple[float, bool]:
    """A check of a shipped block whose file has been changed."""
    path = LIBRARY.path(name)
    text = path.read_text(encoding="utf-8")
    assert old in text
    (tmp_path / "blocks").mkdir()
    (tmp_path / "blocks" / path.name).write_text(text.replace(old, new), encoding="utf-8")
    catalogue = Catalogue(tmp_path)
    return run_check(catalogue.block(name), catalogue.block(name).checks[number], catalogue)


def first_of(name: str, kind: str) -> int:
    """The place of a block's first check of a kind."""

    def asks(check: Check) -> bool:
        return bool(getattr(check, kind))

    return next(number for number, check in enumerate(LIBRARY.block(name).checks) if asks(check))


@pytest.mark.parametrize(
    ("name", "kind", "old", "new"),
    [
        ("heated_tank", "gain", "+ Q - UA", "+ 1.01*Q - UA"),
        ("heated_tank", "time_constant", "rho*cp*V * dT/dt", "1.01*rho*cp*V * dT/dt"),
        ("steam_coil", "at", "power/latent*opening", "1.01*power/latent*opening"),
        ("first_order_lag", "after", "= u - y", "= 1.01*(u - y)"),
    ],
    ids=lambda part: str(part),
)
def test_a_wrong_factor_is_found(tmp_path: Path, name: str, kind: str, old: str, new: str) -> None:
    assert not wrong(name, first_of(name, kind), tmp_path, old, new)[1]


@pytest.mark.parametrize(
    ("old", "new", "expected"),
    [
        ("is: 0.28752 K/kW", "is: 0.28752 kW/K", "where K/W is meant"),
        ("gain: [Q, T]", "gain: [Q, temperature]", "no 'temperature'"),
        ("within: 0.1 %", "within: 1 kg", "1 kg"),
    ],
    ids=["unit", "name", "within"],
)
def test_a_check_that_makes_no_sense_is_refused(tmp_path: Path, old: str, new: str, expected: str) -> None:
    with pytest.raises(InputError) as caught:
        wrong("heated_tank", first_of("heated_tank", "gain"), tmp_path, old, new)
    assert expected in str(caught.value)


def test_a_gain_that_does_not_settle_is_told(tmp_path: Path) -> None:
    """A level between given flows integrates: a step of the inflow has no final value."""
    folder = tmp_path / "blocks"
    folder.mkdir()
    (folder / "integrator.yaml").write_text(
        "block: integrator\nabout: Sums up its input.\ninputs:\n  u: {unit: m^3/h}\n"
        "states:\n  V: {unit: m^3, start: 1 m^3}\nbalances:\n  volume: dV/dt = u\noutputs:\n  V: {unit: m^3}\n"
        "check:\n  - {given: {u: 0 m^3/h}, gain: [u, V], is: 1 h, within: 1 %, source: none}\n",
        encoding="utf-8",
    )
    catalogue = Catalogue(tmp_path)
    block = catalogue.block("integrator")
    with pytest.raises(ComputationError, match="does not come to rest"):
        run_check(block, block.checks[0], catalogue)
