"""What the elements of an instance do at its pins: at the operating point, or in principle where that says nothing."""

from collections.abc import Mapping
from functools import cached_property

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Device, Instance
from xcheck.linearisation import nominal
from xcheck.stages.macromodel import SignalPins, signal_pins
from xcheck.stages.pins import POWER, SIGNAL, Role

SUPPLY_VOLT: Mapping[Role, float] = {"v+": 5.0, "v-": -5.0}
"""What supply pins are taken to be at where a model is looked at in principle."""
FEWEST_WITH_OTHERS = 6
"""Pins of an op-amp model that may have more than signals and supplies: offset, compensation, not connected."""


class Structure:
    """Judges instances, those with the same elements and the same open pins once."""

    def __init__(self, circuit: Circuit, written: Circuit) -> None:
        """written: the circuit before it was linearised."""
        self.circuit = circuit
        self.written = {i.name: i for i in written.instances}
        self.found: dict[tuple[object, ...], list[SignalPins]] = {}

    def at_the_point(self, instance: Instance, named: Mapping[Role, str], least: float) -> list[SignalPins]:
        """The op-amps that the linear elements are, the others left out."""
        loose = self.loose(instance, named)
        key = (id(instance.local), least, loose)
        if key not in self.found:
            linear = [e for e in instance.local if not isinstance(e, Device)]
            self.found[key] = signal_pins(linear, [pin for pin, _ in instance.pins], least, loose)
        return self.found[key]

    def in_principle(self, instance: Instance, named: Mapping[Role, str], least: float) -> list[SignalPins]:
        """The op-amps that the elements are with nominal values in place of each device."""
        written = self.written.get(instance.name, instance)
        loose = self.loose(instance, named)
        supplies = {named[role]: volt for role, volt in SUPPLY_VOLT.items() if role in named}
        key = (id(written.local), least, loose, tuple(supplies.items()), "in principle")
        if key not in self.found:
            linear = [e for e in nominal(written.local, supplies) if not isinstance(e, Device)]
            self.found[key] = signal_pins(linear, [pin for pin, _ in instance.pins], least, loose)
        return self.found[key]

    def nonlinear(self, instance: Instance) -> bool:
        """Whether an instance holds devices, be they linear ones by now."""
        return any(isinstance(e, Device) for e in self.written.get(instance.name, instance).local)

    def loose(self, instance: Instance, named: Mapping[Role, str]) -> tuple[str, ...]:
        """Pins on nodes that nothing else touches, other than signals and supplies: they are not held by anything."""
        if len(instance.pins) < FEWEST_WITH_OTHERS:
            return ()
        told = {named[role] for role in (*SIGNAL, *POWER) if role in named}
        return tuple(pin for pin, node in instance.pins if pin not in told and self._alone(instance.name, node))

    def _alone(self, name: str, node: str) -> bool:
        return node != GROUND and all(name in path for path in self._paths.get(node, ()))

    @cached_property
    def _paths(self) -> dict[str, list[tuple[str, ...]]]:
        """The instances around each element that touches or senses a node."""
        found: dict[str, list[tuple[str, ...]]] = {node: [()] for node in self.circuit.boundary}
        for element in self.circuit.elements:
            sensing = element.sensing if isinstance(element, (Controlled, Device)) else ()
            for node in dict.fromkeys((*element.nodes, *sensing)):
                found.setdefault(node, []).append(element.origin.path)
        return found
