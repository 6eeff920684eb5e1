"""Formulas, balances and keys from text, by a small parser of our own: nothing that people write is executed."""

from __future__ import annotations

import re
from dataclasses import dataclass

from loopsim.errors import nearest
from loopsim.language.functions import FUNCTIONS
from loopsim.language.tree import COMPARISONS, Call, Expression, Index, Name, Number, Operation, Rate

LONGEST = 2000
DEEPEST = 50
GREATEST_POWER = 20
TOKEN = re.compile(
    r"\s*(?:(?P<number>(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)|(?P<name>[A-Za-z_]\w*(?:\.[A-Za-z_]\w*)*)"
    r"|(?P<sign>\*\*|<=|>=|==|!=|[-+*/^()<>,=\[\]]))"
)
CURES = {
    "**": "write ^ for a power",
    "%": "numbers in a formula have no unit; give the share as a number or a `let` of its own",
    "&": "write and",
    "|": "write or",
    "!": "write not",
    ";": "one formula at a time",
    '"': "names are written without quotes",
    "'": "names are written without quotes",
}


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
    """A formula's tree; nodes' `at` is the column in the text. Raises `FormulaError`."""
    parser = _Parser(text, rates=False)
    tree = parser.formula()
    parser.finish()
    return tree


def parse_balance(text: str) -> tuple[Expression, Expression]:
    """Both sides of `left = right`, with `dX/dt` and `d(expression)/dt`. Raises `FormulaError`."""
    parser = _Parser(text, rates=True)
    left = parser.formula()
    parser.expect("=", "a balance has two sides, `left = right`")
    right = parser.formula()
    parser.finish()
    return left, right


def parse_key(text: str) -> tuple[str, Index | None]:
    """The name and index of an entry: `T`, `T[i]`, `T[0]`, `T[n+1]`. Raises `FormulaError`."""
    match = re.fullmatch(r"\s*([A-Za-z_]\w*)\s*(?:\[(.*)\])?\s*", text)
    if match is None:
        raise FormulaError(f"'{text}' is not a name", 0, "write a name, or a name with an index such as T[i]")
    return match[1], _index(match[2], match.start(2)) if match[2] is not None else None


def _index(text: str, at: int) -> Index:
    match = re.fullmatch(r"\s*(?:([A-Za-z_]\w*)\s*)?(?:([+-]?)\s*(\d+))?\s*", text)
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
            found = f"'{self.next.text}' found" if self.next.text else "the formula ends"
            raise FormulaError(f"'{text}' is wanted, {found}", self.next.at, hint)

    def finish(self) -> None:
        if self.next.kind == "end":
            return
        hint = "write == to compare" if self.next.text == "=" else ""
        if self.next.kind in ("name", "number"):
            hint = "write * between factors; a number with a unit is a `let` of its own"
        raise FormulaError(f"'{self.next.text}' is one too many", self.next.at, hint)

    def formula(self) -> Expression:
        self.depth += 1
        if self.depth > DEEPEST:
            raise FormulaError(
                f"more than {DEEPEST} parentheses inside each other", self.next.at, "use `let` for parts of it"
            )
        tree = self._binary(("or",), self._and)
        self.depth -= 1
        return tree

    def _and(self) -> Expression:
        return self._binary(("and",), self._not)

    def _not(self) -> Expression:
        if self.next.text == "not":
            at = self.take().at
            return Operation("not", (self._not(),), at)
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

    def _binary(self, signs: tuple[str, ...], below: object) -> Expression:
        tree: Expression = below()  # type: ignore[operator]
        while self.next.text in signs:
            token = self.take()
            tree = Operation(token.text, (tree, below()), token.at)  # type: ignore[operator]
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
        self.depth += 1
        if self.depth > DEEPEST:
            raise FormulaError(f"more than {DEEPEST} powers of powers", token.at)
        exponent = self._minus()
        self.depth -= 1
        _check_exponent(exponent)
        return Operation("^", (base, exponent), token.at)

    def _atom(self) -> Expression:
        token = self.take()
        if token.text == "(":
            tree = self.formula()
            self.expect(")")
            return tree
        if token.kind == "number":
            return Number(float(token.text), token.at)
        if token.kind != "name":
            found = f"'{token.text}' found" if token.text else "the formula ends"
            raise FormulaError(f"a name, a number or '(' is wanted, {found}", token.at)
        return self._named(token)

    def _named(self, token: _Token) -> Expression:
        if self.rates and token.text == "d" and self.next.text == "(":
            self.take()
            inner = self.formula()
            self.expect(")")
            return self._rate(inner, token.at)
        if self.accept("("):
            return self._call(token)
        index = None
        if self.accept("["):
            index = self._bracket()
        if self.rates and token.text.startswith("d") and len(token.text) > 1 and self._over_time():
            return self._rate(Name(token.text[1:], index, token.at + 1), token.at)
        if token.text in ("and", "or", "not"):
            raise FormulaError(f"'{token.text}' cannot stand here", token.at)
        return Name(token.text, index, token.at)

    def _over_time(self) -> bool:
        return self.next.text == "/" and self.tokens[self.place + 1].text == "dt"

    def _rate(self, argument: Expression, at: int) -> Expression:
        self.expect("/", "a derivative is written dX/dt or d(expression)/dt")
        self.expect("dt", "a derivative is written dX/dt or d(expression)/dt")
        return Rate(argument, at)

    def _bracket(self) -> Index:
        start, text = self.next.at, ""
        while self.next.text not in ("]", "") and self.next.kind != "end":
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
        count = len(arguments)
        if count < function.least or (function.most is not None and count > function.most):
            wanted = str(function.least) if function.most == function.least else f"{function.least} or more"
            raise FormulaError(f"'{token.text}' takes {wanted} arguments, {count} given", token.at)
        if token.text == "where" and count % 2 == 0:
            hint = "write where(condition, value, …, otherwise)"
            raise FormulaError("'where' has no value for the case that no condition holds", token.at, hint)
        return Call(token.text, tuple(arguments), token.at)


def _check_exponent(exponent: Expression) -> None:
    """A constant exponent is small, so that no formula can ask for a huge number."""
    sign, inner = 1.0, exponent
    while isinstance(inner, Operation) and inner.operator == "neg":
        sign, inner = -sign, inner.arguments[0]
    value = _constant(inner)
    if value is not None and abs(value) > GREATEST_POWER:
        raise FormulaError(f"the exponent {sign * value:g}", exponent.at, f"{GREATEST_POWER} is the greatest")


def _constant(tree: Expression) -> float | None:
    """The number that a tree without names stands for, as far as sums, products and powers go."""
    if isinstance(tree, Number):
        return tree.value
    if not isinstance(tree, Operation) or tree.operator not in ("+", "-", "*", "/", "^", "neg"):
        return None
    values = [_constant(part) for part in tree.arguments]
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
