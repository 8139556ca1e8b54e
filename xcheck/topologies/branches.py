"""Branches of a passive network as an engineer reads them: a text in the deck's own names, and an admittance.

A branch carries its admittance over the frequencies of the network that it stands in, so that joining branches costs
one array operation and long ladders need no recursion.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from xcheck.circuit.arrays import Complex, Real

MOST_NAMES = 8
"""Parts written out in a branch's text; a longer one is told by its first part and their number."""

NEARLY_DC = 1e-30
"""Hz: where a capacitor is as good as open and an inductor a wire, so that DC is the limit of the same formulas."""


def from_dc(frequency: Real) -> Real:
    """The frequencies (Hz) with DC replaced by its limit."""
    return np.where(frequency == 0, NEARLY_DC, frequency)


def inverse(values: Complex) -> Complex:
    """1/x with 1/0 = inf (no imaginary part) and 1/inf = 0."""
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        return np.where(values == 0, np.inf, np.where(np.isinf(values), 0.0, 1.0 / values)).astype(np.complex128)


@dataclass(frozen=True, slots=True, eq=False)
class Branch:
    """What lies between two nodes. admittance: siemens, shape (F,); names: of its first parts; count: how many parts;
    tee: whether a star of three branches or more (a T-network) was resolved to get it; blocking: open at DC."""

    admittance: Complex
    text: str
    form: Literal["part", "sum", "parallel"]
    names: tuple[str, ...]
    count: int = 1
    tee: bool = False
    blocking: bool = False

    @property
    def impedance(self) -> Complex:
        """Ohm, shape (F,)."""
        return inverse(self.admittance)

    @property
    def meaning(self) -> str:
        """The text, with a word on what a reader might not see in it."""
        return f"{self.text} (T-network)" if self.tee else self.text


def part(name: str, kind: str, value: float, frequency: Real) -> Branch:
    """One R (ohm), C (farad) or L (henry) at frequencies above zero (Hz)."""
    s = 2j * np.pi * frequency
    if kind == "r":
        admittance = np.full(frequency.shape, 1.0 / value, dtype=np.complex128)
    else:
        admittance = (s * value if kind == "c" else 1.0 / (s * value)).astype(np.complex128)
    return Branch(admittance, name, "part", (name,), blocking=kind == "c")


def known(name: str, admittance: Complex) -> Branch:
    """A branch whose admittance is known already, such as another stage's port."""
    return Branch(admittance, name, "part", (name,))


def in_series(one: Branch, other: Branch) -> Branch:
    """Two branches in a row."""
    admittance = inverse(one.impedance + other.impedance)
    text = " + ".join(f"({b.text})" if b.form == "parallel" else b.text for b in (one, other))
    return _joined(admittance, text, "sum", (one, other), blocking=one.blocking or other.blocking)


def in_parallel(one: Branch, other: Branch) -> Branch:
    """Two branches side by side."""
    text = " || ".join(f"({b.text})" if b.form == "sum" else b.text for b in (one, other))
    both = one.blocking and other.blocking
    return _joined(one.admittance + other.admittance, text, "parallel", (one, other), blocking=both)


def through_star(arms: Sequence[Branch], i: int, k: int) -> Branch:
    """What a star of branches puts between the ends of two of them: yi yk / (y1 + ... + yn) (Rosen, A new network
    theorem, J. IEE 62, 1924; from memory), for three arms Zi + Zk + Zi Zk/Zj."""
    total: Complex = np.sum([arm.admittance for arm in arms], axis=0)
    admittance = arms[i].admittance * arms[k].admittance / total
    ordered = sorted(arms, key=lambda arm: arm.names)
    text = f"star({', '.join(arm.text for arm in ordered)})"
    form: Literal["part", "sum"] = "part"
    if len(arms) == 3 and all(arm.form == "part" for arm in arms):
        one, two = sorted((arms[i].text, arms[k].text))
        third = next(arm.text for j, arm in enumerate(arms) if j not in (i, k))
        text, form = f"{one} + {two} + {one}*{two}/{third}", "sum"
    return _joined(admittance, text, form, ordered, tee=True, blocking=arms[i].blocking or arms[k].blocking)


def _joined(
    admittance: Complex, text: str, form: Literal["part", "sum", "parallel"], of: Sequence[Branch],
    *, blocking: bool, tee: bool = False,
) -> Branch:  # fmt: skip
    names = tuple(dict.fromkeys(name for b in of for name in b.names))[:MOST_NAMES]
    count = sum(b.count for b in of)
    tee = tee or any(b.tee for b in of)
    if count > MOST_NAMES:
        return Branch(admittance, f"network({names[0]} and {count - 1} more)", "part", names, count, tee, blocking)
    return Branch(admittance, text, form, names, count, tee, blocking)
