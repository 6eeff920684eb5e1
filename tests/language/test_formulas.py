"""Formulas: reading, writing, values and derivatives, against Python and finite differences."""

from __future__ import annotations

import math

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from loopsim.language.derivative import derivative, simplify
from loopsim.language.evaluate import Table, evaluate
from loopsim.language.parse import FormulaError, parse_balance, parse_formula, parse_key
from loopsim.language.tree import Call, Expression, Index, Name, Number, Operation
from loopsim.language.write import write

VALUES = {"a": 0.7, "b": -1.3, "c": 2.1}

PYTHON = {
    "a + b*c": lambda a, b, c: a + b * c,
    "-a^2": lambda a, b, c: -(a**2),
    "2^-1*c": lambda a, b, c: 0.5 * c,
    "a^b^2": lambda a, b, c: a ** (b**2),
    "a - b - c": lambda a, b, c: a - b - c,
    "a/b/c": lambda a, b, c: a / b / c,
    "exp(a)*log(c) + sqrt(c)": lambda a, b, c: math.exp(a) * math.log(c) + math.sqrt(c),
    "clip(b, -1, 1) + abs(b) + sign(b)": lambda a, b, c: -1 + 1.3 - 1,
    "where(a > b and not c < a, a, c)": lambda a, b, c: a,
    "min(a, b, c) + max(a, b, c)": lambda a, b, c: b + c,
    "rounded(c, 0.5)": lambda a, b, c: 2.0,
    "1e-3*a": lambda a, b, c: 1e-3 * a,
}


@pytest.mark.parametrize("text", PYTHON)
def test_values_are_those_of_python(text: str) -> None:
    assert evaluate(parse_formula(text), VALUES) == pytest.approx(PYTHON[text](**VALUES), rel=1e-15)


WRONG = [
    ("a**2", 1, "write ^"), ("a = b", 2, "=="), ("a b", 2, "*"), ("3 kg", 2, "let"), ("(a", 2, ""), ("a +", 3, ""),
    ("sinn(a)", 0, "sin"), ("min()", 0, ""), ("a < b < c", 6, "and"), ("a^99", 2, "20"), ("9^9^9", 3, ""), ("'a'", 0, ""),
    ("a % b", 2, ""), ("where(a > b, a)", 0, ""), ("where(a, b, a < b, c)", 0, "otherwise"), ("__import__('os')", 11, ""), ("__import__(os)", 0, ""), ("a.b.c(1)", 0, ""), ("a; b", 1, ""),
]  # fmt: skip


@pytest.mark.parametrize(("text", "at", "hint"), WRONG)
def test_what_cannot_be_read_is_told_with_its_column(text: str, at: int, hint: str) -> None:
    with pytest.raises(FormulaError) as caught:
        parse_formula(text)
    assert caught.value.at == at
    assert hint in caught.value.hint


def test_limits() -> None:
    for text in ("(" * 60 + "a" + ")" * 60, "a+" * 1100 + "a", "-" * 60 + "a"):
        with pytest.raises(FormulaError):
            parse_formula(text)


def test_balances_and_keys() -> None:
    left, right = parse_balance("d(rho*V*T)/dt = q*T_in - q*T")
    assert write(left) == "d(rho*V*T)/dt" and write(right) == "q*T_in - q*T"
    assert parse_key("T[n+1]") == ("T", Index("n", 1))
    assert parse_key("T[0]") == ("T", Index(None, 0))
    with pytest.raises(FormulaError):
        parse_balance("a*b")


def trees(depth: int = 3) -> st.SearchStrategy[Expression]:
    leaf = st.one_of(
        st.sampled_from([Name("a"), Name("b"), Name("c")]), st.floats(0.1, 9).map(lambda x: Number(round(x, 3)))
    )
    if depth == 0:
        return leaf
    below = trees(depth - 1)
    binary = st.tuples(st.sampled_from("+-*/"), below, below).map(lambda t: Operation(t[0], (t[1], t[2])))
    power = st.tuples(below, st.sampled_from([Number(2.0), Number(3.0)])).map(lambda t: Operation("^", t))
    call = st.tuples(st.sampled_from(["exp", "sin", "tanh", "abs", "cos"]), below).map(lambda t: Call(t[0], (t[1],)))
    compared = st.tuples(below, below).map(lambda t: Operation("<", t))
    chosen = st.tuples(compared, below, below).map(lambda t: Call("where", t))
    return st.one_of(leaf, binary, power, call, chosen, below.map(lambda t: Operation("neg", (t,))))


@given(trees())
def test_writing_and_reading_give_the_tree_back(tree: Expression) -> None:
    assert parse_formula(write(tree)) == tree


@given(trees())
def test_simplifying_changes_no_finite_value(tree: Expression) -> None:
    value = evaluate(tree, VALUES)
    assume(math.isfinite(value))
    assert evaluate(simplify(tree), VALUES) == pytest.approx(value, rel=1e-12, abs=1e-12)


@settings(max_examples=200)
@given(trees(), st.sampled_from(["a", "b", "c"]))
def test_derivatives_against_finite_differences(tree: Expression, name: str) -> None:
    """Central differences at two widths that agree with each other."""

    def at(shift: float) -> float:
        return evaluate(tree, {**VALUES, name: VALUES[name] + shift})

    wide, narrow = ((at(h) - at(-h)) / (2 * h) for h in (2e-4, 1e-4))
    assume(math.isfinite(wide) and math.isfinite(narrow) and abs(wide - narrow) < 1e-6 * (1 + abs(wide)))
    assume(abs(wide) < 1e6)
    assert evaluate(derivative(tree, name), VALUES) == pytest.approx(narrow, rel=1e-5, abs=1e-5)


def test_curves() -> None:
    table = Table((0.0, 1.0, 3.0), (5.0, 7.0, 3.0))
    assert [table.at(x) for x in (-1, 0, 0.5, 1, 2, 3, 9)] == [5, 5, 6, 7, 5, 3, 3]
    assert [table.slope(x) for x in (-1, 0.5, 2, 9)] == [0, 2, -2, 0]
