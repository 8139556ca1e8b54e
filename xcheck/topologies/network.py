"""A passive network reduced to the branches between its terminals.

Nodes inside are taken away one after the other, those with the fewest branches first: loose ends vanish, two branches
are joined in series, and a star of more (a T-network, a filter with a shunt) becomes a mesh.
"""

import heapq
from collections.abc import Collection, Iterable
from dataclasses import dataclass

from xcheck.circuit.arrays import Real
from xcheck.topologies.branches import Branch, in_parallel, in_series, through_star

GROUND = "0"


@dataclass(frozen=True, slots=True)
class Links:
    """The branches between the terminals of a reduced network."""

    found: dict[str, dict[str, Branch]]

    def between(self, a: str, b: str) -> Branch | None:
        """What lies between two terminals, None for nothing."""
        return self.found.get(a, {}).get(b)


class Network:
    """Branches by their nodes, at frequencies in Hz of shape (F,), all above zero."""

    def __init__(self, frequency: Real) -> None:
        self.frequency = frequency
        self.at: dict[str, dict[str, Branch]] = {}

    def add(self, branch: Branch, a: str, b: str) -> None:
        """A branch between two nodes, beside what is there; one with both ends on a node carries nothing."""
        if a == b:
            return
        beside = self.at.setdefault(a, {}).get(b)
        joined = branch if beside is None else in_parallel(beside, branch)
        self.at[a][b] = joined
        self.at.setdefault(b, {})[a] = joined

    def grounded(self, nodes: Collection[str], without: Collection[str] = ()) -> "Network":
        """A copy with some nodes at ground and others taken out with their branches."""
        copy = Network(self.frequency)
        for a, b, branch in self.branches():
            if a not in without and b not in without:
                copy.add(branch, GROUND if a in nodes else a, GROUND if b in nodes else b)
        return copy

    def branches(self) -> Iterable[tuple[str, str, Branch]]:
        """Each branch once, with its nodes."""
        seen: set[int] = set()
        for a, far in self.at.items():
            for b, branch in far.items():
                if id(branch) not in seen:
                    seen.add(id(branch))
                    yield a, b, branch

    def reduced(self, terminals: Collection[str]) -> Links:
        """The branches between terminals; the network itself is left as it was."""
        work = Network(self.frequency)
        work.at = {node: dict(far) for node, far in self.at.items()}
        waiting = [(len(far), node) for node, far in work.at.items() if node not in terminals]
        heapq.heapify(waiting)
        while waiting:
            degree, node = heapq.heappop(waiting)
            if node not in work.at or degree != len(work.at[node]):
                continue  # an older entry of a node that has changed since
            for end in work.take_away(node):
                if end not in terminals:
                    heapq.heappush(waiting, (len(work.at[end]), end))
        return Links(work.at)

    def take_away(self, node: str) -> list[str]:
        """Eliminates a node; returns the nodes at the far ends of its branches."""
        far = self.at.pop(node)
        ends = sorted(far)
        arms = [far[end] for end in ends]
        for end in ends:
            del self.at[end][node]
        if len(ends) == 2:
            first, second = sorted(arms, key=lambda arm: arm.names)
            self.add(in_series(first, second), *ends)
        elif len(ends) > 2:
            for i, one in enumerate(ends):
                for k in range(i + 1, len(ends)):
                    self.add(through_star(arms, i, k), one, ends[k])
        return ends
