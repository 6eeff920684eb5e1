"""What each kind of file may hold: one description that finds unknown and missing keys and makes the JSON Schema.

A `Shape` is a mapping with known keys; `Named` a mapping whose keys are the user's own names; `ListOf` a list; a
`Leaf` a single text. To add a key: add a line here, and read it where the shape is read.
"""

from __future__ import annotations

from dataclasses import dataclass, field


@dataclass(frozen=True, slots=True)
class Leaf:
    """A single text; `schema` is how JSON Schema says it."""

    title: str
    schema: dict[str, object]


@dataclass(frozen=True, slots=True)
class ListOf:
    """A list of `of`."""

    of: Holds
    fewest: int = 0


@dataclass(frozen=True, slots=True)
class Named:
    """A mapping from names of the user's own to `of`."""

    of: Holds
    fewest: int = 0


@dataclass(frozen=True, slots=True)
class OneOf:
    """Any of several."""

    of: tuple[Holds, ...]


@dataclass(frozen=True, slots=True)
class Key:
    """A key of a shape, what it holds and what it means."""

    name: str
    holds: Holds
    about: str
    needed: bool = False


@dataclass(frozen=True, slots=True)
class Shape:
    """A mapping with known keys; `more`: what further keys hold, if any are allowed."""

    keys: tuple[Key, ...]
    more: Holds | None = field(default=None)

    def names(self) -> list[str]:
        """The known keys."""
        return [key.name for key in self.keys]


Holds = Leaf | ListOf | Named | OneOf | Shape

# ---------------------------------------------------------------- single texts
# YAML readers of editors see numbers and booleans where a file has words: on/off may come as true/false.
_TEXT: dict[str, object] = {"type": "string"}
_ANY: dict[str, object] = {"type": ["string", "number", "boolean"]}

SENTENCE = Leaf("a sentence", _TEXT)
NAME = Leaf("a name", _TEXT)
FILE = Leaf("the name of a file", _TEXT)
SIGNAL = Leaf("a signal, TAG.name", _TEXT)
WIRE = Leaf("a wire, a -> b", {"type": "string", "pattern": "->"})
CHOICE = Leaf("a word", _ANY)
YES = Leaf("yes or no", {"enum": [True, False, "yes", "no", "on", "off"]})
NUMBER = Leaf("a number", {"type": ["number", "string"]})
WHOLE = Leaf("a whole number", {"type": "integer", "minimum": 0})
QUANTITY = Leaf("a number with its unit, 1.2 m^3", {"type": ["string", "number"]})
TIME = Leaf("a time, 5 min", {"type": ["string", "number"]})
UNIT_NAME = Leaf("a unit, m^3/h", _TEXT)
FORMULA_TEXT = Leaf("a formula or a number", _ANY)
EQUATION = Leaf("an equation, left = right", {"type": "string", "pattern": "="})

_BY = Shape((Key("by", NAME, "the setting that chooses; the other keys are its choices", True),), more=FORMULA_TEXT)
FORMULA = OneOf((FORMULA_TEXT, _BY))
UNIT = OneOf((Leaf("m^3/h, any, like pv, change of pv, like out per u, on/off, count", _TEXT), _BY))
PAIR = ListOf(FORMULA_TEXT, 2)
TABLE = Shape(
    (Key("x", ListOf(QUANTITY, 2), "rising values", True), Key("y", ListOf(QUANTITY, 2), "one for each x", True)),
)
SPREAD = Shape(
    (
        Key("is", OneOf((CHOICE, PAIR, TABLE)), "the value", True),
        Key("tolerance", QUANTITY, "how well it is known: uniform, plus or minus, in per cent or a difference"),
        Key("deviation", QUANTITY, "how well it is known: normal, one standard deviation"),
        Key("assumed", YES, "yes: nobody has confirmed this value; every output lists it"),
        Key("about", SENTENCE, "what it is"),
    )
)
GIVEN = OneOf((CHOICE, ListOf(CHOICE), TABLE, SPREAD))
USE = Shape((Key("use", NAME, "the block file", True),), more=GIVEN)

# ---------------------------------------------------------------- entries of a block
_ABOUT = Key("about", SENTENCE, "what it is, in a few words")
_PORT_UNIT = Key("unit", UNIT, "its unit, such as m^3/h", True)
_BOUNDS = (
    Key("above", FORMULA_TEXT, "it must be greater than this"),
    Key("at_least", FORMULA_TEXT, "it must not be less than this"),
    Key("below", FORMULA_TEXT, "it must be less than this"),
    Key("at_most", FORMULA_TEXT, "it must not be greater than this"),
)
SETTING = Shape(
    (
        Key("choices", ListOf(CHOICE, 1), "the words to choose from", True),
        Key("default", FORMULA_TEXT, "the choice when the plant makes none; a word or a formula"),
        _ABOUT,
    )
)
TABLE_UNITS = Shape(
    (Key("x_unit", UNIT_NAME, "unit of x", True), Key("y_unit", UNIT_NAME, "unit of y", True)),
)
PARAMETER = Shape(
    (
        Key("unit", UNIT, "its unit (left out for tables and name lists)"),
        _ABOUT,
        Key("default", OneOf((FORMULA, PAIR, TABLE)), "the value when the plant gives none; none: it may be left out"),
        *_BOUNDS,
        Key("pair", YES, "two rising values, read as name.low and name.high"),
        Key("table", TABLE_UNITS, "a curve, with the units of its two columns"),
        Key("names", ListOf(NAME, 1), "a list of names to repeat over, with its default"),
    )
)
ANSWERS = Shape(
    (
        Key("takes", FORMULA, "the value acted on now"),
        Key("up", FORMULA, "would a higher value have an effect"),
        Key("down", FORMULA, "would a lower value have an effect"),
    )
)
INPUT = Shape(
    (
        _PORT_UNIT,
        _ABOUT,
        Key("default", FORMULA, "the value when nothing is wired; none: it may be absent"),
        Key("percent_of", NAME, "a wire in % is read as per cent of this range"),
        Key("answers", ANSWERS, "what goes back along the wire"),
    )
)
HELD = Shape((_PORT_UNIT, _ABOUT, Key("start", FORMULA, "where it starts"), *_BOUNDS))
UNKNOWN = Shape(
    (
        _PORT_UNIT,
        _ABOUT,
        Key("equation", EQUATION, "the equation that it solves", True),
        Key("start", FORMULA, "where the search starts"),
        Key("between", PAIR, "where the root is looked for"),
        Key("beyond", Leaf("stop", {"const": "stop"}), "stop: without a root it stands at the nearer end"),
    )
)
FAULT = Shape((_ABOUT,))
OUTPUT = Shape((_PORT_UNIT, _ABOUT, Key("is", FORMULA, "a formula; else the quantity of its name"), *_BOUNDS))
CHECK = Shape(
    (
        Key("given", Named(GIVEN), "values of parameters, settings and inputs"),
        Key("at", NAME, "the signal, at rest"),
        Key("gain", ListOf(NAME, 2), "from, to: the gain at rest"),
        Key("time_constant", ListOf(NAME, 2), "from, to: the time constant"),
        Key("after", ListOf(CHOICE, 2), "time, signal: the value after that time"),
        Key("is", QUANTITY, "the expected value", True),
        Key("within", QUANTITY, "how closely", True),
        Key("source", SENTENCE, "where the expected value comes from"),
    )
)

# ---------------------------------------------------------------- the four kinds of file
_FORMAT = Key("format", Leaf("1", {"const": 1}), "the version of this language")
_USES = Key("blocks", Named(USE), "tagged blocks: {use: block, parameter: value, …}")
_WIRES = Key("wires", ListOf(WIRE), "what is connected: TAG.output -> TAG.input")

BLOCK = Shape(
    (
        Key("block", NAME, "its name, the same as the file's", True),
        _FORMAT,
        Key("about", SENTENCE, "what it is"),
        Key("assumes", ListOf(SENTENCE), "what the balance takes for granted"),
        Key("sources", ListOf(SENTENCE), "where the equations and numbers come from"),
        Key("like", NAME, "another block whose text this one starts from"),
        Key("rename", Named(NAME), "names changed in that block: old: new"),
        Key("settings", Named(SETTING), "named choices"),
        Key("parameters", Named(PARAMETER), "numbers that the plant gives"),
        Key("one_of", ListOf(ListOf(NAME, 2)), "groups of parameters of which exactly one is given"),
        Key("repeat", Named(NAME, 1), "index letter: what it runs over"),
        Key("inputs", Named(INPUT), "what is wired in or given"),
        Key("states", Named(HELD), "what changes continuously"),
        Key("balances", Named(EQUATION), "one for each state: left = right, with dX/dt"),
        Key("memory", Named(HELD), "what changes only when the block is executed"),
        Key("scan", Named(FORMULA), "the next values, at each execution"),
        Key("continuous", Named(FORMULA), "what stands for parts of scan when the scan is 0 s"),
        Key("let", Named(FORMULA), "named quantities"),
        Key("solve", Named(UNKNOWN), "unknowns found from an equation"),
        Key("faults", Named(FAULT), "what may go wrong"),
        Key("outputs", Named(OUTPUT), "what can be wired out"),
        Key("streams", Named(Named(NAME)), "ports that go together in one pipe: carried name: port"),
        _USES,
        _WIRES,
        Key("ports", Named(SIGNAL), "the ports of a block made of blocks: port: TAG.port"),
        Key("check", ListOf(CHECK), "small cases with their expected values"),
    )
)
LIQUID = Shape((Key("is", NAME, "the liquid", True), Key("at", QUANTITY, "its temperature", True)))
_DIAGRAM = (
    _FORMAT,
    Key("about", SENTENCE, "what it is"),
    Key("liquid", LIQUID, "fills rho, cp, … where a block leaves them out"),
    Key("air_pressure", QUANTITY, "the pressure of the air, 1.01325 bar(a) if left out"),
    Key("show", Named(UNIT_NAME), "units for people, by dimension"),
    Key("boundary", Named(GIVEN), "what the plant cannot choose; disturbances enter here"),
    _USES,
    _WIRES,
    Key("points", Named(Named(GIVEN)), "other operating points, each a set of values"),
)
PLANT = Shape((Key("plant", NAME, "its name", True), *_DIAGRAM))
STRATEGY = Shape(
    (
        Key("strategy", NAME, "its name", True),
        *_DIAGRAM,
        Key("cut", ListOf(WIRE), "wires of the plant that are taken out"),
        Key("set", Named(GIVEN), "values that are changed: TAG.name: value"),
    )
)

# ---------------------------------------------------------------- scenario
_WHEN = (
    Key("at", TIME, "when it happens"),
    Key("when", Leaf("a condition: tank.h below 0.2 m", _TEXT), "the condition it waits for"),
    Key("holds", TIME, "how long the condition must hold"),
    Key("once", YES, "yes: only the first time"),
)
_TO = Key("to", OneOf((CHOICE, PAIR)), "the new value")
_BY_SIZE = Key("by", QUANTITY, "how much is added; per cent of what it is then")
EVENTS: dict[str, Shape] = {
    "step": Shape(
        (
            Key("step", SIGNAL, "what jumps", True),
            *_WHEN,
            _TO,
            _BY_SIZE,
            Key("times", NUMBER, "a factor"),
        )
    ),
    "ramp": Shape(
        (
            Key("ramp", SIGNAL, "what moves at a steady rate", True),
            *_WHEN,
            Key("to", QUANTITY, "the new value"),
            _BY_SIZE,
            Key("over", TIME, "how long it takes", True),
        )
    ),
    "pulse": Shape(
        (
            Key("pulse", SIGNAL, "what jumps and comes back", True),
            *_WHEN,
            _TO,
            _BY_SIZE,
            Key("lasts", TIME, "when it comes back", True),
        )
    ),
    "sine": Shape(
        (
            Key("sine", SIGNAL, "what swings", True),
            *_WHEN,
            Key("by", QUANTITY, "the amplitude", True),
            Key("period", TIME, "time of one cycle", True),
        )
    ),
    "follow": Shape(
        (
            Key("follow", SIGNAL, "what follows a record", True),
            *_WHEN,
            Key("file", FILE, "a CSV file beside the scenario", True),
            Key("column", NAME, "the column", True),
            Key("unit", UNIT_NAME, "the unit of the column", True),
        )
    ),
    "mode": Shape(
        (Key("mode", NAME, "the controller's tag", True), *_WHEN, Key("to", NAME, "the mode", True)),
        more=GIVEN,
    ),
    "fault": Shape(
        (
            Key("fault", NAME, "the tag of what fails", True),
            *_WHEN,
            Key("kind", NAME, "which of its faults", True),
            Key("size", QUANTITY, "the size of a fault that is named like a parameter"),
            Key("lasts", TIME, "when it is over; left out: never"),
        ),
        more=GIVEN,
    ),
}
_WINDOW = (Key("after", TIME, "where the window starts"), Key("until", TIME, "where it ends"))
_SIGNAL = Key("signal", SIGNAL, "what is judged", True)
_OF = OneOf((SIGNAL, QUANTITY))


def _rule(kind: str, holds: Holds, about: str, *others: Key) -> Shape:
    return Shape((_SIGNAL, Key(kind, holds, about, True), *others, *_WINDOW))


RULES: dict[str, Shape] = {
    "max": _rule("max", QUANTITY, "never above this"),
    "min": _rule("min", QUANTITY, "never below this"),
    "within": _rule(
        "within",
        QUANTITY,
        "no further than this from `of`",
        Key("of", _OF, "a signal or a value", True),
        Key("by", TIME, "from this long after the window starts"),
        Key("dwell", TIME, "how long it must stay inside to count"),
    ),
    "overshoot": _rule(
        "overshoot",
        QUANTITY,
        "at most this far past the set point, per cent of its last step",
        Key("of", _OF, "the set point"),
    ),
    "undershoot": _rule(
        "undershoot",
        QUANTITY,
        "at most this far the wrong way, per cent of the last step",
        Key("of", _OF, "the set point"),
    ),
    "iae": _rule("iae", QUANTITY, "integral of the absolute error at most this", Key("of", _OF, "the set point", True)),
    "travel": _rule(
        "travel",
        QUANTITY,
        "sum of all movements at most this",
        Key("band", QUANTITY, "play: movements inside it do not count"),
    ),
    "deviation": _rule("deviation", QUANTITY, "standard deviation at most this: how far noise moves a signal"),
    "reversals": _rule(
        "reversals",
        NUMBER,
        "at most so many changes of direction",
        Key("band", QUANTITY, "movements smaller than this do not count"),
    ),
    "rate": _rule("rate", QUANTITY, "never faster than this"),
    "outside": _rule(
        "outside",
        TIME,
        "at most this long outside the band",
        Key("band", QUANTITY, "how far from `of` is inside", True),
        Key("of", _OF, "a signal or a value", True),
    ),
    "alarms": _rule("alarms", NUMBER, "at most so many times on"),
}
MARGINS = Shape(
    (
        Key("loop", NAME, "the controller's tag", True),
        Key("gain_margin", NUMBER, "at least this"),
        Key("phase_margin", QUANTITY, "at least this, in deg"),
        Key("delay_margin", TIME, "at least this"),
        Key("max_sensitivity", NUMBER, "at most this"),
        Key("max_complementary", NUMBER, "at most this"),
    )
)
RECORD = Shape(
    (Key("every", TIME, "time between recorded rows"), Key("signals", ListOf(SIGNAL), "which signals; all if left out"))
)
SCENARIO = Shape(
    (
        Key("scenario", NAME, "its name", True),
        _FORMAT,
        Key("about", SENTENCE, "what it is"),
        Key("plant", FILE, "the plant's file", True),
        Key("strategies", Named(ListOf(FILE), 1), "name: files laid over the plant; []: the plant alone", True),
        Key("must_pass", ListOf(NAME), "the strategies that decide the exit status; all if left out"),
        Key("starts", Leaf("steady or given", {"enum": ["steady", "given"]}), "steady: plant and controllers at rest"),
        Key("lasts", TIME, "how long the run is", True),
        Key("seed", WHOLE, "number from which the noise is drawn"),
        Key("record", RECORD, "what is kept of the run"),
        Key("points", ListOf(NAME), "operating points of the plant to run at"),
        Key("events", ListOf(OneOf(tuple(EVENTS.values()))), "what happens"),
        Key("accept", ListOf(OneOf((*RULES.values(), MARGINS))), "what must hold"),
    )
)
KINDS: dict[str, Shape] = {"block": BLOCK, "plant": PLANT, "strategy": STRATEGY, "scenario": SCENARIO}
