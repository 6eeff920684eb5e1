"""Block files: all sections read, `like` and `rename` carried out, blocks found by name."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from loopsim.documents.block import block_from
from loopsim.documents.catalogue import Catalogue, shipped
from loopsim.documents.load import read_block, read_document
from loopsim.documents.nodes import Mapping, compose
from loopsim.documents.source import source_from
from loopsim.documents.types import (
    Balance,
    Block,
    ByChoice,
    Formula,
    Given,
    Key,
    Let,
    PairValue,
    Quantity,
    TableValue,
    UnitText,
    Word,
)
from loopsim.errors import InputError, Problems, Where
from loopsim.language.parse import parse_balance, parse_formula
from loopsim.language.tree import Index, Name, Rate, names_in, walk

SKETCHES = Path(__file__).parent / "sketches"
NAMES = sorted(path.stem for path in (SKETCHES / "blocks").glob("*.yaml"))


@pytest.fixture(scope="module")
def catalogue() -> Catalogue:
    return Catalogue(SKETCHES)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "blocks" / "own").mkdir(parents=True)
    return tmp_path


def write(folder: Path, name: str, text: str) -> Path:
    path = folder / "blocks" / "own" / f"{name}.yaml"
    path.write_text(f"block: {name}\n{text}", encoding="utf-8")
    return path


def block(name: str, **texts: str) -> Block:
    """One of several blocks given as text, read but not checked for sense."""

    def find(name: str, where: Where | None) -> Block:
        problems = Problems()
        tree = compose(source_from(f"block: {name}\n{texts[name]}".encode(), f"{name}.yaml"), problems)
        assert isinstance(tree, Mapping)
        found = block_from(tree, problems, find)
        problems.raise_if_any()
        return found

    return find(name, None)


def problems_of(reading: Callable[[], object]) -> list[str]:
    with pytest.raises(InputError) as caught:
        reading()
    return [problem.what for problem in caught.value.problems]


@pytest.mark.parametrize("name", NAMES)
def test_every_sketch_is_read(catalogue: Catalogue, name: str) -> None:
    found = catalogue.block(name)
    assert found.name == name and found.about


def test_there_are_39_sketches() -> None:
    assert len(NAMES) == 39


def keys(entries: tuple[object, ...]) -> list[str]:
    return [entry.key.name for entry in entries]  # type: ignore[attr-defined]


def test_the_sections_of_a_controller(catalogue: Catalogue) -> None:
    pid = catalogue.block("pid")
    assert list(pid.settings) == ["action", "form", "windup", "mode"]
    assert pid.settings["action"].default is None and pid.settings["action"].choices == ("reverse", "direct")
    assert isinstance(pid.settings["mode"].default, Formula) and isinstance(pid.settings["form"].default, Word)
    parameters = {parameter.key.name: parameter for parameter in pid.parameters}
    assert parameters["integral"].optional and parameters["integral"].default is None
    assert parameters["range"].pair and isinstance(parameters["limits"].default, PairValue)
    assert isinstance(parameters["integral"].bounds.above, Quantity)
    sp = next(one for one in pid.inputs if one.key.name == "sp")
    assert sp.percent_of == "range" and sp.answers is not None and isinstance(sp.answers.up, Formula)
    assert keys(pid.memory) == ["setpoint", "output", "filtered", "I"]
    assert "base" in keys(pid.scan) and pid.scan[0].where.line > 0
    filtered, speed = pid.continuous[0], pid.continuous[1]
    assert isinstance(filtered, Balance) and isinstance(speed, Let)
    assert any(isinstance(part, Rate) for part in walk(filtered.left))
    assert isinstance(next(one for one in pid.let if one.key.name == "Kc").value, ByChoice)


def test_the_sections_of_a_repeated_block(catalogue: Catalogue) -> None:
    exchanger = catalogue.block("heat_exchanger")
    assert exchanger.repeat is not None and (exchanger.repeat.letter, exchanger.repeat.over) == ("i", "n")
    assert Key("T_hot", Index("i")) in [state.key for state in exchanger.states]
    assert Key("T_hot", Index(None, 0)) in [one.key for one in exchanger.let]
    assert Key("T_cold", Index("n", 1)) in [one.key for one in exchanger.let]
    mixing = catalogue.block("mixing_tank")
    assert next(one for one in mixing.parameters if one.key.name == "species").names == ("c",)
    assert mixing.streams["outlet"].carries == (
        (Key("q"), Key("q")),
        (Key("c", Index("s")), Key("c", Index("s"))),
    )


def test_the_sections_of_other_blocks(catalogue: Catalogue) -> None:
    pump = catalogue.block("pumped_line")
    curve = next(one for one in pump.parameters if one.key.name == "curve")
    assert curve.table is not None and [unit.text for unit in curve.table] == ["m^3/h", "m"]
    assert isinstance(curve.unit, UnitText) and curve.unit.kind == "none"
    assert pump.solve[0].key == Key("q") and pump.solve[0].between is not None and not pump.solve[0].stops
    assert list(pump.faults) == ["tripped"]
    loop = catalogue.block("temperature_loop")
    assert loop.blocks["TT"].block == "temperature_transmitter" and loop.ports["out"] == "TIC.out"
    assert isinstance(loop.blocks["TIC"].values["action"], Given)
    assert (loop.wires[0].source, loop.wires[0].target) == ("TT.pv", "TIC.pv")
    assert isinstance(catalogue.block("reacting_tank").parameters[1].unit, ByChoice)


EVERY_SECTION = """about: What no sketch shows.
one_of: [[Kv, q_max]]
parameters:
  one_of: [[a, b, c]]
  curve: {table: {x_unit: m, y_unit: s}, default: {x: [0 m, 1 m], y: [0 s, 2 s]}}
  range: {unit: K, pair: true, default: [0 K, a + b]}
solve:
  p: {unit: kPa, equation: p = q, between: [0 kPa, top], beyond: stop}
outputs:
  T: {unit: degC, at_most: 100 degC}
check:
  - {given: {q: 3 m^3/h, u.1: 2}, gain: [q, T], is: 0.2875 K/kW, within: 0.1 %, source: by hand}
  - {at: T, is: 20 degC, within: 0.1 K}
  - {after: [30 s, c.sugar], is: 1, within: 1 %}
  - {time_constant: [q, T], is: 5 min, within: 1 %}
"""


def test_sections_that_no_sketch_has() -> None:
    found = block("other_sections", other_sections=EVERY_SECTION)
    assert found.one_of == (("Kv", "q_max"), ("a", "b", "c"))
    curve, span = found.parameters
    assert isinstance(curve.default, TableValue) and isinstance(span.default, PairValue)
    assert isinstance(span.default.high, Formula)
    assert found.solve[0].stops and found.solve[0].equation.text == "p = q"
    assert isinstance(found.outputs[0].bounds.at_most, Quantity)
    gain, rest, after, time = found.checks
    assert gain.gain == ("q", "T") and list(gain.given) == ["q", "u.1"] and gain.source == "by hand"
    assert rest.at == "T" and time.time_constant == ("q", "T")
    assert after.after is not None and after.after[0].value == 30 and after.after[1] == "c.sugar"


def test_like_lays_entries_over_renamed_ones(catalogue: Catalogue) -> None:
    sensor = catalogue.block("temperature_transmitter")
    assert keys(sensor.inputs) == ["T"] and isinstance(sensor.inputs[0].unit, UnitText)
    assert sensor.inputs[0].unit.text == "degC" and sensor.inputs[0].about == "temperature of the liquid"
    span = sensor.parameters[0].unit
    assert isinstance(span, UnitText) and (span.text, span.port) == ("like T", "T")
    assert sensor.balances[0].text == "lag*dsensed/dt = delayed(T, dead_time) - sensed"
    assert sensor.balances[0].where.file.endswith("transmitter.yaml")
    assert all("x" not in names_in(one.value.tree) for one in sensor.let if isinstance(one.value, Formula))
    assert sensor.about == catalogue.block("transmitter").about


RENAMED = """about: One lag, every place where a name can stand.
settings:
  way: {choices: [up, down], default: up}
parameters:
  lag: {unit: s, at_least: 0}
  span: {unit: like u, pair: true}
  n: {unit: count, default: 2}
  gain: {unit: {by: way, up: like y per u, down: like y per 1 h}}
repeat: {i: n}
inputs:
  u: {unit: any, percent_of: span, answers: {takes: y, up: y < u or out.up, down: y > u}}
  v[i]: {unit: like u}
states:
  y: {unit: like u, start: u}
let:
  first: v[1]
  last: v[n] + v[n-1]
  noise: {by: way, up: "max(u, 1)", down: lag}
balances:
  lag: lag*dy/dt = u + dy - y
outputs:
  y: {unit: like u}
  out: {unit: like u, is: y + span.low}
streams:
  inlet: {u: u}
"""


def test_rename_reaches_every_name_and_no_unit() -> None:
    names = "{u: m, y: s, lag: tau, span: scale, n: count_n, i: j, way: turn}"
    found = block("other", base=RENAMED, other=f"like: base\nrename: {names}\n")
    parameters = {one.key.name: one for one in found.parameters}
    assert list(parameters) == ["tau", "scale", "count_n", "gain"]
    assert isinstance(parameters["tau"].unit, UnitText) and parameters["tau"].unit.text == "s"  # a unit stays a unit
    gain = parameters["gain"].unit
    assert isinstance(gain, ByChoice) and gain.setting == "turn"
    units = [one.text for one in gain.options.values() if isinstance(one, UnitText)]
    assert units == ["like s per m", "like s per 1 h"]
    assert found.repeat is not None and (found.repeat.letter, found.repeat.over) == ("j", "count_n")
    assert found.inputs[0].percent_of == "scale" and found.inputs[1].key == Key("v", Index("j"))
    answers = found.inputs[0].answers
    assert answers is not None and isinstance(answers.up, Formula) and answers.up.text == "s < m or out.up"
    balance = found.balances[0]
    assert balance.text == "tau*ds/dt = m + dy - s"  # dy alone is a name of its own, not a rate
    assert (balance.left, balance.right) == parse_balance(balance.text)
    lets = {one.key.name: one.value for one in found.let}
    last = lets["last"]
    assert isinstance(last, Formula) and last.text == "v[count_n] + v[count_n-1]"
    assert last.tree == parse_formula(last.text)
    out = found.outputs[1].value
    assert isinstance(out, Formula) and out.tree == parse_formula("s + scale.low")
    assert found.streams["inlet"].carries == ((Key("m"), Key("m")),)
    assert Name("m") in list(walk(found.balances[0].right))


def test_rename_leaves_functions_alone() -> None:
    found = block("other", base=RENAMED, other="like: base\nrename: {noise: max, u: noise}\n")
    value = next(one for one in found.let if one.key.name == "max").value
    assert isinstance(value, ByChoice) and isinstance(up := value.options["up"], Formula)
    assert up.text == "max(noise, 1)" and up.tree == parse_formula("max(noise, 1)")


def test_names_may_change_places() -> None:
    found = block("other", base=RENAMED, other="like: base\nrename: {u: y, y: u}\n")
    assert found.balances[0].text == "lag*du/dt = y + dy - u"


def test_like_takes_out_replaces_and_adds() -> None:
    lets = "let:\n  first: none\n  last: 3\n  more: u\n"
    others = "about: another\nsettings: {way: none}\nbalances: {lag: y = u}\n"
    found = block("other", base=RENAMED, other="like: base\n" + lets + others)
    assert keys(found.let) == ["last", "noise", "more"] and found.settings == {} and found.about == "another"
    assert found.balances[0].text == "y = u" and found.name == "other"


def test_a_chain_of_likes() -> None:
    middle = "like: base\nrename: {u: p}\n"
    last = "like: middle\nrename: {p: q, y: z}\nlet: {first: none}\n"
    found = block("last", base=RENAMED, middle=middle, last=last)
    assert found.balances[0].text == "lag*dz/dt = q + dy - z" and keys(found.let) == ["last", "noise"]


def test_lists_are_replaced_as_a_whole() -> None:
    base = RENAMED + "assumes: [one, two]\nsources: [a book]\n"
    found = block("other", base=base, other="like: base\nassumes: [three]\n")
    assert found.assumes == ("three",) and found.sources == ("a book",)


@pytest.mark.parametrize(
    ("text", "what"),
    [
        ("rename: {up: left}", "there is no name 'up' in 'base'"),
        ("rename: {u: y}", "'y' is a name in 'base' already"),
        ("rename: {u: w, y: w}", "two names become 'w'"),
        ("rename: {u: for}", "'for'"),
        ("inputs: {w: none}", "there is no 'w' in inputs to take out"),
        ("inputs: {v: none}", "there is no 'v' in inputs to take out"),
    ],
)
def test_wrong_likes(text: str, what: str) -> None:
    found = problems_of(lambda: block("other", base=RENAMED, other=f"like: base\n{text}\n"))
    assert len(found) == 1 and what in found[0]


def test_a_name_that_is_also_a_choice_is_not_renamed() -> None:
    base = RENAMED.replace("choices: [up, down]", "choices: [up, down, u]")
    found = problems_of(lambda: block("other", base=base, other="like: base\nrename: {u: w}\n"))
    assert found == ["'u' cannot be renamed"]


def test_circles_of_likes(folder: Path) -> None:
    for name, other in (("one", "one"), ("two", "three"), ("three", "two")):
        write(folder, name, f"like: {other}\n")
    assert problems_of(lambda: Catalogue(folder).block("one")) == ["'like' goes in a circle: one -> one"]
    assert problems_of(lambda: Catalogue(folder).block("three")) == ["'like' goes in a circle: three -> two -> three"]


# ---------------------------------------------------------------- finding blocks
LAG = """about: our own
parameters: {lag: {unit: s, at_least: 0}}
inputs: {u: {unit: any}}
states: {y: {unit: like u, start: u}}
balances: {lag: lag*dy/dt = u - y}
outputs: {y: {unit: like u}}
"""


def test_blocks_beside_the_plant_come_first_and_are_read_once(folder: Path) -> None:
    write(folder, "first_order_lag", LAG)
    catalogue = Catalogue(folder)
    assert catalogue.block("first_order_lag").about == "our own"
    assert catalogue.block("first_order_lag") is catalogue.block("first_order_lag")
    assert "first_order_lag" in catalogue.names() and list(catalogue.names()) == sorted(catalogue.names())


def test_an_unknown_block_names_the_nearest(catalogue: Catalogue) -> None:
    with pytest.raises(InputError, match="there is no block 'heatd_tank'\n    did you mean 'heated_tank'"):
        catalogue.block("heatd_tank")


def test_two_files_of_one_name(folder: Path) -> None:
    write(folder, "twice", LAG)
    (folder / "blocks" / "twice.yaml").write_text("block: twice\nabout: x\n", encoding="utf-8")
    with pytest.raises(InputError, match="two files hold the block 'twice'"):
        Catalogue(folder).names()


def test_a_broken_block_tells_its_problems_each_time(folder: Path) -> None:
    write(folder, "broken", "about: x\nparameters: {V: {}}\n")
    catalogue = Catalogue(folder)
    texts = set()
    for _ in range(2):
        with pytest.raises(InputError) as caught:
            catalogue.block("broken")
        texts.add(str(caught.value))
    assert len(texts) == 1 and "'unit' is missing from the parameter 'V'" in texts.pop()


def test_a_block_file_alone_finds_its_relatives(folder: Path) -> None:
    write(folder, "base", LAG)
    path = write(folder, "other", "like: base\n")
    assert read_block(path).balances and read_document(path) == read_block(path)


def test_shipped_folders() -> None:
    assert shipped("blocks").is_dir() and shipped("scenarios").is_dir()
    assert not (Path(__file__).parents[2] / "loopsim" / "_data").exists()  # a checkout has no stale copy
    with pytest.raises(FileNotFoundError):
        shipped("valves")
