"""The scanned control law, written out by hand, in fractions of span.

Source: the product's written law, which is the usual positional law with backward differences:

P = s*Kc*(beta*sp - pv); dI = s*Kc*(Ts/Ti)*(sp - pv); D = Tf/(Tf + Ts)*D - s*Kc*Td/(Tf + Ts)*(pv - pv before),
Tf = Td/N, D = 0 at the first scan; I <- I + dI first, then out = clip(P + I + D + ff, low, high).

D is kept by its own recursion, not through a filtered measurement, so that it is a second way of writing the law.
Series and parallel forms are not known here: a script converts them and hands over the ideal settings.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass
class Controller:
    """Settings of the ideal form and what the law remembers.

    `sign`: +1 reverse action, -1 direct; `integral` None: no integral action, `I` is then the bias;
    `windup`: `hold` or `track`; `output` and `I` start as the case says (fractions of span).
    """

    gain: float
    integral: float | None
    output: float
    I: float  # noqa: E741  (the letter the law is written with)
    derivative: float = 0.0
    N: float = 8.0
    beta: float = 1.0
    sign: float = 1.0
    low: float = 0.0
    high: float = 1.0
    windup: str = "hold"
    manual: bool = False
    D: float = 0.0
    unclipped: float | None = None
    _pv: float | None = None
    _seen: tuple[object, ...] | None = None

    def scan(
        self,
        Ts: float,
        sp: float,
        pv: float,
        ff: float = 0.0,
        may_rise: bool = True,
        may_fall: bool = True,
        follow: float | None = None,
    ) -> float:
        """Execute once; `Ts` [s] since the execution before.

        `may_rise`, `may_fall`: whether the user of the output still answers that way; `follow`: the output
        that a user who does not listen holds.
        """
        rest = self._proportional(sp, pv) + self._derivative(Ts, pv) + ff
        settings = (self.manual, self.gain, self.integral, self.derivative, self.N, self.beta)
        changed = self._seen is not None and settings != self._seen
        self._seen = settings
        before = self.output if self.unclipped is None else self.unclipped
        if self.manual:
            self.I = self.output - rest
        elif follow is not None:
            self.I = follow - rest
            self.output = min(max(follow, self.low), self.high)
        else:
            if changed:
                self.I = self.output - rest
            self._integrate(Ts, sp, pv, rest, before, may_rise, may_fall)
            self.output = min(max(rest + self.I, self.low), self.high)
        self.unclipped = rest + self.I
        return self.output

    def _proportional(self, sp: float, pv: float) -> float:
        return self.sign * self.gain * (self.beta * sp - pv)

    def _derivative(self, Ts: float, pv: float) -> float:
        Tf = self.derivative / self.N
        if self._pv is None or self.derivative == 0.0:
            self.D = 0.0
        else:
            slope = self.sign * self.gain * self.derivative / (Tf + Ts) * (pv - self._pv)
            self.D = Tf / (Tf + Ts) * self.D - slope
        self._pv = pv
        return self.D

    def _integrate(
        self, Ts: float, sp: float, pv: float, rest: float, before: float, may_rise: bool, may_fall: bool
    ) -> None:
        if self.integral is None:
            return
        change = self.sign * self.gain * Ts / self.integral * (sp - pv)
        if (change > 0.0 and not may_rise) or (change < 0.0 and not may_fall):
            change = 0.0
        if self.windup == "track":
            self.I += change + Ts / self.integral * (self.output - before)
        elif change > 0.0:
            self.I = max(self.I, min(self.I + change, self.high - rest))
        elif change < 0.0:
            self.I = min(self.I, max(self.I + change, self.low - rest))
