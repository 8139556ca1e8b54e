"""Which frequencies a report quotes, and values at them. Picks from the grid; computes nothing."""

import math
from collections.abc import Sequence

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.options import Options
from xcheck.reviewed import Evidence


def spot_frequencies(frequency: Real, options: Options) -> list[float]:
    """The frequencies asked for, else every tenth point of the grid (a decade apart); Hz."""
    if options.spots:
        return list(options.spots)
    return [float(f) for f in frequency[::10]]


def nearest(frequency: Real, hertz: float) -> int:
    """The index of the grid point nearest to a frequency, by ratio."""
    return int(np.argmin(np.abs(np.log(frequency / hertz))))


def quoted(evidence: Evidence) -> int:
    """The index of the frequency at which single numbers are quoted: the first one asked for, else mid band."""
    wanted = evidence.options.spots[0] if evidence.options.spots else math.sqrt(evidence.band[0] * evidence.band[1])
    return nearest(evidence.frequency, wanted)


def pair(values: Complex | None, index: int) -> list[float] | None:
    """[re, im] at a grid point, None where there is no finite value."""
    if values is None:
        return None
    value = complex(values[index])
    return [value.real, value.imag] if math.isfinite(value.real) and math.isfinite(value.imag) else None


def number(values: Sequence[float] | Real | None, index: int) -> float | None:
    """A real value at a grid point, None where there is no finite one."""
    if values is None:
        return None
    value = float(values[index])
    return value if math.isfinite(value) else None
