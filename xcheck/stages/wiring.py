"""What touches each node, as seen by ports: terminals, sources, and the stages' inputs."""

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Device, Element, Instance, Source
from xcheck.stages.nodes import Held, is_signal
from xcheck.stages.types import Amplifier, Terminal


def terminals_of(element: Element) -> list[tuple[str, Terminal]]:
    """The ends of an element with their nodes, and one terminal (-1) for each node that it senses."""
    found = [(node, Terminal(element.name, k)) for k, node in enumerate(element.nodes)]
    if isinstance(element, (Controlled, Device)):
        found += [(node, Terminal(element.name, -1)) for node in element.sensing]
    return found


def conducts(element: Element, index: int) -> bool:
    """Whether current can flow at a terminal, with the element's own signal dead."""
    return index >= 0 and not (isinstance(element, (Source, Controlled)) and element.kind in "ifg")


@dataclass(frozen=True)
class Wiring:
    """at: the terminals on each node but ground, of amplifiers only those at their pins; of_amplifier: an amplifier's
    terminals at its signal pins by node; owner: the amplifier of an element; conducting: how many terminals on a node
    let current through; inputs: the indices of the amplifiers that have an input on a node; signals: whether the deck
    drives a signal anywhere; order: of the elements; instances: of the amplifiers."""

    circuit: Circuit
    amplifiers: Sequence[Amplifier]
    held: Held
    virtual: Mapping[str, int]
    at: dict[str, list[tuple[Element, int]]]
    of_amplifier: Mapping[str, dict[str, list[Terminal]]]
    owner: Mapping[str, str]
    conducting: Counter[str]
    inputs: Mapping[str, list[int]]
    signals: bool
    order: Mapping[str, int]
    instances: Mapping[str, Instance]

    @classmethod
    def of(cls, circuit: Circuit, amplifiers: Sequence[Amplifier], held: Held, virtual: Mapping[str, int]) -> "Wiring":
        """The wiring of a circuit whose stiff nodes are known."""
        names = {a.name for a in amplifiers}
        inputs: dict[str, list[int]] = {}
        for k, amplifier in enumerate(amplifiers):
            for node in dict.fromkeys((amplifier.non_inverting, amplifier.inverting)):
                inputs.setdefault(node, []).append(k)
        wiring = cls(
            circuit, amplifiers, held, virtual, {}, {name: {} for name in names},
            {name: a.name for a in amplifiers for name in a.elements}, Counter(), inputs,
            any(isinstance(e, Source) and is_signal(e) for e in circuit.elements),
            {e.name: k for k, e in enumerate(circuit.elements)},
            {i.name: i for i in circuit.instances if i.name in names},
        )  # fmt: skip
        wiring._connect()
        return wiring

    @cached_property
    def supplies(self) -> frozenset[str]:
        """The nodes on the amplifiers' supply pins."""
        rails = (n for a in self.amplifiers for n in (a.positive_supply, a.negative_supply))
        return frozenset(n for n in rails if n is not None)

    def on(self, node: str) -> Sequence[tuple[Element, int]]:
        """The terminals on a node, -1 for sensing."""
        return self.at.get(node, ())

    def _connect(self) -> None:
        signal: dict[str, set[str]] = {}
        pins: dict[str, set[str]] = {}
        for a in self.amplifiers:  # two instances may have one name by mistake
            signal.setdefault(a.name, set()).update({a.non_inverting, a.inverting, a.output} - {GROUND})
            rails = (n for n in (a.positive_supply, a.negative_supply) if n is not None)
            pins.setdefault(a.name, set()).update({*signal[a.name], *rails} - {GROUND})
        for element in self.circuit.elements:
            owner = self.owner.get(element.name)
            if owner is not None and pins[owner].isdisjoint(nodes_of(element)):
                continue
            for node, terminal in terminals_of(element):
                if node == GROUND or (owner is not None and node not in pins[owner]):
                    continue
                self.at.setdefault(node, []).append((element, terminal.index))
                self.conducting[node] += conducts(element, terminal.index)
                if owner is not None and node in signal[owner]:
                    self.of_amplifier[owner].setdefault(node, []).append(terminal)


def nodes_of(element: Element) -> tuple[str, ...]:
    """The nodes that an element touches or senses."""
    return (*element.nodes, *element.sensing) if isinstance(element, (Controlled, Device)) else element.nodes
