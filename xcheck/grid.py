"""The frequencies at which methods are compared."""

import math
from collections.abc import Iterable, Sequence

import numpy as np

from xcheck.circuit.arrays import Real
from xcheck.circuit.elements import Analysis

DEFAULT_RANGE = (1.0, 1e6)
"""Hz, where a deck has no usable `.ac` card."""
DEFAULT_BAND = (10.0, 10e3)
"""Hz, looked at where nobody declared a band."""
POINTS_A_DECADE = 10
MOST_DECADES = 24
"""A range wider than this is a slip of a suffix, not a sweep; it is cut at its upper end."""


def sweep_range(analyses: Iterable[Analysis]) -> tuple[float, float]:
    """The least and greatest frequency (Hz) of the deck's `.ac` cards; DEFAULT_RANGE without any."""
    ends: list[float] = []
    for analysis in analyses:
        numbers = [a for a in analysis.arguments if isinstance(a, float)]
        if analysis.kind == "ac" and len(numbers) >= 3:
            low, high = numbers[-2:]
            if 0 < low <= high and math.isfinite(high):
                ends += [low, high]
    if not ends:
        return DEFAULT_RANGE
    low, high = min(ends), max(ends)
    return low, min(high, low * 10.0**MOST_DECADES)


def comparison_grid(analyses: Iterable[Analysis], spots: Sequence[float] = ()) -> Real:
    """Ten points a decade over the deck's own range, and the spot frequencies; Hz, shape (F,), ascending."""
    low, high = sweep_range(analyses)
    steps = math.floor(POINTS_A_DECADE * math.log10(high / low) * (1 + 1e-12) + 1e-9)
    grid = [low * 10.0 ** (k / POINTS_A_DECADE) for k in range(steps + 1)]
    apart = [s for s in spots if min(abs(s / f - 1) for f in grid) > 1e-9]
    return np.sort(np.array(grid + apart, dtype=np.float64))
