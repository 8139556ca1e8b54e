"""Formulas that are read and evaluated from one and the same tree.

An expression carries its values over frequency, its text in symbols, and its text with the numbers of one frequency
put in; each operation makes all three, so what is shown is what was computed. `||` binds tighter than `+` and looser
than products: `Zid + Zp||Zic` is Zid in series with Zp parallel to Zic.
"""

from dataclasses import dataclass, replace

import numpy as np

from xcheck.circuit.arrays import Complex
from xcheck.notation import engineering, phase
from xcheck.topologies.branches import inverse

SUM, LOOSE, TIGHT, PRODUCT, NUMBER, ATOM = range(6)
"""How tightly a text binds; LOOSE and TIGHT are parallel circuits, written with blanks around `||` and without."""
DIGITS = 4
REAL_WITHIN = 0.05
"""Degrees of phase below which a number is shown without it; what one decimal of a degree can show."""


@dataclass(frozen=True, slots=True, eq=False)
class Expression:
    """value: shape (F,); text and figures: in symbols and in numbers, with how tightly each binds; at: the index of
    the frequency whose numbers are shown; legend: what the symbols stand for, in order of appearance."""

    value: Complex
    text: str
    figures: str
    at: int
    rank: int = ATOM
    figures_rank: int = ATOM
    legend: tuple[tuple[str, str], ...] = ()


def quantity(symbol: str, value: Complex, at: int, *, unit: str = "Ohm", meaning: str = "") -> Expression:
    """A symbol with its values; meaning: what it stands for, where that needs to be said."""
    figures = number(complex(value[at]), unit)
    rank = NUMBER if unit and not figures.startswith("(") else ATOM
    legend = ((symbol, meaning),) if meaning and meaning != symbol else ()
    return Expression(value, symbol, figures, at, ATOM, rank, legend)


def let(symbol: str, e: Expression, *, unit: str = "Ohm") -> Expression:
    """A symbol that stands for an expression; one that is a symbol or a number already stays as it is."""
    if e.rank == ATOM:
        return e
    named = quantity(symbol, e.value, e.at, unit=unit)
    return Expression(e.value, symbol, named.figures, e.at, ATOM, named.figures_rank, ((symbol, e.text), *e.legend))


def one(like: Expression) -> Expression:
    """The number 1."""
    return Expression(np.ones_like(like.value), "1", "1", like.at)


def plus(*terms: Expression | None) -> Expression:
    """A sum; None is a term that is not there, and one at least must be."""
    there = [t for t in terms if t is not None]
    if len(there) == 1:
        return there[0]
    value: Complex = np.sum([t.value for t in there], axis=0)
    text = " + ".join(_apart(t.text, t.rank) for t in there)
    return _of(there, value, text, " + ".join(_apart(t.figures, t.figures_rank) for t in there), SUM)


def minus(a: Expression, b: Expression) -> Expression:
    """a - b"""
    figures = f"{a.figures} - {_within(b.figures, b.figures_rank, TIGHT)}"
    return _of([a, b], a.value - b.value, f"{a.text} - {_within(b.text, b.rank, TIGHT)}", figures, SUM)


def times(*factors: Expression | None) -> Expression:
    """A product; None is a factor of one."""
    there = [f for f in factors if f is not None]
    if len(there) == 1:
        return there[0]
    value: Complex = np.prod([f.value for f in there], axis=0)
    text = " ".join(_within(f.text, f.rank, PRODUCT) for f in there)
    return _of(there, value, text, " * ".join(_within(f.figures, f.figures_rank, PRODUCT) for f in there), PRODUCT)


def over(a: Expression, b: Expression) -> Expression:
    """a / b"""
    with np.errstate(divide="ignore", invalid="ignore"):
        value = a.value * inverse(b.value)
    text = f"{_within(a.text, a.rank, PRODUCT)}/{_within(b.text, b.rank, ATOM)}"
    return _of(
        [a, b], value, text,
        f"{_within(a.figures, a.figures_rank, PRODUCT)}/{_within(b.figures, b.figures_rank, ATOM)}", PRODUCT,
    )  # fmt: skip


def beside(*branches: Expression | None) -> Expression | None:
    """Impedances in parallel; None is a branch that is not there, and the result where none is."""
    there = [b for b in branches if b is not None]
    if len(there) < 2:
        return there[0] if there else None
    value = inverse(np.sum([inverse(b.value) for b in there], axis=0))
    tight = all(b.rank == ATOM for b in there)
    text = ("||" if tight else " || ").join(_within(b.text, b.rank, PRODUCT) for b in there)
    figures = " || ".join(_within(b.figures, b.figures_rank, PRODUCT) for b in there)
    found = _of(there, value, text, figures, TIGHT if tight else LOOSE)
    return replace(found, figures_rank=LOOSE)


def number(value: complex, unit: str = "Ohm") -> str:
    """A complex number as it stands in a formula: `10.00 kOhm`, `(1.061 kOhm at -45.0 deg)`."""
    size = engineering(abs(value), unit, DIGITS) if unit else f"{abs(value):.{DIGITS}g}"
    if not np.isfinite(value) or abs(np.degrees(np.angle(value))) < REAL_WITHIN:
        return size
    return f"({size} at {phase(value)})"


def _of(parts: list[Expression], value: Complex, text: str, figures: str, rank: int) -> Expression:
    legend = tuple(dict(entry for p in parts for entry in p.legend).items())
    return Expression(value, text, figures, parts[0].at, rank, rank, legend)


def _apart(text: str, rank: int) -> str:
    return f"({text})" if rank == LOOSE else text


def _within(text: str, rank: int, least: int) -> str:
    return text if rank >= least else f"({text})"
