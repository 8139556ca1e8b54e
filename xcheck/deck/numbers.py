"""Numbers as ngspice reads them: digits, a scale factor, and anything after it ignored.

The scale factors are those of chapter 2 of the ngspice manual; the traps were seen on ngspice 39.
"""

import re
from dataclasses import dataclass
from functools import lru_cache

SCALES = {
    "t": 1e12, "g": 1e9, "meg": 1e6, "k": 1e3, "mil": 25.4e-6, "m": 1e-3, "u": 1e-6, "n": 1e-9, "p": 1e-12,
    "f": 1e-15,
}  # fmt: skip
_NUMBER = re.compile(
    r"(?P<digits>[+-]?(?:\d+\.?\d*|\.\d+)(?:[eEdD][+-]?\d+)?)"
    r"(?P<scale>meg|mil|[tgkmunpf])?(?P<rest>.*)",
    re.IGNORECASE | re.DOTALL,
)


@dataclass(frozen=True, slots=True)
class Number:
    """value: what ngspice takes; digits: the figures as written; scale: the scale factor as written, '' for
    none; rest: the characters after it, which are ignored."""

    value: float
    digits: str
    scale: str
    rest: str


@lru_cache(maxsize=65536)  # decks use the same few values over and over
def read_number(text: str) -> Number | None:
    """The number that `text` begins with, None where it begins with none."""
    match = _NUMBER.match(text)
    if match is None:
        return None
    digits, scale, rest = match["digits"], match["scale"] or "", match["rest"]
    value = float(digits.lower().replace("d", "e")) * SCALES.get(scale.lower(), 1.0)
    return Number(value, digits, scale, rest)
