"""What a circuit's sources and resistors say of supply pins that nobody named, and of loops around a part."""

from collections.abc import Mapping, Sequence
from functools import cached_property

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Device, Passive, Source
from xcheck.stages.joined import Joined
from xcheck.stages.nodes import held_still
from xcheck.stages.pins import Role


class SupplyLevels:
    """DC levels of nodes that voltage sources hold, and of rails that a resistor or inductor feeds from one."""

    def __init__(self, circuit: Circuit) -> None:
        self.circuit = circuit

    def by_level(self, pins: Sequence[str], nodes: Mapping[str, str], known: Mapping[Role, str]) -> dict[Role, str]:
        """The supplies among unnamed pins: the highest level is the positive one, the lowest the negative one."""
        levels = {pin: self.level(nodes[pin]) for pin in pins} if pins else {}
        there = {pin: level for pin, level in levels.items() if level is not None}
        if not there:
            return {}
        found: dict[Role, str] = {}
        high, low = max(there, key=lambda p: there[p]), min(there, key=lambda p: there[p])
        if "v+" not in known and there[high] > 0:
            found["v+"] = high
        if "v-" not in known and (there[low] < 0 or there[low] < there[high]):
            found["v-"] = low
        return found

    def level(self, node: str) -> float | None:
        """The DC level of a node in V, None where no source holds or feeds it."""
        if node in self._held:
            return self._held[node]
        fed = [self._held[n] for n in self._feeds.get(node, ()) if n in self._held and n != GROUND]
        return max(fed, key=abs) if fed else None

    def held(self, node: str) -> bool:
        """Whether a voltage source itself holds a node."""
        return node in self._held

    def tied(self, a: str, b: str) -> bool:
        """Whether passives outside the models tie two nodes, not through ground or a voltage source's node."""
        return a == b or self._networks.find(a) == self._networks.find(b)

    @cached_property
    def _held(self) -> dict[str, float]:
        touching: dict[str, list[Source]] = {}
        for element in self.circuit.elements:
            if isinstance(element, Source) and element.kind == "v":
                for node in element.nodes:
                    touching.setdefault(node, []).append(element)
        levels = {GROUND: 0.0}
        waiting = [GROUND]
        while waiting:
            node = waiting.pop()
            for source in touching.get(node, ()):
                positive, negative = source.nodes
                other = negative if node == positive else positive
                if other not in levels:
                    levels[other] = levels[node] + (source.dc if other == positive else -source.dc)
                    waiting.append(other)
        return levels

    @cached_property
    def _feeds(self) -> dict[str, list[str]]:
        feeds: dict[str, list[str]] = {}
        for element in self.circuit.elements:
            if isinstance(element, Passive) and element.kind != "c":
                a, b = element.nodes
                feeds.setdefault(a, []).append(b)
                feeds.setdefault(b, []).append(a)
        return feeds

    @cached_property
    def _networks(self) -> Joined:
        still = held_still(self.circuit, lambda _: False).still
        active = [e for e in self.circuit.elements if isinstance(e, (Controlled, Device))]
        models = {name for e in active for name in e.origin.path[-1:]}
        joined = Joined()
        for element in self.circuit.elements:
            if isinstance(element, Passive) and models.isdisjoint(element.origin.path[-1:]):
                joined.join([n for n in element.nodes if n not in still])
        return joined
