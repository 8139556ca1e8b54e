"""Frequency sweeps that make ngspice's points equal a grid."""

from dataclasses import dataclass

import numpy as np

from xcheck.circuit.arrays import Real

NEAR = 1e-9
"""How far (as a part of one step) a frequency may lie off a logarithmic grid that holds it."""
NUDGE = 1e-13
"""ngspice rounds the number of steps down, so a stop must not lie below its last point."""


@dataclass(frozen=True)
class Sweeps:
    """commands: `ac` commands, to be run in order; order: for each frequency asked for, the position of its point
    among all points of these runs, shape (F,)."""

    commands: tuple[str, ...]
    order: "np.typing.NDArray[np.intp]"


def sweeps_of(frequency: Real) -> Sweeps:
    """One logarithmic run for the longest part of a grid (Hz, shape (F,), ascending) that has as many points in
    each decade, single points for the rest."""
    regular, steps = _logarithmic_part(frequency)
    commands: list[str] = []
    if len(regular):
        first, last = (float(frequency[k]) for k in (regular[0], regular[-1]))
        commands.append(f"ac dec {steps} {first!r} {last * (1 + NUDGE)!r}")
    rest = np.setdiff1d(np.arange(len(frequency)), regular)
    commands += [f"ac lin 1 {float(frequency[k])!r} {float(frequency[k])!r}" for k in rest]
    return Sweeps(tuple(commands), np.argsort(np.concatenate([regular, rest])))


def _logarithmic_part(frequency: Real) -> tuple["np.typing.NDArray[np.intp]", int]:
    """Positions of the longest run on a grid of a whole number of points a decade, and that number; none of them
    where there is no such run of three."""
    nothing = np.zeros(0, dtype=np.intp), 0
    if len(frequency) < 3 or frequency[0] <= 0:
        return nothing
    decades = np.log10(frequency)
    steps = round(1 / float(np.median(np.diff(decades)))) if np.median(np.diff(decades)) > 0 else 0
    if steps < 1:
        return nothing
    best = nothing[0]
    for anchor in (0, len(frequency) // 2, len(frequency) - 1):
        place = (decades - decades[anchor]) * steps
        on = np.nonzero(np.abs(place - np.round(place)) < NEAR * steps * 10)[0]
        number = np.round(place[on])
        for run in np.split(on, np.nonzero(np.diff(number) != 1)[0] + 1):
            if len(run) > len(best):
                best = run
    return (best, steps) if len(best) >= 3 else nothing
