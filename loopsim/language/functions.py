"""The functions of the block language: name, how many arguments, and of what kind they are."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Function:
    """A function's name, least and most number of arguments (None: any number), and kind.

    `kind` is `pure` (value from arguments only), `structure` (known when the model is assembled) or
    `primitive` (needs the engine: dead time, noise, memory of earlier values).
    """

    name: str
    least: int
    most: int | None
    kind: str = "pure"


FUNCTIONS: dict[str, Function] = {
    function.name: function
    for function in (
        *(Function(name, 1, 1) for name in ["sqrt", "exp", "log", "log10", "sin", "cos", "tan", "tanh", "abs", "sign"]),
        Function("min", 1, None),
        Function("max", 1, None),
        Function("sum", 1, 1),
        Function("clip", 3, 3),
        Function("rounded", 2, 2),
        Function("where", 3, None),
        Function("interp", 2, 2),
        Function("given", 1, 1, "structure"),
        Function("wired", 1, 1, "structure"),
        Function("delayed", 2, 2, "primitive"),
        Function("transported", 3, 3, "primitive"),
        Function("noise", 2, 2, "primitive"),
        Function("was", 1, 1, "primitive"),
        Function("since", 1, 1, "primitive"),
        Function("held", 2, 2, "primitive"),
    )
}

CONSTANTS: dict[str, tuple[float, str]] = {
    "g": (9.80665, "m/s^2"),
    "R": (8.314462618, "J/(mol*K)"),
    "sigma": (5.670374419e-8, "W/(m^2*K^4)"),
    "pi": (3.141592653589793, "dimensionless"),
}
