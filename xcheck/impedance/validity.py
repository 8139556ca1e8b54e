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
    logarithmic axes: where it first leaves the limit, having kept it; the lowest frequency of the grid where it
    never keeps it. None where it holds to the end of the grid or cannot be judged.
    """
    off = deviation(rule, analytic, neighbour)
    if off is None:
        return dict.fromkeys(LIMITS)
    return {name: _crossing(frequency, off, limit) for name, limit in LIMITS.items()}


def _crossing(frequency: Real, off: Real, limit: float) -> float | None:
    within = off <= limit
    if not np.any(within):
        return float(frequency[0])
    # a coupling capacitor puts the rule off at the low end too; it holds from there on
    leaves = np.nonzero(within[:-1] & ~within[1:])[0]
    if not len(leaves):
        return None
    last = int(leaves[0])
    if off[last] <= 0:
        return float(frequency[last + 1])
    low, high = np.log(off[last]), np.log(off[last + 1])
    share = (np.log(limit) - low) / (high - low)
    return float(frequency[last] * (frequency[last + 1] / frequency[last]) ** share)
