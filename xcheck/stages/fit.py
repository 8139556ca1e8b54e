"""An amplifier's measured response fitted to the model that data sheets speak of, with how far off the fit is.

A(s) = A0/((1 + s/p1)(1 + s/p2)): A0 from DC, p1 from where the gain has fallen by half its power, p2 from what the
phase lags beyond p1 at unity gain. Zid and Zo are R || C and R. Each error is the largest relative one from 1 Hz to
unity gain.
"""

from dataclasses import replace

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.stages.types import OpenLoop, Quantity

GRID = np.logspace(-3, 10, 261)
"""Hz, on which corners are looked for; between its points the response is nearly a straight line in logarithms."""
LOWEST = 1.0


def fitted(loop: OpenLoop) -> OpenLoop:
    """The values of a nonlinear model's response, as measured at the operating point; unchanged without a model."""
    if loop.model is None:
        return loop
    response = loop.model.response(GRID)
    gain: Complex = (response.gain_plus - response.gain_minus) / 2
    size: Real = np.abs(gain)
    at_dc = float(size[0])
    first = _crossing(size, at_dc / np.sqrt(2))
    unity = _crossing(size, 1.0)
    found: dict[str, float | tuple[float, ...] | None] = {"gain": at_dc}
    if first is not None:
        second = _second_pole(gain, first, unity)
        found["poles_hz"] = (first, second) if second is not None else (first,)
        found["gain_bandwidth_hz"] = at_dc * first
        if second is not None:
            found["second_pole_hz"] = second
        shape = at_dc / ((1 + 1j * GRID / first) * (1 + 1j * GRID / second if second is not None else 1.0))
        found["gain_fit_error"] = _error(shape.astype(np.complex128) * np.sign(gain[0].real), gain, unity)
    if unity is not None:
        found["unity_gain_hz"] = unity
    resistance = loop.values["input_resistance_ohm"].value
    capacitance = loop.values["input_capacitance_f"].value
    if isinstance(capacitance, float):
        siemens = 1.0 / resistance if isinstance(resistance, float) else 0.0
        if np.abs(response.y_differential).max() > 0:
            simple = (siemens + 2j * np.pi * GRID * capacitance).astype(np.complex128)
            found["input_fit_error"] = _error(simple, response.y_differential, unity)
    ohm = loop.values["output_resistance_ohm"].value
    if isinstance(ohm, float) and ohm:
        found["output_fit_error"] = _error(np.full(len(GRID), ohm, dtype=np.complex128), response.z_output, unity)
    return replace(loop, values={**loop.values, **{name: Quantity(v, "measured") for name, v in found.items()}})


def _crossing(size: Real, level: float) -> float | None:
    """The first frequency (Hz) at which a magnitude falls below a level, between grid points by logarithms."""
    below = np.flatnonzero(size < level)
    if not below.size or below[0] == 0:
        return None
    k = int(below[0])
    share = np.log(size[k - 1] / level) / np.log(size[k - 1] / size[k])
    return float(GRID[k - 1] * (GRID[k] / GRID[k - 1]) ** share)


def _second_pole(gain: Complex, first: float, unity: float | None) -> float | None:
    """The pole (Hz) whose lag at unity gain is what p1 leaves unexplained; None where there is less than a degree."""
    if unity is None:
        return None
    phase = np.unwrap(np.angle(gain))
    lag = -(np.interp(np.log(unity), np.log(GRID), phase) - phase[0]) - np.arctan(unity / first)
    if not np.deg2rad(1.0) < lag < np.pi / 2:
        return None
    return float(unity / np.tan(lag))


def _error(fit: Complex, seen: Complex, unity: float | None) -> float:
    inside = (GRID >= LOWEST) & ((unity or GRID[-1]) >= GRID)
    return float(np.max(np.abs(fit[inside] - seen[inside]) / np.abs(seen[inside]), initial=0.0))
