"""A circuit at its operating point: each nonlinear element replaced by linear ones, what has no equivalent kept."""

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Device, Element, Instance, Passive, Term
from xcheck.circuit.point import OperatingPoint
from xcheck.circuit.trees import Binary, Call
from xcheck.linearisation.code_models import code_model
from xcheck.linearisation.gradient import NoSlope, Probe, slope_of
from xcheck.linearisation.semiconductors import NoEquivalent, equivalent
from xcheck.linearisation.switches import switch

LEAST_VOLT = 1e-9
"""Across a behavioural resistor; with less its current says nothing, and its value alone counts."""


Known = dict[tuple[object, ...], tuple[Element, ...]]
"""Elements made before, by the identity of the nonlinear ones and the values."""


@dataclass(frozen=True)
class Linearised:
    """circuit: with linear elements in place of devices; kept: why a device of that flat name has no equivalent;
    replaced: the flat names of those that have one."""

    circuit: Circuit
    kept: Mapping[str, str] = field(default_factory=dict)
    replaced: frozenset[str] = frozenset()


def linearise(circuit: Circuit, point: OperatingPoint) -> Linearised:
    """The circuit with every device that has an equivalent at the operating point replaced by it.

    The instances' own elements are replaced too, one object serving all instances with equal elements and values.
    """
    frame = _Frame(point)
    elements: list[Element] = []
    kept: dict[str, str] = {}
    replaced: set[str] = set()
    for element in circuit.elements:
        if not isinstance(element, Device):
            elements.append(element)
            continue
        try:
            elements += frame.linear(element)
            replaced.add(element.name)
        except (NoEquivalent, NoSlope) as why:
            kept[element.name] = str(why)
            elements.append(element)
    known: Known = {}
    everywhere = {f.key for card in circuit.deck.cards if card.kind == ".global" for f in card.fields[1:]}
    instances = tuple(_seen_inside(i, point, everywhere, known) for i in circuit.instances)
    return Linearised(replace(circuit, elements=tuple(elements), instances=instances), kept, frozenset(replaced))


def _seen_inside(
    instance: Instance,
    point: OperatingPoint,
    everywhere: set[str],
    known: dict[tuple[object, ...], tuple[Element, ...]],
) -> Instance:
    if not any(isinstance(e, Device) for e in instance.local):
        return instance
    frame = _Frame(point, instance.name + ".", dict(instance.pins), everywhere)
    elements: list[Element] = []
    for element in instance.local:
        try:
            elements += frame.linear(element) if isinstance(element, Device) else (element,)
        except (NoEquivalent, NoSlope):
            elements.append(element)
    key = (id(instance.local), *(_value(e) for e in elements))
    return replace(instance, local=known.setdefault(key, tuple(elements)))


def _value(element: Element) -> object:
    match element:
        case Passive():
            return element.value
        case Controlled():
            return element.terms
    return element.name


@dataclass(frozen=True)
class _Frame:
    """Names as some elements have them to names of the flat circuit."""

    point: OperatingPoint
    prefix: str = ""
    pins: Mapping[str, str] = field(default_factory=dict)
    everywhere: frozenset[str] | set[str] = frozenset()

    def node(self, name: str) -> str:
        if not self.prefix or name == GROUND or name in self.everywhere:
            return name
        return self.pins.get(name, self.prefix + name)

    def volt(self, node: str) -> float:
        flat = self.node(node)
        return 0.0 if flat == GROUND else self.point.volts[flat]

    def probed(self, probe: Probe) -> float:
        letter, words = probe
        if letter == "i":
            return self.point.amperes[self.prefix + words[0]]
        return self.volt(words[0]) - (self.volt(words[1]) if len(words) > 1 else 0.0)

    def linear(self, device: Device) -> list[Element]:
        """The linear elements for a device. Raises NoEquivalent, NoSlope."""
        if device.behaviour is not None:
            return [self._behaving(device)]
        if device.kind == "a":
            return list(code_model(device))
        try:
            if device.kind in "sw":
                amperes = self.point.amperes
                control = (
                    self.volt(device.sensing[0]) - self.volt(device.sensing[1])
                    if device.kind == "s"
                    else amperes[self.prefix + device.control if self.prefix else device.control]
                )
                return list(switch(device, control))
        except (KeyError, IndexError):
            raise NoEquivalent("what controls it is not known at the operating point") from None
        return list(equivalent(device, self.point.devices.get(self.prefix + device.name, {})))

    def _behaving(self, device: Device) -> Element:
        behaviour = device.behaviour
        if behaviour is None or len(device.nodes) != 2:
            raise NoEquivalent("its expression is not known")
        a, b = device.nodes
        tree = behaviour.tree
        if behaviour.gives == "r":
            tree = Binary("/", Call("v", (), (a, b), 0, 0), tree)
        found = slope_of(tree, self.probed)
        if behaviour.gives == "c":
            return Passive(device.name, "c", (a, b), found.value, device.origin)
        # slopes of a clipped source may be 1e-30 of what they are elsewhere: no path at all, only rounding
        terms = tuple(term_of(probe, slope) for probe, slope in found.by.items() if slope)
        return Controlled(device.name, "e" if behaviour.gives == "v" else "g", (a, b), terms, 0.0, device.origin)


def term_of(probe: Probe, slope: float) -> Term:
    """A slope as a term of a controlled source."""
    letter, words = probe
    if letter == "i":
        return Term(slope, source=words[0])
    return Term(slope, words[0], words[1] if len(words) > 1 else GROUND)
