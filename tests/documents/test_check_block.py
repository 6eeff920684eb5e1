"""A block's text checked for sense: what is wrong is told with both sides and both units."""

from __future__ import annotations

from pathlib import Path

import pytest

from loopsim.documents.library import Library, shipped
from loopsim.errors import InputError

GOOD = """block: trial
about: A tank.
settings:
  order: {choices: [1, 2], default: 1}
parameters:
  V:     {unit: m^3, above: 0}
  rho:   {unit: kg/m^3, default: 998 kg/m^3}
  cp:    {unit: J/(kg*K), default: 4182 J/(kg*K)}
  k:     {unit: {by: order, 1: 1/s, 2: m^3/(mol*s)}}
  range: {unit: degC, pair: true, default: [0 degC, 100 degC]}
inputs:
  q:     {unit: m^3/h}
  T_in:  {unit: degC}
  c_in:  {unit: mol/L}
  Q:     {unit: kW, default: 0 kW}
states:
  T:     {unit: degC, start: 20 degC}
  c:     {unit: mol/L, start: 0 mol/L}
let:
  rate:  {by: order, 1: k*c, 2: k*c^2}
  share: (T - range.low)/(range.high - range.low)
balances:
  energy:  rho*cp*V*dT/dt = rho*cp*q*(T_in - T) + Q
  species: V*dc/dt = q*(c_in - c) - V*rate
outputs:
  T:     {unit: degC}
  hot:   {unit: on/off, is: T > range.high}
  duty:  {unit: kW, is: "where(hot, 0, Q)"}
streams:
  inlet: {q: q, T: T_in}
"""

CASES = [
    ("missing factor", "rho*cp*q*(T_in - T)", "rho*q*(T_in - T)", "they cannot be added"),
    ("wrong sides", "rho*cp*V*dT/dt =", "rho*V*dT/dt =", "`rho*V*dT/dt` is in kg*K/s but `rho*cp*q*(T_in - T) + Q` is in W"),
    ("second order", "2: k*c^2", "2: k*c", "but `V*rate` is in"),
    ("unknown name", "- V*rate", "- V*rat", "there is no 'rat' in this block"),
    ("condition wanted", "where(hot, 0, Q)", "where(Q, 0, Q)", "`Q` is in W; a condition is wanted here"),
    ("flag in a sum", "is: T > range.high", "is: (T > range.high) + 1", "on or off"),
    ("pair", "range.high - range.low)", "range - range.low)", "'range' is a pair"),
    ("wrong unit of an output", "duty:  {unit: kW", "duty:  {unit: kJ", "'duty' is in J but its formula is in W"),
    ("wrong default", "default: 998 kg/m^3", "default: 998 kg", "'rho' is in kg/m^3 but its default is in kg"),
    ("wrong start", "start: 20 degC", "start: 20 s", "'T' is in K but its start is in s"),
    ("name twice", "  share: (T", "  q: (T", "'q' is already a input; it cannot be a let too"),
    ("constant as a name", "  share: (T", "  g: (T", "'g' is a constant of the language"),
    ("read as a rate", "  share: (T", "  dT: (T", "'dT' would be read as the change of 'T'"),
    ("balance missing", "  species: V*dc/dt = q*(c_in - c) - V*rate\n", "", "2 states but 1 balances"),
    ("stream", "T: T_in}", "T: T_inn}", "the stream 'inlet' carries 'T_inn', which is no port"),
    ("exponent", "2: k*c^2", "2: k*c^share", "its exponent must be a number"),
    ("argument", "  share: (T", "  odd: exp(Q)\n  share: (T", "`Q` is in W; exp takes a plain number"),
    ("circle", "  share: (T", "  a: b + 1\n  b: a - 1\n  share: (T", "these depend on each other in a circle: a -> b -> a"),
    ("output of nothing", "  T:     {unit: degC}\n  hot", "  X:     {unit: degC}\n  hot", "the output 'X' shows nothing"),
]  # fmt: skip


def read(folder: Path, text: str) -> None:
    path = folder / "blocks" / "trial.yaml"
    path.parent.mkdir(exist_ok=True)
    path.write_text(text)
    Library(folder).read(path)


def test_a_good_block_passes(tmp_path: Path) -> None:
    read(tmp_path, GOOD)


@pytest.mark.parametrize(("old", "new", "expected"), [case[1:] for case in CASES], ids=[case[0] for case in CASES])
def test_what_is_wrong_is_told(tmp_path: Path, old: str, new: str, expected: str) -> None:
    assert old in GOOD
    with pytest.raises(InputError) as caught:
        read(tmp_path, GOOD.replace(old, new))
    assert expected in str(caught.value)
    assert "trial.yaml:" in str(caught.value)


@pytest.mark.parametrize("path", sorted(shipped("blocks").rglob("*.yaml")), ids=lambda path: path.stem)
def test_every_shipped_block_makes_sense(path: Path) -> None:
    Library(path.parent).read(path)


@pytest.mark.parametrize("path", sorted(shipped("blocks").rglob("*.yaml")), ids=lambda path: path.stem)
def test_a_factor_with_a_unit_in_any_balance_is_caught(tmp_path: Path, path: Path) -> None:
    """Each balance's right side times a second: always told."""
    lines = path.read_text().splitlines()
    balances = [n for n, line in enumerate(lines) if "/dt =" in line.replace(" ", "").replace("/dt=", "/dt =")]
    for number in balances:
        left, _, right = lines[number].partition("=")
        changed = [*lines[:number], f"{left}= since(1 > 0)*({right.strip()})", *lines[number + 1 :]]
        target = tmp_path / "blocks" / path.name
        target.parent.mkdir(exist_ok=True)
        target.write_text("\n".join(changed) + "\n")
        with pytest.raises(InputError):
            Library(tmp_path).read(target)
