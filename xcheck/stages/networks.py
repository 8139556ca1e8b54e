"""Networks between stiff nodes, and which amplifiers hang together in loops."""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field

from xcheck.circuit.elements import Controlled, Coupling, Device, Element, Passive, Source
from xcheck.stages.types import Amplifier


@dataclass
class Network:
    """What hangs together through elements after the stiff nodes are removed: ordinary nodes, elements, and the
    stiff nodes (and virtual grounds) at its edge."""

    nodes: set[str] = field(default_factory=set)
    elements: list[Element] = field(default_factory=list)
    edge: set[str] = field(default_factory=set)


class Joined:
    """Disjoint sets of names (union by path halving)."""

    def __init__(self) -> None:
        self.parent: dict[str, str] = {}

    def find(self, name: str) -> str:
        """The representative of a name's set."""
        self.parent.setdefault(name, name)
        while self.parent[name] != name:
            self.parent[name] = self.parent[self.parent[name]]
            name = self.parent[name]
        return name

    def join(self, names: Sequence[str]) -> None:
        """Puts names into one set."""
        for name in names[1:]:
            one, other = self.find(names[0]), self.find(name)
            if one != other:
                self.parent[other] = one


def joins(element: Element, stiff: Mapping[str, str]) -> bool:
    """Whether an element ties its nodes together: passives, devices, and voltage sources that hold nothing."""
    if isinstance(element, (Passive, Device)):
        return True
    return isinstance(element, Source) and element.kind == "v" and not all(n in stiff for n in element.nodes)


def networks_of(elements: Iterable[Element], barriers: Mapping[str, str]) -> list[Network]:
    """The networks between barriers (stiff nodes and virtual grounds), in order of their first element."""
    joined = Joined()
    members = [e for e in elements if joins(e, barriers)]
    inductors: dict[str, Element] = {}
    for element in members:
        free = [n for n in element.nodes if n not in barriers]
        # an element between two barriers is a network of its own, known by its name
        joined.join([*free, "\0" + element.name])
        inductors[element.name] = element
    for element in elements:
        if isinstance(element, Coupling):
            joined.join(["\0" + name for name in element.inductors if name in inductors])
    found: dict[str, Network] = {}
    for element in members:
        network = found.setdefault(joined.find("\0" + element.name), Network())
        network.elements.append(element)
        for node in element.nodes:
            (network.edge if node in barriers else network.nodes).add(node)
    return list(found.values())


@dataclass(frozen=True)
class Loops:
    """groups: indices of amplifiers that stand in common loops, in deck order; feeds: for each network, the
    indices of amplifiers whose inputs sit in it or at its edge."""

    groups: list[tuple[int, ...]]
    feeds: list[tuple[int, ...]]


def loops_of(
    networks: Sequence[Network],
    amplifiers: Sequence[Amplifier],
    loose: Sequence[Controlled],
    barriers: Mapping[str, str],
    virtual: Mapping[str, int],
) -> Loops:
    """Strongly connected amplifiers by arrows output -> network -> input. virtual: virtual grounds and the index of
    the amplifier that makes each."""
    active: list[tuple[str, tuple[str, ...]]] = [(a.output, (a.non_inverting, a.inverting)) for a in amplifiers]
    active += [(n, e.sensing) for e in loose for n in e.nodes]
    home = {node: k for k, network in enumerate(networks) for node in network.nodes}
    at_edge: dict[str, list[int]] = {}
    for k, network in enumerate(networks):
        for node in network.edge:
            at_edge.setdefault(node, []).append(k)
    count = len(active)
    rows: list[int] = []
    columns: list[int] = []
    feeds: list[set[int]] = [set() for _ in networks]

    def arrow(source: int, target: int) -> None:
        rows.append(source)
        columns.append(target)

    outputs: dict[str, list[int]] = {}
    for index, (output, _) in enumerate(active):
        outputs.setdefault(output, []).append(index)
    for index, (output, inputs) in enumerate(active):
        driven = [home[output]] if output in home else []
        if barriers.get(output, "").startswith("output"):
            driven += at_edge.get(output, [])
        for k in driven:
            arrow(index, count + k)
        for node in inputs:
            sitting = [home[node]] if node in home else at_edge.get(node, []) if node in virtual else []
            for k in sitting:
                arrow(count + k, index)
                if index < len(amplifiers):
                    feeds[k].add(index)
            for other in outputs.get(node, ()):
                arrow(other, index)
    return Loops(_groups(rows, columns, count + len(networks), len(amplifiers)), [tuple(sorted(f)) for f in feeds])


def _groups(rows: Sequence[int], columns: Sequence[int], size: int, amplifiers: int) -> list[tuple[int, ...]]:
    import numpy as np
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    if not size:
        return []
    graph = coo_array((np.ones(len(rows)), (rows, columns)), shape=(size, size))
    _, labels = connected_components(graph, directed=True, connection="strong")
    groups: dict[int, list[int]] = {}
    for index in range(amplifiers):
        groups.setdefault(int(labels[index]), []).append(index)
    return [tuple(g) for g in groups.values()]
