"""Several op-amps written into one subcircuit, sharing nothing but their supplies."""

from collections.abc import Sequence

from xcheck.circuit.elements import GROUND, Controlled, Device, Element
from xcheck.stages.influence import influence, reach, reversed_edges
from xcheck.stages.macromodel import SignalPins


def sections(judged: Sequence[SignalPins]) -> list[SignalPins]:
    """The op-amps of a package, in the order of the pins of their outputs; [] where there are not several, or where two
    of them share a signal pin."""
    if len(judged) < 2:
        return []
    signal = [pin for s in judged for pin in (s.plus, s.minus, s.output) if pin != GROUND]
    return list(judged) if len(set(signal)) == len(signal) else []


def members_of(elements: Sequence[Element], pins: Sequence[str], all_of: Sequence[SignalPins]) -> list[set[str]]:
    """The names of each section's own elements: those on a way from its inputs to its output. What is on none belongs
    to the first one."""
    found: list[set[str]] = []
    for seen in all_of:
        own = {seen.plus, seen.minus, seen.output} - {GROUND}
        held = [p for p in pins if p not in own]
        edges = influence(elements, held)
        ahead = reach([p for p in (seen.plus, seen.minus) if p != GROUND], edges)
        alive = own | (ahead & reach([seen.output], reversed_edges(edges)))
        found.append({e.name for e in elements if alive & {*e.nodes, *_sensed(e)}})
    taken = set().union(*found)
    found[0] |= {e.name for e in elements} - taken
    return found


def _sensed(element: Element) -> tuple[str, ...]:
    return element.sensing if isinstance(element, (Controlled, Device)) else ()
