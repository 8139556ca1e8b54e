"""How stages hang together outside themselves: nets between them, and which of a stage's ports a net ties to another.

A closed form takes what its stage's ports look out into as independent of each other. That is exact where the stages
and the nets between them form a tree. A port whose connection lies on a ring (one stage feeding two inputs of another,
one of them through a third) is coupled to another port of its stage from outside.
"""

from collections.abc import Iterable, Mapping

from xcheck.circuit.elements import Controlled, Coupling, Device, Element
from xcheck.stages.types import Partition, Port, Stage

CROWD = 200
"""Ports on one net from which on they are no longer told apart one by one, which would take time squared."""


class Couplings:
    """nets: the net of each node outside the stages, named after one of its nodes; ports: ports by net; on_ring:
    subjects of ports whose connection with their net lies on a ring."""

    def __init__(self, partition: Partition, outer: Mapping[str, Iterable[Port]]) -> None:
        """outer: by stage name, the ports at which it meets the rest."""
        self.partition = partition
        self.parent: dict[str, str] = {}
        owned = {n for s in partition.stages for n in s.elements}
        owned.update(n for a in partition.amplifiers for n in a.elements)
        for element in partition.circuit.elements:
            if element.name not in owned and not isinstance(element, Coupling):
                self._tie(self._moving(element))
        self.ports: dict[str, list[Port]] = {}
        self.edges: dict[str, list[tuple[str, Port]]] = {}
        for stage in partition.stages:
            for port in outer[stage.name]:
                if port.node not in partition.ac_ground:
                    net = self.net(port.node)
                    self.ports.setdefault(net, []).append(port)
                    self.edges.setdefault(stage.name, []).append((net, port))
        self.on_ring = self._ring(partition.stages)

    def net(self, node: str) -> str:
        """The net of a node outside the stages."""
        root = node
        while self.parent.get(root, root) != root:
            root = self.parent[root]
        while self.parent.get(node, node) != root:
            self.parent[node], node = root, self.parent[node]
        return root

    def crowded(self, node: str) -> bool:
        """Whether too many ports hang on a node's net to tell them apart."""
        return len(self.ports.get(self.net(node), ())) > CROWD

    def _moving(self, element: Element) -> list[str]:
        sensed = element.sensing if isinstance(element, (Controlled, Device)) else ()
        return [n for n in (*element.nodes, *sensed) if n not in self.partition.ac_ground]

    def _tie(self, nodes: list[str]) -> None:
        for node in nodes[1:]:
            one, other = self.net(nodes[0]), self.net(node)
            if one != other:
                self.parent[other] = one

    def _ring(self, stages: Iterable[Stage]) -> set[str]:
        """Ports that are no bridges of the graph of stages and nets (Tarjan, A note on finding the bridges of a graph,
        Inf. Proc. Lett. 2, 1974), by depth-first search without recursion."""
        order: dict[tuple[str, str], int] = {}
        low: dict[tuple[str, str], int] = {}
        bridges: set[str] = set()
        for stage in stages:
            start = ("stage", stage.name)
            if start in order:
                continue
            order[start] = low[start] = len(order)
            path = [(start, "", iter(self._around(start)))]
            while path:
                here, came_by, rest = path[-1]
                step = next(rest, None)
                if step is None:
                    path.pop()
                    if path:
                        before = path[-1][0]
                        low[before] = min(low[before], low[here])
                        if low[here] > order[before]:
                            bridges.add(came_by)
                    continue
                there, port = step
                if port.subject == came_by:
                    continue
                if there in order:
                    low[here] = min(low[here], order[there])
                else:
                    order[there] = low[there] = len(order)
                    path.append((there, port.subject, iter(self._around(there))))
        return {p.subject for ports in self.ports.values() for p in ports} - bridges

    def _around(self, place: tuple[str, str]) -> list[tuple[tuple[str, str], Port]]:
        kind, name = place
        if kind == "stage":
            return [(("net", net), port) for net, port in self.edges.get(name, ())]
        return [(("stage", port.stage), port) for port in self.ports.get(name, ())]
