"""Tables as text: they fit the page, keep the user's words as they are, and colour only where that is wanted."""

from __future__ import annotations

import re

import pytest

from loopsim.output.text import render
from loopsim.results import Cell, Table

RULES = ("tank.T within 1 K of TIC-101.sp after 10 min", "TV-101.position travel 45 % band 2 % after 10 min")
STRATEGIES = ("feedback", "feedforward", "cascade", "both")


def verdicts() -> Table:
    """A row for each rule, a column for each of four strategies: what a run prints."""
    heads = ("rule", "limit", *STRATEGIES)
    cells = [Cell("0.07331 K at 11.29 min, passed", "good") for _ in STRATEGIES]
    rows = tuple((Cell(rule), Cell("1 K"), *cells) for rule in RULES)
    return Table("header_sag", heads, rows, ("feedback: " + RULES[0] + "; tank.T is 1.66 K below it at 17.65 min",) * 2)


@pytest.mark.parametrize("width", [40, 60, 80, 100, 110, 160])
def test_no_line_is_wider_than_the_page_and_no_word_is_cut(width: int) -> None:
    text = render([verdicts()], width, False)
    assert max(map(len, text.splitlines())) <= width
    for word in ("feedforward", "TIC-101.sp", "TV-101.position", "cascade"):
        assert word in text


def test_a_wide_page_needs_one_line_a_row() -> None:
    lines = render([verdicts()], 300, False).splitlines()
    assert sum("passed" in line for line in lines) == len(RULES)


@pytest.mark.parametrize("width", [80, 160])
def test_a_number_stays_with_its_unit(width: int) -> None:
    for line in render([verdicts()], width, False).splitlines():
        for cell in line.split("  "):
            assert not cell.strip().endswith(("11.29", "0.07331", "17.65", "45", "within 1"))


def test_a_very_narrow_page_still_says_everything() -> None:
    """Cell for cell, each with its head."""
    narrow = " ".join(render([verdicts()], 30, False).split())
    for rule in RULES:
        at = narrow.index(rule)
        for strategy in STRATEGIES:
            at = narrow.index(f"{strategy}: 0.07331 K at 11.29 min, passed", at)


def test_colours_only_where_they_are_wanted(monkeypatch: pytest.MonkeyPatch) -> None:
    """The NO_COLOR convention: a variable that is there and not empty takes colours away, on a terminal too."""
    assert "\x1b[" in render([verdicts()], 160, True)
    assert "\x1b[" not in render([verdicts()], 160, False)
    monkeypatch.setattr("sys.stdout.isatty", lambda: True, raising=False)
    monkeypatch.delenv("NO_COLOR", raising=False)
    assert "\x1b[" in render([verdicts()])
    monkeypatch.setenv("NO_COLOR", "1")
    assert "\x1b[" not in render([verdicts()])
    monkeypatch.setenv("NO_COLOR", "")
    assert "\x1b[" in render([verdicts()])


def test_colours_do_not_shift_columns() -> None:
    """Escape sequences have no width of their own."""
    coloured = render([verdicts()], 160, True)
    assert re.sub(r"\x1b\[[0-9;]*m", "", coloured).split() == render([verdicts()], 160, False).split()


def test_words_of_the_user_stay_as_they_are() -> None:
    words = "[bold]fast[/bold] {x} %s \\n $5 <b> 100 %"
    text = render([Table("t", ("what",), ((Cell(words),),), (words,))], 160, False)
    assert text.count(words) == 2


def test_words_of_the_user_do_not_steer_the_terminal() -> None:
    text = render([Table("t\x1b[2J", ("w\x07",), ((Cell("a\x1b[31mb\r\tc"),),), ("n\x1b]0;x\x07",))], 160, False)
    assert all(one.isprintable() or one == "\n" for one in text)


def test_columns_that_say_nothing_are_left_out() -> None:
    table = Table("t", ("signal", "", ""), ((Cell("tank.T"), Cell(""), Cell("60")),))
    assert render([table], 80, False).splitlines()[-1] == "tank.T   60".replace("   ", "  ")


def test_a_table_of_notes_alone() -> None:
    assert render([Table("t", (), (), ("one", "two"))], 80, False) == "t\n=\n* one\n* two\n"
    assert render([Table("t", ("a",), ())], 80, False) == ""
