"""What moves in a block: as many balances as states, derivatives that can be solved for, scans with their memories."""

from __future__ import annotations

from loopsim.documents.namespace import Names, Text, formulas_in, moving, near, shown, texts_of
from loopsim.documents.types import Balance, Block, Held, Key, Let
from loopsim.errors import Problems, Where
from loopsim.language.derivative import derivative
from loopsim.language.tree import Call, Expression, Name, Operation, Rate, names_in, transform, walk
from loopsim.language.write import write


def check_balances(block: Block, names: Names, problems: Problems) -> None:
    """Note what is wrong with balances, scans and unknowns."""
    for check in (_balances, _rates, _scan, _continuous, _solve, _looking_back):
        check(block, names, problems)


# ---------------------------------------------------------------- states and balances
def _balances(block: Block, names: Names, problems: Problems) -> None:
    """As many balances as states, and none without a derivative."""
    states, balances = (_counted([one.key for one in of], names) for of in (block.states, block.balances))
    if states != balances:
        what = f"the block has {states} but {balances.replace('state', 'balance')}"
        problems.add(what, block.where, "every state has one balance that says how it changes")
    for balance in block.balances:
        if not any(isinstance(node, Rate) for side in (balance.left, balance.right) for node in walk(side)):
            hint = "a balance has dX/dt of a state; a relation without it stands under let or solve"
            problems.add(f"the balance '{balance.key.name}' has no derivative", balance.where, hint)


def _counted(keys: list[Key], names: Names) -> str:
    """How many there are, in words: `3 states`, `2 states for each i`."""
    generic = sum(names.generic(key) for key in keys)
    single = len(keys) - generic
    told = [f"{single} state{'' if single == 1 else 's'}"] if single or not generic else []
    if generic:
        told.append(f"{generic} state{'' if generic == 1 else 's'} for each {names.letter}")
    return " and ".join(told)


def _rates(block: Block, names: Names, problems: Problems) -> None:
    """Derivatives are of states, or of expressions in states and what stands still; no products of them."""
    laws = [one for one in block.continuous if isinstance(one, Balance)]
    moved = _rate_names(block.balances, names)
    for state in block.states:
        if state.key.name not in moved:
            what = f"no balance says how '{state.key.name}' changes"
            problems.add(what, state.where, f"write a balance with d{state.key.name}/dt")
    for balances, sections in ((block.balances, {"state"}), (laws, {"memory", "scan"})):
        for balance in balances:
            _check_rates(balance, sections, names, problems)
    for unknown in block.solve:
        for rate in _rates_in(unknown.equation):
            where = _place(unknown.equation, rate)
            problems.add("a derivative cannot stand in the equation of an unknown", where, "make it a balance")


def _rates_in(balance: Balance) -> list[Rate]:
    return [node for side in (balance.left, balance.right) for node in walk(side) if isinstance(node, Rate)]


def _place(balance: Balance, node: Expression) -> Where:
    return Text("balance", balance.key, "equation", node, balance.where).at(node.at)


def _rate_names(balances: tuple[Balance, ...], names: Names) -> set[str]:
    """The states whose derivatives stand in balances, lets followed."""
    found: set[str] = set()
    for balance in balances:
        for rate in _rates_in(balance):
            found |= _states_in(rate.argument, names, frozenset())
    return found


def _states_in(tree: Expression, names: Names, seen: frozenset[str]) -> set[str]:
    found: set[str] = set()
    for name in names_in(tree) - seen:
        found |= {name} if "state" in names.sections(name) else set()
        for one in names.of(name, "let"):
            for formula in formulas_in(getattr(one.entry, "value", None)):
                found |= _states_in(formula.tree, names, seen | {name})
    return found


def _check_rates(balance: Balance, sections: set[str], names: Names, problems: Problems) -> None:
    for rate in _rates_in(balance):
        argument = rate.argument
        where = _place(balance, rate)
        if any(isinstance(node, Rate) for node in walk(argument)):
            problems.add("a derivative of a derivative", where, "give the first one a state of its own")
        elif isinstance(argument, Name):
            if argument.name in names and not names.sections(argument.name) & sections:
                known = [one.key.name for one in names.members if one.section in sections]
                what = f"'{argument.name}' is not a state: d{argument.name}/dt has no meaning"
                problems.add(what, where, near(argument.name, known, "states"))
        else:
            for name in moving(argument, names, sections | {"parameter", "setting"}):
                hint = "inside d(…)/dt stand states, parameters and lets of them"
                problems.add(f"'{name.name}' cannot stand inside a derivative", where, hint)
    if not _linear(balance):
        what = f"the balance '{balance.key.name}' is not linear in its derivatives"
        problems.add(what, balance.where, "give what is multiplied a state or a let of its own")


def _linear(balance: Balance) -> bool:
    """Whether the balance is a sum of derivatives, each with a factor free of derivatives."""

    def named(node: Expression) -> Expression:
        return Name(f"rate of {write(node.argument)}") if isinstance(node, Rate) else node

    tree = transform(Operation("-", (balance.left, balance.right)), named)
    rates = [one for one in names_in(tree) if one.startswith("rate of ")]
    return not any(name.startswith("rate of ") for rate in rates for name in names_in(derivative(tree, rate)))


# ---------------------------------------------------------------- scan, memory, unknowns
def _scan(block: Block, names: Names, problems: Problems) -> None:
    """A scan has its time, a memory its next value."""
    if not block.scan:
        found: dict[str, tuple[Held | Let | Balance, ...]] = {"memory": block.memory, "continuous": block.continuous}
        for section, entries in found.items():
            if entries:
                problems.add(f"the block has {section} but no scan", entries[0].where, "scan: says the next values")
        return
    if "parameter" not in names.sections("scan"):
        hint = "scan: {unit: s, about: time between executions, default: 1 s}"
        problems.add("the block has a scan but no parameter 'scan'", block.scan[0].where, hint)
    assigned = {one.key for one in block.scan}
    for held in block.memory:
        if held.key not in assigned:
            name = shown(held.key)
            problems.add(f"scan says no next value for '{name}'", held.where, f"write {name}: was({name}) to keep it")


def _continuous(block: Block, names: Names, problems: Problems) -> None:
    """A balance of the continuous law moves what it is named after."""
    for one in block.continuous:
        if not isinstance(one, Balance):
            continue
        name = one.key.name
        if not names.sections(name) & {"memory", "scan"}:
            known = [held.key.name for held in block.memory]
            problems.add(f"'{name}' is no memory and no entry of scan", one.where, near(name, known, "memories"))
        elif not any(isinstance(rate.argument, Name) and rate.argument.name == name for rate in _rates_in(one)):
            problems.add(f"the law for '{name}' does not hold d{name}/dt", one.where, f"write d{name}/dt = …")


def _solve(block: Block, names: Names, problems: Problems) -> None:
    """An equation holds its unknown."""
    for unknown in block.solve:
        name = unknown.key.name
        sides = (unknown.equation.left, unknown.equation.right)
        if not any(_reaches(side, name, names, frozenset()) for side in sides):
            problems.add(f"the equation for '{name}' does not depend on it", unknown.equation.where)


def _reaches(tree: Expression, wanted: str, names: Names, seen: frozenset[str]) -> bool:
    """Whether a tree depends on a name, lets followed."""
    for name in names_in(tree) - seen:
        if name == wanted:
            return True
        for one in names.of(name, "let"):
            trees = [formula.tree for formula in formulas_in(getattr(one.entry, "value", None))]
            if any(_reaches(inner, wanted, names, seen | {name}) for inner in trees):
                return True
    return False


def _looking_back(block: Block, names: Names, problems: Problems) -> None:
    """What looks back with `was` may be used by the scan only."""
    back = {
        one.key.name
        for one in block.let
        for formula in formulas_in(one.value)
        if any(isinstance(node, Call) and node.function == "was" for node in walk(formula.tree))
    }
    for text in texts_of(block):
        if text.section not in ("balance", "output", "unknown"):
            continue
        for name in sorted(back):
            if _reaches(text.tree, name, names, frozenset()):
                what = f"'{name}' looks back at the previous execution: only the scan may use it"
                problems.add(what, text.where, "give it a name under scan, and use that")
