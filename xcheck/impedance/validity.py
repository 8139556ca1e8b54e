"""How far the rule of thumb holds."""

from collections.abc import Mapping

import numpy as np

from xcheck.circuit.arrays import Complex, Real

LIMITS: Mapping[str, float] = {"1%": 0.01, "10%": 0.1}


def deviation(rule: Complex, analytic: Complex, neighbour: Complex | None) -> Real | None:
    """How far off the rule of thumb is, relative, shape (F,): |Z - Zrule|/|Zrule|.

    Infinite and zero have no relative difference of their own; they are judged by what they cost at the interface,
    with the impedance that the port looks out into: |Zs/Z| for an infinite input fed from Zs, |Z/ZL| for a zero
    output loaded with ZL. None where nothing (or a stiff source, or no load) is there to judge by.
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        if np.all(np.isfinite(rule)) and np.all(rule != 0):
            return np.abs(analytic - rule) / np.abs(rule)
        if neighbour is None:
            return None
        infinite = bool(np.all(np.isinf(rule)))
        off = np.abs(neighbour / analytic) if infinite else np.abs(analytic / neighbour)
    if not np.all(np.isfinite(off)) or not np.any(off):
        return None
    return off


def holds_to(frequency: Real, rule: Complex, analytic: Complex, neighbour: Complex | None) -> dict[str, float | None]:
    """The frequency (Hz) from which the rule of thumb is off by 1 % and by 10 %, interpolated between grid points on
    logarithmic axes; the lowest frequency of the grid where it is off from the start; None where it holds over the
    whole grid or cannot be judged."""
    off = deviation(rule, analytic, neighbour)
    if off is None:
        return dict.fromkeys(LIMITS)
    return {name: _crossing(frequency, off, limit) for name, limit in LIMITS.items()}


def _crossing(frequency: Real, off: Real, limit: float) -> float | None:
    beyond = np.nonzero(off > limit)[0]
    if not len(beyond):
        return None
    first = int(beyond[0])
    if first == 0 or off[first - 1] <= 0:
        return float(frequency[first])
    low, high = np.log(off[first - 1]), np.log(off[first])
    share = (np.log(limit) - low) / (high - low)
    return float(frequency[first - 1] * (frequency[first] / frequency[first - 1]) ** share)
