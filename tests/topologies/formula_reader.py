"""Reads a closed form as it is printed and calculates it: the text must say what was computed.

sum: parallel (+ - parallel)...     parallel: product (|| product)...     product: factor (* / or a blank, factor)...
factor: a symbol, a number with or without unit, `(1.2 kOhm at -45.0 deg)`, or a sum in parentheses.
"""

import cmath
import math
import re
from collections.abc import Mapping

TOKEN = re.compile(
    r"\s*(?:(?P<polar>\((?P<size>[\d.e+-]+)(?: (?P<prefix>[fpnumkMGT]?)Ohm)? at (?P<angle>-?[\d.]+) deg\))"
    r"|(?P<number>\d[\d.]*(?:e[+-]\d+)?)(?: (?P<unit>[fpnumkMGT]?)Ohm)?"
    r"|(?P<symbol>A[+-]'?(?=[\s)]|$)|[A-Za-z][\w.]*'?)"
    r"|(?P<sign>\|\||[-+*/()]))"
)
SCALE = {"": 1.0, "f": 1e-15, "p": 1e-12, "n": 1e-9, "u": 1e-6, "m": 1e-3, "k": 1e3, "M": 1e6, "G": 1e9, "T": 1e12}


def definitions(formula: str) -> tuple[str, dict[str, str]]:
    """A printed formula's body, and what its symbols stand for."""
    body, _, legend = formula.partition("; ")
    entries = (entry.partition(" = ") for entry in legend.split(", ")) if legend else ()
    return body, {symbol: text.removesuffix(" (T-network)") for symbol, _, text in entries}


def value_of(text: str, symbols: Mapping[str, complex], legend: Mapping[str, str] | None = None) -> complex:
    """The value of a text; symbols that are not known are looked up in the legend."""
    return _Reader(text, symbols, legend or {}).whole()


class _Reader:
    def __init__(self, text: str, symbols: Mapping[str, complex], legend: Mapping[str, str]) -> None:
        self.text, self.symbols, self.legend = text, symbols, legend
        self.tokens: list[tuple[str, complex]] = []
        at = 0
        while at < len(text.rstrip()):
            match = TOKEN.match(text, at)
            assert match, f"cannot read {text[at:]!r}"
            self.tokens.append(self.token(match))
            at = match.end()
        self.next = 0

    def token(self, match: re.Match[str]) -> tuple[str, complex]:
        if match["polar"]:
            size = float(match["size"]) * SCALE[match["prefix"] or ""]
            return "value", cmath.rect(size, math.radians(float(match["angle"])))
        if match["number"]:
            return "value", complex(float(match["number"]) * SCALE[match["unit"] or ""])
        if match["symbol"]:
            name = match["symbol"]
            if name in self.symbols:
                return "value", self.symbols[name]
            return "value", value_of(self.legend[name], self.symbols, self.legend)
        return match["sign"], 0j

    def peek(self) -> str:
        return self.tokens[self.next][0] if self.next < len(self.tokens) else ""

    def whole(self) -> complex:
        value = self.sum()
        assert self.next == len(self.tokens), f"something is left of {self.text!r}"
        return value

    def sum(self) -> complex:
        value = self.parallel()
        while self.peek() in ("+", "-"):
            sign = self.take()
            value += self.parallel() if sign == "+" else -self.parallel()
        return value

    def parallel(self) -> complex:
        branches = [self.product()]
        while self.peek() == "||":
            self.take()
            branches.append(self.product())
        return branches[0] if len(branches) == 1 else 1 / sum(1 / z for z in branches)

    def product(self) -> complex:
        value = self.factor()
        while self.peek() in ("*", "/", "value", "("):
            if self.peek() == "/":
                self.take()
                value /= self.factor()
            else:
                if self.peek() == "*":
                    self.take()
                value *= self.factor()
        return value

    def factor(self) -> complex:
        kind, value = self.tokens[self.next]
        self.next += 1
        if kind == "value":
            return value
        assert kind == "(", f"{kind!r} in {self.text!r}"
        value = self.sum()
        assert self.take() == ")", self.text
        return value

    def take(self) -> str:
        self.next += 1
        return self.tokens[self.next - 1][0]
