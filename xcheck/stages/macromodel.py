"""Which pins of a subcircuit are an op-amp's, judged by what its linear elements do: the gain at DC from each pin
to each other pin, all remaining pins held."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from xcheck.circuit.elements import GROUND, Controlled, Element
from xcheck.stages.model import NEARLY_DC, bench

LEAST_GAIN = 1000.0
"""From here on a controlled source counts as an op-amp rather than a buffer or a scaling stage."""


@dataclass(frozen=True, slots=True)
class SignalPins:
    """Non-inverting and inverting input ('0' where the amplifier has only one), output, gain at DC, and the
    controlled source whose death takes the gain away."""

    plus: str
    minus: str
    output: str
    gain: float
    gain_element: str


def gains_to(elements: Sequence[Element], pins: Sequence[str], output: str) -> dict[str, float]:
    """V(output)/V(pin) at DC with every pin but the output held at 0 V in turn."""
    held = [p for p in pins if p != output]
    made = bench(elements, held)
    s = np.array([2j * np.pi * NEARLY_DC])
    solution = made.solve(s, [("v", p, 1.0) for p in held])[0]
    row = made.index.get(output)
    return {} if row is None else {p: float(solution[row, k].real) for k, p in enumerate(held)}


def signal_pins(elements: Sequence[Element], pins: Sequence[str]) -> list[SignalPins]:
    """The op-amps that a linear subcircuit holds, as seen from its pins; [] where it is none. Raises LinAlgError
    where the elements alone have no solution."""
    found: list[SignalPins] = []
    driven = {n for e in elements if isinstance(e, Controlled) for n in e.nodes}
    near = driven | {n for e in elements if driven & set(e.nodes) for n in e.nodes}
    sensed = {n for e in elements if isinstance(e, Controlled) for n in e.sensing}
    near_sensed = sensed | {n for e in elements if sensed & set(e.nodes) for n in e.nodes}
    for output in pins:
        if output == GROUND or output not in near:
            continue
        gains = {p: g for p, g in gains_to(elements, pins, output).items() if p in near_sensed}
        strong = {p: g for p, g in gains.items() if abs(g) > LEAST_GAIN}
        plus = [p for p, g in strong.items() if g > 0]
        minus = [p for p, g in strong.items() if g < 0]
        if len(plus) > 1 or len(minus) > 1 or not strong:
            continue
        inputs = (plus[0] if plus else GROUND, minus[0] if minus else GROUND)
        gain = max(abs(g) for g in strong.values())
        element = gain_element(elements, pins, inputs, output)
        found.append(SignalPins(*inputs, output, gain, element))
    return found


def gain_element(elements: Sequence[Element], pins: Sequence[str], inputs: tuple[str, str], output: str) -> str:
    """The first controlled source, counted from the inputs, whose death takes the gain away."""
    pin = inputs[1] if inputs[1] != GROUND else inputs[0]
    sources = [e for e in elements if isinstance(e, Controlled)]
    nearest = sorted(sources, key=lambda e: not set(inputs) & set(e.sensing))
    for source in nearest:
        dead = [replace(e, terms=()) if e is source else e for e in elements]
        try:
            gain = gains_to(dead, pins, output).get(pin, 0.0)
        except np.linalg.LinAlgError:
            continue
        if abs(gain) < 1.0:
            return source.name
    return nearest[0].name
