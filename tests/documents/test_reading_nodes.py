"""Text to nodes: what YAML would read differently stays text, and every node knows its place."""

from __future__ import annotations

from pathlib import Path

import pytest
import yaml

import loopsim.documents.nodes as nodes
from loopsim.documents.nodes import MOST_DEPTH, Mapping, Node, Scalar, Sequence, compose
from loopsim.documents.source import MOST_BYTES, read_source, source_from
from loopsim.errors import InputError, Problems


def tree(text: str | bytes) -> Node:
    """The node tree of a text that has no problem."""
    problems = Problems()
    raw = text if isinstance(text, bytes) else text.encode()
    made = compose(source_from(raw, "file.yaml"), problems)
    problems.raise_if_any()
    return made


def at(node: Node, *path: str | int) -> Node:
    """What stands at a path of keys and item numbers."""
    for step in path:
        if isinstance(node, Mapping):
            found = node.get(str(step))
            assert found is not None
            node = found
        else:
            assert isinstance(node, Sequence) and isinstance(step, int)
            node = node.items[step]
    return node


def message(text: str | bytes) -> str:
    """The first problem's sentence."""
    with pytest.raises(InputError) as caught:
        tree(text)
    return caught.value.problems[0].what


@pytest.fixture(params=["libyaml", "pure"], autouse=True)
def parser(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> None:
    """Both parsers of PyYAML read alike."""
    monkeypatch.setattr(nodes, "_Parser", yaml.CSafeLoader if request.param == "libyaml" else yaml.SafeLoader)


# YAML 1.1, sections on bool, int, float, null and timestamp: each of these would become another type.
@pytest.mark.parametrize(
    "text",
    ["no", "yes", "on", "off", "true", "1:30", "010", "0x1F", "1e-3", "1_000", "null", "~", "2026-12-01", ".inf"],
)
def test_every_scalar_stays_text(text: str) -> None:
    found = at(tree(f"a: {text}\n"), "a")
    assert isinstance(found, Scalar) and found.text == text and found.plain


def test_places_count_characters() -> None:
    found = at(tree("über: {Größe: 3 m, unit: °C}\nb:\n  - x\n"), "über", "unit")
    assert isinstance(found, Scalar)
    assert (found.where.line, found.where.column, found.where.text) == (1, 26, "über: {Größe: 3 m, unit: °C}")
    assert found.where.text[found.where.column - 1 :].startswith("°C")


@pytest.mark.parametrize("style", ["'{}'", '"{}"', "|\n  {}\n", ">\n  {}\n", "{}"])
def test_a_place_is_that_of_the_first_character(style: str) -> None:
    found = at(tree("a: " + style.format("q + r")), "a")
    assert isinstance(found, Scalar) and found.text == "q + r"
    assert found.where.text[found.where.column - 1 :].startswith("q + r")


def test_a_folded_text_is_shown_in_one_line() -> None:
    found = at(tree("let:\n  a:\n    where(x,\n          y, z)\n"), "let", "a")
    assert isinstance(found, Scalar) and found.text == "where(x, y, z)"
    assert found.where.text == "    where(x, y, z)"
    assert (found.where.line, found.where.column) == (3, 5)


def test_a_byte_order_mark_and_windows_line_ends_are_taken() -> None:
    found = at(tree(b"\xef\xbb\xbfa: b\r\nc: d\r\n"), "c")
    assert isinstance(found, Scalar) and found.text == "d" and found.where.line == 2


def test_blanks_that_look_like_spaces_are_spaces() -> None:
    found = at(tree("a: 12\u00a0m^3\nb:\t3 K\n"), "a")
    assert isinstance(found, Scalar) and found.text == "12 m^3"
    assert isinstance(second := at(tree("a:\t3 K\n"), "a"), Scalar) and second.text == "3 K"


def test_an_about_keeps_its_commas_inside_braces() -> None:
    entry = tree("q: {unit: m^3/h, about: flow (cold, not hot), where dp is not known, default: none}\n")
    about, default = at(entry, "q", "about"), at(entry, "q", "default")
    assert isinstance(about, Scalar) and about.text == "flow (cold, not hot), where dp is not known"
    assert isinstance(default, Scalar) and default.text == "none"


def test_a_single_word_after_an_about_is_a_key_without_value() -> None:
    assert message("q: {about: a valve, once}\n") == "'once' has no value"


@pytest.mark.parametrize(
    ("text", "what"),
    [
        ("a: &x [*x]\n", "a value cannot start with &"),  # recursion
        ("a: &x {b: c}\nd: *x\n", "a value cannot start with &"),
        ("a: *x\n", "a value cannot start with *"),
        ("a: !!python/object:os.system x\n", "a value cannot start with !"),
        ("<<: {a: b}\n", "merge keys (<<) are not used here"),
        ("a: b\n---\nc: d\n", "a second document starts here"),
        ("a: b\na: c\n", "'a' stands twice; first on line 1"),
        ("a: {b: 1, b: 2}\n", "'b' stands twice; first on line 1"),
        ("? [a, b]\n: c\n", "a list or mapping stands where a key is wanted"),
        ("", "the file 'file.yaml' is empty"),
        ("--- \n# nothing\n", "the file 'file.yaml' is empty"),
        ("a: b\n\tc: d\n", "a tab stands in the indentation"),
        ("a: \x07\n", "a character that cannot be seen (U+0007) stands here"),
        ("a: b\u2028c\n", "a character that cannot be seen (U+2028) stands here"),
        (b"\xff\xfea\x00:\x00", "the file 'file.yaml' is not UTF-8 text (line 1)"),
        ("a: {when: tank.h below 1 m, holds}\n", "'holds' has no value"),
        ("a: b }\n  c: d\n", "this line is indented deeper than line 1, which has its value already"),
        (": b\n", "a key is missing before the colon"),
    ],
)
def test_refused(text: str | bytes, what: str) -> None:
    assert message(text) == what


def test_an_alias_bomb_is_stopped_at_its_first_anchor() -> None:
    lines = ["a0: &a0 [x, x]"] + [f"a{n}: &a{n} [*a{n - 1}, *a{n - 1}]" for n in range(1, 40)]
    assert message("\n".join(lines)) == "a value cannot start with &"


@pytest.mark.parametrize("bracket", ["[", "{a: "])
def test_depth_is_capped(bracket: str) -> None:
    close = "]" if bracket == "[" else "}"
    inside = bracket * MOST_DEPTH + "x" + close * MOST_DEPTH
    assert message(f"a: {inside}\n") == f"nested more than {MOST_DEPTH} deep"
    assert message("a: " + bracket * 5000)


def test_size_is_capped(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(nodes, "MOST_NODES", 50)
    assert message("a: [" + "x, " * 60 + "]\n") == "the file has more than 50 values"
    large = tmp_path / "large.yaml"
    large.write_bytes(b"#" * (MOST_BYTES + 1))
    with pytest.raises(InputError, match="is larger than 4 MB"):
        read_source(large)


def test_all_duplicates_are_told() -> None:
    with pytest.raises(InputError) as caught:
        tree("a: {b: 1, b: 2}\nc: 3\nc: 4\n")
    assert [problem.where.line for problem in caught.value.problems if problem.where] == [1, 3]
