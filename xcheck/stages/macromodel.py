"""Whether some elements with pins are an op-amp, judged by what they do.

They are when one pin follows one or two others with a gain above LEAST_GAIN at DC, all remaining pins held, and when
nothing inside leads from that pin back to what the first controlled source senses: a stage wrapped in a subcircuit,
with its feedback inside, is no op-amp, however much gain it has.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from xcheck.circuit.elements import GROUND, Controlled, Device, Element, Passive
from xcheck.stages.influence import influence, reach
from xcheck.stages.model import bench

LEAST_GAIN = 1000.0
"""From here on a controlled source counts as an op-amp rather than a buffer or a scaling stage."""

BESIDE = 0.1
"""A pin with less than this part of the largest gain is no input: what is left of a supply's or common mode's."""

STRAY_FARAD = 5e-12
"""A capacitor up to this from the output back to an input is a parasitic of the part, not a feedback network."""

MOST_ELEMENTS = 1500
"""A linear op-amp model has tens of elements, a transistor-level one hundreds at its operating point; a block with more
is a board, and its dense equations too large."""


@dataclass(frozen=True, slots=True)
class SignalPins:
    """Non-inverting and inverting input ('0' where the amplifier has only one), output, gain at DC, and the
    controlled source whose death takes the gain away.

    tied: other pins that conduct to an input; moving: other pins that move the output; balance: the smaller of the two
    inputs' gains by the larger.
    """

    plus: str
    minus: str
    output: str
    gain: float
    gain_element: str
    tied: tuple[str, ...] = ()
    moving: tuple[str, ...] = ()
    balance: float = 1.0


MOST_TRIED = 40
"""Controlled sources that are killed in turn to find the one that the gain hangs on; each costs a solution."""


def gains_to(
    elements: Sequence[Element], pins: Sequence[str], output: str, loose: Sequence[str] = ()
) -> dict[str, float]:
    """V(output)/V(pin) at DC with every pin held at 0 V in turn, but for the output and the loose ones."""
    held = [p for p in pins if p not in (output, GROUND, *loose)]
    made = bench(elements, held)
    row = made.index.get(output)
    if row is None or not held:
        return {}
    solution = made.solve_dc([("v", p, 1.0) for p in held])
    return {p: float(solution[row, k].real) for k, p in enumerate(held)}


def signal_pins(
    elements: Sequence[Element], pins: Sequence[str], least: float = LEAST_GAIN, loose: Sequence[str] = ()
) -> list[SignalPins]:
    """The op-amps that some linear elements hold, as seen from their pins; [] where they are none. loose: pins that
    nothing outside touches."""
    if len(elements) > MOST_ELEMENTS or any(isinstance(e, Device) for e in elements):
        return []
    found = []
    for output in _driven_pins(elements, pins):
        try:
            gains = gains_to(elements, pins, output, loose)
        except np.linalg.LinAlgError:  # an input that only a current source touches
            continue
        most = max((abs(g) for g in gains.values()), default=0.0)
        strong = {p: g for p, g in gains.items() if abs(g) >= max(least, BESIDE * most)}
        plus = [p for p, g in strong.items() if g > 0]
        minus = [p for p, g in strong.items() if g < 0]
        if not strong or len(plus) > 1 or len(minus) > 1 or not np.isfinite(most):
            continue
        inputs = (plus[0] if plus else GROUND, minus[0] if minus else GROUND)
        if not _has_feedback(elements, pins, list(strong), output):
            held = [p for p in pins if p == output or p not in loose]
            element = gain_element(elements, held, inputs, output)
            others = other_pins(elements, held, list(strong), output)
            balance = min(abs(g) for g in strong.values()) / most if len(strong) > 1 else 0.0
            found.append(SignalPins(*inputs, output, most, element, *others, balance))
    return found


def _driven_pins(elements: Sequence[Element], pins: Sequence[str]) -> list[str]:
    """Pins that a controlled source drives, by itself or through passives."""
    driven = {n for e in elements if isinstance(e, Controlled) and e.terms for n in e.nodes} - {GROUND}
    near = driven | reach(driven, influence([e for e in elements if not isinstance(e, Controlled)], []))
    return [p for p in pins if p in near]


def _has_feedback(elements: Sequence[Element], pins: Sequence[str], inputs: Sequence[str], output: str) -> bool:
    """Whether the elements close a loop around the sources that sense the inputs, or tie output and input.

    Transistors have loops around them everywhere, down to 1 pS; there only what the author wrote as passives, from
    the output to an input, is feedback."""
    held = [p for p in pins if p != output]
    passives = [e for e in elements if isinstance(e, Passive) and not e.origin.device]
    if any(e.origin.device for e in elements):
        others = [p for p in held if p not in inputs]
        return bool(reach([output], influence(passives, others, _counts)) & set(inputs))
    edges = influence(elements, held, _counts)
    zone = {*inputs, *reach(inputs, influence(passives, held, _counts))}
    for source in elements:
        if isinstance(source, Controlled) and zone & set(source.sensing):
            own = set(source.nodes) - {GROUND, *held}
            if (own | reach(own, edges)) & (set(source.sensing) - set(held)):
                return True
    others = [p for p in held if p not in inputs]
    return bool(reach([output], influence(passives, others, _counts)) & set(inputs))


def _counts(element: Passive) -> bool:
    return element.kind != "c" or abs(element.value) > STRAY_FARAD


def other_pins(
    elements: Sequence[Element], pins: Sequence[str], inputs: Sequence[str], output: str
) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """The pins beside inputs and output that conduct to an input, and those that move the output."""
    passives = [e for e in elements if isinstance(e, Passive)]
    held = [p for p in pins if p != output]
    by_passives, edges = influence(passives, held), influence(elements, held)
    tied, moving = [], []
    for pin in pins:
        if pin in (output, *inputs, GROUND):
            continue
        zone = {pin} | reach([pin], by_passives)
        if any(zone & set(e.nodes) and set(inputs) & set(e.nodes) for e in passives):
            tied.append(pin)
        if output in reach([pin], edges):
            moving.append(pin)
    return tuple(tied), tuple(moving)


def gain_element(elements: Sequence[Element], pins: Sequence[str], inputs: tuple[str, str], output: str) -> str:
    """The first controlled source, counted from the inputs, whose death takes the gain away; where the gain is
    split among several, the first one at the inputs."""
    pin = inputs[1] if inputs[1] != GROUND else inputs[0]
    alive = abs(gains_to(elements, pins, output).get(pin, 0.0))
    sources = [e for e in elements if isinstance(e, Controlled)]
    nearest = sorted(sources, key=lambda e: not set(inputs) & set(e.sensing))
    for source in nearest[:MOST_TRIED]:
        dead = [replace(e, terms=()) if e is source else e for e in elements]
        try:
            gain = gains_to(dead, pins, output).get(pin, 0.0)
        except np.linalg.LinAlgError:
            continue
        if abs(gain) < 1e-3 * alive:
            return source.name
    return nearest[0].name
