"""What elements do in principle: every transistor active, every diode nearly off, every limit left alone.

The values are no model of anything. They are there so that the signs and the paths of a circuit can be followed where
no operating point is known, or where it lies against a limit.
"""

from collections.abc import Callable, Iterable, Mapping
from dataclasses import replace

from xcheck.circuit.elements import GROUND, Controlled, Device, Element, Passive
from xcheck.linearisation.code_models import code_model
from xcheck.linearisation.gradient import NoSlope, Probe, Slope, slope_of
from xcheck.linearisation.linearise import term_of
from xcheck.linearisation.semiconductors import NoEquivalent, equivalent

TRANSISTOR = {"gm": 1e-3, "vds": 1.0, "vgs": -1.0, "vgd": -1.0, "gds": 1e-8, "go": 1e-8, "gpi": 1e-5}
"""S and V; conductances and capacitances that are not named are too small to count."""
BLOCKED_SIEMENS = 1e-12
DIODE_SIEMENS = 1e-8
"""Between that of a clamp, which is off, and that of a diode that carries a bias."""


class _Small(dict[str, float]):
    """Any value that a device may be asked for."""

    def __contains__(self, name: object) -> bool:
        return True

    def __missing__(self, name: str) -> float:
        return BLOCKED_SIEMENS if name.startswith("g") and name != "gx" else 0.0


def nominal(elements: Iterable[Element], volts: Mapping[str, float]) -> tuple[Element, ...]:
    """The elements with something linear in place of each device that has it; others are kept. volts: what is known of
    nodes, such as supplies; all others are at 0 V."""
    found: list[Element] = []
    for element in elements:
        if isinstance(element, Device):
            try:
                found += _linear(element, volts)
            except (NoEquivalent, NoSlope):
                found.append(element)
        else:
            found.append(element)
    return tuple(found)


def _linear(device: Device, volts: Mapping[str, float]) -> Iterable[Element]:
    if device.behaviour is not None:
        return [_behaving(device, volts)]
    if device.kind == "a":
        return code_model(device)
    if device.kind in "sw":
        a, b = device.nodes[:2]
        return [Passive(device.name, "r", (a, b), 1.0 / DIODE_SIEMENS, replace(device.origin, device=device.name))]
    plain = replace(device, definition=None, parameters=())
    return equivalent(plain, _Small(gd=DIODE_SIEMENS) if device.kind == "d" else _Small(TRANSISTOR))


def _behaving(device: Device, volts: Mapping[str, float]) -> Element:
    behaviour = device.behaviour
    if behaviour is None or len(device.nodes) != 2:
        raise NoEquivalent("its expression is not known")
    a, b = device.nodes
    found = _first(lambda volt: slope_of(behaviour.tree, _probing(volts, volt), all_branches=True))
    if behaviour.gives in "rc":
        return Passive(device.name, "r" if behaviour.gives == "r" else "c", (a, b), found.value or 1.0, device.origin)
    terms = tuple(term_of(probe, slope) for probe, slope in found.by.items() if slope)
    origin = replace(device.origin, device=device.name)
    return Controlled(device.name, "e" if behaviour.gives == "v" else "g", (a, b), terms, 0.0, origin)


def _first(attempt: Callable[[float], Slope]) -> Slope:
    """What comes of an expression with its inputs at zero, or where it has no slope there, a little beside."""
    try:
        return attempt(0.0)
    except NoSlope:
        return attempt(0.1)


def _probing(volts: Mapping[str, float], otherwise: float) -> Callable[[Probe], float]:
    def probed(probe: Probe) -> float:
        letter, words = probe
        if letter == "i":
            return otherwise * 1e-3
        at = [0.0 if node == GROUND else volts.get(node, otherwise) for node in words]
        return at[0] - at[1] if len(at) > 1 else at[0]

    return probed
