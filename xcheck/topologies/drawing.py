"""A one-amplifier stage as a drawing: its passive network, the amplifier's three nodes, its inputs."""

from collections.abc import Collection
from dataclasses import dataclass

from xcheck.circuit.arrays import Real
from xcheck.circuit.elements import Device, Element, Passive, Source
from xcheck.stages.types import Amplifier, Partition, Port, Stage
from xcheck.topologies.branches import from_dc, part
from xcheck.topologies.network import GROUND, Network


@dataclass(frozen=True)
class Drawing:
    """Nodes that do not move are ground, except those of inputs; nodes that a dead voltage source ties together are
    one. inverting, non_inverting, output: the amplifier's nodes; inputs: ports by node, those left out that lie
    behind a source's series element; tied: whether sources tie nodes of the stage; soft: rails and references taken
    for ground although they move a little."""

    network: Network
    inverting: str
    non_inverting: str
    output: str
    inputs: dict[str, Port]
    tied: bool
    soft: tuple[str, ...]


class Draughtsman:
    """Draws the stages of one partition."""

    def __init__(self, partition: Partition) -> None:
        self.partition = partition
        self.by_name = partition.circuit.by_name
        self.soft = frozenset(node for node in partition.references if node not in partition.ac_ground)

    def devices(self, stage: Stage) -> list[str]:
        """The elements of a stage that cannot be drawn because they are not linear."""
        return [name for name in stage.elements if isinstance(self.by_name[name], Device)]

    def draw(self, stage: Stage, frequency: Real, left_out: Collection[str] = ()) -> Drawing | str:
        """The drawing of a stage with one amplifier over frequency (Hz, shape (F,)), or why there is none.
        left_out: elements not to be drawn."""
        if len(stage.amplifiers) != 1:
            return f"{len(stage.amplifiers)} amplifiers in common loops"
        amplifier = stage.amplifiers[0]
        drawn = [self.by_name[name] for name in stage.elements if name not in left_out]
        inputs = self.outer_inputs(stage)
        ties = _ties(drawn)
        own = {p.node for p in stage.ports if p.side == "input"}

        def place(node: str) -> str:
            if self.partition.driver.get(node) == amplifier.name:
                return amplifier.output
            node = ties.get(node, node)
            still = node in self.partition.ac_ground or node in self.soft
            return GROUND if still and node not in own else node

        network = Network(from_dc(frequency))
        for element in drawn:
            refused = self._refusal(element)
            if refused:
                return refused
            if isinstance(element, Passive):
                branch = part(element.name, element.kind, element.value, network.frequency)
                network.add(branch, *(place(n) for n in element.nodes))
        n, p, o = (place(x) for x in (amplifier.inverting, amplifier.non_inverting, amplifier.output))
        pins = {amplifier.inverting, amplifier.non_inverting}
        tied = bool(ties) or any(place(x) == o != x for x in pins.union(*(e.nodes for e in drawn)))
        return Drawing(network, n, p, o, inputs, tied, self._soft(amplifier, drawn, own))

    def _refusal(self, element: Element) -> str:
        if isinstance(element, Device):
            return f"`{element.name}` is a {element.reason}"
        if element.name in self.partition.circuit.coupled:
            return f"`{element.name}` is magnetically coupled"
        if isinstance(element, Passive) and element.value == 0 and element.kind in "rl":
            return f"`{element.name}` is zero"
        return ""

    def outer_inputs(self, stage: Stage) -> dict[str, Port]:
        """Input ports by node, without those behind a source's series element: an element of the stage that the port
        itself counts as outside."""
        return {p.node: p for p in stage.ports if p.side == "input" and not self.outside_at(stage, p)}

    def outside_at(self, stage: Stage, port: Port) -> frozenset[str]:
        """Elements of the stage that are outside at one of its ports."""
        inside = {t.element for t in port.inside}
        return frozenset(
            name for name in stage.elements if name not in inside and port.node in self.by_name[name].nodes
        )

    def _soft(self, amplifier: Amplifier, drawn: list[Element], own: set[str]) -> tuple[str, ...]:
        """Rails and references that the drawing takes as ground although they move a little."""
        soft = self.soft - own
        if not soft:
            return ()
        still = soft | set(self.partition.ac_ground)
        core = [self.by_name[name] for name in amplifier.elements]
        used = {n for e in core if not set(e.nodes) <= still for n in e.nodes if n in soft}
        used |= {n for e in drawn for n in e.nodes if n in soft}
        used |= {amplifier.inverting, amplifier.non_inverting} & soft
        return tuple(sorted(used))


def _ties(elements: list[Element]) -> dict[str, str]:
    """For nodes that voltage sources tie together, the first of them."""
    tied: dict[str, str] = {}
    for element in elements:
        if isinstance(element, Source) and element.kind == "v":
            one, other = (tied.get(n, n) for n in element.nodes)
            for node, first in list(tied.items()):
                if first == other:
                    tied[node] = one
            tied[other] = one
    return tied
