"""What a stage's ports look out into: source impedances and loads.

The outside of a port is followed through passives up to what does not move (ground) and to other stages' ports, each of
which stands for its stage with that port's own closed form.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from xcheck.circuit.arrays import Complex, Real
from xcheck.circuit.elements import Controlled, Element, Passive, Source
from xcheck.impedance.couplings import Couplings
from xcheck.stages.types import Partition, Port
from xcheck.topologies.branches import Branch, from_dc, inverse, known, part
from xcheck.topologies.network import GROUND, Network


@dataclass(frozen=True)
class PortImpedance:
    """What another stage's port stands for. impedance: ohm, shape (F,), None where it is not known; exact: no premise
    was dropped on the way."""

    impedance: Complex | None
    exact: bool


@dataclass(frozen=True)
class Outside:
    """branch: all that is outside a port's stage at its node, from there to ground, None for nothing; held: a source
    holds the node; driven: an amplifier's output does; unknown: what could not be counted, in words; doubtful: whose
    own value rests on a premise; coupled: whether other ports of the stage are reached from here."""

    branch: Branch | None = None
    held: bool = False
    driven: bool = False
    unknown: tuple[str, ...] = ()
    doubtful: tuple[str, ...] = ()
    coupled: bool = False

    def impedance(self, shape: tuple[int, ...]) -> Complex:
        """Ohm; inf for nothing, 0 for a source."""
        if self.held:
            return np.zeros(shape, dtype=np.complex128)
        return np.full(shape, np.inf, dtype=np.complex128) if self.branch is None else self.branch.impedance


class Surroundings:
    """Looks out of ports over frequency (Hz, shape (F,))."""

    def __init__(self, partition: Partition, frequency: Real, couplings: Couplings) -> None:
        self.partition = partition
        self.frequency = from_dc(frequency)
        self.couplings = couplings
        self.cores = {n for a in partition.amplifiers for n in a.elements}
        self.owners: dict[str, set[str]] = {}
        for stage in partition.stages:
            for name in stage.elements:
                self.owners.setdefault(name, set()).add(stage.name)
        self.ports: dict[str, list[Port]] = {}
        for ports in couplings.ports.values():
            for port in ports:
                self.ports.setdefault(port.node, []).append(port)
        self.crowds: dict[str, dict[str, Branch | None]] = {}

    def neighbours(self, port: Port) -> list[Port]:
        """Ports of other stages that this one looks out into."""
        if port.node in self.partition.ac_ground or self.couplings.crowded(port.node):
            return []
        return [p for p in self.couplings.ports.get(self.couplings.net(port.node), ()) if p.stage != port.stage]

    def outside(self, port: Port, impedance_of: Callable[[Port], PortImpedance]) -> Outside:
        """What is outside a port."""
        if port.node in self.partition.ac_ground:
            return Outside(held=True)
        return _Walk(self, port, impedance_of).outside()

    def crowd_without(self, port: Port, node: str, impedance_of: Callable[[Port], PortImpedance]) -> Branch | None:
        """The ports on a node of a crowded net, all but one, as a single branch."""
        ports = self.ports[node]
        if node not in self.crowds:
            zero = np.zeros(self.frequency.shape, dtype=np.complex128)
            seen = [impedance_of(p).impedance for p in ports]
            admittances = [zero if z is None else inverse(z) for z in seen]
            before = [zero, *np.cumsum(admittances, axis=0)[:-1]]
            after = [*np.cumsum(admittances[::-1], axis=0)[::-1][1:], zero]
            others = len(ports) - 1
            self.crowds[node] = {
                p.subject: known(f"{others} ports", b + a) for p, b, a in zip(ports, before, after, strict=True)
            }
        return self.crowds[node].get(port.subject)


class _Walk:
    """One look out of one port."""

    def __init__(self, around: Surroundings, port: Port, impedance_of: Callable[[Port], PortImpedance]) -> None:
        self.around = around
        self.partition = around.partition
        self.port = port
        self.impedance_of = impedance_of
        self.reached = {port.node}
        self.branches: list[tuple[Branch, str, str]] = []
        self.alias: dict[str, str] = {}
        self.taken: set[str] = set()
        self.unknown: dict[str, None] = {}
        self.doubtful: dict[str, None] = {}
        self.coupled = False

    def outside(self) -> Outside:
        start = self.port.node
        waiting = [start]
        mine = {t.element for t in self.port.inside}
        while waiting:
            node = waiting.pop()
            fenced = self._ports_at(node) | mine
            for element in self.partition.circuit.at.get(node, ()):
                if element.name not in fenced and element.name not in self.taken and self._is_outside(element, node):
                    self.taken.add(element.name)
                    waiting += self._element(element)
        network = Network(self.around.frequency)
        for branch, a, b in self.branches:
            network.add(branch, self._place(a), self._place(b))
        return Outside(
            branch=network.reduced({self._place(start), GROUND}).between(self._place(start), GROUND),
            driven=self.partition.stiff.get(start, "").startswith("output"),
            unknown=tuple(self.unknown),
            doubtful=tuple(self.doubtful),
            coupled=self.coupled,
        )

    def _place(self, node: str) -> str:
        """The first of the nodes that voltage sources tie to one."""
        while node in self.alias:
            node = self.alias[node]
        return node

    def _is_outside(self, element: Element, node: str) -> bool:
        """Whether an element that no port fences off is to be followed: it is nobody's, or the series element
        between a source and this port."""
        owners = self.around.owners.get(element.name)
        if owners is None:
            return element.name not in self.around.cores
        if self.port.stage in owners:
            return node == self.port.node
        self.unknown[element.name] = None
        return False

    def _ports_at(self, node: str) -> set[str]:
        """Takes in the other ports on a node; returns the elements that lie behind them."""
        fenced: set[str] = set()
        ports = self.around.ports.get(node, ())
        crowded = self.around.couplings.crowded(node) and len(ports) > 1
        if crowded:
            branch = self.around.crowd_without(self.port, node, self.impedance_of)
            if branch is not None:
                self.branches.append((branch, node, GROUND))
            self.doubtful[f"the {len(ports)} ports on {node}"] = None
        for other in ports:
            inside = {t.element for t in other.inside}
            fenced |= inside
            if other.stage == self.port.stage:
                self.coupled |= node != self.port.node and not inside & self.taken
            elif not crowded:
                self._neighbour(other)
        return fenced

    def _neighbour(self, other: Port) -> None:
        seen = self.impedance_of(other)
        if seen.impedance is None:
            self.unknown[other.subject] = None
            return
        self.branches.append((known(other.subject, inverse(seen.impedance)), other.node, GROUND))
        if not seen.exact:
            self.doubtful[other.subject] = None

    def _element(self, element: Element) -> list[str]:
        """Takes in an element outside; returns the nodes behind it that are new."""
        first, second = (GROUND if n in self.partition.ac_ground else n for n in element.nodes[:2])
        if isinstance(element, Passive) and element.value != 0 and element.name not in self.partition.circuit.coupled:
            self.branches.append(
                (part(element.name, element.kind, element.value, self.around.frequency), first, second)
            )
        elif isinstance(element, Source) and element.kind == "v":
            one, other = (self._place(n) for n in (first, second))
            if one != other:
                kept, gone = (one, other) if one in (GROUND, self.port.node) else (other, one)
                self.alias[gone] = kept
        else:
            if not _draws_nothing(element):
                self.unknown[element.name] = None
            return []
        new = [n for n in (first, second) if n != GROUND and n not in self.reached]
        self.reached.update(new)
        return new


def _draws_nothing(element: Element) -> bool:
    """Whether an element is open at AC with its own signal dead."""
    if isinstance(element, Source):
        return element.kind == "i"
    return isinstance(element, Controlled) and element.kind == "g" and not element.terms
