"""Formulas: reading, writing, values and derivatives, against Python and finite differences."""

from __future__ import annotations

import math

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from loopsim.language.derivative import derivative, simplify, substitute
from loopsim.language.evaluate import Table, evaluate
from loopsim.language.names import check_name
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


@pytest.mark.parametrize(
    ("text", "at", "what", "hint"),
    [
        ("where(a = b, 1, 2)", 8, "')' is wanted, '=' found", "write =="),
        ("sin(a b)", 6, "')' is wanted, 'b' found", "write *"),
        ("a == not b", 5, "'not' found", "parentheses"),
        ("dT/dt", 0, "'dT/dt' cannot stand here", "balance"),
        ("a/dt", 2, "'dt' stands only in dX/dt", "dX/dt"),
        ("x.__class__", 1, "'.__class__' cannot follow a name", "range.low"),
        ("x.low.high", 1, "'.low.high' cannot follow a name", "range.low"),
        ("u.1", 1, "'.1' is one too many", "u[1]"),
        ("T²", 1, "'²' cannot stand in a formula", "^2"),
        ("a·b", 1, "'·' cannot stand in a formula", "*"),
        ("a ≤ b", 2, "'≤' cannot stand in a formula", "<="),
        ("a || b", 2, "'|' cannot stand in a formula", "or"),
        ("10 %", 3, "'%' cannot stand in a formula", "0.1"),
        ("1e400", 0, "too large", ""),
        ("clip(a, b)", 0, "'clip' takes 3 arguments, 2 given", ""),
        ("sin(a, b)", 0, "'sin' takes 1 argument, 2 given", ""),
        ("x[1.5]", 2, "'[1.5]' is not an index", "letter"),
        ("a^(2*11)", 4, "the exponent 22", "20"),
        ("", 0, "the formula ends", ""),
    ],
)
def test_messages(text: str, at: int, what: str, hint: str) -> None:
    with pytest.raises(FormulaError) as caught:
        parse_formula(text)
    assert (what in caught.value.what, caught.value.at) == (True, at)
    assert hint in caught.value.hint


@pytest.mark.parametrize(
    ("text", "hint"),
    [
        ("a == b", "not =="),
        ("a = b = c", "one ="),
        ("a*b", "two sides"),
        ("d(a) = 1", "dX/dt"),
        ("a/dt = 1", "dX/dt"),
    ],
)
def test_messages_of_balances(text: str, hint: str) -> None:
    with pytest.raises(FormulaError) as caught:
        parse_balance(text)
    assert hint in caught.value.hint


def test_the_tallest_tree_is_no_trouble() -> None:
    """What is read can be walked, written, simplified and differentiated without running out of stack."""
    for text in (
        "+".join(["a"] * 150),
        "(" * 24 + "a" + "^a)" * 24,
        "not " * 49 + "a > b",
        "-" * 50 + "a",
        "a-(" * 49 + "b" + ")" * 49,
    ):
        tree = parse_formula(text)
        assert parse_formula(write(tree)) == tree
        simplify(tree)
        derivative(tree, "a")
    for text in ("+".join(["a"] * 151), "not " * 490 + "a"):
        with pytest.raises(FormulaError):
            parse_formula(text)


@given(st.text(alphabet="abdtx0123.e+-*/^()<>=!,[]_ \tandorwhe²%'", max_size=40))
def test_any_text_is_a_formula_or_refused(text: str) -> None:
    try:
        tree = parse_formula(text)
    except FormulaError as error:
        assert 0 <= error.at <= len(text) and error.what
        return
    assert parse_formula(write(tree)) == tree


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


def conditions(depth: int = 2) -> st.SearchStrategy[Expression]:
    """Trees with comparisons, logic, indices, calls of all shapes."""
    named = st.sampled_from(
        [Name("x", Index("i", -1)), Name("x", Index(None, 0)), Name("T", Index("n", 1)), Name("range.low")]
    )
    compared = st.tuples(st.sampled_from(["<", "<=", ">", ">=", "==", "!="]), trees(1), st.one_of(named, trees(1)))
    leaf = compared.map(lambda t: Operation(t[0], (t[1], t[2])))
    if depth == 0:
        return leaf
    below = conditions(depth - 1)
    joined = st.tuples(st.sampled_from(["and", "or", "==", "!="]), below, below).map(
        lambda t: Operation(t[0], (t[1], t[2]))
    )
    return st.one_of(
        leaf, joined, below.map(lambda t: Operation("not", (t,))), below.map(lambda t: Call("since", (t,)))
    )


@given(conditions())
def test_conditions_are_read_back_too(tree: Expression) -> None:
    assert parse_formula(write(tree)) == tree


@pytest.mark.parametrize(
    "text",
    ["a - (b - c)", "a/(b*c)", "(a^b)^c", "a^b^c", "-a^2", "(-a)^2", "a*(-b)", "not (a and b)", "(a < b) == (b < c)", "2^-1", "x[i-1]",
     "a == b and c", "where(a > 0, -b, T[n+1])", "1e-07*a", "range.low"],
)  # fmt: skip
def test_no_more_parentheses_than_needed(text: str) -> None:
    assert write(parse_formula(text)) == text


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


# ---------------------------------------------------------------- branches, ends, and what has no value
SLOPES = [
    ("where(a > 0, a^2, 5*a)", 3.0, 6.0),
    ("where(a > 0, a^2, 5*a)", -3.0, 5.0),
    ("min(a, 2, 4 - a)", 1.0, 1.0),
    ("min(a, 2, 4 - a)", 3.0, -1.0),
    ("max(a^2, 1)", 0.5, 0.0),
    ("clip(a, 0, 1)", -1.0, 0.0),
    ("clip(3*a, 0, 10)", 2.0, 3.0),
    ("abs(a)*a", -2.0, 4.0),
    ("rounded(7*a, 0.5)", 2.0, 7.0),
    ("sign(a) + (a > 0)", 2.0, 0.0),
    ("sqrt(2*max(a, 0))", -1.0, 0.0),
    ("sqrt(2*max(a, 0))", 2.0, 0.5),
    ("log(clip(a, 0, 1))/3", -1.0, 0.0),
    ("max(a, 0)^0.5", 0.0, math.inf),
    ("interp(table, a^2)", 1.0, 4.0),
    ("interp(table, a^2)", 9.0, 0.0),
    ("a^0 + 3", 0.0, 0.0),
    ("2^a", 3.0, 8 * math.log(2)),
    ("tan(a)", 0.5, 1 / math.cos(0.5) ** 2),
    ("a/(1 + a)", 1.0, 0.25),
]


@pytest.mark.parametrize(("text", "a", "slope"), SLOPES)
def test_slopes_by_the_branch_in_force(text: str, a: float, slope: float) -> None:
    """Closed forms; where a branch stands still its slope is 0, whatever a factor outside does there."""
    values = {"a": a, "table": Table((0.0, 4.0, 6.0), (1.0, 9.0, 5.0))}
    assert evaluate(derivative(parse_formula(text), "a"), values) == pytest.approx(slope, rel=1e-12)


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("log(-1)", math.nan), ("sqrt(-1)", math.nan), ("(-8)^(1/3)", math.nan), ("0/0", math.nan), ("1/0", math.inf),
        ("-1/0", -math.inf), ("log(0)", -math.inf), ("exp(1000)", math.inf), ("0^-1", math.inf), ("10^400", None),
        ("rounded(2.5, 1)", 3.0), ("rounded(-2.5, 1)", -2.0), ("rounded(7, 0)", 7.0), ("where(1 > 0, 1, log(-1))", 1.0),
        ("where(0 > 1, log(-1), 2)", 2.0), ("min(3, 1, 2)", 1.0), ("max(3, 1, 2)", 3.0), ("clip(5, 0, 1)", 1.0),
        ("1 > 0 and not (2 <= 1 or 1 != 1)", 1.0),
    ],
)  # fmt: skip
def test_what_has_no_value_is_nan_or_infinite(text: str, value: float | None) -> None:
    if value is None:
        with pytest.raises(FormulaError):
            parse_formula(text)
        return
    found = evaluate(parse_formula(text), {})
    assert found == value or (math.isnan(found) and math.isnan(value))


SIMPLER = {
    "a + 0": "a", "0 + a": "a", "a - 0": "a", "0 - a": "-a", "1*a": "a", "a*1": "a", "0*a": "0", "a/1": "a", "0/a": "0", "a^1": "a",
    "a^0": "1", "-(-a)": "a", "2*3 + a": "6 + a", "where(1 > 0, a, b)": "a", "where(0 > 1, a, b)": "b",
    "where(a > 0, a, 1 > 0, b, c)": "where(a > 0, a, b)", "a > 0 and 1 > 0": "a > 0", "a > 0 or 1 > 0": "1", "not (1 > 2)": "1",
    "noise(1, 2)": "noise(1, 2)", "delayed(1, 2)": "delayed(1, 2)",
}  # fmt: skip


@pytest.mark.parametrize("text", SIMPLER)
def test_simplified(text: str) -> None:
    assert write(simplify(parse_formula(text))) == SIMPLER[text]


def test_substitution_leaves_elements_alone() -> None:
    tree = substitute(parse_formula("a*x[i] + b"), {"a": parse_formula("c + 1"), "x": Number(0.0)})
    assert write(tree) == "(c + 1)*x[i] + b"


@pytest.mark.parametrize(
    ("name", "allowed"),
    [("T_in", True), ("noise", True), ("g", False), ("pi", False), ("dt", False), ("on", False), ("lambda", False), ("2x", False),
     ("_x", False), ("x.y", False), ("Größe", False), ("None", False), ("dT", True)],
)  # fmt: skip
def test_names(name: str, allowed: bool) -> None:
    assert (check_name(name) is None) == allowed
