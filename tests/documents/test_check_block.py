"""A block's text checked for sense: what is wrong is told with both sides and both units."""

from __future__ import annotations

from pathlib import Path

import pytest

from loopsim.documents.block_kinds import Kinds
from loopsim.documents.catalogue import Catalogue, shipped
from loopsim.documents.namespace import Names
from loopsim.documents.types import Let
from loopsim.errors import InputError, Problems

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

# what is changed in the good block, what it becomes, what is told, and the text that the place points at
CASES = [
    ("missing factor", "rho*cp*q*(T_in - T)", "rho*q*(T_in - T)", "`rho*q*(T_in - T)` is kg*K/s but `Q` is W: they cannot be added", "Q"),
    ("wrong sides", "rho*cp*V*dT/dt =", "rho*V*dT/dt =", "`rho*V*dT/dt` is kg*K/s but `rho*cp*q*(T_in - T) + Q` is W: they cannot be equal", "rho*cp*q"),
    ("second order", "2: k*c^2", "2: k*c", "`q*(c_in - c)` is mol/s but `V*rate` is m^3/s", "V*rate"),
    ("unknown name", "- V*rate", "- V*rat", "there is no 'rat' in this block", "rat"),
    ("bare number", "(T_in - T)", "(T_in - 20)", "`T_in` is K but `20` is dimensionless: they cannot be subtracted", "20"),
    ("condition wanted", "where(hot, 0, Q)", "where(Q, 0, Q)", "`Q` is W: a condition is wanted", "Q, 0"),
    ("flag in a sum", "is: T > range.high", "is: (T > range.high) + 1", "`T > range.high` is on or off: it cannot be added", "T > range"),
    ("pair", "range.high - range.low)", "range - range.low)", "'range' is a pair", "range - range.low"),
    ("no pair", "range.high - range.low)", "V.high - range.low)", "'V' is not a pair", "V.high"),
    ("wrong unit of an output", "duty:  {unit: kW", "duty:  {unit: kJ", "the value of 'duty' is J but `where(hot, 0, Q)` is W", "where"),
    ("wrong default", "default: 998 kg/m^3", "default: 998 kg", "998 kg where the default of 'rho' is in kg/m^3", "998 kg"),
    ("wrong start", "start: 20 degC", "start: 20 s", "20 s where the start of 'T' is in degC", "20 s"),
    ("difference for a point", "start: 20 degC", "start: 20 K", "20 K where the start of 'T' is in degC", "20 K"),
    ("zero for a point", "start: 20 degC", "start: 0", "0 where the start of 'T' is a point on a scale (degC)", "0}"),
    ("bare default", "default: 0 kW", "default: 5", "the bare number 5 where the default of 'Q' is in kW", "5}"),
    ("wrong limit", "above: 0}", "above: 1 s}", "1 s where 'above' of 'V' is in m^3", "1 s}"),
    ("point compared with a difference", "T > range.high", "T > T_in - T", "`T` is a point on a scale, `T_in - T` a difference", "T_in - T}"),
    ("difference shown as a point", "  T:     {unit: degC}\n  hot", "  T:     {unit: K}\n  hot", "the output 'T' is a difference (K) but what it shows is a point on a scale", "T:"),
    ("name twice", "  share: (T", "  q: (T", "'q' is an input already; it cannot be a let too", "q: (T"),
    ("constant as a name", "  share: (T", "  g: (T", "'g' is a constant of the language", "g: (T"),
    ("read as a rate", "  share: (T", "  dT: (T", "'dT' would be read as the change of the state 'T'", "dT: (T"),
    ("balance missing", "  species: V*dc/dt = q*(c_in - c) - V*rate\n", "", "the block has 2 states but 1 balance", "trial"),
    ("state without balance", "V*dc/dt = q*(c_in - c)", "V/V*dT/dt*c/T = q/V*(c_in - c)", "no balance says how 'c' changes", "c:     {unit: mol/L, start"),
    ("rate of an input", "V*dc/dt", "V*dQ/dt", "'Q' is not a state: dQ/dt has no meaning", "dQ/dt"),
    ("rate of what an input drives", "rho*cp*V*dT/dt", "d(rho*cp*V*T_in)/dt", "'T_in' cannot stand inside a derivative", "d(rho"),
    ("square of a rate", "rho*cp*V*dT/dt", "rho*cp*V*dT/dt*dT/dt", "the balance 'energy' is not linear in its derivatives", "rho*cp"),
    ("stream", "T: T_in}", "T: T_inn}", "the stream 'inlet' carries 'T_inn', which is no port", "inlet"),
    ("exponent", "2: k*c^2", "2: k*c^share", "`c` is mol/m^3: its exponent must be a number, not a formula", "share"),
    ("argument", "  share: (T", "  odd: exp(Q)\n  share: (T", "`Q` is W: only a dimensionless number can be the argument of exp", "Q)"),
    ("circle", "  share: (T", "  a: b + 1\n  b: a - 1\n  share: (T", "these depend on each other in a circle: a -> b -> a", "a: b + 1"),
    ("output of nothing", "  T:     {unit: degC}\n  hot", "  X:     {unit: degC}\n  hot", "the output 'X' shows nothing of its name", "X:"),
    ("choice missing", "{by: order, 1: k*c, 2: k*c^2}", "{by: order, 1: k*c}", "nothing is said for '2' of 'order'", "{by"),
    ("unknown setting", "{by: order, 1: k*c", "{by: ordr, 1: k*c", "there is no setting 'ordr'", "{by"),
    ("unknown choice", "is: T > range.high", "is: order == 3", "`3` is not a choice of 'order'", "3}"),
    ("looking back without a scan", "(c_in - c)", "(c_in - was(c))", "this block has no scan", "was(c)"),
    ("default that moves", "default: 998 kg/m^3", "default: V/q*k", "'q' is not known yet where parameters are", "q*k"),
    ("index of what does not repeat", "q*(T_in - T)", "q*(T_in[1] - T)", "'T_in' does not repeat", "T_in[1]"),
    ("sum over nothing", "where(hot, 0, Q)", "sum(Q)", "'sum' of one argument runs over a repeat; there is none", "sum(Q)"),
]  # fmt: skip


def read(folder: Path, text: str) -> None:
    path = folder / "blocks" / "trial.yaml"
    path.parent.mkdir(exist_ok=True)
    path.write_text(text)
    Catalogue(folder).read(path)


def test_a_good_block_passes(tmp_path: Path) -> None:
    read(tmp_path, GOOD)


@pytest.mark.parametrize(
    ("old", "new", "expected", "at"), [case[1:] for case in CASES], ids=[case[0] for case in CASES]
)
def test_what_is_wrong_is_told(tmp_path: Path, old: str, new: str, expected: str, at: str) -> None:
    assert old in GOOD
    with pytest.raises(InputError) as caught:
        read(tmp_path, GOOD.replace(old, new))
    told = [problem for problem in caught.value.problems if expected in problem.what]
    assert told, str(caught.value)
    assert told[0].where is not None and told[0].where.text[told[0].where.column - 1 :].startswith(at)


def problems(folder: Path, text: str) -> list[str]:
    """What is told of a block that is given by its sections."""
    try:
        read(folder, "block: trial\nabout: A trial.\n" + text)
    except InputError as error:
        return [problem.what for problem in error.problems]
    return []


REPEATED = """
parameters: {n: {unit: count, default: 3}, time: {unit: s, above: 0}}
repeat: {i: n}
inputs: {T_in: {unit: degC}}
states:
  T[i]: {unit: degC, start: T_in}
let:
  T[0]: T_in
balances:
  cell[i]: time*dT[i]/dt = T[i-1] - T[i]
outputs:
  T: {unit: degC, is: "T[n]"}
"""


@pytest.mark.parametrize(
    ("old", "new", "expected"),
    [
        ("", "", None),
        ("T[i-1] - T[i]", "T[i-1] - T[i+1]", "`T[i+1]` reads T[n+1] where i is n"),
        ("  T[0]: T_in\n", "  x: T_in\n", "`T[i-1]` reads T[0] where i is 1"),
        ("  T[0]: T_in", "  T[0]: time", "'T[i]' is K, a point on a scale but 'T[0]' is s"),
        ("T[n]", "T[i]", "'i' stands for nothing here"),
        ("T[n]", "T[m]", "there is no index 'm'"),
        ("T[n]", "T[0] + sum(T_in)", "nothing in `sum(T_in)` runs over 'i'"),
        ("- T[i]", "- T_in[i]", "'T_in' does not repeat"),
        ("  T[0]: T_in\n", "  T[0]: T_in\n  T[1]: T_in\n", "'T' is a state already; it cannot be a let too"),
        ("  T[0]: T_in\n", "  T[0]: T_in\n  x[i]: T[i+1]\n  x[n]: T_in\n", None),  # where i is n, x[n] wins
        ("  T[0]: T_in\n", "  T[0]: T_in\n  x[0]: 0\n  x[i]: x[i-1] + 1\n", None),  # the unit follows from x[0]
        ("  T[0]: T_in\n", "  T[0]: T_in\n  x[0]: 0\n  x[i]: x[i] + 1\n", "these depend on each other in a circle"),
        ("repeat: {i: n}", "repeat: {i: time}", "the repeat runs over 'time', which is no count and no list"),
        ("repeat: {i: n}\n", "", "'T[i]' repeats, but the block repeats nothing"),
    ],
)
def test_repeats(tmp_path: Path, old: str, new: str, expected: str | None) -> None:
    found = problems(tmp_path, REPEATED.replace(old, new) if old else REPEATED)
    assert found == [] if expected is None else any(expected in one for one in found), found


SCANNED = """
settings: {way: {choices: [up, down], default: up}}
parameters: {scan: {unit: s, default: 1 s}, rate: {unit: like u per 1 s}}
inputs: {u: {unit: any}}
memory:
  y: {unit: like u, start: u}
scan:
  y:    was(y) + step
  step: clip(u - was(y), -rate*scan, rate*scan)
continuous:
  y:    u
outputs:
  y:    {unit: like u}
"""


@pytest.mark.parametrize(
    ("old", "new", "expected"),
    [
        ("", "", None),
        ("rate*scan)", "rate)", "they cannot be given to clip together"),
        ("was(y) + step", "y + step", "these depend on each other in a circle: y -> y"),
        ("  step: clip", "  count: was(count) + 1\n  step: clip", "the unit of 'count' cannot be told"),
        ("  y:    was(y) + step\n", "  z:    was(y) + step\n", "scan says no next value for 'y'"),
        ("scan: {unit: s, default: 1 s}, ", "", "the block has a scan but no parameter 'scan'"),
        ("  y:    u", "  y:    du/dt = u - y", "the law for 'y' does not hold dy/dt"),
        ("  y:    u", "  y:    rate*dy/dt = u - y", "they cannot be equal"),
        ("{unit: like u}\n", "{unit: like u, is: was(y)}\n", "'was' stands in scan only"),
        ("was(y) + step", "where(way == left, step, was(y))", "`left` is not a choice of 'way'"),
        ("was(y) + step", "where(way, step, was(y))", "`way` is a choice of way: a condition is wanted"),
        ("was(y) + step", "where(way != was(way), step, was(y))", None),
        ("was(y) + step", "where(up, step, was(y))", "there is no 'up' in this block"),
        ("default: up", "default: where(u > u, up, down)", "`u > u` cannot stand in the default of a setting"),
        ("default: up", "default: where(wired(u), up, down)", None),
    ],
)
def test_scans_and_settings(tmp_path: Path, old: str, new: str, expected: str | None) -> None:
    if old.startswith("default: up"):
        new = new.replace("where", '"where') + '"'
    found = problems(tmp_path, SCANNED.replace(old, new) if old else SCANNED)
    assert found == [] if expected is None else any(expected in one for one in found), found


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("inputs: {u: {unit: any, percent_of: span}}", "percent_of: 'span' is not a pair"),
        ("inputs: {u: {unit: s, answers: {takes: u^2}}}", "'takes' of 'u' is s but `u^2` is s^2"),
        ("inputs: {u: {unit: s, answers: {up: u}}}", "'up' of 'u' is on or off but `u` is s"),
        ("inputs: {u: {unit: like v}, v: {unit: like u}}", "leads back to itself"),
        ("inputs: {u: {unit: change of w}}", "'change of w': nothing called 'w' has a unit"),
        ("inputs: {u: {unit: s}}\nlet: {x: out.takes}", "'out' is not an output: nobody answers it"),
        (
            "inputs: {u: {unit: s}}\nsolve: {x: {unit: s, equation: u = 2*u}}",
            "the equation for 'x' does not depend on it",
        ),
        (
            "inputs: {u: {unit: s}}\nsolve: {x: {unit: s, equation: dx/dt = u/u}}",
            "a derivative cannot stand in the equation",
        ),
        ("parameters: {a: {unit: s}}\none_of: [[a, b]]", "one_of: 'b' is not a parameter"),
        ("parameters: {a: {unit: s}}\none_of: [[a, a]]", "one_of: 'a' may be left out"),
        ('parameters: {a: {unit: "%", default: 40}}', "the bare number 40 where the default of 'a' is in %"),
        ("parameters: {a: {unit: count, default: 2.5}}", "2.5 where the default of 'a' is a count"),
        ("parameters: {a: {unit: on/off, default: 1}}", "the bare number 1 where the default of 'a' is in on/off"),
        ("parameters: {a: {unit: bar(g), default: 3 bar}}", "3 bar where the default of 'a' is in bar(g)"),
        ("parameters: {a: {table: {x_unit: s, y_unit: m}}}\nlet: {x: a}", "'x' is neither a quantity nor a condition"),
        ("inputs: {u: {unit: s}}\nlet: {x: given(y)}", "'y' is not a parameter or an input"),
        ("inputs: {u: {unit: s}}\nlet: {x: on and u > u}", "there is no 'on' in this block"),
        (
            "faults: {stuck: {about: x}}\ninputs: {stuck: {unit: s}}",
            "'stuck' is an input already; it cannot be a fault too",
        ),
        ("faults: {bias: {about: x}}\nparameters: {bias: {unit: s}}", None),
        ("blocks: {A: {use: pid, scan: scan}}", "'scan' is not a parameter of this block"),
        (
            "blocks: {A: {use: pid, gain: 2*gian}}\nparameters: {gain: {unit: s}}",
            "'gian' is not a parameter of this block",
        ),
        ("parameters: {scan: {unit: m}}\nscan: {x: 1}", "'scan' is m, a time is wanted"),
        (
            "parameters: {span: {unit: degC, pair: true}}\ninputs: {u: {unit: bar, percent_of: span}}",
            "'u' is in bar but its range 'span' is in degC",
        ),
        (
            "states: {a: {unit: s, start: b}, b: {unit: s, start: 2*a}}\nbalances: {a: a*da/dt = b, b: b*db/dt = a}",
            "these depend on each other in a circle: a -> b -> a",
        ),
        ("blocks: {A: {use: pid, gain: k}}\nlet: {x: 1}", "a block made of blocks has no let of its own"),
        ("blocks: {A: {use: pid}}\nwires: [B.x -> A.pv]", "'B.x': there is no block of that tag inside"),
        ("blocks: {A: {use: pid}}\nports: {x: B.x}", "the port 'x' leads to 'B.x', which is not inside"),
    ],
)
def test_sections(tmp_path: Path, text: str, expected: str | None) -> None:
    found = problems(tmp_path, text)
    assert found == [] if expected is None else any(expected in one for one in found), found


@pytest.mark.parametrize(
    ("second", "circle"),
    [
        ("{by: form, one: p, two: a}", False),  # a needs b with one, b needs a with two: never both
        ("{by: form, one: a, two: p}", True),
        ("where(form == one, p, a)", False),
        ("where(form == two, p, a)", True),
        ("where(given(p), p, a)", False),  # which branch holds is known only in a plant
    ],
)
def test_a_circle_that_no_choice_closes_is_none(tmp_path: Path, second: str, circle: bool) -> None:
    text = "settings: {form: {choices: [one, two]}}\nparameters: {p: {unit: s, default: none}}\n"
    text += f"let:\n  a: {{by: form, one: b, two: p}}\n  b: {second}\n"
    assert any("in a circle: a -> b -> a" in one for one in problems(tmp_path, text)) == circle


def test_all_is_told_together(tmp_path: Path) -> None:
    text = "inputs: {u: {unit: s, default: 3}}\nlet: {x: u + 1, y: u^2 + u, z: w}"
    assert len(problems(tmp_path, text)) == 4


def test_many_settings_in_units_are_refused_at_once(tmp_path: Path) -> None:
    """Ten settings of eight choices are 8^10 combinations: none of them is tried."""
    choices = ", ".join("abcdefgh")
    settings = ", ".join(f"s{n}: {{choices: [{choices}]}}" for n in range(10))
    by = ", ".join(f"{one}: s" for one in "abcdefgh")
    inputs = ", ".join(f"u{n}: {{unit: {{by: s{n}, {by}}}}}" for n in range(10))
    assert any("combinations" in one for one in problems(tmp_path, f"settings: {{{settings}}}\ninputs: {{{inputs}}}"))


@pytest.mark.parametrize("path", sorted(shipped("blocks").rglob("*.yaml")), ids=lambda path: path.stem)
def test_every_shipped_block_makes_sense(path: Path) -> None:
    Catalogue(path.parent).read(path)


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
            Catalogue(tmp_path).read(target)


@pytest.mark.parametrize("path", sorted(shipped("blocks").rglob("*.yaml")), ids=lambda path: path.stem)
def test_every_formula_of_a_shipped_block_is_looked_at(path: Path) -> None:
    """Nothing stays unchecked in silence: every formula has a kind under every choice of the settings in units."""
    block = Catalogue(path.parent).read(path)
    names = Names(block)
    for choices in ({"order": "1"}, {"order": "2"}):
        kinds = Kinds(names, choices, Problems())
        for member in names.members:
            if isinstance(member.entry, Let):
                assert kinds.of(member.entry.value) is not None, member.key.name
        assert not kinds.untold
