"""The lines of one function in LLVM's text, as they are written."""

from __future__ import annotations

from loopsim.native.kinds import TYPES, Value


class Lines:
    """Instructions in their blocks; locals live in slots of the first one, which the optimiser makes registers."""

    def __init__(self) -> None:
        self.slots: list[str] = []
        self.text: list[str] = []
        self.count = 0
        self.label = "body."
        self.ended = False

    def name(self, stem: str) -> str:
        """A name not used yet; the dot keeps it apart from Python's."""
        self.count += 1
        return f"{stem}.{self.count}"

    def do(self, instruction: str) -> None:
        """An instruction without a value."""
        self.text.append(instruction)

    def make(self, kind: str, instruction: str) -> Value:
        """The value of an instruction."""
        name = self.name("%v")
        self.text.append(f"{name} = {instruction}")
        return Value(kind, name)

    def slot(self, kind: str) -> str:
        """A place for a local."""
        name = self.name("%s")
        self.slots.append(f"{name} = alloca {TYPES[kind]}")
        return name

    def end(self, instruction: str) -> None:
        """The last instruction of a block; what is written behind another end is never reached and left out."""
        if not self.ended:
            self.text.append(instruction)
            self.ended = True

    def go(self, label: str) -> None:
        self.end(f"br label %{label}")

    def choose(self, test: Value, then: str, otherwise: str) -> None:
        self.end(f"br {test}, label %{then}, label %{otherwise}")

    def begin(self, label: str) -> None:
        """Start the block of this label; the one before goes on into it where it has no end yet."""
        self.go(label)
        self.text.append(f"{label}:")
        self.label, self.ended = label, False

    def whole(self) -> str:
        """All lines of the body."""
        return "\n".join(["slots.:", *self.slots, "br label %body.", "body.:", *self.text])
