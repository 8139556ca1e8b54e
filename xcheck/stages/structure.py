"""What the elements of an instance do at its pins: at the operating point, or in principle where that says nothing."""

from collections.abc import Collection, Mapping
from functools import cached_property

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Device, Element, Instance
from xcheck.linearisation import nominal
from xcheck.stages.macromodel import SignalPins, signal_pins
from xcheck.stages.pins import POWER, SIGNAL, Role

SUPPLY_VOLT: Mapping[Role, float] = {"v+": 5.0, "v-": -5.0}
"""What supply pins are taken to be at where a model is looked at in principle."""
FEWEST_WITH_OTHERS = 6
"""Pins of an op-amp model that may have more than signals and supplies: offset, compensation, not connected."""


class Structure:
    """Judges instances, those with the same elements and the same open pins once."""

    def __init__(self, circuit: Circuit, written: Circuit, still: Collection[str]) -> None:
        """written: the circuit before it was linearised; still: nodes that do not move at AC."""
        self.still = still
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

    def nominal_elements(self, instance: Instance) -> list[Element]:
        """An instance's elements with nominal values in place of devices, what has none left out."""
        written = self.written.get(instance.name, instance)
        return [e for e in nominal(written.local, {}) if not isinstance(e, Device)]

    def nonlinear(self, instance: Instance) -> bool:
        """Whether an instance holds devices, be they linear ones by now."""
        return any(isinstance(e, Device) for e in self.written.get(instance.name, instance).local)

    def loose(self, instance: Instance, named: Mapping[Role, str]) -> tuple[str, ...]:
        """Pins other than signals and supplies that nothing holds: those on nodes that nothing else touches, and, where
        all signals and supplies are told, those on any node that moves (offset, compensation)."""
        if len(instance.pins) < FEWEST_WITH_OTHERS:
            return ()
        told = {named[role] for role in (*SIGNAL, *POWER) if role in named}
        all_told = len(told) == len((*SIGNAL, *POWER))
        return tuple(
            pin for pin, node in instance.pins
            if pin not in told and (self.alone(instance.name, node) or (all_told and node not in self.still))
        )  # fmt: skip

    def alone(self, name: str, node: str) -> bool:
        """Whether nothing outside an instance touches a node."""
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
