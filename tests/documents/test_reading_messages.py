"""Golden messages: a wrong file and the exact text that a user reads, side by side in tests/messages/."""

from __future__ import annotations

from pathlib import Path

import pytest

from loopsim.documents.load import read_diagram, read_document
from loopsim.documents.shapes import EVENTS, RULES
from loopsim.errors import InputError, Problems

FOLDER = Path(__file__).parents[1] / "messages"

# Every way in which reading can fail, and the files that show it.
CLASSES: dict[str, tuple[str, ...]] = {
    "not text": ("yaml_not_utf8", "yaml_empty", "yaml_unseen_character", "yaml_tab"),
    "value that YAML cannot start": (
        "yaml_percent_unit",
        "yaml_reserved_character",
        "yaml_folding_sign",
        "yaml_dash_after_key",
    ),
    "comma inside { } or [ ]": (
        "yaml_comma_in_formula",
        "yaml_comma_in_list",
        "yaml_decimal_comma",
        "yaml_no_value",
    ),
    "index inside { }": ("yaml_index_in_braces", "yaml_index_as_key", "yaml_list_as_key"),
    "colon": ("yaml_no_space_after_colon", "yaml_no_space_in_braces", "yaml_second_colon", "yaml_no_colon"),
    "bracket or quote": (
        "yaml_brace_not_closed",
        "yaml_wrong_bracket",
        "yaml_quote_not_closed",
        "yaml_text_after_quote",
        "yaml_backslash",
    ),
    "indentation": ("yaml_too_deep", "yaml_astray", "yaml_key_among_items"),
    "parts of YAML not used": (
        "yaml_alias",
        "yaml_anchor",
        "yaml_tag",
        "yaml_merge_key",
        "yaml_second_document",
    ),
    "duplicate key": ("yaml_duplicate_keys",),
    "kind of file": ("kind_unknown", "kind_not_first", "kind_list", "format_unknown"),
    "unknown key": ("key_unknown_section", "key_unknown_in_entry", "key_of_a_strategy", "value_spread_key"),
    "missing key": ("key_missing_unit", "key_no_about", "key_nothing_given"),
    "wrong kind of value": ("key_list_wanted", "key_mapping_wanted", "key_text_wanted", "key_not_yes_or_no"),
    "name": ("name_read_as_no", "name_reserved", "name_bad_index", "name_bad_tag", "name_bad_address"),
    "number": (
        "number_leading_zero",
        "number_clock",
        "number_decimal_comma",
        "number_gap",
        "number_not_finite",
        "number_wanted",
    ),
    "unit": ("unit_unknown", "unit_bad_relative", "plant_liquid"),
    "value": (
        "value_yes_for_on",
        "value_falling_pair",
        "value_three_ends",
        "value_table",
        "value_name_twice",
    ),
    "spread": ("value_percent_of_degC", "value_two_spreads", "value_spread_unit"),
    "formula": ("formula_wrong", "formula_unit_inside", "formula_no_equation", "formula_no_by"),
    "entry of a block": ("setting_default", "repeat_two", "solve_beyond", "check_two_questions"),
    "like and rename": (
        "like_unknown",
        "like_circle",
        "like_rename",
        "like_take_out",
        "like_nothing",
        "like_file_name",
    ),
    "wire": ("wire_wrong_arrow", "wire_cut"),
    "file that is named": ("file_missing", "event_file"),
    "strategies": ("strategy_unknown", "strategy_none", "strategy_no_list"),
    "scenario": ("scenario_values",),
    "event": (
        "event_no_kind",
        "event_two_kinds",
        "event_size",
        "event_no_time",
        "event_condition",
        "event_after_the_end",
        "event_mode",
    ),
    "rule": ("rule_no_limit", "rule_two_limits", "rule_values", "rule_margins", "rule_window"),
    "several problems": ("several_at_once",),
}
CASES = [case for cases in CLASSES.values() for case in cases]


@pytest.fixture(autouse=True)
def beside_the_files(monkeypatch: pytest.MonkeyPatch) -> None:
    """Messages name files as the user gave them: relative to where the user stands."""
    monkeypatch.chdir(FOLDER)


@pytest.mark.parametrize("case", CASES)
def test_message(case: str) -> None:
    with pytest.raises(InputError) as caught:
        read_document(Path(f"{case}.yaml"))
    assert str(caught.value) == Path(f"{case}.txt").read_text(encoding="utf-8").rstrip("\n")


def test_every_file_belongs_to_a_class() -> None:
    there = {path.stem for path in FOLDER.glob("*.yaml") if not path.name.startswith("good_")}
    assert there == set(CASES) == {path.stem for path in FOLDER.glob("*.txt")}


@pytest.mark.parametrize("case", CASES)
def test_every_problem_has_its_place(case: str) -> None:
    """File, line and column stand in each problem, except where the file as a whole is the problem."""
    with pytest.raises(InputError) as caught:
        read_document(Path(f"{case}.yaml"))
    whole_file = case in ("yaml_not_utf8", "yaml_empty", "kind_list")
    for problem in caught.value.problems:
        assert whole_file or (problem.where is not None and problem.where.line > 0 and problem.where.column > 0)


def test_problems_of_several_files_are_told_together() -> None:
    problems = Problems()
    for name in ("wire_cut.yaml", "value_two_spreads.yaml", "good_plant.yaml", "yaml_tab.yaml"):
        with problems.collecting():
            read_diagram(Path(name))
    with pytest.raises(InputError) as caught:
        problems.raise_if_any()
    files = [problem.where.file for problem in caught.value.problems if problem.where]
    assert files == ["value_two_spreads.yaml", "wire_cut.yaml", "yaml_tab.yaml"]


def test_a_missing_file_names_its_neighbours() -> None:
    with pytest.raises(InputError, match=r"'good_plants.yaml' is not there\n    did you mean 'good_plant.yaml'"):
        read_document(Path("good_plants.yaml"))


def test_a_folder_is_no_file() -> None:
    with pytest.raises(InputError, match="'blocks' is a folder; a file is wanted"):
        read_document(Path("blocks"))


def test_a_plant_where_a_scenario_is_wanted() -> None:
    with pytest.raises(InputError, match=r"rule_values.yaml:1:1: this is a scenario file; a plant or strategy"):
        read_diagram(Path("rule_values.yaml"))


def test_every_kind_of_event_and_rule_has_an_error_class() -> None:
    """The hints that list the kinds follow the shapes."""
    assert ", ".join(EVENTS) in Path("event_no_kind.txt").read_text(encoding="utf-8")
    assert ", ".join(RULES) in Path("rule_no_limit.txt").read_text(encoding="utf-8")
