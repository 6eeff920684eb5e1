"""Whatever stands in a file, reading it gives a document or a located error, never anything else."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

from loopsim.documents.block import block_from
from loopsim.documents.diagram import diagram_from
from loopsim.documents.document import kind_of
from loopsim.documents.nodes import Mapping, compose
from loopsim.documents.scenario import scenario_from
from loopsim.documents.source import source_from
from loopsim.documents.types import Block
from loopsim.errors import InputError, Problems, Where, fail

HERE = Path(__file__).parent
TEXTS = [
    path.read_text(encoding="utf-8")
    for path in sorted([*HERE.glob("sketches/blocks/*.yaml"), *HERE.glob("example/*.yaml")])
]
PIECES = [
    *"{}[]:,-#&*!|>'\"%@`?= \n\t()<^~.0",
    ": ", "- ", "\n  ", "none", "on", "no", "010", "1:30", "1,5", "1e999", "nan", "{is: 3}", "[i]", "[1, 2]", "d",
    "/dt", "like ", "by", "where(", "a -> b", "\u00e9", "\u200b", "%", "9" * 30, "((((", "not ", "^^", "\\",
]  # fmt: skip


def no_other(name: str, where: Where) -> Block:
    raise fail(f"there is no block '{name}'", where)


def read(raw: bytes, folder: Path = Path("nowhere")) -> None:
    """Read as the loaders do, without a file; every problem has text, and a place inside the text or none."""
    problems = Problems()
    try:
        tree = compose(source_from(raw, str(folder / "file.yaml")), problems)
        kind = kind_of(tree, "file.yaml")
        assert isinstance(tree, Mapping)
        if kind == "block":
            block_from(tree, problems, no_other)
        elif kind == "scenario":
            scenario_from(tree, problems)
        else:
            diagram_from(tree, problems)
        problems.raise_if_any()
    except InputError as error:
        lines = raw.decode("utf-8", "replace").replace("\r\n", "\n").replace("\r", "\n").count("\n") + 1
        for problem in error.problems:
            assert problem.what
            assert problem.where is None or (1 <= problem.where.line <= lines and problem.where.column >= 1)
        assert str(error)


@st.composite
def mutated(draw: st.DrawFn) -> str:
    """A right file with a few cuts, insertions and repetitions."""
    text = draw(st.sampled_from(TEXTS))
    for _ in range(draw(st.integers(1, 4))):
        at = draw(st.integers(0, len(text)))
        match draw(st.sampled_from(["insert", "cut", "repeat", "character"])):
            case "insert":
                text = text[:at] + draw(st.sampled_from(PIECES)) + text[at:]
            case "cut":
                text = text[:at] + text[at + draw(st.integers(1, 12)) :]
            case "repeat":
                text = text[:at] + text[max(0, at - draw(st.integers(1, 40))) :]
            case "character":
                text = text[:at] + draw(st.characters(codec="utf-8")) + text[at:]
    return text


@settings(max_examples=400, suppress_health_check=[HealthCheck.too_slow])
@given(mutated())
def test_mutated_files(text: str) -> None:
    read(text.encode("utf-8"))


@settings(max_examples=200)
@given(st.lists(st.sampled_from(PIECES + list("abT12\n :")), max_size=60).map("".join))
@example("block: a\nparameters: {1: 2}\n")
def test_random_texts(text: str) -> None:
    for head in ("", "block: a\n", "plant: a\n", "strategy: a\nset: ", "scenario: a\nevents:\n - "):
        read((head + text).encode("utf-8"))


@settings(max_examples=200)
@given(st.binary(max_size=200))
def test_random_bytes(raw: bytes) -> None:
    read(raw)


KEYS = ["is", "by", "x", "unit", "use", "default", "at", "step", "max"]
JSON = st.recursive(
    st.sampled_from(["x", "3 m", "no", "none", "''", "a -> b", "3", "x + y", "[]", "{}", ""]),
    lambda inner: st.one_of(
        st.lists(inner, max_size=3).map(lambda items: f"[{', '.join(items)}]"),
        st.dictionaries(st.sampled_from(KEYS), inner, max_size=3).map(
            lambda pairs: "{" + ", ".join(f"{key}: {value}" for key, value in pairs.items()) + "}"
        ),
    ),
    max_leaves=6,
)
SECTIONS = {
    "block": "settings parameters one_of repeat inputs states balances memory scan continuous let solve faults outputs "
    "streams blocks wires ports check like rename assumes about",
    "plant": "liquid air_pressure show boundary blocks wires points about",
    "strategy": "cut set blocks wires",
    "scenario": "plant strategies must_pass starts lasts seed record points events accept about",
}


@pytest.mark.parametrize("kind", SECTIONS)
@settings(max_examples=150)
@given(st.data())
def test_wrong_kinds_of_value(kind: str, data: st.DataObject) -> None:
    """Lists for mappings, mappings for texts, nothing at all, in every section and one and two levels below."""
    section = data.draw(st.sampled_from(SECTIONS[kind].split()))
    body = data.draw(st.one_of(JSON, JSON.map(lambda one: f"{{a: {one}}}"), JSON.map(lambda one: f"[{one}]")))
    read(f"{kind}: a\n{section}: {body}\n".encode())
