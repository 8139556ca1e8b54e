"""What a stage's ports look out into: loads and source impedances, by closed form along the chain.

The outside of a port is followed through passive branches up to nodes that do not move (ground), to other stages'
outputs (their closed-form output impedance) and to other stages' inputs (their closed-form input impedance).
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import GROUND, Controlled, Coupling, Element, Passive, Source
from xcheck.stages.types import Partition, Port
from xcheck.topologies.branches import Part
from xcheck.topologies.network import Network, mesh

PortImpedance = Callable[[Port], "Complex | None"]
"""Another port's closed-form impedance, None where it has none."""


@dataclass(frozen=True)
class Outside:
    """admittance: of all that is outside a port's stage at its node (siemens, shape (F,)); numpy inf where a source
    holds the node; dropped: what could not be counted, in words, '' where all was."""

    admittance: Complex
    dropped: str = ""


class Surroundings:
    """Looks out of ports."""

    def __init__(self, partition: Partition, frequency: Real) -> None:
        self.partition = partition
        self.frequency = frequency
        self.at: dict[str, list[tuple[Element, int]]] = {}
        for element in partition.circuit.elements:
            for index, node in enumerate(element.nodes):
                self.at.setdefault(node, []).append((element, index))
        self.owner: dict[str, str] = {}
        for stage in partition.stages:
            for amplifier in stage.amplifiers:
                self.owner.update(dict.fromkeys(amplifier.elements, stage.name))
        self.ports: dict[str, list[Port]] = {}
        for stage in partition.stages:
            for port in stage.ports:
                self.ports.setdefault(port.node, []).append(port)
        self.coupled = {n for e in partition.circuit.elements if isinstance(e, Coupling) for n in e.inductors}

    def outside(self, port: Port, impedance_of: PortImpedance) -> Outside:
        """What is outside a port, with other ports' impedances by `impedance_of`."""
        held = np.full(self.frequency.shape, np.inf, dtype=np.complex128)
        if port.node in self.partition.ac_ground:
            return Outside(held)
        mine = {t.element for t in port.inside}
        network = Network()
        shunts: dict[str, Complex] = {}
        dropped: list[str] = []
        reached = {port.node}
        waiting = [port.node]
        while waiting:
            node = waiting.pop()
            inner = self._other_ports(node, port)
            skipped = {t.element for p in inner for t in p.inside} | (mine if node == port.node else set())
            for other in inner:
                seen = impedance_of(other)
                if seen is None:
                    dropped.append(f"the impedance of {other.subject}")
                else:
                    shunts[node] = shunts.get(node, np.zeros(self.frequency.shape, complex)) + _inverse(seen)
            for element, index in self.at.get(node, ()):
                if element.name in skipped or element.name in self.owner:
                    continue
                if isinstance(element, Passive) and element.name not in self.coupled:
                    far = element.nodes[1 - index]
                    end = GROUND if far in self.partition.ac_ground else far
                    if end != GROUND and far not in reached:
                        reached.add(far)
                        waiting.append(far)
                    if end == GROUND or node < far or far not in reached or index == 0:
                        self._add(network, element, node, end)
                elif not _draws_nothing(element):
                    dropped.append(f"`{element.name}`")
        branches = network.reduced([port.node, GROUND])
        links = mesh(branches, [port.node, GROUND], self.frequency, shunts)
        found = links.get(frozenset((port.node, GROUND)))
        zero = np.zeros(self.frequency.shape, dtype=np.complex128)
        return Outside(zero if found is None else found.admittance, ", ".join(dict.fromkeys(dropped)))

    def _add(self, network: Network, element: Passive, node: str, end: str) -> None:
        pair = frozenset((node, end))
        known = network.branches.get(pair)
        if known is None or element.name not in {p.name for p in known.parts}:
            network.add(Part(element.name, element.kind, element.value), node, end)

    def _other_ports(self, node: str, port: Port) -> list[Port]:
        return [p for p in self.ports.get(node, ()) if p.stage != port.stage]


def _inverse(impedance: Complex) -> Complex:
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(np.isinf(impedance), 0.0, 1.0 / impedance).astype(np.complex128)


def _draws_nothing(element: Element) -> bool:
    """Whether an element is open at AC with its own signal dead: current sources, and what only senses."""
    if isinstance(element, Source):
        return element.kind == "i"
    return isinstance(element, Controlled) and element.kind in "g" and not element.terms


def neighbours(partition: Partition, found: Mapping[str, Outside]) -> dict[str, Complex]:
    """Impedance (ohm, shape (F,)) of what each port looks out into; inf for nothing, 0 for a source."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return {subject: np.where(np.isinf(o.admittance), 0.0, 1.0 / o.admittance) for subject, o in found.items()}
