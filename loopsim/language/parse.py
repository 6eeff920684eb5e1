"""Formulas, balances and keys from text, by a small parser of our own: nothing that people write is executed."""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import dataclass

from loopsim.errors import nearest
from loopsim.language.functions import FUNCTIONS
from loopsim.language.tree import COMPARISONS, Call, Expression, Index, Name, Number, Operation, Rate, parts

LONGEST = 2000
DEEPEST = 50
TALLEST = 150  # operations on top of each other, so that walks over a tree never run out of stack
GREATEST_POWER = 20
DOTTED = ("low", "high", "takes", "up", "down")
TOKEN = re.compile(
    r"\s*(?:(?P<number>(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)|(?P<name>[A-Za-z_]\w*(?:\.[A-Za-z_]\w*)*)"
    r"|(?P<sign>\*\*|<=|>=|==|!=|[-+*/^()<>,=\[\]]))",
    re.ASCII,
)
CURES = {
    "**": "write ^ for a power",
    "%": "numbers in a formula have no unit: write 0.1 for 10 %",
    "&": "write and",
    "|": "write or",
    "!": "write not",
    ";": "one formula at a time",
    ".": "a dot stands between a name and low, high, takes, up or down, without spaces",
    '"': "names are written without quotes",
    "'": "names are written without quotes",
    "²": "write ^2",
    "³": "write ^3",
    "·": "write *",
    "×": "write *",
    "÷": "write /",
    "−": "write - (a plain minus sign)",
    "≤": "write <=",
    "≥": "write >=",
    "≠": "write !=",
    "√": "write sqrt(x)",
}
FACTORS = "write * between factors; a number with a unit is a `let` of its own"
RATE = "a derivative is written dX/dt or d(expression)/dt"
RATE_PLACE = "a derivative dX/dt stands in a balance: name: left = right"


class FormulaError(ValueError):
    """A formula that cannot be read: `what` is wrong at column `at` (from 0), `hint` is the cure."""

    def __init__(self, what: str, at: int = 0, hint: str = "") -> None:
        super().__init__(what)
        self.what, self.at, self.hint = what, at, hint


@dataclass(frozen=True, slots=True)
class _Token:
    kind: str
    text: str
    at: int


def parse_formula(text: str) -> Expression:
    """A formula's tree; nodes' `at` is the column in the text, from 0. Raises `FormulaError`."""
    parser = _Parser(text, rates=False)
    tree = parser.formula()
    parser.finish("write == to compare")
    _check_height(tree)
    return tree


def parse_balance(text: str) -> tuple[Expression, Expression]:
    """Both sides of `left = right`, with `dX/dt` and `d(expression)/dt`. Raises `FormulaError`."""
    parser = _Parser(text, rates=True)
    left = parser.formula()
    compared = isinstance(left, Operation) and left.operator == "=="
    parser.expect("=", "write = between the sides, not ==" if compared else "a balance has two sides, `left = right`")
    right = parser.formula()
    parser.finish("a balance has one =; write == to compare")
    for side in (left, right):
        _check_height(side)
    return left, right


def parse_key(text: str) -> tuple[str, Index | None]:
    """The name and index of an entry: `T`, `T[i]`, `T[0]`, `T[n+1]`. Raises `FormulaError`."""
    match = re.fullmatch(r"\s*([A-Za-z_]\w*)\s*(?:\[(.*)\])?\s*", text, re.ASCII)
    if match is None:
        raise FormulaError(f"'{text}' is not a name", 0, "write a name, or a name with an index such as T[i]")
    return match[1], _index(match[2], match.start(2)) if match[2] is not None else None


def _index(text: str, at: int) -> Index:
    match = re.fullmatch(r"\s*(?:([A-Za-z_]\w*)\s*)?(?:([+-]?)\s*(\d+))?\s*", text, re.ASCII)
    if match is None or not text.strip() or (match[1] and match[3] and not match[2]):
        raise FormulaError(
            f"'[{text}]' is not an index", at, "write a letter, a number, or a letter with + or - a number"
        )
    offset = int(match[3] or 0) * (-1 if match[2] == "-" else 1)
    return Index(match[1], offset)


def _tokens(text: str) -> list[_Token]:
    if len(text) > LONGEST:
        raise FormulaError(
            f"a formula of {len(text)} characters", 0, f"{LONGEST} is the most; use `let` for parts of it"
        )
    found, place = [], 0
    while text[place:].strip():
        match = TOKEN.match(text, place)
        if match is None or match["sign"] == "**":
            at = place + len(text[place:]) - len(text[place:].lstrip())
            sign = "**" if match is not None else text[at]
            raise FormulaError(f"'{sign}' cannot stand in a formula", at, CURES.get(sign, ""))
        kind = str(match.lastgroup)
        found.append(_Token(kind, match[kind], match.start(kind)))
        place = match.end()
    return [*found, _Token("end", "", len(text))]


class _Parser:
    """Recursive descent, weakest binding first: or, and, not, comparisons, sums, products, minus, powers."""

    def __init__(self, text: str, rates: bool) -> None:
        self.tokens, self.place, self.rates, self.depth = _tokens(text), 0, rates, 0

    # ------------------------------------------------------------ tokens
    @property
    def next(self) -> _Token:
        return self.tokens[self.place]

    def take(self) -> _Token:
        token = self.next
        self.place += 1
        return token

    def accept(self, text: str) -> bool:
        if self.next.text == text and self.next.kind != "end":
            self.place += 1
            return True
        return False

    def expect(self, text: str, hint: str = "") -> None:
        if not self.accept(text):
            raise FormulaError(f"'{text}' is wanted, {self._found()}", self.next.at, hint or self._cure())

    def finish(self, equals: str) -> None:
        """Refuse what is left; `equals` is the cure for a sign = too many."""
        if self.next.kind != "end":
            hint = equals if self.next.text == "=" else self._cure()
            raise FormulaError(f"'{self.next.text}' is one too many", self.next.at, hint)

    def _found(self) -> str:
        return f"'{self.next.text}' found" if self.next.kind != "end" else "the formula ends"

    def _cure(self) -> str:
        """What helps where the next token cannot stand."""
        token = self.next
        if token.kind == "number" and token.text.startswith("."):
            return "an element is written with its index: u[1]"
        if token.text == "not":
            return "put parentheses round not and what it belongs to"
        if token.kind in ("name", "number"):
            return FACTORS
        return "write == to compare" if token.text == "=" else ""

    def deeper(self, below: Callable[[], Expression], what: str) -> Expression:
        """What `below` reads, one level further down."""
        self.depth += 1
        if self.depth > DEEPEST:
            raise FormulaError(f"more than {DEEPEST} {what}", self.next.at, "use `let` for parts of it")
        tree = below()
        self.depth -= 1
        return tree

    # ------------------------------------------------------------ what binds two sides
    def formula(self) -> Expression:
        return self.deeper(lambda: self._binary(("or",), self._and), "parentheses inside each other")

    def _and(self) -> Expression:
        return self._binary(("and",), self._not)

    def _not(self) -> Expression:
        if self.next.text == "not":
            at = self.take().at
            return Operation("not", (self.deeper(self._not, "times not in a row"),), at)
        return self._comparison()

    def _comparison(self) -> Expression:
        left = self._sum()
        if self.next.text not in COMPARISONS:
            return left
        token = self.take()
        tree = Operation(token.text, (left, self._sum()), token.at)
        if self.next.text in COMPARISONS:
            raise FormulaError("two comparisons in a row", self.next.at, "join them with and")
        return tree

    def _sum(self) -> Expression:
        return self._binary(("+", "-"), self._product)

    def _product(self) -> Expression:
        return self._binary(("*", "/"), self._minus)

    def _binary(self, signs: tuple[str, ...], below: Callable[[], Expression]) -> Expression:
        tree = below()
        while self.next.text in signs:
            token = self.take()
            tree = Operation(token.text, (tree, below()), token.at)
        return tree

    def _minus(self) -> Expression:
        signs: list[_Token] = []
        while self.next.text in ("-", "+"):
            signs.append(self.take())
        if len(signs) > DEEPEST:
            raise FormulaError("too many signs in a row", signs[0].at)
        tree = self._power()
        for token in reversed(signs):
            tree = Operation("neg", (tree,), token.at) if token.text == "-" else tree
        return tree

    def _power(self) -> Expression:
        base = self._atom()
        if self.next.text != "^":
            return base
        token = self.take()
        exponent = self.deeper(self._minus, "powers of powers")
        _check_exponent(exponent)
        return Operation("^", (base, exponent), token.at)

    # ------------------------------------------------------------ numbers, names, calls
    def _atom(self) -> Expression:
        token = self.next
        if self.accept("("):
            tree = self.formula()
            self.expect(")")
            return tree
        if token.kind == "number":
            return _number(self.take())
        if token.kind == "name" and token.text not in ("and", "or", "not"):
            return self._named(self.take())
        hint = self._cure() if token.text == "not" else ""
        raise FormulaError(f"a name, a number or '(' is wanted, {self._found()}", token.at, hint)

    def _named(self, token: _Token) -> Expression:
        if self.rates and token.text == "d" and self.accept("("):
            inner = self.formula()
            self.expect(")")
            return self._rate(inner, token.at)
        if self.accept("("):
            return self._call(token)
        index = self._bracket() if self.accept("[") else None
        if token.text.startswith("d") and len(token.text) > 1 and self._over_time():
            if not self.rates:
                raise FormulaError(f"'{token.text}/dt' cannot stand here", token.at, RATE_PLACE)
            return self._rate(Name(token.text[1:], index, token.at + 1), token.at)
        return _name(token, index)

    def _over_time(self) -> bool:
        return self.next.text == "/" and self.tokens[self.place + 1].text == "dt"

    def _rate(self, argument: Expression, at: int) -> Expression:
        self.expect("/", RATE)
        self.expect("dt", RATE)
        return Rate(argument, at)

    def _bracket(self) -> Index:
        start, text = self.next.at, ""
        while self.next.text != "]" and self.next.kind != "end":
            text += self.take().text
        self.expect("]")
        return _index(text, start)

    def _call(self, token: _Token) -> Expression:
        function = FUNCTIONS.get(token.text)
        if function is None:
            hint = nearest(token.text, FUNCTIONS, "functions")
            raise FormulaError(f"there is no function '{token.text}'", token.at, hint)
        arguments: list[Expression] = []
        if not self.accept(")"):
            arguments.append(self.formula())
            while self.accept(","):
                arguments.append(self.formula())
            self.expect(")")
        _check_count(token, len(arguments), function.least, function.most)
        return Call(token.text, tuple(arguments), token.at)


def _number(token: _Token) -> Number:
    value = float(token.text)
    if math.isinf(value):
        raise FormulaError(f"'{token.text}' is too large for a number", token.at)
    return Number(value, token.at)


def _name(token: _Token, index: Index | None) -> Name:
    if token.text == "dt":
        raise FormulaError("'dt' stands only in dX/dt", token.at, RATE)
    stem, *dotted = token.text.split(".")
    if dotted and (len(dotted) > 1 or dotted[0] not in DOTTED):
        what = f"'.{'.'.join(dotted)}' cannot follow a name"
        hint = "range.low and range.high are the ends of a pair, out.takes, out.up, out.down the answers to an output"
        raise FormulaError(what, token.at + len(stem), hint)
    return Name(token.text, index, token.at)


def _check_count(token: _Token, count: int, least: int, most: int | None) -> None:
    """Refuse a call with too few or too many arguments."""
    if count < least or (most is not None and count > most):
        wanted = f"{least}" if most == least else f"{least} or more"
        plural = "" if wanted == "1" else "s"
        raise FormulaError(f"'{token.text}' takes {wanted} argument{plural}, {count} given", token.at)
    if token.text == "where" and count % 2 == 0:
        hint = "write where(condition, value, …, otherwise)"
        raise FormulaError("'where' has no value for the case that no condition holds", token.at, hint)


def _check_height(tree: Expression) -> None:
    level, height = [tree], 0
    while level:
        level = [part for node in level for part in parts(node)]
        height += 1
    if height > TALLEST:
        raise FormulaError(f"more than {TALLEST} operations in a row", 0, "use `let` for parts of it")


def _check_exponent(exponent: Expression) -> None:
    """A constant exponent is small, so that no formula can ask for a huge number."""
    value = constant(exponent)
    if value is not None and not abs(value) <= GREATEST_POWER:
        raise FormulaError(f"the exponent {value:g}", exponent.at, f"{GREATEST_POWER} is the greatest")


def constant(tree: Expression) -> float | None:
    """The number that a tree without names stands for, as far as sums, products and powers go."""
    if isinstance(tree, Number):
        return tree.value
    if not isinstance(tree, Operation) or tree.operator not in ("+", "-", "*", "/", "^", "neg"):
        return None
    values = [constant(part) for part in tree.arguments]
    known = [value for value in values if value is not None]
    if len(known) != len(values):
        return None
    try:
        match tree.operator:
            case "neg":
                return -known[0]
            case "+":
                return known[0] + known[1]
            case "-":
                return known[0] - known[1]
            case "*":
                return known[0] * known[1]
            case "/":
                return known[0] / known[1]
        return float(known[0] ** known[1])
    except (ArithmeticError, TypeError):
        return float("inf")
