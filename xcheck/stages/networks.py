"""Networks between stiff nodes, and which amplifiers hang together in loops."""

from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass, field

from xcheck.circuit.elements import Circuit, Controlled, Coupling, Device, Element, Passive, Source
from xcheck.stages.joined import Joined
from xcheck.stages.types import Amplifier


@dataclass
class Network:
    """What hangs together through elements after the stiff nodes are removed: ordinary nodes, elements, and the
    stiff nodes (and virtual grounds) at its edge."""

    nodes: set[str] = field(default_factory=set)
    elements: list[Element] = field(default_factory=list)
    edge: set[str] = field(default_factory=set)


def joins(element: Element, barriers: Collection[str]) -> bool:
    """Whether an element ties its nodes together: passives, devices, and voltages between nodes that nothing holds."""
    if isinstance(element, (Passive, Device)):
        return True
    if isinstance(element, (Source, Controlled)) and element.kind in "veh":
        return not all(n in barriers for n in element.nodes)
    return False


def networks_of(elements: Iterable[Element], barriers: Collection[str]) -> list[Network]:
    """The networks between barriers (stiff nodes and virtual grounds), in order of their first element. An element
    between two barriers is a network of its own. Couplings belong to the network of their inductors."""
    joined = Joined()
    members: list[Element] = []
    couplings: list[Coupling] = []
    for element in elements:
        if isinstance(element, Coupling):
            couplings.append(element)
        elif joins(element, barriers):
            members.append(element)
            joined.join(["\0" + element.name, *(n for n in element.nodes if n not in barriers)])
    known = {e.name for e in members}
    for coupling in couplings:
        if set(coupling.inductors) <= known:
            joined.join(["\0" + name for name in (*coupling.inductors, coupling.name)])
            members.append(coupling)
    found: dict[str, Network] = {}
    for element in members:
        network = found.setdefault(joined.find("\0" + element.name), Network())
        network.elements.append(element)
        for node in element.nodes:
            (network.edge if node in barriers else network.nodes).add(node)
    return list(found.values())


@dataclass(frozen=True)
class Active:
    """What senses nodes and drives others: an amplifier (index among the amplifiers), or an element that belongs to
    none (index None)."""

    name: str
    drives: tuple[str, ...]
    senses: tuple[str, ...]
    index: int | None = None


def actives_of(circuit: Circuit, amplifiers: Sequence[Amplifier], driver: Mapping[str, str]) -> list[Active]:
    """All that carries a signal one way. driver: which of them holds a stiff node."""
    holds: dict[str, list[str]] = {}
    for node, name in driver.items():
        holds.setdefault(name, []).append(node)
    found = [
        Active(a.name, (a.output, *holds.get(a.name, ())), (a.non_inverting, a.inverting), k)
        for k, a in enumerate(amplifiers)
    ]
    own = {name for a in amplifiers for name in a.elements}
    for element in circuit.elements:
        if element.name in own or not isinstance(element, (Controlled, Device)):
            continue
        senses = element.sensing
        if isinstance(element, Controlled):
            read = [circuit.by_name[t.source].nodes for t in element.terms if t.source in circuit.by_name]
            senses = (*senses, *(n for nodes in read for n in nodes))
        if senses:
            found.append(Active(element.name, (*element.nodes, *holds.get(element.name, ())), senses))
    return found


@dataclass(frozen=True)
class Loops:
    """groups: indices of amplifiers that stand in common loops, in deck order; others: for each group, the names of
    the elements beside amplifiers that carry its loops; feeds: for each network, the groups that sense it; drives: for
    each network, the groups that hold a node at its edge or drive it."""

    groups: list[tuple[int, ...]]
    others: list[tuple[str, ...]]
    feeds: list[frozenset[int]]
    drives: list[frozenset[int]]


def loops_of(
    networks: Sequence[Network], actives: Sequence[Active], held: Mapping[str, str], virtual: Collection[str]
) -> Loops:
    """Strongly connected actives by arrows output -> network -> input. held: the driver of each stiff node that is
    held by something; virtual: virtual grounds, which nothing passes through but the amplifiers that make them."""
    home = {node: k for k, network in enumerate(networks) for node in network.nodes}
    count = len(actives)
    spot: dict[str, int] = {}  # nodes that arrows pass by: held ones, virtual grounds, open inputs
    arrows: list[tuple[int, int]] = []

    def place(node: str) -> int:
        if node in home:
            return count + home[node]
        return spot.setdefault(node, count + len(networks) + len(spot))

    for k, active in enumerate(actives):
        own = [n for n in active.drives if n in home or held.get(n, active.name) == active.name]
        arrows += [(k, place(node)) for node in own]
        arrows += [(place(node), k) for node in active.senses]
    for k, network in enumerate(networks):
        for node in network.edge:
            if node in virtual:
                arrows.append((count + k, place(node)))
            elif node in held:
                arrows.append((place(node), count + k))
    labels = _strongly_connected(arrows, count + len(networks) + len(spot))
    return _grouped(labels, networks, actives, arrows, count)


def _grouped(
    labels: Sequence[int], networks: Sequence[Network], actives: Sequence[Active],
    arrows: Sequence[tuple[int, int]], count: int,
) -> Loops:  # fmt: skip
    members: dict[int, list[int]] = {}
    for k, active in enumerate(actives):
        if active.index is not None:
            members.setdefault(labels[k], []).append(active.index)
    group_of = {label: g for g, label in enumerate(members)}
    others: list[list[str]] = [[] for _ in members]
    for k, active in enumerate(actives):
        if active.index is None and labels[k] in group_of:
            others[group_of[labels[k]]].append(active.name)
    feeds: list[set[int]] = [set() for _ in networks]
    drives: list[set[int]] = [set() for _ in networks]
    through: dict[int, set[int]] = {}  # groups that sense, or hold, a node that arrows pass by
    into: dict[int, set[int]] = {}
    spots = count + len(networks)
    for a, b in arrows:
        if a < count and labels[a] in group_of and b >= spots:
            into.setdefault(b, set()).add(group_of[labels[a]])
        if b < count and labels[b] in group_of and a >= spots:
            through.setdefault(a, set()).add(group_of[labels[b]])
    for a, b in arrows:
        if b < count <= a < spots and labels[b] in group_of:
            feeds[a - count].add(group_of[labels[b]])
        elif count <= a < spots <= b:
            feeds[a - count] |= through.get(b, set())
        elif a < count <= b < spots and labels[a] in group_of:
            drives[b - count].add(group_of[labels[a]])
        elif count <= b < spots <= a:
            drives[b - count] |= into.get(a, set())
    return Loops(
        [tuple(g) for g in members.values()], [tuple(o) for o in others],
        [frozenset(f) for f in feeds], [frozenset(d) for d in drives],
    )  # fmt: skip


def _strongly_connected(arrows: Sequence[tuple[int, int]], size: int) -> list[int]:
    """The number of each node's strongly connected set (Tarjan, SIAM J. Computing 1, 1972)."""
    if not size:
        return []
    import numpy as np
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    ends = np.array(arrows, dtype=np.int64).reshape(-1, 2)
    graph = coo_array((np.ones(len(ends)), (ends[:, 0], ends[:, 1])), shape=(size, size))
    labels: list[int] = connected_components(graph, directed=True, connection="strong")[1].tolist()
    return labels
