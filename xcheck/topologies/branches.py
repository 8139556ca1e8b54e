"""Branches of a network as an engineer reads them: parts in series and in parallel, with their impedance."""

from dataclasses import dataclass

import numpy as np

from xcheck.circuit.arrays import Complex, Real


@dataclass(frozen=True, slots=True)
class Part:
    """One R, C or L by its name in the deck; value in ohm, farad or henry."""

    name: str
    kind: str
    value: float

    @property
    def text(self) -> str:
        return self.name

    @property
    def parts(self) -> tuple["Part", ...]:
        return (self,)

    def admittance(self, frequency: Real) -> Complex:
        """Siemens, shape (F,), at frequencies in Hz."""
        s = 2j * np.pi * frequency
        if self.kind == "r":
            return np.full(frequency.shape, 1.0 / self.value, dtype=np.complex128)
        with np.errstate(divide="ignore", invalid="ignore"):
            return (s * self.value if self.kind == "c" else 1.0 / (s * self.value)).astype(np.complex128)


@dataclass(frozen=True, slots=True)
class Series:
    """Branches one after the other."""

    members: tuple["Branch", ...]

    @property
    def text(self) -> str:
        return " + ".join(f"({m.text})" if isinstance(m, Parallel) else m.text for m in self.members)

    @property
    def parts(self) -> tuple[Part, ...]:
        return tuple(p for m in self.members for p in m.parts)

    def admittance(self, frequency: Real) -> Complex:
        """Siemens, shape (F,)."""
        total: Complex = sum((1.0 / m.admittance(frequency) for m in self.members), np.zeros(frequency.shape, complex))
        return 1.0 / total


@dataclass(frozen=True, slots=True)
class Parallel:
    """Branches between the same two nodes."""

    members: tuple["Branch", ...]

    @property
    def text(self) -> str:
        return " || ".join(f"({m.text})" if isinstance(m, Series) else m.text for m in self.members)

    @property
    def parts(self) -> tuple[Part, ...]:
        return tuple(p for m in self.members for p in m.parts)

    def admittance(self, frequency: Real) -> Complex:
        """Siemens, shape (F,)."""
        return sum((m.admittance(frequency) for m in self.members), np.zeros(frequency.shape, complex))


Branch = Part | Series | Parallel


def in_series(one: Branch, other: Branch) -> Branch:
    """Two branches in a row, flattened."""
    members = [m for b in (one, other) for m in (b.members if isinstance(b, Series) else (b,))]
    return Series(tuple(members))


def in_parallel(one: Branch, other: Branch) -> Branch:
    """Two branches side by side, flattened."""
    members = [m for b in (one, other) for m in (b.members if isinstance(b, Parallel) else (b,))]
    return Parallel(tuple(members))
