"""Which stages the linear equations cannot speak for, because a part that they leave out has a say there."""

from collections.abc import Iterable

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Device, Element
from xcheck.stages.types import Partition, Stage


def obstacles(partition: Partition) -> dict[str, str]:
    """Stage name to the reason why its impedances cannot be had from the linear equations.

    A device, or an amplifier without a linear model, speaks for a stage when it hangs on one of the stage's
    networks: what hangs together through elements and their sensing, not across a stiff node, with what hangs
    on the stage's own outputs. So a device behind another amplifier is none of the stage's.
    """
    networks = _Networks(partition)
    reasons: dict[str, str] = {}
    for stage in partition.stages:
        reason = _own_obstacle(partition, stage) or networks.obstacle(stage)
        if reason:
            reasons[stage.name] = reason
    return reasons


def _own_obstacle(partition: Partition, stage: Stage) -> str:
    if not stage.amplifiers:
        return f"{stage.name} has no amplifier"
    for amplifier in stage.amplifiers:
        if amplifier.open_loop.model is None:
            return _no_model(amplifier.name, amplifier.open_loop.reason)
        gain = partition.circuit.by_name.get(amplifier.gain_element)
        if not isinstance(gain, Controlled) or not gain.terms:
            return f"{amplifier.name} has no linear controlled source that stands for its gain"
    return ""


def _no_model(name: str, why: str) -> str:
    return f"{name} has no linear model" + (f": {why}" if why else "")


class _Networks:
    """What hangs together once the stiff nodes are removed, and the obstacles in each network."""

    def __init__(self, partition: Partition) -> None:
        self.circuit: Circuit = partition.circuit
        outputs = {amplifier.output for amplifier in partition.amplifiers}
        self.still = {GROUND, *partition.ac_ground}
        self.stiff = {*self.still, *partition.stiff, *outputs}
        self.soft = self.stiff - self.still - outputs  # rails and references: a device there moves them
        self.parent: dict[str, str] = {}
        for element in self.circuit.elements:
            moving = self._moving(element)
            for node in moving[1:]:
                self.parent[self._root(node)] = self._root(moving[0])
        self.found = self._found(partition)
        self.behind: dict[str, set[str]] = {}  # an output to the networks that hang on it
        for element in self.circuit.elements:
            places = {self._root(node) for node in self._moving(element)[:1]}
            for node in element.nodes:
                if node in outputs:
                    self.behind.setdefault(node, set()).update(places)

    def _found(self, partition: Partition) -> dict[str, str]:
        """The first obstacle in each network, and on each stiff node that moves."""
        at: list[tuple[str, str]] = []
        for element in self.circuit.elements:
            if isinstance(element, Device):
                reason = f"{element.name} is not linear ({element.reason})"
                at += [(node, reason) for node in (*element.nodes, *element.sensing)]
        for amplifier in partition.amplifiers:
            if amplifier.open_loop.model is None:
                reason = _no_model(amplifier.name, amplifier.open_loop.reason)
                at += [(amplifier.non_inverting, reason), (amplifier.inverting, reason)]
        found: dict[str, str] = {}
        for node, reason in at:
            if node not in self.still:
                found.setdefault(self._place(node), reason)
        return found

    def obstacle(self, stage: Stage) -> str:
        """The first obstacle that a stage meets, '' for none."""
        by_name = self.circuit.by_name
        names = [*stage.elements, *(name for a in stage.amplifiers for name in a.elements)]
        nodes = [node for name in names if name in by_name for node in self._moving(by_name[name])]
        nodes += [port.node for port in stage.ports]
        held = {node for a in stage.amplifiers for node in (a.non_inverting, a.inverting)}
        held |= {n for name in stage.elements if name in by_name for n in by_name[name].nodes}
        places = {self._root(node) for node in nodes if node not in self.stiff}
        places |= held & self.soft
        for amplifier in stage.amplifiers:
            places |= {self._place(amplifier.output), *self.behind.get(amplifier.output, ())}
        return next((self.found[place] for place in sorted(places) if place in self.found), "")

    def _moving(self, element: Element) -> list[str]:
        sensing: Iterable[str] = getattr(element, "sensing", ())
        return [node for node in (*element.nodes, *sensing) if node not in self.stiff]

    def _place(self, node: str) -> str:
        return node if node in self.stiff else self._root(node)

    def _root(self, node: str) -> str:
        while (above := self.parent.setdefault(node, node)) != node:
            self.parent[node] = self.parent[above]
            node = self.parent[node]
        return node
