"""Switches at an operating point: a resistor.

ngspice 39 takes every switch for open in a small-signal analysis, whatever its state at the operating point (seen in
`ac` after `op`, for switches with and without hysteresis), so a closed one has no equivalent that it would agree with.
"""

from collections.abc import Iterator
from dataclasses import replace

from xcheck.circuit.elements import Device, Element, Passive
from xcheck.linearisation.semiconductors import NoEquivalent


def switch(device: Device, control: float) -> Iterator[Element]:
    """The resistor that a switch is. control: V between its controlling nodes, or A through its controlling source.

    Raises NoEquivalent where it is closed, and within the hysteresis, where its state depends on what was before."""
    model = device.definition
    if model is None:
        raise NoEquivalent("its model is not known")
    threshold = model.get("vt" if device.kind == "s" else "it")
    width = abs(model.get("vh" if device.kind == "s" else "ih"))
    if abs(control - threshold) <= width:
        raise NoEquivalent("its control lies within its hysteresis")
    if control > threshold:
        raise NoEquivalent("it is closed, and ngspice 39 takes it for open at AC")
    origin = replace(device.origin, device=device.name)
    a, b = device.nodes[:2]
    yield Passive(f"{device.name}:r", "r", (a, b), model.get("roff", 1e12), origin)
