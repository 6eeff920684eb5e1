"""A block's formulas made flat: names `TAG.element`, settings folded, repeats opened, engine primitives given names.

Every formula is read in one of two contexts: outside (values as they stand) or inside a scan (`scan=True`), where a
name means its new value and carries a prime.
"""

from __future__ import annotations

from loopsim.documents.types import ByChoice, Definition, Formula, PairValue, Quantity, Word
from loopsim.errors import Where
from loopsim.language.derivative import simplify
from loopsim.language.evaluate import evaluate
from loopsim.language.functions import CONSTANTS
from loopsim.language.tree import COMPARISONS, LOGIC, Call, Expression, Name, Number, Operation, Rate, parts, walk
from loopsim.language.units import to_si
from loopsim.model.draft import Absent
from loopsim.model.instance import Part
from loopsim.model.primitives import primitive
from loopsim.model.scales import FALSE_WORDS, TRUE_WORDS
from loopsim.model.types import PRIME, Assignment


class Translator(Part):
    """Makes the formulas of one instance flat; see `Part` for what it knows of the instance."""

    def definition(self, value: Definition, index: str = "", scan: bool = False) -> Expression:
        """A formula, quantity, word or choice by setting as a flat tree."""
        if isinstance(value, Quantity):
            if value.unit is None:
                return Number(value.value)
            return Number(to_si(value.value, value.unit, self.draft.layout.air_pressure))
        if isinstance(value, Word):
            return self._word(value)
        if isinstance(value, Formula):
            return simplify(self.tree(value.tree, index, scan))
        return self._by_choice(value, index, scan)

    def _word(self, value: Word) -> Expression:
        if value.text in TRUE_WORDS + FALSE_WORDS:
            return Number(float(value.text in TRUE_WORDS))
        return self.tree(Name(value.text), "", False)

    def _by_choice(self, value: ByChoice, index: str, scan: bool) -> Expression:
        if self.flat(value.setting) not in self.draft.free:
            option = value.options[self.choices[value.setting]]
            assert isinstance(option, Formula | Quantity | ByChoice)
            return self.definition(option, index, scan)
        codes = self.block.settings[value.setting].choices
        arguments: list[Expression] = []
        for choice in codes[:-1]:
            condition = Operation("==", (Name(self.flat(value.setting)), Number(float(codes.index(choice)))))
            option = value.options[choice]
            assert isinstance(option, Formula | Quantity | ByChoice)
            arguments += [condition, self.definition(option, index, scan)]
        last = value.options[codes[-1]]
        assert isinstance(last, Formula | Quantity | ByChoice)
        return Call("where", (*arguments, self.definition(last, index, scan)))

    def tree(self, node: Expression, index: str, scan: bool) -> Expression:
        """A flat tree; raises `Absent` when it needs what the plant leaves out."""
        if isinstance(node, Number):
            return node
        if isinstance(node, Name):
            return self._name(node, index, scan)
        if isinstance(node, Operation):
            return self._operation(node, index, scan)
        if isinstance(node, Rate):
            return Rate(self.tree(node.argument, index, scan), node.at)
        return self._call(node, index, scan)

    def _operation(self, node: Operation, index: str, scan: bool) -> Expression:
        if node.operator in ("and", "or"):
            return self._shortened(node, index, scan)
        compared = self._setting_compared(node)
        if compared is not None:
            return compared
        arguments = tuple(self.tree(part, index, scan) for part in node.arguments)
        return folded(Operation(node.operator, arguments, node.at))

    def _shortened(self, node: Operation, index: str, scan: bool) -> Expression:
        """`and`, `or`: the second side is not looked at when the first decides (it may need what is absent)."""
        left = self.tree(node.arguments[0], index, scan)
        if isinstance(left, Number):
            decides = bool(left.value) == (node.operator == "or")
            return left if decides else self.tree(node.arguments[1], index, scan)
        right = self.tree(node.arguments[1], index, scan)
        if isinstance(right, Number):
            decides = bool(right.value) == (node.operator == "or")
            return right if decides else left
        return Operation(node.operator, (left, right), node.at)

    def _setting_compared(self, node: Operation) -> Expression | None:
        """`mode == manual` as a number when the setting cannot change, else as a comparison of codes."""
        if node.operator not in ("==", "!="):
            return None
        sides = [part.name for part in node.arguments if isinstance(part, Name)]
        setting = next((name for name in sides if name in self.block.settings), None)
        if setting is None:
            return None
        other = next((part for part in node.arguments if not (isinstance(part, Name) and part.name == setting)), None)
        word = other.name if isinstance(other, Name) else f"{other.value:g}" if isinstance(other, Number) else ""
        choices = self.block.settings[setting].choices
        if word not in choices:
            return None
        code = Number(float(choices.index(word)))
        return folded(Operation(node.operator, (self._name(Name(setting), "", False), code), node.at))

    def _call(self, node: Call, index: str, scan: bool) -> Expression:
        match node.function:
            case "given" | "wired":
                return Number(float(self._known(node)))
            case "where":
                return self._where(node, index, scan)
            case "sum" | "min" | "max" if len(node.arguments) == 1:
                return self._over_repeat(node, scan)
            case "delayed" | "transported" | "noise" | "was" | "since" | "held" | "rounded":
                return primitive(self, node, index, scan)
        return folded(Call(node.function, tuple(self.tree(part, index, scan) for part in node.arguments), node.at))

    def _known(self, node: Call) -> bool:
        argument = node.arguments[0]
        assert isinstance(argument, Name)
        element = self.elements.name(argument, "")
        wired = self.flat(element) in self.draft.wiring.drivers
        return wired if node.function == "wired" else wired or element in self.values

    def _where(self, node: Call, index: str, scan: bool) -> Expression:
        """Conditions first: a branch that can never be taken is dropped unread."""
        kept: list[Expression] = []
        for condition, branch in zip(node.arguments[:-1:2], node.arguments[1::2], strict=False):
            decided = simplify(self.tree(condition, index, scan))
            if isinstance(decided, Number):
                if decided.value:
                    return self._chosen(kept, self.tree(branch, index, scan), node)
                continue
            kept += [decided, self.tree(branch, index, scan)]
        return self._chosen(kept, self.tree(node.arguments[-1], index, scan), node)

    def _chosen(self, kept: list[Expression], otherwise: Expression, node: Call) -> Expression:
        return Call("where", (*kept, otherwise), node.at) if kept else otherwise

    def _over_repeat(self, node: Call, scan: bool) -> Expression:
        """Taken in pairs, and those in pairs again, so that the tree of a long repeat stays flat."""
        terms = [self.tree(node.arguments[0], one, scan) for one in self.elements.indices]
        while len(terms) > 1:
            pairs = list(zip(terms[::2], terms[1::2], strict=False))
            alone = terms[2 * len(pairs) :]
            if node.function == "sum":
                terms = [*(Operation("+", pair, node.at) for pair in pairs), *alone]
            else:
                terms = [*(self._named(Call(node.function, pair, node.at), scan) for pair in pairs), *alone]
        return terms[0]

    def _named(self, tree: Expression, scan: bool) -> Expression:
        """A tree under a name of its own: slopes of a least or greatest value repeat its parts."""
        name = self.draft.fresh(self.tag, "pair")
        if not scan:
            self.draft.assign(name, self.tag, tree, self.where)
            return Name(name)
        name += PRIME
        self.statements[name] = Assignment(name, self.tag, tree, self.where)
        return Name(name)

    # ------------------------------------------------------------ names
    def _name(self, node: Name, index: str, scan: bool) -> Expression:
        if node.name in CONSTANTS:
            return Number(CONSTANTS[node.name][0])
        if node.name in self.block.settings:
            return self._setting(node.name)
        stem, _, last = node.name.rpartition(".")
        if stem and last in ("takes", "up", "down"):
            return self._answer(stem, last)
        element = self.elements.name(node, index)
        if stem and last in ("low", "high"):
            return self._parameter(stem, element)
        return self.element(element, scan)

    def _setting(self, name: str) -> Expression:
        if self.flat(name) in self.draft.free:
            return Name(self.flat(name))
        return Number(float(self.block.settings[name].choices.index(self.choices[name])))

    def _parameter(self, stem: str, element: str) -> Expression:
        if self.flat(stem) in self.draft.absent:
            raise Absent(self.flat(stem))
        return Name(self.flat(element))

    def element(self, element: str, scan: bool) -> Expression:
        """The flat name of an element, its definition noted on the way where that is still to be done."""
        flat = self.flat(element)
        if element == "scan" and scan and self.scanned:
            return Name(flat + PRIME)
        if element in self.laws and element not in self.scanned:
            return self.law_name(element)
        member = self.members.get(element)
        if member is None:
            raise Absent(flat)
        if flat in self.draft.absent:
            raise Absent(flat)
        if element in self.scanned:
            return self.scan_name(element, scan)
        if member.kind in ("let", "output"):
            return self.let_name(element, scan)
        if member.kind == "unknown":
            self.note_unknown(element)
        if member.kind == "fault" and flat not in self.draft.free:
            return Number(self.draft.slots[flat].value)
        if member.kind == "parameter" and flat in self.draft.tables:
            return Name(flat)
        return Name(flat)

    def _answer(self, output: str, which: str) -> Expression:
        """`out.takes`, `out.up`, `out.down` as the wired block answers; itself, on and on where nobody does."""
        flat = f"{self.flat(output)}.{which}"
        answer = self.answers(self.flat(output), which)
        if answer is None:
            return Number(1.0) if which != "takes" else self.as_it_stands(output)
        if isinstance(answer, Number):
            return answer
        if flat not in self.draft.assignments:
            self.draft.assign(flat, self.tag, answer, self.where)
        return Name(flat)


def folded(node: Expression) -> Expression:
    """A node of numbers as a number; `x == x` and its like as on or off."""
    below = parts(node)
    if below and all(isinstance(part, Number) for part in below):
        return Number(float(evaluate(node, {})))
    if isinstance(node, Operation) and node.operator in COMPARISONS and below[0] == below[1]:
        return Number(float(node.operator in ("==", "<=", ">=")))
    if isinstance(node, Operation) and node.operator in LOGIC:
        return simplify(node)
    return node


def uses_earlier(node: Expression) -> bool:
    """Whether a formula looks back: `was`, `since`, `held`."""
    return any(isinstance(part, Call) and part.function in ("was", "since", "held") for part in walk(node))


def pair_parts(value: PairValue) -> tuple[tuple[str, Quantity | Formula], ...]:
    """The two ends of a pair with their names."""
    return (("low", value.low), ("high", value.high))


def place(value: object, otherwise: Where) -> Where:
    """Where a value stands."""
    where = getattr(value, "where", None)
    return where if isinstance(where, Where) else otherwise
