"""Elements written by hand, without a deck's text behind them."""

from xcheck.circuit.elements import Controlled, Coupling, Origin, Passive, Source, Term
from xcheck.deck.cards import Card, Segment

NOWHERE = Origin(Card("", "", (), (Segment(0, "by hand", 1, 1),)))


def r(name: str, a: str, b: str, value: float) -> Passive:
    return Passive(name, "r", (a, b), value, NOWHERE)


def c(name: str, a: str, b: str, value: float) -> Passive:
    return Passive(name, "c", (a, b), value, NOWHERE)


def l(name: str, a: str, b: str, value: float) -> Passive:  # noqa: E743
    return Passive(name, "l", (a, b), value, NOWHERE)


def k(name: str, first: str, second: str, factor: float) -> Coupling:
    return Coupling(name, (first, second), factor, NOWHERE)


def v(name: str, a: str, b: str = "0") -> Source:
    return Source(name, "v", (a, b), 0.0, None, "", NOWHERE)


def i(name: str, a: str, b: str = "0") -> Source:
    return Source(name, "i", (a, b), 0.0, None, "", NOWHERE)


def by_voltage(name: str, a: str, b: str, *terms: tuple[float, str, str]) -> Controlled:
    """E or G by the first letter of its name; a term is (gain, positive, negative)."""
    return Controlled(name, name[0], (a, b), tuple(Term(*t) for t in terms), 0.0, NOWHERE)  # type: ignore[arg-type]


def by_current(name: str, a: str, b: str, *terms: tuple[float, str]) -> Controlled:
    """H or F by the first letter of its name; a term is (gain, voltage source)."""
    read = tuple(Term(gain, source=source) for gain, source in terms)
    return Controlled(name, name[0], (a, b), read, 0.0, NOWHERE)  # type: ignore[arg-type]
